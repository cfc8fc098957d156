"""Resistances that can be bought or lie in a drawer: series of IEC 60063, given values, stock lists."""

from __future__ import annotations

import csv
import math
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, fields, replace
from decimal import Decimal
from functools import lru_cache
from io import StringIO
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from synth import catalogue
from synth.catalogue.reading import alternatives, quoted
from synth.catalogue.reading import nearest as nearest_name
from synth.quantities import RestpointError, format_resistance, parse

FloatArray = NDArray[np.float64]

STOCK_COLUMNS = ("value", "tolerance", "tcr", "quantity", "style", "price", "part", "minimum")
"""Columns of a stock list; only `value` is required."""

_LARGEST_STOCK = 5_000_000
_LONGEST_QUANTITY = 9
_PRICE_DECIMALS = 6


class PreferredError(RestpointError):
    """A series, a range or a list of values that makes no sense."""


class StockError(PreferredError):
    """A stock list that cannot be read."""


# --- Series ---------------------------------------------------------------------------------


def significands(series: str) -> tuple[int, ...]:
    """One decade of a series.

    Parameters
    ----------
    series : str
        Name of a series, E3 to E192, in either case.

    Returns
    -------
    tuple of int
        Three-figure significands, 100 to 999, ascending [-].

    Raises
    ------
    CatalogueError
        If there is no such series.

    References
    ----------
    IEC 60063:2015, Preferred number series for resistors and capacitors.
    """
    return catalogue.preferred_numbers()[catalogue.series_name(series)]


def series_values(series: str | Sequence[str], low: float, high: float) -> FloatArray:
    """All values of one series, or of the union of several, within a range.

    Parameters
    ----------
    series : str or sequence of str
        Name or names of series.
    low, high : float
        Ends of the range, both included [ohm].

    Returns
    -------
    ndarray
        Ascending values without repetition [ohm], shape (n,), read-only; empty where no value lies in the
        range. Each is the float nearest to the decimal value: 4.7 kohm is exactly 4700.0, 0.47 ohm exactly
        0.47.

    Raises
    ------
    CatalogueError
        If a series is not known.
    PreferredError
        If there is no series or the range is not one.
    """
    names = (series,) if isinstance(series, str) else tuple(series)
    if not names:
        raise PreferredError(
            "resistors.series: read an empty list, accepted is at least one series, such as E96"
        )
    if not 0 < low <= high < math.inf:
        raise PreferredError(
            f"resistors.range: read {low:g} ohm : {high:g} ohm, accepted is low : high with 0 < low <= high,"
            " both finite"
        )
    return _series_values(tuple(significands(name) for name in names), float(low), float(high))


@lru_cache(maxsize=256)
def _series_values(decades: tuple[tuple[int, ...], ...], low: float, high: float) -> FloatArray:
    numbers = sorted({number for decade in decades for number in decade})
    # A significand has three figures; one power more on either side, since a logarithm may round across an
    # integer.
    powers = range(math.floor(math.log10(low)) - 3, math.floor(math.log10(high)))
    # Through the text, since number * 10.0**power is not always the nearest float.
    values = np.array([float(f"{number}e{power}") for power in powers for number in numbers])
    return _read_only(values[(values >= low) & (values <= high)])


def nearest(value: float, series: str | Sequence[str]) -> float:
    """The value of a series that deviates least from a wanted one.

    Parameters
    ----------
    value : float
        Wanted resistance, above 0 [ohm].
    series : str or sequence of str
        Name or names of series.

    Returns
    -------
    float
        Value of least |deviation|, the lower of two that are equally near [ohm].

    Raises
    ------
    CatalogueError
        If a series is not known.
    PreferredError
        If the value is not a resistance.

    Notes
    -----
    Slow equivalent: `min(values, key=lambda v: abs(v - value))`, in decimal arithmetic.
    """
    if not 0 < value < math.inf:
        raise PreferredError(f"value: read {value:g} ohm, accepted is a resistance above 0 and finite")
    values = series_values(series, value / 10.5, value * 10.5)
    wanted = Decimal(repr(float(value)))
    return float(min(values.tolist(), key=lambda candidate: abs(Decimal(repr(candidate)) - wanted)))


