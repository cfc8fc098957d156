"""A general nodal solution of a bias stage: the second method that the two-port tables are tested against.

Modified nodal analysis, common practice: one row for Kirchhoff's current law at each node, one for each ideal voltage
source. Nothing is known of a network but its roles: the two nodes that each resistor hangs between. Rails are ideal
sources, VBE is one too, and the collector current is a source that the base current controls.

All arrays have one leading axis of n cases.
"""

import itertools
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from synth.networks import Network
from synth.transistor import Transistor

Array = NDArray[np.float64]

REFERENCE = ("vref", "r_ref")
"""What a reference element is in a circuit: a source with a resistance in series, from node m to 0 V."""

BELOW_GROUND = frozenset({"vee"})
"""Rails given as magnitudes that lie below 0 V (common practice: VEE is the negative emitter supply)."""


def given_rails(network: Network, rails: Mapping[str, object]) -> dict[str, str]:
    """Rail that each rail name stands for: itself, or ``vcc`` for an optional one that is not given."""
    names = (*network.rails, *network.optional_rails)
    return {name: name if name in rails else "vcc" for name in names}


def variants(network: Network) -> Iterator[tuple[tuple[str, ...], tuple[str, ...]]]:
    """Every choice of rails, reference element and roles: each optional one given and not given."""
    references = {"no": ((),), "optional": ((), REFERENCE), "needed": (REFERENCE,)}[network.reference]
    for rails, reference in itertools.product(_subsets(network.optional_rails), references):
        optional = tuple(role.name for role in network.roles if network.optional(role, bool(reference)))
        needed = set(network.role_names) - set(optional)
        for roles in _subsets(optional):
            yield (*network.rails, *rails, *reference), tuple(n for n in network.role_names if n in needed or n in roles)


def _subsets(names: tuple[str, ...]) -> Iterator[tuple[str, ...]]:
    return itertools.chain.from_iterable(itertools.combinations(names, k) for k in range(len(names) + 1))


@dataclass(frozen=True)
class Solution:
    """Node voltages [V], rail currents and transistor currents [A] of each case."""

    node: dict[str, Array]
    rail: dict[str, Array]
    ib: Array
    ic: Array

    @property
    def vbe(self) -> Array:
        return self.node["b"] - self.node["e"]

    @property
    def vce(self) -> Array:
        return self.node["c"] - self.node["e"]


