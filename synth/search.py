"""Exact search: best-first branch and bound over index rectangles of the sorted value lists.

A block is a range of list positions for every role. Any single point of the box gives a rigorous lower bound on the worst
case of every member: at that point the favourable corner of the block gives the least IC maximum, the greatest IC minimum,
and so on, because each quantity is monotone in each resistance with the signs that the network file proves. VCE is not
monotone in re, but re leaves the collector-base loop,

    VCE = (e_c − e_b) + (z_bb − z_cb)·IB + (z_bc − z_cc)·IC + VBE(IC),

so along re VCE is a concave function of IC alone: least at an end, greatest at an end or where its slope vanishes.

Proofs of monotonicity assume IB ≥ 0, IC ≥ ICBO and VBE ≥ 0. A bound from a corner that breaks this is replaced by one
that holds all the same: IC ≤ max(IC, ICEO, IS) above, the least over every vertex of the base-side roles below, nothing
otherwise. They also assume that a reference element conducts, which is a limit on every candidate: its current has the sign
of VB − vref, whatever r2, so a bound from a corner where it conducts holds for every member where it does.
"""

from __future__ import annotations

import itertools
import time
from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property, partial
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from synth.box import Meter, Values
from synth.limits import Requirement
from synth.measures import POWER_OF_TRANSISTOR, is_figure, parts_of_current, small_signal
from synth.measures import sign as quantity_sign
from synth.networks.form import Array, QPoint
from synth.signal import own_signs
from synth.spaces import MOST_VBE, Found, Goal, Index, Space, assess, is_dear, wanted
from synth.transistor import thermal_voltage

Status = Literal["optimal", "feasible", "infeasible", "unknown"]

BATCH = 2048
"""Blocks taken at a time."""
FIRST, ASSESS = 16, 128
"""Candidates assessed at a time, first and later: each batch profits from what the one before found."""
COARSE = 40
"""List length that the coarse pass aims at."""
STEP, LEAST_WEIGHT = 0.01, 0.1
"""Relative step and floor of a role's weight in the choice of what to split."""
FAR = 0.4
"""Nominal margin from which a limit on stress or signal is left to the assessment of single candidates [-]."""
FEEBLE = 10.0
"""What a pilot is put back by whose reference element lacks current; more than any miss that matters."""
TIE = 1e-10
"""Relative room for rounding between a bound and a drift; nothing within it of the K-th best is ever excluded."""


@dataclass(frozen=True, kw_only=True)
class Outcome:
    """What a search found and what it proved.

    Parameters
    ----------
    status : {"optimal", "feasible", "infeasible", "unknown"}
        "optimal" and "infeasible" are proved; "feasible" and "unknown" mean that the search was stopped.
    found : tuple of Found
        Qualifying candidates, at least the best `top`, ascending in drift.
    bound : float
        Proven lower bound on the drift of every qualifying candidate beyond the first `top` [-]; infinite if none is left.
    combinations, evaluated : int
        Size of the space; scalar Q-point solves spent.
    complete : bool
        Whether everything else is excluded by proof.
    seconds : float
        Time spent [s].
    """

    status: Status
    found: tuple[Found, ...]
    bound: float
    combinations: int
    evaluated: int
    complete: bool
    seconds: float


