"""Load line and budget drawn in characters, for a terminal."""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Sequence
from itertools import groupby
from typing import NamedTuple

from synth.answer import Answer, Candidate
from synth.explain import cause_words, percent
from synth.present.terminal import figure, resistors, span

WIDEST = 100
NARROWEST = 40
ROWS = 13
LONGEST_BAR = 48
LEAST = 0.0005
"""Share of a drift below which a cause is not drawn [-]."""


class _Signs(NamedTuple):
    """Characters, and the same for a terminal that has only ASCII."""

    line: str
    point: str
    across: str
    down: str
    corners: str
    saturated: str
    axis: str
    floor: str
    bar: str
    back: str


FINE = _Signs("·", "◆", "─", "│", "┌┐└┘", "░", "│", "─", "█", "▒")
PLAIN = _Signs(".", "Q", "-", "|", "++++", ":", "|", "-", "#", "=")
COLOURS = {"point": "1;31", "box": "34", "bar": "34", "back": "33", "head": "1"}
"""Of ANSI terminals: bold red, blue, yellow, bold; each only repeats what the characters say."""


def draw(answer: Answer, candidate: Candidate, *, columns: int = 100, colour: bool = False, ascii_only: bool = False) -> str:
    """Load line with Q-point and box, and the budget of every drift as bars.

    Parameters
    ----------
    answer : Answer
        Where the candidate comes from.
    candidate : Candidate
        What is drawn.
    columns : int
        Width of the terminal in characters; what is drawn keeps between 40 and 100 [-].
    colour : bool
        Whether to colour it by escape sequences.
    ascii_only : bool
        Whether the terminal shows nothing but ASCII.

    Returns
    -------
    str
        Lines, a trailing newline.
    """
    width = max(min(columns, WIDEST), NARROWEST)
    signs = PLAIN if ascii_only else FINE
    paint = _painted if colour else _bare
    blocks = [_load_line(candidate, signs, width, paint)] if candidate.load_line is not None else []
    for quantity, shares in candidate.budget.items():
        drift = candidate.drift.of().get(quantity)
        rows = [(cause_words(s.cause), s.share) for s in shares if abs(s.share) >= LEAST]
        if rows and drift is not None:
            head = paint("head", f"{quantity.upper()} drifts {percent(drift)}, by cause")
            blocks.append("\n".join([head, *_bars(rows, signs, width, paint)]))
    text = "\n\n".join(blocks) + "\n"
    # A pipe without Unicode shows no ohm sign and no micro sign either.
    return text.replace("µ", "u").encode("ascii", "replace").decode() if ascii_only else text


def _painted(what: str, text: str) -> str:
    return f"\x1b[{COLOURS[what]}m{text}\x1b[0m"


def _bare(what: str, text: str) -> str:
    return text


def _load_line(c: Candidate, signs: _Signs, width: int, paint: Callable[[str, str], str]) -> str:
    line, (low_v, high_v), (low_i, high_i) = c.load_line, c.worst.vce, c.worst.ic
    assert line is not None
    right = 1.02 * max(line.vce, high_v)
    top = 1.05 * max(min(line.ic, 4.0 * high_i), high_i)
    labels = [figure(top, "current"), "0"]
    margin = max(map(len, labels)) + 1
    wide = width - margin - 2

    def column(v: float) -> int:
        return min(max(round(v / right * (wide - 1)), 0), wide - 1)

    def row(i: float) -> int:
        return min(max(round((1.0 - i / top) * (ROWS - 1)), 0), ROWS - 1)

    field = [[" "] * wide for _ in range(ROWS)]
    tone = [[""] * wide for _ in range(ROWS)]
    for x in range(column(line.vce_sat) + 1 if line.vce_sat > 0.0 else 0):
        for y in range(ROWS):
            field[y][x] = signs.saturated
    for x in range(wide):
        current = line.ic * (1.0 - x / (wide - 1) * right / line.vce)
        if 0.0 <= current <= top:
            field[row(current)][x] = signs.line
    left, end, upper, lower = column(low_v), column(high_v), row(high_i), row(low_i)
    for x in range(left, end + 1):
        for y, pair in ((upper, signs.corners[:2]), (lower, signs.corners[2:])):
            field[y][x] = pair[0] if x == left else pair[1] if x == end else signs.across
            tone[y][x] = "box"
    for y in range(upper + 1, lower):
        for x in (left, end):
            field[y][x], tone[y][x] = signs.down, "box"
    y, x = row(c.nominal.ic), column(c.nominal.vce)
    field[y][x], tone[y][x] = signs.point, "point"
    lines = []
    for y in range(ROWS):
        label = labels[0] if y == 0 else labels[1] if y == ROWS - 1 else ""
        runs = groupby(zip(tone[y], field[y], strict=True), key=lambda cell: cell[0])
        drawn = [(how, "".join(sign for _, sign in run)) for how, run in runs]
        cells = (paint(how, text) if how else text for how, text in drawn)
        lines.append(f"{label.rjust(margin)} {signs.axis}{''.join(cells).rstrip()}")
    end_label = figure(right, "voltage")
    lines.append(f"{' ' * margin} {signs.corners[2]}{signs.floor * wide}")
    lines.append(" " * (margin + 2) + "0" + end_label.rjust(wide - 1))
    words = [
        f"{signs.point} Q-point {figure(c.nominal.ic, 'current')}, {figure(c.nominal.vce, 'voltage')}",
        f"{signs.corners[:2]} over the box {span(low_i, high_i, 'current')}, {span(low_v, high_v, 'voltage')}",
        f"{signs.line} load line",
        f"{signs.saturated} saturated, VCE below {figure(line.vce_sat, 'voltage')}",
    ]
    head = [paint("head", part) for part in _packed(f"IC against VCE: {c.network}, {resistors(c)}".split(" "), " ", width)]
    return "\n".join([*head, *lines, *(f"  {part}" for part in _packed(words, "   ", width - 2))])


def _packed(parts: Sequence[str], between: str, width: int) -> list[str]:
    """Parts one after another, a new line where the next one does not fit; what is longer than a line is broken."""
    lines = [""]
    for part in [piece for whole in parts for piece in textwrap.wrap(whole, width)]:
        longer = f"{lines[-1]}{between}{part}" if lines[-1] else part
        if len(longer) > width and lines[-1]:
            lines.append(part)
        else:
            lines[-1] = longer
    return lines


def _bars(rows: Sequence[tuple[str, float]], signs: _Signs, width: int, paint: Callable[[str, str], str]) -> list[str]:
    """A line a cause: its name, its share, a bar as long as that; a share that lowers the drift is drawn in another sign."""
    names, texts = max(len(name) for name, _ in rows), [percent(share) for _, share in rows]
    shares = max(map(len, texts))
    room = min(max(width - 2 - names - 2 - shares - 2, 5), LONGEST_BAR)
    largest = max(abs(share) for _, share in rows)
    lines = []
    for (name, share), text in zip(rows, texts, strict=True):
        length = max(round(abs(share) / largest * room), 1)
        bar = paint("bar", signs.bar * length) if share >= 0.0 else paint("back", signs.back * length)
        lines.append(f"  {name.ljust(names)}  {text.rjust(shares)}  {bar}")
    return lines
