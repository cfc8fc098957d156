"""Series of preferred numbers of IEC 60063 over decades of resistance."""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import Decimal
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from synth import catalogue
from synth.quantities import RestpointError

FloatArray = NDArray[np.float64]


class PreferredError(RestpointError):
    """A series, a range or a list of values that makes no sense."""


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
    return read_only(values[(values >= low) & (values <= high)])


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


def read_only(array: FloatArray) -> FloatArray:
    """An array that nobody changes any more.

    Parameters
    ----------
    array : ndarray
        Any array [any unit].

    Returns
    -------
    ndarray
        The same one, not writeable.
    """
    array.flags.writeable = False
    return array
