"""The answer for a board as text, CSV and Markdown."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence

from synth.boards import BoardAnswer, Change, Line, StageResult
from synth.explain import percent
from synth.present.export import escaped, inert
from synth.present.terminal import table
from synth.quantities import format_exact, format_quantity, format_resistance

COLUMNS = (
    "item", "quantity", "designators", "value", "ohms", "tolerance", "tcr", "power_w", "power_rating_w", "voltage_v",
    "voltage_rating_v", "style", "part", "new", "on_hand", "buy", "price", "cost", "alternates", "rationale",
)  # fmt: skip
"""Columns of the BOM in CSV."""
WIDE = 100
LEGEND = (
    "Drift is the largest excursion over the whole box. Power and voltage are the worst over the box and over all places of\n"
    "the line. An alternate passes every verdict in every place of its line. Check ratings in the maker's data sheet."
)


def render(answer: BoardAnswer) -> str:
    """The whole answer as text.

    Parameters
    ----------
    answer : BoardAnswer
        Of `synth.board`.

    Returns
    -------
    str
        A trailing newline.
    """
    blocks = [_headline(answer)]
    if not answer.passed:
        blocks.append("\n".join(["Why not", *(f"  {reason}" for reason in answer.infeasible)]))
        blocks.append("Next: widen allowance, a window or a limit, or add values to the stock list.")
        return "\n\n".join(blocks) + "\n"
    blocks += [_proof(answer), "Stages\n" + table(_stage_rows(answer.stages), right=(0, 1, 2, 3))]
    blocks.append("Resistors\n" + table(_resistor_rows(answer.stages)))
    blocks.append("BOM\n" + table(_bom_rows(answer), right=(0, 1)))
    stress = [["item", "value", "TCR", "at most", "rated", "voltage", "rated", "alternates that would also pass"]]
    stress += [_stress_row(line) for line in answer.bom]
    blocks.append("What each line has to stand, and what else would do\n" + table(stress, right=(0,)))
    reasons = [[str(line.item), line.value, reason] for line in answer.bom for reason in line.rationale.split(" | ")]
    blocks.append("Why these values\n" + table(reasons, right=(0,)))
    if answer.merges:
        blocks.append("What sharing costs\n" + table([["", merge.text] for merge in answer.merges], indent=""))
    if answer.changes is not None:
        changed = table(_change_rows(answer.changes)) if answer.changes else "  nothing"
        blocks.append(f"Changed against the earlier BOM\n{changed}")
    if answer.assumed:
        blocks.append("Assumed, since not given\n" + table([[key, text] for key, text in answer.assumed]))
    blocks += [LEGEND, "Next: --format csv --output bom.csv writes the BOM for the buyer."]
    return "\n\n".join(blocks) + "\n"


def _headline(answer: BoardAnswer) -> str:
    search = answer.search
    if not answer.passed:
        proved = ", proved" if search.complete else ""
        return f"FAIL  {answer.name}: no choice meets every limit{proved}"
    pieces = sum(line.quantity for line in answer.bom)
    new = sum(line.new for line in answer.bom)
    text = f"PASS  {answer.name}: {_many(len(answer.stages), 'stage')}, {_many(pieces, 'resistor')} on "
    text += f"{_many(len(answer.bom), 'line')} ({new} new)"
    order = "" if answer.cost is None else f", {money(answer.cost)} to order"
    state = "proved the best choice" if search.complete else "not proved the best"
    effort = f"{search.candidates} candidates of {search.combinations:.3g} combinations, {search.seconds:.1f} s"
    return f"{text}{order};\n      {state} ({effort})"


def _proof(answer: BoardAnswer) -> str:
    rows = [["minimised in this order", "reached", "proved at least"]]
    for bound in answer.search.objectives:
        if bound.name == "drift":
            rows.append(["drift, added up over the stages", percent(bound.value), percent(bound.bound)])
        elif bound.name == "new_lines":
            rows.append(["new line items", f"{bound.value:.0f}", f"{bound.bound:.0f}"])
        elif answer.cost is not None:
            rows.append(["cost of what is ordered", money(bound.value), money(bound.bound)])
    return table(rows)


def _stage_rows(stages: Sequence[StageResult]) -> list[list[str]]:
    rows = [["built", "drift", "own best", "allowed", "candidates", "network", "stage"]]
    for stage in stages:
        drifts = [percent(drift) for drift in (stage.drift, stage.best, stage.allowed)]
        capped = "" if stage.reached is None else f" below {percent(stage.reached)}"
        rows.append([f"{stage.count}×", *drifts, f"{stage.found}{capped}", stage.candidate.network, stage.name])
    return rows


def _resistor_rows(stages: Sequence[StageResult]) -> list[list[str]]:
    rows = []
    for stage in stages:
        for copy, numbers in enumerate(stage.designators, 1):
            values = [
                f"{numbers.get(role, role)} {format_resistance(ohms)}"
                + ("" if role in numbers else " (no part of this board)")
                for role, ohms in stage.candidate.resistors.items()
            ]
            rows.append([stage.name + (f", copy {copy}" if stage.count > 1 else ""), ", ".join(values)])
    return rows


def _bom_rows(answer: BoardAnswer) -> list[list[str]]:
    priced = any(line.cost is not None or line.on_hand is not None for line in answer.bom)
    order = ["on hand", "buy", "cost"] if priced else []
    rows = [["item", "qty", "value", "tol.", "style", "part", *order, "designators"]]
    for line in answer.bom:
        cells = [str(line.item), str(line.quantity), line.value, format_exact(line.tolerance, "ratio")]
        cells += [line.style or "–", line.part or "–"]
        if priced:
            cells += ["any" if line.on_hand is None else str(line.on_hand), str(line.buy)]
            cells.append("–" if line.cost is None else money(line.cost))
        rows.append([*cells, ", ".join(line.designators) + ("" if line.new else " (on the board already)")])
    return rows


def _stress_row(line: Line) -> list[str]:
    return [
        str(line.item),
        line.value,
        format_exact(line.tcr, "temperature_coefficient"),
        format_quantity(line.power, "power"),
        "–" if line.power_rating is None else format_quantity(line.power_rating, "power"),
        format_quantity(line.voltage, "voltage"),
        "–" if line.voltage_rating is None else format_quantity(line.voltage_rating, "voltage"),
        "; ".join(line.alternates) or "none",
    ]


def _change_rows(changes: Sequence[Change]) -> list[list[str]]:
    return [
        [", ".join(change.designators), f"{change.before or 'none'} → {change.after or 'none'}", change.why]
        for change in changes
    ]


def changes_text(changes: Sequence[Change]) -> str:
    """What differs from an earlier BOM, a line each.

    Parameters
    ----------
    changes : sequence of Change
        As `synth.board` found them.

    Returns
    -------
    str
        A trailing newline; empty where nothing differs.
    """
    return "".join(f"{numbers}: {what}: {why}\n" for numbers, what, why in _change_rows(changes))


def to_csv(answer: BoardAnswer) -> str:
    """The BOM for a spreadsheet; when there is none, one row a reason.

    Parameters
    ----------
    answer : BoardAnswer
        Of `synth.board`.

    Returns
    -------
    str
        Comma-separated, lines end with a newline; texts that a spreadsheet would run are inert.
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    if not answer.passed:
        writer.writerow(["reason"])
        writer.writerows([inert(reason)] for reason in answer.infeasible)
        return out.getvalue()
    writer.writerow(COLUMNS)
    for line in answer.bom:
        cells: list[object] = [line.item, line.quantity, inert(" ".join(line.designators)), line.value, line.ohms]
        cells += [format_exact(line.tolerance, "ratio"), format_exact(line.tcr, "temperature_coefficient")]
        cells += [line.power, line.power_rating, line.voltage, line.voltage_rating, inert(line.style or "")]
        cells += [inert(line.part or ""), "yes" if line.new else "no", line.on_hand, line.buy, line.price, line.cost]
        cells += [inert("; ".join(line.alternates)), inert(line.rationale)]
        writer.writerow(["" if cell is None else cell for cell in cells])
    return out.getvalue()