class _Corners:
    """Solves one point of the box at corners of blocks."""

    def __init__(self, space: Space, point: Mapping[str, float], meter: Meter) -> None:
        self.space = space
        self.meter = meter
        self.roles = space.roles
        t = point.get("temperature", space.temperature.nominal)
        self.t = np.asarray(t, dtype=float)
        self.low: dict[str, Array] = {}
        self.high: dict[str, Array] = {}
        for role in self.roles:
            x = point.get(role)
            part = space.lists[role]
            low, high = part.ends(self.t)
            still = np.clip(part.nominal, low, high) if point else part.nominal
            r = still if x is None else (1.0 - x) * low + x * high
            # Values of unlike tolerance may swap order at a point of the box; the envelopes stay bounds of each block.
            self.low[role] = np.minimum.accumulate(r[::-1])[::-1].copy()
            self.high[role] = np.maximum.accumulate(r)
        scalar = {axis: x for axis, x in point.items() if axis not in self.roles}
        one = np.zeros((1, len(self.roles)), dtype=np.int32)
        self.device = {
            k: v for k, v in space.box(one, Meter()).values(scalar).items() if k not in self.roles
        }
        self.hfe = self.device["hfe"] * space.transistor.gain_factor(self.t)
        self.icbo = self.device["icbo"] * space.transistor.leakage_factor(self.t)
        # From this current on IB and VBE are not negative.
        self.floor = float((self.hfe + 1.0) * self.icbo)
        if space.transistor.vbe_model == "junction":
            unit = np.exp(-self.device["delta"] / thermal_voltage(self.t))
            self.floor = max(self.floor, float(space.transistor.saturation_current(self.t) * unit))
        self.frame = space.box(one, meter)
        self.vt = thermal_voltage(self.t) if space.transistor.vbe_model == "junction" else np.zeros(())

    def begin(self, lo: Index, hi: Index) -> None:
        """Take up a batch of blocks and forget what was solved for the last one."""
        self.lo, self.hi = lo, hi
        self.solved: dict[tuple[int, ...], tuple[dict[str, Array], QPoint]] = {}

    def at(self, ends: tuple[int, ...]) -> tuple[dict[str, Array], QPoint]:
        """Resistances and Q-point of every block at one corner; 0 is the low end of a role, 1 the high end."""
        if ends not in self.solved:
            r = {
                role: self.high[role][self.hi[:, j]] if end else self.low[role][self.lo[:, j]]
                for j, (role, end) in enumerate(zip(self.roles, ends, strict=True))
            }
            values: Values = {**self.device, **r}
            self.solved[ends] = (values, self.frame.solve(values, active_law=True))
        return self.solved[ends]

    def ends(self, quantity: str, direction: int) -> tuple[tuple[int, ...], list[int]]:
        """Corner where direction·quantity is least, and the roles whose sign is not proved."""
        ends, open_roles = [], []
        for j, role in enumerate(self.roles):
            sign = quantity_sign(quantity, role, self.frame.setting)
            if sign is None:
                open_roles.append(j)
            ends.append(0 if not sign or sign * direction > 0 else 1)
        return tuple(ends), open_roles

    def uses(self, quantity: str, direction: int) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
        """Which roles' low ends and high ends the bound of a quantity depends on."""
        ends, open_roles = self.ends(quantity, direction)
        uses = np.zeros((2, len(self.roles)), dtype=bool)
        if is_figure(quantity):
            return ~uses[0], ~uses[1]
        behind = self._behind(quantity)
        if behind:
            for name in behind:
                uses |= np.stack(self.uses(name, direction))
            if (role := quantity.partition("_")[2]) in self.roles:
                uses[0, self.roles.index(role)] = True
            return uses[0], uses[1]
        for j, role in enumerate(self.roles):
            if quantity_sign(quantity, role, self.frame.setting) != 0:
                uses[ends[j], j] = True
            # Where leakage may turn IB round, every vertex of the base side may be asked for.
            if self.icbo > 0.0 and role in self.space.network.base_side:
                uses[:, j] = True
        for j in open_roles:
            uses[:, j] = True
            condition = self.space.network.signs_while.get((quantity, self.roles[j]))
            if condition is not None:
                uses[0, self.roles.index(condition[1])] = True
                uses |= np.stack(self.uses("ic", 1))
        return uses[0], uses[1]

    def _behind(self, quantity: str) -> tuple[str, ...]:
        """Quantities with bounds of their own that the bound of this one is made of; none for one that has its own."""
        kind, _, role = quantity.partition("_")
        if quantity == POWER_OF_TRANSISTOR:
            return ("ic", "vce")
        if role in self.roles and kind in ("u", "p", "umax", "pmax"):
            return (f"i_{role}",)
        if role in self.roles and kind == "i" and quantity not in self.space.network.signs:
            return parts_of_current(self.space.network, role)
        # Of two supplies VC and VE count from unlike ends.
        if quantity == "vc" and self.ends(quantity, 1)[1] and "vee" not in self.space.rails:
            return ("vce", "ve")
        return ()

    def _least_made_up(self, quantity: str, behind: tuple[str, ...], direction: int) -> Array:
        """Bound of a sum, or of a product of quantities each at its own end."""
        kind, _, role = quantity.partition("_")
        if kind in ("i", "vc"):
            return np.asarray(sum(self.least(name, direction) for name in behind))
        if direction < 0:
            return np.full(len(self.lo), -np.inf)
        parts = [np.maximum(self.least(name, 1), 0.0) for name in behind]
        if quantity == POWER_OF_TRANSISTOR:
            # Where leakage flows out of the base it takes back this much of VBE·IB at most.
            return np.asarray(parts[0] * parts[1] - MOST_VBE * self.icbo * (1.0 + 1.0 / self.hfe))
        ohms = self.low[role][self.lo[:, self.roles.index(role)]]
        # Of two parts the more loaded one carries half at least.
        share = 0.5 if kind.endswith("max") else 1.0
        return np.asarray(share * parts[0] * ohms if kind[0] == "u" else share * parts[0] ** 2 * ohms)

    def _least_figure(self, figure: str, direction: int) -> Array:
        """Bound of a small-signal figure, with every resistance and IC each at its own favourable end.

        The output share of what VCE leaves towards saturation is at most 1.
        """
        nothing = np.full(len(self.lo), -np.inf)
        if figure == "swing_to_saturation":
            room = np.maximum(-self.least("vce", -1) - self.space.transistor.vce_sat, 0.0)
            return nothing if direction > 0 else -room
        own = own_signs(self.space.network, figure, self.space.signal.bypass, roles=self.roles)
        along = own["ic"]
        if along is None:
            return nothing
        current = self.least("ic", 1) if along * direction >= 0 else -self.least("ic", -1)
        held = np.isfinite(current)
        ends = []
        for j, role in enumerate(self.roles):
            sign = own[role]
            if sign is None:
                held &= self.low[role][self.lo[:, j]] == self.high[role][self.hi[:, j]]
            ends.append(0 if not sign or sign * direction > 0 else 1)
        values, q = self.at(tuple(ends))
        r = {role: values[role] for role in self.roles}
        mixed = q._replace(ic=np.where(held, current, 0.0))
        stage = small_signal(self.frame.setting, self.frame.sources(values), r, mixed, self.hfe, self.t)
        return np.where(held, direction * np.asarray(getattr(stage, figure)), nothing)

    def least(self, quantity: str, direction: int) -> Array:
        """Lower bound over each block of direction·quantity at this point of the box."""
        if is_figure(quantity):
            return self._least_figure(quantity, direction)
        behind = self._behind(quantity)
        if behind:
            return self._least_made_up(quantity, behind, direction)
        ends, open_roles = self.ends(quantity, direction)
        values, q = self.at(ends)
        if quantity == "ic":
            return self._least_ic(ends, direction)
        if quantity == "vce":
            return self._least_vce(ends, open_roles, direction)
        nothing = np.full(len(self.lo), -np.inf)
        if open_roles:
            return nothing
        bound = direction * self.frame.measure((quantity,), values, q)
        # Where even the favourable corner leaves the reference without current, no member conducts: that bound holds.
        sound = self._carries(q) if quantity == "i_ref" and direction < 0 else self._sound(values, q)
        return np.where(sound, bound, nothing)

    def _carries(self, q: QPoint) -> NDArray[np.bool_]:
        return np.asarray((q.ib >= 0.0) & (q.ic >= self.icbo) & (q.vbe >= 0.0))

    def _sound(self, values: Values, q: QPoint) -> NDArray[np.bool_]:
        return self._carries(q) & self._conducts(values, q)

    def _conducts(self, values: Values, q: QPoint) -> NDArray[np.bool_]:
        """Whether the reference element carries current in its own direction, if there is one."""
        if self.space.reference is None:
            return np.ones(len(self.lo), dtype=bool)
        return np.asarray(self.frame.measure(("i_ref",), values, q) >= 0.0)

    def _vertices(self, ends: tuple[int, ...]) -> list[tuple[int, ...]]:
        base = [j for j, role in enumerate(self.roles) if role in self.space.network.base_side]
        corners = []
        for choice in itertools.product((0, 1), repeat=len(base)):
            corner = list(ends)
            for j, end in zip(base, choice, strict=True):
                corner[j] = end
            corners.append(tuple(corner))
        return corners

    def _least_ic(self, ends: tuple[int, ...], direction: int) -> Array:
        values, q = self.at(ends)
        conducts = self._conducts(values, q)
        if direction < 0:
            return np.where(conducts, -np.maximum(q.ic, self.floor), -np.inf)
        bound, sound = q.ic, (q.vbe >= 0.0) & conducts
        if np.any(q.ib < 0.0):
            every = [self.at(corner)[1] for corner in self._vertices(ends)]
            bound = np.minimum.reduce([point.ic for point in every])
            sound = conducts & np.logical_and.reduce([point.vbe >= 0.0 for point in every])
        return np.where(sound & (bound >= self.icbo), bound, 0.0)

    def _least_vce(self, ends: tuple[int, ...], open_roles: list[int], direction: int) -> Array:
        held = np.ones(len(self.lo), dtype=bool)
        for j in [j for j in open_roles if self.roles[j] != "re"]:
            condition = self.space.network.signs_while.get(("vce", self.roles[j]))
            if condition is None:
                return self._least_vce_over_feedback(direction)
            sign, role = condition
            least = self.at(self.ends("ic", 1)[0])[1].ic * self.low[role][self.lo[:, self.roles.index(role)]]
            # A role without width in a block needs no sign; where bands overlap even one value has an envelope of its own.
            own = self.roles[j]
            fixed = self.low[own][self.lo[:, j]] == self.high[own][self.hi[:, j]]
            held &= ((least >= self.vt) & (least > 0.0)) | fixed
            ends = _swap(ends, j, 0 if sign * direction > 0 else 1)
            open_roles = [k for k in open_roles if k != j]
        bound = self._vce_corner(ends, open_roles, direction)
        sound = self._sound(*self.at(ends))
        conducts = self._conducts(*self.at(ends))
        for j in open_roles:
            sound &= self._sound(*self.at(_swap(ends, j, 1)))
            conducts &= self._conducts(*self.at(_swap(ends, j, 1)))
        if not sound.all():
            every = np.minimum.reduce([self._vce_corner(c, open_roles, direction) for c in self._vertices(ends)])
            active = np.minimum.reduce([self.at(c)[1].ic for c in self._vertices(ends)]) >= self.icbo
            active &= conducts
            bound = np.where(sound, bound, np.where(active, every, -np.inf))
        return bound if held.all() else np.where(held, bound, self._least_vce_over_feedback(direction))

    def _least_vce_over_feedback(self, direction: int) -> Array:
        """Bound of VCE = VBE + R·I over a resistor from collector to base, each factor at its own end."""
        nothing = np.full(len(self.lo), -np.inf)
        network = self.space.network
        role = next((role.name for role in network.roles if set(role.nodes) == {"b", "c"} and role.name in self.roles), None)
        if role is None:
            return nothing
        j = self.roles.index(role)
        ic = direction * self.least("ic", direction)
        current = np.asarray(sum(self.least(name, direction) for name in network.carries.get(role, (f"i_{role}",))))
        ohms = np.where(current >= 0.0, self.low[role][self.lo[:, j]], self.high[role][self.hi[:, j]])
        known = np.isfinite(current) & np.isfinite(ic) & (ic > 0.0)
        vbe = self.space.transistor.vbe_at(np.where(known, ic, 1.0), self.t, self.device["delta"])
        return np.where(known, direction * vbe + ohms * np.where(known, current, 0.0), nothing)

    def _vce_corner(self, ends: tuple[int, ...], open_roles: list[int], direction: int) -> Array:
        """Least of direction·VCE over re at one corner of the other roles."""
        if not open_roles:
            return np.asarray(direction * self.at(ends)[1].vce)
        (j,) = open_roles
        values, small = self.at(_swap(ends, j, 0))
        large = self.at(_swap(ends, j, 1))[1]
        if direction > 0:
            return np.minimum(small.vce, large.vce)
        top = np.maximum(small.vce, large.vce)
        if self.space.transistor.vbe_model == "fixed":
            return -top
        r = {role: values[role] for role in self.roles}
        port = self.space.network.two_port(self.frame.sources(values), r, self.t)
        slope = np.asarray((port.z_bb - port.z_cb) / self.hfe + (port.z_bc - port.z_cc))
        vt = thermal_voltage(self.t)
        # A slope of zero or more has no stationary point: the comparison below is then false.
        with np.errstate(divide="ignore", invalid="ignore"):
            current = np.where(slope < 0.0, -vt / slope, np.inf)
            inside = (current < small.ic) & (current > large.ic)
            peak = small.vce + slope * (current - small.ic) + vt * np.log(current / small.ic)
        return -np.where(inside, np.maximum(peak, top), top)


