"""What the pages are put together from: tables with cells that sort, and bars."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

NO_BREAK = "\u00a0"


@dataclass(frozen=True, kw_only=True)
class Bar:
    """A share as a bar beside its number: where it starts and how long it is, in per cent of the column [-]."""

    start: float
    length: float
    zero: float
    over: bool = False


@dataclass(frozen=True, kw_only=True)
class Cell:
    """One cell: its text, what it sorts by [-], a bar, and how it is meant (``pass``, ``fail`` or nothing)."""

    text: str
    sort: float | str | None = None
    bar: Bar | None = None
    mark: str = ""
    number: bool = False


@dataclass(frozen=True, kw_only=True)
class Table:
    """A table with a title; the first cell of a row names the row."""

    title: str
    head: Sequence[str]
    rows: Sequence[Sequence[Cell]]
    note: str = ""


@dataclass(frozen=True, kw_only=True)
class Note:
    """A titled section of paragraphs, named facts and tables below the candidates."""

    key: str
    title: str
    lines: Sequence[str] = ()
    facts: Sequence[tuple[str, str]] = ()
    tables: Sequence[Table] = field(default_factory=tuple)


@dataclass(frozen=True, kw_only=True)
class Part:
    """A section of the worst-case report: paragraphs, tables, points of a list."""

    title: str
    lines: Sequence[str]
    tables: Sequence[Table]
    points: Sequence[str]


@dataclass(frozen=True, kw_only=True)
class Review:
    """The worst-case report: its verdict in a sentence, and its sections."""

    verdict: str
    parts: Sequence[Part]


def words(text: str, sort: float | str | None = None, mark: str = "") -> Cell:
    """A cell of words.

    Parameters
    ----------
    text : str
        What it says.
    sort : float or str, optional
        What it sorts by [-], the text when not given.
    mark : str
        ``pass``, ``fail`` or nothing.

    Returns
    -------
    Cell
        Aligned to the left.
    """
    return Cell(text=text, sort=sort, mark=mark)


def number(text: str, sort: float | None = None, bar: Bar | None = None, mark: str = "") -> Cell:
    """A cell of a number.

    Parameters
    ----------
    text : str
        The number with its unit.
    sort : float, optional
        What it sorts by [-].
    bar : Bar, optional
        Drawn beside it.
    mark : str
        ``pass``, ``fail`` or nothing.

    Returns
    -------
    Cell
        Aligned to the right.
    """
    # A number stays with its unit; a range may break before its "to".
    kept = text.replace(" ", NO_BREAK).replace(f"{NO_BREAK}to{NO_BREAK}", f" to{NO_BREAK}")
    return Cell(text=kept, sort=sort, bar=bar, mark=mark, number=True)


def bars(shares: Sequence[float]) -> list[Bar]:
    """Bars of shares on one scale, with a common zero; negative ones reach to the left.

    Parameters
    ----------
    shares : sequence of float
        Any [-].

    Returns
    -------
    list of Bar
        One each.
    """
    low, high = min(0.0, *shares), max(0.0, *shares)
    scale = 100.0 / (high - low) if high > low else 0.0
    zero = -low * scale
    return [Bar(start=zero + min(share, 0.0) * scale, length=abs(share) * scale, zero=zero) for share in shares]


def used(share: float) -> Bar:
    """A bar of what is used of an allowance, cut at the whole.

    Parameters
    ----------
    share : float
        0 or more; 1 is all that is allowed [-].

    Returns
    -------
    Bar
        Marked where more than the whole is used.
    """
    return Bar(start=0.0, length=100.0 * min(share, 1.0), zero=0.0, over=share > 1.0)
