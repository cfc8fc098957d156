"""What binds when nothing qualifies, and which single changes would do; every statement is backed by a search."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from synth.advice.levers import chosen_value, free_value, levers, rounded
from synth.advice.purse import BUDGET, EFFORT, LOOK, Grade, Purse, least
from synth.answer import Infeasible, Relaxation
from synth.box import Box, Meter
from synth.facts import stresses
from synth.limits import Judgement, Requirement, judge
from synth.quantities import Interval, Spread, Target, format_exact, format_limit, format_quantity, format_target
from synth.search import Stop
from synth.spaces import Exact, Found, goal_of, spaces_of
from synth.stage import Stage
from synth.stage_keys import Given

ACTIVE = "vce"
"""The limit that keeps the transistor active."""
WIDE = 0.95
"""Half-width from which a window is written by its ends [-]."""
KEPT = BUDGET / 3.0
"""Q-point solves that the search for the conflict leaves to that for a way out."""
STEPS = 100
"""Degrees of a relaxation: one per cent of the way each."""
DEFAULT, DEFAULT_CONDITION, CONDITION, TARGET = range(4)
"""What is given up first: limits that nobody asked for, other assumptions, what was asked for, what the request is for."""


def why_nothing_qualifies(stage: Stage, stop: Stop | None = None) -> Infeasible:
    """Find the limits that conflict and the single relaxations that would do.

    Parameters
    ----------
    stage : Stage
        A request for which no network qualifies.
    stop : callable, optional
        Asked often; from True on nothing more is looked at.

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
    purse = Purse(stop=stop)
    names = sorted((n for n in needs if n != ACTIVE or n in given), key=lambda n: n in given)
    dropped: set[str] = set()
    for name in sorted(names, key=lambda n: (n in given, n == "collector_share")):
        # Only what is proved infeasible without a limit makes it superfluous.
        if purse.search(stage, dropped | {name}, first=True, most=min(EFFORT, purse.left - KEPT)).status == "infeasible":
            dropped.add(name)
    binding = tuple(name for name in names if name not in dropped) or (ACTIVE,)
    best_without: dict[str, float | None] = {}
    notes: dict[str, str] = {}
    unsettled: list[str] = []
    offers: list[_Offer] = []
    for name in binding:
        outcome = purse.search(stage, {name})
        best_without[name] = outcome.found[0].drift if outcome.found else None
        unsettled += [name] if outcome.status == "unknown" else []
        if not outcome.found:
            continue
        found = outcome.found[0]
        judged = _judged(stage, name, found)
        if note := _note(name, found, judged):
            notes[name] = note
        grades = _grades(name, found, judged)
        grade = least(grades, stage, purse, bad=_too_narrow(grades, name, stage, outcome.bound))
        if grade is not None:
            # A target is what the request is for: it is the last to be given up.
            rank = TARGET if name.startswith("target.") else CONDITION if name in given else DEFAULT
            offers.append(_Offer(rank, grade))
    if any(name.startswith("target.") for name in binding) and _bands_conflict(stage, purse):
        notes["resistors"] = "with everything else at its nominal value, tolerance and life alone break the limits"
    for role in stage.roles:
        if (grade := _other_value(stage, role, purse)) is not None:
            offers.append(_Offer(CONDITION, grade))
    for lever in levers(stage):
        if (grade := least(lever, stage, purse)) is not None:
            is_asked = any(key in stage.given for key in grade.change)
            offers.append(_Offer(CONDITION if is_asked else DEFAULT_CONDITION, grade))
    offers.sort(key=lambda offer: (offer.rank, offer.grade.size))
    relaxations = []
    for offer in offers:
        best = purse.drift(stage.with_keys(dict(offer.grade.change)))
        drift = offer.grade.drift if best is None else best
        if drift is not None:
            relaxations.append(Relaxation(change=offer.grade.change, drift=drift))
    return Infeasible(
        binding=binding,
        best_without=best_without,
        relaxations=tuple(relaxations),
        notes=notes,
        unsettled=tuple(unsettled),
    )


@dataclass(frozen=True)
class _Offer:
    """A verified change, with what kind of thing it gives up."""

    rank: int
    grade: Grade