def to_markdown(answer: BoardAnswer) -> str:
    """The answer as a section of a document.

    Parameters
    ----------
    answer : BoardAnswer
        Of `synth.board`.

    Returns
    -------
    str
        Headings and tables.
    """
    parts = [f"# {escaped(answer.name)}", escaped(_headline(answer))]
    if not answer.passed:
        parts.append("\n".join(f"- {escaped(reason)}" for reason in answer.infeasible))
        return "\n\n".join(parts) + "\n"
    parts += ["## Stages", _table(_stage_rows(answer.stages))]
    parts += [_table([["stage", "resistors"], *_resistor_rows(answer.stages)]), "## BOM", _table(_bom_rows(answer))]
    head = ["item", "value", "TCR", "at most", "rated", "voltage", "rated", "alternates that would also pass"]
    parts += ["## Stress and alternates", _table([head, *(_stress_row(line) for line in answer.bom)])]
    parts += ["## Reasons", "\n".join(f"- {escaped(f'{line.value}: {line.rationale}')}" for line in answer.bom)]
    if answer.merges:
        parts += ["## What sharing costs", "\n".join(f"- {escaped(merge.text)}" for merge in answer.merges)]
    if answer.changes:
        head = ["resistors", "before → after", "why"]
        parts += ["## Changed against the earlier BOM", _table([head, *_change_rows(answer.changes)])]
    return "\n\n".join(parts) + "\n"


def _table(rows: Sequence[Sequence[str]]) -> str:
    lines = ["| " + " | ".join(map(escaped, row)) + " |" for row in rows]
    return "\n".join([lines[0], "|" + "---|" * len(rows[0]), *lines[1:]])


def money(amount: float) -> str:
    """An amount in the currency of the stock list.

    Parameters
    ----------
    amount : float
        Any [currency of the list].

    Returns
    -------
    str
        With two decimals, or as many as it needs.
    """
    return f"{amount:.6f}".rstrip("0").rstrip(".") if round(amount, 2) != amount else f"{amount:.2f}"


def _many(number: int, word: str) -> str:
    return f"{number} {word}{'' if number == 1 else 's'}"