def neighbours(value: float, values: ArrayLike) -> tuple[float | None, float | None]:
    """The next values below and above one value.

    Parameters
    ----------
    value : float
        Value, which may be one of the list [ohm].
    values : array_like
        Ascending values [ohm], shape (n,).

    Returns
    -------
    lower, upper : float or None
        Greatest value below and least value above `value` [ohm]; None at an end of the list.
    """
    among = np.asarray(values, dtype=np.float64)
    below = int(np.searchsorted(among, value, side="left"))
    above = int(np.searchsorted(among, value, side="right"))
    return (
        float(among[below - 1]) if below else None,
        float(among[above]) if above < among.size else None,
    )


# --- Lists ----------------------------------------------------------------------------------


@dataclass(frozen=True, kw_only=True, eq=False)
class ValueList:
    """Resistances to choose from, each with its own band; immutable, compared and hashed by content.

    Parameters
    ----------
    values : array_like
        Nominal resistances, ascending, without repetition [ohm], shape (n,) with n >= 1.
    tolerance_low, tolerance_high : array_like
        Tolerance downwards and upwards, both as positive fractions [-], broadcast to (n,).
    tcr : array_like
        Temperature coefficient, plus and minus [1/K], broadcast to (n,).
    life : array_like
        Drift over life, plus and minus [-], broadcast to (n,).
    labels : tuple of str, optional
        Each value as its source writes it.
    parts, styles : tuple of (str or None), optional
        Part number and style of each value, None where not given.
    quantities : tuple of (int or None), optional
        Number of pieces of each value [-], None where not given.
    prices : tuple of (float or None), optional
        Price of one piece of the first price break, in the currency of the list [-], None where not given.

    Raises
    ------
    PreferredError
        If the values are not such a list or a band reaches down to 0 ohm.
    """

    values: FloatArray
    tolerance_low: FloatArray
    tolerance_high: FloatArray
    tcr: FloatArray
    life: FloatArray
    labels: tuple[str, ...] | None = None
    parts: tuple[str | None, ...] | None = None
    styles: tuple[str | None, ...] | None = None
    quantities: tuple[int | None, ...] | None = None
    prices: tuple[float | None, ...] | None = None

    def __post_init__(self) -> None:
        values = _resistances(self.values)
        if (bad := np.diff(values) <= 0).any():
            raise PreferredError(
                f"values: read {values[1:][bad][0]:g} ohm, accepted is more than the value before it"
            )
        object.__setattr__(self, "values", _read_only(values))
        for name in ("tolerance_low", "tolerance_high", "tcr", "life"):
            object.__setattr__(self, name, _band(name, getattr(self, name), values))
        # Checked together: a resistance of 0 within the band would divide by zero far from here.
        if (bad := self.tolerance_low + self.life >= 1).any():
            raise PreferredError(
                f"tolerance_low: read {self.tolerance_low[bad][0]:g} with a life drift of"
                f" {self.life[bad][0]:g} for {values[bad][0]:g} ohm, accepted is a sum below 1"
            )
        for name in ("labels", "parts", "styles", "quantities", "prices"):
            texts = getattr(self, name)
            if texts is not None and len(texts) != values.size:
                raise PreferredError(
                    f"{name}: read {len(texts)} entries, accepted are {values.size}, one for each value"
                )

    def __len__(self) -> int:
        return int(self.values.size)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, ValueList) and self._content == other._content

    def __hash__(self) -> int:
        return hash(self._content)

    @property
    def _content(self) -> tuple[object, ...]:
        entries = (getattr(self, field.name) for field in fields(self))
        return tuple(entry.tobytes() if isinstance(entry, np.ndarray) else entry for entry in entries)

    @classmethod
    def from_series(
        cls, series: str | Sequence[str], low: float, high: float, tolerance: float, tcr: float, life: float
    ) -> ValueList:
        """The values of a series, or of the union of several, with one band for all.

        Parameters
        ----------
        series : str or sequence of str
            Name or names of series.
        low, high : float
            Ends of the range, both included [ohm].
        tolerance, tcr, life : float
            Tolerance [-], temperature coefficient [1/K] and drift over life [-], plus and minus.

        Returns
        -------
        ValueList
            The list.

        Raises
        ------
        CatalogueError
            If a series is not known.
        PreferredError
            If no value of the series lies in the range.
        """
        values = series_values(series, low, high)
        if not values.size:
            names = series if isinstance(series, str) else " or ".join(series)
            closest = dict.fromkeys(format_resistance(nearest(end, series)) for end in (low, high))
            raise PreferredError(
                f"resistors.range: read {format_resistance(low)} : {format_resistance(high)}, which holds no"
                f" value of {names}, nearest is {alternatives(closest)}"
            )
        tolerances, tcrs, lives = (np.full(values.size, band) for band in (tolerance, tcr, life))
        return cls(values=values, tolerance_low=tolerances, tolerance_high=tolerances, tcr=tcrs, life=lives)

    @classmethod
    def from_values(
        cls, values: ArrayLike, tolerance: ArrayLike, tcr: ArrayLike, life: ArrayLike
    ) -> ValueList:
        """Given values in any order.

        Parameters
        ----------
        values : array_like
            Nominal resistances [ohm], shape (n,) or one value.
        tolerance, tcr, life : array_like
            Tolerance [-], temperature coefficient [1/K] and drift over life [-], plus and minus, broadcast to
            (n,).

        Returns
        -------
        ValueList
            The list; of equal values the one of tightest tolerance, then of least coefficient, then of least
            drift stays.

        Raises
        ------
        PreferredError
            If a value is not a resistance.
        """
        nominal = _resistances(values)
        bands = [
            _band(name, band, nominal)
            for name, band in (("tolerance", tolerance), ("tcr", tcr), ("life", life))
        ]
        order = np.lexsort((*reversed(bands), nominal))
        first = np.concatenate(([True], np.diff(nominal[order]) != 0))[: order.size]
        kept = order[first]
        tolerances, tcrs, lives = (band[kept] for band in bands)
        return cls(
            values=nominal[kept], tolerance_low=tolerances, tolerance_high=tolerances, tcr=tcrs, life=lives
        )

    @classmethod
    def from_stock(
        cls,
        path: str | Path,
        *,
        tolerance: float,
        tcr: float,
        life: float,
        low: float = 0.0,
        high: float = math.inf,
    ) -> ValueList:
        """The values of a stock list.

        Parameters
        ----------
        path : str or Path
            CSV file in UTF-8, with comma or semicolon, and a header row of `STOCK_COLUMNS` in any order and
            case; only `value` is required. Values and figures are texts as everywhere; `tolerance` takes a
            letter of IEC 60062 too.
        tolerance, tcr, life : float
            Tolerance [-] and temperature coefficient [1/K] of rows that give none, and drift over life of all
            [-].
        low, high : float
            Ends of the range that is taken from the list, both included [ohm].

        Returns
        -------
        ValueList
            The list, without rows of quantity 0. Of rows with equal value the one of tightest tolerance, then
            of least coefficient, then the first stays; the quantities of rows that differ in nothing else are
            added.

        Raises
        ------
        StockError
            If the file or a row cannot be used; names the line, what was read and what is accepted.
        QuantityError
            If a cell is not the quantity it should be; names line and column likewise.
        """
        rows = _merged(_stock_rows(Path(path), tolerance, tcr))
        name = Path(path).name
        if not rows:
            raise StockError(f"stock '{name}': read no row with a quantity above 0, accepted is at least one")
        within = [row for row in rows if low <= row.value <= high]
        if not within:
            raise StockError(
                f"stock '{name}': read values from {format_resistance(rows[0].value)} to"
                f" {format_resistance(rows[-1].value)}, accepted is at least one from {low:g} ohm to"
                f" {high:g} ohm"
            )
        tolerances = np.array([row.tolerance for row in within])
        return cls(
            values=np.array([row.value for row in within]),
            tolerance_low=tolerances,
            tolerance_high=tolerances,
            tcr=np.array([row.tcr for row in within]),
            life=np.full(len(within), life),
            labels=tuple(row.label for row in within),
            parts=tuple(row.part for row in within),
            styles=tuple(row.style for row in within),
            quantities=tuple(row.quantity for row in within),
            prices=tuple(row.price for row in within),
        )

    def select(self, indices: ArrayLike) -> ValueList:
        """Some of the values.

        Parameters
        ----------
        indices : array_like
            Ascending indices, or a mask of shape (n,) [-].

        Returns
        -------
        ValueList
            The list of these values, each with its band and texts.
        """
        kept = np.arange(len(self))[np.asarray(indices)]
        chosen: dict[str, Any] = {
            field.name: _picked(getattr(self, field.name), kept) for field in fields(self)
        }
        return ValueList(**chosen)


