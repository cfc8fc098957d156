"""The transistor is replaced: what changes, and how little will do."""

from __future__ import annotations

import math
import os
from collections.abc import Collection, Mapping, Sequence
from dataclasses import replace

import numpy as np

from synth import __version__
from synth.answer import Answer, Candidate, Caution, NetworkResult, Search
from synth.choices import values_of
from synth.explain import percent
from synth.parts import Parts
from synth.quantities import format_resistance
from synth.replacement.answer import Cost, Refit, Refitted, Single, Step
from synth.replacement.changes import Level, Progress, joined, levels, single_changes, whole_space
from synth.replacement.conflict import why_no_change_will_do
from synth.replacement.sides import compare, device, not_verified, sides, swap_cautions
from synth.solve import assumed_of, candidates_of, check, not_applicable, record_of
from synth.spaces import Goal, Space, fitted, goal_of
from synth.stage import Stage, StageError
from synth.stage_keys import Given, nearest

TOP = 3
"""Candidates listed for each number of changes, unless told otherwise [-]."""
MOST = 48
"""Candidates of one number of changes that are looked through for one whose junction settles [-]."""
SEARCHED = ("optimal", "infeasible")


def refit(
    stage: Stage,
    *,
    keep: Collection[str] = (),
    top: int = TOP,
    also_series: Sequence[str] = (),
    also_stock: str | os.PathLike[str] | None = None,
    progress: Progress | None = None,
    command: str = "",
    **given: Given,
) -> Refit:
    """Put another transistor into a stage and find the fewest resistors that have to change.

    Parameters
    ----------
    stage : Stage
        The stage with its ``[values]``, the resistors fitted today.
    keep : collection of str
        Roles that must not change.
    top : int
        How many candidates to list and prove for each number of changes [-].
    also_series : sequence of str
        Series that a changed resistor may come from besides what ``[resistors]`` says.
    also_stock : path, optional
        Stock list that a changed resistor may come from besides.
    progress : callable, optional
        See `synth.search.search`.
    command : str
        The command that asked, for the record.
    **given : str, float, Spread or None
        Keys of the stage to give anew, as ``to="BC847C"`` or ``to_hfe="420 : 800"``.

    Returns
    -------
    Refit
        Both transistors side by side, and the best candidates of each number of changes.

    Raises
    ------
    StageError
        If there is no replacement, or no network that the values make up, or `keep` or `top` make no sense.
    """
    if isinstance(top, bool) or not isinstance(top, int) or top < 1:
        raise StageError("top", top, "which is no number of candidates", "a whole number of 1 or more", (f"{TOP}",))
    before, after = sides(stage.replace(**given) if given else stage)
    space, goal = fitted(after), goal_of(after)
    for role in keep:
        if role not in space.roles:
            accepted = f"one of {', '.join(space.roles)}"
            raise StageError("keep", role, "which is not fitted", accepted, nearest(role, space.roles)[:1])
    free = tuple(role for role in space.roles if role not in keep)
    sources = _sources(after, free, also_series, also_stock)
    offered = {leaf: {role: values_of(source, role) for role in free} for leaf, source in sources.items()}
    lists = {role: joined([of_source[role] for of_source in offered.values()]) for role in free}
    found = levels(space, lists, goal, top=top, progress=progress)
    steps, listed = _listed(found, space, lists, goal, top, after)
    old, new = check(before), check(after)
    candidates = tuple(replace(c, rank=k + 1) for k, (_, c) in enumerate(listed))
    least = min((c.drift.q_point for c in candidates), default=np.nan)
    origin = {
        leaf: {role: (_origin(leaf, source, role), of_role) for role, of_role in offered[leaf].items()}
        for leaf, source in sources.items()
    }
    fitted_today = {role: float(space.lists[role].nominal[0]) for role in space.roles}
    changes = tuple(
        _refitted(c, level, fitted_today, origin, least, old.candidates[0])
        for (level, _), c in zip(listed, candidates, strict=True)
    )
    record = _record(found, whole_space(space, lists), listed)
    infeasible = None
    if record.status == "infeasible":
        kept = [role for role in space.roles if role in keep]
        infeasible = why_no_change_will_do(after, whole_space(space, lists), kept, goal)
    singles = tuple(
        Single(
            role=role,
            value=None if one is None else _value(one.space, one.index, role),
            drift=None if one is None else one.drift,
        )
        for role, one in single_changes(space, lists, goal).items()
    )
    before_device, after_device = device(before), device(after)
    best = candidates[0] if candidates else None
    answer = Answer(
        kind="refit",
        version=__version__,
        command=command,
        stage=after.as_dict(),
        assumed=assumed_of(after, [space]),
        warnings=tuple(Caution(name=w.name, text=w.text) for w in after.warnings) + not_applicable(after, [space]),
        search=record,
        networks=(
            NetworkResult(
                network=space.network.name,
                best=None if best is None else float(least),
                why="no combination meets every limit" if best is None else "the network that is fitted",
            ),
        ),
        candidates=candidates,
        infeasible=infeasible,
    )
    return Refit(
        answer=answer,
        before=old,
        after=new,
        old=before_device,
        new=after_device,
        comparison=compare(old.candidates[0], new.candidates[0]),
        keep=tuple(role for role in space.roles if role in keep),
        steps=steps,
        singles=singles,
        changes=changes,
        unconstrained=next((c.rank for c in candidates if c.drift.q_point == least), None),
        cautions=swap_cautions(before_device, after_device),
        not_verified=not_verified(before_device, after_device),
        reasons=_reasons(changes, steps, new.candidates[0], after_device.label, free),
    )


