"""A refit as a table of at most 100 columns, and the words that its other forms share."""

from __future__ import annotations

from math import isfinite

from synth.answer import Candidate
from synth.explain import percent
from synth.present.terminal import (
    LEGEND,
    figure,
    infeasible_words,
    limits_table,
    resistors,
    section,
    span,
    wrapped,
)
from synth.quantities import format_quantity, format_resistance
from synth.replacement import Compared, Device, Refit, changes_words

UNKNOWN = "–"
SAME = "·"
"""A resistor that stays."""


def render_refit(refit: Refit) -> str:
    """The whole answer as text.

    Parameters
    ----------
    refit : Refit
        Any refit.

    Returns
    -------
    str
        Lines of at most 100 columns, a trailing newline.
    """
    best = refit.best
    blocks = [headline(refit), "\n".join(f"  {line}" for line in refit.reasons)]
    if refit.answer.infeasible is not None:
        blocks.append(infeasible_words(refit.answer))
    blocks.append(section("Transistors as they were counted", device_rows(refit.old, refit.new)))
    title = f"On the resistors fitted today: {resistors(refit.after.candidates[0])}"
    blocks.append(section(title, comparison_rows(refit)))
    steps = step_rows(refit)
    wide = len(steps[0])
    blocks.append(section(f"Fewest changes ({SAME} stays)", steps, right=(0, wide - 3, wide - 2)))
    if refit.singles:
        blocks.append(section("One resistor alone, all others kept", single_rows(refit), right=(2,)))
    if best is not None:
        blocks.append(f"Recommended: {changes_words(best)}\n{limits_table(best.candidate)}")
    if refit.cautions or refit.answer.warnings:
        notes = [*refit.cautions, *refit.answer.warnings]
        blocks.append("\n".join(["Cautions", *(wrapped(f"  {c.name}: {c.text}", "    ") for c in notes)]))
    blocks.append("\n".join(["Not verified", *(wrapped(f"  {c.name}: {c.text}", "    ") for c in refit.not_verified)]))
    if refit.answer.assumed:
        blocks.append(section("Assumed, since not given", [[n.key, n.value, n.why] for n in refit.answer.assumed]))
    blocks.append(LEGEND)
    blocks.append("Next: --format markdown or csv writes the change record; --keep ROLE pins a resistor.")
    text = "\n\n".join(block for block in blocks if block)
    return "\n".join(wrapped(line, "    ") for line in text.split("\n")) + "\n"


def headline(refit: Refit) -> str:
    """The verdict in one line.

    Parameters
    ----------
    refit : Refit
        Any refit.

    Returns
    -------
    str
        ``CHANGE``, ``KEEP``, ``FAIL`` or ``OPEN``, the stage and the two transistors.
    """
    name = refit.answer.stage.get("name") or "stage"
    best = refit.best
    if best is None:
        verdict = "FAIL" if refit.search is None or refit.search.complete else "OPEN"
    else:
        verdict = "CHANGE" if best.changed else "KEEP"
    return f"{verdict}  {name}: {refit.new.label} in place of {refit.old.label}"


def device_rows(old: Device, new: Device) -> list[list[str]]:
    """The two transistors side by side.

    Parameters
    ----------
    old, new : Device
        Both.

    Returns
    -------
    list of list of str
        A row a figure, the first with the names.
    """

    def volts(d: Device) -> str:
        ends = figure(d.vbe[0], "voltage") if d.vbe[0] == d.vbe[2] else span(d.vbe[0], d.vbe[2], "voltage")
        return f"{ends} at {format_quantity(d.vbe_ic, 'current')}"

    def gain(d: Device) -> str:
        ends = f"{d.hfe[0]:g}" if d.hfe[0] == d.hfe[2] else f"{d.hfe[0]:g} to {d.hfe[2]:g}"
        if d.gain_ic is None or d.gain_vce is None:
            return f"{ends}, {d.gain_source.split(' (')[0]}"
        return f"{ends} at {format_quantity(d.gain_ic, 'current')}, {format_quantity(d.gain_vce, 'voltage')}"

    def maybe(value: float | None, kind: str) -> str:
        return UNKNOWN if value is None else format_quantity(value, kind)

    pairs = [
        ("", old.label, new.label),
        ("hFE assumed, 25 °C", gain(old), gain(new)),
        ("VBE, 25 °C", volts(old), volts(new)),
        ("ICBO at most, 25 °C", maybe(old.icbo, "current"), maybe(new.icbo, "current")),
        ("material", f"{old.material} {old.polarity}", f"{new.material} {new.polarity}"),
        ("package", old.package or UNKNOWN, new.package or UNKNOWN),
        ("VCEO", maybe(old.vceo, "voltage"), maybe(new.vceo, "voltage")),
        ("IC max", maybe(old.ic_max, "current"), maybe(new.ic_max, "current")),
        ("fT", maybe(old.ft, "frequency"), maybe(new.ft, "frequency")),
    ]
    return [list(row) for row in pairs if row[0] == "" or {row[1], row[2]} != {UNKNOWN}]