def _swap(ends: tuple[int, ...], position: int, end: int) -> tuple[int, ...]:
    return (*ends[:position], end, *ends[position + 1 :])


class _Test(NamedTuple):
    """A bound of a block, and the roles whose low and high ends it depends on."""

    run: Callable[[Index, Index], Array]
    low: NDArray[np.bool_]
    high: NDArray[np.bool_]


class _Blocks(NamedTuple):
    """Blocks of list positions, the lower bound of each, and what each test has said of it (NaN: not asked yet)."""

    lo: Index
    hi: Index
    bound: Array
    known: Array

    def take(self, chosen: NDArray[np.bool_]) -> _Blocks:
        return _Blocks(self.lo[chosen], self.hi[chosen], self.bound[chosen], self.known[chosen])

    def join(self, other: _Blocks) -> _Blocks:
        return _Blocks(
            np.concatenate([self.lo, other.lo]),
            np.concatenate([self.hi, other.hi]),
            np.concatenate([self.bound, other.bound]),
            np.concatenate([self.known, other.known]),
        )


@dataclass
class _Room:
    """One space under search: its open blocks and the points of the box that bound them."""

    space: Space
    goal: Goal
    meter: Meter
    anchors: Mapping[tuple[str, int], Mapping[str, float]]
    weights: Sequence[float]
    asleep: Collection[Requirement] = ()

    def __post_init__(self) -> None:
        roles = self.space.roles
        self.logs = [np.log(self.space.lists[role].nominal) for role in roles]
        self.points: dict[tuple[tuple[str, float], ...], _Corners] = {}
        top = np.array([[len(x) - 1 for x in self.logs]], dtype=np.int32)
        self.blocks = _Blocks(np.zeros_like(top), top, np.zeros(1), np.full((1, len(self.tests)), np.nan))

    def corners(self, point: Mapping[str, float]) -> _Corners:
        """The solver of one point of the box."""
        key = tuple(sorted(point.items()))
        if key not in self.points:
            self.points[key] = _Corners(self.space, point, self.meter)
        return self.points[key]

    def at(self, point: Mapping[str, float], lo: Index, hi: Index) -> _Corners:
        """The solver of one point of the box, set to a batch of blocks."""
        corners = self.corners(point)
        corners.begin(lo, hi)
        return corners

    def raise_bounds(self, blocks: _Blocks, limit: float) -> None:
        """Find the lower bound on the drift of each block; infinite where no member can satisfy every requirement.

        The tests run from cheap to dear, and a block that one of them puts beyond `limit` is spared the rest: its bound is
        then what had been proved so far. A test whose ends did not move since the parent block keeps the parent's result.
        """
        open_blocks = np.arange(len(blocks.bound))
        for j, test in enumerate(self.tests):
            fresh = open_blocks[np.isnan(blocks.known[open_blocks, j])]
            if fresh.size:
                value = test.run(blocks.lo[fresh], blocks.hi[fresh])
                # A corner without a solution proves nothing.
                blocks.known[fresh, j] = np.where(np.isnan(value), 0.0, value)
            blocks.bound[open_blocks] = np.maximum(blocks.bound[open_blocks], blocks.known[open_blocks, j])
            open_blocks = open_blocks[blocks.bound[open_blocks] <= limit]
            if not open_blocks.size:
                break

    @cached_property
    def tests(self) -> list[_Test]:
        """Tests of a block in the order of their cost; each gives a bound, infinite where it excludes every member."""
        needs = self.space.requirements
        rest = [need for need in needs if need.rule is None or need.rule.static is None]
        tests = [self._static_test(need) for need in needs if need not in rest]
        for need in rest:
            if need.judged == "nominal":
                tests.append(self._sum_test(need, {side: {} for side in need.sides}))
        for (quantity, side), point in self.anchors.items():
            own = [n for n in rest if n.judged == "box" and n.sums == ((quantity,),) and side in n.sides]
            run = partial(self._excursion, quantity, side, point, own)
            tests.append(_Test(run, *self.corners(point).uses(quantity, side)))
        for need in rest:
            if need in self.asleep:
                continue
            bounded = [(*need.sums[0], side) in self.anchors for side in need.sides] if len(need.sums) == 1 else [False]
            if need.judged == "box" and not all(bounded):
                tests.append(self._sum_test(need, {side: self.anchors["ic", side] for side in need.sides}))
        return tests

    def _static_test(self, need: Requirement) -> _Test:
        assert need.rule is not None
        assert need.rule.static_signs is not None
        signs = need.rule.static_signs(self.space.network)
        uses = np.zeros((2, len(self.space.roles)), dtype=bool)
        for j, role in enumerate(self.space.roles):
            for side in need.sides:
                if role in signs:
                    uses[0 if signs[role] * side > 0 else 1, j] = True
        return _Test(partial(self._static, need, signs), uses[0], uses[1])

    def _sum_test(self, need: Requirement, points: Mapping[int, Mapping[str, float]]) -> _Test:
        uses = np.zeros((2, len(self.space.roles)), dtype=bool)
        for side, point in points.items():
            for name in (name for names in need.sums for name in names):
                uses |= np.stack(self.corners(point).uses(name, side))
        return _Test(partial(self._sums, need, points), uses[0], uses[1])

    def _excursion(
        self, quantity: str, side: int, point: Mapping[str, float], needs: Sequence[Requirement], lo: Index, hi: Index
    ) -> Array:
        """Least excursion of a quantity to one side of its goal, and the windows and limits on it."""
        value = self.at(point, lo, hi).least(quantity, side)
        goal = self.goal.aims.get(quantity)
        bound = np.zeros(len(lo)) if goal is None else value / goal - side
        for need in needs:
            bound = np.where(need.side(side).passes(side * value), bound, np.inf)
        return bound

    def _static(self, need: Requirement, signs: Mapping[str, int], lo: Index, hi: Index) -> Array:
        """A limit on resistances alone, at its favourable corner."""
        rule = need.rule
        assert rule is not None
        assert rule.static is not None
        alive = np.ones(len(lo), dtype=bool)
        for side in need.sides:
            r = {
                role: self.space.lists[role].nominal[(lo if signs.get(role, 0) * side > 0 else hi)[:, j]]
                for j, role in enumerate(self.space.roles)
            }
            alive &= need.side(side).passes(np.asarray(rule.static(self.space.network, r)))
        return np.where(alive, 0.0, np.inf)

    def _sums(
        self, need: Requirement, points: Mapping[int, Mapping[str, float]], lo: Index, hi: Index
    ) -> Array:
        """A limit on a sum of quantities, at one point of the box for each side."""
        alive = np.ones(len(lo), dtype=bool)
        for side, point in points.items():
            corner = self.at(point, lo, hi)
            for names in need.sums:
                value = sum((corner.least(name, side) for name in names), np.zeros(len(lo)))
                alive &= need.side(side).passes(side * value)
        return np.where(alive, 0.0, np.inf)

    def best(self) -> _Blocks:
        """Take out the open blocks of least bound."""
        bound = self.blocks.bound
        chosen = np.zeros(len(bound), dtype=bool)
        chosen[np.argpartition(bound, BATCH)[:BATCH] if len(bound) > BATCH else slice(None)] = True
        taken, self.blocks = self.blocks.take(chosen), self.blocks.take(~chosen)
        return taken

    def prune(self, limit: float, pool: _Pool) -> bool:
        """Drop what cannot be listed any more; True while blocks are left."""
        self.blocks = pool.sift(self.blocks, limit)
        return bool(self.blocks.bound.size)

    def put(self, blocks: _Blocks, pool: _Pool) -> None:
        """Bound new blocks and keep those that may hold something to list."""
        limit = pool.threshold()
        self.raise_bounds(blocks, limit)
        self.blocks = self.blocks.join(pool.sift(blocks, limit))

    def settle(self, index: Index, bound: Array, pool: _Pool, number: int) -> None:
        """Assess blocks of one member, the most promising first."""
        order = np.argsort(bound, kind="stable")
        index, bound = index[order], bound[order]
        size, start = FIRST, 0
        while start < len(index):
            limit = pool.threshold()
            batch, known = index[start : start + size], bound[start : start + size]
            start += size
            size = min(2 * size, ASSESS)
            if known[0] > limit:
                pool.beyond = min(pool.beyond, float(known[0]))
                return
            found, beyond = assess(self.space, batch, self.goal, self.meter, limit)
            pool.beyond = min(pool.beyond, beyond)
            pool.add(number, found)

    def split(self, blocks: _Blocks) -> _Blocks:
        """Halve each block along the role whose range matters most: its ratio of resistance times its weight."""
        lo, hi = blocks.lo, blocks.hi
        weighed = zip(self.logs, self.weights, strict=True)
        widths = np.stack([w * (x[hi[:, j]] - x[lo[:, j]]) for j, (x, w) in enumerate(weighed)], axis=1)
        # Equal values in a list have no width but still have to be told apart.
        widths = np.where(hi > lo, widths + 1e-12, -1.0)
        role = widths.argmax(axis=1)
        rows = np.arange(len(lo))
        middle = (lo[rows, role] + hi[rows, role]) // 2
        upper_lo, lower_hi = lo.copy(), hi.copy()
        lower_hi[rows, role] = middle
        upper_lo[rows, role] = middle + 1
        low, high = (np.stack([getattr(test, end) for test in self.tests], axis=1) for end in ("low", "high"))
        below = np.where(high[role], np.nan, blocks.known)
        above = np.where(low[role], np.nan, blocks.known)
        return _Blocks(lo, lower_hi, blocks.bound, below).join(_Blocks(upper_lo, hi, blocks.bound, above))