def _sources(
    stage: Stage, free: Sequence[str], series: Sequence[str], stock: str | os.PathLike[str] | None
) -> dict[str, Stage]:
    """The stage once for each source of values: what [resistors] says, then what is allowed besides."""
    found = {"resistors": stage}
    # Values that are named one by one admit no others.
    roles = [role for role in free if not stage.role(role).values]
    for leaf, value, other in (("series", series, "stock"), ("stock", stock, "series")):
        if value:
            keys: dict[str, Given] = {}
            for role in roles:
                keys |= {f"resistors.{role}.{leaf}": value, f"resistors.{role}.{other}": None}
            found[leaf] = stage.with_keys(keys)
    return found


def _origin(leaf: str, stage: Stage, role: str) -> str:
    """Where the values of a role come from."""
    if leaf == "resistors" and stage.role(role).values:
        return "named"
    return "stock" if stage.role(role).stock is not None else "series"


def _value(space: Space, index: Sequence[int], role: str) -> float:
    return float(space.lists[role].nominal[index[space.roles.index(role)]])


def _listed(
    found: Sequence[Level], space: Space, lists: Mapping[str, Parts], goal: Goal, top: int, stage: Stage
) -> tuple[tuple[Step, ...], list[tuple[Level, Candidate]]]:
    """The candidates of every level that pass whatever is judged after the search, and what each level can do."""
    today = {role: float(space.lists[role].nominal[0]) for role in space.roles}

    def distance(candidate: Candidate) -> float:
        """How far new values lie from those fitted, as ratios: of equals the least upheaval."""
        return sum(abs(math.log(ohm / today[role])) for role, ohm in candidate.resistors.items())

    steps, listed = [], []
    for level in found:
        asked = top
        while True:
            outcome = level.outcome
            passing = [c for c in candidates_of(outcome, goal, asked, stage, distance) if c.verdict == "pass"]
            # A junction that does not settle is found out only now: look further down the list.
            if len(passing) >= top or len(outcome.found) < asked or asked >= MOST:
                break
            asked *= 2
            level = levels(space, lists, goal, top=asked)[level.changes]
        status = level.outcome.status
        if level.outcome.found and not passing:
            status = "infeasible" if len(level.outcome.found) < asked else "unknown"
        listed += [(level, c) for c in passing[:top]]
        steps.append(
            Step(
                changes=level.changes,
                status=status,
                best=passing[0].drift.q_point if passing else None,
                sets=len(level.sets),
                combinations=level.outcome.combinations,
                evaluated=level.outcome.evaluated,
            )
        )
    return tuple(steps), listed