class Circuit:
    """The resistors and rails of n cases, with a transistor to be described in each call."""

    def __init__(self, network: Network, rails: Mapping[str, Array], r: Mapping[str, Array]) -> None:
        self.network = network
        self.rails = {name: np.atleast_1d(value) for name, value in rails.items() if name not in REFERENCE}
        self.reference = tuple(np.atleast_1d(rails[name]) for name in REFERENCE if name in rails)
        self.r = {name: np.atleast_1d(value) for name, value in r.items()}
        self.n = max(v.size for v in (*self.rails.values(), *self.reference, *self.r.values()))
        merged = {**given_rails(network, rails), **network.tied}
        if not self.reference:
            merged["m"] = "0"
        for role in network.roles:
            if role.name not in r and role.absent == "short":
                # Its transistor node becomes its other node.
                one, two = role.nodes
                inner, outer = (one, two) if one in ("b", "c", "e") else (two, one)
                merged[inner] = outer
        self.merged = merged
        names = {self.name(node) for role in network.roles for node in role.nodes} | set(self.rails)
        names |= {self.name(node) for node in ("b", "c", "e")}
        self.nodes = sorted(names - {"0"})
        self.index = {node: k for k, node in enumerate(self.nodes)}
        self.kind = np.result_type(*self.rails.values(), *self.reference, *self.r.values(), float)

    def name(self, node: str) -> str:
        """Node that a name stands for once rails and absent resistors are merged."""
        while node in self.merged and self.merged[node] != node:
            node = self.merged[node]
        return node

    def _at(self, node: str) -> int | None:
        return self.index.get(self.name(node))

    def _matrix(self, extra: int) -> tuple[Array, Array]:
        """Conductances and rail sources, with room for `extra` more unknowns; rail currents follow the nodes."""
        size = len(self.nodes) + len(self.rails) + extra
        a = np.zeros((self.n, size, size), dtype=self.kind)
        z = np.zeros((self.n, size), dtype=self.kind)
        for role in self.network.roles:
            if role.name not in self.r:
                continue
            g = 1.0 / self.r[role.name]
            i, j = (self._at(node) for node in role.nodes)
            for p, q in ((i, j), (j, i)):
                if p is not None:
                    a[:, p, p] += g
                    if q is not None:
                        a[:, p, q] -= g
        if self.reference:
            k = self._at("m")
            volts, ohms = self.reference
            a[:, k, k] += 1.0 / ohms
            z[:, k] += volts / ohms
        for k, (rail, value) in enumerate(self.rails.items(), start=len(self.nodes)):
            sign = -1.0 if rail in BELOW_GROUND else 1.0
            i = self.index[rail]
            # The unknown is the magnitude drawn: it flows into the circuit at a positive rail, out of it below 0 V.
            a[:, i, k] -= sign
            a[:, k, i] = 1.0
            z[:, k] = sign * value
        return a, z

    def _inject(self, a: Array, column: int, into: str, out: str, factor: Array | float = 1.0) -> None:
        """Let the unknown of a column, times a factor, flow into the transistor at one node and out at another."""
        for node, sign in ((into, 1.0), (out, -1.0)):
            k = self._at(node)
            if k is not None:
                a[:, k, column] += sign * factor

    def _source(self, z: Array, current: Array | float, into: str, out: str) -> None:
        """The same with a known current."""
        for node, sign in ((into, -1.0), (out, 1.0)):
            k = self._at(node)
            if k is not None:
                z[:, k] += sign * current

    def _drop(self, a: Array, z: Array, row: int, plus: str, minus: str, value: Array | float) -> None:
        """Hold the voltage between two nodes."""
        for node, sign in ((plus, 1.0), (minus, -1.0)):
            k = self._at(node)
            if k is not None:
                a[:, row, k] += sign
        z[:, row] = value

    def _voltages(self, x: Array) -> dict[str, Array]:
        zero = np.zeros(self.n, dtype=self.kind)
        outer = {"0", *given_rails(self.network, self.rails), "b", "c", "e", *(["m"] if self.reference else [])}
        return {node: zero if self._at(node) is None else x[:, self.index[self.name(node)]] for node in outer}

    def open(self, ib: Array | float, ic: Array | float) -> tuple[Array, Array]:
        """VBE and VCE with given currents forced into base and collector and out of the emitter."""
        a, z = self._matrix(0)
        self._source(z, ib, "b", "e")
        self._source(z, ic, "c", "e")
        v = self._voltages(np.linalg.solve(a, z[..., None])[..., 0])
        return v["b"] - v["e"], v["c"] - v["e"]

    def active(self, vbe: Array | float, hfe: Array | float, icbo: Array | float) -> Solution:
        """Solution with VBE held and IC = hFE*IB + (hFE + 1)*ICBO."""
        a, z = self._matrix(1)
        ib = a.shape[1] - 1
        self._inject(a, ib, "b", "e")
        self._inject(a, ib, "c", "e", hfe)
        self._source(z, (np.asarray(hfe) + 1.0) * icbo, "c", "e")
        self._drop(a, z, ib, "b", "e", vbe)
        x = np.linalg.solve(a, z[..., None])[..., 0]
        return self._solution(x, x[:, ib], hfe * x[:, ib] + (np.asarray(hfe) + 1.0) * icbo)

    def saturated(self, vbe: Array | float, vce: Array | float) -> Solution:
        """Solution with VBE and VCE held."""
        a, z = self._matrix(2)
        ib, ic = a.shape[1] - 2, a.shape[1] - 1
        self._inject(a, ib, "b", "e")
        self._inject(a, ic, "c", "e")
        self._drop(a, z, ib, "b", "e", vbe)
        self._drop(a, z, ic, "c", "e", vce)
        x = np.linalg.solve(a, z[..., None])[..., 0]
        return self._solution(x, x[:, ib], x[:, ic])

    def _solution(self, x: Array, ib: Array, ic: Array) -> Solution:
        start = len(self.nodes)
        rail = {name: x[:, start + k] for k, name in enumerate(self.rails)}
        return Solution(self._voltages(x), rail, ib, ic)


