"""Geometry of a load line picture: where everything stands; the template draws it.

The picture holds no words but those of its axes, which stand clear of each other whatever the values; what else there is to
say is in the list beside it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import floor, inf, log10

from synth.answer import Answer, Candidate
from synth.explain import percent
from synth.present.terminal import figure, span
from synth.quantities import format_quantity

WIDTH, HEIGHT = 440.0, 300.0
LEFT, RIGHT, TOP, BOTTOM = 66.0, 20.0, 24.0, 46.0
ROOM = 1.04
"""How far the axes go beyond what is drawn [-]."""
STEEP = 4.0
"""How many times the greatest IC the current axis reaches at most [-]."""
MOST_TICKS = 6


@dataclass(frozen=True, kw_only=True)
class Tick:
    """A mark of an axis: where it stands [-], and its number with a unit."""

    at: float
    text: str


@dataclass(frozen=True, kw_only=True)
class Rect:
    """A rectangle in the units of the picture [-]."""

    x: float
    y: float
    width: float
    height: float


@dataclass(frozen=True, kw_only=True)
class Picture:
    """Everything that a load line picture draws, places in its own units [-], and the words beside it as (mark, meaning)."""

    width: float
    height: float
    plot: Rect
    x_ticks: Sequence[Tick]
    y_ticks: Sequence[Tick]
    line: tuple[float, float, float, float]
    box: Rect
    window: Rect | None
    q_point: tuple[float, float]
    saturation: float
    legend: Sequence[tuple[str, str]]
    summary: str


def picture(answer: Answer, c: Candidate, among: Sequence[Candidate], name: str) -> Picture | None:
    """Load line of a candidate with its Q-point, its box, its window and both ends of the active region.

    Parameters
    ----------
    answer : Answer
        Where it comes from, for its targets.
    c : Candidate
        Any candidate.
    among : sequence of Candidate
        All whose pictures share their axes.
    name : str
        What the page calls it.

    Returns
    -------
    Picture or None
        None where the line is not known.
    """
    line = c.load_line
    if line is None:
        return None
    target = answer.stage.get("target", {})
    aim_ic, aim_vce = _window(target.get("ic")), _window(target.get("vce"))
    (ic_low, ic_high), (vce_low, vce_high) = c.worst.ic, c.worst.vce
    x_end, y_end = _ends(among, aim_ic, aim_vce)
    plot = Rect(x=LEFT, y=TOP, width=WIDTH - LEFT - RIGHT, height=HEIGHT - TOP - BOTTOM)

    def x(v: float) -> float:
        return round(plot.x + plot.width * min(max(v / x_end, 0.0), 1.0), 2)

    def y(i: float) -> float:
        return round(plot.y + plot.height * (1.0 - min(max(i / y_end, 0.0), 1.0)), 2)

    def rect(x0: float, x1: float, y0: float, y1: float) -> Rect:
        return Rect(x=x(x0), y=y(y1), width=round(x(x1) - x(x0), 2), height=round(y(y0) - y(y1), 2))

    high = min(y_end, line.ic)
    q = c.nominal
    legend = [
        ("line", f"load line, {figure(line.ic, 'current')} at no VCE to {figure(line.vce, 'voltage')} at no current"),
        ("point", f"nominal Q-point, {figure(q.ic, 'current')} and {figure(q.vce, 'voltage')}"),
        ("box", f"over the box, {span(ic_low, ic_high, 'current')} and {span(vce_low, vce_high, 'voltage')}"),
    ]
    if aim_ic or aim_vce:
        limits = [_window_words(ends, kind) for ends, kind in ((aim_ic, "current"), (aim_vce, "voltage")) if ends]
        legend.append(("window", f"window, {' and '.join(limits)}"))
    room = vce_low - line.vce_sat
    to_cutoff = percent(ic_low / q.ic) if q.ic > 0.0 else "0 %"
    saturates = "reached within the box" if room <= 0.0 else f"the least VCE keeps {figure(room, 'voltage')} from it"
    legend.append(("saturation", f"saturation below {format_quantity(line.vce_sat, 'voltage')}: {saturates}"))
    legend.append(("cutoff", f"cut-off on the VCE axis: the least IC is {to_cutoff} of the nominal one"))
    return Picture(
        width=WIDTH,
        height=HEIGHT,
        plot=plot,
        x_ticks=[Tick(at=x(v), text=text) for v, text in _ticks(x_end, "voltage")],
        y_ticks=[Tick(at=y(i), text=text) for i, text in _ticks(y_end, "current")],
        line=(x(line.vce * (1.0 - high / line.ic)), y(high), x(line.vce), y(0.0)),
        box=rect(vce_low, vce_high, ic_low, ic_high),
        window=rect(*(aim_vce or (0.0, x_end)), *(aim_ic or (0.0, y_end))) if aim_ic or aim_vce else None,
        q_point=(x(q.vce), y(q.ic)),
        saturation=x(line.vce_sat),
        legend=legend,
        summary=f"Load line of {name} with its Q-point at {figure(q.ic, 'current')} and {figure(q.vce, 'voltage')}",
    )


def _ends(
    candidates: Sequence[Candidate], aim_ic: tuple[float, float] | None, aim_vce: tuple[float, float] | None
) -> tuple[float, float]:
    """Ends of both axes, the same for all candidates, so that two of them can be compared by eye [V, A]."""
    known = [(c, c.load_line) for c in candidates if c.load_line is not None]
    volts = max(max(line.vce, c.worst.vce[1]) for c, line in known)
    amps = max(max(line.ic, c.worst.ic[1]) for c, line in known)
    # A line that is steep against the Q-point would leave it on the floor.
    amps = min(amps, STEEP * max(c.worst.ic[1] for c, _ in known))
    return ROOM * max(volts, _closed(aim_vce)), ROOM * max(amps, _closed(aim_ic))


def _closed(ends: tuple[float, float] | None) -> float:
    """The end of a window that an axis has to reach."""
    return 0.0 if ends is None else ends[0] if ends[1] == inf else ends[1]


def _window(target: Sequence[float | None] | None) -> tuple[float, float] | None:
    """Both ends of a window, 0 and infinity where it is open; None where there is none."""
    if not target or (target[0] is None and target[-1] is None) or target[0] == target[-1]:
        return None
    low = 0.0 if target[0] is None else max(float(target[0]), 0.0)
    return low, inf if target[-1] is None else float(target[-1])


def _window_words(ends: tuple[float, float], kind: str) -> str:
    """A window in words."""
    low, high = ends
    if high == inf:
        return f"{format_quantity(low, kind)} or more"
    return f"{format_quantity(high, kind)} or less" if low == 0.0 else span(low, high, kind)


def _ticks(end: float, kind: str) -> list[tuple[float, str]]:
    """Round numbers from 0 to an end, at most MOST_TICKS steps."""
    raw = end / MOST_TICKS
    decade = 10.0 ** floor(log10(raw))
    step = next(m * decade for m in (1.0, 2.0, 2.5, 5.0, 10.0) if m * decade >= raw * (1.0 - 1e-9))
    return [(k * step, format_quantity(k * step, kind)) for k in range(int(end / step * (1.0 + 1e-9)) + 1)]
