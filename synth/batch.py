"""Many stages one by one: rows in, a table out; nothing computed twice, no row lost.

Rows are worked on in the order of the file, by any executor of `concurrent.futures`, a bounded number of them ahead, and come
out in the same order: memory does not grow with the number of rows. Each row carries a key, a digest of its request and of
the stock lists it names, by which a later run knows it again.
"""

from __future__ import annotations

import csv
import hashlib
import io
import json
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Mapping
from concurrent.futures import BrokenExecutor, Executor, Future
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from synth import __version__
from synth.box import Box, Meter
from synth.facts import loads
from synth.quantities import RestpointError, format_resistance
from synth.ranking import DIGITS
from synth.search import search
from synth.solve import find
from synth.spaces import Found, goal_of, spaces_of
from synth.stage import Stage, StageError
from synth.stage_file import load, texts
from synth.stage_keys import KEYS, NAMES, ROLES, nearest
from synth.stage_resolve import rival
from synth.stress import junction_limit

SIDES = (("min", -1), ("max", 1))
AHEAD = 64
"""Rows that are worked on or wait for their turn at a time."""

COLUMNS = (
    "line", "name", "status", "network", *ROLES, "drift", "ic_a", "ic_min_a", "ic_max_a", "vce_v", "vce_min_v", "vce_max_v",
    "bound", "reason", "key",
)  # fmt: skip
"""Columns of the table; SI numbers, resistors in the letter code of IEC 60062."""


@dataclass(frozen=True, kw_only=True)
class Request:
    """One row: its line in the file, its keys and texts, the folder of its paths; or why it cannot be read."""

    line: int
    keys: Mapping[str, str] = field(default_factory=dict)
    folder: str = "."
    fault: str = ""

    @property
    def key(self) -> str:
        """Digest of the request, of the stock lists that it names and of the version of the program."""
        digest = hashlib.sha256(json.dumps([__version__, self.fault, sorted(self.keys.items())]).encode())
        for path, text in self.keys.items():
            if KEYS[path].leaf == "stock":
                file = Path(self.folder) / text
                digest.update(file.read_bytes() if file.is_file() else b"")
        return digest.hexdigest()[:20]


Row = Mapping[str, object]
"""One row of the table: column to number or text."""


def requests(
    path: str | Path, common: Mapping[str, str] | None = None, fixed: Mapping[str, str] | None = None
) -> Iterator[Request]:
    """Rows of a file, one at a time.

    Parameters
    ----------
    path : str or Path
        CSV with a header row of keys of a stage, as ``supply.vcc`` or ``ic``, or TOML with a table ``[[stage]]`` for each.
    common : mapping of str to str, optional
        Keys that a row has where it says nothing itself.
    fixed : mapping of str to str, optional
        Keys that every row has, whatever it says.

    Returns
    -------
    iterator of Request
        In the order of the file; a row that cannot be read has its fault.

    Raises
    ------
    RestpointError
        If the file cannot be read or has a column that is no key.
    """
    file = Path(path)
    rows = _of_toml(file) if file.suffix.casefold() == ".toml" else _of_csv(file)
    for row in rows:
        keys = dict(common or {})
        for own in (row.keys, fixed or {}):
            for key in own:
                other = rival(key)
                if other is not None and other not in own:
                    keys.pop(other, None)
            keys |= own
        yield Request(line=row.line, keys=keys, folder=str(file.parent), fault=row.fault)


def _of_toml(file: Path) -> Iterator[Request]:
    tables = load(file).get("stage", [])
    if not isinstance(tables, list) or not all(isinstance(table, dict) for table in tables):
        raise StageError(str(file), "stage", "which is no list of tables", "[[stage]] and its keys below")
    for number, table in enumerate(tables, 1):
        try:
            yield Request(line=number, keys=texts(table))
        except RestpointError as error:
            yield Request(line=number, fault=str(error))