def _picked(entries: FloatArray | tuple[object, ...] | None, kept: NDArray[np.intp]) -> object:
    if entries is None or isinstance(entries, np.ndarray):
        return None if entries is None else entries[kept]
    return tuple(entries[index] for index in kept)


def _read_only(array: FloatArray) -> FloatArray:
    array.flags.writeable = False
    return array


def _resistances(values: ArrayLike) -> FloatArray:
    array = np.atleast_1d(np.array(values, dtype=np.float64))
    if array.ndim != 1 or not array.size:
        raise PreferredError(
            f"values: read an array of shape {array.shape}, accepted is a list of at least one"
        )
    if (bad := ~(np.isfinite(array) & (array > 0))).any():
        raise PreferredError(
            f"values: read {array[bad][0]:g} ohm, accepted is a resistance above 0 and finite"
        )
    return array


def _band(name: str, band: ArrayLike, values: FloatArray) -> FloatArray:
    figures = np.asarray(band, dtype=np.float64)
    if figures.shape not in ((), values.shape):
        raise PreferredError(
            f"{name}: read {figures.size} figures, accepted are {values.size}, one for each value, or one for"
            " all"
        )
    figures = np.broadcast_to(figures, values.shape).copy()
    if (bad := ~((figures >= 0) & (figures < 1))).any():
        raise PreferredError(f"{name}: read {figures[bad][0]:g}, accepted is a figure from 0 to below 1")
    return _read_only(figures)


# --- Stock ----------------------------------------------------------------------------------


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
        CSV file as `ValueList.from_stock` reads it. ``price`` is a number, or price breaks such as ``1:0.05 100:0.02``.
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
    return _stock_rows(Path(path), tolerance, tcr)


def _stock_rows(path: Path, tolerance: float, tcr: float) -> list[StockRow]:
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


def _merged(rows: Iterable[StockRow]) -> list[StockRow]:
    """One row for each value that is there, ascending."""
    best: dict[float, StockRow] = {}
    for row in sorted(
        (row for row in rows if row.quantity != 0), key=lambda row: (row.value, row.tolerance, row.tcr)
    ):
        kept = best.setdefault(row.value, row)
        if kept is not row and replace(kept, quantity=row.quantity, label=row.label) == row:
            pieces = None if kept.quantity is None or row.quantity is None else kept.quantity + row.quantity
            best[row.value] = replace(kept, quantity=pieces)
    return list(best.values())
