"""The candidates of an answer for spreadsheets and documents: CSV and Markdown."""

from __future__ import annotations

import csv
import io

from synth.answer import Answer, Candidate
from synth.explain import made_of, percent
from synth.present.terminal import SIGNAL_WORDS, ends_words, figure, limit_words, span
from synth.quantities import format_quantity

FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
"""First characters at which a spreadsheet takes a text for a formula."""
MARKDOWN_SPECIAL = "\\`*_{}[]<>#|"


def inert(text: str) -> str:
    """A text cell that no spreadsheet runs as a formula.

    Parameters
    ----------
    text : str
        Any text.

    Returns
    -------
    str
        The text, behind an apostrophe where it would be taken for a formula.
    """
    return f"'{text}" if text.startswith(FORMULA_STARTS) else text


def to_csv(answer: Answer) -> str:
    """One row a candidate, SI numbers, one header row; when nothing qualifies, one row a reason.

    Parameters
    ----------
    answer : Answer
        Of `find` or `check`.

    Returns
    -------
    str
        Comma-separated, lines end with a newline.
    """
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    if answer.infeasible is not None:
        writer.writerow(["reason", "key", "value", "drift"])
        for name in answer.infeasible.binding:
            writer.writerow(["cannot be met", inert(name), "", ""])
        for r in answer.infeasible.relaxations:
            for key, text in r.change.items():
                writer.writerow(["would do", inert(key), inert(text), r.drift])
        return out.getvalue()
    roles = list(dict.fromkeys(role for c in answer.candidates for role in c.resistors))
    paired = [role for role in roles if any(role in c.parts for c in answer.candidates)]
    head = ["rank", "network", "verdict", *(f"{role}_ohm" for role in roles), *(f"{role}_parts" for role in paired)]
    head += ["ic_a", "ic_min_a", "ic_max_a", "vce_v", "vce_min_v", "vce_max_v"]
    others = [q for q in (answer.candidates[0].worst if answer.candidates else ()) if q not in ("ic", "vce")]
    head += [column for q in others for column in (f"{q}_v", f"{q}_min_v", f"{q}_max_v")]
    head += ["drift_ic", "drift_vce", *(f"drift_{q}" for q in others)]
    head += ["drift", "centring", "supply_current_a", "transistor_power_w", "decides"]
    writer.writerow(head)
    for c in answer.candidates:
        row: list[object] = [c.rank, inert(c.network), c.verdict, *(c.resistors.get(role, "") for role in roles)]
        row += [made_of(c.resistors[role], c.parts.get(role)) if role in c.resistors else "" for role in paired]
        row += [c.nominal.ic, *c.worst["ic"], c.nominal.vce, *c.worst["vce"]]
        row += [figure for q in others for figure in (getattr(c.nominal, q), *c.worst[q])]
        row += [c.drift.ic, "" if c.drift.vce is None else c.drift.vce, *(c.drift.of()[q] for q in others)]
        row += [c.drift.q_point, c.centring, c.supply_current, "" if c.transistor is None else c.transistor.power]
        writer.writerow([*row, c.drift.decides])
    return out.getvalue()


def escaped(text: str) -> str:
    """Text that Markdown shows as it is.

    Parameters
    ----------
    text : str
        Any text.

    Returns
    -------
    str
        With every special character escaped, on one line.
    """
    return "".join(f"\\{c}" if c in MARKDOWN_SPECIAL else c for c in " ".join(text.split()))


def _table(rows: list[list[str]]) -> str:
    lines = ["| " + " | ".join(row) + " |" for row in rows]
    return "\n".join([lines[0], "|" + "---|" * len(rows[0]), *lines[1:]])


