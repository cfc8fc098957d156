"""A report as a document in Markdown."""

from __future__ import annotations

from synth.present.export import escaped
from synth.report import Report, Table


def to_document(report: Report) -> str:
    """A report in Markdown.

    Parameters
    ----------
    report : Report
        Its content.

    Returns
    -------
    str
        Headings, paragraphs, tables and lists; a trailing newline.
    """
    parts = [f"# {escaped(report.title)}", f"**{escaped(report.verdict)}**"]
    for number, section in enumerate(report.sections, start=1):
        parts.append(f"## {number}. {escaped(section.title)}")
        parts += [escaped(text) for text in section.paragraphs]
        parts += [_table(table) for table in section.tables if table.rows]
        if section.points:
            parts.append("\n".join(f"- {escaped(text)}" for text in section.points))
    return "\n\n".join(parts) + "\n"


def _table(table: Table) -> str:
    rows = [[escaped(cell) for cell in row] for row in (table.headings, *table.rows)]
    lines = [f"| {' | '.join(row)} |" for row in rows]
    return "\n".join([lines[0], "|" + "---|" * len(table.headings), *lines[1:]])
