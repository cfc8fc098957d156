"""Blocks of list positions, and the tests that bound the drift of every member of a block."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property, partial
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from synth.box import Meter
from synth.limits import Requirement
from synth.networks.form import Array
from synth.rss import Spot
from synth.search.axes import Axis
from synth.search.corners import Corners
from synth.spaces import Goal, Index, Space


class Probe(NamedTuple):
    """A bound of a block, and the roles whose low and high ends it depends on."""

    run: Callable[[Index, Index], Array]
    low: NDArray[np.bool_]
    high: NDArray[np.bool_]


class Blocks(NamedTuple):
    """Blocks of list positions, the lower bound of each, and what each test has said of it (NaN: not asked yet).

    `axes` are the lower bounds in the further axes of a frontier, one column each.
    """

    lo: Index
    hi: Index
    bound: Array
    known: Array
    axes: Array

    def take(self, chosen: NDArray[np.bool_] | NDArray[np.integer] | slice) -> Blocks:
        """Some of the blocks."""
        return Blocks(self.lo[chosen], self.hi[chosen], self.bound[chosen], self.known[chosen], self.axes[chosen])

    def join(self, other: Blocks) -> Blocks:
        """These blocks and others behind them."""
        return Blocks(
            np.concatenate([self.lo, other.lo]),
            np.concatenate([self.hi, other.hi]),
            np.concatenate([self.bound, other.bound]),
            np.concatenate([self.known, other.known]),
            np.concatenate([self.axes, other.axes]),
        )

    @property
    def single(self) -> NDArray[np.bool_]:
        """Which blocks have one member only."""
        return np.asarray((self.lo == self.hi).all(axis=1))

    @property
    def members(self) -> Array:
        """Logarithm of the number of members [-]."""
        return np.asarray(np.log1p(self.hi - self.lo).sum(axis=1))


@dataclass(eq=False)
class Room:
    """One space under search: its open blocks and the points of the box that bound them."""

    space: Space
    goal: Goal
    meter: Meter
    anchors: Mapping[tuple[str, int], Mapping[str, float]]
    weights: Sequence[float]
    asleep: Collection[Requirement] = ()
    moves: Mapping[str, Mapping[str, tuple[Spot, Spot]]] = field(default_factory=dict)
    axes: Sequence[Axis] = ()

    def __post_init__(self) -> None:
        self.logs = [np.log(self.space.lists[role].nominal) for role in self.space.roles]
        self.points: dict[tuple[tuple[str, float], ...], Corners] = {}
        top = np.array([[len(x) - 1 for x in self.logs]], dtype=np.int32)
        self.blocks = self.fresh(np.zeros_like(top), top)

    def fresh(self, lo: Index, hi: Index) -> Blocks:
        """Blocks of which nothing is known yet."""
        n = len(lo)
        return Blocks(lo, hi, np.zeros(n), np.full((n, len(self.tests)), np.nan), np.full((n, len(self.axes)), -np.inf))

    def twin(self) -> Room:
        """A room that bounds the same way and can work beside this one; it counts its own solves."""
        return Room(self.space, self.goal, Meter(), self.anchors, self.weights, self.asleep, self.moves, self.axes)

    def corners(self, point: Mapping[str, float]) -> Corners:
        """The solver of one point of the box."""
        key = tuple(sorted(point.items()))
        if key not in self.points:
            self.points[key] = Corners(self.space, point, self.meter)
        return self.points[key]

    def at(self, point: Mapping[str, float], lo: Index, hi: Index) -> Corners:
        """The solver of one point of the box, set to a batch of blocks."""
        corners = self.corners(point)
        corners.begin(lo, hi)
        return corners

    def place(self, blocks: Blocks) -> None:
        """Find the lower bounds of each block in the further axes of a frontier."""
        for k, axis in enumerate(self.axes):
            value = axis.bound(self.space, self.at({}, blocks.lo, blocks.hi))
            # A corner without a solution proves nothing.
            blocks.axes[:, k] = np.fmax(blocks.axes[:, k], value)

    def raise_bounds(self, blocks: Blocks, limit: Array | float) -> None:
        """Find the lower bound on the drift of each block; infinite where no member can satisfy every requirement.

        The tests run from cheap to dear, and a block that one of them puts beyond `limit` is spared the rest: its bound is
        then what had been proved so far. A test whose ends did not move since the parent block keeps the parent's result.
        """
        limits = np.broadcast_to(limit, len(blocks.bound))
        open_blocks = np.arange(len(blocks.bound))
        for j, test in enumerate(self.tests):
            fresh = open_blocks[np.isnan(blocks.known[open_blocks, j])]
            if fresh.size:
                value = test.run(blocks.lo[fresh], blocks.hi[fresh])
                # A corner without a solution proves nothing.
                blocks.known[fresh, j] = np.where(np.isnan(value), 0.0, value)
            blocks.bound[open_blocks] = np.maximum(blocks.bound[open_blocks], blocks.known[open_blocks, j])
            open_blocks = open_blocks[blocks.bound[open_blocks] <= limits[open_blocks]]
            if not open_blocks.size:
                break

    @cached_property
    def tests(self) -> list[Probe]:
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
            tests.append(Probe(run, *self.corners(point).uses(quantity, side)))
        for quantity in self.moves:
            every = np.ones(len(self.space.roles), dtype=bool)
            tests.append(Probe(partial(self._squares, quantity), every, every))
        for need in rest:
            if need in self.asleep:
                continue
            bounded = [(*need.sums[0], side) in self.anchors for side in need.sides] if len(need.sums) == 1 else [False]
            if need.judged == "box" and not all(bounded):
                tests.append(self._sum_test(need, {side: self.anchors["ic", side] for side in need.sides}))
        return tests

    def _static_test(self, need: Requirement) -> Probe:
        assert need.rule is not None
        assert need.rule.static_signs is not None
        signs = need.rule.static_signs(self.space.network)
        uses = np.zeros((2, len(self.space.roles)), dtype=bool)
        for j, role in enumerate(self.space.roles):
            for side in need.sides:
                if role in signs:
                    uses[0 if signs[role] * side > 0 else 1, j] = True
        return Probe(partial(self._static, need, signs), uses[0], uses[1])

    def _sum_test(self, need: Requirement, points: Mapping[int, Mapping[str, float]]) -> Probe:
        uses = np.zeros((2, len(self.space.roles)), dtype=bool)
        for side, point in points.items():
            for name in (name for names in need.sums for name in names):
                uses |= np.stack(self.corners(point).uses(name, side))
        return Probe(partial(self._sums, need, points), uses[0], uses[1])

    def _excursion(
        self, quantity: str, side: int, point: Mapping[str, float], needs: Sequence[Requirement], lo: Index, hi: Index
    ) -> Array:
        """Least excursion of a quantity to one side of its goal, and the windows and limits on it."""
        value = self.at(point, lo, hi).least(quantity, side)
        goal, weight = self.goal.aims.get(quantity), self.goal.weight(quantity)
        counts = goal is not None and weight > 0.0 and not self.goal.rss
        bound = weight * (value / goal - side) if counts and goal is not None else np.zeros(len(lo))
        for need in needs:
            bound = np.where(need.side(side).passes(side * value), bound, np.inf)
        return bound

    def _squares(self, quantity: str, lo: Index, hi: Index) -> Array:
        """Least root sum square: each move is at least what two intervals leave between them, and no move exceeds the whole."""
        aim, least = self.goal.aims[quantity], {}
        moves = dict(self.moves[quantity])
        start = {"temperature": self.space.temperature.nominal}
        nothing = np.zeros(len(lo))

        def ends(spot: Spot) -> dict[int, Array]:
            key = tuple(sorted(spot.items()))
            if key not in least:
                corner = self.at(spot, lo, hi)
                least[key] = {side: corner.least(quantity, side) for side in (1, -1)}
            return least[key]

        def off(spot: Spot) -> Array:
            return np.asarray(np.maximum.reduce([nothing, *(ends(spot)[side] - side * aim for side in (1, -1))]))

        def move(there: Spot, here: Spot) -> Array:
            return np.asarray(np.maximum.reduce([nothing, *(ends(there)[side] + ends(here)[-side] for side in (1, -1))]))

        # No one move takes the quantity further from its target than centring, temperature and itself together.
        alone = np.maximum.reduce([off(there) for there, _ in moves.values()])
        steady = off(start) + (move(*moves.pop("temperature")) if "temperature" in moves else nothing)
        squares = sum((move(there, here) ** 2 for there, here in moves.values()), nothing)
        weight = self.goal.weight(quantity)
        return np.asarray(weight * np.maximum(alone, steady + np.sqrt(squares)) / aim)

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

    def split(self, blocks: Blocks) -> Blocks:
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
        lower = Blocks(lo, lower_hi, blocks.bound, below, blocks.axes)
        return lower.join(Blocks(upper_lo, hi, blocks.bound, above, blocks.axes))
