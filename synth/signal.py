"""Mid-band small-signal figures of a stage at its Q-point, and the signs of their slopes.

The transistor is a hybrid-pi without output resistance: gm = IC/VT, r_pi = h·VT/IC. At mid-band every rail is signal ground
and every capacitor a short, so that at most base, collector and emitter are left as nodes. With the base driven,

    D = (gc + gbc)·(ge + gbe + gce + gm + gpi) + gce·(ge + gbe + gpi),
    vc·D = gbc·(ge + gbe + gce + gm + gpi) + gce·(gbe + gpi) − gm·ge,
    ve·D = (gc + gbc)·(gbe + gm + gpi) + gce·(gbc + gbe + gpi)

for vb = 1, where gc and ge lead to ground and gbc, gbe, gce between the nodes. Each path to ground is written as a quotient
g/s, the equations multiplied by s, so that s = 0 is a short and g = 0 an open end without a special case; the differences
1 − vc, 1 − ve and ve − vc are multiplied out, so that no digits cancel. The determinant of all three nodes, D·(gb + yin),
gives the output resistance and what the bypass capacitor sees.

The same formulas, fed with polynomials instead of numbers, prove the signs: see `signs`.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace
from functools import cache, cached_property
from typing import Generic, Literal, TypeVar, get_args

import numpy as np
from numpy.typing import NDArray

from synth.networks.form import Array, Network, QPoint, Resistances, Sign, common_sign
from synth.quantities import RestpointError
from synth.transistor import thermal_voltage

Bypass = Literal["full", "none", "part"]
BYPASSES: tuple[Bypass, ...] = get_args(Bypass)
FIGURES = (
    "input_resistance",
    "output_resistance",
    "gain",
    "overall_gain",
    "swing",
    "swing_to_cutoff",
    "swing_to_saturation",
)
"""Figures of `SmallSignal` that `signs` knows: [ohm], [ohm], [-], [-], [V], [V], [V]."""
CORNER = "lower_corner"
"""One more figure that `signs` knows, of a stage with a bypass capacitor [Hz]."""

TERMINALS = ("b", "c", "e")
GROUND = "0"
REFERENCE = "m"


class SignalError(RestpointError):
    """A signal condition that is out of its meaning, or a circuit that has no signal."""


@dataclass(frozen=True, kw_only=True)
class Signal:
    """What the signal meets outside of the bias network.

    Parameters
    ----------
    bypass : {"full", "none", "part"}
        How much of the emitter resistor a capacitor bypasses. Where the emitter is the output nothing is bypassed.
    unbypassed : float, optional
        With "part": the upper part of re, towards the emitter, that carries the signal [ohm]. Where the whole re is not
        larger, nothing is left to bypass and all of it carries the signal.
    split : bool
        With "part": re is two resistors of its own, whose upper one carries the signal, and both are to be chosen.
    load : float, optional
        Load resistance at the output [ohm]; None for an open output.
    source : float
        Resistance of the signal source [ohm].
    capacitor : float, optional
        The capacitor that bypasses re [F]; None where it is not chosen yet.

    Raises
    ------
    SignalError
        If a resistance is out of its meaning, or `unbypassed` and `bypass` contradict each other.
    """

    bypass: Bypass = "full"
    unbypassed: float | None = None
    split: bool = False
    load: float | None = None
    source: float = 0.0
    capacitor: float | None = None

    def __post_init__(self) -> None:
        _known("signal.bypass", self.bypass, BYPASSES)
        if self.bypass == "part" and self.unbypassed is None and not self.split:
            raise SignalError("signal.unbypassed: not given, with bypass = 'part' a resistance above 0 is needed")
        if self.bypass != "part" and self.unbypassed is not None:
            raise SignalError(
                f"signal.unbypassed: read {self.unbypassed:g} ohm beside bypass = {self.bypass!r}, it is accepted with 'part'"
            )
        for name, value in (("unbypassed", self.unbypassed), ("load", self.load)):
            if value is not None and not value > 0.0:
                raise SignalError(f"signal.{name}: read {value:g} ohm, accepted is a resistance above 0")
        if self.capacitor is not None and not self.capacitor > 0.0:
            raise SignalError(f"signal.capacitor: read {self.capacitor:g} F, accepted is a capacitance above 0")
        if not 0.0 <= self.source < np.inf:
            raise SignalError(f"signal.source: read {self.source:g} ohm, accepted is a resistance of 0 or more")


def _known(field: str, read: str, accepted: Collection[str]) -> None:
    if read not in accepted:
        raise SignalError(f"{field}: read {read!r}, accepted is one of {', '.join(accepted)}")


# --- The circuit ----------------------------------------------------------------------------------------------------


class _Polynomial:
    """A polynomial with whole coefficients in variables that are above zero."""

    def __init__(self, terms: Mapping[tuple[str, ...], int]) -> None:
        self.terms = {factors: n for factors, n in terms.items() if n}

    @classmethod
    def variable(cls, name: str) -> _Polynomial:
        return cls({(name,): 1})

    @classmethod
    def constant(cls, value: int) -> _Polynomial:
        return cls({(): value})

    def __add__(self, other: _Polynomial) -> _Polynomial:
        terms = dict(self.terms)
        for factors, n in other.terms.items():
            terms[factors] = terms.get(factors, 0) + n
        return _Polynomial(terms)

    def __neg__(self) -> _Polynomial:
        return _Polynomial({factors: -n for factors, n in self.terms.items()})

    def __sub__(self, other: _Polynomial) -> _Polynomial:
        return self + -other

    def __mul__(self, other: _Polynomial) -> _Polynomial:
        terms: dict[tuple[str, ...], int] = {}
        for one, n in self.terms.items():
            for two, m in other.terms.items():
                factors = tuple(sorted(one + two))
                terms[factors] = terms.get(factors, 0) + n * m
        return _Polynomial(terms)

    def growth(self, names: Collection[str]) -> _Polynomial:
        """Derivative against the logarithm of a common factor of some variables."""
        return _Polynomial({f: n * sum(name in names for name in f) for f, n in self.terms.items()})

    @property
    def sign(self) -> Sign:
        """Sign for all positive values of the variables, where the coefficients alone decide it."""
        signs = {1 if n > 0 else -1 for n in self.terms.values()}
        return common_sign(signs)


Number = TypeVar("Number", NDArray[np.float64], _Polynomial)
Quotient = tuple[Number, Number]
"""Numerator and denominator; of a path to ground: conductance g/s, s = 0 for a short, g = 0 for an open end."""


@dataclass(frozen=True, eq=False)
class _Circuit(Generic[Number]):
    """Conductances around the transistor: from each terminal to ground, and between the terminals."""

    b: Quotient[Number]
    c: Quotient[Number]
    e: Quotient[Number]
    bc: Number
    be: Number
    ce: Number
    gm: Number
    gpi: Number

    def determinant(self) -> Number:
        """D·sc·se of the collector and emitter equations."""
        (gc, sc), (ge, se) = self.c, self.e
        return (gc + sc * self.bc) * self._emitter() + sc * self.ce * (ge + se * (self.be + self.gpi))

    def _emitter(self) -> Number:
        ge, se = self.e
        return ge + se * (self.be + self.ce + self.gm + self.gpi)

    def fall(self) -> Number:
        """D times the fall of the collector as the base rises by one."""
        sc, (ge, se) = self.c[1], self.e
        return sc * (self.gm * ge - self.bc * self._emitter() - se * self.ce * (self.be + self.gpi))

    def follow(self) -> Number:
        """D times the rise of the emitter as the base rises by one."""
        (gc, sc), se = self.c, self.e[1]
        return se * ((gc + sc * self.bc) * (self.be + self.gm + self.gpi) + sc * self.ce * (self.bc + self.be + self.gpi))

    def across_junction(self) -> Number:
        """D times what is left between base and emitter as the base rises by one."""
        (gc, sc), (ge, se) = self.c, self.e
        return (gc + sc * self.bc) * ge + (se * gc + sc * ge) * self.ce

    def across_collector(self) -> Number:
        """D times the fall of VCE as the base rises by one: the sum of `fall` and `follow`."""
        (gc, sc), (ge, se) = self.c, self.e
        return gc * se * (self.be + self.gm + self.gpi) + sc * ge * (self.gm - self.bc)

    def whole(self) -> Number:
        """Determinant of all three nodes: D·(gb + yin)·sb."""
        gb, sb = self.b
        (gc, sc), ge = self.c, self.e[0]
        base_to_collector = gc * self._emitter() + sc * ge * (self.ce + self.gm)
        entering = self.bc * base_to_collector + (self.be + self.gpi) * self.across_junction()
        return gb * self.determinant() + sb * entering


def _input_resistance(circuit: _Circuit[Number]) -> Quotient[Number]:
    return circuit.b[1] * circuit.determinant(), circuit.whole()


def _output_resistance(circuit: _Circuit[Number], output: str, one: Number, zero: Number) -> Quotient[Number]:
    if output == "c":
        return circuit.c[1] * replace(circuit, c=(one, zero)).whole(), circuit.whole()
    return circuit.e[1] * replace(circuit, e=(one, zero)).whole(), circuit.whole()


def _gain(circuit: _Circuit[Number], output: str) -> Quotient[Number]:
    return circuit.fall() if output == "c" else circuit.follow(), circuit.determinant()


def _overall_gain(circuit: _Circuit[Number], output: str, source: Number) -> Quotient[Number]:
    # Gain times Rin/(Rin + Rs), with the determinant of the input resistance cancelled.
    numerator, determinant = _gain(circuit, output)
    return circuit.b[1] * numerator, circuit.b[1] * determinant + source * circuit.whole()


def _cutoff_excursion(circuit: _Circuit[Number], output: str) -> Quotient[Number]:
    """Output against the voltage across the junction; times VT it is IC·Rac, since gm = IC/VT."""
    return _gain(circuit, output)[0], circuit.across_junction()


def _output_share(circuit: _Circuit[Number], output: str) -> Quotient[Number]:
    """Output against the excursion of VCE."""
    return _gain(circuit, output)[0], circuit.across_collector()


@dataclass(frozen=True)
class _Wiring:
    """Which nodes are one at signal frequencies.

    `home` leads from each node to what it is part of: ``0``, a terminal, or ``m``. `ends` are the homes of both ends of
    every role that carries signal.
    """

    home: Mapping[str, str]
    ends: Mapping[str, tuple[str, str]]
    output: str
    bypassed: bool


def _wire(network: Network, roles: Collection[str], bypass: Bypass, has_reference: bool) -> _Wiring:
    order = (GROUND, *TERMINALS, REFERENCE)
    home = {node: node for node in order}
    home |= dict.fromkeys((*network.rails, *network.optional_rails), GROUND)

    def join(one: str, two: str) -> None:
        kept, gone = sorted((home[one], home[two]), key=order.index)
        if kept != gone and kept in TERMINALS and gone in TERMINALS:
            raise SignalError(f"{network.name}: {kept} and {gone} of the transistor are one node, no signal passes")
        home.update({node: kept for node, now in home.items() if now == gone})

    for node, rail in network.tied.items():
        join(node, rail)
    if not has_reference:
        join(REFERENCE, GROUND)
    for role in network.roles:
        if role.name not in roles and role.absent == "short":
            join(*role.nodes)
    output = "e" if home["c"] == GROUND else "c"
    ends = {role.name: (home[role.nodes[0]], home[role.nodes[1]]) for role in network.roles if role.name in roles}
    bypassed = bypass != "none" and output == "c" and set(ends.get("re", ())) == {"e", GROUND}
    if bypassed and bypass == "full":
        join("e", GROUND)
        ends = {name: (home[one], home[two]) for name, (one, two) in ends.items()}
    return _Wiring(home, {name: pair for name, pair in ends.items() if pair[0] != pair[1]}, output, bypassed)


# --- Figures --------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, kw_only=True, eq=False)
class SmallSignal:
    """Small-signal figures at a Q-point; each is computed when it is asked for.

    Parameters
    ----------
    network : Network
        The bias network.
    r : mapping of str to array_like
        Resistance of every role used [ohm], broadcast.
    q : QPoint
        The Q-point at these resistances [A, V], in the active region.
    hfe : array_like
        Gain at the temperature of the junction [-], broadcast.
    temperature : array_like
        Junction temperature [K], broadcast.
    vce_sat : array_like
        VCE at which the transistor saturates [V], broadcast.
    signal : Signal
        Bypass, load and source.
    r_ref : array_like, optional
        Slope resistance of the reference element [ohm], where the network has one; broadcast.
    upper : array_like, optional
        Upper part of re at this very point, in place of `signal.unbypassed` [ohm]; broadcast.

    Raises
    ------
    SignalError
        If a resistor that is absent leaves two terminals of the transistor on one node.

    Notes
    -----
    Base-emitter law and IC = h·IB + (h+1)·ICBO are those of the Q-point, differentiated: IC is the total collector current,
    leakage included, so gm = IC/VT holds with leakage too; ICBO itself does not follow the signal, so a change of IB is 1/h
    of that of IC and r_pi = h·VT/IC. There is no output resistance of the transistor: without an Early voltage it is infinite.
    A saturated transistor has no small-signal gain, and what is said of one here is only the continuation of the active law.
    """

    network: Network
    r: Resistances
    q: QPoint
    hfe: Array | float
    temperature: Array | float
    vce_sat: Array | float = 0.0
    signal: Signal = Signal()
    r_ref: Array | float | None = None
    upper: Array | float | None = None

    def __post_init__(self) -> None:
        # A circuit without a signal is refused here, not when the first figure is asked for.
        _ = self._wiring

    @cached_property
    def _wiring(self) -> _Wiring:
        return _wire(self.network, self.r, self.signal.bypass, self.r_ref is not None)

    @property
    def output(self) -> str:
        """Node of the output: ``c``, or ``e`` where the collector is signal ground."""
        return self._wiring.output

    @property
    def polarity(self) -> int:
        """Sign of the voltage gain: −1 at the collector, +1 at the emitter."""
        return -1 if self.output == "c" else 1

    @cached_property
    def gm(self) -> Array:
        """Transconductance IC/VT [A/V]."""
        return np.asarray(self.q.ic / thermal_voltage(self.temperature))

    @cached_property
    def r_pi(self) -> Array:
        """Resistance between base and emitter of the transistor itself, h·VT/IC [ohm]; infinite without current."""
        with np.errstate(divide="ignore"):
            return np.asarray(np.asarray(self.hfe) / self.gm)

    @cached_property
    def r_intrinsic(self) -> Array:
        """VT/IE [ohm]; infinite without current."""
        with np.errstate(divide="ignore"):
            return np.asarray(thermal_voltage(self.temperature) / (self.q.ic + self.q.ib))

    def _resistance(self, role: str) -> Array:
        """What the signal meets in a role."""
        whole = np.asarray(self.r[role], dtype=float)
        upper = self.signal.unbypassed if self.upper is None else self.upper
        if role == "re" and self._wiring.bypassed and upper is not None:
            return np.asarray(np.minimum(whole, upper))
        return whole

    def _build(self, load: float | None, skip: str = "") -> _Circuit[NDArray[np.float64]]:
        """The circuit as numbers, without one role."""
        one, zero = np.asarray(1.0), np.asarray(0.0)
        path: dict[frozenset[str], Array] = {}
        for role, ends in self._wiring.ends.items():
            if role != skip:
                key = frozenset(ends)
                path[key] = path.get(key, zero) + 1.0 / self._resistance(role)
        if load is not None:
            key = frozenset((self.output, GROUND))
            path[key] = path.get(key, zero) + 1.0 / load
        slope = np.asarray(0.0 if self.r_ref is None else self.r_ref)
        middle = self._wiring.home[REFERENCE]
        if middle == REFERENCE:
            _dissolve(path, slope)

        def ground(node: str) -> Quotient[NDArray[np.float64]]:
            if self._wiring.home[node] == GROUND:
                return one, zero
            g = path.get(frozenset((node, GROUND)), zero)
            # The reference element hangs at this very node.
            return (1.0 + slope * g, slope) if node == middle else (g, one)

        b, c, e = (ground(node) for node in TERMINALS)
        bc, be, ce = (path.get(frozenset(pair), zero) for pair in ("bc", "be", "ce"))
        return _Circuit(b, c, e, bc, be, ce, self.gm, np.asarray(self.gm / self.hfe))

    @cached_property
    def _loaded(self) -> _Circuit[NDArray[np.float64]]:
        return self._build(self.signal.load)

    def _fed(self, circuit: _Circuit[NDArray[np.float64]]) -> _Circuit[NDArray[np.float64]]:
        """The circuit with the source resistance at its input."""
        g, s = circuit.b
        source = self.signal.source
        if source == 0.0:
            return replace(circuit, b=(np.asarray(1.0), np.asarray(0.0)))
        return replace(circuit, b=(g * source + s, s * source))

    @cached_property
    def input_resistance(self) -> Array:
        """Resistance that the source sees at the base, bias feed included, with the load connected [ohm]."""
        return _divide(_input_resistance(self._loaded))

    @cached_property
    def output_resistance(self) -> Array:
        """Resistance at the output without the load, the source resistance at the input [ohm]."""
        return _divide(_output_resistance(self._fed(self._build(None)), self.output, np.asarray(1.0), np.asarray(0.0)))

    @cached_property
    def gain(self) -> Array:
        """Magnitude of the voltage gain from base to output, with the load [-].

        Its sign is `polarity`. It is negative where a feedback resistor passes more signal forward than the transistor
        amplifies (rb·IC below about VT): the output then moves the other way.
        """
        return _divide(_gain(self._loaded, self.output))

    @cached_property
    def overall_gain(self) -> Array:
        """Magnitude of the voltage gain from the EMF of the source to the output, with the load [-]; signed as `gain`."""
        if self.signal.source == 0.0:
            return self.gain
        return _divide(_overall_gain(self._loaded, self.output, np.asarray(self.signal.source)))

    @cached_property
    def load_line_resistance(self) -> Array:
        """Output voltage against collector current along the AC load line, Rac [ohm]; signed as `gain`."""
        numerator, junction = _cutoff_excursion(self._loaded, self.output)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(numerator / (junction * self.gm))

    @cached_property
    def swing_to_cutoff(self) -> Array:
        """Peak of the output at which IC reaches zero, IC·Rac [V].

        Notes
        -----
        Exact, for any size of signal, where no resistor leads from one terminal of the transistor to another. With one the
        base voltage's own share in its current, 1/gain of the whole, is taken as proportional.
        """
        return np.asarray(thermal_voltage(self.temperature) * _divide(_cutoff_excursion(self._loaded, self.output)))

    @cached_property
    def swing_to_saturation(self) -> Array:
        """Peak of the output at which VCE reaches VCE(sat) [V].

        Notes
        -----
        VCE − VCE(sat) times the share of the output in the excursion of VCE, less than 1 where the emitter moves against
        the collector. Negative where the Q-point itself lies below VCE(sat), NaN where no current flows.
        """
        # Without any current nothing moves, neither the output nor VCE.
        with np.errstate(invalid="ignore"):
            share = _divide(_output_share(self._loaded, self.output))
        return np.asarray((self.q.vce - self.vce_sat) * share)

    @property
    def swing(self) -> Array:
        """Largest peak of a symmetrical output before saturation or cut-off [V]: the smaller of both sides."""
        return np.asarray(np.fmin(self.swing_to_cutoff, self.swing_to_saturation))

    @property
    def cutoff_binds(self) -> NDArray[np.bool_]:
        """Whether cut-off ends the swing before saturation does."""
        return np.asarray(self.swing_to_cutoff < self.swing_to_saturation)

    @cached_property
    def bypass_resistance(self) -> Array | None:
        """Resistance that the bypass capacitor of the emitter sees [ohm]; None where there is no such capacitor.

        Notes
        -----
        Full bypass: re in parallel with what the emitter shows, about r_intrinsic plus the base-side resistance over h + 1.
        Part: the lower part of re in parallel with the upper part plus the same; 0 where no lower part is left.
        """
        if not self._wiring.bypassed:
            return None
        whole = np.asarray(self.r["re"], dtype=float)
        upper = np.asarray(0.0) if self.signal.unbypassed is None else self._resistance("re")
        without = replace(self, signal=replace(self.signal, bypass="none", unbypassed=None, split=False), upper=None)
        circuit = without._fed(without._build(self.signal.load, skip="re"))
        # Without current the emitter shows nothing, and a lower part of no resistance is a short.
        with np.errstate(divide="ignore"):
            above = upper + _divide(_output_resistance(circuit, "e", np.asarray(1.0), np.asarray(0.0)))
            return np.asarray(1.0 / (1.0 / (whole - upper) + 1.0 / above))


    @cached_property
    def lower_corner(self) -> Array | None:
        """Corner frequency of the bypass capacitor [Hz]; None where there is none, infinite where nothing is left to bypass."""
        ohms = self.bypass_resistance
        if ohms is None or self.signal.capacitor is None:
            return None
        with np.errstate(divide="ignore"):
            return corner_frequency(ohms, self.signal.capacitor)


def _dissolve(path: dict[frozenset[str], Array], slope: Array) -> None:
    """Replace the node m, which the slope resistance of the reference leads to ground, by paths between its neighbours."""
    arms = {next(iter(key - {REFERENCE})): path.pop(key) for key in list(path) if REFERENCE in key}
    zero = np.asarray(0.0)
    to_ground = arms.pop(GROUND, zero)
    scale = 1.0 + slope * sum(arms.values(), start=to_ground)
    names = list(arms)
    for k, node in enumerate(names):
        key = frozenset((node, GROUND))
        path[key] = path.get(key, zero) + arms[node] * (1.0 + slope * to_ground) / scale
        for other in names[k + 1 :]:
            key = frozenset((node, other))
            path[key] = path.get(key, zero) + arms[node] * arms[other] * slope / scale


def _divide(quotient: Quotient[NDArray[np.float64]]) -> Array:
    return np.asarray(quotient[0] / quotient[1])


def corner_frequency(resistance: Array | float, capacitance: Array | float) -> Array:
    """Corner frequency of a capacitor, 1/(2π·R·C).

    Parameters
    ----------
    resistance : array_like
        Resistance that the capacitor sees, such as `SmallSignal.bypass_resistance` [ohm], broadcast.
    capacitance : array_like
        Its capacitance [F], broadcast.

    Returns
    -------
    ndarray
        Corner frequency [Hz].

    Notes
    -----
    The corner is the pole of the transfer function. A bypass capacitor also makes a zero, at the corner of the resistance
    that it shorts; the gain has fallen by 3 dB at the pole times the root of 1 − 2·(zero/pole)².
    """
    return np.asarray(1.0 / (2.0 * np.pi * np.asarray(resistance) * np.asarray(capacitance)))


def corner_capacitance(resistance: Array | float, frequency: Array | float) -> Array:
    """Capacitance that puts the corner at a frequency, 1/(2π·R·f).

    Parameters
    ----------
    resistance : array_like
        Resistance that the capacitor sees, such as `SmallSignal.bypass_resistance` [ohm], broadcast.
    frequency : array_like
        Corner frequency [Hz], broadcast.

    Returns
    -------
    ndarray
        Capacitance [F].
    """
    return np.asarray(1.0 / (2.0 * np.pi * np.asarray(resistance) * np.asarray(frequency)))


# --- Signs ----------------------------------------------------------------------------------------------------------


def _times(one: Sign, two: Sign) -> Sign:
    if one == 0 or two == 0:
        return 0
    return None if one is None or two is None else one * two


@cache
def _slopes(quotient: str, output: str, paths: frozenset[str], grounded: frozenset[str]) -> Mapping[str, Sign]:
    """Sign of a quotient along each path, along ``gm`` and ``gpi``, and along ``ic``, which moves both in proportion."""
    one, zero, variable = _Polynomial.constant(1), _Polynomial.constant(0), _Polynomial.variable

    def ground(node: str) -> Quotient[_Polynomial]:
        if node in grounded:
            return one, zero
        return variable(node) if node in paths else zero, one

    b, c, e = (ground(node) for node in TERMINALS)
    bc, be, ce = (variable(pair) if pair in paths else zero for pair in ("bc", "be", "ce"))
    circuit = _Circuit(b, c, e, bc, be, ce, variable("gm"), variable("gpi"))
    match quotient:
        case "input_resistance":
            p, q = _input_resistance(circuit)
        case "output_resistance":
            p, q = _output_resistance(circuit, output, one, zero)
        case "gain":
            p, q = _gain(circuit, output)
        case "overall_gain":
            p, q = _overall_gain(circuit, output, variable("source"))
        case "cutoff_excursion":
            p, q = _cutoff_excursion(circuit, output)
        case _:
            p, q = _output_share(circuit, output)
    along = {name: (name,) for name in (*paths, "gm", "gpi")} | {"ic": ("gm", "gpi")}
    found: dict[str, Sign] = {}
    for name, moved in along.items():
        slope = p.growth(moved) * q - p * q.growth(moved)
        found[name] = slope.sign
        if slope.sign is None and quotient in ("cutoff_excursion", "output_share"):
            # A swing is claimed only where P is above zero, and then what exceeds P·Q is beyond doubt.
            found[name] = 1 if (slope - p * q).sign == 1 else -1 if (slope + p * q).sign == -1 else None
    return found


def _own_slopes(
    network: Network, figure: str, bypass: Bypass, used: Collection[str]
) -> tuple[_Wiring, dict[str, str], frozenset[str], Mapping[str, Sign]]:
    """Wiring, path of each role, star around m, and the signs of a figure's slope along every path and the transistor."""
    is_corner = figure == CORNER
    wiring = _wire(network, used, "none" if bypass == "part" or is_corner else bypass, network.reference != "no")
    role_path, star = _paths(wiring)
    # Source and load may hang where no resistor of the network does.
    paths = frozenset((*role_path.values(), "b", wiring.output)) | star
    grounded = frozenset(node for node in TERMINALS if wiring.home[node] == GROUND)
    quotient = {
        "swing_to_cutoff": "cutoff_excursion", "swing_to_saturation": "output_share", CORNER: "output_resistance",
    }.get(figure, figure)  # fmt: skip
    slope = _slopes(quotient, "e" if is_corner else wiring.output, paths, grounded)
    if is_corner:
        slope = {name: _times(-1, sign) for name, sign in slope.items()}
    return wiring, role_path, star, slope


