"""The box of a stage: the product of all its spreads, and the true extremes over the whole of it.

At a fixed temperature every quantity is monotone along most axes of the box, and the network file says along which ones
that is proved: there the extreme sits at the known end. Along the others both ends are tried, and wherever a quantity
rises inward from both ends of an edge the stationary point between them is found. Temperature is scanned on both sides
of 25 °C, where the resistor band and the gain law have their kinks, and polished around the best point.

The proofs assume current into the base (IB ≥ 0), IC above ICBO, VBE above 0 and a reference element that conducts. Where a
point of the box breaks that, no sign is trusted and every vertex is tried: each quantity is still monotone along each single
axis, only the direction is open.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property, partial
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from synth.measures import UPPER, Setting, measure, power_of, sign
from synth.networks.form import Array, Branches, Network, QPoint, Sign, common_sign
from synth.parts import HALVES, Parts
from synth.q_point import solve, solve_active
from synth.quantities import Spread
from synth.reference import Reference
from synth.signal import Signal
from synth.stress import junction_temperature
from synth.transistor import T0, Transistor

Values = dict[str, Array]
"""A value of every parameter of the box at some points: rails [V], delta [V], hfe [-] and icbo [A] at 25 °C, va [V] where there
is an Early voltage, temperature [K], and the resistance of each role [ohm]; of a reference element delta_ref [V] and r_ref
[ohm]."""

SCAN_POINTS = 8
"""Interior temperatures of the scan on each side of 25 °C."""
INWARD = 1e-5
"""Step that tells whether a quantity rises inward from the end of an edge, in edge lengths; an interior maximum nearer
to the end than this gains at most about INWARD² of the quantity's curvature."""
NEAR = 0.02
"""How far below the best point a peak beside a stop of the scan is still polished, relative."""
HEAT_STEPS = 8
"""Secant steps towards the junction temperature; far from runaway four do."""
GOLDEN = (5.0**0.5 - 1.0) / 2.0


@dataclass
class Meter:
    """Counts scalar Q-point solves."""

    solves: int = 0


class Heat(NamedTuple):
    """Thermal resistance from junction to ambient [K/W], and the junction temperature above which nothing settles [K]."""

    rth: float
    limit: float


@dataclass(frozen=True, eq=False)
class Extreme:
    """An extreme over the box.

    `value` is the extreme of each candidate [A or V], shape (n,); `at` the parameters at the point that decides, likewise;
    `where` the position of that point along each axis, NaN on an axis that stays nominal.
    """

    value: Array
    at: Values
    where: Mapping[str, Array]

    def anchor(self, k: int) -> dict[str, float]:
        """Deciding point of one candidate, as coordinates that `Box.values` takes.

        Parameters
        ----------
        k : int
            Which candidate.

        Returns
        -------
        dict of str to float
            Position along each axis that left its nominal value; temperature [K].
        """
        return {axis: float(x[k]) for axis, x in self.where.items() if not np.isnan(x[k])}

    def pick(self, index: NDArray[np.integer]) -> Extreme:
        """The extremes of some candidates.

        Parameters
        ----------
        index : ndarray of int
            Which candidates.

        Returns
        -------
        Extreme
            Theirs, in that order.
        """
        return Extreme(
            self.value[index],
            {name: v[index] for name, v in self.at.items()},
            {name: v[index] for name, v in self.where.items()},
        )

    def take(self, k: int) -> Extreme:
        """The extreme of one candidate.

        Parameters
        ----------
        k : int
            Which candidate.

        Returns
        -------
        Extreme
            With arrays of shape (1,).
        """
        return self.pick(np.array([k]))


