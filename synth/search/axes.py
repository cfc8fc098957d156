"""Further axes of a frontier: what a candidate costs or brings besides its drift, and bounds of it over blocks.

Every axis is turned so that less is better. Electrical figures are those at nominal values, as the table of candidates
shows them.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from synth.box import Meter
from synth.networks.form import Array
from synth.preferred.pairs import SINGLE
from synth.search.corners import Corners
from synth.spaces import Index, Space

NOTHING = 1e300
"""Figure of a network along an axis that means nothing for it: worse than any other, and finite."""


@dataclass(frozen=True, kw_only=True)
class Axis:
    """One axis of a frontier.

    Parameters
    ----------
    name, kind : str
        What the user calls it; kind of quantity, as `synth.quantities` names it, or ``count`` or ``price``.
    words : str
        What is best along it, in words.
    most : bool
        Whether more is better: values and bounds below are then negated.
    value : callable
        ``value(space, index, meter)``: of candidates, shape (n,).
    bound : callable
        ``bound(space, corners)``: lower bound over the blocks that `corners` has taken up, at nominal values, shape (n,).
    of_signal : bool
        Whether it means nothing for a network that takes no signal.
    """

    name: str
    kind: str
    words: str
    most: bool
    value: Callable[[Space, Index, Meter], Array]
    bound: Callable[[Space, Corners], Array]
    of_signal: bool = False


def _measured(space: Space, index: Index, meter: Meter, sums: tuple[tuple[str, ...], ...]) -> Array:
    """The largest of some sums of quantities at nominal values."""
    box = space.box(index, meter)
    values = box.nominal()
    q = box.solve(values, active_law=True)
    return np.asarray(np.maximum.reduce([np.broadcast_to(box.measure(names, values, q), (box.size,)) for names in sums]))


def _supply(space: Space) -> tuple[tuple[str, ...], ...]:
    return tuple(space.network.rail_parts(space.rails).values())


def _figure(name: str, words: str, kind: str, sides: tuple[str, ...]) -> Axis:
    """An axis of a small-signal figure, the least of `sides`, of which more is better; nothing where no signal passes."""

    def value(space: Space, index: Index, meter: Meter) -> Array:
        if not space.network.takes_signal:
            return np.full(len(index), NOTHING)
        return np.asarray(np.maximum.reduce([-_measured(space, index, meter, ((side,),)) for side in sides]))

    def bound(space: Space, corners: Corners) -> Array:
        if not space.network.takes_signal:
            return np.full(len(corners.lo), NOTHING)
        return np.asarray(np.maximum.reduce([corners.least(side, -1) for side in sides]))

    return Axis(name=name, kind=kind, words=words, most=True, value=value, bound=bound, of_signal=True)


def _ends(space: Space, lo: Index, hi: Index) -> tuple[Array, Array]:
    """Least and greatest nominal value of every role of blocks [ohm], shape (roles, n)."""
    lists = [space.lists[role].nominal for role in space.roles]
    return np.stack([x[lo[:, j]] for j, x in enumerate(lists)]), np.stack([x[hi[:, j]] for j, x in enumerate(lists)])


def _stabs(low: Array, high: Array) -> Array:
    """Least number of values that meet every range: that of distinct values which no member of a block can go below."""
    order = high.argsort(axis=0, kind="stable")
    low, high = (np.take_along_axis(x, order, axis=0) for x in (low, high))
    count, last = np.zeros(low.shape[1]), np.full(low.shape[1], -np.inf)
    for least, most in zip(low, high, strict=True):
        apart = least > last
        count += apart
        last = np.where(apart, most, last)
    return count


def _fewest(space: Space, lo: Index, hi: Index) -> Array:
    low, high = _ends(space, lo, hi)
    for j, role in enumerate(space.roles):
        if space.lists[role].paired:
            # What a pair totals says nothing of the values that it is made of.
            low[j], high[j] = -np.inf, np.inf
    return np.maximum(_stabs(low, high), 1.0)


def _distinct(space: Space, index: Index, meter: Meter) -> Array:
    columns = []
    for j, role in enumerate(space.roles):
        part = space.lists[role].take(index[:, j])
        halves = (part,) if part.pairs is None else part.pairs.halves
        columns += [half.nominal for half in halves]
    ohms = np.sort(np.stack(columns), axis=0)
    return np.asarray(1.0 + (np.diff(ohms, axis=0) > 0.0).sum(axis=0))


def _cost(per_value: Mapping[str, Array], space: Space, lo: Index, hi: Index) -> Array:
    """Least sum over the roles of what a value costs, of any member of blocks."""
    total = np.zeros(len(lo))
    for j, role in enumerate(space.roles):
        row = per_value[role]
        # Least of every run of 2^k values; two such runs cover any range.
        table = [row]
        while 2 ** len(table) <= row.size:
            half = 2 ** (len(table) - 1)
            table.append(np.minimum(table[-1][:-half], table[-1][half:]))
        padded = np.stack([np.concatenate([x, np.full(row.size - x.size, np.inf)]) for x in table])
        k = np.log2(hi[:, j] - lo[:, j] + 1).astype(int)
        total = total + np.minimum(padded[k, lo[:, j]], padded[k, hi[:, j] - 2**k + 1])
    return total


AXES: Mapping[str, Axis] = {
    axis.name: axis
    for axis in (
        Axis(
            name="supply_current",
            kind="current",
            words="least current",
            most=False,
            value=lambda space, index, meter: _measured(space, index, meter, _supply(space)),
            bound=lambda space, corners: np.maximum.reduce(
                [np.asarray(sum(corners.least(name, 1) for name in names)) for names in _supply(space)]
            ),
        ),
        _figure("input_resistance", "highest input resistance", "resistance", ("input_resistance",)),
        _figure("gain", "highest gain", "gain", ("gain",)),
        _figure("swing", "largest swing", "voltage", ("swing_to_cutoff", "swing_to_saturation")),
        Axis(
            name="distinct_values",
            kind="count",
            words="fewest distinct values",
            most=False,
            value=_distinct,
            bound=lambda space, corners: _fewest(space, corners.lo, corners.hi),
        ),
        Axis(
            name="parts",
            kind="count",
            words="fewest parts",
            most=False,
            value=lambda space, index, meter: _cost(_pieces(space), space, index, index),
            bound=lambda space, corners: _cost(_pieces(space), space, corners.lo, corners.hi),
        ),
        Axis(
            name="price",
            kind="price",
            words="lowest price",
            most=False,
            value=lambda space, index, meter: _cost(space.prices, space, index, index),
            bound=lambda space, corners: _cost(space.prices, space, corners.lo, corners.hi),
        ),
    )
}
"""Every axis by the name that the user gives it."""


def _pieces(space: Space) -> Mapping[str, Array]:
    return {
        role: np.ones(part.nominal.size) if part.pairs is None else 1.0 + (part.pairs.join != SINGLE)
        for role, part in space.lists.items()
    }
