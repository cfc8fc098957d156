"""What a design review asks of the first candidate: factors, faults, the bench, a record for each resistor, and statistics."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from functools import partial
from typing import Literal

import numpy as np

from synth import catalogue
from synth.answer import Bench, Candidate, Comparison, OtherClass, Rationale, Statistics
from synth.box import Box, Meter
from synth.explain import cause_words, percent
from synth.faults import single_faults
from synth.parts import Parts
from synth.quantities import Spread, format_exact, format_quantity, format_resistance
from synth.readings import readings
from synth.spaces import Assessed, Goal, Space, assess_all
from synth.stage import Stage
from synth.statistics import monte_carlo, rss, sensitivities, stability
from synth.straddle import extreme_in_any_region
from synth.transistor import T0

FACTORS = (1.01, 1.02, 1.05, 1.1, 1.2, 1.5, 2.0, 5.0)
"""How far a value is moved to see whether every verdict still passes [-]."""
HALVINGS = 6
"""Halvings of the last of those steps: they leave a sixtieth of it."""
NODES = ("vb", "ve", "vc")


def reviewed(candidate: Candidate, space: Space, stage: Stage, goal: Goal) -> Candidate:
    """A candidate with stability factors, sensitivities, faults, readings on the bench and a record for each resistor.

    Parameters
    ----------
    candidate : Candidate
        With its stress and neighbours.
    space : Space
        Where it comes from.
    stage : Stage
        The request.
    goal : Goal
        What drift is measured from.

    Returns
    -------
    Candidate
        The same, with more of it known.
    """
    box = _box(candidate, space)
    held, follows = stability(box), stability(box, follows=True)
    bench = on_the_bench(box, space.ground, stage.measured)
    return replace(
        candidate,
        stability={} if held is None or follows is None else {"vbe_held": held, "vbe_follows": follows},
        sensitivities=sensitivities(box),
        faults=single_faults(box, stage.ratings, space.styles, space.ground),
        bench=bench,
        comparisons=compared(bench, stage.measured),
        corners=_corners(box, candidate),
        roles={role: replace(candidate.roles[role], record=r) for role, r in _records(candidate, space, stage, goal).items()},
    )


def statistics_of(candidate: Candidate, space: Space, stage: Stage) -> Statistics:
    """Root-sum-square and Monte Carlo of a candidate.

    Parameters
    ----------
    candidate : Candidate
        Any candidate.
    space : Space
        Where it comes from.
    stage : Stage
        The request, with the lot to be drawn.

    Returns
    -------
    Statistics
        Of IC, VCE and whatever else has a target.
    """
    box, life = _box(candidate, space), lives(stage, candidate)
    windows = {need.name.removeprefix("target."): need.interval for need in space.requirements if need.rule is None}
    sums = tuple(rss(box, name, life=life, window=windows.get(name)) for name in candidate.worst)
    lot = monte_carlo(box, space.requirements, stage.lot, life=life, quantities=tuple(candidate.worst))
    return Statistics(rss=sums, monte_carlo=lot)


def lives(stage: Stage, candidate: Candidate) -> dict[str, float]:
    """Change over life of each resistor of a candidate.

    Parameters
    ----------
    stage : Stage
        The request.
    candidate : Candidate
        Any candidate.

    Returns
    -------
    dict of str to float
        Role to change [-].
    """
    return {role: stage.role(role).life for role in candidate.resistors}


def _box(candidate: Candidate, space: Space) -> Box:
    position = [int(np.argmin(np.abs(space.lists[r].nominal - candidate.resistors[r]))) for r in space.roles]
    return space.box(np.array([position], dtype=np.int32), Meter())


def _corners(box: Box, candidate: Candidate) -> dict[str, dict[str, float]]:
    """The point of the box at which each quantity of the Q-point is least and greatest."""
    law = box.extreme if candidate.regions == ("active",) else partial(extreme_in_any_region, box)
    ends = ((name, word, side) for name in candidate.worst for word, side in (("low", -1), ("high", 1)))
    return {f"{name} {word}": {k: float(v[0]) for k, v in law((name,), side).at.items()} for name, word, side in ends}


# --- The bench --------------------------------------------------------------------------------------------------------


def on_the_bench(box: Box, ground: str, measured: Mapping[str, Spread]) -> Bench:
    """What a meter should read at 25 °C and the nominal supply, or at the conditions that were measured.

    Parameters
    ----------
    box : Box
        Of one candidate.
    ground : str
        What is 0 V, see `synth.measures.ground_voltage`.
    measured : mapping of str to Spread
        Rails [V] and temperature [K] of the bench, where they were measured.

    Returns
    -------
    Bench
        Least, nominal and greatest voltage over every unit at those conditions [V].
    """
    rails = {rail: measured.get(rail, Spread.exact(s.nominal)) for rail, s in box.rails.items()}
    temperature = measured.get("temperature", Spread.exact(T0))
    there = replace(box, rails=rails, temperature=temperature)
    straddles = there.extreme(("vce",), -1).value[0] < box.transistor.vce_sat
    (found,) = readings(there, ground, partial(extreme_in_any_region, there) if straddles else None)
    ends = {name: (s.low, s.nominal, s.high) for name, s in {**rails, "temperature": temperature}.items()}
    return Bench(conditions=ends, nodes=found.nodes, drops=found.drops)


def compared(bench: Bench, measured: Mapping[str, Spread]) -> tuple[Comparison, ...]:
    """Readings of a meter beside what it should read.

    Parameters
    ----------
    bench : Bench
        What is expected [V].
    measured : mapping of str to Spread
        What was read [V].

    Returns
    -------
    tuple of Comparison
        One for each node that was read.
    """
    found = []
    for name in NODES:
        if name in measured:
            low, _, high = expected = bench.nodes[name[1:]]
            read = measured[name]
            off = max(low - read.high, read.low - high, 0.0)
            found.append(
                Comparison(
                    reading=name,
                    expected=expected,
                    measured=(read.low, read.nominal, read.high),
                    off=off,
                    verdict="agrees" if off == 0.0 else "differs",
                )
            )
    return tuple(found)


# --- The record of each resistor --------------------------------------------------------------------------------------


def _records(candidate: Candidate, space: Space, stage: Stage, goal: Goal) -> dict[str, Rationale]:
    classes = _classes(candidate, space, stage, goal)
    ranges = _ranges(candidate, space, goal) if candidate.verdict == "pass" else {}
    found = {}
    for role in candidate.resistors:
        # Of a pair what both dissipate, and the style that the one needs which needs more.
        stress = [candidate.stress[name] for name, owner in candidate.designators.items() if owner == role]
        found[role] = Rationale(
            power=sum(s.power for s in stress),
            smallest=max(stress, key=lambda s: s.power).smallest,
            classes=classes[role],
            replaceable=ranges.get(role),
            text=_sentences(candidate, stage, role, classes[role], ranges.get(role)),
        )
    return found


def _classes(candidate: Candidate, space: Space, stage: Stage, goal: Goal) -> dict[str, tuple[OtherClass, ...]]:
    """What the next coarser and the next finer tolerance class of each resistor would do."""
    steps = sorted({catalogue.series_tolerance(series) for series in ("E6", "E12", "E24", "E48", "E96", "E192")})
    found: dict[str, tuple[OtherClass, ...]] = {}
    for role in candidate.resistors:
        rows = []
        life = stage.role(role).life
        part = _box(candidate, space).parts[role]
        own = float(part.band[0]) - life
        finer, coarser = [t for t in steps if t < own * 0.999], [t for t in steps if t > own * 1.001]
        for tolerance in (*finer[-1:], *coarser[:1]):
            if part.paired:
                continue
            lists = {**_box(candidate, space).parts, role: replace(part, band=np.array([tolerance + life]))}
            other = replace(space, lists=lists)
            (result,) = assess_all(other, np.zeros((1, len(space.roles)), dtype=np.int32), goal, Meter())
            rows.append(
                OtherClass(
                    tolerance=tolerance,
                    drift=result.drift,
                    verdict="fail" if result.fails else "pass",
                    fails=result.fails,
                )
            )
        found[role] = tuple(rows)
    return found


def _ranges(candidate: Candidate, space: Space, goal: Goal) -> dict[str, tuple[float, float]]:
    """Values of each resistor, the others as they are, with which every verdict still passes [ohm]."""
    sides = [(role, side) for role in candidate.resistors for side in (-1, 1)]

    def passing(factors: Sequence[Sequence[float]]) -> list[list[bool]]:
        lists: dict[str, Parts] = {}
        rows: list[list[int]] = []
        base = _box(candidate, space).parts
        for role in space.roles:
            own = [f**side for (r, side), column in zip(sides, factors, strict=True) if r == role for f in column]
            part = base[role].take(np.zeros(len(own) + 1, dtype=np.int64))
            lists[role] = replace(part, nominal=part.nominal * np.array([1.0, *own]), pairs=None)
        for k, role in enumerate(space.roles):
            for place in range(1, lists[role].nominal.size):
                rows.append([place if j == k else 0 for j in range(len(space.roles))])
        results: list[Assessed] = assess_all(replace(space, lists=lists), np.array(rows, dtype=np.int32), goal, Meter())
        flat = iter([not r.fails for r in results])
        return [[next(flat) for _ in column] for column in factors]

    good = [1.0] * len(sides)
    bad: list[float | None] = [None] * len(sides)
    for k, column in enumerate(passing([FACTORS] * len(sides))):
        for factor, ok in zip(FACTORS, column, strict=True):
            if not ok:
                bad[k] = factor
                break
            good[k] = factor
    for _ in range(HALVINGS):
        trial = [[0.5 * (g + (b or g))] for g, b in zip(good, bad, strict=True)]
        for k, (ok,) in enumerate(passing(trial)):
            if bad[k] is not None:
                good[k], bad[k] = (trial[k][0], bad[k]) if ok else (good[k], trial[k][0])
    ends = dict(zip(sides, good, strict=True))
    return {role: (ohms / ends[role, -1], ohms * ends[role, 1]) for role, ohms in candidate.resistors.items()}


def _sentences(
    candidate: Candidate,
    stage: Stage,
    role: str,
    classes: Sequence[OtherClass],
    span: tuple[float, float] | None,
) -> tuple[str, ...]:
    """The record of a resistor in words."""
    duty = candidate.roles[role]
    meaning = duty.meaning[0].upper() + duty.meaning[1:]
    lines = [
        f"{meaning}, from {duty.between[0]} to {duty.between[1]}: it drops {format_quantity(duty.drop, 'voltage')} at "
        f"{format_quantity(duty.current, 'current')}."
    ]
    steps: dict[Literal["down", "up"], str] = {}
    for n in candidate.neighbours:
        if n.role == role and n.pair is None:
            effect = "the transistor saturates" if n.drift is None else f"the Q-point drifts {percent(n.drift)}"
            if n.fails and n.drift is not None:
                effect += f" and fails {', '.join(n.fails)}"
            steps["down" if n.step < 0 else "up"] = f"with {format_resistance(n.value)} {effect}"
    lines.append(
        f"{format_resistance(candidate.resistors[role])} leaves a drift of {percent(candidate.drift.q_point)}"
        + (f"; {'; '.join(steps.values())}." if steps else ".")
    )
    shares = [
        f"{percent(s.share)} for {quantity.upper()}"
        for quantity, budget in candidate.budget.items()
        for s in budget
        if s.cause == role and percent(s.share) != "0 %"
    ]
    lines.append(f"To the drift its own band adds {' and '.join(shares)}." if shares else "Its own band adds next to no drift.")
    for name in (name for name, owner in candidate.designators.items() if owner == role):
        stress, allowed = candidate.stress[name], ""
        if stress.power_allowed is not None:
            used = 0.0 if stress.power_used is None else stress.power_used
            allowed = f", {percent(used)} of what {stress.style} may carry here"
        smallest = f"the smallest style that does is {stress.smallest}" if stress.smallest else "no style of the table does"
        who = "It" if name == role else name.replace(role, role.upper())
        lines.append(f"{who} dissipates at most {format_quantity(stress.power, 'power')}{allowed}; {smallest}.")
    for other in classes:
        effect = "the transistor saturates" if other.drift is None else f"the drift is {percent(other.drift)}"
        fails = f" and {', '.join(other.fails)} fails" if other.fails and other.drift is not None else ""
        lines.append(f"As a {format_exact(other.tolerance, 'ratio')} part {effect}{fails}.")
    if span is not None:
        low, high = (format_quantity(end, "resistance") for end in span)
        lines.append(f"It may be replaced by any value from {low} to {high} of its class: every verdict still passes.")
    else:
        lines.append("Whether it may be replaced is not told, since a verdict fails already.")
    return tuple(lines)


def budget_words(cause: str) -> str:
    """A cause of a root-sum-square term in words.

    Parameters
    ----------
    cause : str
        As in `synth.statistics.Term`.

    Returns
    -------
    str
        ``VBE spread``, ``R1 tolerance``...
    """
    axis, _, what = cause.partition(" ")
    device = {"delta": "vbe", "icbo": "leakage", "delta_ref": "reference", "r_ref": "reference_slope"}.get(axis, axis)
    words = cause_words(device)
    if axis.startswith("r") and axis != "r_ref":
        return f"{words} {what or 'tolerance'}".replace("coefficient", "temperature coefficient")
    return f"{words} {what}".strip()
