"""Writes quantities: rounded for reading, or exactly, so that the readers read back the same."""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import ROUND_HALF_UP, Decimal

from synth.quantities.kinds import EXACT, Kind, kind_named
from synth.quantities.values import Interval, QuantityError, Spread, Target

_LONGEST_NUMERAL = 21
_MOST_DIGITS_OF_A_FLOAT = 17


def numeral(value: Decimal) -> str:
    """Write a number in full, or with an exponent where that would be too long to read."""
    value = EXACT.normalize(value)
    text = f"{value:f}"
    return text if len(text) <= _LONGEST_NUMERAL else f"{value:e}".replace("e+", "e")


def letter_code(value: Decimal) -> str:
    """Write a resistance with the letter in place of the decimal mark."""
    shift = max(0, min(12, value.adjusted() // 3 * 3))
    whole, _, decimals = f"{EXACT.normalize(EXACT.scaleb(value, -shift)):f}".partition(".")
    return f"{'' if whole == '0' and decimals else whole}{'RKMGT'[shift // 3]}{decimals}"


def _shortest(value: float) -> Decimal:
    """Return the shortest decimal number that rounds to this float."""
    return Decimal(repr(float(value) + 0.0))


def compact(values: Sequence[float], kind: Kind) -> str:
    """Write values with one unit for all or one for each, whichever is shorter."""
    numbers = [_shortest(value) for value in values]
    if kind.name == "resistance":
        codes = [letter_code(number) for number in numbers]
        if max(map(len, codes)) <= _LONGEST_NUMERAL:
            return " : ".join(codes)
    units = kind.printed
    if kind.offsets:
        shifted = [EXACT.normalize(EXACT.subtract(number, kind.offsets[kind.unit])) for number in numbers]
        # Far from room temperature the difference has more digits than the float itself.
        if max(len(number.as_tuple().digits) for number in shifted) <= _MOST_DIGITS_OF_A_FLOAT:
            numbers = shifted
        else:
            units = [(0, "K")]
    # Of texts of one length, the one whose unit suits the greatest value comes first.
    middle_digit = max(numbers, key=abs).adjusted() - 1
    texts = [
        f"{' : '.join(numeral(EXACT.scaleb(number, -shift)) for number in numbers)} {unit}".rstrip()
        for shift, unit in sorted(units, key=lambda unit: abs(middle_digit - unit[0]))
    ]
    if len(values) > 1:
        texts.append(" : ".join(compact([value], kind) for value in values))
    return min(texts, key=len)


def _written(kind: str, *values: float) -> str:
    """Write values that a text of this kind can hold."""
    known = kind_named(kind)
    for value in values:
        if not math.isfinite(value) or value < known.minimum:
            accepted = f"a finite number{'' if math.isinf(known.minimum) else ' of 0 or more'}"
            raise QuantityError(kind, value, "which no text can hold", accepted)
    return compact(values, known)


def format_resistance(ohm: float) -> str:
    """Write a resistance in the letter code of IEC 60062, upper case.

    Parameters
    ----------
    ohm : float
        Resistance [ohm].

    Returns
    -------
    str
        ``R47``, ``47R``, ``4K7``, ``1M``, with as many digits as the float needs; a number with a unit where
        even the code would be too long to read.

    Raises
    ------
    QuantityError
        If the value is negative or not finite.

    Examples
    --------
    >>> [format_resistance(ohm) for ohm in (0.47, 47.0, 1020.0, 15800.0, 1e6)]
    ['R47', '47R', '1K02', '15K8', '1M']
    """
    return _written("resistance", ohm)


def format_quantity(value: float, kind: str, digits: int = 3) -> str:
    """Write a quantity for reading, rounded, with an SI prefix and a unit.

    Parameters
    ----------
    value : float
        Value [SI unit of `kind`].
    kind : str
        Key in `KINDS`.
    digits : int
        Significant digits [-]; a temperature has at most ``digits - 1`` decimals. Trailing zeros are dropped.

    Returns
    -------
    str
        Text such as ``1.94 mA``; ``undefined`` for a NaN, and an infinite value as ``∞``. Halves are rounded
        away from zero, on the shortest decimal number that stands for the float.

    Raises
    ------
    QuantityError
        If fewer than one digit is asked for.

    Examples
    --------
    >>> format_quantity(0.0019439, "current"), format_quantity(298.15, "temperature")
    ('1.94 mA', '25 °C')
    """
    known = kind_named(kind)
    if digits < 1:
        raise QuantityError("digits", digits, "which is too few", "1 or more", ("1",))
    if math.isnan(value):
        return "undefined"
    if math.isinf(value):
        return f"{'-' if value < 0 else ''}∞ {known.unit}".rstrip()
    number = EXACT.subtract(_shortest(value), known.offsets.get(known.unit, Decimal(0)))
    place = number.adjusted() - digits + 1
    if known.offsets:
        # Near 0 °C significant digits would be those of the rounding error of the kelvin value.
        place = max(place, 1 - digits)
    rounded = number.quantize(Decimal((0, (1,), place)), ROUND_HALF_UP, EXACT)
    if not rounded:
        return f"0 {known.unit}".rstrip()
    units = known.printed
    shift, unit = max((choice for choice in units if choice[0] <= rounded.adjusted()), default=units[0])
    return f"{numeral(EXACT.scaleb(rounded, -shift))} {unit}".rstrip()


def format_exact(value: float, kind: str) -> str:
    """Write a quantity so that `parse` reads back the same float.

    Parameters
    ----------
    value : float
        Value [SI unit of `kind`].
    kind : str
        Key in `KINDS`.

    Returns
    -------
    str
        The shortest such text; a resistance in letter code, a temperature in Celsius unless that takes more
        digits than the float has.

    Raises
    ------
    QuantityError
        If the value is not finite or goes below the least value of its kind.

    Examples
    --------
    >>> format_exact(1.5e-8, "current"), format_exact(0.01, "ratio"), format_exact(1800.0, "resistance")
    ('15 nA', '1 %', '1K8')
    """
    return _written(kind, value)


def format_spread(spread: Spread, kind: str) -> str:
    """Write a spread so that `parse_spread` reads back the same.

    Parameters
    ----------
    spread : Spread
        The spread [SI unit of `kind`].
    kind : str
        Key in `KINDS`.

    Returns
    -------
    str
        ``low : nominal : high``, or one value for a spread of no width.

    Raises
    ------
    QuantityError
        If a value goes below the least value of its kind.

    Examples
    --------
    >>> format_spread(Spread(273.15, 298.15, 343.15), "temperature")
    '0 : 25 : 70 °C'
    """
    if spread.low == spread.high:
        return _written(kind, spread.nominal)
    return _written(kind, spread.low, spread.nominal, spread.high)


def format_limit(interval: Interval, kind: str) -> str:
    """Write a limit so that `parse_limit` reads back the same, whatever its natural sense.

    Parameters
    ----------
    interval : Interval
        What is allowed [SI unit of `kind`].
    kind : str
        Key in `KINDS`.

    Returns
    -------
    str
        ``>= x``, ``<= x`` or ``low : high``.

    Raises
    ------
    QuantityError
        If both sides are open, or a value goes below the least value of its kind.

    Examples
    --------
    >>> format_limit(Interval(3.0, float("inf")), "voltage")
    '>= 3 V'
    """
    if math.isinf(interval.low) and math.isinf(interval.high):
        raise QuantityError("limit", interval, "which has no bound", "an interval with at least one bound")
    if math.isinf(interval.high):
        return f">= {_written(kind, interval.low)}"
    if math.isinf(interval.low):
        return f"<= {_written(kind, interval.high)}"
    return _written(kind, interval.low, interval.high)


def format_target(target: Target, kind: str) -> str:
    """Write a target so that `parse_target` reads back the same.

    Parameters
    ----------
    target : Target
        Target and window [SI unit of `kind`].
    kind : str
        Key in `KINDS`.

    Returns
    -------
    str
        ``low : nominal : high``, one value, ``>= x`` or ``<= x``.

    Raises
    ------
    QuantityError
        If a value goes below the least value of its kind.

    Examples
    --------
    >>> format_target(Target(0.002, 0.0017, 0.0023), "current")
    '1.7 : 2 : 2.3 mA'
    """
    if target.nominal is None:
        return format_limit(target.window, kind)
    if math.isinf(target.low):
        return _written(kind, target.nominal)
    return _written(kind, target.low, target.nominal, target.high)
