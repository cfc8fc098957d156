"""Curves over one axis of the box, histograms of built units, and candidates between two wishes."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from synth.answer import Answer, Candidate
from synth.explain import percent
from synth.present.figures.style import BLUE, GREEN, GREY, ORANGE, RED, engineering, key
from synth.present.terminal import figure
from synth.quantities.kinds import KINDS
from synth.search import AXES as AXES_OF_SEARCH
from synth.transistor import T0
from synth.views import Curve, Units

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes

AXES = {"temperature": ("ambient temperature", "°C"), "hfe": ("hFE at 25 °C", "")}
BINS = 48
MARKERS = "osv^P*Xd"
COLOURS = (BLUE, GREEN, ORANGE, GREY)
ZERO_CELSIUS = T0 - 25.0


def over(ax: Axes, answer: Answer, curve: Curve, quantity: str) -> Axes:
    """A quantity along one axis of the box: nominal, and between its extremes over the rest of the box.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    answer : Answer
        Whose targets are marked.
    curve : Curve
        Along which axis.
    quantity : str
        One of its quantities.

    Returns
    -------
    Axes
        The same; its lines have labels, a key is the caller's choice.
    """
    low, high = curve.low[quantity], curve.high[quantity]
    ax.fill_between(
        curve.at, low, high, facecolor="#D6E6F2", edgecolor=BLUE, hatch="////", linewidth=0.8, label="over the rest of the box"
    )
    ax.plot(curve.at, curve.nominal[quantity], color="black", marker="o", markersize=3.0, label="all else nominal")
    ends = [float(np.nanmin(low)), float(np.nanmax(high))]
    for k, end in enumerate(answer.stage["target"].get(quantity) or ()):
        if end is not None:
            ends.append(end)
            middle = k == 1
            words = "target" if middle else "window"
            ax.axhline(end, color=RED, linestyle="-." if middle else ":", linewidth=1.2, label=words)
    room = 0.06 * (max(ends) - min(ends))
    name, unit = AXES.get(curve.axis, (curve.axis.upper(), "V"))
    zero = ZERO_CELSIUS if unit == "°C" else 0.0
    engineering(ax, "x", float(curve.at[0]), float(curve.at[-1]), name, unit, 4, zero)
    engineering(ax, "y", min(ends) - room, max(ends) + room, quantity.upper(), "A" if quantity == "ic" else "V")
    return ax


def histogram(ax: Axes, answer: Answer, units: Units, quantity: str) -> Axes:
    """How many built units have which IC or voltage, with the window and the share inside.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    answer : Answer
        Whose windows are marked.
    units : Units
        The units.
    quantity : str
        One of their quantities.

    Returns
    -------
    Axes
        The same.
    """
    found = units.values[quantity]
    target = answer.stage["target"].get(quantity) or (None, None, None)
    window = [end for end in (target[0], target[2]) if end is not None]
    low, high = min([*window, float(found.min())]), max([*window, float(found.max())])
    room = 0.06 * (high - low) or 0.05 * abs(high)
    low, high = low - room, high + room
    counts, edges = np.histogram(found, bins=BINS, range=(float(found.min()), float(found.max()) + 1e-12 * abs(high)))
    ax.stairs(counts / found.size, edges, fill=True, facecolor="#CFE8DF", edgecolor=GREEN, linewidth=1.0, hatch="\\\\\\\\")
    for end, beyond in ((target[0], low), (target[2], high)):
        if end is not None:
            ax.axvspan(min(end, beyond), max(end, beyond), fc="white", ec=ORANGE, hatch="////", linewidth=0.0, zorder=0)
            ax.axvline(end, color=RED, linestyle="--", linewidth=1.4)
    engineering(ax, "x", low, high, quantity.upper(), "A" if quantity == "ic" else "V")
    engineering(ax, "y", 0.0, 1.12 * float(counts.max()) / found.size, "units in each bar", "%", 5)
    kind = "current" if quantity == "ic" else "voltage"
    title = f"{quantity.upper()} of {units.lot.units} units: median {figure(float(np.median(found)), kind)}"
    judged = {y.name: y for y in units.lot.yields}
    if window and (share := judged.get(f"target.{quantity}")) is not None:
        title += f", {_share(share.share)} inside the window"
    ax.set_title(title)
    return ax


def _share(share: float) -> str:
    """A share in per cent that says "all" only of all."""
    if share == 1.0:
        return "all"
    text = percent(share)
    return "nearly all" if text == "100 %" else text


@dataclass(frozen=True, kw_only=True)
class Offer:
    """A candidate in a frontier: its drift [-], its figure along the other axis (SI) [-], its network, whether it is chosen."""

    drift: float
    figure: float
    network: str
    chosen: bool = False


def offers_of(answer: Answer, chosen: Candidate, axis: str = "") -> list[Offer]:
    """What there is to choose from: a frontier that was asked for, else the candidates listed.

    Parameters
    ----------
    answer : Answer
        Any answer.
    chosen : Candidate
        The one that is marked.
    axis : str
        Axis of the answer's frontier; "" for the supply current of the candidates listed.

    Returns
    -------
    list of Offer
        The chosen one among them where it has a place there.
    """
    if not axis or answer.frontier is None:
        return [
            Offer(drift=c.drift.q_point, figure=c.supply_current, network=c.network, chosen=c.rank == chosen.rank)
            for c in answer.candidates
        ]
    return [
        Offer(
            drift=p.drift,
            figure=p.figures[axis],
            network=p.network,
            chosen=p.network == chosen.network and p.resistors == chosen.resistors,
        )
        for p in answer.frontier.points
        if math.isfinite(p.figures.get(axis, math.nan))
    ]


def frontier(ax: Axes, offers: Sequence[Offer], axis: str = "supply_current") -> Axes:
    """Drift against another wish, the chosen candidate marked; of the offers none lies better than the steps.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    offers : sequence of Offer
        One or more.
    axis : str
        What `Offer.figure` is, an axis of `synth.search.AXES`.

    Returns
    -------
    Axes
        The same.
    """
    known = AXES_OF_SEARCH[axis]
    handles: list[Artist] = []
    for k, network in enumerate(dict.fromkeys(offer.network for offer in offers)):
        own = [offer for offer in offers if offer.network == network]
        look: dict[str, Any] = {"marker": MARKERS[k % len(MARKERS)], "color": COLOURS[k % len(COLOURS)], "edgecolors": "black"}
        x, y = [offer.figure for offer in own], [offer.drift for offer in own]
        handles.append(ax.scatter(x, y, s=26.0, linewidths=0.6, zorder=3, label=network, **look))
    x, y = [offer.figure for offer in offers], [offer.drift for offer in offers]
    room_x = 0.08 * (max(x) - min(x)) or 0.05 * abs(max(x)) or 1.0
    room_y = 0.08 * (max(y) - min(y)) or 0.05 * max(y) or 0.01
    left, right, low, high = min(x) - room_x, max(x) + room_x, max(min(y) - room_y, 0.0), max(y) + room_y
    # From the best along the axis on, each step is one that drifts less than all before it.
    steps: list[Offer] = []
    for offer in sorted(offers, key=lambda offer: (-offer.figure if known.most else offer.figure, offer.drift)):
        if not steps or offer.drift < steps[-1].drift:
            steps.append(offer)
    far = left if known.most else right
    (edge,) = ax.step(
        [steps[0].figure, *(step.figure for step in steps), far],
        [high, *(step.drift for step in steps), steps[-1].drift],
        where="post", color="black", linewidth=1.0, linestyle="--", zorder=2, label="none shown is better in both",
    )  # fmt: skip
    handles.append(edge)
    chosen = next((offer for offer in offers if offer.chosen), None)
    if chosen is not None:
        ring: dict[str, Any] = {"facecolors": "none", "edgecolors": RED, "linewidths": 1.8}
        handles.append(ax.scatter([chosen.figure], [chosen.drift], s=150.0, marker="o", zorder=4, label="chosen", **ring))
    unit = {"count": "", "price": ""}.get(known.kind, KINDS[known.kind].unit if known.kind in KINDS else "")
    engineering(ax, "x", left, right, axis.replace("_", " "), unit)
    engineering(ax, "y", low, high, "drift of the Q-point", "%")
    key(ax, handles)
    return ax