def _bands_conflict(stage: Stage, purse: Purse) -> bool:
    """Whether nothing qualifies even where the resistors are all that spreads, at the same limits."""
    exact: dict[str, Given] = {f"supply.{rail}": Spread.exact(s.nominal) for rail, s in stage.rails.items()}
    exact |= {f"limits.{name}": limit for name, limit in stage.limits.items()}
    device = stage.transistor
    exact |= {f"transistor.{leaf}": Spread.exact(getattr(device, leaf).nominal) for leaf in ("hfe", "vbe", "icbo")}
    exact |= {"transistor.vbe_ic": device.vbe_ic, "ambient.temperature": Spread.exact(stage.temperature.nominal)}
    if stage.reference is not None:
        count = int(stage.given.get("reference.number", "1"))
        for leaf in ("voltage", "tc", "slope"):
            exact[f"reference.{leaf}"] = Spread.exact(getattr(stage.reference, leaf).nominal / count)
    return purse.search(stage.with_keys(exact), first=True, most=LOOK).status == "infeasible"


def _other_value(stage: Stage, role: str, purse: Purse) -> Grade | None:
    """A value that a list or drawer lacks for one role, and that would do."""
    freed = free_value(stage, role)
    if freed is None:
        return None
    outcome = purse.search(freed)
    for found in outcome.found:
        if role in found.space.roles:
            ohm = float(found.space.lists[role].nominal[found.index[found.space.roles.index(role)]])
            change = chosen_value(role, ohm)
            settled = purse.tried(stage, change)
            if settled is not None and settled.found:
                return Grade(change=change, size=1.0, drift=settled.found[0].drift)
    return None


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


def _grades(name: str, found: Found, judged: Sequence[Judgement]) -> list[Grade]:
    """The way from one limit to what the best candidate without it reaches, in steps of one per cent."""
    worst = min(judged, key=lambda j: float(j.margin[0]))
    need, reached = worst.requirement, float(worst.worst[0])
    if (rated := need.rated) is not None:
        # Of a limit on used shares the share counts, whichever part uses most of its own.
        # What exceeds the maker's own rating is no advice.
        if rated <= 0.0 or any(j.requirement.whole is not None and j.worst[0] > j.requirement.whole for j in judged):
            return []
        low, high = (end / rated if math.isfinite(end) else end for end in (need.interval.low, need.interval.high))
        need, reached = replace(need, name=name, kind="ratio", interval=Interval(low, high), rated=None), reached / rated
    if need.name == ACTIVE and reached < found.space.transistor.vce_sat:
        return []
    start = need.interval.low if reached < need.interval.low else need.interval.high
    outward = 1 if reached > start else -1
    grades: dict[str, Grade] = {}
    for step in range(1, STEPS + 1):
        share = step / STEPS
        change = _change(need, start + share * (reached - start), outward)
        size = share * abs(reached / start - 1.0 if start else 1.0)
        grades.setdefault(str(change), Grade(change=change, size=size))
    return list(grades.values())


def _too_narrow(grades: Sequence[Grade], name: str, stage: Stage, bound: float) -> int:
    """Last grade of a window that is narrower than the least drift proved without it; -1 if none is known to be."""
    goals = goal_of(stage).aims
    if len(goals) > 1 or name.removeprefix("target.") not in goals:
        return -1
    (target,) = goals.values()
    last = -1
    for k, grade in enumerate(grades):
        after = stage.with_keys(dict(grade.change))
        window = after.ic if name == "target.ic" else after.voltages[name.removeprefix("target.")]
        # Whichever way a candidate drifts by the bound or more, it leaves a window that is narrower on both sides.
        if max(window.high / target - 1.0, 1.0 - window.low / target) < bound:
            last = k
    return last


def _change(need: Requirement, limit: float, outward: int) -> dict[str, str]:
    """A relaxed limit as a stage-file key and text, rounded outward to three figures."""
    low, high = need.interval.low, need.interval.high
    if need.target is not None and math.isclose(high - need.target, need.target - low, rel_tol=1e-9):
        return {need.name: _window(need, need.target, rounded(abs(limit / need.target - 1.0), 1))}
    relaxed = Interval(low, rounded(limit, 1)) if outward > 0 else Interval(rounded(limit, -1), high)
    if need.target is not None:
        return {need.name: format_target(Target(need.target, relaxed.low, relaxed.high), need.kind)}
    if need.name.startswith("target."):
        return {need.name: format_limit(relaxed, need.kind)}
    return {f"limits.{need.name}": format_limit(relaxed, need.kind)}


def _window(need: Requirement, goal: float, half: float) -> str:
    """A window of at least `half` around its target; a wide one is written by its ends, which stay above zero."""
    if half < WIDE:
        return f"{format_exact(goal, need.kind)} ± {half * 100:g} %"
    low = min(need.interval.low, rounded(goal * max(1.0 - half, 1e-3), -1))
    high = max(need.interval.high, rounded(goal * (1.0 + half), 1))
    return format_target(Target(goal, low, high), need.kind)
