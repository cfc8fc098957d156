"""The page of a board: its BOM on top, then every stage with what was chosen for it."""

from __future__ import annotations

from synth.answer import Answer, Candidate
from synth.boards import BoardAnswer, Line, StageResult
from synth.explain import percent
from synth.present.board import money
from synth.present.page.candidates import Entry, listing, views
from synth.present.page.lead import WORDS, count_words
from synth.present.page.parts import Cell, Note, Table, number, used, words
from synth.quantities import format_exact, format_quantity
from synth.stage import Stage


def board_page(answer: BoardAnswer) -> dict[str, object]:
    """What the template of an answer needs to show a board.

    Parameters
    ----------
    answer : BoardAnswer
        Of `synth.board`.

    Returns
    -------
    dict
        Names and values of the template.
    """
    found = _entries(answer)
    return {
        "title": answer.name,
        "kind": "Resistors of a board chosen together",
        "lead": _lead(answer),
        "above": [note for note in (_why_not(answer), _bom(answer)) if note is not None],
        "listing": listing("Stages", "stage", found),
        "candidates": views(found, alike=False),
        "notes": [note for note in (_reasons(answer), _merges(answer), _proof(answer), _assumed(answer)) if note is not None]
        + [Note(key="words", title="Words", facts=WORDS)],
        "review": None,
        "command": answer.command,
        "version": answer.version,
    }


def _entries(answer: BoardAnswer) -> list[Entry]:
    """One entry a stage: what was chosen, as an answer of its own."""
    return [
        Entry(
            key=str(place + 1),
            label=result.name,
            name=result.name,
            answer=_alone(answer, entry.stage, result.candidate),
            candidate=result.candidate,
            designators=result.designators,
            more=_more(result),
        )
        for place, (result, entry) in enumerate(zip(answer.stages, answer.request.stages, strict=bool(answer.stages)))
    ]


def _alone(answer: BoardAnswer, stage: Stage, candidate: Candidate) -> Answer:
    return Answer(kind="check", version=answer.version, command=answer.command, stage=stage.as_dict(), candidates=(candidate,))


def _more(result: StageResult) -> dict[str, Cell]:
    return {
        "built": number(f"{result.count}×", result.count),
        "own best": number(percent(result.best), result.best),
        "allowed": number(percent(result.allowed), result.allowed),
    }


def _lead(answer: BoardAnswer) -> tuple[str, str, list[str]]:
    search = answer.search
    proved = "proved" if search.complete else "not proved"
    if not answer.passed:
        first, *rest = answer.infeasible or ("No choice was found.",)
        lines = [f"No choice for {answer.name} meets every limit, {proved}.", first]
        way_out = "Widen an allowance, a window or a limit, or add values to the stock list."
        return "fail", "FAIL", [*lines, rest[0] if rest else way_out]
    pieces, new = sum(line.quantity for line in answer.bom), sum(line.new for line in answer.bom)
    order = "" if answer.cost is None else f"; the order costs {money(answer.cost)}"
    worst = max(answer.stages, key=lambda s: s.drift - s.best)
    spent = worst.drift - worst.best
    spends = f"{worst.name} gives up most for the others, {percent(spent)} of drift"
    if spent <= 0.0:
        spends = "No stage gives up any drift"
    count = f"{len(answer.stages)} {'stage' if len(answer.stages) == 1 else 'stages'}"
    return "pass", "PASS", [
        f"{pieces} resistors of {count} on {len(answer.bom)} lines of the BOM, {new} new{order}.",
        f"Chosen among {count_words(search.combinations)} combinations of the stages, {proved} the best.",
        f"{spends}; every stage stays within its allowance over its whole box.",
    ]


def _why_not(answer: BoardAnswer) -> Note | None:
    return Note(key="infeasible", title="Why not", lines=answer.infeasible) if answer.infeasible else None


def _bom(answer: BoardAnswer) -> Note | None:
    if not answer.bom:
        return None
    priced = any(line.cost is not None or line.on_hand is not None for line in answer.bom)
    order = ("on hand", "buy", "cost") if priced else ()
    head = ("item", "quantity", "value", "tolerance", "TCR", "style", "part", *order, "power", "voltage", "designators")
    rows = [_line(line, priced) for line in answer.bom]
    note = "Power and voltage are the most that one piece of the line has to stand, and the share of its rating."
    return Note(key="bom", title="BOM", tables=(Table(title="BOM", head=head, rows=rows, note=note),))


def _line(line: Line, priced: bool) -> list[Cell]:
    cells = [number(str(line.item)), number(str(line.quantity)), number(line.value)]
    cells += [number(format_exact(line.tolerance, "ratio")), number(format_exact(line.tcr, "temperature_coefficient"))]
    cells += [words(line.style or "–"), words(line.part or "–")]
    if priced:
        cells += [number("any" if line.on_hand is None else str(line.on_hand)), number(str(line.buy))]
        cells.append(number("–" if line.cost is None else money(line.cost)))
    cells += [_rated(line.power, line.power_rating, "power"), _rated(line.voltage, line.voltage_rating, "voltage")]
    return [*cells, words(", ".join(line.designators) + ("" if line.new else " (on the board already)"))]


def _rated(worst: float, rating: float | None, kind: str) -> Cell:
    text = format_quantity(worst, kind)
    if not rating:
        return number(text)
    share = worst / rating
    return number(f"{text}, {percent(share)}", share, used(share), "fail" if share > 1.0 else "")


def _reasons(answer: BoardAnswer) -> Note | None:
    if not answer.bom:
        return None
    rows = [
        [number(str(line.item)), number(line.value), words(line.rationale.replace(" | ", "; ")), words(_alternates(line))]
        for line in answer.bom
    ]
    table = Table(title="Why these values", head=("item", "value", "why", "what else would pass in every place"), rows=rows)
    return Note(key="reasons", title="Why these values", tables=(table,))


def _alternates(line: Line) -> str:
    return "; ".join(line.alternates) or "none"


def _merges(answer: BoardAnswer) -> Note | None:
    if not answer.merges:
        return None
    return Note(key="merges", title="What sharing costs", lines=[merge.text for merge in answer.merges])


def _proof(answer: BoardAnswer) -> Note:
    search = answer.search
    names = {"new_lines": "new line items", "cost": "cost of what is ordered", "drift": "drift, added up over the stages"}
    rows = []
    for bound in search.objectives:
        reached, least = (
            (percent(bound.value), percent(bound.bound)) if bound.name == "drift"
            else (f"{bound.value:.0f}", f"{bound.bound:.0f}") if bound.name == "new_lines"
            else (money(bound.value), money(bound.bound))
        )  # fmt: skip
        rows.append([words(names.get(bound.name, bound.name.replace("_", " "))), number(reached), number(least)])
    facts = [
        ("searched", f"{count_words(search.combinations)} combinations, {count_words(search.candidates)} candidates"),
        ("solved", f"{count_words(search.evaluated)} Q-points in {format_quantity(search.seconds, 'time')}"),
        ("state", search.status),
    ]
    tables = (Table(title="Minimised in this order", head=("", "reached", "proved at least"), rows=rows),) if rows else ()
    return Note(key="search", title="Search and proof", facts=facts, tables=tables)


def _assumed(answer: BoardAnswer) -> Note | None:
    if not answer.assumed:
        return None
    rows = [[words(key), words(text)] for key, text in answer.assumed]
    table = Table(title="Assumed", head=("key", "value"), rows=rows)
    return Note(key="assumed", title="Assumed, since not given", tables=(table,))
