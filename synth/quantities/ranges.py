"""Reads spreads, limits and targets."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from decimal import Decimal
from typing import TypeVar

from synth.quantities.kinds import EXACT, KINDS, Kind
from synth.quantities.reading import NUMBER, Unreadable, answer, below, clean, read, rounded, single
from synth.quantities.values import Interval, QuantityError, Spread, Target
from synth.quantities.writing import compact

Ends = TypeVar("Ends", Spread, Interval, Target)

_NOMINAL_RULES = ("mean", "geometric", "ambient")
# 25 °C.
_ROOM_TEMPERATURE = Decimal("298.15")


def _ready(value: Ends, kind: Kind) -> Ends:
    """Take a value that needs no reading."""
    numbers = (getattr(value, name, None) for name in ("low", "nominal", "high"))
    if any(number is not None and -math.inf < number < kind.minimum for number in numbers):
        raise Unreadable(below(kind))
    return value


def _unit_of(part: str) -> str | None:
    """Prefix and unit that a part lends to its bare neighbours; empty if bare, None if a letter code."""
    number = NUMBER.match(part)
    unit = part[number.end() :].lstrip() if number else None
    return None if unit and any(map(str.isdecimal, unit)) else unit


def _part(part: str, kind: Kind, around: Callable[[str], str] = str) -> Decimal:
    """Read one part of a longer text; `around` puts a nearest part back into it."""
    try:
        return read(part, kind)
    except Unreadable as refusal:
        reason = f"has the part {part!r} that {refusal.reason}"
        raise Unreadable(reason, *map(around, refusal.nearest)) from None


def _parts(text: str, kind: Kind) -> list[Decimal]:
    """Read the parts between colons."""
    parts = [part.strip() for part in text.split(":")]
    if len(parts) > 3:
        raise Unreadable("has more than three parts", f"{parts[0]} : {parts[-1]}")
    if "" in parts:
        raise Unreadable("has an empty part", " : ".join(filter(None, parts)))
    units = [_unit_of(part) for part in parts]
    lent = units[-1] or next(filter(None, units), kind.typed)
    full = [f"{part} {lent}" if unit == "" else part for part, unit in zip(parts, units, strict=True)]
    # "10 : 100k" may mean 10 ohm or 10 kohm: a prefix alone is not lent.
    if "" in units and lent in kind.letters:
        asis = [f"{part} {kind.typed}" if unit == "" else part for part, unit in zip(parts, units, strict=True)]
        raise Unreadable("has a part without a unit beside one with only a prefix", " : ".join(asis), " : ".join(full))
    # For a ratio, a bare end after parts in per cent would be read as a hundred times what was meant.
    if units[-1] == "" and any(unit != "" for unit in units):
        raise Unreadable("has a unit, but not on its last part", " : ".join(full))
    return [_part(part, kind) for part in (full if units[-1] else parts)]


def _around(text: str, kind: Kind) -> list[Decimal]:
    """Read a nominal value and its half-width, relative if that is in per cent."""
    middle, half, *more = (part.strip() for part in text.split("±"))
    if more or ":" in text:
        raise Unreadable("has more than one '±', or mixes it with ':'")
    if not middle or not half:
        raise Unreadable("has an empty part", middle)
    if half.startswith("-"):
        raise Unreadable("has a negative half-width", f"{middle} ± {half[1:].lstrip()}")
    relative = half.endswith("%")
    if relative and kind.offsets:
        nearest = f"{middle} ± {half[:-1].rstrip()} {kind.typed}"
        raise Unreadable("has a half-width in per cent of a temperature", nearest)
    unit, half_unit = _unit_of(middle), _unit_of(half)
    if half_unit == "" and unit != "":
        texts = (f"{middle} ± {half} {likely}" for likely in ("%", unit or kind.typed))
        raise Unreadable("has a half-width without a unit", *texts)
    if half_unit and unit == "" and not relative:
        middle = f"{middle} {half_unit}"
    nominal = _part(middle, kind, lambda nearest: f"{nearest} ± {half}")
    width = _part(half, KINDS["ratio"] if relative else kind, lambda nearest: f"{middle} ± {nearest}")
    if relative:
        width = EXACT.multiply(abs(nominal), width)
    else:
        # A difference of two temperatures has no zero point.
        width = EXACT.subtract(width, kind.offsets.get(half_unit or "", Decimal(0)))
    return [EXACT.subtract(nominal, width), nominal, EXACT.add(nominal, width)]


def _between(rule: str, low: Decimal, high: Decimal) -> Decimal:
    """Find the nominal value of two ends."""
    if rule == "ambient":
        return max(low, min(high, _ROOM_TEMPERATURE))
    if rule == "mean":
        return EXACT.multiply(EXACT.add(low, high), Decimal("0.5"))
    if low < 0:
        raise Unreadable("has no geometric mean, for it goes below zero")
    return EXACT.sqrt(EXACT.multiply(low, high))


def _in_order(values: Sequence[Decimal], kind: Kind) -> list[float]:
    """Turn the parts into floats, which must rise and stay above the least value."""
    numbers = [rounded(value) for value in values]
    if numbers != sorted(numbers):
        raise Unreadable("is not in rising order", compact(sorted(numbers), kind))
    if numbers[0] < kind.minimum:
        raise Unreadable(below(kind), compact([max(number, kind.minimum) for number in numbers], kind))
    return numbers


def _numbers(given: object, kind: Kind, rule: str = "") -> list[float]:
    """Read one value, two ends, or two ends with a nominal value between them, which a rule adds."""
    text = clean(given)
    if "±" in text:
        return _in_order(_around(text, kind), kind)
    if ":" not in text:
        return [single(given, kind)]
    parts = _parts(text, kind)
    numbers = _in_order(parts, kind)
    if rule and len(parts) == 2:
        numbers.insert(1, rounded(_between(rule, *parts)))
    return numbers


def _spread(given: object, kind: Kind, rule: str) -> Spread:
    if isinstance(given, Spread):
        return _ready(given, kind)
    numbers = _numbers(given, kind, rule)
    return Spread(numbers[0], numbers[len(numbers) // 2], numbers[-1])


def _one_sided(bound: float, sense: str) -> Interval:
    return Interval(bound, math.inf) if sense == ">=" else Interval(-math.inf, bound)


def _bound(given: object, kind: Kind) -> Interval | None:
    """Read a bound with its sign; None if there is no sign."""
    text = clean(given)
    rest = text.lstrip("<>=")
    sign, rest = text.removesuffix(rest), rest.lstrip()
    if not sign:
        return None
    if sign not in (">=", "<="):
        likely = ">= " if ">" in sign else "<= " if "<" in sign else ""
        raise Unreadable(f"begins with {sign!r}", likely + rest)
    try:
        return _one_sided(single(rest, kind), sign)
    except Unreadable as refusal:
        raise Unreadable(refusal.reason, *(f"{sign} {nearest}" for nearest in refusal.nearest)) from None


def _limit(given: object, kind: Kind, sense: str) -> Interval:
    if isinstance(given, Interval):
        return _ready(given, kind)
    if bound := _bound(given, kind):
        return bound
    numbers = _numbers(given, kind)
    if len(numbers) == 3:
        raise Unreadable("is a spread, not a limit", compact([numbers[0], numbers[2]], kind))
    return Interval(*numbers) if len(numbers) == 2 else _one_sided(numbers[0], sense)


def _target(given: object, kind: Kind) -> Target:
    if isinstance(given, Target):
        return _ready(given, kind)
    if bound := _bound(given, kind):
        return Target(None, bound.low, bound.high)
    numbers = _numbers(given, kind, "mean")
    if len(numbers) == 1:
        return Target(numbers[0], -math.inf, math.inf)
    return Target(numbers[1], numbers[0], numbers[2])


def parse_spread(text: str | float | Spread, kind: str, field: str, nominal: str = "mean") -> Spread:
    """Read a spread.

    Parameters
    ----------
    text : str or float or Spread
        ``low : high``, ``low : nominal : high``, ``nominal ± x %``, ``nominal ± x unit`` (``+-`` and ``+/-``
        also serve) or one value, a spread of no width. A number is taken as it is [SI unit of `kind`].
    kind, field : str
        Key in `KINDS`, and name of the field for messages.
    nominal : {"mean", "geometric", "ambient"}
        Where the nominal value of ``low : high`` lies: arithmetic mean, geometric mean, or 25 °C if that is
        inside, else the nearer end.

    Returns
    -------
    Spread
        The spread [SI unit of `kind`].

    Raises
    ------
    QuantityError
        If a part cannot be read, the parts do not rise, or the nominal rule is unknown.

    Notes
    -----
    A part that is a bare number takes prefix and unit of the last part. A half-width in per cent is always
    relative to the nominal value, also that of a ratio: ``5 % ± 10 %`` is 4.5 % to 5.5 %. The half-width of a
    temperature is a difference, so ``± 5 K`` and ``± 5 °C`` are the same.

    Examples
    --------
    >>> parse_spread("12 V ± 5 %", "voltage", "supply.vcc")
    Spread(low=11.4, nominal=12.0, high=12.6)
    """
    if nominal not in _NOMINAL_RULES:
        raise QuantityError("nominal", nominal, "which is no rule", f"one of {', '.join(_NOMINAL_RULES)}")
    forms = "'low : high', 'low : nominal : high', 'nominal ± x'"
    return answer(lambda given, known: _spread(given, known, nominal), text, kind, field, forms)


def parse_limit(text: str | float | Interval, kind: str, field: str, sense: str) -> Interval:
    """Read a limit.

    Parameters
    ----------
    text : str or float or Interval
        ``>= x``, ``<= x``, ``low : high``, or a bare value, which takes `sense`. A number is taken as it is
        [SI unit of `kind`].
    kind, field : str
        Key in `KINDS`, and name of the field for messages.
    sense : {">=", "<="}
        Natural sense of the limit.

    Returns
    -------
    Interval
        What is allowed [SI unit of `kind`].

    Raises
    ------
    QuantityError
        If a part cannot be read, the ends are reversed, or the sense is neither of the two.

    Examples
    --------
    >>> parse_limit("3 mA", "current", "limits.supply_current", "<=")
    Interval(low=-inf, high=0.003)
    """
    if sense not in (">=", "<="):
        raise QuantityError("sense", sense, "which is no sense of a limit", "'>=' or '<='")
    forms = "'>= x', '<= x', 'low : high'"
    return answer(lambda given, known: _limit(given, known, sense), text, kind, field, forms)


def parse_target(text: str | float | Target, kind: str, field: str) -> Target:
    """Read a target.

    Parameters
    ----------
    text : str or float or Target
        Any form of a spread is a target with its window, and two ends have their mean as target; one value is
        a target without a window; ``>= x`` or ``<= x`` is a window without a target. A number is taken as it
        is [SI unit of `kind`].
    kind, field : str
        Key in `KINDS`, and name of the field for messages.

    Returns
    -------
    Target
        Target and window [SI unit of `kind`].

    Raises
    ------
    QuantityError
        If a part cannot be read or the parts do not rise.

    Examples
    --------
    >>> parse_target("2 mA ± 15 %", "current", "target.ic")
    Target(nominal=0.002, low=0.0017, high=0.0023)
    """
    forms = "'nominal ± x', 'low : nominal : high', 'low : high', '>= x', '<= x'"
    return answer(_target, text, kind, field, forms)