def _of_csv(file: Path) -> Iterator[Request]:
    try:
        stream = file.open(encoding="utf-8-sig", newline="")
    except OSError as error:
        raise StageError("batch", str(file), f"which cannot be read ({error.strerror})", "a CSV or TOML file") from None
    with stream:
        try:
            heading = stream.readline()
            stream.seek(0)
            reader = csv.reader(stream, delimiter=";" if ";" in heading else ",", strict=True)
            header = [_path(file, cell.strip()) for cell in next(reader, [])]
            if not header:
                raise StageError(str(file), None, "which is empty", "a header row of keys and a row for each stage")
            for cells in reader:
                if not any(cell.strip() for cell in cells):
                    continue
                line = reader.line_num
                if len(cells) != len(header):
                    yield Request(line=line, fault=f"read {len(cells)} cells, accepted are {len(header)} as in the header")
                    continue
                pairs = zip(header, (cell.strip() for cell in cells), strict=True)
                yield Request(line=line, keys={key: cell for key, cell in pairs if cell})
        except UnicodeDecodeError:
            raise StageError(str(file), None, "which is not UTF-8", "a text in UTF-8") from None
        except csv.Error as error:
            where = f"{file}, line {reader.line_num}"
            raise StageError(where, None, f"which is not CSV ({error})", "cells without quotes, or quoted whole") from None


def _path(file: Path, name: str) -> str:
    path = name if name in KEYS else NAMES.get(name.replace("-", "_"))
    if path is None:
        near = nearest(name, [*KEYS, *NAMES])
        accepted = "keys as header, such as supply.vcc or ic"
        raise StageError(f"{file}, line 1", name, "which is no key of a stage", accepted, near)
    return path


def solved(request: Request) -> dict[str, object]:
    """The best candidate of one row; a plain function of plain data, for workers of any kind.

    Parameters
    ----------
    request : Request
        The row.

    Returns
    -------
    dict
        A row of the table: status "found", "none" (nothing qualifies) or "bad" (the row cannot be read), with the reason.
    """
    row: dict[str, object] = dict.fromkeys(COLUMNS, "") | {"line": request.line, "key": request.key}
    row["name"] = request.keys.get("name", "")
    try:
        if request.fault:
            raise RestpointError(request.fault)
        stage = Stage.from_keys({"name": f"line {request.line}"} | dict(request.keys), request.folder)
        row["name"] = stage.name
        return row | _best(stage)
    except RestpointError as error:
        return row | {"status": "bad", "reason": " ".join(str(error).split())}


def _best(stage: Stage) -> dict[str, object]:
    outcome = search(spaces_of(stage), goal_of(stage), top=1)
    if not outcome.found:
        return {"status": "none", "reason": "no combination meets every limit; restpoint find tells what conflicts"}
    first = outcome.found[0]
    alike = [f for f in outcome.found if f"{f.drift:.{DIGITS - 1}e}" == f"{first.drift:.{DIGITS - 1}e}"]
    if len(alike) > 1:
        # Equal in drift: the order of `find` decides.
        best = find(stage, top=1).best
        assert best is not None
        first = next(f for f in alike if _resistors(f) == (best.network, dict(best.resistors)))
    network, resistors = _resistors(first)
    box = first.space.box(np.array([first.index], dtype=np.int32), Meter())
    point = box.solve(box.nominal())
    ends = {f"{q}_{end}": float(box.extreme((q,), side).value[0]) for q in ("ic", "vce") for end, side in SIDES}
    settles = _settles(stage, box)
    return {
        "status": "found" if settles else "none",
        "reason": "" if settles else "the junction of the best candidate does not stay below its limit",
        "network": network,
        **{role: format_resistance(ohms) for role, ohms in resistors.items()},
        "drift": first.drift,
        "ic_a": float(point.ic[0]),
        "ic_min_a": ends["ic_min"],
        "ic_max_a": ends["ic_max"],
        "vce_v": float(point.vce[0]),
        "vce_min_v": ends["vce_min"],
        "vce_max_v": ends["vce_max"],
        "bound": float(outcome.bound) if outcome.bound < float("inf") else "",
    }


