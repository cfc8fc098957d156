"""Whether an answer is still the one that was kept: a team's regression test."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from synth.answer import Answer
from synth.quantities import RestpointError

RTOL = 1e-9
"""Relative difference of two figures that count as equal [-]: other machines round the last digits in their own way."""
ATOL = 1e-14
"""Figures below this are the rounding of a difference, and equal to zero [SI unit]."""
WORDS = frozenset(
    {"version", "command", "explanation", "rationale", "why", "text", "meaning", "seconds", "evaluated", "title", "summary"}
)
"""Keys whose wording or effort may change without the answer."""


class WrongExpectation(RestpointError):
    """A file that holds no answer to compare with."""


def read(path: Path) -> Mapping[str, Any]:
    """An answer that was kept.

    Parameters
    ----------
    path : Path
        JSON as ``restpoint check --format json`` writes it.

    Returns
    -------
    mapping
        Its content.

    Raises
    ------
    WrongExpectation
        If the file cannot be read, is no JSON or no answer of check.
    """
    accepted = "accepted is the JSON that restpoint check --format json writes"
    try:
        content = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise WrongExpectation(f"--expect: read {str(path)!r}, which cannot be read ({error.strerror}), {accepted}") from None
    except (ValueError, RecursionError):
        raise WrongExpectation(f"--expect: read {str(path)!r}, which is no JSON, {accepted}") from None
    kind = content.get("schema") if isinstance(content, dict) else None
    if kind != "restpoint/check/1":
        raise WrongExpectation(f"--expect: read {str(path)!r}, whose schema is {kind!r}, {accepted}")
    return dict(content)


def changes(expected: Mapping[str, Any], answer: Answer) -> tuple[str, ...]:
    """What has changed against an answer that was kept.

    Parameters
    ----------
    expected : mapping
        As `read` gives it.
    answer : Answer
        The answer of today.

    Returns
    -------
    tuple of str
        One for each change: where, before and after; empty where there is none. Keys that are new today are no change, and
        words are not compared.
    """
    return tuple(_changes("", expected, answer.as_dict()))


def _changes(path: str, before: Any, after: Any) -> Iterator[str]:
    if isinstance(before, Mapping) and isinstance(after, Mapping):
        for key, value in before.items():
            if key in WORDS:
                continue
            place = f"{path}.{key}" if path else str(key)
            if key not in after:
                yield f"{place}: {_short(value)} -> gone"
            else:
                yield from _changes(place, value, after[key])
        return
    if isinstance(before, list) and isinstance(after, list) and len(before) == len(after):
        for k, (one, two) in enumerate(zip(before, after, strict=True)):
            yield from _changes(f"{path}[{k}]", one, two)
        return
    if not _equal(before, after):
        yield f"{path}: {_short(before)} -> {_short(after)}"


def _equal(one: Any, two: Any) -> bool:
    numbers = all(isinstance(x, int | float) and not isinstance(x, bool) for x in (one, two))
    if not numbers:
        return bool(one == two)
    return bool(abs(one - two) <= max(RTOL * max(abs(one), abs(two)), ATOL))


def _short(value: Any) -> str:
    text = f"{value:.12g}" if isinstance(value, float) else json.dumps(value, ensure_ascii=False)
    return text if len(text) <= 60 else f"{text[:57]}..."
