"""Board files: TOML to a frozen, validated board; the numbers that its resistors carry."""

from __future__ import annotations

import os
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from synth.boards.purchase import Part, distinct
from synth.networks import NETWORKS
from synth.preferred import stock_rows
from synth.quantities import format_exact, format_resistance, parse
from synth.stage import Stage, StageError
from synth.stage_file import load, texts
from synth.stage_keys import nearest

ALLOWANCE = 0.02
"""Drift beyond its own best that a stage may spend where the board says nothing [-]."""
TOLERANCE, TCR = 0.01, 100e-6
"""Band of a stock row that states none [-, 1/K]."""
LARGEST_COUNT = 10_000
"""Largest number of copies of a stage [-]."""

BOARD_KEYS = {
    "name": "name for reports",
    "stock": "stock list that every resistor is taken from (CSV: value, tolerance, tcr, quantity, style, price, part, minimum)",
    "on_board": "what other circuits of the board use already, as 10K, 10K 1 % or a part number: no new line item",
    "most_new": "largest number of new line items",
    "allowance": "drift beyond its own best that each stage may spend, in points of per cent",
    "tolerance": "tolerance of stock rows that state none",
    "tcr": "temperature coefficient of stock rows that state none",
    "stage": "one table for each stage",
}
STAGE_KEYS = {
    "file": "stage file; keys beside it override it",
    "count": "how often the stage is built",
    "designators": "numbers of its resistors, as R101-R108 or R3, R11",
    "allowance": "drift beyond its own best that this stage may spend",
    "outside": "roles that are no resistor of this board, as the sensor a stage feeds",
}


@dataclass(frozen=True, kw_only=True)
class BoardStage:
    """One stage of a board.

    Parameters
    ----------
    stage : Stage
        The request.
    count : int
        How often it is built [-].
    designators : tuple of str
        Numbers its resistors may carry, in order; empty where the board gives them.
    allowance : float
        Drift beyond its own best that it may spend [-].
    outside : frozenset of str
        Roles that are no resistor of this board.

    Raises
    ------
    StageError
        If there are too few numbers, the count is none, or a role is unknown.
    """

    stage: Stage
    count: int = 1
    designators: tuple[str, ...] = ()
    allowance: float = ALLOWANCE
    outside: frozenset[str] = frozenset()

    def __post_init__(self) -> None:
        name = self.stage.name
        whole = isinstance(self.count, int) and not isinstance(self.count, bool)
        if not whole or not 1 <= self.count <= LARGEST_COUNT:
            accepted = f"a whole number from 1 to {LARGEST_COUNT}"
            raise StageError(f"stage {name!r}, count", self.count, "which is no number of copies", accepted, ("1",))
        if not 0.0 <= self.allowance < float("inf"):
            raise StageError(f"stage {name!r}, allowance", self.allowance, "which is no drift", "0 % or more", ("2 %",))
        known = dict.fromkeys(role for network in self.stage.networks for role in NETWORKS[network].role_names)
        for role in self.outside:
            if role not in known:
                reason = f"which is no role of {' or '.join(self.stage.networks)}"
                near = nearest(role, known)
                raise StageError(f"stage {name!r}, outside", role, reason, f"one of {', '.join(known)}", near)
        if self.designators and len(self.designators) < self.count * self.most_resistors:
            reason = f"which holds {len(self.designators)} numbers"
            accepted = f"{self.count * self.most_resistors}, for {self.count} copies of up to {self.most_resistors} resistors"
            raise StageError(f"stage {name!r}, designators", _shortened(self.designators), reason, accepted)

    @property
    def most_resistors(self) -> int:
        """Largest number of resistors of one copy [-]."""
        sets = [roles for network in self.stage.networks for roles in self.stage.roles_used(network)]
        return max(len([role for role in roles if role not in self.outside]) for roles in sets)


