"""Which of many transistors would do in a stage that exists: with every resistor kept, or with one changed."""

from __future__ import annotations

import csv
import os
import time
from collections.abc import Callable, Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np

from synth import catalogue
from synth.answer import Caution
from synth.box import Meter
from synth.choices import values_of
from synth.quantities import RestpointError, parse
from synth.replacement.answer import Device
from synth.replacement.changes import other_values
from synth.replacement.sides import device, sides, swap_cautions
from synth.spaces import Goal, Space, assess, assess_all, fitted, goal_of
from synth.stage import Stage, StageError
from synth.stage_keys import KEYS, Given, nearest

Does = Literal["kept", "one", "no", "refused"]

TABLES = "tables"
"""What stands for every type of the built-in table and every family that is sold without a gain bin."""
LARGEST_LIST = 5000
"""Rows of a list of transistors above which it is refused [-]."""
LABELS = ("name", "package")
"""Columns of a list of transistors that are no key of [replacement]."""


@dataclass(frozen=True, kw_only=True)
class Tried:
    """One transistor in the stage.

    `does` says whether every resistor stays ("kept"), one has to change ("one"), no single change will do ("no"), or the
    stage cannot be counted with it ("refused"); `drift` is that of the best [-] and `role`, `value` its change [ohm];
    `fails` names what fails with every resistor kept, or why it was refused.
    """

    device: Device | None
    label: str
    does: Does
    drift: float | None
    role: str | None
    value: float | None
    fails: tuple[str, ...]
    cautions: tuple[Caution, ...]


@dataclass(frozen=True, kw_only=True)
class Scan:
    """Many transistors in one stage: those that do with every resistor kept first, each kind by ascending drift.

    `left_out` counts types that a filter or the other polarity left out [-]; `seconds` is the time it took [s].
    """

    stage: str
    old: Device
    source: str
    tried: tuple[Tried, ...]
    left_out: int
    seconds: float

    @property
    def passed(self) -> bool:
        """Whether any would do, with one resistor changed at most."""
        return any(row.does in ("kept", "one") for row in self.tried)


def scan(
    stage: Stage,
    among: str | os.PathLike[str] = TABLES,
    *,
    keep: Collection[str] = (),
    least: Mapping[str, float] | None = None,
    packages: Collection[str] = (),
) -> Scan:
    """Try every transistor of a list in a stage.

    Parameters
    ----------
    stage : Stage
        The stage with its ``[values]``, the resistors fitted today.
    among : str or path
        ``tables`` for the built-in table, else a CSV file: a row a transistor, columns named like the keys of
        ``[replacement]``, besides ``name`` and ``package``; a type that the table knows brings its figures.
    keep : collection of str
        Roles that must not change.
    least : mapping of str to float, optional
        Least rating by name, ``vceo`` [V], ``ic_max`` [A], ``ptot`` [W]; a type whose rating is not known is left out.
    packages : collection of str
        Outlines that come into question; any when empty.

    Returns
    -------
    Scan
        Every type of the stage's polarity that the filters leave.

    Raises
    ------
    StageError
        If the list cannot be read or a row of it is no transistor.
    """
    start = time.perf_counter()
    before = stage.with_keys({path: None for path in stage.given if KEYS[path].table == "replacement"})
    old = device(before)
    roles = fitted(before).roles
    for role in keep:
        if role not in roles:
            raise StageError("keep", role, "which is not fitted", f"one of {', '.join(roles)}", nearest(role, roles)[:1])
    rows = list(_table()) if str(among) == TABLES else list(_file(Path(among)))
    wanted = {name.casefold() for name in packages}
    tried, left_out = [], 0
    for where, label, package, keys in rows:
        found = _one(before, old, where, label, package, keys, keep, lambda new: _fits(new, least or {}, wanted))
        if found is None:
            left_out += 1
        else:
            tried.append(found)
    order: Sequence[Does] = ("kept", "one", "no", "refused")
    tried.sort(key=lambda row: (order.index(row.does), np.inf if row.drift is None else row.drift, row.label))
    return Scan(
        stage=before.name, old=old, source=str(among), tried=tuple(tried), left_out=left_out,
        seconds=time.perf_counter() - start,
    )  # fmt: skip


def _table() -> Iterator[tuple[str, str, str, dict[str, Given]]]:
    rows = catalogue.transistors()
    families = [family for family, bins in catalogue.gain_bins().items() if rows.keys() >= set(bins) and family not in rows]
    for name in (*rows, *families):
        yield "", name, "", {"replacement.type": name}