@dataclass(frozen=True, kw_only=True, eq=False)
class Box:
    """Network, transistor and surroundings of n candidates, with every spread.

    Parameters
    ----------
    network : Network
        How the resistors are connected.
    transistor : Transistor
        Laws and spreads of the transistor.
    rails : mapping of str to Spread
        Rail voltages, magnitudes [V].
    temperature : Spread
        Ambient [K].
    parts : mapping of str to Parts
        The resistors of each role used.
    reference : Reference, optional
        The reference element of the base voltage, where the network has one.
    heat : Heat, optional
        How the transistor warms itself; None leaves it at the ambient temperature.
    signal : Signal
        What the signal meets, for the small-signal figures.
    meter : Meter, optional
        Where solves are counted.
    """

    network: Network
    transistor: Transistor
    rails: Mapping[str, Spread]
    temperature: Spread
    parts: Mapping[str, Parts]
    reference: Reference | None = None
    heat: Heat | None = None
    signal: Signal = field(default_factory=Signal)
    meter: Meter = field(default_factory=Meter)

    @cached_property
    def size(self) -> int:
        """Number of candidates n."""
        return int(next(iter(self.parts.values())).nominal.size)

    @cached_property
    def spreads(self) -> dict[str, Spread]:
        """Spread of each axis that is not a role: rails, delta, hfe, icbo, and those of the reference where it is widest."""
        device = self.transistor
        vbe = device.vbe
        found = {
            **self.rails,
            "delta": Spread(vbe.low - vbe.nominal, 0.0, vbe.high - vbe.nominal),
            "hfe": device.hfe,
            "icbo": device.icbo,
        }
        if device.va is not None:
            found["va"] = device.va
        if self.reference is not None:
            ends = [self.reference.deviation(t) for t in (self.temperature.low, self.temperature.high)]
            found["delta_ref"] = Spread(float(min(low for low, _ in ends)), 0.0, float(max(high for _, high in ends)))
            found["r_ref"] = self.reference.slope
        return found

    @cached_property
    def axes(self) -> tuple[str, ...]:
        """Axes of the box that have a width, temperature apart."""
        wide = [name for name, spread in self.spreads.items() if spread.high > spread.low]
        return (*wide, *self.parts)

    @cached_property
    def split(self) -> Parts | None:
        """The emitter resistor, where it is two parts of which the upper one carries the signal."""
        re = self.parts.get("re")
        return re if self.signal.split and re is not None and re.pairs is not None else None

    def take(self, index: NDArray[np.integer] | Sequence[int]) -> Box:
        """The same box around some of the candidates.

        Parameters
        ----------
        index : array_like of int
            Which candidates.

        Returns
        -------
        Box
            With the same meter.
        """
        return Box(
            network=self.network,
            transistor=self.transistor,
            rails=self.rails,
            temperature=self.temperature,
            parts={role: part.take(index) for role, part in self.parts.items()},
            reference=self.reference,
            heat=self.heat,
            signal=self.signal,
            meter=self.meter,
        )

    def values(self, coordinates: Mapping[str, Array | float]) -> Values:
        """Parameters at points of the box.

        Parameters
        ----------
        coordinates : mapping of str to array_like
            Position along each axis, 0 at the low end and 1 at the high end [-], broadcast against (n,);
            ``temperature`` in kelvin [K]. An axis that is not named stays nominal.

        Returns
        -------
        dict
            See `Values`.
        """
        t = np.asarray(coordinates.get("temperature", self.temperature.nominal), dtype=float)
        found: Values = {"temperature": t}
        for name, spread in self.spreads.items():
            x = coordinates.get(name)
            low, high = np.asarray(spread.low), np.asarray(spread.high)
            if name == "delta_ref" and self.reference is not None:
                low, high = self.reference.deviation(t)
            found[name] = np.asarray(spread.nominal if x is None else (1.0 - x) * low + x * high)
        for role, part in self.parts.items():
            x = coordinates.get(role)
            low, high = part.ends(t)
            # A one-sided temperature coefficient may leave the nominal value outside the band.
            found[role] = np.clip(part.nominal, low, high) if x is None else np.asarray((1.0 - x) * low + x * high)
        if self.split is not None:
            x = coordinates.get(UPPER)
            low, high = self.split.upper(found["re"], t)
            own = self.split.pairs.halves[0].nominal if self.split.pairs is not None else low
            found[UPPER] = np.clip(own, low, high) if x is None else np.asarray((1.0 - x) * low + x * high)
        return found

    def nominal(self) -> Values:
        """Every parameter at its nominal value.

        Returns
        -------
        dict
            See `Values`.
        """
        found = self.values({}) | {role: part.nominal for role, part in self.parts.items()}
        if self.split is not None and self.split.pairs is not None:
            found[UPPER] = self.split.pairs.halves[0].nominal
        return found

    def sources(self, values: Values) -> dict[str, Array]:
        """What drives the network: the rails and the line of the reference element.

        Parameters
        ----------
        values : dict
            See `Values`; broadcast.

        Returns
        -------
        dict
            As `synth.networks.form.Rails` has it [V, ohm].
        """
        found = {rail: values[rail] for rail in self.rails}
        if self.reference is not None:
            found |= self.reference.line(values["delta_ref"], values["r_ref"], values["temperature"])
        if self.split is not None:
            found[UPPER] = values[UPPER]
        return found

    def solve(self, values: Values, active_law: bool = False, junction: Array | None = None) -> QPoint:
        """Q-point at given parameters.

        Parameters
        ----------
        values : dict
            See `Values`; broadcast.
        active_law : bool
            Whether to stay with the active-region law below VCE(sat).
        junction : ndarray, optional
            Temperature of the transistor [K]; when not given the ambient temperature, or where it settles with its own heat.
            Resistors stay at the ambient.

        Returns
        -------
        QPoint
            Of the broadcast shape.
        """
        if junction is None and self.heat is not None:
            return self._heated(values, active_law, self.heat)
        t = values["temperature"] if junction is None else junction
        law = solve_active if active_law else solve
        q = law(
            self.network,
            self.transistor,
            self.sources(values),
            {role: values[role] for role in self.parts},
            hfe=values["hfe"] * self.transistor.gain_factor(t),
            icbo=values["icbo"] * self.transistor.leakage_factor(t),
            delta=values["delta"],
            temperature=t,
            va=values.get("va"),
            lift=values.get("lift"),
        )
        self.meter.solves += q.ic.size
        return q

    def _heated(self, values: Values, active_law: bool, heat: Heat) -> QPoint:
        """Q-point at the junction temperature that it settles at; NaN where it does not."""
        shape = np.broadcast_shapes(*(np.shape(v) for v in values.values()))
        ambient = np.broadcast_to(values["temperature"], shape).astype(float)

        def power(t: Array) -> Array:
            return self._warming(values, active_law, t)

        before, off_before = ambient, heat.rth * power(ambient)
        t = np.minimum(ambient + off_before, heat.limit)
        gain = np.zeros(shape)
        for _ in range(HEAT_STEPS):
            off = ambient + heat.rth * power(t) - t
            with np.errstate(divide="ignore", invalid="ignore"):
                slope = (off - off_before) / (t - before)
                moved = np.abs(t - before) > 1e-9 * t
                gain = np.where(moved, slope + 1.0, gain)
                step = np.where(moved & (slope < 0.0), -off / slope, 0.0)
            before, off_before = t, off
            t = np.clip(t + step, ambient, heat.limit)
            if not np.any(np.abs(step) > 1e-12 * t):
                break
        # Far from runaway the secant ends at the first root; the rest is walked up to from the ambient.
        left = np.nonzero(~((np.abs(t - before) <= 1e-9 * t) & (gain < 0.5) & (t < heat.limit)))
        if left[0].size:
            some = {name: np.broadcast_to(v, shape)[left] for name, v in values.items()}
            alone = replace(self.take(left[-1]), heat=None)
            t = t.copy()
            t[left] = junction_temperature(
                partial(alone._warming, some, active_law), ambient[left], heat.rth, heat.limit
            ).temperature
        return self.solve(values, active_law, junction=t)

    def _warming(self, values: Values, active_law: bool, junction: Array) -> Array:
        """What warms the transistor at a junction temperature [W]; below VCE(sat) the active law gives nothing."""
        power = self.solve(values, active_law, junction).power
        return np.asarray(np.maximum(np.broadcast_to(power, junction.shape), 0.0))

    def early_too_strong(self, values: Values) -> NDArray[np.bool_]:
        """Where the premise of the signs under the Early effect fails, see `synth.measures`.

        Parameters
        ----------
        values : dict
            See `Values`; no unit matters.

        Returns
        -------
        ndarray of bool
            Of the broadcast shape.
        """
        port = self.network.two_port(self.sources(values), {role: values[role] for role in self.parts}, values["temperature"])
        leakage = values["icbo"] * self.transistor.leakage_factor(values["temperature"])
        return np.asarray(port.z_cb * (port.e_b / port.z_bb + leakage) > values["va"])

    def branches(self, values: Values, q: QPoint) -> Branches:
        """Voltages and currents of every resistor and rail.

        Parameters
        ----------
        values : dict
            See `Values`.
        q : QPoint
            The Q-point at these values.

        Returns
        -------
        Branches
            Of the broadcast shape.
        """
        return self.network.branches(self.sources(values), {role: values[role] for role in self.parts}, q)

    def measure(self, names: Sequence[str], values: Values, q: QPoint) -> Array:
        """Sum of quantities at solved points.

        Parameters
        ----------
        names : sequence of str
            Names of `synth.measures`; their sum is taken.
        values : dict
            See `Values`.
        q : QPoint
            The Q-point at these values.

        Returns
        -------
        ndarray
            The sum, of the broadcast shape [A, V, W, ohm or -].
        """
        if all(name in QPoint._fields for name in names):
            return np.asarray(sum(getattr(q, name) for name in names))
        r = {role: values[role] for role in self.parts}
        sources, t = self.sources(values), values["temperature"]
        gain = self.gain(values, q)
        branches = self.network.branches(sources, r, q)
        return np.asarray(sum(measure(name, self.setting, sources, r, q, branches, gain, t) for name in names))

    def gain(self, values: Values, q: QPoint) -> Array:
        """DC gain at solved points, at their temperature; that of the active law where the transistor saturates.

        Parameters
        ----------
        values : dict
            See `Values`.
        q : QPoint
            The Q-point at these values.

        Returns
        -------
        ndarray
            hFE [-], of the broadcast shape.
        """
        t = values["temperature"]
        if not self.transistor.gain_moves:
            return np.asarray(values["hfe"] * self.transistor.gain_factor(t))
        leakage = values["icbo"] * self.transistor.leakage_factor(t)
        # Without base current there is no gain to speak of; NaN says so.
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray((q.ic - leakage) / (q.ib + leakage))

    def sign(self, names: Sequence[str], axis: str) -> Sign:
        """Proved sign of a sum of quantities along an axis.

        Parameters
        ----------
        names : sequence of str
            As in `measure`.
        axis : str
            An axis of the box.

        Returns
        -------
        int or None
            The common sign of all that are not 0; None where one is unknown or two disagree.
        """
        return common_sign(sign(name, axis, self.setting) for name in names)

    @cached_property
    def setting(self) -> Setting:
        """What the quantities of this box depend on besides the values of its parameters."""
        return Setting(
            network=self.network,
            transistor=self.transistor,
            roles=tuple(self.parts),
            signal=self.signal,
            parts=self.parts,
        )

    @cached_property
    def scan(self) -> Array:
        """Temperatures of the scan [K]: the stops, a point just inside of each, and interior points in between."""
        share = np.concatenate([[0.0, INWARD], np.arange(1, SCAN_POINTS + 1) / (SCAN_POINTS + 1.0), [1.0 - INWARD]])
        grid = [a + (b - a) * share for a, b in itertools.pairwise(self.stops)]
        return np.concatenate([*grid, self.stops[-1:]])

    @cached_property
    def stops(self) -> Array:
        """Ends and kink of the ambient range [K]."""
        low, high = self.temperature.low, self.temperature.high
        return np.unique([low, high, *([T0] if low < T0 < high else [])])

    def extreme(self, names: Sequence[str], direction: int, *, thorough: bool = True) -> Extreme:
        """True extreme of a quantity over the whole box, by the active-region law.

        Parameters
        ----------
        names : sequence of str
            As in `measure`.
        direction : {+1, -1}
            +1 for the maximum, −1 for the minimum.
        thorough : bool
            False looks at the vertices at the ends and the kink of the ambient range only: a value that the true
            extreme reaches or exceeds, for a first sorting.

        Returns
        -------
        Extreme
            Value and deciding point, shape (n,).
        """
        if len(names) == 1 and direction > 0 and names[0].startswith(("pmax_", "umax_")):
            # The larger of two has a peak for each of them, so each is looked for by itself.
            found, *others = (self.extreme((f"{names[0][0]}_{names[0][5:]}{half}",), 1, thorough=thorough) for half in HALVES)
            for other in others:
                index = np.flatnonzero(other.value > found.value)
                _overwrite(found, index, other.pick(index))
            return found
        figures = self.split is not None and any(self.sign((name,), UPPER) is None for name in names)
        every = (*self.axes, *([UPPER] if figures else []))
        if self.heat is not None:
            # The proofs hold at one temperature of the transistor: with its own heat every axis is searched.
            return _Climb(self, tuple(names), direction, {}, every, thorough, premise=False).run()
        known = {axis: self.sign(names, axis) for axis in every}
        fixed = {axis: 0.5 + 0.5 * direction * s for axis, s in known.items() if s}
        free = tuple(axis for axis, s in known.items() if s is None)
        search = _Climb(self, tuple(names), direction, fixed, free, thorough)
        found = search.run()
        for role in filter(None, (power_of(name, self.setting.roles) for name in names)):
            # A power has the signs of its current only while that does not turn round.
            search.doubtful |= self.extreme((f"i_{role}",), -1, thorough=False).value < 0.0
        if search.doubtful.any():
            index = np.flatnonzero(search.doubtful)
            again = _Climb(self.take(index), tuple(names), direction, {}, every, thorough, premise=False)
            _overwrite(found, index, again.run())
        return found


