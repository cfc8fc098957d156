"""Curves over one axis of the box, histograms of built units, and candidates between two wishes."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from synth.answer import Answer, Candidate
from synth.explain import percent
from synth.present.figures.style import BLUE, GREEN, GREY, ORANGE, RED, engineering, key
from synth.present.terminal import figure
from synth.transistor import T0
from synth.views import Curve, Units

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes

AXES = {"temperature": ("ambient temperature", "°C"), "hfe": ("hFE at 25 °C", "")}
BINS = 48
MARKERS = "osv^P*Xd"
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


def frontier(ax: Axes, candidates: tuple[Candidate, ...], chosen: Candidate) -> Axes:
    """Drift against supply current of candidates, the chosen one marked; none of them lies below the steps.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    candidates : tuple of Candidate
        Two or more.
    chosen : Candidate
        The one that is marked.

    Returns
    -------
    Axes
        The same.
    """
    handles: list[Artist] = []
    colours = (BLUE, GREEN, ORANGE, GREY)
    for k, network in enumerate(dict.fromkeys(c.network for c in candidates)):
        own = [c for c in candidates if c.network == network]
        handles.append(
            ax.scatter(
                [c.supply_current for c in own], [c.drift.q_point for c in own], s=26.0, marker=MARKERS[k % len(MARKERS)],
                color=colours[k % len(colours)], edgecolors="black", linewidths=0.6, zorder=3, label=network,
            )
        )
    best = sorted(candidates, key=lambda c: (c.supply_current, c.drift.q_point))
    steps: list[Candidate] = []
    for c in best:
        if not steps or c.drift.q_point < steps[-1].drift.q_point:
            steps.append(c)
    x, y = [c.supply_current for c in candidates], [c.drift.q_point for c in candidates]
    room_x, room_y = 0.08 * (max(x) - min(x)) or 0.05 * max(x), 0.08 * (max(y) - min(y)) or 0.05 * max(y)
    left, right, low, high = min(x) - room_x, max(x) + room_x, min(y) - room_y, max(y) + room_y
    (edge,) = ax.step(
        [steps[0].supply_current, *(c.supply_current for c in steps), right],
        [high, *(c.drift.q_point for c in steps), steps[-1].drift.q_point],
        where="post", color="black", linewidth=1.0, linestyle="--", zorder=2, label="none listed is better in both",
    )  # fmt: skip
    ring = ax.scatter(
        [chosen.supply_current], [chosen.drift.q_point], s=150.0, marker="o", facecolors="none", edgecolors=RED,
        linewidths=1.8, zorder=4, label=f"chosen: rank {chosen.rank}",
    )  # fmt: skip
    engineering(ax, "x", left, right, "supply current", "A")
    engineering(ax, "y", low, high, "drift of the Q-point", "%")
    key(ax, [*handles, edge, ring])
    return ax
