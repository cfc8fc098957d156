"""Candidates of one stage that a board may want: all of them within a drift allowance, less those that never help.

**What is enumerated.** Every candidate that meets the stage's limits and whose drift exceeds the stage's own best by no more
than the allowance. The exact search gives the K best; K grows until the K-th best lies beyond the allowance, which proves
that none within it is missing. Where that takes more than `most` candidates the list ends at a drift that is told: all
candidates below it are there, and the board counts what may lie above as if it cost nothing.

**What is dropped.** A is kept in place of B where

1. A drifts no more than B (both meet every limit, so their verdicts are equal);
2. every value (need) of A is also used by B;
3. of a value that A uses n times more often than B, some part would be short only if it is limited, so all parts that
   serve it are unlimited; and the sum of what these pieces can cost at most is no more than the sum of what the pieces that
   B alone needs cost at least.

*Nothing is lost.* Take any choice for the whole board in which the stage takes B. Give the stage A instead: each piece of A
takes a part that a piece of B of the same value had, which exists by 2. No part is used that was not used before: no line
item more. No part runs short: of a limited one no more pieces are taken than before. With C(q) the cost of q pieces of a
part, never falling, the change from q to q + n − k pieces costs at most max over q of C(q + n) − C(q) less min over q of
C(q) − C(q − k), so by 3 the cost is no more. By 1 the drift is no more. So every optimum with B has its like with A, whatever
the other stages take.
"""

from __future__ import annotations

import itertools
from collections import Counter
from collections.abc import Callable, Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from synth.boards.purchase import Need, Part
from synth.parts import Parts
from synth.search import Outcome, search
from synth.spaces import Found, Space, goal_of, spaces_of
from synth.stage import Stage, StageError

FIRST_LOOK = 64
"""Candidates asked of the first search."""
ALIKE = 1e-12
"""Relative room for rounding at the end of the allowance."""

Progress = Callable[[float, float, int], bool]


@dataclass(frozen=True, kw_only=True)
class Choice:
    """One candidate as a board sees it: its network, what each role that is bought needs, and its drift [-]."""

    network: str
    needs: Mapping[str, Need]
    drift: float
    space: Space
    index: tuple[int, ...]

    @cached_property
    def pieces(self) -> Counter[Need]:
        """How often each need occurs [-]."""
        return Counter(self.needs.values())

    @property
    def resistors(self) -> dict[str, float]:
        """Value of every role [ohm]."""
        return self.space.fitted(np.array([self.index], dtype=np.int32))[0]


@dataclass(frozen=True, kw_only=True)
class Choices:
    """The candidates of one stage.

    Parameters
    ----------
    kept : tuple of Choice
        Ascending in drift; empty where nothing qualifies.
    found : int
        Candidates within the allowance, before those that never help were dropped [-].
    best, allowed : float
        Least drift, and least drift plus allowance [-]; infinite where nothing qualifies.
    reached : float or None
        Drift up to which the list is complete, where it had to end before `allowed` [-].
    combinations, evaluated : int
        Size of the space; Q-point solves of the last search [-].
    """

    kept: tuple[Choice, ...]
    found: int
    best: float
    allowed: float
    reached: float | None
    combinations: int
    evaluated: int


