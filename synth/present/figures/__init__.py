"""Figures of a candidate, by matplotlib: functions that take and return Axes, and all of them as files.

No figure here is one of pyplot's: nothing opens a window, and the settings of matplotlib stay as they were.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from typing import TYPE_CHECKING

from synth.answer import Answer, Candidate
from synth.present.circuit import to_png, to_svg
from synth.present.figures.bars import budget, has_ratings, stress
from synth.present.figures.load_line import load_line
from synth.present.figures.plots import Offer, frontier, histogram, offers_of, over
from synth.present.figures.style import saved, sheet, styled, width_of
from synth.present.terminal import resistors
from synth.stage import Stage
from synth.statistics import Lot
from synth.views import Units, box_of, curve, units

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = [
    "NAMES", "Offer", "budget", "figures", "files", "frontier", "has_ratings", "histogram", "load_line", "offers_of",
    "over", "saved", "sheet", "stress", "styled",
]  # fmt: skip

NAMES = ("circuit", "load_line", "budget", "curves", "yield", "stress", "frontier")
"""Every figure that there may be; one that has nothing to show is left out."""
MOST_UNITS = 65536
"""Units in a picture at most [-]: more would not change it."""
TITLE_SIZE = 9.5
ROW = 0.24
"""Height of a bar with its distance to the next [inch]."""


def figures(
    stage: Stage, answer: Answer, rank: int = 1, lot: Lot | None = None, progress: Callable[[str], None] | None = None
) -> Iterator[tuple[str, Figure]]:
    """Every figure of a candidate that has something to show, but for the circuit.

    Parameters
    ----------
    stage : Stage
        The request.
    answer : Answer
        Of `find` or `check` on it.
    rank : int
        Which candidate; 1 is the best [-].
    lot : Lot, optional
        The units of cloud and histograms; those of the stage, 65 536 at most, when not given.
    progress : callable, optional
        ``progress(name)`` is told of every figure before it is drawn.

    Returns
    -------
    iterator of (str, Figure)
        Name and figure, one after another.
    """
    candidate = answer.candidate(rank)
    title = f"{stage.name}: {candidate.network}, {resistors(candidate)}"
    built = units(stage, candidate, tuple(candidate.worst), lot or replace(stage.lot, units=min(stage.lot.units, MOST_UNITS)))
    makers: dict[str, Callable[[], Figure | None]] = {
        "load_line": lambda: _load_line(answer, candidate, built),
        "budget": lambda: _budget(candidate),
        "curves": lambda: _curves(stage, answer, candidate),
        "yield": lambda: _yield(answer, candidate, built),
        "stress": lambda: _stress(candidate),
        "frontier": lambda: _frontier(answer, candidate),
    }
    for name, make in makers.items():
        if progress is not None:
            progress(name)
        with styled():
            figure = make()
            if figure is not None:
                figure.suptitle(_fitted(title, figure), x=0.01, ha="left", fontweight="bold", fontsize=TITLE_SIZE)
        if figure is not None:
            yield name, figure


def files(
    stage: Stage,
    answer: Answer,
    rank: int = 1,
    *,
    zigzag: bool = False,
    lot: Lot | None = None,
    progress: Callable[[str], None] | None = None,
) -> dict[str, bytes]:
    """Every figure of a candidate as SVG and PNG, the circuit among them.

    Parameters
    ----------
    stage : Stage
        The request.
    answer : Answer
        Of `find` or `check` on it.
    rank : int
        Which candidate; 1 is the best [-].
    zigzag : bool
        Zigzag lines for resistors in place of rectangles.
    lot, progress
        As in `figures`.

    Returns
    -------
    dict of str to bytes
        File name to content, the same bytes for the same candidate.
    """
    candidate = answer.candidate(rank)
    found = {
        "circuit.svg": to_svg(answer, candidate, zigzag=zigzag).encode("utf-8"),
        "circuit.png": to_png(answer, candidate, zigzag=zigzag),
    }
    for name, figure in figures(stage, answer, rank, lot, progress):
        found[f"{name}.svg"] = saved(figure, "svg")
        found[f"{name}.png"] = saved(figure, "png")
    return found


def _fitted(title: str, figure: Figure) -> str:
    """A title broken into lines that fit."""
    room = float(figure.get_size_inches()[0]) * 72.0 * 0.96
    lines = [""]
    for word in title.split(" "):
        longer = f"{lines[-1]} {word}".strip()
        # Bold letters are an eighth wider.
        if 1.125 * width_of(longer, TITLE_SIZE) > room and lines[-1]:
            lines.append(word)
        else:
            lines[-1] = longer
    return "\n".join(lines)


def _load_line(answer: Answer, candidate: Candidate, built: Units) -> Figure | None:
    if candidate.load_line is None:
        return None
    figure = sheet(height=4.6)
    load_line(figure.add_subplot(), answer, candidate, built)
    return figure


def _budget(candidate: Candidate) -> Figure | None:
    drawn = [q for q in candidate.budget if q in candidate.drift.of() and candidate.budget[q]]
    if not drawn:
        return None
    rows = [len(candidate.budget[q]) for q in drawn]
    figure = sheet(height=1.0 + sum(0.75 + ROW * n for n in rows))
    panels = figure.subplots(len(drawn), 1, height_ratios=[n + 0.2 for n in rows], squeeze=False)[:, 0]
    for ax, quantity in zip(panels, drawn, strict=True):
        budget(ax, candidate, quantity)
    return figure


def _curves(stage: Stage, answer: Answer, candidate: Candidate) -> Figure | None:
    box, quantities = box_of(stage, candidate), tuple(candidate.worst)
    active = candidate.regions == ("active",)
    every = [curve(box, axis, quantities, active) for axis in ("temperature", *box.rails, "hfe")]
    drawn = [found for found in every if found is not None]
    if not drawn:
        return None
    figure = sheet(width=max(1.0 + 2.3 * len(drawn), 4.8), height=1.0 + 1.9 * len(quantities))
    panels = figure.subplots(len(quantities), len(drawn), squeeze=False)
    for row, quantity in zip(panels, quantities, strict=True):
        for ax, found in zip(row, drawn, strict=True):
            over(ax, answer, found, quantity)
    named = {label: handle for ax in panels.flat for handle, label in zip(*ax.get_legend_handles_labels(), strict=True)}
    figure.legend(list(named.values()), list(named), loc="outside lower left", ncols=len(named))
    return figure


def _yield(answer: Answer, candidate: Candidate, built: Units) -> Figure | None:
    quantities = tuple(candidate.worst)
    figure = sheet(height=0.7 + 2.1 * len(quantities))
    for ax, quantity in zip(figure.subplots(len(quantities), 1, squeeze=False)[:, 0], quantities, strict=True):
        histogram(ax, answer, built, quantity)
    return figure


def _stress(candidate: Candidate) -> Figure | None:
    if not has_ratings(candidate):
        return None
    parts = 2 * sum(s.style is not None for s in candidate.stress.values())
    parts += 0 if candidate.transistor is None else len(candidate.transistor.allowed)
    figure = sheet(height=1.4 + ROW * parts)
    stress(figure.add_subplot(), candidate)
    return figure


def _frontier(answer: Answer, candidate: Candidate) -> Figure | None:
    axes = answer.frontier.axes if answer.frontier is not None else ()
    drawn = [(axis, offers_of(answer, candidate, axis)) for axis in axes]
    drawn = [(axis, offers) for axis, offers in drawn if offers]
    drawn = drawn or [("supply_current", offers_of(answer, candidate))]
    if len(drawn[0][1]) < 2:
        return None
    figure = sheet(height=0.6 + 3.4 * len(drawn))
    for ax, (axis, offers) in zip(figure.subplots(len(drawn), 1, squeeze=False)[:, 0], drawn, strict=True):
        frontier(ax, offers, axis)
    return figure
