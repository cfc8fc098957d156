"""Two resistors in place of one: every series and parallel pair of a list of values, duplicates merged."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from synth.catalogue.reading import quoted
from synth.preferred.lists import ValueList
from synth.preferred.series import FloatArray, PreferredError, read_only
from synth.quantities import parse

Index = NDArray[np.int32]

JOINS = ("single", "series", "parallel")
"""How the parts of a role are joined; the position in this tuple is the code of arrays."""
SINGLE, SERIES, PARALLEL = range(3)

SAME = 1e-12
"""Relative difference below which two totals are one value: some thousand times what the sums and products round by."""


@dataclass(frozen=True, kw_only=True, eq=False)
class PairList:
    """Resistances that one or two parts of a list make up, ascending.

    Parameters
    ----------
    values : ValueList
        The list that the parts come from.
    total : ndarray, shape (n,)
        Resistance of the single part or of the pair [ohm].
    join : ndarray of int, shape (n,)
        Code of `JOINS`.
    first, second : ndarray of int, shape (n,)
        Positions of the parts in `values`; `first` is the one that carries more: the larger of a series pair, the smaller of
        a parallel one. `second` equals `first` where there is only one.
    """

    values: ValueList
    total: FloatArray
    join: NDArray[np.int8]
    first: Index
    second: Index

    def __len__(self) -> int:
        return int(self.total.size)


def resistance(join: NDArray[np.int8], first: FloatArray, second: FloatArray) -> FloatArray:
    """Resistance of single parts and of pairs.

    Parameters
    ----------
    join : ndarray of int
        Code of `JOINS`.
    first, second : ndarray
        Resistances of the parts [ohm], of the same shape.

    Returns
    -------
    ndarray
        The total [ohm].
    """
    whole = first + second
    return np.where(join == SINGLE, first, np.where(join == SERIES, whole, first * second / whole))


def read_parts(text: str, field: str, *, as_written: bool = False) -> tuple[int, tuple[float, ...]]:
    """One resistance, or the two parts of a pair.

    Parameters
    ----------
    text : str
        ``34k5``, ``33k + 1k5`` for a series pair, ``10k || 22k`` for a parallel one.
    field : str
        Name of the field, for messages.
    as_written : bool
        Whether the parts stay in their order; no unit matters.

    Returns
    -------
    join : int
        Code of `JOINS` [-].
    ohms : tuple of float
        The one that carries more first [ohm].

    Raises
    ------
    QuantityError
        If a part is no resistance.
    PreferredError
        If there are more than two parts, or one of a pair is 0 ohm.
    """
    sign = "||" if "||" in text else "+"
    # The sign of a power of ten joins nothing.
    items = text.replace("e+", "e").replace("E+", "E").split(sign)
    ohms = [parse(item.strip(), "resistance", field) for item in items]
    if len(ohms) == 1:
        return SINGLE, tuple(ohms)
    if len(ohms) > 2 or min(ohms) <= 0.0:
        raise PreferredError(
            f"{field}: read {quoted(text)}, accepted is one resistance, or two above 0 ohm such as '33k + 1k5' or '10k || 22k'"
        )
    join = PARALLEL if sign == "||" else SERIES
    return join, tuple(ohms if as_written else sorted(ohms, reverse=join == SERIES))


def total(join: int, ohms: tuple[float, ...]) -> float:
    """Resistance of a single part or of a pair.

    Parameters
    ----------
    join : int
        Code of `JOINS` [-].
    ohms : tuple of float
        Its parts [ohm].

    Returns
    -------
    float
        The total [ohm].
    """
    return ohms[0] if join == SINGLE else sum(ohms) if join == SERIES else ohms[0] * ohms[1] / sum(ohms)


def uneven(join: NDArray[np.int8], first: FloatArray, second: FloatArray) -> tuple[FloatArray, FloatArray]:
    """What the more loaded of two parts carries.

    Parameters
    ----------
    join : ndarray of int
        Code of `JOINS`.
    first, second : ndarray
        Resistances of the parts [ohm], of the same shape.

    Returns
    -------
    power, voltage : ndarray
        Its share of the power and of the voltage of both, at nominal values; 1 for a single part [-].
    """
    larger = np.maximum(first, second) / (first + second)
    return np.where(join == SINGLE, 1.0, larger), np.where(join == SERIES, larger, 1.0)


@lru_cache(maxsize=16)
def pair_up(
    values: ValueList,
    joins: frozenset[str],
    low: float,
    high: float,
    *,
    rated: bool = False,
    on_board: tuple[float, ...] = (),
) -> PairList:
    """Every single value of a list, and every pair that two of them make up.

    Parameters
    ----------
    values : ValueList
        What one part may be; a value of which there is only one piece makes no pair with itself.
    joins : frozenset of str
        Which pairs: ``series``, ``parallel`` or both.
    low, high : float
        Ends of the range of totals, both included [ohm].
    rated : bool
        Whether what each part carries matters besides the total.
    on_board : tuple of float
        Values that are used already [ohm].

    Returns
    -------
    PairList
        Ascending in total. Of entries with one total an entry falls out that another one makes superfluous: with no more
        parts, no wider band and, if `rated`, no greater share of power or voltage in one part. Of equals the first stays
        by: fewest parts, fewest values that are not on the board, least share of power in one part, series before
        parallel, larger first part.
    """
    count = len(values)
    rows, columns = (side.astype(np.int32) for side in np.triu_indices(count))
    if values.quantities is not None:
        scarce = np.array([pieces == 1 for pieces in values.quantities])
        enough = ~((rows == columns) & scarce[rows])
        rows, columns = rows[enough], columns[enough]
    alone = np.arange(count, dtype=np.int32)
    first, second, join = [alone], [alone], [np.full(count, SINGLE, dtype=np.int8)]
    for name, code, one, two in (("series", SERIES, columns, rows), ("parallel", PARALLEL, rows, columns)):
        if name in joins:
            first.append(one)
            second.append(two)
            join.append(np.full(rows.size, code, dtype=np.int8))
    every = (np.concatenate(join), np.concatenate(first), np.concatenate(second))
    total = resistance(every[0], values.values[every[1]], values.values[every[2]])
    inside = (total >= low * (1.0 - SAME)) & (total <= high * (1.0 + SAME)) | (every[0] == SINGLE)
    kinds, one, two, total = (column[inside] for column in (*every, total))
    power, voltage = uneven(kinds, values.values[one], values.values[two])
    parts = 1 + (kinds != SINGLE)
    strange = ~np.isin(values.values, on_board)
    new = strange[one].astype(int) + (strange[two] & (one != two))
    order = np.argsort(total, kind="stable")
    group = np.empty(total.size, dtype=np.int64)
    group[order] = np.concatenate([[0], np.cumsum(np.diff(total[order]) > SAME * total[order][1:])])
    order = np.lexsort((-values.values[one], kinds, power, new, parts, group))
    worst, least = _figures(values, one, two)
    best = (parts, power, voltage) if rated else (parts,)
    most = np.column_stack([*worst, *best])[order]
    fewest = np.column_stack([*least, *best])[order]
    kept = order[~_superfluous(group[order], most, fewest)]
    kept = kept[np.argsort(total[kept], kind="stable")]
    found = (total[kept], kinds[kept], one[kept], two[kept])
    for column in found:
        column.flags.writeable = False
    return PairList(values=values, total=read_only(found[0]), join=found[1], first=found[2], second=found[3])


def _figures(values: ValueList, one: Index, two: Index) -> tuple[list[FloatArray], list[FloatArray]]:
    """Band of the looser and of the tighter part: that of the pair lies between, whatever their weights."""
    columns = (values.tolerance_low, values.tolerance_high, values.tcr, values.life)
    # Bands that are all alike tell nothing apart.
    apart = [column for column in columns if np.ptp(column) > 0.0]
    return [np.maximum(c[one], c[two]) for c in apart], [np.minimum(c[one], c[two]) for c in apart]


def _superfluous(group: NDArray[np.int64], most: FloatArray, least: FloatArray) -> NDArray[np.bool_]:
    """Which rows another row of the same group is at least as good as in every column, the earlier one of equals staying."""
    out = np.zeros(group.size, dtype=bool)
    for step in range(1, int(np.bincount(group).max())):
        early, late = slice(None, -step), slice(step, None)
        same = group[early] == group[late]
        before = same & (most[early] <= least[late] * (1.0 + SAME)).all(axis=1)
        after = same & (most[late] <= least[early] * (1.0 + SAME)).all(axis=1)
        out[late] |= before
        out[early] |= after & ~before
    return out