def _law(transistor: Transistor, vbe: Array, delta: Array, temperature: Array) -> Array:
    """Collector current that the junction law gives at a VBE."""
    vt = temperature * (1.380649e-23 / 1.602176634e-19)
    with np.errstate(over="ignore"):
        return np.asarray(transistor.vbe_ic * np.exp((vbe - delta - transistor.vbe_at_reference(temperature)) / vt))


def _bisect(difference: Callable[[Array], Array], low: Array, high: Array) -> Array:
    for _ in range(80):
        middle = 0.5 * (low + high)
        above = difference(middle) > 0.0
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    return 0.5 * (low + high)


def solve(
    circuit: Circuit, transistor: Transistor, hfe: Array, icbo: Array, delta: Array, temperature: Array
) -> tuple[Solution, NDArray[np.bool_]]:
    """Solution of each case, and whether it is saturated.

    With the junction law VBE is bisected until the linear circuit and the law agree on IC. In the active region IC is
    then taken from the law, which stays exact where the circuit gives it as a small difference of currents.
    """
    fixed = transistor.vbe_model == "fixed"
    reference = transistor.vbe_at_reference(temperature) + delta
    reference = np.broadcast_to(reference, (circuit.n,))
    vt = np.broadcast_to(temperature * (1.380649e-23 / 1.602176634e-19), (circuit.n,))
    high = reference + vt * np.log(1e12 / transistor.vbe_ic)

    def law(vbe: Array) -> Array:
        return _law(transistor, vbe, delta, temperature)

    vbe = reference
    if not fixed:
        vbe = _bisect(lambda v: circuit.active(v, hfe, icbo).ic - law(v), reference - 4.0, high)
    active = circuit.active(vbe, hfe, icbo)
    if not fixed:
        ic = law(vbe)
        active = Solution(active.node, active.rail, (ic - (hfe + 1.0) * icbo) / hfe, ic)
    saturated = active.vce < transistor.vce_sat
    vbe_sat = reference
    if not fixed:
        # Raising VBE lowers IB, the emitter falls and IC grows on a straight line; of its two crossings with the
        # exponential law the upper one lies above the point where both have the same slope.
        at = [circuit.saturated(reference + step, transistor.vce_sat).ic for step in (0.0, 1.0)]
        rise = np.maximum(at[1] - at[0], 1e-300)
        tangent = reference + vt * np.log(rise * vt / transistor.vbe_ic)
        low = np.maximum(tangent, reference - 4.0)
        vbe_sat = _bisect(lambda v: circuit.saturated(v, transistor.vce_sat).ic - law(v), low, high)
    held = circuit.saturated(vbe_sat, transistor.vce_sat)
    # No transistor carries more than its gain and leakage allow: where VCE(sat) would need that, it is not saturated.
    saturated = saturated & (held.ic <= hfe * held.ib + (hfe + 1.0) * icbo)

    def pick(one: Array, two: Array) -> Array:
        return np.where(saturated, one, two)

    return Solution(
        {node: pick(held.node[node], active.node[node]) for node in active.node},
        {rail: pick(held.rail[rail], active.rail[rail]) for rail in active.rail},
        pick(held.ib, active.ib),
        pick(held.ic, active.ic),
    ), saturated
