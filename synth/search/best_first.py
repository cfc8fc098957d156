"""Exact search: best-first branch and bound over index rectangles of the sorted value lists.

The open blocks of least bound are taken in batches, halved and bounded again, until what is left cannot be kept. Blocks of
one member are assessed over the whole box. How many blocks are open is bounded: beyond `MOST_OPEN` the smallest ones go
first, which empties the heap as a search in depth does, and proves the same.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from concurrent.futures import Executor, ThreadPoolExecutor
from contextlib import AbstractContextManager, nullcontext
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from synth.box import Meter
from synth.limits import Requirement
from synth.networks.form import Array
from synth.rss import Spot, deciding_moves
from synth.search.axes import Axis
from synth.search.blocks import Blocks, Room
from synth.search.pools import Best, Front, Member, Pool, sift
from synth.spaces import Found, Goal, Index, Space, assess, is_dear, wanted

Status = Literal["optimal", "feasible", "infeasible", "unknown"]
Progress = Callable[[float, float, int], bool]
"""``progress(bound, best, open_blocks)`` after every batch; False stops the search."""
Stop = Callable[[], bool]
"""Asked between steps of some tens of milliseconds; True stops the search."""

BATCH = 2048
"""Blocks taken at a time."""
PORTION = 1024
"""Blocks bounded at a time, by one of those that work."""
FIRST, ASSESS = 16, 128
"""Candidates assessed at a time, first and later: each batch profits from what the one before found."""
COARSE = 40
"""List length that the coarse pass aims at."""
MOST_OPEN = 400_000
"""Open blocks beyond which the search goes into depth; a block takes about 150 bytes, and twice that while it moves."""
MOST_MEMBERS = 200
"""Candidates of a frontier beyond which it is cut off; those of least drift stay [-]."""
STEP, LEAST_WEIGHT = 0.01, 0.1
"""Relative step and floor of a role's weight in the choice of what to split."""
FAR = 0.4
"""Nominal margin from which a limit on stress or signal is left to the assessment of single candidates [-]."""
FEEBLE = 10.0
"""What a pilot is put back by whose reference element lacks current; more than any miss that matters."""


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


@dataclass(frozen=True, kw_only=True)
class Frontier:
    """The candidates that nothing beats along every axis at once, and what is proved of them.

    Parameters
    ----------
    members : tuple of Member
        Ascending in score.
    complete : bool
        Whether these are all.
    bound : float
        Score below which the members are all there are [-]; infinite if `complete`.
    evaluated : int
        Scalar Q-point solves spent.
    seconds : float
        Time spent [s].
    """

    members: tuple[Member, ...]
    complete: bool
    bound: float
    evaluated: int
    seconds: float


def search(
    spaces: Sequence[Space],
    goal: Goal,
    *,
    top: int = 10,
    gap: float = 0.0,
    first: bool = False,
    most: float = np.inf,
    progress: Progress | None = None,
    stop: Stop | None = None,
    jobs: int = 1,
) -> Outcome:
    """Find the candidates of least score, which is the Q-point drift unless the goal has another metric, and prove it.

    Parameters
    ----------
    spaces : sequence of Space
        The networks with their value lists; all compete for the same places.
    goal : Goal
        What drift is measured from, and what ranks.
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
    stop : callable, optional
        Asked often, in the coarse passes too; True stops the search.
    jobs : int
        Threads that bound blocks; the outcome is the same to the last bit, whatever their number [-].

    Returns
    -------
    Outcome
        Equal to sorting every combination by score and dropping those that fail a requirement, in far fewer solves.
    """
    start = time.perf_counter()
    meter = Meter()
    pool = Best(top, gap)
    with _crew(jobs) as crew:
        rooms = _rooms(spaces, goal, meter, pool, most, stop, first=first)
        work = _Work(rooms, pool, progress, stop or _never, first, most, crew)
        complete = work.run()
    found = sorted(pool.found.values(), key=lambda f: f.score)
    spare = found[top].score if len(found) > top else np.inf
    if complete:
        status: Status = "optimal" if found else "infeasible"
    else:
        status = "feasible" if found else "unknown"
    return Outcome(
        status=status,
        found=tuple(found),
        bound=min(work.left, pool.beyond, spare),
        combinations=sum(space.combinations for space in spaces),
        evaluated=meter.solves,
        complete=complete,
        seconds=time.perf_counter() - start,
    )


