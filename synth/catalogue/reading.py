"""Reads a table into frozen rows and checks every cell of it.

A row is a dataclass whose fields are made by `cell`: the column that fills the field and the reader that
turns a cell into a figure stand beside the field's type, once.
"""

from __future__ import annotations

import csv
import dataclasses
import difflib
from collections.abc import Callable, Iterable, Mapping, Sequence
from decimal import Decimal, InvalidOperation
from functools import cache
from importlib.resources import files
from itertools import pairwise
from pathlib import Path
from types import MappingProxyType
from typing import Any, TypeVar

from synth.quantities import RestpointError

Row = TypeVar("Row")
Reader = Callable[[str], Any]
"""Turns a cell into a figure or text; its ValueError says what is accepted."""

EVIDENCE = ("seen", "mixed", "memory")
"""How a row is known, the surest first."""

_NEAREST_SHOWN = 3
_LONGEST_SHOWN = 40


class CatalogueError(RestpointError):
    """A table that breaks its rules, or a name that no table holds."""


@cache
def directory() -> Path:
    """Folder of the tables.

    Returns
    -------
    Path
        `tables` inside the installed package, else beside it, as in a checkout.
    """
    installed = Path(str(files("synth") / "tables"))
    return installed if installed.is_dir() else Path(__file__).resolve().parents[2] / "tables"


# --- One cell --------------------------------------------------------------------------------


def cell(read: Reader, column: str = "") -> Any:
    """A dataclass field that is filled from a column.

    Parameters
    ----------
    read : callable
        Reader of one cell.
    column : str
        Header of the column where it differs from the field, as in `tj_max_c` for `tj_max_k`.

    Returns
    -------
    dataclasses.Field
        The field; typed as Any, as `dataclasses.field` is for a checker.
    """
    return dataclasses.field(metadata={"read": read, "column": column})


def text(value: str) -> str:
    """Read a text that must not be empty."""
    if not value:
        raise ValueError("a text")
    return value


def remark(value: str) -> str:
    """Read a text that may be empty."""
    return value


def maybe(read: Reader) -> Reader:
    """Let an empty cell mean "not known"."""
    return lambda value: read(value) if value else None


def choice(**values: str) -> Reader:
    """Reader of one of a few words, each with the word it becomes."""

    def read(value: str) -> str:
        if value not in values:
            raise ValueError(alternatives(values))
        return values[value]

    return read


def number(low: str, high: str, *, scale: str = "1", shift: str = "0") -> Reader:
    """Reader of a number from low to high, both included, that becomes number·scale + shift.

    Decimal arithmetic, so that 0.1 % becomes the float nearest to 0.001.
    """
    least, greatest = Decimal(low), Decimal(high)

    def read(value: str) -> float:
        try:
            figure = Decimal(value)
        except InvalidOperation:
            figure = Decimal("NaN")
        if not (figure.is_finite() and least <= figure <= greatest):
            raise ValueError(f"a number from {low} to {high}")
        return float(figure * Decimal(scale) + Decimal(shift))

    return read


def celsius(low: str, high: str) -> Reader:
    """Reader of a temperature in °C that becomes kelvin."""
    return number(low, high, shift="273.15")


def per_cent(low: str, high: str) -> Reader:
    """Reader of a percentage that becomes a fraction."""
    return number(low, high, scale="0.01")


evidence = choice(**{label: label for label in EVIDENCE})
"""Reader of a column that says how a row is known."""


# --- Whole table -----------------------------------------------------------------------------


def columns(row: type[Any]) -> dict[str, str]:
    """Field of each column of a row class.

    Parameters
    ----------
    row : type
        Dataclass whose fields are made by `cell`.

    Returns
    -------
    dict
        Header to name of field, in the order of the file.
    """
    return {field.metadata["column"] or field.name: field.name for field in dataclasses.fields(row)}


def _readers(row: type[Any]) -> list[Reader]:
    return [field.metadata["read"] for field in dataclasses.fields(row)]


def read_table(source: Path, row: type[Row]) -> list[tuple[int, Row]]:
    """The rows of one file.

    Parameters
    ----------
    source : Path
        CSV file in UTF-8 with one header row.
    row : type
        Dataclass whose fields are made by `cell`, one for each column in order.

    Returns
    -------
    list of tuple
        Line number and row, figures in SI units.

    Raises
    ------
    CatalogueError
        If the file is not such a table; names file, line and column.
    """
    expected = columns(row)
    readers = _readers(row)
    rows: list[tuple[int, Row]] = []
    try:
        with source.open("r", encoding="utf-8", newline="") as stream:
            lines = csv.reader(stream, strict=True)
            _check_header(source.name, next(lines, []), list(expected))
            for values in lines:
                where = f"{source.name}, line {lines.line_num}"
                if len(values) != len(expected):
                    raise CatalogueError(f"{where}: read {len(values)} cells, accepted are {len(expected)}")
                figures = {
                    field: _figure(f"{where}, column {column}", value, read)
                    for (column, field), value, read in zip(expected.items(), values, readers, strict=True)
                }
                rows.append((lines.line_num, row(**figures)))
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        raise CatalogueError(f"{source.name}: cannot be read as a CSV table in UTF-8: {error}") from error
    if not rows:
        raise CatalogueError(f"{source.name}: the table holds no row")
    return rows


