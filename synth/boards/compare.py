"""What differs from an earlier BOM, and why: the old values judged anew, the board chosen anew with them."""

from __future__ import annotations

import csv
import io
import os
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from synth.boards.bom import Place
from synth.boards.candidates import Choice, Choices
from synth.boards.file import Board
from synth.boards.judging import judged_values
from synth.boards.model import Bound, Selection
from synth.boards.purchase import Need
from synth.explain import percent
from synth.quantities import RestpointError, format_exact, format_resistance, parse
from synth.stage import StageError

NEEDED = ("designators", "ohms")
"""Columns that a BOM needs to be compared with."""
ALIKE = 1e-9
"""Difference of two objectives that is none [currency of the list or -]."""


@dataclass(frozen=True, kw_only=True)
class Change:
    """Resistors that differ from an earlier BOM: their numbers, stage, value before and after ("" for none), and why."""

    designators: tuple[str, ...]
    stage: str
    before: str
    after: str
    why: str


@dataclass(frozen=True, kw_only=True)
class Old:
    """A resistor of an earlier BOM: value [ohm], tolerance [-] (None where not stated), style and part number."""

    ohms: float
    tolerance: float | None
    style: str
    part: str

    @property
    def text(self) -> str:
        """The resistor in words."""
        tolerance = "" if self.tolerance is None else format_exact(self.tolerance, "ratio")
        return " ".join(filter(None, (format_resistance(self.ohms), tolerance, self.style, self.part)))


def read_bom(path: str | os.PathLike[str]) -> dict[str, Old]:
    """An earlier BOM.

    Parameters
    ----------
    path : path
        CSV as ``restpoint board --format csv`` writes it.

    Returns
    -------
    dict of str to Old
        By the number of the resistor.

    Raises
    ------
    RestpointError
        If the file is no such BOM; names the line.
    """
    name = Path(path).name
    try:
        text = Path(path).read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        reason = "which is not UTF-8" if isinstance(error, UnicodeDecodeError) else f"which cannot be read ({error.strerror})"
        raise StageError("against", str(path), reason, "a BOM in CSV as --format csv writes it") from None
    reader = csv.DictReader(io.StringIO(text, newline=""))
    missing = [column for column in NEEDED if column not in (reader.fieldnames or ())]
    if missing:
        raise StageError(f"against {name!r}", None, f"which has no column {missing[0]!r}", "a BOM as --format csv writes it")
    found: dict[str, Old] = {}
    for row in reader:
        cells = {key: cell.removeprefix("'") for key, cell in row.items() if isinstance(key, str) and isinstance(cell, str)}
        where = f"against {name!r}, line {reader.line_num}"
        ohms = parse(f"{cells['ohms']} ohm", "resistance", field=where)
        tolerance = parse(cells["tolerance"], "ratio", field=where) if cells.get("tolerance") else None
        old = Old(ohms=ohms, tolerance=tolerance, style=cells.get("style", ""), part=cells.get("part", ""))
        found |= dict.fromkeys(cells["designators"].replace(",", " ").split(), old)
    return found


def changes(
    old: Mapping[str, Old],
    places: Sequence[Place],
    selection: Selection,
    sets: Sequence[Choices],
    request: Board,
    again: Callable[[int, tuple[Choice, ...]], Selection],
) -> tuple[Change, ...]:
    """Every resistor that differs, and why.

    Parameters
    ----------
    old : mapping of str to Old
        The earlier BOM.
    places : sequence of Place
        Every resistor now.
    selection : Selection
        What was chosen, and what that reached.
    sets : sequence of Choices
        Candidates of each stage within its allowance.
    request : Board
        What was asked.
    again : callable
        ``again(stage, candidates)``: the best choice for the board if a stage had these candidates only.

    Returns
    -------
    tuple of Change
        Stage by stage; numbers that the board no longer has come last.
    """
    found: dict[tuple[int, str, str], list[str]] = {}
    for place in places:
        before = old.get(place.designator)
        part = place.part
        after = Old(ohms=part.value, tolerance=part.tolerance, style=part.style or "", part=part.number or "")
        if before is None or before != replace(after, tolerance=after.tolerance if before.tolerance is not None else None):
            key = (place.stage, "" if before is None else before.text, after.text)
            found.setdefault(key, []).append(place.designator)
    reasons = {stage: _why(stage, old, places, selection, sets, request, again) for stage in dict.fromkeys(k[0] for k in found)}
    listed = [
        Change(
            designators=tuple(numbers),
            stage=request.stages[stage].stage.name,
            before=before,
            after=after,
            why=reasons[stage] if before else "a number that the old BOM does not have",
        )
        for (stage, before, after), numbers in found.items()
    ]
    gone = sorted(set(old) - {place.designator for place in places})
    for text in dict.fromkeys(old[number].text for number in gone):
        numbers = tuple(number for number in gone if old[number].text == text)
        listed.append(Change(designators=numbers, stage="", before=text, after="", why="no stage has this number now"))
    return tuple(listed)


def _why(
    stage: int,
    old: Mapping[str, Old],
    places: Sequence[Place],
    selection: Selection,
    sets: Sequence[Choices],
    request: Board,
    again: Callable[[int, tuple[Choice, ...]], Selection],
) -> str:
    """What would be worse with the old resistors of a stage."""
    own = [place for place in places if place.stage == stage and place.copy == 0]
    before = {place.role: old[place.designator] for place in own if place.designator in old}
    if len(before) < len(own):
        return "the old BOM does not have all resistors of this stage"
    choice, entry = selection.chosen[stage], request.stages[stage]
    values = choice.resistors | {role: was.ohms for role, was in before.items()}
    if values == choice.resistors:
        return "the same value from another row: fewer lines or less cost for the board"
    like = tuple(c for c in sets[stage].kept if c.network == choice.network and c.resistors == values)
    if like:
        held = again(stage, like)
        return "the old values pass, but " + _worse(selection.bounds, held)
    needs = {
        role: Need(was.ohms, choice.needs[role].tolerance if was.tolerance is None else was.tolerance, *choice.needs[role][2:])
        for role, was in before.items()
    }
    try:
        candidate = judged_values(entry.stage, choice.network, values, needs, {})
    except RestpointError as error:
        return f"the old values cannot be judged: {error}"
    failed = [v.name for v in candidate.limits if v.verdict == "fail"]
    if failed:
        return f"the old values fail {' and '.join(failed)}"
    drift, allowed = candidate.drift.q_point, sets[stage].allowed
    if drift > allowed:
        return f"the old values drift {percent(drift)}, beyond the {percent(allowed)} that the stage may"
    return "the old values pass, but cannot be had from the stock list"


def _worse(bounds: Sequence[Bound], held: Selection) -> str:
    if not held.chosen:
        return "the board has no choice with them that it may have"
    lines, cost, drift = (after.value - now.value for now, after in zip(bounds, held.bounds, strict=True))
    if lines > 0:
        return f"keeping them takes {lines:.0f} new line{'s' if lines > 1 else ''} more"
    if cost > ALIKE:
        return f"keeping them costs {cost:.6g} more"
    if drift > ALIKE:
        return f"keeping them costs the stages {percent(drift).removesuffix(' %')} points of drift in all"
    return "others do as well"