def frontier(
    spaces: Sequence[Space],
    goal: Goal,
    axes: Sequence[Axis],
    *,
    members: int = MOST_MEMBERS,
    most: float = np.inf,
    progress: Progress | None = None,
    stop: Stop | None = None,
    jobs: int = 1,
) -> Frontier:
    """Find the candidates that no other beats: as good in score and along every axis, and better in one of them.

    Parameters
    ----------
    spaces : sequence of Space
        The networks with their value lists.
    goal : Goal
        What drift is measured from, and what ranks.
    axes : sequence of Axis
        What counts besides the score.
    members : int
        How many to find; with more the frontier is cut off, and those of least score are kept [-].
    most : float
        Q-point solves after which to stop [-].
    progress, stop : callable, optional
        As in `search`.
    jobs : int
        As in `search` [-].

    Returns
    -------
    Frontier
        Equal to keeping of all qualifying combinations those that none beats, and one of those that are equal.

    Notes
    -----
    A member that is as good along every further axis as the bounds of a block sets the score that the block must stay
    below; blocks are taken in ascending score, so a member that scores less than anything open is final.
    """
    start = time.perf_counter()
    meter = Meter()
    pool = Front(members)
    with _crew(jobs) as crew:
        rooms = _rooms(spaces, goal, meter, pool, most, stop, axes)
        work = _Work(rooms, pool, progress, stop or _never, False, most, crew)
        complete = work.run()
    bound = np.inf if complete else work.left
    return Frontier(
        # What is not yet safe from what is open is no member for certain.
        members=tuple(sorted((m for m in pool.members if m.found.score < bound), key=lambda m: (m.found.score, m.axes))),
        complete=complete,
        bound=bound,
        evaluated=meter.solves,
        seconds=time.perf_counter() - start,
    )


def _crew(jobs: int) -> AbstractContextManager[Executor | None]:
    return ThreadPoolExecutor(jobs) if jobs > 1 else nullcontext()


def _never() -> bool:
    return False


def _rooms(
    spaces: Sequence[Space],
    goal: Goal,
    meter: Meter,
    pool: Pool,
    most: float,
    stop: Stop | None,
    axes: Sequence[Axis] = (),
    *,
    first: bool = False,
) -> list[Room]:
    """Every space, ready to search, with the candidates of its coarse pass in the pool."""
    rooms: list[Room] = []
    for number, space in enumerate(spaces):
        pilot = _pilot(space, goal, meter)
        room = Room(space, goal, meter, *_bearings(space, pilot, goal, meter), axes)
        seeds = _coarse(room, pool, most, stop or _never, first)
        if seeds:
            pool.add(number, seeds, _figures(axes, space, seeds, meter))
            best = min(seeds, key=lambda f: f.score)
            pilot = np.array([best.index], dtype=np.int32)
            room = Room(space, goal, meter, *_bearings(space, pilot, goal, meter), axes)
        rooms.append(room)
    return rooms


def _figures(axes: Sequence[Axis], space: Space, found: Sequence[Found], meter: Meter) -> Array:
    """Figures of candidates along the further axes, shape (n, axes)."""
    if not axes or not found:
        return np.zeros((len(found), len(axes)))
    index = np.array([f.index for f in found], dtype=np.int32)
    return np.stack([axis.value(space, index, meter) for axis in axes], axis=1)


def _coarse(room: Room, pool: Pool, most: float, stop: Stop, first: bool) -> list[Found]:
    """The best of a thinned-out space: good candidates to start from, never an answer by themselves."""
    space = room.space
    positions = {role: _thin(space.lists[role].nominal.size, COARSE) for role in space.roles}
    if all(len(positions[role]) == space.lists[role].nominal.size for role in space.roles):
        return []
    thin = space.thinned(positions)
    own: Best | Front = Best(pool.top) if isinstance(pool, Best) else Front(MOST_MEMBERS)
    few = Room(thin, room.goal, room.meter, room.anchors, room.weights, room.asleep, room.moves, room.axes)
    _Work([few], own, None, stop, first, most).run()
    kept = own.found.values() if isinstance(own, Best) else [member.found for member in own.members]
    return [
        replace(f, space=space, index=tuple(int(positions[r][i]) for r, i in zip(space.roles, f.index, strict=True)))
        for f in kept
    ]