def _check_header(file: str, header: Sequence[str], expected: Sequence[str]) -> None:
    for name in header:
        if name not in expected:
            raise CatalogueError(
                f"{file}, line 1: read column {quoted(name)}, nearest accepted is {nearest(name, expected)}"
            )
    if list(header) != list(expected):
        missing = [name for name in expected if name not in header]
        fault = f"missing {', '.join(missing)}" if missing else "one is doubled or out of order"
        raise CatalogueError(f"{file}, line 1: accepted are the columns {', '.join(expected)}; {fault}")


def _figure(where: str, value: str, read: Reader) -> Any:
    try:
        return read(value)
    except ValueError as error:
        shown = quoted(value) if value else "an empty cell"
        raise CatalogueError(f"{where}: read {shown}, accepted is {error}") from error


def unique(file: str, column: str, keyed: Iterable[tuple[int, str, Row]]) -> Mapping[str, Row]:
    """Rows by key.

    Parameters
    ----------
    file, column : str
        Where the keys stand, for the message.
    keyed : iterable of tuple
        Line number, key and row.

    Returns
    -------
    Mapping
        Key to row, in the order of the file, read-only.

    Raises
    ------
    CatalogueError
        If two keys are equal, upper and lower case alike.
    """
    rows: dict[str, Row] = {}
    lines: dict[str, int] = {}
    for line, key, row in keyed:
        earlier = lines.setdefault(key.casefold(), line)
        if earlier != line:
            raise CatalogueError(
                f"{file}, line {line}, column {column}: read '{key}', which stands in line {earlier} already,"
                " accepted is each name once"
            )
        rows[key] = row
    return MappingProxyType(rows)


def check_ascending(file: str, line: int, row: Any, *fields: str, strict: bool = False) -> None:
    """Refuse a row whose figures are out of order; figures that are not known are passed over.

    Parameters
    ----------
    file : str
        Name of the file, for the message.
    line : int
        Its line, for the message [-].
    row : dataclass instance
        The row.
    *fields : str
        Fields in the order in which their figures must ascend.
    strict : bool
        Whether equal figures are refused too.

    Raises
    ------
    CatalogueError
        If a figure is below the one before it.
    """
    header = {field: column for column, field in columns(type(row)).items()}
    known = [field for field in fields if getattr(row, field) is not None]
    for below, above in pairwise(known):
        low, high = getattr(row, below), getattr(row, above)
        if low > high or (strict and low == high):
            raise CatalogueError(
                f"{file}, line {line}, column {header[above]}: read {high:g}, accepted is"
                f" {'more than' if strict else 'at least'} the {low:g} of {header[below]} (both in SI units)"
            )


def check_together(file: str, line: int, row: Any, *fields: str) -> None:
    """Refuse a row that knows some of these fields but not all.

    Parameters
    ----------
    file : str
        Name of the file, for the message.
    line : int
        Its line, for the message [-].
    row : dataclass instance
        The row.
    *fields : str
        Fields that only make sense together.

    Raises
    ------
    CatalogueError
        If one is missing while another is given.
    """
    header = {field: column for column, field in columns(type(row)).items()}
    absent = [header[field] for field in fields if getattr(row, field) is None]
    if 0 < len(absent) < len(fields):
        raise CatalogueError(
            f"{file}, line {line}, column {absent[0]}: read an empty cell, accepted is a value,"
            f" since {' and '.join(header[field] for field in fields)} belong together"
        )


# --- Names -----------------------------------------------------------------------------------


def quoted(name: str) -> str:
    """A text as read, for a sentence; a long one cut, since a wrong file may put a page into one cell."""
    return repr(name if len(name) <= _LONGEST_SHOWN else f"{name[:_LONGEST_SHOWN]}…")


def alternatives(names: Iterable[str]) -> str:
    """Names as a list for a sentence, at least one: "a, b or c"."""
    *most, last = names
    return f"{', '.join(most)} or {last}" if most else last


def nearest(name: str, names: Iterable[str]) -> str:
    """The nearest known names, best first, as a list for a sentence; never empty, to give a direction.

    Those that begin with the name come before those that merely look like it, since "0207" is not near
    "2010"; of equally alike ones those with the same characters come first, since digits are often swapped.
    """
    wanted = name.strip().casefold()[:_LONGEST_SHOWN]

    def distance(known: str) -> tuple[bool, float, bool]:
        key = known.casefold()
        likeness = difflib.SequenceMatcher(None, wanted, key).ratio()
        return not (wanted and key.startswith(wanted)), -likeness, sorted(key) != sorted(wanted)

    return alternatives(sorted(names, key=distance)[:_NEAREST_SHOWN])
