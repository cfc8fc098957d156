"""The answer for a board as frozen values, and their plain-data form."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from synth.answer import Candidate
from synth.boards.bom import Line, Merge
from synth.boards.compare import Change
from synth.boards.file import Board
from synth.boards.model import Bound

if TYPE_CHECKING:
    import pandas


@dataclass(frozen=True, kw_only=True)
class StageResult:
    """One stage of the answer.

    Parameters
    ----------
    name : str
        Its name.
    count : int
        How often it is built [-].
    designators : tuple of mapping of str to str
        Role to number, one mapping for each copy; roles that are no resistor of the board have none.
    candidate : Candidate
        What was chosen, judged over the whole box.
    drift, best, allowed : float
        Drift of the choice as it was counted, the stage's own best, and the most it may spend [-].
    found, kept : int
        Candidates within the allowance, and those that can help the board [-].
    reached : float or None
        Drift at which the list of candidates had to end, None where it holds the whole allowance [-].
    """

    name: str
    count: int
    designators: tuple[Mapping[str, str], ...]
    candidate: Candidate
    drift: float
    best: float
    allowed: float
    found: int
    kept: int
    reached: float | None


@dataclass(frozen=True, kw_only=True)
class BoardSearch:
    """What was proved, and how much of it there was; `seconds` spent [s]."""

    status: str
    complete: bool
    objectives: tuple[Bound, ...]
    combinations: int
    evaluated: int
    candidates: int
    seconds: float


@dataclass(frozen=True, kw_only=True)
class BoardAnswer:
    """Everything that `board` found out.

    Parameters
    ----------
    version, command, name : str
        Version of the program; the command that repeats the answer; name of the board.
    assumed : tuple of (str, str)
        Key and text of what was not given.
    search : BoardSearch
        What was proved.
    stages, bom, merges : tuple
        Results; empty when there is none.
    infeasible : tuple of str
        Why there is none, a sentence each.
    changes : tuple of Change or None
        What differs from an earlier BOM; None where there was nothing to compare with.
    request : Board
        What was asked.
    """

    version: str
    command: str
    name: str
    assumed: tuple[tuple[str, str], ...]
    search: BoardSearch
    stages: tuple[StageResult, ...] = ()
    bom: tuple[Line, ...] = ()
    merges: tuple[Merge, ...] = ()
    infeasible: tuple[str, ...] = ()
    changes: tuple[Change, ...] | None = None
    request: Board

    @property
    def passed(self) -> bool:
        """Whether there is a BOM."""
        return bool(self.stages)

    @property
    def cost(self) -> float | None:
        """Cost of all orders [currency of the list], None where nothing is priced."""
        costs = [line.cost for line in self.bom if line.cost is not None]
        return sum(costs) if costs else None

    @property
    def frame(self) -> pandas.DataFrame:
        """The BOM as a pandas table, one row a line: the fields of `Line`."""
        import pandas

        return pandas.DataFrame([_line(line) for line in self.bom])

    def as_dict(self) -> dict[str, Any]:
        """The answer as plain data in the layout of the JSON contract.

        Returns
        -------
        dict
            SI numbers; numbers that are not finite become None.
        """
        return {
            "schema": "restpoint/board/1",
            "version": self.version,
            "command": self.command,
            "name": self.name,
            "assumed": [{"key": key, "value": text, "why": "not given"} for key, text in self.assumed],
            "search": _plain({**vars(self.search), "objectives": [vars(o) | {"gap": o.gap} for o in self.search.objectives]}),
            "stages": [_stage(stage) for stage in self.stages],
            "bom": [_line(line) for line in self.bom],
            "merges": [_plain({**vars(m), "shares": [vars(share) for share in m.shares]}) for m in self.merges],
            "changes": None if self.changes is None else [_plain(vars(change)) for change in self.changes],
            "infeasible": list(self.infeasible) if self.infeasible else None,
        }

    def to_json(self) -> str:
        """The answer as JSON text.

        Returns
        -------
        str
            Indented, one trailing newline; numbers with the digits that reproduce them.
        """
        return json.dumps(self.as_dict(), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def _stage(result: StageResult) -> dict[str, Any]:
    c = result.candidate
    row = {
        "name": result.name,
        "count": result.count,
        "network": c.network,
        "resistors": dict(c.resistors),
        "designators": [dict(numbers) for numbers in result.designators],
        "worst": {q: list(ends) for q, ends in c.worst.items()},
        "drift": result.drift,
        "best": result.best,
        "allowed": result.allowed,
        "verdict": c.verdict,
        "limits": [vars(v) for v in c.limits],
        "found": result.found,
        "kept": result.kept,
        "reached": result.reached,
    }
    return {name: _plain(value) for name, value in row.items()}


def _line(line: Line) -> dict[str, Any]:
    return {name: _plain(value) for name, value in vars(line).items()}


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {str(k): _plain(v) for k, v in value.items()}
    if isinstance(value, tuple | list):
        return [_plain(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
