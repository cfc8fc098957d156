"""A request as it was given, key by key, and what had to be assumed to make it whole."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NamedTuple

from synth.stage_keys import KEYS, StageError


@dataclass(frozen=True, kw_only=True)
class Assumption:
    """A value that was not given: its key and text as in a stage file, why it was taken, and of a table how that is known.

    `evidence` is "seen", "mixed" or "memory", as the table has it, and "" where no table was asked.
    """

    key: str
    value: str
    why: str
    evidence: str = ""


@dataclass(frozen=True, kw_only=True)
class StageWarning:
    """A named warning with its reason."""

    name: str
    text: str


class Source(NamedTuple):
    """Where a value comes from, in words, and how a table knows it."""

    why: str
    evidence: str = ""


class Request:
    """The texts of a stage; notes what it had to assume and to warn of."""

    def __init__(self, given: Mapping[str, str], folder: Path) -> None:
        self.given = given
        self.folder = folder
        self.assumed: dict[str, Assumption] = {}
        self.notes: list[Assumption] = []
        self.warnings: list[StageWarning] = []
    @property
    def has_reference(self) -> bool:
        """Whether a reference element is given."""
        return any(KEYS[path].table == "reference" for path in self.given)

    def value(self, path: str) -> Any:
        """Value of a key, None where it is not given."""
        return KEYS[path].read(self.given[path]) if path in self.given else None
    def take(self, path: str, text: str = "", why: str | Source = "not given") -> Any:
        """Value of a key, by default that of a text, which is then listed as assumed."""
        if path in self.given:
            return self.value(path)
        source = why if isinstance(why, Source) else Source(why)
        self.assumed[path] = Assumption(key=path, value=text or KEYS[path].default, why=source.why, evidence=source.evidence)
        return KEYS[path].read(self.assumed[path].value)
    def assume(self, path: str, value: Any, why: str) -> Any:
        """A value as listed under assumed, whether or not the key is given."""
        self.assumed[path] = Assumption(key=path, value=KEYS[path].write(value), why=why)
        return value
    def refusal(self, path: str, reason: str, accepted: str, *near: str) -> StageError:
        """The error that refuses a key as it was given."""
        return StageError(path, self.given.get(path), reason, accepted, near)