def _overwrite(found: Extreme, index: NDArray[np.integer], part: Extreme) -> None:
    found.value[index] = part.value
    for name, value in part.at.items():
        found.at[name][index] = value
    for axis, x in part.where.items():
        found.where[axis][index] = x


@dataclass
class _Climb:
    """Search for one extreme along the free axes and temperature; maximises direction·quantity."""

    box: Box
    names: tuple[str, ...]
    direction: int
    fixed: Mapping[str, float]
    free: tuple[str, ...]
    thorough: bool
    premise: bool = True

    def __post_init__(self) -> None:
        self.doubtful = np.zeros(self.box.size, dtype=bool)

    def height(self, coordinates: Mapping[str, Array | float]) -> Array:
        """direction·quantity at points; notes candidates that break the premise of the proved signs."""
        box = self.box
        values = box.values({**self.fixed, **coordinates})
        q = box.solve(values, active_law=True)
        if self.premise:
            leakage = values["icbo"] * box.transistor.leakage_factor(values["temperature"])
            broken = (q.ib < 0.0) | (q.ic < leakage) | (q.vbe < 0.0)
            if box.reference is not None:
                broken = broken | (np.asarray(box.measure(("i_ref",), values, q)) < 0.0)
            if box.transistor.va is not None:
                broken = broken | box.early_too_strong(values)
            if broken.any():
                broken = np.broadcast_to(broken, np.broadcast_shapes(broken.shape, (box.size,)))
                self.doubtful |= broken.reshape(-1, box.size).any(axis=0)
        return self.direction * box.measure(self.names, values, q)

    def run(self) -> Extreme:
        box, n = self.box, self.box.size
        temperatures = box.scan if self.thorough else box.stops
        corners = np.array(list(itertools.product((0.0, 1.0), repeat=len(self.free))))
        coordinates: dict[str, Array | float] = {
            axis: corners[:, j, None, None] for j, axis in enumerate(self.free)
        }
        coordinates["temperature"] = temperatures[None, :, None]
        heights = np.broadcast_to(self.height(coordinates), (len(corners), len(temperatures), n))
        flat = heights.reshape(-1, n)
        winner = flat.argmax(axis=0)
        corner, moment = np.unravel_index(winner, heights.shape[:2])
        best = flat[winner, np.arange(n)]
        place: dict[str, Array] = {axis: corners[corner, j] for j, axis in enumerate(self.free)}
        place["temperature"] = temperatures[moment]
        if self.thorough:
            self._peaks(corners, heights, place, best)
            if np.any(self._edges(corners, place, best)):
                self._cycle(place, best)
        spot: dict[str, Array | float] = {**self.fixed, **place}
        at = {k: np.broadcast_to(v, (n,)).copy() for k, v in box.values(spot).items()}
        where = {a: np.broadcast_to(spot.get(a, np.nan), (n,)).copy() for a in (*box.axes, "temperature")}
        return Extreme(self.direction * best, at, where)

    def _edges(self, corners: Array, place: dict[str, Array], best: Array) -> NDArray[np.bool_]:
        """Stationary points inside the edges of the vertices; updates place and best, returns who gained."""
        n = self.box.size
        gained = np.zeros(n, dtype=bool)
        if not self.free:
            return gained
        stops = np.concatenate([np.repeat(self.box.stops[:, None], n, axis=1), place["temperature"][None, :]])
        for j, axis in enumerate(self.free):
            starts = corners[corners[:, j] == 0.0]
            base: dict[str, Array | float] = {a: starts[:, i, None, None] for i, a in enumerate(self.free)}
            base["temperature"] = stops[None, :, :]
            ends = [self.height({**base, axis: x}) for x in (0.0, INWARD, 1.0 - INWARD, 1.0)]
            shape = (len(starts), len(stops), n)
            rises = np.broadcast_to((ends[1] > ends[0]) & (ends[2] > ends[3]), shape)
            if not rises.any():
                continue
            which, when, who = np.nonzero(rises)
            part = _Climb(self.box.take(who), self.names, self.direction, self.fixed, self.free, True, self.premise)
            spot = {a: starts[which, i] for i, a in enumerate(self.free)}
            spot["temperature"] = stops[when, who]
            line = partial(_along, part, spot, axis)
            x, height = golden(line, np.zeros(who.size), np.ones(who.size))
            self.doubtful[who[part.doubtful]] = True
            gained |= self._keep(who, height, {**spot, axis: x}, place, best)
        return gained

    def _peaks(self, corners: Array, heights: Array, place: dict[str, Array], best: Array) -> None:
        """Polish every peak over temperature that may top the best point of the scan; updates place and best."""
        scan = self.box.scan
        if scan.size < 3:
            return
        which, when, who = peaks_that_matter(heights, scan, best)
        if not which.size:
            return
        part = _Climb(self.box.take(who), self.names, self.direction, self.fixed, self.free, True, self.premise)
        spot = {axis: corners[which, j] for j, axis in enumerate(self.free)}
        for low, high in ((scan[when], scan[when + 1]), (scan[when + 1], scan[when + 2])):
            x, height = golden(partial(_along, part, spot, "temperature"), low, high)
            self._keep(who, height, {**spot, "temperature": x}, place, best)
        self.doubtful[who[part.doubtful]] = True

    def _keep(
        self, who: NDArray[np.integer], height: Array, spot: Mapping[str, Array], place: dict[str, Array], best: Array
    ) -> NDArray[np.bool_]:
        """Take over points that are higher than the best of their candidate; returns who gained."""
        gained = np.zeros(self.box.size, dtype=bool)
        for k in np.argsort(height):
            if height[k] > best[who[k]]:
                best[who[k]] = height[k]
                gained[who[k]] = True
                for axis, x in spot.items():
                    place[axis][who[k]] = x[k]
        return gained

    def _temperature(self, place: dict[str, Array], best: Array) -> None:
        """Polish temperature around the best point, on both sides of it."""
        scan = self.box.scan
        if scan.size == 1:
            return
        here = place["temperature"]
        below = scan[np.maximum(np.searchsorted(scan, here, side="left") - 1, 0)]
        above = scan[np.minimum(np.searchsorted(scan, here, side="right"), scan.size - 1)]
        self._line("temperature", place, best, below, here.copy())
        self._line("temperature", place, best, place["temperature"].copy(), above)

    def _line(self, axis: str, place: dict[str, Array], best: Array, low: Array, high: Array) -> NDArray[np.bool_]:
        x, height = golden(partial(_along, self, place, axis), low, high)
        better = height > best
        place[axis] = np.where(better, x, place[axis])
        best[better] = height[better]
        return better

    def _cycle(self, place: dict[str, Array], best: Array) -> None:
        """Repeat line searches along every free axis and temperature until nothing moves."""
        n = self.box.size
        for _ in range(12):
            before = best.copy()
            for axis in self.free:
                self._line(axis, place, best, np.zeros(n), np.ones(n))
            self._temperature(place, best)
            if not np.any(best - before > 1e-14 * np.abs(before)):
                return