def signs(
    network: Network,
    figure: str,
    bypass: Bypass = "full",
    *,
    roles: Collection[str] | None = None,
    gain_moves: bool = False,
) -> dict[str, Sign]:
    """Proved signs of a figure's slope at fixed temperature, over the whole chain: the Q-point moves too.

    Parameters
    ----------
    network : Network
        The bias network.
    figure : str
        One of `FIGURES`, or `CORNER` where re is bypassed.
    bypass : {"full", "none", "part"}
        Of re.
    roles : collection of str, optional
        Roles used; all by default, which holds for any choice of the optional ones.

    gain_moves : bool
        Whether the gain goes with the Q-point.

    Returns
    -------
    dict
        For each rail, role, and ``delta hfe icbo`` (where the network may have a reference element ``delta_ref r_ref`` too):
        +1 where the figure never falls along it, −1 where it never rises, 0 where it stays; None where nothing is proved.

    Raises
    ------
    SignalError
        If there is no such figure or bypass.

    Notes
    -----
    Proof. Each figure is a quotient P/Q of polynomials in the conductances of the circuit, gm and gpi, all above zero, with
    Q above zero, whatever load and source. Its slope along any of them has the sign of P'·Q − P·Q', again a polynomial; where
    its coefficients are all of one sign, so is the slope. For a swing, which takes a gain, P is above zero too: there it is
    enough if they are once P·Q is taken away from a rise or from a fall. What is left open so stays None. These slopes meet
    the network's own proved signs:

    - gm = IC/VT and gpi = gm/h rise with IC in proportion (where the gain moves with IC, both rise all the same, each with a
      slope of its own), so along every parameter but hfe the transistor's part has the
      sign of the slope along both together, times that of IC. Along hfe gm follows IC, but gpi·VT = IC/h = IB + (1 + 1/h)·ICBO
      falls wherever IB does.
    - A role is a conductance of one path, so its own part has the opposite sign of the slope along that path. Partly
      bypassed, re carries signal or does not: its part has that sign or is zero.
    - The corner of the bypass capacitor falls as the resistance that it sees rises: with the whole re bypassed that at the
      emitter, re included; of a lower part, that part in parallel with the upper one and what the emitter shows, which
      rises with re and with the resistance at the emitter.
    - IC·Rac is VT·P/Q with the output against the junction voltage; the swing towards saturation is VCE − VCE(sat), whose
      slope is the network's sign of VCE, times the share of the output. `swing`, the smaller of two, has their common sign.
    - Roles left out, a source without resistance and an ideal reference are limits of a path that shorts or opens, and a
      slope that never changes sign keeps that in the limit.

    The sum has a sign where no two parts disagree. The premise is the network's (IB ≥ 0, IC above ICBO, VBE above 0); for the
    three swings also a gain above 0 and, but towards cut-off, VCE ≥ VCE(sat), for without them there is no swing.
    """
    _known("figure", figure, (*FIGURES, CORNER))
    _known("signal.bypass", bypass, BYPASSES)
    if figure == "swing":
        sides = ("swing_to_cutoff", "swing_to_saturation")
        two = [signs(network, side, bypass, roles=roles, gain_moves=gain_moves) for side in sides]
        return {parameter: common_sign([side[parameter] for side in two]) for parameter in two[0]}
    used = network.role_names if roles is None else roles
    wiring, role_path, star, slope = _own_slopes(network, figure, bypass, used)
    found: dict[str, Sign] = {}
    rails = (*network.rails, *network.optional_rails)
    reference = ("delta_ref", "r_ref") if network.reference != "no" else ()
    for parameter in (*rails, *used, "delta", "hfe", "icbo", *reference):
        moved = network.sign("ic", parameter)
        if parameter == "hfe":
            parts = [_times(slope["gm"], moved), _times(slope["gpi"], network.sign("ib", "hfe"))]
        else:
            along = ("gm", "gpi") if gain_moves else ("ic",)
            parts = [_times(slope[part], moved) for part in along]
        if parameter in role_path:
            parts.append(_times(-1, slope[role_path[parameter]]))
        elif star and (parameter == "r_ref" or REFERENCE in wiring.ends.get(parameter, ())):
            parts.append(None)
        if figure == "swing_to_saturation":
            parts.append(network.sign("vce", parameter))
        found[parameter] = common_sign(parts)
    return found


