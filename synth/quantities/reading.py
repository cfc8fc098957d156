"""Reads one number with its unit, and says why a text is none."""

from __future__ import annotations

import math
import re as regex
from collections.abc import Callable
from decimal import Decimal
from numbers import Real
from typing import TypeVar

from synth.quantities.kinds import EXACT, KINDS, PREFIXES, Kind, kind_named
from synth.quantities.values import LONGEST_TEXT, QuantityError, plain
from synth.quantities.writing import compact, letter_code, numeral

Result = TypeVar("Result")

NUMBER = regex.compile(r"[+-]?(?:[0-9]+(?:[.,][0-9]+)?|[.,][0-9]+)(?:[eE][+-]?[0-9]+)?")
# Between digits, e is the letter of an exponent.
_LETTER_CODE = regex.compile(r"([+-]?)([0-9]*)([A-DF-Za-df-zµ])([0-9]+) ?([A-Za-zΩ]*)")
_THOUSANDS = regex.compile(r",[0-9]{3}(?![0-9])")
# Left to be compiled when a refusal first needs it.
_GAP = r"(?<=[0-9])[ _'\u2019](?=[0-9])"

# Characters that look alike on the page and differ only in their code.
_ALIKE = str.maketrans({
    "\N{OHM SIGN}": "\N{GREEK CAPITAL LETTER OMEGA}", "\N{GREEK SMALL LETTER MU}": "\N{MICRO SIGN}",
    "\N{KELVIN SIGN}": "K", "\N{MINUS SIGN}": "-", "≥": ">=", "≤": "<=",
})  # fmt: skip
_EVERY_UNIT = {unit: shift for kind in KINDS.values() for unit, shift in kind.units.items()}


class Unreadable(Exception):
    """Why a text cannot be read, as the rest of a clause that begins "which ...", and texts close to it.

    Close texts are guesses: `answer` keeps those that can be read.
    """

    def __init__(self, reason: str, *nearest: str) -> None:
        super().__init__(reason)
        self.reason = reason
        self.nearest = nearest


def clean(given: object) -> str:
    """Check a text and settle on one code for characters and gaps that look alike; empty if it is no text."""
    if not isinstance(given, str):
        return ""
    if len(given) > LONGEST_TEXT:
        raise Unreadable(f"is longer than {LONGEST_TEXT} characters")
    text = " ".join(given.translate(_ALIKE).split()).replace("+/-", "±").replace("+-", "±")
    if not text:
        raise Unreadable("is empty")
    if any(character.isdecimal() and not character.isascii() for character in text):
        likely = "".join(str(int(character)) if character.isdecimal() else character for character in text)
        raise Unreadable("has digits other than 0 to 9", likely)
    return text


def _split(text: str, kind: Kind | None = None) -> tuple[str, str]:
    """Split a clean text into number and unit; the letter of a letter code of this kind begins its unit."""
    code = _LETTER_CODE.fullmatch(text)
    if code and (kind is None or code[3] in kind.letters):
        return f"{code[1]}{code[2] or 0}.{code[4]}", code[3] + code[5]
    number = NUMBER.match(text)
    return (number[0], text[number.end() :].lstrip()) if number else ("", text)


def _decimal(number: str, shift: int = 0) -> Decimal:
    """Build the number that the digits mean."""
    mantissa, _, exponent = number.lower().replace(",", ".").partition("e")
    # Far beyond what a float holds the exact power no longer matters, but its size in memory does.
    power = max(-9999, min(9999, int(exponent or 0)))
    return Decimal(f"{mantissa}e{power + shift}")


def _recognise(text: str, kind: Kind) -> Decimal | None:
    """Read a clean text exactly; None if it is not of this kind."""
    number, unit = _split(text, kind)
    if not number or unit not in kind.shifts or _THOUSANDS.search(number):
        return None
    value = _decimal(number, kind.shifts[unit])
    if not unit and abs(value) >= kind.bare_below:
        return None
    return EXACT.add(value, kind.offsets.get(unit, Decimal(0)))


def _units_like(unit: str, kind: Kind) -> list[str]:
    """Find the unit of this kind that was meant; none where a guess could be off by powers of ten."""
    folded = unit.casefold()
    alike = [known for known in kind.shifts if known.casefold() == folded]
    if alike:
        return [max(alike, key=lambda known: known[0] == unit[0])]
    # Else its first letter would pass for milli.
    unit = "M" if folded.startswith("meg") else unit
    prefix = "k" if unit[0] == "K" else unit[0]
    if prefix in kind.prefixes and unit[1:] in _EVERY_UNIT:
        return [prefix + kind.typed]
    if unit in _EVERY_UNIT:
        return [kind.typed] if _EVERY_UNIT[unit] == kind.units[kind.typed] else []
    return [known for known in kind.units if known[:1].casefold() == folded[0]][:1]


