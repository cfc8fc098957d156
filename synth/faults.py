"""What a stage does when one of its resistors is open or shorted: region, currents, readings, what is overstressed.

Nothing of the two-port holds here: a fault may leave a node without a path, or wire the base to a rail. So the node
equations of the circuit are solved, from the two nodes that each role hangs between: a short makes one node of two, an open
resistor is left out. The base-emitter junction follows the emitter current, which carries it in every region,

    VBE = VBE_ref + VT·ln(IE·h/((h+1)·IC0)),

and is found by bisection, since the network lets IE fall with VBE on a straight line and the law lets it rise.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from synth.box import Box
from synth.catalogue import Derating, ResistorStyle, derating
from synth.measures import ground_voltage
from synth.networks.form import Array, Network
from synth.stress import TransistorRatings, allowed_dissipation, allowed_ic, allowed_power
from synth.transistor import CUT_OFF_CURRENT, Transistor, thermal_voltage

Kind = Literal["open", "short"]
KINDS: tuple[Kind, ...] = ("open", "short")
REGIONS = ("active", "saturated", "cut off", "destroyed")

STRAY = 1e-15
"""Conductance from each node to 0 V, so that one without any other path has a voltage [S]."""
NOTHING = 1e-11
"""Current below which the stray conductance is all there is [A]."""
DEAD = 1e-7
"""Voltage below which the stray conductance is all there is [V]."""
BEYOND = 2.0
"""VBE that no junction stands: a base wired across more is destroyed [V]."""


@dataclass(frozen=True, kw_only=True)
class Fault:
    """One resistor open or shorted, all else nominal.

    `region` is one of `REGIONS`; `ic` and `vce` [A, V] are those of an NPN, IC negative where the base feeds the collector;
    None where the transistor is destroyed, `vce` also where a node without any path floats. `nodes` are what a meter reads
    against 0 V [V], without those that float; `over` names what exceeds its rating at the highest rails and hot ambient.
    """

    role: str
    kind: Kind
    region: str
    ic: float | None
    vce: float | None
    nodes: Mapping[str, float]
    floats: tuple[str, ...]
    over: tuple[str, ...]


@dataclass(frozen=True)
class _Solved:
    """Node voltages [V], transistor currents [A] and region of one circuit."""

    nodes: dict[str, float]
    ib: float
    ic: float
    region: str


Row = tuple[Mapping[str, float], float]
"""An equation: factors of node voltages, and what their sum is [V]."""
State = tuple[dict[str, float], float, float]
"""Node voltages [V], IB and IC [A]."""


class _Circuit:
    """Resistors and rails of one faulted stage."""

    def __init__(
        self,
        network: Network,
        rails: Mapping[str, float],
        r: Mapping[str, float],
        line: tuple[float, float] | None,
        fault: tuple[str, Kind],
    ) -> None:
        optional = {rail: "vcc" for rail in network.optional_rails if rail not in rails}
        merged = {**optional, **network.tied, **({} if line else {"m": "0"})}
        fixed = {"0": 0.0, **{name: -v if name == "vee" else v for name, v in rails.items()}}
        self.branches: list[tuple[str, str, float, str]] = []
        shorts = [role for role in network.roles if role.name not in r and role.absent == "short"]
        if fault[1] == "short":
            shorts.append(network.role(fault[0]))
        self._merged = merged
        for role in shorts:
            one, two = (self.name(node) for node in role.nodes)
            # Of the two a rail stays, since its voltage is known.
            inner, outer = (two, one) if one in fixed else (one, two)
            if inner not in fixed:
                merged[inner] = outer
        for role in network.roles:
            if role.name in r and role.name != fault[0]:
                one, two = (self.name(node) for node in role.nodes)
                self.branches.append((one, two, r[role.name], role.name))
        self.fixed, self.line = fixed, line
        names = ["b", "c", "e", *(["m"] if line else [])]
        self.free = [n for n in dict.fromkeys(self.name(node) for node in names) if n not in fixed]

    def name(self, node: str) -> str:
        """Node that a name stands for."""
        while node in self._merged and self._merged[node] != node:
            node = self._merged[node]
        return node

    def floating(self) -> tuple[str, ...]:
        """Transistor nodes that no resistor holds."""
        held = {end for one, two, _, _ in self.branches for end in (one, two)} | set(self.fixed)
        return tuple(n for n in ("b", "c", "e") if self.name(n) not in held)

    def solve(
        self, extra: int, rows: Sequence[Row], into: Mapping[int, Mapping[str, float]], source: Mapping[str, float]
    ) -> tuple[dict[str, float], Array]:
        """Voltages of every node, and further unknowns, each with a row and with what it injects into the nodes."""
        n = len(self.free)
        a, z = np.zeros((n + extra, n + extra)), np.zeros(n + extra)
        index = {node: k for k, node in enumerate(self.free)}
        for k in range(n):
            a[k, k] += STRAY
        for one, two, ohm, _ in self.branches:
            g = 1.0 / ohm
            for p, q in ((one, two), (two, one)):
                if p in index:
                    a[index[p], index[p]] += g
                    if q in index:
                        a[index[p], index[q]] -= g
                    else:
                        z[index[p]] += g * self.fixed[q]
        if self.line and "m" in index:
            volts, ohms = self.line
            a[index["m"], index["m"]] += 1.0 / max(ohms, 1e-9)
            z[index["m"]] += volts / max(ohms, 1e-9)
        for unknown, nodes in into.items():
            for node, factor in nodes.items():
                if self.name(node) in index:
                    a[index[self.name(node)], n + unknown] -= factor
        for node, current in source.items():
            if self.name(node) in index:
                z[index[self.name(node)]] += current
        for j, (held, value) in enumerate(rows):
            z[n + j] = value
            for node, factor in held.items():
                place = self.name(node)
                if place in index:
                    a[n + j, index[place]] += factor
                else:
                    z[n + j] -= factor * self.fixed[place]
        x: Array = np.asarray(np.linalg.solve(a, z), dtype=float)
        volts_of = {**self.fixed, **{node: float(x[k]) for node, k in index.items()}}
        return {node: volts_of[self.name(node)] for node in ("b", "c", "e", *(["m"] if self.line else []))}, x[n:]


def _law(transistor: Transistor, t: float, ie: float, h: float) -> float:
    if transistor.vbe_model == "fixed":
        return transistor.vbe.nominal
    return float(transistor.vbe_at(max(ie, 1e-300) * h / (h + 1.0), t))


def _solved(circuit: _Circuit, transistor: Transistor, t: float, h: float, leakage: float) -> _Solved | None:
    """The circuit with its transistor; None where nothing limits the base current."""
    ends = {node: circuit.fixed.get(circuit.name(node)) for node in ("b", "e")}
    if ends["b"] is not None and ends["e"] is not None:
        return _forced(circuit, transistor, t, h, leakage, ends["b"] - ends["e"])
    iceo = (h + 1.0) * leakage

    def active(vbe: float) -> State:
        # One unknown, IB: IC = h·IB + (h+1)·ICBO flows into the collector and, with IB, out of the emitter.
        nodes, x = circuit.solve(
            1, [({"b": 1.0, "e": -1.0}, vbe)], {0: {"b": -1.0, "c": -h, "e": h + 1.0}}, {"c": -iceo, "e": iceo}
        )
        return nodes, float(x[0]), h * float(x[0]) + iceo

    def saturated(vbe: float) -> State:
        rows = [({"b": 1.0, "e": -1.0}, vbe), ({"c": 1.0, "e": -1.0}, transistor.vce_sat)]
        nodes, x = circuit.solve(2, rows, {0: {"b": -1.0, "e": 1.0}, 1: {"c": -1.0, "e": 1.0}}, {})
        return nodes, float(x[0]), float(x[1])

    def settled(state: Callable[[float], State]) -> State:
        low, high = -max(abs(v) for v in circuit.fixed.values()) - 1.0, BEYOND
        vbe = transistor.vbe.nominal
        if transistor.vbe_model == "junction":
            for _ in range(100):
                vbe = 0.5 * (low + high)
                _, ib, ic = state(vbe)
                # VBE too low for the current that the network then drives: raise it.
                low, high = (vbe, high) if ib + ic > 0.0 and _law(transistor, t, ib + ic, h) > vbe else (low, vbe)
        return state(vbe)

    nodes, ib, ic = settled(active)
    if ic < CUT_OFF_CURRENT + iceo or (transistor.vbe_model == "fixed" and ib + ic <= 0.0):
        blocked, _ = circuit.solve(0, [], {}, {})
        return _Solved(blocked, 0.0, iceo if ic > 0.0 else 0.0, "cut off")
    if nodes["c"] - nodes["e"] >= transistor.vce_sat:
        return _Solved(nodes, ib, ic, "active")
    if all(circuit.name(node) in circuit.fixed for node in ("b", "c")):
        # Both junctions would conduct, and the one of the collector is wired across two rails.
        return None
    held, ib_sat, ic_sat = settled(saturated)
    if ic_sat > ic:
        return _Solved(nodes, ib, ic, "active")
    return _Solved(held, ib_sat, ic_sat, "saturated")


def _forced(circuit: _Circuit, transistor: Transistor, t: float, h: float, leakage: float, vbe: float) -> _Solved | None:
    """A base-emitter junction wired across a known voltage."""
    if vbe > transistor.vbe.high + 10.0 * float(thermal_voltage(t)):
        return None
    wanted = 0.0
    if vbe > 0.0 and transistor.vbe_model == "junction":
        wanted = float(transistor.vbe_ic * math.exp((vbe - transistor.vbe_at_reference(t)) / thermal_voltage(t)))
    blocked, _ = circuit.solve(0, [], {}, {"c": -wanted})
    if wanted < CUT_OFF_CURRENT + (h + 1.0) * leakage:
        return _Solved(blocked, 0.0, wanted, "cut off")
    if blocked["c"] - blocked["e"] >= transistor.vce_sat:
        return _Solved(blocked, wanted / h, wanted, "active")
    held, x = circuit.solve(1, [({"c": 1.0, "e": -1.0}, transistor.vce_sat)], {0: {"c": -1.0}}, {})
    return _Solved(held, wanted / h, float(x[0]), "saturated")


def single_faults(
    box: Box, ratings: TransistorRatings, styles: Mapping[str, ResistorStyle], ground: str = "negative"
) -> tuple[Fault, ...]:
    """Every resistor of a candidate open, and every one shorted.

    Parameters
    ----------
    box : Box
        Of one candidate.
    ratings : TransistorRatings
        What is known of the transistor.
    styles : mapping of str to ResistorStyle
        Style of each role that has one.
    ground : {"negative", "positive", "middle", "common"}
        What is 0 V, see `synth.measures.ground_voltage`.

    Returns
    -------
    tuple of Fault
        In the order of the roles, open before short. State at nominal values [A, V]; overstress at the highest rails against
        the ratings as printed, at the hot ambient.
    """
    r = {role: float(part.nominal[0]) for role, part in box.parts.items()}
    mirror = -1.0 if box.transistor.polarity == "pnp" else 1.0
    zero = float(ground_voltage({rail: s.nominal for rail, s in box.rails.items()}, ground, box.transistor.polarity))
    found = []
    for role in box.parts:
        for kind in KINDS:
            circuit = _circuit(box, r, (role, kind), high=False)
            solved = _at_nominal(box, circuit)
            over = _overstress(box, r, (role, kind), ratings, styles)
            if solved is None:
                nothing: dict[str, float] = {}
                found.append(
                    Fault(role=role, kind=kind, region=REGIONS[3], ic=None, vce=None, nodes=nothing, floats=(), over=over)
                )
                continue
            # A transistor that conducts holds its own nodes.
            floats = circuit.floating() if solved.region == "cut off" else ()
            vce = None if {"c", "e"} & set(floats) else solved.nodes["c"] - solved.nodes["e"]
            against = {n: mirror * (v - zero) for n, v in solved.nodes.items() if n in ("b", "c", "e") and n not in floats}
            nodes = {n: v if abs(v) > DEAD else 0.0 for n, v in against.items()}
            ic = solved.ic if abs(solved.ic) > NOTHING else 0.0
            found.append(
                Fault(role=role, kind=kind, region=solved.region, ic=ic, vce=vce, nodes=nodes, floats=floats, over=over)
            )
    return tuple(found)


def _circuit(box: Box, r: Mapping[str, float], fault: tuple[str, Kind], *, high: bool) -> _Circuit:
    rails = {name: s.high if high else s.nominal for name, s in box.rails.items()}
    line = None
    if box.reference is not None:
        element = box.reference.line(0.0, box.reference.slope.nominal, box.temperature.nominal)
        line = (float(element["vref"]), float(element["r_ref"]))
    return _Circuit(box.network, rails, r, line, fault)


def _at_nominal(box: Box, circuit: _Circuit) -> _Solved | None:
    device, t = box.transistor, box.temperature.nominal
    h = device.hfe.nominal * float(device.gain_factor(t))
    return _solved(circuit, device, t, h, device.icbo.nominal * float(device.leakage_factor(t)))


def _overstress(
    box: Box, r: Mapping[str, float], fault: tuple[str, Kind], ratings: TransistorRatings, styles: Mapping[str, ResistorStyle]
) -> tuple[str, ...]:
    """What exceeds its rating as printed, at the highest rails and the hot ambient."""
    circuit = _circuit(box, r, fault, high=True)
    solved = _at_nominal(box, circuit)
    if solved is None:
        return ("transistor: nothing limits its base current",)
    hot, printed = box.temperature.high, derating("none")
    over = []
    volts = {**circuit.fixed, **solved.nodes}
    for one, two, ohm, role in circuit.branches:
        drop = abs(volts[one] - volts[two])
        style = styles.get(role)
        if style is not None:
            over += [f"{role.upper()} {what}" for what in _of_resistor(style, printed, drop, ohm, hot)]
    power = (solved.nodes["c"] - solved.nodes["e"]) * solved.ic + (solved.nodes["b"] - solved.nodes["e"]) * solved.ib
    limits = {
        "power": (power, allowed_dissipation(ratings, hot, printed)),
        "current": (solved.ic, allowed_ic(ratings, printed)),
    }
    over += [f"transistor {what}" for what, (value, most) in limits.items() if most is not None and value > float(most)]
    return tuple(over)


def _of_resistor(style: ResistorStyle, policy: Derating, drop: float, ohm: float, hot: float) -> list[str]:
    power, volts = float(allowed_power(style, hot, policy)), style.max_working_voltage_v
    return [*(["power"] if drop**2 / ohm > power else []), *(["voltage"] if drop > volts else [])]