def choices(
    stage: Stage,
    *,
    parts: Sequence[Part] | None = None,
    allowance: float,
    bought: Collection[str] | None = None,
    extra: Sequence[float] = (),
    most: int = 5000,
    progress: Progress | None = None,
) -> Choices:
    """Every candidate of a stage within a drift allowance.

    Parameters
    ----------
    stage : Stage
        The request.
    parts : sequence of Part, optional
        What the resistors may be; what the stage says when not given.
    allowance : float
        Drift beyond the stage's own best that is allowed [-].
    bought : collection of str, optional
        Roles that are resistors of the board; all when not given. The others keep the values of the stage.
    extra : sequence of float
        Values on the board already, which the stage may take too, in its own class [ohm].
    most : int
        Candidates after which the list ends [-].
    progress : callable, optional
        See `synth.search.search`.

    Returns
    -------
    Choices
        All within the allowance, nothing dropped yet; equal to judging every combination.

    Raises
    ------
    StageError
        If a role may be a pair of resistors.
    """
    goal = goal_of(stage)
    spaces = [_graded(stage, space, parts, bought, extra) for space in spaces_of(stage)]
    spaces = [space for space in spaces if all(part.nominal.size for part in space.lists.values())]
    combinations = sum(space.combinations for space in spaces)
    if not spaces:
        return Choices(kept=(), found=0, best=np.inf, allowed=np.inf, reached=None, combinations=0, evaluated=0)
    top = min(FIRST_LOOK, most)
    while True:
        outcome = search(spaces, goal, top=top, progress=progress)
        best = outcome.found[0].drift if outcome.found else np.inf
        allowed = (best + allowance) * (1.0 + ALIKE)
        if len(outcome.found) < top or outcome.found[top - 1].drift > allowed or top >= most or not outcome.complete:
            break
        top = min(4 * top, most)
    reached = _reached(outcome, top, allowed)
    within = sorted((f for f in outcome.found if f.drift <= allowed), key=_order)
    kept = tuple(_choice(stage, f, bought) for f in within)
    return Choices(
        kept=kept,
        found=len(kept),
        best=best,
        allowed=allowed,
        reached=reached,
        combinations=combinations,
        evaluated=outcome.evaluated,
    )


def _reached(outcome: Outcome, top: int, allowed: float) -> float | None:
    """Drift up to which a list is complete, None where that is the whole allowance."""
    if not outcome.complete:
        return min(outcome.bound, allowed)
    cut = len(outcome.found) >= top and outcome.bound <= allowed
    return outcome.bound if cut else None


def _order(found: Found) -> tuple[object, ...]:
    return found.drift, found.space.network.name, tuple(found.space.fitted(np.array([found.index]))[0].items())


def _choice(stage: Stage, found: Found, bought: Collection[str] | None) -> Choice:
    needs = {}
    for role, i in zip(found.space.roles, found.index, strict=True):
        if bought is not None and role not in bought:
            continue
        listed, setting = found.space.lists[role], stage.role(role)
        needs[role] = Need(
            value=float(listed.nominal[i]),
            tolerance=round(float(listed.band[i]) - setting.life, 12),
            tcr_low=float(listed.tcr_low[i]),
            tcr_high=float(listed.tcr_high[i]),
            style=setting.style,
        )
    return Choice(network=found.space.network.name, needs=needs, drift=found.drift, space=found.space, index=found.index)


def _graded(
    stage: Stage, space: Space, parts: Sequence[Part] | None, bought: Collection[str] | None, extra: Sequence[float]
) -> Space:
    """A space whose roles take what can be bought; a value that comes in several bands counts once for each."""
    lists = dict(space.lists)
    for role in space.roles:
        if bought is not None and role not in bought:
            continue
        setting = stage.role(role)
        if lists[role].paired:
            raise StageError(
                f"resistors.{role}.pairs", None, "which may be pairs", "single resistors on a board: pairs = 'no'", ("no",)
            )
        if parts is None:
            if not setting.values:
                lists[role] = _with_extra(lists[role], [v for v in extra if setting.range.contains(v)], stage, role)
            continue
        open_need = Need(0.0, np.inf, -np.inf, np.inf, setting.style)
        grades = {
            (part.value, part.tolerance, part.tcr_low, part.tcr_high)
            for part in parts
            if part.there
            and part.serves(open_need._replace(value=part.value))
            and (part.value in setting.values if setting.values else setting.range.contains(part.value))
        }
        # A pinned value that no list holds is fitted as it is.
        if not grades and setting.values:
            continue
        table = np.array(sorted(grades), dtype=float).reshape(-1, 4)
        lists[role] = Parts(nominal=table[:, 0], band=table[:, 1] + setting.life, tcr_low=table[:, 2], tcr_high=table[:, 3])
    return replace(space, lists=lists)


