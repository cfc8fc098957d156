"""Lists of resistances to choose from, each value with its band: of a series, given one by one, or of a stock list."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from synth.catalogue.reading import alternatives
from synth.preferred.series import FloatArray, PreferredError, nearest, read_only, series_values
from synth.preferred.stock import StockError, merged, stock_rows
from synth.quantities import format_resistance


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
        object.__setattr__(self, "values", read_only(values))
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
        rows = merged(stock_rows(path, tolerance=tolerance, tcr=tcr))
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
    return read_only(figures)