def _file(path: Path) -> Iterator[tuple[str, str, str, dict[str, Given]]]:
    """Rows of a list of transistors: where it stands, what it is called, its package, its keys."""
    try:
        lines = list(csv.reader(path.read_text(encoding="utf-8-sig").splitlines()))
    except OSError as error:
        raise StageError("among", str(path), f"which cannot be read ({error.strerror})", f"{TABLES} or a CSV file") from None
    except UnicodeDecodeError:
        raise StageError("among", str(path), "which is not UTF-8", f"{TABLES} or a CSV file in UTF-8") from None
    leaves = {key.leaf for key in KEYS.values() if key.table == "replacement"}
    head = [cell.strip().casefold() for cell in lines[0]] if lines else []
    for cell in head or [""]:
        if cell not in (*leaves, *LABELS):
            accepted = f"columns among {', '.join((*LABELS, *sorted(leaves)))}"
            where = f"among {path.name}, line 1"
            raise StageError(where, cell, "which is no column of a list of transistors", accepted, nearest(cell, leaves)[:1])
    if len(lines) - 1 > LARGEST_LIST:
        raise StageError(f"among {path.name}", f"{len(lines) - 1} rows", "which are too many", f"at most {LARGEST_LIST}")
    known = {name.casefold() for name in (*catalogue.transistors(), *catalogue.gain_bins())}
    for number, line in enumerate(lines[1:], start=2):
        cells = {name: cell.strip() for name, cell in zip(head, line, strict=False) if cell.strip()}
        if not cells:
            continue
        where = f"among {path.name}, line {number}"
        label = cells.get("name") or cells.get("type") or where
        if cells.get("type", "").casefold() not in known:
            cells.pop("type", None)
        keys: dict[str, Given] = {f"replacement.{leaf}": text for leaf, text in cells.items() if leaf in leaves}
        if not {"replacement.type", "replacement.hfe"} & set(keys):
            raise StageError(where, label, "which no table knows and which has no hfe", "a registered type, or a value of hfe")
        # A part of its own has nothing of the transistor of today but what the list says.
        keys.setdefault("replacement.material", "silicon") if "replacement.type" not in keys else None
        yield where, label, cells.get("package", ""), keys


def _one(
    before: Stage,
    old: Device,
    where: str,
    label: str,
    package: str,
    keys: Mapping[str, Given],
    keep: Collection[str],
    fits: Callable[[Device], bool],
) -> Tried | None:
    """One transistor in the stage; None of the other polarity, or of one that does not come into question."""
    kind = keys.get("replacement.type")
    row = catalogue.transistor(str(kind)) if kind else None
    polarity = row.polarity if row is not None else keys.get("replacement.polarity", before.transistor.polarity)
    if polarity != before.transistor.polarity:
        return None
    base = before
    if kind is None:
        stays = ("transistor.vbe_model", "transistor.polarity")
        own: dict[str, Given] = {p: None for p in before.given if KEYS[p].table == "transistor" and p not in stays}
        own |= {"transistor.polarity": before.transistor.polarity, "transistor.hfe": before.transistor.hfe}
        base = before.with_keys(own)
    try:
        _, after = sides(base.with_keys(keys))
    except RestpointError as error:
        if where:
            raise StageError(where, label, f"which is refused ({error})", "a row that a stage accepts") from None
        return _tried(None, label, "refused", fails=(str(error),))
    new = device(after, label)
    if package and new.package is None:
        new = Device(**(vars(new) | {"package": package}))
    if not fits(new):
        return None
    cautions = swap_cautions(old, new) + tuple(Caution(name=w.name, text=w.text) for w in after.warnings)
    space, goal = fitted(after), goal_of(after)
    index = np.zeros((1, len(space.roles)), dtype=np.int32)
    (kept,) = assess_all(space, index, goal, Meter())
    if not kept.fails and kept.drift is not None:
        return _tried(new, label, "kept", (kept.drift, None, None), cautions=cautions)
    best = _best_single(after, space, goal, keep)
    return _tried(new, label, "no" if best is None else "one", best or (None, None, None), kept.fails, cautions)


def _tried(
    device: Device | None,
    label: str,
    does: Does,
    best: tuple[float | None, str | None, float | None] = (None, None, None),
    fails: tuple[str, ...] = (),
    cautions: tuple[Caution, ...] = (),
) -> Tried:
    drift, role, value = best
    return Tried(
        device=device, label=label, does=does, drift=drift, role=role, value=value, fails=fails, cautions=cautions
    )


def _best_single(stage: Stage, space: Space, goal: Goal, keep: Collection[str]) -> tuple[float, str, float] | None:
    """Drift, role and value of the best change of one resistor: every value of every role is judged."""
    best: tuple[float, str, float] | None = None
    for role in space.roles:
        if role in keep:
            continue
        values = other_values(values_of(stage, role), float(space.lists[role].nominal[0]))
        if values is None:
            continue
        lists = {**space.lists, role: values}
        own = Space(**(vars(space) | {"lists": lists}))
        index = np.zeros((values.nominal.size, len(space.roles)), dtype=np.int32)
        index[:, space.roles.index(role)] = np.arange(values.nominal.size)
        found, _ = assess(own, index, goal, Meter(), np.inf if best is None else best[0])
        for one in found:
            value = float(values.nominal[one.index[space.roles.index(role)]])
            if best is None or one.drift < best[0]:
                best = (one.drift, role, value)
    return best


def _fits(found: Device, least: Mapping[str, float], packages: Collection[str]) -> bool:
    rated = all((getattr(found, name) or 0.0) >= figure for name, figure in least.items())
    return rated and (not packages or (found.package or "").casefold() in packages)


def least_ratings(texts: Mapping[str, str | None]) -> dict[str, float]:
    """Filters of a scan from their texts.

    Parameters
    ----------
    texts : mapping of str to str or None
        ``vceo``, ``ic_max`` and ``ptot`` to a text such as ``40 V``; None asks for nothing.

    Returns
    -------
    dict of str to float
        Least ratings [V, A, W].

    Raises
    ------
    QuantityError
        If a text is no such quantity.
    """
    return {
        name: parse(text, KEYS[f"transistor.{name}"].kind, f"least {name}") for name, text in texts.items() if text is not None
    }