def own_signs(
    network: Network, figure: str, bypass: Bypass = "full", *, roles: Collection[str] | None = None
) -> dict[str, Sign]:
    """Proved signs of a figure along each resistance while IC stays, and along IC while the resistances stay.

    Parameters
    ----------
    network : Network
        The bias network.
    figure : str
        ``input_resistance``, ``output_resistance``, ``gain``, ``overall_gain``, ``swing_to_cutoff`` or ``lower_corner``.
    bypass : {"full", "none", "part"}
        Of re.
    roles : collection of str, optional
        Roles used; all by default.

    Returns
    -------
    dict
        For each role, ``ic``, and ``hfe`` while IC stays: +1, −1, 0, or None where nothing is proved.

    Notes
    -----
    The parts of `signs` before they are put together: with each of them at its own favourable end a figure has a bound over
    resistances and currents that need not go together. With "part", re may carry signal or not: its part is what it is
    without a bypass, or nothing.
    """
    used = network.role_names if roles is None else roles
    wiring, role_path, star, slope = _own_slopes(network, figure, bypass, used)
    found: dict[str, Sign] = {"ic": slope["ic"], "hfe": _times(-1, slope["gpi"])}
    for role in used:
        starred = bool(star) and REFERENCE in wiring.ends.get(role, ())
        found[role] = None if starred else _times(-1, slope[role_path[role]]) if role in role_path else 0
    return found


def _paths(wiring: _Wiring) -> tuple[dict[str, str], frozenset[str]]:
    """Path that each role, and ``r_ref``, is a part of; and the paths of a star around m, which many roles move at once."""
    at_middle = [role for role, ends in wiring.ends.items() if REFERENCE in ends]
    found = {role: _path(ends) for role, ends in wiring.ends.items() if role not in at_middle}
    middle = wiring.home[REFERENCE]
    if middle in TERMINALS:
        return found | {"r_ref": middle}, frozenset()
    outer = {next(node for node in wiring.ends[role] if node != REFERENCE) for role in at_middle}
    if len(at_middle) == 1 and outer <= set(TERMINALS):
        # One role in series with the slope resistance.
        (node,) = outer
        return found | {at_middle[0]: node, "r_ref": node}, frozenset()
    inner = sorted(outer & set(TERMINALS))
    return found, frozenset([*inner, *(a + b for k, a in enumerate(inner) for b in inner[k + 1 :])])


def _path(ends: tuple[str, str]) -> str:
    return "".join(sorted(node for node in ends if node != GROUND))