def _refitted(
    candidate: Candidate,
    level: Level,
    today: Mapping[str, float],
    origin: Mapping[str, Mapping[str, tuple[str, Parts]]],
    least: float,
    before: Candidate,
) -> Refitted:
    changed = tuple(role for role, ohm in candidate.resistors.items() if ohm != today[role])
    assert len(changed) == level.changes, "every changed role has another value"
    named = {}
    for role in changed:
        for of_source in origin.values():
            name, values = of_source[role]
            if candidate.resistors[role] in values.nominal:
                named[role] = name
                break
    return Refitted(
        candidate=candidate,
        changed=changed,
        was={role: today[role] for role in changed},
        source=named,
        cost=Cost(
            parts=len(changed),
            drift=candidate.drift.q_point - float(least),
            supply_current=candidate.supply_current - before.supply_current,
        ),
    )


def _record(found: Sequence[Level], whole: Space, listed: Sequence[tuple[Level, Candidate]]) -> Search:
    """All the searches as one."""
    records = [record_of(level.outcome, "corners") for level in found]
    complete = all(record.complete for record in records)
    bounds = [record.bound for record in records if record.bound is not None]
    if complete:
        settled = listed or not any(level.outcome.found for level in found)
        status = ("optimal" if listed else "infeasible") if settled else "unknown"
    else:
        status = "feasible" if listed else "unknown"
    return Search(
        status=status,
        bound=min(bounds, default=None),
        combinations=whole.combinations,
        evaluated=sum(record.evaluated for record in records),
        complete=complete,
        seconds=sum(record.seconds for record in records),
    )


def changes_words(change: Refitted) -> str:
    """What a change asks for.

    Parameters
    ----------
    change : Refitted
        Any change.

    Returns
    -------
    str
        ``R1 from 100K to 130K``, or that nothing changes.
    """
    if not change.changed:
        return "keep every resistor"
    new = change.candidate.resistors
    return ", ".join(f"{r.upper()} {format_resistance(change.was[r])} to {format_resistance(new[r])}" for r in change.changed)


def _reasons(
    changes: Sequence[Refitted], steps: Sequence[Step], today: Candidate, label: str, free: Sequence[str]
) -> tuple[str, ...]:
    failed = [v for v in today.limits if v.verdict == "fail"]
    broken = ", ".join(f"{v.name} (margin {percent(v.margin)})" if np.isfinite(v.margin) else v.name for v in failed)
    lines = []
    if changes and not changes[0].changed:
        lines.append(f"Every verdict passes with {label} on the resistors that are fitted: nothing has to change.")
    elif failed:
        lines.append(f"With {label} the resistors that are fitted fail {broken}.")
    for step in steps[1:]:
        if changes and step.changes >= len(changes[0].changed):
            break
        if step.status == "infeasible":
            noun = "single change" if step.changes == 1 else f"{step.changes} changes together"
            among = f" of {step.combinations} candidates over {step.sets} set{'s' if step.sets > 1 else ''} of roles"
            lines.append(f"No {noun} will do{among}, proved.")
    if changes and changes[0].changed:
        first, least = changes[0], min(c.candidate.drift.q_point for c in changes)
        count = len(first.changed)
        lines.append(
            f"Fewest changes: {count} of {len(today.resistors)} resistors, {changes_words(first)}; the best of that number,"
            f" proved, drifts {percent(first.candidate.drift.q_point)}."
        )
        if first.candidate.drift.q_point > least:
            best = next(c for c in changes if c.candidate.drift.q_point == least)
            lines.append(
                f"Unconstrained best: {changes_words(best)}, drifts {percent(least)}; keeping to fewer changes costs"
                f" {percent(first.cost.drift)} of drift."
            )
    if not changes and not free:
        lines.append("No resistor may change.")
    elif not changes:
        kept = [role.upper() for role in today.resistors if role not in free]
        held = f" while {', '.join(kept)} stay{'s' if len(kept) == 1 else ''}" if kept else ""
        lines.append(f"No change of any number of resistors{held} meets every limit.")
    return tuple(lines)
