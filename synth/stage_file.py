"""Stage files: TOML to the texts of keys, and back.

Every key and table comes from `synth.stage_keys.KEYS`.
"""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from synth.stage_keys import KEYS, ROLES, TABLES, StageError, nearest

LARGEST_FILE = 1_000_000
"""Size of a stage file above which it is refused [byte]."""


def unknown_key(path: str) -> StageError:
    """The refusal of a key that no stage has.

    Parameters
    ----------
    path : str
        What was read.

    Returns
    -------
    StageError
        Names the nearest known table or keys.
    """
    table = path.rpartition(".")[0]
    if table and table not in TABLES and table.partition(".")[0] not in TABLES:
        near = [f"[{name}]" for name in nearest(table, TABLES)]
        return StageError("stage", path, f"whose table [{table}] is unknown", "a table of a stage file", near)
    return StageError("stage", path, "which is no key of a stage", "a key of a stage file", nearest(path, KEYS))


def read_toml(path: Path) -> dict[str, str]:
    """Texts of a stage file.

    Parameters
    ----------
    path : Path
        File in TOML, UTF-8, at most 1 MB.

    Returns
    -------
    dict of str to str
        Path of each key to its text.

    Raises
    ------
    StageError
        If the file cannot be read, is no TOML, or has an unknown table or key.
    """
    return texts(load(path))


def texts(content: Mapping[str, Any]) -> dict[str, str]:
    """Texts of the tables of a stage.

    Parameters
    ----------
    content : mapping of str to value
        Tables and keys as TOML gives them.

    Returns
    -------
    dict of str to str
        Path of each key to its text.

    Raises
    ------
    StageError
        If a table or key is unknown.
    """
    return {key: KEYS[key].text_of_toml(value) for key, value in _flattened("", content)}


def load(path: Path) -> dict[str, Any]:
    """Content of a file in TOML.

    Parameters
    ----------
    path : Path
        UTF-8, at most 1 MB.

    Returns
    -------
    dict
        Tables and keys.

    Raises
    ------
    StageError
        If the file cannot be read or is no TOML; names the line.
    """
    try:
        with path.open("rb") as file:
            content = file.read(LARGEST_FILE + 1)
    except OSError as error:
        beside = [other.name for other in path.parent.glob("*.toml")] if path.parent.is_dir() else []
        near = difflib.get_close_matches(path.name, beside, 1)
        reason = f"which cannot be read ({error.strerror})"
        raise StageError("stage file", str(path), reason, "a stage file in TOML", near) from None
    if len(content) > LARGEST_FILE:
        raise StageError("stage file", str(path), "which is larger than 1 MB", "a stage file of at most 1 MB")
    try:
        # The mark that some editors put before UTF-8 is no part of TOML.
        return tomllib.loads(content.decode("utf-8-sig"))
    except UnicodeDecodeError as error:
        where = f"{path}, line {content[: error.start].count(10) + 1}"
        raise StageError(where, None, "which is not UTF-8", "a text in UTF-8") from None
    except RecursionError:
        raise StageError(str(path), None, "which nests too deep", "tables and keys of a stage file") from None
    except ValueError as error:
        text, _, place = str(error).partition(" (at ")
        line = place.removeprefix("line ").partition(",")[0]
        where = f"{path}, line {line}" if line.isdecimal() else f"{path}, at the end"
        raise StageError(where, None, f"which is not TOML: {text}", 'lines such as vcc = "12 V"') from None


def _flattened(table: str, content: Mapping[str, Any]) -> Iterable[tuple[str, Any]]:
    """Path and value of every key, in the order of the file."""
    for name, value in content.items():
        path = f"{table}.{name}" if table else name
        if isinstance(value, dict) and path in TABLES:
            yield from _flattened(path, value)
        elif path in KEYS:
            yield path, value
        elif path in TABLES:
            leaf = next(key for key in KEYS.values() if key.table == path)
            raise StageError(path, value, "which is a table", f'[{path}] and below it {leaf.leaf} = "{leaf.example}"')
        else:
            raise unknown_key(f"{path}.{next(iter(value), '')}" if isinstance(value, dict) else path)


def toml_literal(path: str, text: str) -> str:
    """A text as the right-hand side of a line.

    Parameters
    ----------
    path : str
        Path of its key.
    text : str
        Text of the key; one of a list has commas between its items.

    Returns
    -------
    str
        A basic string of TOML, or an array of them.
    """
    key = KEYS[path]
    items = [f'"{item.translate(_ESCAPES)}"' for item in key.items(text)]
    return f"[{', '.join(items)}]" if key.many else items[0]


_ESCAPES = {code: f"\\u{code:04x}" for code in (*range(32), 127, ord('"'), ord("\\"))}


def stage_file(heading: Iterable[str], lines: Mapping[str, str]) -> str:
    """A stage file made of lines.

    Parameters
    ----------
    heading : iterable of str
        Sentences of the comment at the top.
    lines : mapping of str to str
        Path of a key to its line or lines.

    Returns
    -------
    str
        The file, its tables and keys in the order of `KEYS`.
    """
    parts = [f"# {sentence}" for sentence in heading]
    for table in ("", *TABLES):
        own = [lines[path] for path, key in KEYS.items() if key.table == table and path in lines]
        if own:
            parts += ["", f"[{table}]", *own] if table else ["", *own]
    return "\n".join(parts) + "\n"


def template() -> str:
    """The empty stage file: every key with its meaning, commented out.

    Returns
    -------
    str
        Taking away the ``#`` in front of a key gives it; the keys of one role stand for those of every role.
    """
    lines = {}
    for path, key in KEYS.items():
        if key.table.startswith("resistors.") and key.table != f"resistors.{ROLES[-1]}":
            continue
        state = "needed" if key.needed else f"not given: {key.otherwise or key.default}"
        lines[path] = f"# {key.meaning} ({state})\n#{key.leaf} = {toml_literal(path, key.example)}"
    heading = [
        "A stage of restpoint. Take away the # in front of a key to give it.",
        "Quantities are texts with a unit; a spread is low : high, low : nominal : high, or nominal ± x % or ± x unit.",
        f"[resistors.{ROLES[-1]}] stands for a table of each role: {', '.join(ROLES)}.",
    ]
    return stage_file(heading, lines)