def _with_extra(own: Parts, extra: Sequence[float], stage: Stage, role: str) -> Parts:
    added = np.array(sorted(set(extra) - set(own.nominal.tolist())))
    if not added.size:
        return own
    setting = stage.role(role)
    more = Parts(
        nominal=added,
        band=np.full(added.shape, setting.tolerance + setting.life),
        tcr_low=np.full(added.shape, setting.tcr.low),
        tcr_high=np.full(added.shape, setting.tcr.high),
    )
    both = own.joined(more)
    return both.take(np.argsort(both.nominal, kind="stable"))


def useful(found: Choices, parts: Sequence[Part], count: int, pieces: int) -> Choices:
    """The candidates without those that another one makes superfluous, see the top of this module.

    Parameters
    ----------
    found : Choices
        Of one stage.
    parts : sequence of Part
        What the board's resistors may be.
    count : int
        How often the stage is built [-].
    pieces : int
        Most pieces that the board can take of one part [-].

    Returns
    -------
    Choices
        Equal to comparing every pair of candidates, of which the earlier of two alike stays.
    """
    rates = _Rates(parts, count, pieces)
    kept: dict[frozenset[Need], list[Choice]] = {}
    every: list[Choice] = []
    for choice in found.kept:
        if not any(rates.no_worse(other, choice) for other in _among(kept, choice)):
            kept.setdefault(frozenset(choice.pieces), []).append(choice)
            every.append(choice)
    return replace(found, kept=tuple(every))


def _among(kept: Mapping[frozenset[Need], list[Choice]], choice: Choice) -> Iterator[Choice]:
    """Kept candidates that use no need which this one does not use."""
    needs = tuple(choice.pieces)
    for size in range(1, len(needs) + 1):
        for subset in itertools.combinations(needs, size):
            yield from kept.get(frozenset(subset), ())


class _Rates:
    """What more or fewer pieces of a need cost at most and at least."""

    def __init__(self, parts: Sequence[Part], count: int, pieces: int) -> None:
        self.parts, self.count, self.pieces = parts, count, pieces
        self.by_value: dict[float, list[Part]] = {}
        for part in parts:
            self.by_value.setdefault(part.value, []).append(part)
        self._serving: dict[Need, list[Part]] = {}
        self._tables: dict[Part, np.ndarray] = {}

    def serving(self, need: Need) -> list[Part]:
        """Parts that a resistor may be."""
        if need not in self._serving:
            self._serving[need] = [p for p in self.by_value.get(need.value, ()) if p.there and p.serves(need)]
        return self._serving[need]

    def table(self, part: Part) -> np.ndarray:
        """Cost of 0, 1, 2 ... pieces."""
        if part not in self._tables:
            self._tables[part] = part.costs(self.pieces)
        return self._tables[part]

    def no_worse(self, one: Choice, other: Choice) -> bool:
        """Whether `one`, which drifts no more and uses a subset of the needs, can always stand for `other`."""
        balance = 0.0
        for need, pieces in other.pieces.items():
            more = self.count * (one.pieces.get(need, 0) - pieces)
            if more > 0:
                balance += max(self._most(part, more) for part in self.serving(need))
            elif more < 0:
                serving = self.serving(need)
                # Spread over several parts, pieces left out may save less than from any one of them.
                balance -= self._least(serving[0], -more) if len(serving) == 1 else 0.0
        return balance <= 0

    def _most(self, part: Part, more: int) -> float:
        if part.free:
            return 0.0
        table = self.table(part)
        # At least one piece is there already, so the first one of all does not count.
        if part.most < np.inf or len(table) <= more + 1:
            return np.inf
        return float((table[1 + more :] - table[1:-more]).max())

    def _least(self, part: Part, fewer: int) -> float:
        if part.free:
            return 0.0
        table = self.table(part)
        return float((table[fewer:] - table[:-fewer]).min()) if len(table) > fewer else 0.0
