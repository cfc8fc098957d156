"""A frontier in an answer: its points, and in words what they offer for more drift."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from synth.answer import Alternative, Point, Tradeoff
from synth.explain import made_of, pair_of
from synth.quantities import format_quantity
from synth.ranking import WORTH
from synth.search import AXES, Axis, Frontier


def tradeoff(found: Frontier, axes: Sequence[Axis]) -> Tradeoff:
    """A frontier as part of an answer.

    Parameters
    ----------
    found : Frontier
        What the search found.
    axes : sequence of Axis
        Its further axes.

    Returns
    -------
    Tradeoff
        Points ascending in what ranks.
    """
    points = []
    for member in found.members:
        space = member.found.space
        (values,) = space.fitted(np.array([member.found.index], dtype=np.int32))
        at = dict(zip(space.roles, member.found.index, strict=True))
        pairs = {role: pair_of(space.lists[role], at[role]) for role in space.roles}
        figures = {axis.name: -x if axis.most else x for axis, x in zip(axes, member.axes, strict=True)}
        points.append(
            Point(
                network=space.network.name,
                resistors=values,
                parts={role: pair for role, pair in pairs.items() if pair is not None},
                score=member.found.score,
                drift=member.found.drift,
                figures=figures,
            )
        )
    return Tradeoff(
        axes=tuple(axis.name for axis in axes),
        points=tuple(points),
        complete=found.complete,
        bound=found.bound if math.isfinite(found.bound) else None,
        evaluated=found.evaluated,
        seconds=found.seconds,
    )


def along_frontier(front: Tradeoff) -> tuple[Alternative, ...]:
    """What the frontier offers for more drift, in words: along each axis the best that any qualifying candidate reaches.

    Parameters
    ----------
    front : Tradeoff
        The frontier.

    Returns
    -------
    tuple of Alternative
        Only where another candidate than the one of least drift is better by more than two per cent.
    """
    found = []
    if len(front.points) < 2:
        return ()
    first = front.points[0]
    for axis in (AXES[name] for name in front.axes):
        turn = -1.0 if axis.most else 1.0
        reached = [turn * point.figures[axis.name] for point in front.points]
        # Points ascend in what ranks, so of equals the first costs least.
        best = front.points[reached.index(min(reached))]
        here, there = first.figures[axis.name], best.figures[axis.name]
        if abs(there - here) <= WORTH * abs(here):
            continue
        text = f"{figure_text(axis, there)} instead of {figure_text(axis, here)}, with a drift of {100 * best.drift:.3g} %"
        text += f" instead of {100 * first.drift:.3g} %: {best.network}, {made_up(best)}"
        found.append(Alternative(reason=axis.words, rank=None, text=text))
    return tuple(found)


def figure_text(axis: Axis, value: float) -> str:
    """A figure along an axis as text.

    Parameters
    ----------
    axis : Axis
        The axis.
    value : float
        The figure, in the unit of the axis [-].

    Returns
    -------
    str
        With its unit.
    """
    if axis.kind in ("count", "price"):
        return f"{value:.6g}"
    return format_quantity(value, axis.kind)


def made_up(point: Point) -> str:
    """The resistors of a point in a row.

    Parameters
    ----------
    point : Point
        Of a frontier.

    Returns
    -------
    str
        ``R1 38K3, R2 21K, ...``, pairs with their parts.
    """
    return ", ".join(f"{role.upper()} {made_of(value, point.parts.get(role))}" for role, value in point.resistors.items())