def peaks_that_matter(heights: Array, scan: Array, best: Array) -> tuple[NDArray[np.intp], ...]:
    """Points of a scan over temperature that no neighbour tops and whose peak may top the best point.

    Parameters
    ----------
    heights : ndarray, shape (vertices, temperatures, n)
        What is to be maximised [any unit].
    scan : ndarray, shape (temperatures,)
        Temperatures [K].
    best : ndarray, shape (n,)
        Best so far, in the unit of `heights` [any unit].

    Returns
    -------
    tuple of ndarray
        Vertex, position in the scan less one, and candidate of each.
    """
    left, middle, right = heights[:, :-2], heights[:, 1:-1], heights[:, 2:]
    # A point without a solution has no height; a parabola through three even neighbours overshoots the middle one by at
    # most its distance from the lower of the others.
    with np.errstate(invalid="ignore"):
        reach = middle + np.maximum(middle - np.minimum(left, right), 0.0)
        # Beside a stop the neighbours stand unevenly, and a parabola says little: anything near the best is polished.
        even = np.isclose(np.diff(scan, 2), 0.0, rtol=0.0, atol=1e-6 * (scan[-1] - scan[0]))[None, :, None]
        reach = np.where(even, reach, np.maximum(reach, middle + NEAR * np.abs(middle)))
        return np.nonzero((middle >= left) & (middle >= right) & (reach > best))


