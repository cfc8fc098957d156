"""The load line with its Q-point, the box around it and units inside."""

from __future__ import annotations

from typing import TYPE_CHECKING

from synth.answer import Answer, Candidate
from synth.present.figures.style import BLUE, GREEN, GREY, ORANGE, RED, engineering, key
from synth.present.terminal import figure, span
from synth.views import CLOUD, Units

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes


def load_line(ax: Axes, answer: Answer, candidate: Candidate, units: Units | None = None) -> Axes:
    """IC against VCE: the static load line, the Q-point, its box, and how far saturation and cut-off are.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    answer : Answer
        Where the candidate comes from.
    candidate : Candidate
        What is drawn.
    units : Units, optional
        Built units, of which the first are shown.

    Returns
    -------
    Axes
        The same.
    """
    from matplotlib.patches import Rectangle

    line, q, worst = candidate.load_line, candidate.nominal, candidate.worst
    assert line is not None
    right = 1.06 * max(line.vce, worst.vce[1])
    top = 1.1 * max(min(line.ic, 4.0 * worst.ic[1]), worst.ic[1])
    floor = -0.05 * top
    handles: list[Artist] = []
    (drawn,) = ax.plot([0.0, line.vce], [line.ic, 0.0], color="black", label="load line, nominal", zorder=2)
    handles.append(drawn)
    if units is not None:
        vce, ic = units.values["vce"][:CLOUD], units.values["ic"][:CLOUD]
        label = f"{ic.size} units as built, Monte Carlo"
        (cloud,) = ax.plot(vce, ic, "x", color=GREEN, markersize=2.0, markeredgewidth=0.5, zorder=3, label=label)
        handles.append(cloud)
    (low_v, high_v), (low_i, high_i) = worst.vce, worst.ic
    box = Rectangle(
        (low_v, low_i), high_v - low_v, high_i - low_i, fill=False, edgecolor=BLUE, linestyle="--", linewidth=1.4, zorder=4,
        label=f"over the box: {span(low_i, high_i, 'current')}, {span(low_v, high_v, 'voltage')}",
    )  # fmt: skip
    ax.add_patch(box)
    point = ax.scatter(
        [q.vce], [q.ic], s=46.0, marker="D", color=RED, edgecolors="black", linewidths=0.8, zorder=5,
        label=f"Q-point: {figure(q.ic, 'current')}, {figure(q.vce, 'voltage')}",
    )  # fmt: skip
    handles[1:1] = [point, box]
    handles += _windows(ax, answer)
    reach = low_v - line.vce_sat
    far = f"{figure(reach, 'voltage')} away" if reach > 0.0 else "reached"
    handles.append(
        ax.axvspan(
            0.0, line.vce_sat, facecolor="white", edgecolor=ORANGE, hatch="////", linewidth=0.0, zorder=1,
            label=f"saturated, VCE below {figure(line.vce_sat, 'voltage')}: {far}",
        )
    )
    far = f"{figure(low_i, 'current')} away" if "cut off" not in candidate.regions else "reached"
    handles.append(
        ax.axhspan(
            floor, 0.0, facecolor="white", edgecolor=GREY, hatch="----", linewidth=0.0, zorder=1, label=f"cut off, no IC: {far}"
        )
    )
    engineering(ax, "x", 0.0, right, "VCE", "V")
    engineering(ax, "y", floor, top, "IC", "A")
    key(ax, handles)
    return ax


def _windows(ax: Axes, answer: Answer) -> list[Artist]:
    """Windows of the targets as lines."""
    found: list[Artist] = []
    for quantity, draw in (("ic", ax.axhline), ("vce", ax.axvline)):
        ends = answer.stage["target"].get(quantity)
        for end in (ends[0], ends[2]) if ends else ():
            if end is not None:
                line = draw(end, color=GREY, linestyle=":", linewidth=1.2, zorder=2)
                line.set_label("windows")
                found = [line]
    return found