def comparison_rows(refit: Refit) -> list[list[str]]:
    """Every figure before and after, and whether that is better or worse.

    Parameters
    ----------
    refit : Refit
        Any refit.

    Returns
    -------
    list of list of str
        A row a figure, the first with the names.
    """
    head = ["", refit.old.label, refit.new.label, ""]
    return [head, *([x.what, _value(x.before, x.kind), _value(x.after, x.kind), _standing(x)] for x in refit.comparison)]


def _value(value: float | tuple[float, float] | None, kind: str) -> str:
    if value is None:
        return UNKNOWN
    if isinstance(value, tuple):
        return span(*value, kind)
    return percent(value) if kind == "ratio" else figure(value, kind)


def _standing(line: Compared) -> str:
    if line.by is None:
        return ""
    if line.standing == "same":
        return "same"
    points = line.kind == "ratio" or line.name.startswith("worst.")
    size = f"{abs(100.0 * line.by):.3g} points" if points else percent(abs(line.by))
    if line.kind == "temperature":
        size = f"{abs(line.by):.2g} K"
    if line.standing == "moved":
        return f"{'+' if line.by > 0.0 else '-'}{size}"
    return f"{line.standing} by {size}"


def least_margin(candidate: Candidate) -> str:
    """The verdict that is nearest to its limit.

    Parameters
    ----------
    candidate : Candidate
        Any candidate.

    Returns
    -------
    str
        ``7.7 % of target.ic``.
    """
    judged = [v for v in candidate.limits if isfinite(v.margin)]
    if not judged:
        return UNKNOWN
    tight = min(judged, key=lambda v: v.margin)
    return f"{percent(tight.margin)} of {tight.name}"


def step_rows(refit: Refit) -> list[list[str]]:
    """The best of each number of changes, and every one listed of the number that is recommended.

    Parameters
    ----------
    refit : Refit
        Any refit.

    Returns
    -------
    list of list of str
        A row a candidate with its new values, or why there is none; the last cell of the first row is the widest.
    """
    today = refit.after.candidates[0]
    roles = list(today.resistors)
    head = [f"{role.upper()} kept" if role in refit.keep else role.upper() for role in roles]
    rows = [["changes", *head, "IC over the box", "drift", "costs", "least margin"]]
    fewest = len(refit.changes[0].changed) if refit.changes else -1
    for step in refit.steps:
        own = [change for change in refit.changes if len(change.changed) == step.changes]
        if not own:
            why = "none will do, proved" if step.status == "infeasible" else "not settled: the search was stopped"
            if step.changes == 0:
                failed = [v.name for v in today.limits if v.verdict == "fail"]
                why = f"fails {', '.join(failed)}"
            rows.append([str(step.changes), *(SAME if step.changes == 0 else "" for _ in roles), "", "", "", why])
        for k, change in enumerate(own if step.changes == fewest else own[:1]):
            c = change.candidate
            values = [format_resistance(c.resistors[role]) if role in change.changed else SAME for role in roles]
            cost = "least" if c.rank == refit.unconstrained else f"+{percent(change.cost.drift)}"
            mark = "; recommended" if c.rank == 1 else ""
            rows.append(
                [str(step.changes) if k == 0 else "", *values, span(*c.worst.ic, "current"), percent(c.drift.q_point), cost,
                 least_margin(c) + mark]
            )
    return rows


def single_rows(refit: Refit) -> list[list[str]]:
    """What each role alone can do.

    Parameters
    ----------
    refit : Refit
        Any refit.

    Returns
    -------
    list of list of str
        A row a role.
    """
    fitted = refit.after.candidates[0].resistors
    rows = []
    for single in refit.singles:
        old = f"{single.role.upper()} {format_resistance(fitted[single.role])}"
        if single.value is None or single.drift is None:
            rows.append([old, "no value will do", ""])
        else:
            rows.append([old, f"to {format_resistance(single.value)}", percent(single.drift)])
    return rows