@dataclass(frozen=True, kw_only=True)
class Board:
    """Stages that share one BOM.

    Parameters
    ----------
    name : str
        Name for reports.
    stages : tuple of BoardStage
        At least one.
    parts : tuple of Part or None
        What every resistor is taken from; None where each stage says so itself.
    stock : str or None
        The stock list as it was named.
    on_board : tuple of float
        Values on the board already, where there is no stock list [ohm].
    most_new : int or None
        Largest number of new line items [-].
    assumed : tuple of (str, str)
        Key and text of what was not given.

    Raises
    ------
    StageError
        If there is no stage or a number is given twice.
    """

    name: str = "board"
    stages: tuple[BoardStage, ...]
    parts: tuple[Part, ...] | None = None
    stock: str | None = None
    on_board: tuple[float, ...] = ()
    most_new: int | None = None
    assumed: tuple[tuple[str, str], ...] = ()

    def __post_init__(self) -> None:
        if not self.stages:
            raise StageError("stage", None, "which is no board", "at least one stage, as a table [[stage]]")
        seen: dict[str, str] = {}
        for entry in self.stages:
            for number in entry.designators:
                if number in seen:
                    reason = f"which {seen[number]!r} has already"
                    raise StageError(f"stage {entry.stage.name!r}, designators", number, reason, "each number once")
                seen[number] = entry.stage.name
        if self.most_new is not None and (isinstance(self.most_new, bool) or self.most_new < 0):
            raise StageError("most_new", self.most_new, "which is no number of lines", "a whole number of 0 or more")

    @classmethod
    def read(cls, path: str | os.PathLike[str]) -> Board:
        """Board of a file.

        Parameters
        ----------
        path : path
            Board file in TOML, UTF-8, at most 1 MB; paths in it are relative to its folder.

        Returns
        -------
        Board
            The board; without a name of its own it has that of the file.

        Raises
        ------
        RestpointError
            If the file cannot be read, or what it says is wrong.
        """
        file = Path(path)
        content = load(file)
        for key in content:
            if key not in BOARD_KEYS:
                near = nearest(key, BOARD_KEYS)
                raise StageError("board", key, "which is no key of a board", f"one of {', '.join(BOARD_KEYS)}", near)
        allowance = _figure(content, "allowance", "ratio")
        tables = content.get("stage", [])
        if not isinstance(tables, list) or not all(isinstance(table, dict) for table in tables):
            raise StageError("stage", str(tables)[:40], "which is no list of tables", "[[stage]] and its keys below")
        stages = [_stage(number, table, file.parent, allowance) for number, table in enumerate(tables, 1)]
        return cls.of(
            stages,
            name=str(content.get("name", file.stem)),
            stock=None if "stock" not in content else file.parent / _text(content, "stock"),
            on_board=_list(content, "on_board"),
            most_new=_whole(content, "most_new"),
            tolerance=_figure(content, "tolerance", "ratio"),
            tcr=_figure(content, "tcr", "temperature_coefficient"),
            assumed=() if allowance is not None else (("allowance", format_exact(ALLOWANCE, "ratio")),),
        )

    @classmethod
    def of(
        cls,
        stages: Iterable[Stage | BoardStage],
        *,
        name: str = "board",
        stock: str | os.PathLike[str] | None = None,
        on_board: Sequence[str | float] = (),
        most_new: int | None = None,
        tolerance: float | None = None,
        tcr: float | None = None,
        allowance: float = ALLOWANCE,
        assumed: tuple[tuple[str, str], ...] = (),
    ) -> Board:
        """Board of stages.

        Parameters
        ----------
        stages : iterable of Stage or BoardStage
            The stages; a bare one is built once.
        name : str
            Name for reports.
        stock : path, optional
            Stock list that every resistor is taken from.
        on_board : sequence of str or float
            What is on the board already: values [ohm], with a tolerance where the stock list has the value several times,
            or part numbers of the list.
        most_new : int, optional
            Largest number of new line items [-].
        tolerance, tcr : float, optional
            Tolerance [-] and temperature coefficient [1/K] of stock rows that state none.
        allowance : float
            Drift beyond its own best that a bare stage may spend [-].
        assumed : tuple of (str, str)
            Key and text of what was not given.

        Returns
        -------
        Board
            The board.

        Raises
        ------
        RestpointError
            If the stock list cannot be read, or the parts of the board contradict each other.
        """
        entries = tuple(s if isinstance(s, BoardStage) else BoardStage(stage=s, allowance=allowance) for s in stages)
        parts: tuple[Part, ...] | None = None
        values: tuple[float, ...] = ()
        if stock is not None:
            bands = {"tolerance": TOLERANCE if tolerance is None else tolerance, "tcr": TCR if tcr is None else tcr}
            made = (Part.of_row(row) for row in stock_rows(Path(stock), **bands))
            parts = distinct(made)
            there = {_on_board(item, parts) for item in on_board}
            parts = tuple(Part(**{**vars(part), "new": part not in there}) for part in parts)
            assumed += (("tolerance", format_exact(TOLERANCE, "ratio")),) if tolerance is None else ()
            assumed += (("tcr", format_exact(TCR, "temperature_coefficient")),) if tcr is None else ()
        else:
            values = tuple(parse(item, "resistance", field="on_board") for item in on_board)
        return cls(
            name=name,
            stages=entries,
            parts=parts,
            stock=None if stock is None else Path(stock).name,
            on_board=values,
            most_new=most_new,
            assumed=assumed,
        )

    def numbers(self) -> tuple[tuple[str, ...], ...]:
        """Numbers that the resistors of each stage may carry.

        Returns
        -------
        tuple of tuple of str
            Those given, else the next ones from R1 on that no stage has.
        """
        given = {number for entry in self.stages for number in entry.designators}
        free = (f"R{k}" for k in range(1, 1 + sum(e.count * e.most_resistors for e in self.stages) + len(given)))
        rest = iter([number for number in free if number not in given])
        return tuple(
            entry.designators or tuple(next(rest) for _ in range(entry.count * entry.most_resistors)) for entry in self.stages
        )


