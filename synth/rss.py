"""Root sum square of what each part does alone: a figure for the usual unit, never for the worst.

For each quantity that has a target, with every other parameter at its nominal value,

    rss = (|Q0 − target| + θ + √Σ e²)/target,

where Q0 is the quantity at nominal values and ambient, θ the larger move of the nominal stage to an end of the ambient range
or to 25 °C, and e the largest move that one part alone makes by going to an end of its spread, at nominal ambient or an end
of the range. Parts are independent and so add in squares; temperature is one and the same for all of them and goes one way,
and the centring is no spread at all: these two add.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from synth.box import Box
from synth.networks.form import Array

Spot = Mapping[str, float]
"""A point of the box, see `synth.box.Box.values`."""


def ambients(box: Box) -> tuple[float, ...]:
    """Ambient temperatures that are looked at.

    Parameters
    ----------
    box : Box
        Any candidates.

    Returns
    -------
    tuple of float
        Nominal ambient first, then the ends of its range and 25 °C if inside [K], without repetition.
    """
    return tuple(dict.fromkeys((box.temperature.nominal, *(float(stop) for stop in box.stops))))


def lone_moves(box: Box) -> dict[str, tuple[tuple[Spot, Spot], ...]]:
    """What each part does alone: pairs of points that differ in that part only.

    Parameters
    ----------
    box : Box
        Any candidates.

    Returns
    -------
    dict of str to tuple
        For each axis the points with it at an end, and beside each the point it moved from; for ``temperature`` the
        nominal stage at every ambient, beside the nominal point.
    """
    def pairs(axis: str) -> Iterator[tuple[Spot, Spot]]:
        for t in ambients(box):
            for end in (0.0, 1.0):
                yield {"temperature": t, axis: end}, {"temperature": t}

    start = {"temperature": box.temperature.nominal}
    found = {axis: tuple(pairs(axis)) for axis in box.axes}
    return found | {"temperature": tuple(({"temperature": t}, start) for t in ambients(box)[1:])}


class _Reached:
    """Quantities of candidates at points of the box, each point solved once."""

    def __init__(self, box: Box, aims: Mapping[str, float]) -> None:
        self.box, self.aims = box, aims
        self.known: dict[tuple[tuple[str, float], ...], dict[str, Array]] = {}

    def at(self, spot: Spot) -> dict[str, Array]:
        key = tuple(sorted(spot.items()))
        if key not in self.known:
            box = self.box
            values = box.values(spot)
            q = box.solve(values, active_law=True)
            self.known[key] = {name: np.broadcast_to(box.measure((name,), values, q), (box.size,)) for name in self.aims}
        return self.known[key]

    def move(self, quantity: str, there: Spot, here: Spot) -> Array:
        return np.asarray(np.abs(self.at(there)[quantity] - self.at(here)[quantity]))


def root_sum_square(box: Box, aims: Mapping[str, float]) -> dict[str, Array]:
    """Root sum square of every quantity that has a target.

    Parameters
    ----------
    box : Box
        n candidates.
    aims : mapping of str to float
        Targets [A, V].

    Returns
    -------
    dict of str to ndarray
        Shape (n,), relative to the target [-].
    """
    reached, moves, found = _Reached(box, aims), lone_moves(box), {}
    nothing = np.zeros(box.size)
    for quantity, aim in aims.items():
        alone = {
            cause: np.maximum.reduce([nothing, *(reached.move(quantity, *pair) for pair in pairs)])
            for cause, pairs in moves.items()
        }
        steady = np.abs(reached.at({"temperature": box.temperature.nominal})[quantity] - aim) + alone.pop("temperature")
        found[quantity] = (steady + np.sqrt(sum((e**2 for e in alone.values()), nothing))) / aim
    return found


def deciding_moves(box: Box, aims: Mapping[str, float]) -> dict[str, dict[str, tuple[Spot, Spot]]]:
    """The largest lone move of each cause for the first candidate.

    Parameters
    ----------
    box : Box
        At least one candidate.
    aims : mapping of str to float
        Targets [A, V].

    Returns
    -------
    dict of str to dict
        By quantity and cause: the point moved to, and the point moved from.
    """
    reached, moves = _Reached(box, aims), lone_moves(box)
    return {
        quantity: {
            cause: max(pairs, key=lambda pair, quantity=quantity: float(reached.move(quantity, *pair)[0]))  # type: ignore[misc]
            for cause, pairs in moves.items()
            if pairs
        }
        for quantity in aims
    }
