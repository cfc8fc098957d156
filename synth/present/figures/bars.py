"""Sorted bars: the budget of a drift, and what every part carries of its rating."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from synth.answer import Candidate
from synth.explain import cause_words, percent
from synth.present.figures.style import BLUE, FONT_SIZE, ORANGE, RED, engineering, width_of
from synth.quantities import format_quantity

if TYPE_CHECKING:
    from matplotlib.axes import Axes

LEAST = 0.0005
"""Share of a drift below which a cause goes to the rest [-]."""
SMALL = FONT_SIZE - 0.5


def budget(ax: Axes, candidate: Candidate, quantity: str) -> Axes:
    """Shares of every cause in the drift of a quantity, largest on top.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    candidate : Candidate
        What is drawn.
    quantity : str
        One that has a budget.

    Returns
    -------
    Axes
        The same.
    """
    drift = candidate.drift.of()[quantity]
    rows = [(cause_words(s.cause), s.share) for s in candidate.budget[quantity] if abs(s.share) >= LEAST]
    rest = sum(s.share for s in candidate.budget[quantity] if abs(s.share) < LEAST)
    if rest:
        rows.append(("the rest", rest))
    _bars(ax, [(name, share, percent(share).replace("-", "−")) for name, share in rows])
    for bar, (_, share) in zip(ax.patches, rows, strict=True):
        bar.set(facecolor=BLUE if share >= 0.0 else ORANGE, hatch=None if share >= 0.0 else "////", edgecolor="black")
    ax.axvline(0.0, color="black", linewidth=0.8)
    ax.set_xlabel("share of the drift [%]")
    ax.set_title(f"{quantity.upper()} drifts {percent(drift)}: its causes add up to that")
    return ax


def stress(ax: Axes, candidate: Candidate) -> Axes:
    """What every part carries at its own worst point, in per cent of what it may carry.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    candidate : Candidate
        One with ratings, see `has_ratings`.

    Returns
    -------
    Axes
        The same.
    """
    rows = _used(candidate)
    _bars(ax, [(name, share, text) for name, share, text, _ in rows], least=1.0)
    hatches = {"power": None, "voltage": "////", "current": "xxxx"}
    for bar, (_, share, _, kind) in zip(ax.patches, rows, strict=True):
        bar.set(facecolor=RED if share > 1.0 else BLUE, hatch=hatches[kind], edgecolor="black")
    ax.axvline(1.0, color="black", linewidth=1.4, linestyle="--")
    ax.set_xlabel("share of the rating after derating [%]")
    ax.set_title("Stress at the worst point of each part; the dashed line is what it may carry")
    return ax


def has_ratings(candidate: Candidate) -> bool:
    """Whether any part has a rating to be compared with.

    Parameters
    ----------
    candidate : Candidate
        Any candidate.

    Returns
    -------
    bool
        True if `stress` has something to draw.
    """
    return bool(_used(candidate))


def _used(candidate: Candidate) -> list[tuple[str, float, str, str]]:
    """Name, share, text and kind of every rating that is known, the most used first."""
    rows = []
    for role, s in candidate.stress.items():
        for kind, worst, allowed in (("power", s.power, s.power_allowed), ("voltage", s.voltage, s.voltage_allowed)):
            if allowed is not None:
                rows.append((f"{role.upper()} {kind}", worst, allowed, kind))
    load = candidate.transistor
    names = {"power": ("transistor power", "power"), "vceo": ("VCEO", "voltage"), "ic": ("IC max", "current")}
    for name, (words, kind) in names.items():
        if load is not None and name in load.allowed:
            rows.append((words, getattr(load, name), load.allowed[name], kind))
    found = []
    for words, worst, allowed, kind in rows:
        share = worst / allowed if allowed > 0.0 else math.inf
        text = f"{percent(share)} of {format_quantity(allowed, kind)}" if allowed > 0.0 else "none allowed"
        found.append((words, share, text, kind))
    return sorted(found, key=lambda row: -row[1])


def _bars(ax: Axes, rows: list[tuple[str, float, str]], least: float = 0.0) -> None:
    """Horizontal bars from the top down, each with its text at its end."""
    from matplotlib.transforms import ScaledTranslation

    figure = ax.get_figure(root=True)
    assert figure is not None
    finite = [share for _, share, _ in rows if math.isfinite(share)]
    longest, deepest = max([least, *finite]), min([0.0, *finite])
    # A bar without end is drawn as long as the longest.
    shares = [min(share, longest or 1.0) for _, share, _ in rows]
    ax.barh(range(len(rows)), shares, height=0.64, linewidth=0.8)
    ax.set_yticks(range(len(rows)), [name for name, _, _ in rows])
    ax.tick_params(axis="y", length=0)
    ax.grid(False, axis="y")
    ax.set_ylim(len(rows) - 0.4, -0.6)
    # Room for the texts beyond the longest bars: their width is known before the axes have a size.
    room = figure.get_size_inches()[0] * 72.0 * 0.62
    beyond = [
        max((width_of(text, SMALL) for _, share, text in rows if (share >= 0.0) == up), default=0.0) for up in (True, False)
    ]
    reach = (longest - deepest) or 1.0
    free = max(1.0 - (beyond[0] + (beyond[1] if deepest < 0.0 else 0.0) + 20.0) / room, 0.2)
    unit = reach / free / room
    engineering(
        ax, "x", deepest - (beyond[1] + 10.0) * unit if deepest < 0.0 else 0.0, longest + (beyond[0] + 10.0) * unit, "", "%", 7
    )
    for k, ((_, share, text), end) in enumerate(zip(rows, shares, strict=True)):
        aside = ScaledTranslation((4.0 if share >= 0.0 else -4.0) / 72.0, 0.0, figure.dpi_scale_trans)
        side = "left" if share >= 0.0 else "right"
        # On white, so that the line of a rating does not strike a text out.
        clear = {"facecolor": "white", "edgecolor": "none", "pad": 0.6}
        ax.text(end, k, text, ha=side, va="center", fontsize=SMALL, transform=ax.transData + aside, bbox=clear, zorder=4)