@dataclass
class _Work:
    """The loop: rooms with their open blocks, and what is kept."""

    rooms: Sequence[Room]
    pool: Pool
    progress: Progress | None
    stop: Stop
    first: bool
    most: float
    crew: Executor | None = None

    def __post_init__(self) -> None:
        self._twins: dict[tuple[int, int], Room] = {}

    @property
    def open(self) -> int:
        """Open blocks of all rooms."""
        return sum(len(room.blocks.bound) for room in self.rooms)

    @property
    def left(self) -> float:
        """Least bound of what is open; infinite if nothing is."""
        return min((float(room.blocks.bound.min()) for room in self.rooms if room.blocks.bound.size), default=np.inf)

    def run(self) -> bool:
        """Work through open blocks until what is left cannot be kept; True when that is proved."""
        for room in self.rooms:
            self._put(room, self._take(room, deep=False))
        while True:
            if (self.first and self.pool.count) or self.rooms[0].meter.solves > self.most or self.stop():
                return False
            limit = self.pool.threshold()
            for room in self.rooms:
                room.blocks = sift(room.blocks, limit, self.pool)
            open_rooms = [room for room in self.rooms if room.blocks.bound.size]
            if not open_rooms:
                return True
            room = min(open_rooms, key=lambda room: float(room.blocks.bound.min()))
            least = float(room.blocks.bound.min())
            if self.pool.full(least):
                return False
            if self.progress is not None and not self.progress(least, limit, self.open):
                return False
            blocks = self._take(room, deep=self.open > MOST_OPEN)
            single = blocks.single
            self._settle(room, blocks.take(single))
            rest = blocks.take(~single)
            self._put(room, room.split(sift(rest, self.pool.limit(rest.axes), self.pool)))

    def _take(self, room: Room, deep: bool) -> Blocks:
        """Take out the open blocks of least bound, or the smallest ones."""
        key = room.blocks.members if deep else room.blocks.bound
        chosen: NDArray[np.bool_] = np.zeros(len(key), dtype=bool)
        chosen[np.argpartition(key, BATCH)[:BATCH] if len(key) > BATCH else slice(None)] = True
        taken, room.blocks = room.blocks.take(chosen), room.blocks.take(~chosen)
        return taken

    def _put(self, room: Room, blocks: Blocks) -> None:
        """Bound new blocks and keep those that may hold something to keep.

        They are bounded in portions whose size does not depend on how many work on them: so nothing that is found does.
        """
        portions = [blocks.take(slice(start, start + PORTION)) for start in range(0, len(blocks.bound), PORTION)]
        if self.crew is None or len(portions) == 1:
            limits = [self._bound(room, portion) for portion in portions]
        else:
            number = self.rooms.index(room)
            rooms = [room, *(self._twin(number, k) for k in range(1, len(portions)))]
            limits = list(self.crew.map(self._bound, rooms, portions))
            for twin in rooms[1:]:
                room.meter.solves += twin.meter.solves
                twin.meter.solves = 0
        for portion, limit in zip(portions, limits, strict=True):
            room.blocks = room.blocks.join(sift(portion, limit, self.pool))

    def _bound(self, room: Room, blocks: Blocks) -> Array | float:
        """Bound blocks in place; the score above which nothing can be kept of them."""
        room.place(blocks)
        limit = self.pool.limit(blocks.axes)
        room.raise_bounds(blocks, limit)
        return limit

    def _twin(self, number: int, portion: int) -> Room:
        if (number, portion) not in self._twins:
            self._twins[number, portion] = self.rooms[number].twin()
        return self._twins[number, portion]

    def _settle(self, room: Room, blocks: Blocks) -> None:
        """Assess blocks of one member, the most promising first; what a stop leaves goes back."""
        blocks = blocks.take(np.argsort(blocks.bound, kind="stable"))
        size, start = FIRST, 0
        while start < len(blocks.bound):
            if start and self.stop():
                room.blocks = room.blocks.join(blocks.take(slice(start, None)))
                return
            batch = blocks.take(slice(start, start + size))
            start += size
            size = min(2 * size, ASSESS)
            batch = sift(batch, self.pool.limit(batch.axes), self.pool)
            found, beyond = assess(room.space, batch.lo, room.goal, room.meter, self.pool.limit(batch.axes))
            self.pool.beyond = min(self.pool.beyond, beyond)
            self.pool.add(self.rooms.index(room), found, _figures(room.axes, room.space, found, room.meter))


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
) -> tuple[dict[tuple[str, int], dict[str, float]], list[float], list[Requirement], dict[str, dict[str, tuple[Spot, Spot]]]]:
    """What one candidate tells about its surroundings.

    The points of the box that decide its extremes, which serve as the points of every bound; the weight of each role: how far
    IC, and VCE where it has a target, move with it, in ratio; the limits on stress and signal that are far from binding
    here, on which no block is worth a test; and where the root sum square ranks the lone moves that count. No choice touches
    what is proved.
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
    squares = deciding_moves(box, goal.aims) if goal.rss else {}
    return anchors, [max(float(e) / STEP, LEAST_WEIGHT) for e in effect[1:]], idle, squares