@dataclass
class _Pool:
    """The qualifying candidates found so far and the least drift of what was turned away."""

    top: int
    gap: float = 0.0
    found: dict[tuple[int, tuple[int, ...]], Found] = field(default_factory=dict)
    beyond: float = np.inf

    def threshold(self) -> float:
        """Drift above which nothing can be listed any more."""
        if len(self.found) < self.top:
            return np.inf
        drifts = np.partition([f.drift for f in self.found.values()], self.top - 1)
        return float(drifts[self.top - 1]) * (1.0 - self.gap if self.gap else 1.0 + TIE)

    def sift(self, blocks: _Blocks, limit: float) -> _Blocks:
        """The blocks that may hold something to list; notes the least bound of the others, unless nothing qualifies there."""
        near = blocks.bound <= limit
        near &= np.isfinite(blocks.bound)
        far = ~near & np.isfinite(blocks.bound)
        if far.any():
            self.beyond = min(self.beyond, float(blocks.bound[far].min()))
        return blocks if near.all() else blocks.take(near)

    def least(self) -> float:
        """Drift of the worst candidate that is listed."""
        listed = sorted(f.drift for f in self.found.values())[: self.top]
        return listed[-1] * (1.0 + TIE) if len(listed) == self.top else np.inf

    def add(self, room: int, fresh: Sequence[Found]) -> None:
        self.found.update({(room, f.index): f for f in fresh})
        limit = max(self.threshold(), self.least())
        for key, f in list(self.found.items()):
            if f.drift > limit:
                self.beyond = min(self.beyond, f.drift)
                del self.found[key]