def _explain(text: str, kind: Kind) -> Unreadable:
    """Say why a clean text is not of this kind."""
    if ":" in text or "±" in text:
        return Unreadable("is more than one value")
    number, unit = _split(text)
    if not number:
        start = NUMBER.search(text)
        return Unreadable("does not begin with a finite number", text[start.start() :] if start else "")
    if unit.startswith((".", ",")):
        ungrouped = text.replace(",", "")
        return Unreadable("has more than one decimal mark", ungrouped, number + unit.lstrip(".,0123456789"))
    if _THOUSANDS.search(number):
        reason = "is ambiguous, for three digits after a comma may be thousands or decimals"
        missing = "" if unit else f" {kind.typed}"
        return Unreadable(reason, *(text.replace(",", mark) + missing for mark in ("", ".")))
    if regex.search(_GAP, text):
        return Unreadable("has a gap or a mark between its digits", regex.sub(_GAP, "", text))
    if not unit:
        is_ratio = "" in kind.units
        reason = "is bare and 1 or more, so that per cent may be meant" if is_ratio else "has no unit"
        return Unreadable(reason, f"{number} {kind.typed}", letter_code(_decimal(number)))
    if unit in PREFIXES:
        # A small m where mega is meant is a common slip.
        slip = f"{number}M" if unit == "m" else ""
        plain_number = numeral(_decimal(number, PREFIXES[unit]))
        return Unreadable("has a prefix but no unit", f"{number} {unit}{kind.typed}", slip, plain_number)
    nearest = [f"{number} {like}".strip() for like in _units_like(unit, kind)]
    for other in KINDS.values():
        if _recognise(text, other) is not None:
            return Unreadable(f"is {other.title}", *nearest)
    # Known after all: then it stands where the decimal mark belongs.
    fault = "a letter between its digits" if unit in kind.shifts else f"the unknown unit {unit!r}"
    return Unreadable(f"has {fault}", *nearest)


def read(text: str, kind: Kind) -> Decimal:
    """Read a clean text exactly."""
    value = _recognise(text, kind)
    if value is None:
        raise _explain(text, kind)
    return value


def rounded(value: Decimal) -> float:
    """Round to the nearest float, which must be finite, and zero only for zero."""
    number = plain(float(value))
    if math.isinf(number):
        raise Unreadable("is beyond the largest number that can be held")
    if not number and value:
        raise Unreadable("is nearer to zero than the least number that can be held")
    return number


def below(kind: Kind) -> str:
    """Reason to refuse what lies below the least value of its kind."""
    return f"goes below {compact([kind.minimum], kind)}"


def single(given: object, kind: Kind) -> float:
    """Read one quantity, or take a number that is already in SI."""
    text = clean(given)
    if not text and (isinstance(given, bool) or not isinstance(given, Real)):
        raise Unreadable(f"is of type {type(given).__name__}, neither a text nor a number")
    value = rounded(read(text, kind)) if text else plain(given)
    if not math.isfinite(value):
        raise Unreadable("is not a finite number")
    if value < kind.minimum:
        # Where zero is no end of the scale, as for Celsius, the same number without its sign is far off.
        raise Unreadable(below(kind), compact([kind.minimum if kind.offsets else -value], kind))
    return value


def answer(
    reader: Callable[[object, Kind], Result], given: object, kind: str, field: str, forms: str = ""
) -> Result:
    """Read, or refuse with the field and the nearest texts that the same reader accepts."""
    known = kind_named(kind)

    def is_read(text: str) -> bool:
        try:
            reader(text, known)
        except Unreadable:
            return False
        return True

    try:
        return reader(given, known)
    except Unreadable as refusal:
        nearest = tuple(filter(is_read, refusal.nearest)) or known.examples[:1]
        accepted = known.accepted + (forms and f", or {forms}")
        raise QuantityError(field, given, f"which {refusal.reason}", accepted, nearest) from None


def parse(text: str | float, kind: str, field: str) -> float:
    """Read one quantity.

    Parameters
    ----------
    text : str or float
        Number with optional SI prefix and unit, or letter code of IEC 60062. A number is taken as it is
        [SI unit of `kind`: a temperature in kelvin, a ratio as a fraction].
    kind, field : str
        Key in `KINDS`, and name of the field for messages.

    Returns
    -------
    float
        Value [SI unit of `kind`], the float nearest to the decimal number written.

    Raises
    ------
    QuantityError
        If the text is not of this kind, is ambiguous, or goes below the least value of its kind.

    Notes
    -----
    The letter m is milli and M is mega; k, and for a resistance also K, is kilo. A comma serves as decimal
    mark unless exactly three digits follow it. A bare ratio is a fraction and must be below 1.

    Examples
    --------
    >>> parse("4K7", "resistance", "r1"), parse("-10°C", "temperature", "ambient.temperature")
    (4700.0, 263.15)
    """
    return answer(single, text, kind, field)
