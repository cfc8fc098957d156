"""The page of a refit: both transistors side by side, the resistors fitted today with either, and what may change."""

from __future__ import annotations

from collections.abc import Sequence

from synth.present.page.candidates import Entry, listing, views
from synth.present.page.lead import WORDS, assumed_note, search_note
from synth.present.page.parts import Cell, Note, Table, number, words
from synth.present.refit import comparison_rows, device_rows, headline, single_rows, step_rows
from synth.replacement import Refit

MARKS = {"CHANGE": "pass", "KEEP": "pass", "FAIL": "fail", "OPEN": "open"}
TODAY_OLD, TODAY_NEW = "before", "after"
"""Keys of the resistors fitted today, with the old and with the new transistor."""


def refit_page(refit: Refit) -> dict[str, object]:
    """What the template of an answer needs to show a refit.

    Parameters
    ----------
    refit : Refit
        Any refit.

    Returns
    -------
    dict
        Names and values of the template.
    """
    found = _entries(refit)
    verdict, _, told = headline(refit).partition("  ")
    title, _, swap = told.rpartition(": ")
    best = refit.best
    # The recommended change stands beside today's resistors with the new transistor; without one, both transistors do.
    first, beside = (TODAY_NEW, TODAY_OLD) if best is None else (str(best.candidate.rank), TODAY_NEW)
    notes = [_not_verified(refit), _comparison(refit), _devices(refit), _steps(refit), _singles(refit), *_cautions(refit)]
    rest = [assumed_note(refit.answer), search_note(refit.answer)]
    return {
        "title": title,
        "kind": f"Transistor replaced: {swap}",
        "lead": (MARKS[verdict], verdict, list(refit.reasons)),
        "above": [],
        "listing": listing("Resistors today and changed", "which", found, first=first, beside=beside),
        "candidates": views(found),
        "notes": [*(note for note in (*notes, *rest) if note is not None), Note(key="words", title="Words", facts=WORDS)],
        "review": None,
        "command": refit.answer.command,
        "version": refit.answer.version,
    }


def _entries(refit: Refit) -> list[Entry]:
    """Today's resistors with either transistor, and every change that is listed."""
    today = [(TODAY_OLD, refit.before, refit.old.label), (TODAY_NEW, refit.after, refit.new.label)]
    found = [
        Entry(
            key=key,
            label=f"today, {label}",
            name=f"Today with {label}",
            answer=answer,
            candidate=answer.candidates[0],
            more={"changes": number("0", 0)},
        )
        for key, answer, label in today
    ]
    for change in refit.changes:
        c = change.candidate
        *most, last = [role.upper() for role in change.changed] or ["nothing"]
        roles = f"{', '.join(most)} and {last}" if most else last
        mark = ", recommended" if c.rank == 1 else ", least drift" if c.rank == refit.unconstrained else ""
        entry = Entry(
            key=str(c.rank),
            label=f"{roles} changed{mark}",
            name=f"{roles} changed",
            answer=refit.answer,
            candidate=c,
            more={"changes": number(str(len(change.changed)), len(change.changed))},
        )
        found.append(entry)
    return found


def _table(title: str, rows: Sequence[Sequence[str]], numbers: Sequence[int] = (), note: str = "") -> Table:
    """Rows of text as a table, the first with the names; some columns hold numbers."""
    head, *body = rows

    def cell(column: int, text: str) -> Cell:
        return number(text) if column in numbers else words(text)

    return Table(title=title, head=head, rows=[[cell(k, text) for k, text in enumerate(row)] for row in body], note=note)


def _comparison(refit: Refit) -> Note:
    table = _table("On the resistors fitted today", comparison_rows(refit), (1, 2))
    return Note(key="comparison", title="Before and after, on the resistors fitted today", tables=(table,))


def _devices(refit: Refit) -> Note:
    table = _table("Transistors as they were counted", device_rows(refit.old, refit.new))
    return Note(key="devices", title="Transistors as they were counted", tables=(table,))


def _steps(refit: Refit) -> Note:
    rows = step_rows(refit)
    wide = len(rows[0])
    table = _table("Fewest changes", rows, (0, *range(1, wide - 1)), "A dot stands for a resistor that stays.")
    return Note(key="steps", title="Fewest changes", tables=(table,))


def _singles(refit: Refit) -> Note | None:
    if not refit.singles:
        return None
    rows = [["fitted", "change", "drift"], *single_rows(refit)]
    table = _table("One resistor alone", rows, (2,), "All others stay.")
    return Note(key="singles", title="One resistor alone", tables=(table,))


def _cautions(refit: Refit) -> list[Note]:
    facts = [(c.name.replace("_", " "), c.text) for c in (*refit.cautions, *refit.answer.warnings)]
    return [Note(key="cautions", title="Cautions", facts=facts)] if facts else []


def _not_verified(refit: Refit) -> Note | None:
    if not refit.not_verified:
        return None
    facts = [(c.name.replace("_", " "), c.text) for c in refit.not_verified]
    return Note(key="unverified", title="Not verified", facts=facts)
