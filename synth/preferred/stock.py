"""Stock lists: the resistors in a drawer as a CSV file."""

from __future__ import annotations

import csv
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from io import StringIO
from pathlib import Path

from synth import catalogue
from synth.catalogue.reading import nearest as nearest_name
from synth.catalogue.reading import quoted
from synth.preferred.series import PreferredError
from synth.quantities import parse

STOCK_COLUMNS = ("value", "tolerance", "tcr", "quantity", "style", "price", "part", "minimum")
"""Columns of a stock list; only `value` is required."""

_LARGEST_STOCK = 5_000_000
_LONGEST_QUANTITY = 9
_PRICE_DECIMALS = 6


class StockError(PreferredError):
    """A stock list that cannot be read."""


@dataclass(frozen=True, kw_only=True)
class StockRow:
    """One row of a stock list.

    Parameters
    ----------
    value, tolerance, tcr : float
        Resistance [ohm], tolerance [-] and temperature coefficient [1/K], plus and minus.
    label : str
        The value as the list writes it.
    part, style : str or None
        Part number and style.
    quantity : int or None
        Pieces on hand [-], None where not given.
    prices : tuple of (int, float)
        Price breaks, ascending: from this number of pieces on, one costs this much [-, currency of the list]; empty where
        nothing is for sale.
    minimum : int
        Least number of pieces that can be ordered [-].
    """

    value: float
    tolerance: float
    tcr: float
    label: str
    part: str | None
    style: str | None
    quantity: int | None
    prices: tuple[tuple[int, float], ...]
    minimum: int

    @property
    def price(self) -> float | None:
        """Price of one piece of the first price break [currency of the list]."""
        return self.prices[0][1] if self.prices else None


def stock_rows(path: str | Path, *, tolerance: float, tcr: float) -> list[StockRow]:
    """Every row of a stock list, in its order.

    Parameters
    ----------
    path : str or Path
        CSV file as `synth.preferred.lists.ValueList.from_stock` reads it. ``price`` is a number, or price breaks such as
        ``1:0.05 100:0.02``.
    tolerance, tcr : float
        Tolerance [-] and temperature coefficient [1/K] of rows that give none.

    Returns
    -------
    list of StockRow
        Rows of quantity 0 among them.

    Raises
    ------
    StockError
        If the file or a row cannot be used; names the line, what was read and what is accepted.
    QuantityError
        If a cell is not the quantity it should be; names line and column likewise.
    """
    path = Path(path)
    records = _records(path.name, _stock_text(path))
    header, width = _stock_header(path.name, records)
    rows: list[StockRow] = []
    for line, cells in records:
        where = f"stock '{path.name}', line {line}"
        # Even an empty cell too many tells that a decimal comma has split a figure.
        if len(cells) > width or any(cells[len(header) :]):
            raise StockError(
                f"{where}: read {len(cells)} cells, accepted are {len(header)} as in the header; a text that"
                " holds the separator needs quotes"
            )
        row = dict.fromkeys(STOCK_COLUMNS, "") | dict(zip(header, cells, strict=False))
        value = parse(row["value"], "resistance", field=f"{where}, column value")
        if value == 0:
            raise StockError(
                f"{where}, column value: read '{row['value']}', accepted is a resistance above 0 ohm"
            )
        own_tolerance = _stock_tolerance(f"{where}, column tolerance", row["tolerance"])
        own_tcr = _stock_figure(f"{where}, column tcr", row["tcr"], "temperature_coefficient")
        rows.append(
            StockRow(
                value=value,
                tolerance=tolerance if own_tolerance is None else own_tolerance,
                tcr=tcr if own_tcr is None else own_tcr,
                label=row["value"],
                part=row["part"] or None,
                style=row["style"] or None,
                quantity=_stock_quantity(f"{where}, column quantity", row["quantity"]),
                prices=_stock_prices(f"{where}, column price", row["price"]),
                minimum=_stock_quantity(f"{where}, column minimum", row["minimum"]) or 1,
            )
        )
    if not rows:
        raise StockError(f"stock '{path.name}': read a header without rows, accepted is at least one row")
    return rows


def _stock_text(path: Path) -> str:
    try:
        size = path.stat().st_size
        if size > _LARGEST_STOCK:
            raise StockError(f"stock '{path.name}': read {size} bytes, accepted are at most {_LARGEST_STOCK}")
        text = path.read_bytes().decode("utf-8-sig")
    except OSError as error:
        raise StockError(
            f"stock '{path.name}': read nothing ({error.strerror}), accepted is a CSV file, its path relative"
            " to the stage file that names it"
        ) from error
    except UnicodeDecodeError as error:
        raise StockError(
            f"stock '{path.name}': read the byte 0x{error.object[error.start]:02x} at position {error.start},"
            " which is not UTF-8, accepted is a CSV file saved as UTF-8"
        ) from error
    if not text.strip():
        raise StockError(
            f"stock '{path.name}': read an empty file, accepted is a header row and at least one row"
        )
    return text