def _review(answer: Answer, c: Candidate) -> list[str]:
    """Stress of the parts and figures of the signal."""
    parts = []
    if c.stress:
        rows = [["part", "style", "power", "allowed", "voltage", "allowed", "smallest style"]]
        for role, s in c.stress.items():
            allowed = [
                "–" if limit is None else format_quantity(limit, kind)
                for limit, kind in ((s.power_allowed, "power"), (s.voltage_allowed, "voltage"))
            ]
            power, volts = figure(s.power, "power"), figure(s.voltage, "voltage")
            cells = [role.upper(), s.style or "–", power, allowed[0], volts, allowed[1], s.smallest or "none in the table"]
            rows.append([escaped(cell) for cell in cells])
        if (load := c.transistor) is not None:
            limit = format_quantity(load.allowed["power"], "power") if "power" in load.allowed else "–"
            cells = ["transistor", "–", figure(load.power, "power"), limit, figure(load.vceo, "voltage")]
            limit = format_quantity(load.allowed["vceo"], "voltage") if "vceo" in load.allowed else "–"
            rows.append([escaped(cell) for cell in (*cells, limit, "–")])
        parts += [f"## Stress (derating {escaped(str(answer.stage.get('derating', 'none')))})", _table(rows)]
    if c.signal:
        rows = [["figure", "nominal", "over the box"]]
        for name, (low, middle, high) in c.signal.items():
            words, kind = SIGNAL_WORDS[name]
            rows.append([escaped(words), figure(middle, kind), ends_words(low, high, kind)])
        parts += ["## Signal", _table(rows)]
    return parts


def to_markdown(answer: Answer) -> str:
    """The answer as a section of a document.

    Parameters
    ----------
    answer : Answer
        Of `find` or `check`.

    Returns
    -------
    str
        Headings, tables, the explanation of the first candidate.
    """
    parts = [f"# {escaped(str(answer.stage.get('name') or 'stage'))}"]
    search, best = answer.search, answer.best
    if search is not None:
        bound = "" if search.bound is None else f" Every other candidate drifts {percent(search.bound)} or more."
        proof = "Proved" if search.complete else "Not proved: the search was stopped"
        verdict = "PASS" if answer.passed else "FAIL"
        parts.append(f"{verdict}. {proof} over {search.combinations:.3g} combinations: {search.status}.{bound}")
    if answer.infeasible is not None:
        why = answer.infeasible
        parts.append("These limits cannot be met together: " + escaped(", ".join(why.binding)) + ".")
        for r in why.relaxations:
            change = escaped(", ".join(f'{key} = "{text}"' for key, text in r.change.items()))
            parts.append(f"- {change} would do: best drift {percent(r.drift)}.")
    if best is not None:
        roles = list(dict.fromkeys(role for c in answer.candidates for role in c.resistors))
        shown = [f"{q.upper()} over the box" for q in best.worst]
        rows = [["rank", "network", *map(str.upper, roles), *shown, "drift", "verdict"]]
        for c in answer.candidates:
            values = [escaped(made_of(c.resistors[r], c.parts.get(r))) if r in c.resistors else "–" for r in roles]
            ends = [span(*c.worst[q], "current" if q == "ic" else "voltage") for q in best.worst]
            rows.append([str(c.rank), escaped(c.network), *values, *ends, percent(c.drift.q_point), c.verdict])
        parts += ["## Candidates", _table(rows), "## Limits"]
        limits = [["limit", "allowed", "worst", "margin", "verdict"]]
        for v in best.limits:
            margin = percent(v.margin) if abs(v.margin) < float("inf") else "–"
            worst = "none" if v.worst != v.worst else figure(v.worst, v.kind)
            limits.append([escaped(v.name), escaped(limit_words(v)), worst, margin, v.verdict])
        parts += [_table(limits), *_review(answer, best)]
        parts += ["## Reasons", "\n".join(f"- {escaped(line)}" for line in best.explanation)]
    if answer.warnings:
        parts += ["## Cautions", "\n".join(f"- {escaped(w.name)}: {escaped(w.text)}" for w in answer.warnings)]
    if answer.assumed:
        rows = [["key", "value", "why"], *([escaped(n.key), escaped(n.value), escaped(n.why)] for n in answer.assumed)]
        parts += ["## Assumed, since not given", _table(rows)]
    return "\n\n".join(parts) + "\n"
