"""Root-sum-square: how far a quantity strays when its random causes are independent and each spread ends at three sigma.

At a temperature T the quantity is

    q(T) + Σ one-way changes + √(Σ random changes²),

each change the exact one of its cause alone, everything else nominal. One-way are the changes that all parts make together
or that only go on: temperature, through the transistor and through every temperature coefficient, and drift over life; they
add up linearly. Random are what differs from part to part and day to day: tolerance, hFE, VBE, leakage, rails.

The sum is that of a straight line. The point that it stands for, every one-way cause at its end and every random one as far
towards its end as its share of the root says, is a point of the box, and there the stage is solved exactly: where causes weaken
each other, or the transistor saturates, the solved value stays true and the sum does not. The temperature that gives most
decides.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from math import inf
from typing import Literal, NamedTuple

import numpy as np

from synth.box import Box, Values
from synth.networks.form import Array
from synth.parts import Parts
from synth.quantities import Interval
from synth.statistics.distribution import SIGMAS
from synth.statistics.pieces import pieces_of, whole_of
from synth.statistics.stability import gradients
from synth.transistor import T0

Kind = Literal["one-way", "random"]

STEPS = np.linspace(0.0, 1.0, 9)
"""Where a spread is looked at along its own axis: an extreme between the ends is nearly met."""


@dataclass(frozen=True, kw_only=True)
class Term:
    """What one cause adds on one side: its name, "one-way" or "random", and the change [A or V], never negative."""

    cause: str
    kind: Kind
    change: float


@dataclass(frozen=True, kw_only=True)
class Side:
    """One end of a root-sum-square range.

    `value` is the quantity solved at the point of the sum, `total` the sum itself, and `centre` the quantity at the deciding
    `temperature` [K] with all else nominal; `terms` are its causes, largest first; `sigmas` is how many standard deviations
    away the limit on this side is by the sum [-], None without one.
    """

    value: float
    total: float
    centre: float
    temperature: float
    terms: tuple[Term, ...]
    sigmas: float | None


@dataclass(frozen=True, kw_only=True)
class Rss:
    """Root-sum-square of one quantity [A or V]: nominal value, both ends, and linear sigma of its random causes."""

    quantity: str
    nominal: float
    low: Side
    high: Side
    sigma: float


def rss(box: Box, quantity: str, *, life: Mapping[str, float], window: Interval | None = None) -> Rss:
    """Root-sum-square range of a quantity of one candidate.

    Parameters
    ----------
    box : Box
        Of one candidate.
    quantity : str
        A quantity of `synth.measures`, such as ``ic``.
    life : mapping of str to float
        Change over life of each role [-], which is part of its band and counts one way.
    window : Interval, optional
        What the quantity is allowed to be [A or V].

    Returns
    -------
    Rss
        Its ends are those of three sigma.

    References
    ----------
    Method and the linear sum of one-way terms: common practice of worst-case circuit analysis.
    """
    low, high = (-inf, inf) if window is None else (window.low, window.high)
    nominal = float(np.ravel(_measured(box, quantity, box.nominal()))[0])
    return Rss(
        quantity=quantity,
        nominal=nominal,
        low=_side(box, quantity, -1, life, low),
        high=_side(box, quantity, 1, life, high),
        sigma=linear_sigma(box, quantity, life=life) if quantity in ("ic", "vce") else float("nan"),
    )


def _measured(box: Box, quantity: str, values: Values) -> Array:
    return box.measure((quantity,), values, box.solve(values))


def _centre(box: Box, temperature: Array) -> Values:
    """Everything nominal at some temperatures; a coefficient of one sign moves its resistor there by the least it can."""
    found = {**box.nominal(), "temperature": temperature}
    for role, part in box.parts.items():
        found[role] = part.nominal * (1.0 + np.clip(0.0, *_warmed(part, temperature)))
    return found


def _warmed(part: Parts, temperature: Array) -> tuple[Array, Array]:
    """Least and greatest change that the temperature coefficient makes [-]."""
    one, two = (float(end[0]) * (temperature - T0) for end in (part.tcr_low, part.tcr_high))
    return np.minimum(one, two), np.maximum(one, two)


def _side(box: Box, quantity: str, direction: int, life: Mapping[str, float], limit: float) -> Side:
    t = box.scan
    centre = _centre(box, t)
    base = direction * np.broadcast_to(_measured(box, quantity, centre), t.shape)
    every = [_change(box, quantity, direction, centre, base, cause) for cause in _causes(box, t, life)]
    linear = _sum(c.change for c in every if c.kind == "one-way") + np.zeros(t.shape)
    random = np.sqrt(_sum(c.change**2 for c in every if c.kind == "random") + np.zeros(t.shape))
    at = dict(centre)
    for c in every:
        weight = 1.0 if c.kind == "one-way" else np.divide(c.change, random, out=np.zeros(t.shape), where=random > 0.0)
        at[c.parameter] = at[c.parameter] + weight * c.way
    solved = direction * np.broadcast_to(_measured(box, quantity, at), t.shape)
    k = int(np.nanargmax(np.where(np.isnan(solved).all(), 0.0, solved)))
    rows = [Term(cause=c.name, kind=c.kind, change=float(c.change[k])) for c in every if c.change[k] > 0.0]
    with np.errstate(divide="ignore", invalid="ignore"):
        room = np.where(random > 0.0, SIGMAS * (direction * limit - base - linear) / random, np.inf)
    return Side(
        value=float(direction * solved[k]),
        total=float(direction * (base + linear + random)[k]),
        centre=float(direction * base[k]),
        temperature=float(t[k]),
        terms=tuple(sorted(rows, key=lambda term: -term.change)),
        sigmas=float(np.nanmin(room)) if np.isfinite(limit) and not np.isnan(room).all() else None,
    )


class _Cause(NamedTuple):
    """A cause: its name, kind, the parameter that it moves, and the ends of that at each temperature."""

    name: str
    kind: Kind
    parameter: str
    low: Array
    high: Array


class _Change(NamedTuple):
    """What a cause does: the change of the quantity, and how far the parameter goes for it, at each temperature."""

    name: str
    kind: Kind
    parameter: str
    change: Array
    way: Array


def _causes(box: Box, t: Array, life: Mapping[str, float]) -> Iterator[_Cause]:
    flat = np.zeros(t.shape)
    for name, spread in box.spreads.items():
        if name == "delta_ref" and box.reference is not None:
            v, tc = box.reference.voltage, box.reference.tc
            yield _Cause(name, "random", name, v.low - v.nominal + flat, v.high - v.nominal + flat)
            one, two = (tc.low - tc.nominal) * (t - T0), (tc.high - tc.nominal) * (t - T0)
            yield _Cause(f"{name} coefficient", "one-way", name, np.minimum(one, two), np.maximum(one, two))
        elif spread.width > 0.0:
            low, high = (end - spread.nominal + flat for end in (spread.low, spread.high))
            yield _Cause(name, "random", name, low, high)
    for role, part in box.parts.items():
        pieces = pieces_of(part)
        nominal = [piece.nominal + flat for _, piece in pieces]
        whole = whole_of(part, nominal)
        for k, (half, piece) in enumerate(pieces):
            drift = min(life.get(role, 0.0), float(piece.band[0]))
            tolerance = float(piece.band[0]) - drift
            low, high = _warmed(piece, t)
            least = np.clip(0.0, low, high)
            rows: tuple[tuple[str, Kind, Array, Array], ...] = (
                ("", "random", flat - tolerance, flat + tolerance),
                (" life", "one-way", flat - drift, flat + drift),
                (" coefficient", "one-way", low - least, high - least),
            )
            for ending, kind, one, two in rows:
                # What one resistor of a pair does to the whole, the other nominal.
                ends = [
                    whole_of(part, [*nominal[:k], nominal[k] * (1.0 + end), *nominal[k + 1 :]]) - whole for end in (one, two)
                ]
                yield _Cause(f"{role}{half}{ending}", kind, role, *ends)


def _change(box: Box, quantity: str, direction: int, centre: Values, base: Array, cause: _Cause) -> _Change:
    ways = (1.0 - STEPS[:, None]) * cause.low + STEPS[:, None] * cause.high
    moved = {**centre, cause.parameter: centre[cause.parameter] + ways}
    reached = direction * np.broadcast_to(_measured(box, quantity, moved), ways.shape) - base
    # Without a solution there is nothing to reach.
    reached = np.where(np.isnan(reached), -np.inf, reached)
    best = reached.argmax(axis=0)
    along = np.arange(base.size)
    change = np.maximum(reached[best, along], 0.0)
    return _Change(cause.name, cause.kind, cause.parameter, change, np.where(change > 0.0, ways[best, along], 0.0))


def _sum(parts: Iterable[Array]) -> Array:
    return np.asarray(sum(parts))


def linear_sigma(box: Box, quantity: str, *, life: Mapping[str, float]) -> float:
    """Standard deviation of IC or VCE at the nominal point by linear propagation of the random causes.

    Parameters
    ----------
    box : Box
        Of one candidate.
    quantity : {"ic", "vce"}
        Which of the two.
    life : mapping of str to float
        As in `rss` [-].

    Returns
    -------
    float
        √(Σ (derivative · half-width/3)²) [A or V]; NaN where the nominal point is saturated.
    """
    values = box.nominal()
    if float(np.ravel(box.solve(values).vce)[0]) <= box.transistor.vce_sat:
        return float("nan")
    found = gradients(box, values)
    half = {name: 0.5 * spread.width for name, spread in box.spreads.items()}
    if box.reference is not None:
        half["delta_ref"] = 0.5 * box.reference.voltage.width
    half |= {role: _half_width(part, life.get(role, 0.0)) for role, part in box.parts.items()}
    which = ("ic", "vce").index(quantity)
    parts: Sequence[float] = [float(np.ravel(d[which])[0]) * half[name] / SIGMAS for name, d in found.items()]
    return float(np.sqrt(sum(part**2 for part in parts)))


def _half_width(part: Parts, life: float) -> float:
    """What tolerance alone moves a resistance [ohm]; the two of a pair add in squares."""
    pieces = [piece for _, piece in pieces_of(part)]
    whole, squares = whole_of(part, [p.nominal for p in pieces]), 0.0
    for k in range(len(pieces)):
        raised = [p.nominal * (1.0 + (float(p.band[0]) - life) * (j == k)) for j, p in enumerate(pieces)]
        squares += float(np.ravel(whole_of(part, raised) - whole)[0]) ** 2
    return float(np.sqrt(squares))