def _records(file: str, text: str) -> Iterator[tuple[int, list[str]]]:
    """Line number and stripped cells of each record that is not blank, the header first."""
    heading = next(line for line in text.splitlines() if line.strip())
    reader = csv.reader(StringIO(text, newline=""), delimiter=";" if ";" in heading else ",", strict=True)
    try:
        for record in reader:
            cells = [cell.strip() for cell in record]
            if any(cells):
                yield reader.line_num, cells
    except csv.Error as error:
        raise StockError(
            f"stock '{file}', line {reader.line_num}: read a record that is not CSV ({error}), accepted is a"
            " text without quotes, or one that is quoted whole"
        ) from error


def _stock_header(file: str, records: Iterator[tuple[int, list[str]]]) -> tuple[list[str], int]:
    """Names of the columns, and how many cells a row may have."""
    line, cells = next(records, (1, []))
    header = [cell.casefold() for cell in cells]
    # A spreadsheet pads rows with empty cells up to the widest it ever had.
    while header and not header[-1]:
        header.pop()
    for position, name in enumerate(header):
        where = f"stock '{file}', line {line}: read column {quoted(cells[position])}"
        if name not in STOCK_COLUMNS:
            raise StockError(
                f"{where}, accepted are {', '.join(STOCK_COLUMNS)},"
                f" nearest is {nearest_name(name, STOCK_COLUMNS)}"
            )
        if name in header[:position]:
            raise StockError(f"{where} twice, accepted is each column once")
    if "value" not in header:
        raise StockError(
            f"stock '{file}', line {line}: read the columns '{', '.join(header)}', accepted is a header with"
            " a column 'value'"
        )
    return header, len(cells)


def _stock_figure(where: str, text: str, kind: str) -> float | None:
    figure = parse(text, kind, field=where) if text else None
    if figure is not None and figure < 0:
        raise StockError(f"{where}: read {quoted(text)}, accepted is 0 or more")
    return figure


def _stock_tolerance(where: str, text: str) -> float | None:
    code = catalogue.tolerance_codes().get(text.upper())
    if code is not None and code.applies_to != "capacitors":
        return code.high
    figure = _stock_figure(where, text, "ratio")
    if figure is not None and figure >= 1:
        raise StockError(
            f"{where}: read {quoted(text)}, accepted is below 100 %, such as '1 %' or the letter 'F'"
        )
    return figure


def _stock_quantity(where: str, text: str) -> int | None:
    if text and not (text.isascii() and text.isdigit() and len(text) <= _LONGEST_QUANTITY):
        raise StockError(f"{where}: read {quoted(text)}, accepted is a whole number of pieces, such as '100'")
    return int(text) if text else None


def _stock_prices(where: str, text: str) -> tuple[tuple[int, float], ...]:
    breaks: dict[int, float] = {}
    for item in text.split():
        pieces, colon, price = item.rpartition(":")
        number = (_stock_quantity(where, pieces) if colon else 1) or 0
        if number < 1 or (breaks and number <= max(breaks)):
            raise StockError(
                f"{where}: read {quoted(text)}, accepted is the price of one piece, or price breaks with rising numbers of"
                " pieces, such as '1:0.05 100:0.02'"
            )
        figure = _stock_figure(where, price, "gain")
        # Costs are added up exactly, so a price needs a last decimal.
        if figure is None or round(figure, _PRICE_DECIMALS) != figure:
            raise StockError(f"{where}: read {quoted(text)}, accepted are prices of at most {_PRICE_DECIMALS} decimals")
        breaks[number] = figure
    return tuple(breaks.items())


def merged(rows: Iterable[StockRow]) -> list[StockRow]:
    """One row for each value that is there.

    Parameters
    ----------
    rows : iterable of StockRow
        In any order.

    Returns
    -------
    list of StockRow
        Ascending in value; of equal values the tightest row, with the pieces of rows that differ in nothing else.
    """
    best: dict[float, StockRow] = {}
    for row in sorted(
        (row for row in rows if row.quantity != 0), key=lambda row: (row.value, row.tolerance, row.tcr)
    ):
        kept = best.setdefault(row.value, row)
        if kept is not row and replace(kept, quantity=row.quantity, label=row.label) == row:
            pieces = None if kept.quantity is None or row.quantity is None else kept.quantity + row.quantity
            best[row.value] = replace(kept, quantity=pieces)
    return list(best.values())