def _pilot(space: Space, goal: Goal, meter: Meter) -> Index:
    """A candidate whose nominal Q-point is near the goal, by a coarse look: where to ask which points decide."""
    axes = [_thin(space.lists[role].nominal.size, 9) for role in space.roles]
    index = np.stack([a.ravel() for a in np.meshgrid(*axes, indexing="ij")], axis=1).astype(np.int32)
    q = space.box(index, meter)
    point = q.solve(q.nominal(), active_law=True)
    with np.errstate(divide="ignore"):
        miss = np.abs(np.log(np.maximum(point.ic, 1e-300) / goal.ic))
    for quantity, aim in goal.aims.items():
        if quantity != "ic":
            miss = miss + np.abs(q.measure((quantity,), q.nominal(), point) / aim - 1.0)
    if space.reference is not None:
        # Without current in the reference another law rules, and its deciding points say nothing.
        feeble = q.measure(("i_ref",), q.nominal(), point) < space.reference.current
        miss = miss + np.where(feeble, FEEBLE, 0.0)
    return index[[int(miss.argmin())]]


def _thin(size: int, count: int) -> Index:
    return np.unique(np.linspace(0, size - 1, min(size, count)).round().astype(np.int32))


def _bearings(
    space: Space, index: Index, goal: Goal, meter: Meter
) -> tuple[dict[tuple[str, int], dict[str, float]], list[float], list[Requirement]]:
    """What one candidate tells about its surroundings.

    The points of the box that decide its extremes, which serve as the points of every bound; the weight of each role: how far
    IC, and VCE where it has a target, move with it, in ratio; and the limits on stress and signal that are far from binding
    here, on which no block is worth a test. No choice touches what is proved.
    """
    box = space.box(index, meter)
    anchors = {(name, side): box.extreme((name,), side, thorough=False).anchor(0) for name, side in wanted(goal)}
    start = box.nominal()
    moved = {role: np.tile(start[role], len(space.roles) + 1) for role in space.roles}
    for j, role in enumerate(space.roles):
        moved[role][j + 1] *= 1.0 + STEP
    q = box.solve({**start, **moved}, active_law=True)
    effect = np.abs(q.ic / goal.ic - q.ic[0] / goal.ic)
    for quantity, aim in goal.aims.items():
        moves = np.broadcast_to(box.measure((quantity,), {**start, **moved}, q), effect.shape)
        effect = np.maximum(effect, np.abs(moves - moves[0]) / aim)
    nominal = box.solve(start)
    idle = []
    for need in space.requirements:
        if need.rated is not None or is_dear(need):
            margins = [float(need.margin(box.measure(names, start, nominal)).min()) for names in need.sums]
            idle += [need] if min(margins) > FAR else []
    return anchors, [max(float(e) / STEP, LEAST_WEIGHT) for e in effect[1:]], idle