def _on_board(item: str | float, parts: Sequence[Part]) -> Part:
    """The part of a stock list that a text names: by its number, or by value and, if need be, tolerance."""
    named = [part for part in parts if part.number == item]
    if not named:
        first, _, rest = str(item).strip().partition(" ") if isinstance(item, str) else (item, "", "")
        value = parse(first, "resistance", field="on_board")
        tolerance = parse(rest, "ratio", field="on_board") if rest else None
        named = [part for part in parts if part.value == value and tolerance in (None, part.tolerance)]
        if not named:
            known = sorted({part.value for part in parts}, key=lambda v: abs(v - value))[:2]
            near = [format_resistance(v) for v in known]
            raise StageError("on_board", item, "which no row of the stock list has", "a value of the list", near)
    if len(named) > 1:
        near = [part.number or part.text for part in named[:3]]
        reason = f"which {len(named)} rows of the stock list have"
        raise StageError("on_board", item, reason, "the part number of one, or its value with its tolerance", near)
    return named[0]


def _stage(number: int, table: Mapping[str, Any], folder: Path, allowance: float | None) -> BoardStage:
    own = {key: value for key, value in table.items() if key in STAGE_KEYS}
    rest = {key: value for key, value in table.items() if key not in STAGE_KEYS}
    try:
        given = texts(rest)
    except StageError as error:
        raise StageError(f"stage {number}", error.read, error.reason, error.accepted, error.nearest) from None
    if "file" in own:
        stage = Stage.read(folder / _text(own, "file"))
        stage = stage.with_keys(given) if given else stage
    else:
        stage = Stage.from_keys({"name": f"stage {number}"} | given, folder)
    spent = _figure(own, "allowance", "ratio")
    if spent is None:
        spent = ALLOWANCE if allowance is None else allowance
    return BoardStage(
        stage=stage,
        count=_whole(own, "count") if "count" in own else 1,  # type: ignore[arg-type]
        designators=designators(_list(own, "designators")),
        allowance=spent,
        outside=frozenset(_list(own, "outside")),
    )


def designators(items: Iterable[str]) -> tuple[str, ...]:
    """Numbers of resistors, ranges written out.

    Parameters
    ----------
    items : iterable of str
        Such as ``R101-R104`` or ``R3``.

    Returns
    -------
    tuple of str
        In the order given.

    Raises
    ------
    StageError
        If one is no number of a part, or a range does not rise.
    """
    found: list[str] = []
    for item in items:
        first, dash, last = (piece.strip() for piece in item.partition("-"))
        letters, low = _split(first)
        others, high = _split(last) if dash else (letters, low)
        if not letters or low is None or high is None or letters != others or high < low or high - low >= LARGEST_COUNT:
            raise StageError("designators", item, "which is no number of a part", "R7, or a range that rises", ("R101-R108",))
        found += [f"{letters}{k}" for k in range(low, high + 1)]
    return tuple(found)


def _split(text: str) -> tuple[str, int | None]:
    letters = text.rstrip("0123456789")
    digits = text[len(letters) :]
    return (letters, int(digits)) if letters.isalpha() and digits and len(digits) < 9 else ("", None)


def _shortened(numbers: Sequence[str]) -> str:
    return numbers[0] if len(numbers) == 1 else f"{numbers[0]} to {numbers[-1]}"


def _text(content: Mapping[str, Any], key: str) -> str:
    value = content[key]
    if not isinstance(value, str):
        raise StageError(key, value, "which is no text", f"a text in quotes: {(BOARD_KEYS | STAGE_KEYS)[key]}")
    return value


def _figure(content: Mapping[str, Any], key: str, kind: str) -> float | None:
    return parse(content[key], kind, field=key) if key in content else None


def _whole(content: Mapping[str, Any], key: str) -> int | None:
    value = content.get(key)
    if isinstance(value, str) and value.isascii() and value.isdigit() and len(value) < 9:
        return int(value)
    if value is not None and (isinstance(value, bool) or not isinstance(value, int)):
        raise StageError(key, value, "which is no whole number", "a whole number, such as 3")
    return value


def _list(content: Mapping[str, Any], key: str) -> tuple[str, ...]:
    value = content.get(key, ())
    items = value.split(",") if isinstance(value, str) else value
    if not isinstance(items, list | tuple) or not all(isinstance(item, str) for item in items):
        raise StageError(key, value, "which is no list of texts", f"a list of texts: {(BOARD_KEYS | STAGE_KEYS)[key]}")
    return tuple(item.strip() for item in items)