def _along(climb: _Climb, spot: Mapping[str, Array], axis: str, x: Array) -> Array:
    return climb.height({**spot, axis: x})


def golden(f: Callable[[Array], Array], low: Array, high: Array, steps: int = 64) -> tuple[Array, Array]:
    """Maximum of a unimodal function on [low, high], elementwise.

    Parameters
    ----------
    f : callable
        The function, of arrays shaped like the ends.
    low, high : ndarray
        Ends of each interval [any unit].
    steps : int
        Golden sections; 64 leave 4e-14 of the interval, since a maximum may be a kink [-].

    Returns
    -------
    x, height : ndarray
        Where the maximum is and how high [units of `low` and of `f`].
    """
    a, b = low.copy(), high.copy()
    c, d = b - GOLDEN * (b - a), a + GOLDEN * (b - a)
    fc, fd = f(c), f(d)
    for _ in range(steps):
        left = fc > fd
        b = np.where(left, d, b)
        a = np.where(left, a, c)
        new = np.where(left, b - GOLDEN * (b - a), a + GOLDEN * (b - a))
        value = f(new)
        c, d, fc, fd = (
            np.where(left, new, d),
            np.where(left, c, new),
            np.where(left, value, fd),
            np.where(left, fc, value),
        )
    return np.where(fc > fd, c, d), np.maximum(fc, fd)