def search(
    spaces: Sequence[Space],
    goal: Goal,
    *,
    top: int = 10,
    gap: float = 0.0,
    first: bool = False,
    most: float = np.inf,
    progress: Callable[[float, float, int], bool] | None = None,
) -> Outcome:
    """Find the candidates of least Q-point drift, and prove that there are none better.

    Parameters
    ----------
    spaces : sequence of Space
        The networks with their value lists; all compete for the same places.
    goal : Goal
        What drift is measured from.
    top : int
        How many to prove [-].
    gap : float
        Relative gap that is left unproved [-].
    first : bool
        Whether to stop as soon as anything qualifies.
    most : float
        Q-point solves after which to stop [-].
    progress : callable, optional
        ``progress(bound, best, open_blocks)`` after every batch; False stops the search.

    Returns
    -------
    Outcome
        Equal to sorting every combination by drift and dropping those that fail a requirement, in far fewer solves.
    """
    start = time.perf_counter()
    meter = Meter()
    pool = _Pool(top, gap)
    rooms: list[_Room] = []
    for number, space in enumerate(spaces):
        pilot = _pilot(space, goal, meter)
        seeds = _coarse(_Room(space, goal, meter, *_bearings(space, pilot, goal, meter)), top, most)
        if seeds:
            pool.add(number, seeds)
            best = min(seeds, key=lambda f: f.drift)
            pilot = np.array([best.index], dtype=np.int32)
        rooms.append(_Room(space, goal, meter, *_bearings(space, pilot, goal, meter)))
    complete = _run(rooms, pool, progress, first, most)
    left = min((float(r.blocks.bound.min()) for r in rooms if r.blocks.bound.size), default=np.inf)
    found = sorted(pool.found.values(), key=lambda f: f.drift)
    spare = found[top].drift if len(found) > top else np.inf
    if complete:
        status: Status = "optimal" if found else "infeasible"
    else:
        status = "feasible" if found else "unknown"
    return Outcome(
        status=status,
        found=tuple(found),
        bound=min(left, pool.beyond, spare),
        combinations=sum(space.combinations for space in spaces),
        evaluated=meter.solves,
        complete=complete,
        seconds=time.perf_counter() - start,
    )


