"""The change record of a refit: Markdown for a review, CSV for a list of changes."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from math import isfinite

from synth.explain import percent
from synth.present.export import escaped, inert
from synth.present.refit import comparison_rows, device_rows, headline
from synth.present.terminal import figure, limit_words
from synth.quantities import format_resistance
from synth.replacement import Refit, changes_words

BLANKS = ("change number", "date", "written by", "checked by", "approved by")
"""What people fill in."""


def to_change_record(refit: Refit, reason: str = "", designators: Mapping[str, str] | None = None) -> str:
    """The change record as a Markdown document.

    Parameters
    ----------
    refit : Refit
        Any refit.
    reason : str
        Why the transistor is replaced; said from the two transistors when empty.
    designators : mapping of str to str, optional
        Designator of each role, and of the transistor as ``q``, on the board; the role itself where none is given.

    Returns
    -------
    str
        Headings and tables, blanks to fill in, a trailing newline.
    """
    names = designators or {}
    parts = [f"# Change record: {escaped(str(refit.answer.stage.get('name') or 'stage'))}"]
    parts.append(_table([["", ""], *([blank, ""] for blank in BLANKS)]))
    parts += ["## Reason", escaped(reason or f"{refit.old.label} is replaced by {refit.new.label}.")]
    parts += ["## Change", _table(change_rows(refit, names)), f"Result: {escaped(headline(refit))}."]
    parts += ["## Why this change", "\n".join(f"- {escaped(line)}" for line in refit.reasons)]
    parts += ["## Transistors as they were counted", _table(_escaped(device_rows(refit.old, refit.new)))]
    parts += ["## Before and after, on the resistors fitted today", _table(_escaped(comparison_rows(refit)))]
    parts += ["## Remaining margins after the change", _table(_escaped(margin_rows(refit)))]
    if refit.cautions or refit.answer.warnings:
        notes = [*refit.cautions, *refit.answer.warnings]
        parts += ["## Cautions", "\n".join(f"- {escaped(c.name)}: {escaped(c.text)}" for c in notes)]
    parts += ["## Not verified", "\n".join(f"- [ ] {escaped(c.name)}: {escaped(c.text)}" for c in refit.not_verified)]
    if refit.answer.assumed:
        rows = [["key", "value", "why"], *([n.key, n.value, n.why] for n in refit.answer.assumed)]
        parts += ["## Assumed, since not given", _table(_escaped(rows))]
    if refit.answer.command:
        parts += ["## To repeat", "    " + " ".join(refit.answer.command.split())]
    return "\n\n".join(parts) + "\n"


def change_rows(refit: Refit, designators: Mapping[str, str]) -> list[list[str]]:
    """What is taken out and what is put in.

    Parameters
    ----------
    refit : Refit
        Any refit.
    designators : mapping of str to str
        By role, and the transistor's as ``q``.

    Returns
    -------
    list of list of str
        A row a part, the transistor first.
    """
    rows = [["designator", "role", "before", "after", "from"]]
    rows.append([designators.get("q", "Q"), "transistor", refit.old.label, refit.new.label, ""])
    best = refit.best
    for role, ohm in refit.after.candidates[0].resistors.items():
        changed = best is not None and role in best.changed
        new = format_resistance(best.candidate.resistors[role]) if best is not None and changed else "stays"
        source = best.source.get(role, "") if best is not None and changed else ""
        rows.append([designators.get(role, role.upper()), role, format_resistance(ohm), new, source])
    return rows


def margin_rows(refit: Refit) -> list[list[str]]:
    """The margin of every verdict before, with the new transistor alone, and after the change.

    Parameters
    ----------
    refit : Refit
        Any refit.

    Returns
    -------
    list of list of str
        A row a verdict.
    """
    last = refit.after.candidates[0] if refit.best is None else refit.best.candidate
    sides = [{v.name: v for v in answer.candidates[0].limits} for answer in (refit.before, refit.after)]
    rows = [["verdict", "allowed", "worst", "margin today", "transistor alone", "after the change", ""]]
    for v in last.limits:
        cells = [percent(side[v.name].margin) if v.name in side and isfinite(side[v.name].margin) else "–" for side in sides]
        own = percent(v.margin) if isfinite(v.margin) else "–"
        worst = figure(v.worst, v.kind) if isfinite(v.worst) else "none"
        rows.append([v.name, limit_words(v), worst, *cells, own, v.verdict])
    return rows


def to_change_list(refit: Refit, reason: str = "", designators: Mapping[str, str] | None = None) -> str:
    """The change record as CSV: a row a part, then a row a verdict and a row for what was not verified.

    Parameters
    ----------
    refit : Refit
        Any refit.
    reason : str
        Why the transistor is replaced; said from the two transistors when empty.
    designators : mapping of str to str, optional
        Designator of each role, and of the transistor as ``q``.

    Returns
    -------
    str
        Lines with a header; texts that a spreadsheet would run are made inert.
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")

    def row(*cells: object) -> None:
        writer.writerow([inert(cell) if isinstance(cell, str) else cell for cell in cells])

    row("kind", "name", "role", "before", "after", "margin_before", "margin_after", "text")
    for blank in BLANKS:
        row("to fill in", blank, "", "", "", "", "", "")
    row("reason", "", "", "", "", "", "", reason or f"{refit.old.label} is replaced by {refit.new.label}")
    names = designators or {}
    row("part", names.get("q", "Q"), "transistor", refit.old.label, refit.new.label, "", "", "")
    best = refit.best
    for role, ohm in refit.after.candidates[0].resistors.items():
        after = ohm if best is None else best.candidate.resistors[role]
        state = "no change found" if best is None else "changed" if role in best.changed else "stays"
        row("part", names.get(role, role.upper()), role, ohm, after, "", "", state)
    today = {v.name: v for v in refit.before.candidates[0].limits}
    last = refit.after.candidates[0] if best is None else best.candidate
    for v in last.limits:
        old = today.get(v.name)
        row("verdict", v.name, "", _number(old.worst) if old else "", _number(v.worst), _number(old.margin) if old else "",
            _number(v.margin), v.verdict)  # fmt: skip
    for note in refit.not_verified:
        row("not verified", note.name, "", "", "", "", "", note.text)
    for line in (refit.reasons if best is None else (changes_words(best), *refit.reasons)):
        row("note", "", "", "", "", "", "", line)
    return out.getvalue()


def _number(value: float) -> float | str:
    return value if isfinite(value) else ""


def _escaped(rows: Sequence[Sequence[str]]) -> list[list[str]]:
    return [[escaped(cell) for cell in row] for row in rows]


def _table(rows: Sequence[Sequence[str]]) -> str:
    lines = ["| " + " | ".join(row) + " |" for row in rows]
    return "\n".join([lines[0], "|" + "---|" * len(rows[0]), *lines[1:]])
