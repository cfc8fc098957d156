"""What the pictures of a candidate show: built units, and its Q-point along one axis of the box at a time."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from synth.answer import Candidate
from synth.box import Box, Meter
from synth.networks.form import Array
from synth.quantities import Spread
from synth.spaces import space_of
from synth.stage import Stage
from synth.statistics import Lot, MonteCarlo, draws, monte_carlo
from synth.straddle import extreme_in_any_region
from synth.transistor import T0

STEPS = 9
"""Points of a curve, the ends among them."""
STEPS_SATURATED = 5
"""The same where the box reaches into saturation and every extreme takes a longer search."""
CLOUD = 600
"""Units of a cloud: enough to show its shape."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Curve:
    """A Q-point along one axis of the box.

    Parameters
    ----------
    axis : str
        ``temperature``, ``hfe`` or a rail.
    at : ndarray, shape (n,)
        Where [K, - or V].
    nominal : mapping of str to ndarray
        IC [A] and the voltages [V] with everything else nominal.
    low, high : mapping of str to ndarray
        Least and greatest of the same over the rest of the box [A, V].
    """

    axis: str
    at: Array
    nominal: Mapping[str, Array]
    low: Mapping[str, Array]
    high: Mapping[str, Array]


@dataclass(frozen=True, kw_only=True, eq=False)
class Units:
    """Units drawn from the box of a candidate.

    Parameters
    ----------
    values : mapping of str to ndarray
        IC [A] and voltages [V] of each unit that has a Q-point.
    lot : MonteCarlo
        What was drawn, and the share that meets each window and limit.
    """

    values: Mapping[str, Array]
    lot: MonteCarlo


def box_of(stage: Stage, candidate: Candidate) -> Box:
    """The box of a candidate.

    Parameters
    ----------
    stage : Stage
        The request that it answers.
    candidate : Candidate
        Any of its candidates.

    Returns
    -------
    Box
        Of this one.
    """
    space = space_of(stage, candidate.network, candidate.resistors, candidate.parts)
    return space.box(np.zeros((1, len(space.roles)), dtype=np.int32), Meter())


def curve(box: Box, axis: str, quantities: tuple[str, ...], active: bool = True) -> Curve | None:
    """The Q-point along one axis, alone and with the rest of the box.

    Parameters
    ----------
    box : Box
        Of one candidate.
    axis : str
        ``temperature``, ``hfe`` or a rail.
    quantities : tuple of str
        Of ``ic vce vc ve``.
    active : bool
        Whether the transistor is active all over the box.

    Returns
    -------
    Curve or None
        None where the axis has no width.
    """
    spread = box.temperature if axis == "temperature" else box.spreads[axis]
    if spread.width <= 0.0:
        return None
    at = np.linspace(spread.low, spread.high, STEPS if active else STEPS_SATURATED)
    # The laws have kinks at 25 °C, and the nominal value is where the other pictures look.
    kinks = [T0, spread.nominal] if axis == "temperature" else [spread.nominal]
    at = np.unique([*at, *(x for x in kinks if spread.low < x < spread.high)])
    values = box.nominal() | {axis: at}
    q = box.solve(values)
    nominal = {name: np.broadcast_to(box.measure((name,), values, q), at.shape) for name in quantities}
    ends: dict[tuple[str, int], list[float]] = {(name, side): [] for name in quantities for side in (-1, 1)}
    for x in at:
        slice_of = _cut(box, axis, float(x))
        law = slice_of.extreme if active else partial(extreme_in_any_region, slice_of)
        for (name, side), found in ends.items():
            found.append(float(law((name,), side).value[0]))
    low, high = ({name: np.array(ends[name, side]) for name in quantities} for side in (-1, 1))
    return Curve(axis=axis, at=at, nominal=nominal, low=low, high=high)


def _cut(box: Box, axis: str, x: float) -> Box:
    """The box at one place of an axis."""
    exact = Spread.exact(x)
    if axis == "temperature":
        return replace(box, temperature=exact)
    if axis == "hfe":
        return replace(box, transistor=replace(box.transistor, hfe=exact))
    return replace(box, rails={**box.rails, axis: exact})


def units(stage: Stage, candidate: Candidate, quantities: tuple[str, ...], lot: Lot) -> Units:
    """Units of a candidate, each drawn from the box and solved.

    Parameters
    ----------
    stage : Stage
        The request that it answers.
    candidate : Candidate
        Any of its candidates.
    quantities : tuple of str
        Of ``ic vce vc ve``.
    lot : Lot
        How many, and how they are spread.

    Returns
    -------
    Units
        The same for the same lot.
    """
    space = space_of(stage, candidate.network, candidate.resistors, candidate.parts)
    box = space.box(np.zeros((1, len(space.roles)), dtype=np.int32), Meter())
    life = {role: stage.role(role).life for role in space.roles}
    kept: dict[str, list[Array]] = {name: [] for name in quantities}
    for values in draws(box, lot, life):
        q = box.solve(values)
        solved = ~np.isnan(q.ic)
        for name, column in kept.items():
            column.append(np.broadcast_to(box.measure((name,), values, q), q.ic.shape)[solved])
    counted = monte_carlo(box, space.requirements, lot, life=life, quantities=quantities)
    return Units(values={name: np.concatenate(column) for name, column in kept.items()}, lot=counted)
