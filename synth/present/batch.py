"""Rows of a batch as CSV."""

from __future__ import annotations

import csv
import io

from synth.batch import COLUMNS, Row
from synth.present.export import inert


def row_text(row: Row) -> str:
    """One row of the table.

    Parameters
    ----------
    row : mapping of str to object
        As `synth.batch.find_many` gives it.

    Returns
    -------
    str
        A line of CSV with its newline; texts that a spreadsheet would run are inert.
    """
    out = io.StringIO()
    cells = [row.get(column, "") for column in COLUMNS]
    # A row that was read back from a table is inert already.
    csv.writer(out, lineterminator="\n").writerow([inert(cell) if isinstance(cell, str) else cell for cell in cells])
    return out.getvalue()