def _coarse(room: _Room, top: int, most: float) -> list[Found]:
    """The best of a thinned-out space: good candidates to start from, never an answer by themselves."""
    space = room.space
    positions = {role: _thin(space.lists[role].nominal.size, COARSE) for role in space.roles}
    if all(len(positions[role]) == space.lists[role].nominal.size for role in space.roles):
        return []
    thin = replace(space, lists={role: space.lists[role].take(at) for role, at in positions.items()})
    pool = _Pool(top)
    _run([_Room(thin, room.goal, room.meter, room.anchors, room.weights, room.asleep)], pool, None, most=most)
    return [
        replace(f, space=space, index=tuple(int(positions[r][i]) for r, i in zip(space.roles, f.index, strict=True)))
        for f in pool.found.values()
    ]


def _run(
    rooms: Sequence[_Room],
    pool: _Pool,
    progress: Callable[[float, float, int], bool] | None,
    first: bool = False,
    most: float = np.inf,
) -> bool:
    """Work through open blocks until what is left cannot be listed; True when that is proved."""
    for room in rooms:
        room.put(room.best(), pool)
    while True:
        if (first and pool.found) or rooms[0].meter.solves > most:
            return False
        limit = pool.threshold()
        open_rooms = [room for room in rooms if room.prune(limit, pool)]
        if not open_rooms:
            return True
        room = min(open_rooms, key=lambda room: float(room.blocks.bound.min()))
        least = float(room.blocks.bound.min())
        if progress is not None and not progress(least, limit, sum(len(r.blocks.bound) for r in open_rooms)):
            return False
        blocks = room.best()
        single = (blocks.lo == blocks.hi).all(axis=1)
        room.settle(blocks.lo[single], blocks.bound[single], pool, rooms.index(room))
        room.put(room.split(pool.sift(blocks.take(~single), pool.threshold())), pool)
