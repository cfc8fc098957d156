"""What binds when nothing qualifies, and which single change would do; every statement is backed by a search."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from synth.answer import Infeasible, Relaxation
from synth.box import Box, Meter
from synth.facts import stresses
from synth.limits import Judgement, Requirement, judge
from synth.quantities import Interval, Target, format_exact, format_limit, format_quantity, format_target
from synth.search import Outcome, search
from synth.spaces import Exact, Found, goal_of, spaces_of
from synth.stage import Stage

ACTIVE = "vce"
"""The limit that keeps the transistor active."""
FIGURES = 3
"""Significant figures of a relaxed limit."""
EFFORT = 5e6
"""Q-point solves that one search for advice may take, about a second; what it leaves open is not claimed."""
WIDE = 0.95
"""Half-width from which a window is written by its ends [-]."""
GAP = 0.005
"""Relative gap left in the drifts that advice quotes [-]; they are drifts of real candidates all the same."""
BUDGET = 1.2e7
"""Q-point solves for all of the advice together, some seconds; what is left then is not looked at."""
STEPS = 7
"""Bisections of a relaxation: below one per cent of the way."""


def why_nothing_qualifies(stage: Stage) -> Infeasible:
    """Find the limits that conflict and the single relaxations that would do.

    Parameters
    ----------
    stage : Stage
        A request for which no network qualifies.

    Returns
    -------
    Infeasible
        `binding` is a smallest conflicting set: dropping any one of it, the others kept, lets a candidate qualify, unless
        `best_without` says otherwise.

    Notes
    -----
    Deletion filter: each limit in turn is dropped for good if the rest still conflict. Every step is an exact search.
    """
    needs = {need.limit: need for space in spaces_of(stage) for need in space.requirements}
    given = {name for name in needs if name.startswith("target.") or name in stage.limits_given}
    # Staying active is physics, not a request; and what the user did not ask for is named, and given up, first.
    purse = _Purse()
    names = sorted((n for n in needs if n != ACTIVE or n in given), key=lambda n: n in given)
    dropped: set[str] = set()
    for name in sorted(names, key=lambda n: (n in given, n == "collector_share")):
        # Only what is proved infeasible without a limit makes it superfluous.
        if purse.search(stage, dropped | {name}, first=True).status == "infeasible":
            dropped.add(name)
    binding = tuple(name for name in names if name not in dropped) or (ACTIVE,)
    best_without: dict[str, float | None] = {}
    notes: dict[str, str] = {}
    unsettled: list[str] = []
    ranked: list[tuple[bool, float, Relaxation]] = []
    for name in binding:
        outcome = purse.search(stage, {name})
        best_without[name] = outcome.found[0].drift if outcome.found else None
        unsettled += [name] if outcome.status == "unknown" else []
        if not outcome.found:
            continue
        found = outcome.found[0]
        judged = _judged(stage, name, found)
        relaxed = _relax(stage, name, found, judged, purse)
        if note := _note(name, found, judged):
            notes[name] = note
        if relaxed is not None:
            ranked.append((name in given, *relaxed))
    ranked.sort(key=lambda entry: entry[:2])
    return Infeasible(
        binding=binding,
        best_without=best_without,
        relaxations=tuple(r for _, _, r in ranked),
        notes=notes,
        unsettled=tuple(unsettled),
    )


class _Purse:
    """The solves that are left for advice."""

    def __init__(self) -> None:
        self.left = BUDGET

    def search(self, stage: Stage, without: set[str], *, first: bool = False) -> Outcome:
        """Search for one candidate without some limits; 'unknown' once the purse is empty."""
        most = min(EFFORT, max(self.left, 0.0))
        gap = 0.0 if first else GAP
        outcome = search(spaces_of(stage, without), goal_of(stage), top=1, gap=gap, first=first, most=most)
        self.left -= outcome.evaluated
        return outcome


def _box(found: Found) -> Box:
    return found.space.box(np.array([found.index], dtype=np.int32), Meter())


def _judged(stage: Stage, name: str, found: Found) -> list[Judgement]:
    """What a candidate makes of a limit that it was found without: for each part of it, as it reads for its network."""
    like = found.space
    space = next(s for s in spaces_of(stage) if s.network is like.network and s.roles == like.roles)
    exact = Exact(_box(found), goal_of(stage))
    return [judge(exact.box, need, exact.worst) for need in space.requirements if need.limit == name]


def _note(name: str, found: Found, judged: Sequence[Judgement]) -> str:
    """Which parts of a limit the best candidate without it breaks, with figures; "" of a limit without parts."""
    broken = []
    for judgement in judged:
        need = judgement.requirement
        if need.rated is not None and not bool(judgement.passed[0]):
            reached, allowed = (format_quantity(x, need.kind) for x in (float(judgement.worst[0]), need.interval.high))
            beyond = "; more than its rating" if need.whole is not None and judgement.worst[0] > need.whole else ""
            broken.append(f"{need.name.partition('.')[2]} reaches {reached}, allowed is {allowed}{beyond}")
    if name == "resistor_stress":
        for role, stress in stresses(_box(found), found.space.styles, found.space.derating)[0].items():
            if stress.string is not None:
                broken.append(f"{stress.string} x {stress.style} in series would do for {role}")
    return "; ".join(broken)


def _relax(
    stage: Stage, name: str, found: Found, judged: Sequence[Judgement], purse: _Purse
) -> tuple[float, Relaxation] | None:
    """Least relaxation of one limit that lets a candidate qualify, with how far it moves the limit."""
    worst = min(judged, key=lambda j: float(j.margin[0]))
    need, reached = worst.requirement, float(worst.worst[0])
    if (rated := need.rated) is not None:
        # Of a limit on used shares the share counts, whichever part uses most of its own.
        # What exceeds the maker's own rating is no advice.
        if rated <= 0.0 or any(j.requirement.whole is not None and j.worst[0] > j.requirement.whole for j in judged):
            return None
        low, high = (end / rated if math.isfinite(end) else end for end in (need.interval.low, need.interval.high))
        need, reached = replace(need, name=name, kind="ratio", interval=Interval(low, high), rated=None), reached / rated
    if need.name == ACTIVE and reached < found.space.transistor.vce_sat:
        return None
    start = need.interval.low if reached < need.interval.low else need.interval.high
    good, bad, best = 1.0, 0.0, None
    for step in range(STEPS + 1):
        share = good if step == 0 else 0.5 * (good + bad)
        change = _change(need, start + share * (reached - start), outward=1 if reached > start else -1)
        drift = _drift_with(stage, change, purse)
        if drift is None and step == 0:
            return None
        if drift is None:
            bad = share
        else:
            good, best = share, Relaxation(change=change, drift=drift)
    if best is None:
        return None
    return good * abs(reached / start - 1.0 if start else 1.0), best


def _change(need: Requirement, limit: float, outward: int) -> dict[str, str]:
    """A relaxed limit as a stage-file key and text, rounded outward to three figures."""
    low, high = need.interval.low, need.interval.high
    if need.target is not None and math.isclose(high - need.target, need.target - low, rel_tol=1e-9):
        return {need.name: _window(need, need.target, _round(abs(limit / need.target - 1.0), 1))}
    relaxed = Interval(low, _round(limit, 1)) if outward > 0 else Interval(_round(limit, -1), high)
    if need.target is not None:
        return {need.name: format_target(Target(need.target, relaxed.low, relaxed.high), need.kind)}
    if need.name.startswith("target."):
        return {need.name: format_limit(relaxed, need.kind)}
    return {f"limits.{need.name}": format_limit(relaxed, need.kind)}


def _window(need: Requirement, goal: float, half: float) -> str:
    """A window of at least `half` around its target; a wide one is written by its ends, which stay above zero."""
    if half < WIDE:
        return f"{format_exact(goal, need.kind)} ± {half * 100:g} %"
    low = min(need.interval.low, _round(goal * max(1.0 - half, 1e-3), -1))
    high = max(need.interval.high, _round(goal * (1.0 + half), 1))
    return format_target(Target(goal, low, high), need.kind)


def _round(value: float, direction: int) -> float:
    """Round to three figures, up for +1 and down for −1."""
    if value == 0.0:
        return 0.0
    scale = 10.0 ** (FIGURES - 1 - math.floor(math.log10(abs(value))))
    steps = value * scale
    rounded = math.ceil(steps - 1e-9) if direction > 0 else math.floor(steps + 1e-9)
    return float(f"{rounded / scale:.{FIGURES}g}")


def _drift_with(stage: Stage, change: Mapping[str, str], purse: _Purse) -> float | None:
    outcome = purse.search(Stage.from_keys({**stage.given, **change}, stage.folder), set())
    return outcome.found[0].drift if outcome.found else None