def _resistors(found: Found) -> tuple[str, dict[str, float]]:
    (values,) = found.space.fitted(np.array([found.index], dtype=np.int32))
    return found.space.network.name, values


def _settles(stage: Stage, box: Box) -> bool:
    """Whether the junction, heating itself, stays below its limit: the one verdict that a search leaves to the review."""
    limit = junction_limit(stage.ratings, stage.derating)
    if limit is None or stage.ratings.thermal_resistance is None or "transistor_stress" not in stage.limits:
        return True
    junction = loads(box, stage.ratings, stage.derating)[0].junction
    return junction is not None and junction <= limit


def find_many(
    rows: Iterable[Request | Stage],
    *,
    executor: Executor | None = None,
    done: Mapping[str, Row] | None = None,
    ahead: int = AHEAD,
    work: Callable[[Request], dict[str, object]] = solved,
) -> Iterator[Row]:
    """The best candidate of each of many stages.

    Parameters
    ----------
    rows : iterable of Request or Stage
        The stages; taken one at a time.
    executor : Executor, optional
        Any of `concurrent.futures`, or one that behaves like it, such as that of a Dask client; without one the rows are
        worked on here.
    done : mapping of str to row, optional
        Rows known by their keys, which are not computed again.
    ahead : int
        Rows that are given out before the first of them has come back [-].
    work : callable
        What is done with a row.

    Returns
    -------
    iterator of mapping of str to object
        One row of the table for each stage, in the order given, see `COLUMNS`.

    Notes
    -----
    A row whose worker is lost for good comes out with status "lost"; no row is left out and none comes twice.
    """
    known = done or {}
    waiting: deque[tuple[Request, Future[dict[str, object]] | dict[str, object]]] = deque()
    try:
        for number, row in enumerate(rows, 1):
            request = row if isinstance(row, Request) else Request(line=number, keys=dict(row.given), folder=str(row.folder))
            finished = known.get(request.key)
            if finished is not None:
                waiting.append((request, {**finished, "line": request.line}))
            elif executor is None:
                waiting.append((request, work(request)))
            else:
                waiting.append((request, _given_out(executor, work, request)))
            while len(waiting) >= (1 if executor is None else ahead):
                yield _result(*waiting.popleft())
        while waiting:
            yield _result(*waiting.popleft())
    finally:
        for _, pending in waiting:
            if not isinstance(pending, dict):
                pending.cancel()


def _given_out(
    executor: Executor, work: Callable[[Request], dict[str, object]], request: Request
) -> Future[dict[str, object]] | dict[str, object]:
    try:
        return executor.submit(work, request)
    except BrokenExecutor as error:
        return _lost(request, error)


def _result(request: Request, pending: Future[dict[str, object]] | dict[str, object]) -> Row:
    if isinstance(pending, dict):
        return pending
    try:
        return pending.result()
    except Exception as error:
        # Whatever a worker died of, the other rows go on.
        return _lost(request, error)


def _lost(request: Request, error: Exception) -> dict[str, object]:
    lost = {"line": request.line, "name": request.keys.get("name", ""), "status": "lost", "key": request.key}
    return dict.fromkeys(COLUMNS, "") | lost | {"reason": f"{type(error).__name__}: {' '.join(str(error).split())}"[:200]}


def header() -> str:
    """The header row of the table.

    Returns
    -------
    str
        With its newline.
    """
    return ",".join(COLUMNS) + "\n"


def finished(text: str) -> dict[str, Row]:
    """Rows of a table that need not be computed again.

    Parameters
    ----------
    text : str
        A table, perhaps cut off in its last row.

    Returns
    -------
    dict of str to row
        By key; rows that were lost on their way are not among them.
    """
    whole = text[: text.rfind("\n") + 1]
    if not whole.startswith(header()):
        return {}
    rows = csv.DictReader(io.StringIO(whole))
    return {row["key"]: row for row in rows if row["key"] and row["status"] in ("found", "none", "bad")}
