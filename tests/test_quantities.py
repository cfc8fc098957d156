"""Checks of text to SI numbers and back.

Floats are compared with ``==`` throughout: a text means one decimal number, and the float nearest to it is
unique. Expected values come from exact fractions, from mpmath, from scipy's constants, or are written out by
hand from the meaning of the SI prefixes (SI Brochure, 9th edition, 2019, table 7).
"""

import doctest
import importlib
import math
import pickle
import subprocess
import sys
from collections.abc import Callable
from contextlib import suppress
from decimal import Decimal
from fractions import Fraction
from pathlib import Path

import mpmath
import numpy as np
import pytest
import scipy.constants
from hypothesis import given
from hypothesis import strategies as st

from synth.quantities import (
    KINDS,
    Interval,
    QuantityError,
    RestpointError,
    Spread,
    Target,
    format_exact,
    format_limit,
    format_quantity,
    format_resistance,
    format_spread,
    format_target,
    parse,
    parse_limit,
    parse_spread,
    parse_target,
)

ROOT = Path(__file__).resolve().parents[1]
INF = math.inf
FIELD = "some.field"
# SI Brochure, table 7; capital K for kilo is the letter code's (IEC 60062) and serves resistances only.
PREFIXES = {"f": -15, "p": -12, "n": -9, "u": -6, "µ": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9, "T": 12}

finite = st.floats(allow_nan=False, allow_infinity=False)
kinds = st.sampled_from(sorted(KINDS))


def values_of(kind: str) -> st.SearchStrategy[float]:
    """Every float that a text of this kind can mean."""
    return finite.filter(lambda value: value >= KINDS[kind].minimum)


@st.composite
def kind_and_rising(draw: st.DrawFn, count: int) -> tuple[str, list[float]]:
    kind = draw(kinds)
    return kind, sorted(draw(st.lists(values_of(kind), min_size=count, max_size=count)))


def refusal(read: Callable[[], object]) -> QuantityError:
    with pytest.raises(QuantityError) as caught:
        read()
    return caught.value


# --- Reading one quantity -------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "kind", "value"),
    [
        # The examples of the design, section 3.
        ("4k7", "resistance", 4700.0),
        ("4K7", "resistance", 4700.0),
        ("4.7k", "resistance", 4700.0),
        ("4,7 kΩ", "resistance", 4700.0),
        ("4700 ohm", "resistance", 4700.0),
        ("R47", "resistance", 0.47),
        ("2mA", "current", 0.002),
        ("500 uA", "current", 0.0005),
        ("500 \N{MICRO SIGN}A", "current", 0.0005),
        ("500 \N{GREEK SMALL LETTER MU}A", "current", 0.0005),
        ("12V", "voltage", 12.0),
        ("-10°C", "temperature", 263.15),
        ("1 %", "ratio", 0.01),
        ("100 ppm/K", "temperature_coefficient", 0.0001),
        # Other spellings.
        ("15 nA", "current", 15e-9),
        ("1e-3 A", "current", 0.001),
        ("1E+3 V", "voltage", 1000.0),
        (".5 V", "voltage", 0.5),
        ("+5 V", "voltage", 5.0),
        ("  5   V ", "voltage", 5.0),
        ("5\N{NO-BREAK SPACE}V", "voltage", 5.0),
        ("\N{MINUS SIGN}10 °C", "temperature", 263.15),
        ("-0 V", "voltage", 0.0),
        ("25 C", "temperature", 298.15),
        ("25 degC", "temperature", 298.15),
        ("298 K", "temperature", 298.0),
        ("298 \N{KELVIN SIGN}", "temperature", 298.0),
        ("10M", "resistance", 10e6),
        ("10Mohm", "resistance", 10e6),
        ("10 M\N{GREEK CAPITAL LETTER OMEGA}", "resistance", 10e6),
        ("10 M\N{OHM SIGN}", "resistance", 10e6),
        ("4.7 K", "resistance", 4700.0),
        ("4.7 Kohm", "resistance", 4700.0),
        ("4k7Ω", "resistance", 4700.0),
        ("4R7 ohm", "resistance", 4.7),
        ("47 R", "resistance", 47.0),
        ("47 Ohm", "resistance", 47.0),
        ("47 ohms", "resistance", 47.0),
        ("10 mohm", "resistance", 0.01),
        ("0R", "resistance", 0.0),
        ("0.01", "ratio", 0.01),
        ("0", "ratio", 0.0),
        ("150 %", "ratio", 1.5),
        ("110", "gain", 110.0),
        ("1e2", "gain", 100.0),
        ("100 ppm/°C", "temperature_coefficient", 0.0001),
        ("-50 ppm", "temperature_coefficient", -0.00005),
        ("0,25 W", "power", 0.25),
        ("20 ms", "time", 0.02),
        ("455 kHz", "frequency", 455000.0),
        ("4n7", "capacitance", 4.7e-9),
        ("p33", "capacitance", 0.33e-12),
        ("10µ", "capacitance", 10e-6),
        ("10 µF", "capacitance", 10e-6),
        ("250 K/W", "thermal_resistance", 250.0),
        ("250 °C/W", "thermal_resistance", 250.0),
    ],
)
def test_text_has_exactly_its_value(text: str, kind: str, value: float) -> None:
    assert parse(text, kind, FIELD) == value


@pytest.mark.parametrize(
    ("code", "ohm"),
    # From memory: the examples of resistance marking in IEC 60062, clause on letter and digit codes.
    [
        ("R10", 0.1), ("R33", 0.33), ("R332", 0.332), ("1R0", 1.0), ("3R3", 3.3), ("3R32", 3.32),
        ("10R", 10.0), ("33R", 33.0), ("33R2", 33.2), ("59R04", 59.04), ("100R", 100.0), ("332R", 332.0),
        ("590R4", 590.4),
        ("1K0", 1e3), ("3K3", 3.3e3), ("5K904", 5904.0), ("10K", 10e3), ("33K", 33e3), ("59K04", 59040.0),
        ("100K", 100e3), ("1M0", 1e6), ("3M3", 3.3e6), ("10M", 10e6), ("59M04", 59.04e6),
        ("1G0", 1e9), ("3G3", 3.3e9), ("10G", 10e9), ("1T0", 1e12), ("3T32", 3.32e12), ("10T", 10e12),
    ],
)  # fmt: skip
def test_letter_codes_of_the_standard(code: str, ohm: float) -> None:
    assert parse(code, "resistance", FIELD) == ohm
    assert parse(format_resistance(ohm), "resistance", FIELD) == ohm


@given(
    digits=st.from_regex(r"[+-]?[0-9]{1,20}(\.[0-9]{1,20})?(e[+-]?[0-9]{1,2})?", fullmatch=True),
    prefix=st.sampled_from(sorted(PREFIXES)),
    gap=st.sampled_from(["", " "]),
)
def test_value_is_the_float_nearest_to_the_decimal_number(digits: str, prefix: str, gap: str) -> None:
    exact = Fraction(digits) * Fraction(10) ** PREFIXES[prefix]
    assert parse(f"{digits}{gap}{prefix}V", "voltage", FIELD) == float(exact)


@given(digits=st.from_regex(r"[0-9]{1,10}(\.[0-9]{1,20})?(e-[0-9]{1,3})?", fullmatch=True))
def test_celsius_is_added_exactly(digits: str) -> None:
    zero = Fraction(str(scipy.constants.zero_Celsius))
    exact = Fraction(digits) + zero
    if Fraction(digits) == 0 or float(Fraction(digits)) > 0:
        assert parse(f"{digits} °C", "temperature", FIELD) == float(exact)


@pytest.mark.parametrize(
    "given_number", [12, 12.0, np.float64(12), np.float32(12), np.int64(12), Fraction(12)]
)
def test_number_passes_as_si(given_number: float) -> None:
    value = parse(given_number, "voltage", FIELD)
    assert (type(value), value) == (float, 12.0)


def test_number_for_a_temperature_is_kelvin_and_for_a_ratio_a_fraction() -> None:
    assert parse(298.15, "temperature", FIELD) == 298.15
    assert parse(1.5, "ratio", FIELD) == 1.5


@pytest.mark.parametrize("zero", ["-0 V", "-0.0 mV", -0.0])
def test_zero_has_no_sign(zero: str | float) -> None:
    assert math.copysign(1.0, parse(zero, "voltage", FIELD)) == 1.0


BOTH_SIDES_OF_A_RULE = [
    ("4,7 ohm", "4,700 ohm", "resistance"),
    ("4,7000 ohm", "4,7e3,1 ohm", "resistance"),
    ("0.99", "1", "ratio"),
    ("-0.99", "-1", "ratio"),
    ("0 ohm", "-0.001 ohm", "resistance"),
    ("-273.15 °C", "-273.16 °C", "temperature"),
    ("1" + 196 * "0" + "e1V", "1" + 197 * "0" + "e1 V", "voltage"),
    ("1.7e308 V", "1.8e308 V", "voltage"),
    ("5e-324 V", "2e-324 V", "voltage"),
    ("5 kV", "5 KV", "voltage"),
    ("5 kohm", "5 kOHM", "resistance"),
]


@pytest.mark.parametrize(("accepted", "refused", "kind"), BOTH_SIDES_OF_A_RULE)
def test_rule_divides_accepted_from_refused(accepted: str, refused: str, kind: str) -> None:
    assert math.isfinite(parse(accepted, kind, FIELD))
    assert FIELD in str(refusal(lambda: parse(refused, kind, FIELD)))


@pytest.mark.parametrize(
    ("text", "kind", "reason", "nearest"),
    [
        ("10k", "voltage", "has a prefix but no unit", ("10 kV",)),
        ("10K", "voltage", "is a resistance", ("10 kV",)),
        ("2 mA", "resistance", "is a current", ("2 mohm",)),
        ("5 V", "current", "is a voltage", ("5 A",)),
        ("110 V", "gain", "is a voltage", ("110",)),
        ("10k", "gain", "has a prefix but no unit", ("10000",)),
        ("10m", "ratio", "has a prefix but no unit", ("0.01",)),
        # Per cent in volts would be a guess off by a hundred.
        ("5 %", "voltage", "is a ratio", ("12 V",)),
        ("50 ppm", "ratio", "is a temperature coefficient", ("1 %",)),
        ("4.7.1k", "resistance", "has more than one decimal mark", ("4.7k",)),
        ("4,7,1 ohm", "resistance", "has more than one decimal mark", ("471 ohm", "4,7 ohm")),
        ("4,700,000 ohm", "resistance", "has more than one decimal mark", ("4700000 ohm",)),
        ("1,234.5 ohm", "resistance", "has more than one decimal mark", ("1234.5 ohm",)),
        ("", "voltage", "is empty", ("12 V",)),
        (" \t", "voltage", "is empty", ("12 V",)),
        ("NaN", "voltage", "does not begin with a finite number", ("12 V",)),
        ("nan V", "voltage", "does not begin with a finite number", ("12 V",)),
        ("-inf A", "current", "does not begin with a finite number", ("2 mA",)),
        ("about 5 V", "voltage", "does not begin with a finite number", ("5 V",)),
        ("1e400 V", "voltage", "is beyond the largest number that can be held", ("12 V",)),
        ("1e99999999999999999999 V", "voltage", "is beyond the largest number that can be held", ("12 V",)),
        ("1e99999999999999999999 °C", "temperature", "is beyond the largest number", ("25 °C",)),
        ("1e-400 A", "current", "is nearer to zero than the least number that can be held", ("2 mA",)),
        ("4,700 ohm", "resistance", "is ambiguous", ("4700 ohm", "4.700 ohm")),
        ("4,700", "resistance", "is ambiguous", ("4700 ohm", "4.700 ohm")),
        ("0,470e3 V", "voltage", "is ambiguous", ("0470e3 V", "0.470e3 V")),
        ("12", "voltage", "has no unit", ("12 V",)),
        ("1e3", "voltage", "has no unit", ("1e3 V",)),
        ("4700", "resistance", "has no unit", ("4700 ohm", "4K7")),
        ("25", "temperature", "has no unit", ("25 °C",)),
        ("100", "temperature_coefficient", "has no unit", ("100 ppm/K",)),
        ("1", "ratio", "is bare and 1 or more, so that per cent may be meant", ("1 %",)),
        ("10m", "resistance", "has a prefix but no unit", ("10 mohm", "10M")),
        ("-5 ohm", "resistance", "goes below 0R", ("5R",)),
        ("-110", "gain", "goes below 0", ("110",)),
        ("-1 W", "power", "goes below 0 W", ("1 W",)),
        ("-300 °C", "temperature", "goes below -273.15 °C", ("-273.15 °C",)),
        ("2.2meg", "resistance", "has the unknown unit 'meg'", ("2.2 Mohm",)),
        ("2.2meg", "gain", "has the unknown unit 'meg'", ("110",)),
        ("2 ma", "current", "has the unknown unit 'ma'", ("2 mA",)),
        ("12 volts", "voltage", "has the unknown unit 'volts'", ("12 V",)),
        ("300 kelvin", "temperature", "has the unknown unit 'kelvin'", ("300 K",)),
        # The first letter is no prefix here, and a guess could be off by a thousand.
        ("5 milliamps", "current", "has the unknown unit 'milliamps'", ("2 mA",)),
        ("4.7k1", "resistance", "has the unknown unit 'k1'", ("4K7",)),
        ("4K7F", "resistance", "has the unknown unit 'KF'", ("4.7 kohm",)),
        ("4k7", "voltage", "has a prefix but no unit", ("4.7 kV",)),
        ("5V1", "voltage", "has a letter between its digits", ("5.1 V",)),
        ("1_000 ohm", "resistance", "has a gap or a mark between its digits", ("1000 ohm",)),
        ("4 700 ohm", "resistance", "has a gap or a mark between its digits", ("4700 ohm",)),
        ("\N{ARABIC-INDIC DIGIT FOUR}7 ohm", "resistance", "has digits other than 0 to 9", ("47 ohm",)),
        ("\N{FULLWIDTH DIGIT FIVE} V", "voltage", "has digits other than 0 to 9", ("5 V",)),
        ("10 : 20 V", "voltage", "is more than one value", ("12 V",)),
        ("10 V ± 1 V", "voltage", "is more than one value", ("12 V",)),
        (201 * "1", "voltage", "is longer than 200 characters", ("12 V",)),
        (True, "gain", "is of type bool, neither a text nor a number", ("110",)),
        (np.True_, "gain", "is of type bool", ("110",)),
        (None, "voltage", "is of type NoneType, neither a text nor a number", ("12 V",)),
        ([5.0], "voltage", "is of type list, neither a text nor a number", ("12 V",)),
        (math.nan, "voltage", "is not a finite number", ("12 V",)),
        (-INF, "voltage", "is not a finite number", ("12 V",)),
        (10**400, "voltage", "is not a finite number", ("12 V",)),
        (-5.0, "resistance", "goes below 0R", ("5R",)),
    ],
)
def test_refusal_says_why_and_what_is_nearest(
    text: str | float, kind: str, reason: str, nearest: tuple[str, ...]
) -> None:
    error = refusal(lambda: parse(text, kind, FIELD))
    assert error.reason.startswith(f"which {reason}")
    assert error.nearest == nearest
    assert (error.field, error.read, error.accepted) == (FIELD, text, KINDS[kind].accepted)


def test_message_is_one_sentence_with_field_read_accepted_and_nearest() -> None:
    error = refusal(lambda: parse("10k", "voltage", "supply.vcc"))
    assert str(error) == (
        "supply.vcc: read '10k', which has a prefix but no unit, "
        "accepted is a voltage such as '12 V' or '650 mV', nearest is '10 kV'"
    )


def test_message_shortens_a_long_text_and_keeps_it_on_one_line() -> None:
    message = str(refusal(lambda: parse("1\n" * 100_000, "voltage", FIELD)))
    assert len(message) < 250
    assert "\n" not in message


def test_error_is_a_value_error_and_survives_the_way_between_processes() -> None:
    error = refusal(lambda: parse("2 mA", "resistance", "values.r1"))
    assert isinstance(error, RestpointError)
    assert isinstance(error, ValueError)
    copy = pickle.loads(pickle.dumps(error))
    assert (type(copy), str(copy), copy.nearest) == (QuantityError, str(error), error.nearest)


def test_unknown_kind_is_refused() -> None:
    with pytest.raises(QuantityError, match=r"kind: read 'volume', which is unknown, .*voltage, current"):
        parse("5 V", "volume", FIELD)


@pytest.mark.parametrize(
    "text",
    [200 * "1", 100 * "1.", 100 * ",1", 100 * "1 ", 200 * "±", 200 * ":", 200 * "-", 200 * "R", 100 * "k1",
     "e".join(100 * "1"), "1e" + 198 * "9", 199 * "9" + "V", 10_000_000 * "1"],
)  # fmt: skip
def test_hostile_text_is_read_or_refused(text: str) -> None:
    # Backtracking that grows with the square or worse would keep this from ending.
    for read in (parse, parse_spread, parse_target):
        for kind in KINDS:
            with suppress(QuantityError):
                read(text, kind, FIELD)


# --- Spreads --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "kind", "low", "nominal", "high"),
    [
        ("12 V", "voltage", 12.0, 12.0, 12.0),
        ("9 : 16 V", "voltage", 9.0, 12.5, 16.0),
        ("1.7 : 2 : 2.3 mA", "current", 0.0017, 0.002, 0.0023),
        ("2 mA ± 15 %", "current", 0.0017, 0.002, 0.0023),
        ("12 V ± 5 %", "voltage", 11.4, 12.0, 12.6),
        ("12 V +- 5 %", "voltage", 11.4, 12.0, 12.6),
        ("12V+/-5%", "voltage", 11.4, 12.0, 12.6),
        ("-5 V ± 10 %", "voltage", -5.5, -5.0, -4.5),
        ("0.65 V ± 50 mV", "voltage", 0.6, 0.65, 0.7),
        ("12 ± 0.6 V", "voltage", 11.4, 12.0, 12.6),
        ("4K7 ± 47R", "resistance", 4653.0, 4700.0, 4747.0),
        ("1K : 2K2", "resistance", 1000.0, 1600.0, 2200.0),
        ("2e3 : 4e3 V", "voltage", 2000.0, 3000.0, 4000.0),
        ("2e3 ± 1e3 V", "voltage", 1000.0, 2000.0, 3000.0),
        ("10 ohm : 10 Mohm", "resistance", 10.0, 5000005.0, 10e6),
        ("-300 : 0 ppm/K", "temperature_coefficient", -0.0003, -0.00015, 0.0),
        ("0.5 : 1 %", "ratio", 0.005, 0.0075, 0.01),
        ("5 % ± 10 %", "ratio", 0.045, 0.05, 0.055),
        ("0.05 ± 0.01", "ratio", 0.04, 0.05, 0.06),
        ("110 ± 20", "gain", 90.0, 110.0, 130.0),
        ("0 : 25 : 70 °C", "temperature", 273.15, 298.15, 343.15),
        ("25 °C ± 5 K", "temperature", 293.15, 298.15, 303.15),
        ("25 °C ± 5 °C", "temperature", 293.15, 298.15, 303.15),
        ("25 ± 5 °C", "temperature", 293.15, 298.15, 303.15),
        ("298 K ± 5 °C", "temperature", 293.0, 298.0, 303.0),
        ("5 : 5 V", "voltage", 5.0, 5.0, 5.0),
        (12, "voltage", 12.0, 12.0, 12.0),
    ],
)
def test_spread(text: str | float, kind: str, low: float, nominal: float, high: float) -> None:
    assert parse_spread(text, kind, FIELD) == Spread(low, nominal, high)


@given(
    middle=st.decimals(min_value="0.001", max_value="1000", places=3),
    share=st.decimals(min_value=0, max_value=100, places=2),
)
def test_relative_half_width_is_exact(middle: Decimal, share: Decimal) -> None:
    width = Fraction(middle) * Fraction(share) / 100
    expected = Spread(float(Fraction(middle) - width), float(middle), float(Fraction(middle) + width))
    assert parse_spread(f"{middle} V ± {share} %", "voltage", FIELD) == expected


def test_geometric_mean_lies_between_two_ends_of_a_gain() -> None:
    # mpmath at 50 digits, rounded once.
    with mpmath.workdps(50):
        expected = float(mpmath.sqrt(110 * 450))
    assert parse_spread("110 : 450", "gain", FIELD, nominal="geometric") == Spread(110.0, expected, 450.0)


def test_printed_nominal_wins_over_the_rule() -> None:
    assert parse_spread("110 : 290 : 450", "gain", FIELD, nominal="geometric").nominal == 290.0


@pytest.mark.parametrize(
    ("text", "nominal"),
    [
        ("0 : 70 °C", 298.15),
        ("-40 : 105 °C", 298.15),
        ("25 : 70 °C", 298.15),
        ("30 : 70 °C", 303.15),
        ("-10 : 20 °C", 293.15),
    ],
)
def test_ambient_is_25_celsius_or_the_nearer_end(text: str, nominal: float) -> None:
    assert parse_spread(text, "temperature", FIELD, nominal="ambient").nominal == nominal


@pytest.mark.parametrize(
    ("text", "kind", "reason", "nearest"),
    [
        ("50 : 10 °C", "temperature", "is not in rising order", ("10 : 50 °C",)),
        ("1 : 3 : 2 mA", "current", "is not in rising order", ("1 : 2 : 3 mA",)),
        ("450 : 110", "gain", "is not in rising order", ("110 : 450",)),
        ("0 : : 70 °C", "temperature", "has an empty part", ("0 : 70 °C",)),
        (": 5 V", "voltage", "has an empty part", ("5 V",)),
        ("5 V ±", "voltage", "has an empty part", ("5 V",)),
        ("± 5 %", "voltage", "has an empty part", ("12 V",)),
        ("1 : 2 : 3 : 4 V", "voltage", "has more than three parts", ("1 : 4 V",)),
        ("1 V ± 2 V ± 3 V", "voltage", "has more than one '±', or mixes it with ':'", ("12 V",)),
        ("1 : 2 V ± 3 %", "voltage", "has more than one '±', or mixes it with ':'", ("12 V",)),
        ("5 V ± -3 %", "voltage", "has a negative half-width", ("5 V ± 3 %",)),
        ("5 V ± - 100 mV", "voltage", "has a negative half-width", ("5 V ± 100 mV",)),
        ("25 °C ± 10 %", "temperature", "has a half-width in per cent of a temp", ("25 °C ± 10 °C",)),
        ("12 V ± 5", "voltage", "has a half-width without a unit", ("12 V ± 5 %", "12 V ± 5 V")),
        ("2 mA ± 1", "current", "has a half-width without a unit", ("2 mA ± 1 %", "2 mA ± 1 mA")),
        ("12 ± 5 %", "voltage", "has the part '12' that has no unit", ("12 V ± 5 %",)),
        ("12 V ± 2 mA", "voltage", "has the part '2 mA' that is a current", ("12 V ± 2 mV",)),
        ("5 V ± 4,700 %", "voltage", "has the part '4,700 %' that is amb", ("5 V ± 4700 %", "5 V ± 4.700 %")),
        ("4,700 : 5,1 ohm", "resistance", "has the part '4,700 ohm' that is amb", ("4700 ohm", "4.700 ohm")),
        ("1 mA : 2", "current", "has a unit, but not on its last part", ("1 mA : 2 mA",)),
        ("R47 : 10", "resistance", "has a unit, but not on its last part", ("R47 : 10 ohm",)),
        ("0.5 % : 1", "ratio", "has a unit, but not on its last part", ("0.5 % : 1 %",)),
        ("1 : 2K2", "resistance", "has the part '1' that has no unit", ("1 ohm", "1R")),
        ("-5 : 10 ohm", "resistance", "goes below 0R", ("0R : 10R",)),
        ("100 ohm ± 150 %", "resistance", "goes below 0R", ("0R : 100R : 250R",)),
        (">= 5 V", "voltage", "does not begin with a finite number", ("5 V",)),
        ("2 mA", "voltage", "is a current", ("2 mV",)),
        (Spread(-1.0, 0.0, 1.0), "power", "goes below 0 W", ("125 mW",)),
    ],
)
def test_spread_is_refused(text: str | Spread, kind: str, reason: str, nearest: tuple[str, ...]) -> None:
    error = refusal(lambda: parse_spread(text, kind, FIELD))
    assert error.reason.startswith(f"which {reason}")
    assert error.nearest == nearest
    assert error.field == FIELD
    assert "'nominal ± x'" in error.accepted


def test_geometric_mean_of_negative_ends_is_refused() -> None:
    with pytest.raises(QuantityError, match=r"read '-2 : 2 V', which has no geometric mean"):
        parse_spread("-2 : 2 V", "voltage", FIELD, nominal="geometric")


def test_unknown_nominal_rule_is_refused() -> None:
    with pytest.raises(QuantityError, match=r"nominal: read 'median', .* one of mean, geometric, ambient"):
        parse_spread("1 : 2 V", "voltage", FIELD, nominal="median")


# --- Limits and targets ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "sense", "low", "high"),
    [
        (">= 3 V", "<=", 3.0, INF),
        ("<= 3 V", ">=", -INF, 3.0),
        ("\N{GREATER-THAN OR EQUAL TO}3V", "<=", 3.0, INF),
        ("\N{LESS-THAN OR EQUAL TO}3V", ">=", -INF, 3.0),
        ("3 V", ">=", 3.0, INF),
        ("3 V", "<=", -INF, 3.0),
        (3, ">=", 3.0, INF),
        (3.0, "<=", -INF, 3.0),
        ("1 : 2 V", "<=", 1.0, 2.0),
        (Interval(1.0, 2.0), "<=", 1.0, 2.0),
    ],
)
def test_limit(text: str | float | Interval, sense: str, low: float, high: float) -> None:
    assert parse_limit(text, "voltage", FIELD, sense) == Interval(low, high)


@pytest.mark.parametrize(
    ("text", "kind", "reason", "nearest"),
    [
        ("=> 3 V", "voltage", "begins with '=>'", (">= 3 V",)),
        ("< 3 V", "voltage", "begins with '<'", ("<= 3 V",)),
        ("= 3 V", "voltage", "begins with '='", ("3 V",)),
        (">= 10k", "voltage", "has a prefix but no unit", (">= 10 kV",)),
        ("<= 4,700 ohm", "resistance", "is ambiguous", ("<= 4700 ohm", "<= 4.700 ohm")),
        (">=", "voltage", "is empty", ("12 V",)),
        (">= 1 : 2 V", "voltage", "is more than one value", ("12 V",)),
        ("1 : 2 : 3 V", "voltage", "is a spread, not a limit", ("1 : 3 V",)),
        ("5 V ± 10 %", "voltage", "is a spread, not a limit", ("4.5 : 5.5 V",)),
        ("2 : 1 V", "voltage", "is not in rising order", ("1 : 2 V",)),
        (Interval(-1.0, INF), "power", "goes below 0 W", ("125 mW",)),
        (Interval(-INF, -1.0), "power", "goes below 0 W", ("125 mW",)),
    ],
)
def test_limit_is_refused(text: str | Interval, kind: str, reason: str, nearest: tuple[str, ...]) -> None:
    error = refusal(lambda: parse_limit(text, kind, FIELD, ">="))
    assert error.reason.startswith(f"which {reason}")
    assert error.nearest == nearest
    assert error.field == FIELD
    assert "'<= x'" in error.accepted


def test_unknown_sense_is_refused() -> None:
    with pytest.raises(QuantityError, match=r"sense: read '>', .* accepted is '>=' or '<='"):
        parse_limit("3 V", "voltage", FIELD, ">")


@pytest.mark.parametrize(
    ("text", "kind", "target"),
    [
        ("2 mA ± 15 %", "current", Target(0.002, 0.0017, 0.0023)),
        ("1.7 : 2 : 2.3 mA", "current", Target(0.002, 0.0017, 0.0023)),
        ("1.7 : 2.3 mA", "current", Target(0.002, 0.0017, 0.0023)),
        ("5 V", "voltage", Target(5.0, -INF, INF)),
        (5, "voltage", Target(5.0, -INF, INF)),
        (">= 3 V", "voltage", Target(None, 3.0, INF)),
        ("<= 3 V", "voltage", Target(None, -INF, 3.0)),
        ("5 V ± 0 %", "voltage", Target(5.0, 5.0, 5.0)),
        (Target(None, 3.0, INF), "voltage", Target(None, 3.0, INF)),
    ],
)
def test_target(text: str | float | Target, kind: str, target: Target) -> None:
    assert parse_target(text, kind, FIELD) == target


@pytest.mark.parametrize(
    ("text", "kind", "reason", "nearest"),
    [
        ("10k", "voltage", "has a prefix but no unit", ("10 kV",)),
        ("2.3 : 2 : 1.7 mA", "current", "is not in rising order", ("1.7 : 2 : 2.3 mA",)),
        ("> 3 V", "voltage", "begins with '>'", (">= 3 V",)),
        (Target(-5.0, -INF, INF), "power", "goes below 0 W", ("125 mW",)),
        (Target(None, -INF, -5.0), "power", "goes below 0 W", ("125 mW",)),
    ],
)
def test_target_is_refused(text: str | Target, kind: str, reason: str, nearest: tuple[str, ...]) -> None:
    error = refusal(lambda: parse_target(text, kind, FIELD))
    assert error.reason.startswith(f"which {reason}")
    assert error.nearest == nearest
    assert error.field == FIELD
    assert "'nominal ± x'" in error.accepted


# --- Values ---------------------------------------------------------------------------------------


def test_spread_knows_its_width_and_what_it_contains() -> None:
    spread = Spread(1, 2, 4)
    assert spread.width == 3.0
    assert [spread.contains(value) for value in (0.5, 1.0, 4.0, 4.5)] == [False, True, True, False]
    assert Spread.exact(5.0) == Spread(5.0, 5.0, 5.0)


def test_interval_contains_its_ends() -> None:
    assert [Interval(-INF, 4).contains(value) for value in (-1e300, 4.0, 4.5)] == [True, True, False]


def test_window_of_a_target_is_an_interval() -> None:
    assert Target(2.0, 1.0, 3.0).window == Interval(1.0, 3.0)
    assert Target(2.0, -INF, INF).window == Interval(-INF, INF)


def test_values_hold_plain_floats_and_are_frozen() -> None:
    spread = Spread(np.float64(1), 2, np.int64(3))
    assert [type(value) for value in (spread.low, spread.nominal, spread.high)] == [float, float, float]
    assert type(Target(np.float64(2), -INF, INF).nominal) is float
    with pytest.raises(AttributeError, match="low"):
        spread.__setattr__("low", 0.0)


@pytest.mark.parametrize(
    ("build", "message"),
    [
        (lambda: Spread(3.0, 2.0, 1.0), r"spread: read \(3.0, 2.0, 1.0\), .* nearest is '1.0 : 2.0 : 3.0'"),
        (lambda: Spread(1.0, 9.0, 2.0), r"spread: read \(1.0, 9.0, 2.0\), which does not rise"),
        (lambda: Spread(1.0, math.nan, 2.0), r"spread.nominal: read nan, .* accepted is a finite number"),
        (lambda: Spread(0.0, 0.0, INF), r"spread.high: read inf, .* accepted is a finite number"),
        (lambda: Spread("1 V", 2.0, 3.0), r"spread.low: read '1 V'"),
        (lambda: Spread(True, 2.0, 3.0), r"spread.low: read True"),
        (lambda: Interval(2.0, 1.0), r"interval: read \(2.0, 1.0\), .* nearest is '1.0 : 2.0'"),
        (lambda: Interval(INF, INF), r"interval: read \(inf, inf\), which holds no number"),
        (lambda: Interval(-INF, -INF), r"interval: read \(-inf, -inf\), which holds no number"),
        (lambda: Interval(math.nan, 1.0), r"interval.low: read nan, .* infinite where the side is open"),
        (lambda: Target(None, 1.0, 2.0), r"target: read \(None, 1.0, 2.0\), which no text can say"),
        (lambda: Target(None, -INF, INF), r"target: read \(None, -inf, inf\), which no text can say"),
        (lambda: Target(2.0, 1.0, INF), r"target: read \(2.0, 1.0, inf\), which no text can say"),
        (lambda: Target(4.0, 1.0, 3.0), r"target: read \(4.0, 1.0, 3.0\), which no text can say"),
        (lambda: Target(math.nan, 1.0, 3.0), r"target.nominal: read nan, .* accepted is a finite number"),
        (lambda: Target(2.0, INF, INF), r"target: read \(2.0, inf, inf\), which no text can say"),
        (lambda: Target(None, INF, 1.0), r"target: read \(None, inf, 1.0\), which no text can say"),
        (lambda: Spread(0.0, 0.0, 10**400), r"spread.high: read 1000000000.*…, which is not a finite number"),
    ],
)
def test_impossible_value_is_refused(build: Callable[[], object], message: str) -> None:
    with pytest.raises(QuantityError, match=message):
        build()


# --- Writing --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("ohm", "code"),
    # Upper case letter codes, without trailing zeros.
    [
        (4700.0, "4K7"), (0.47, "R47"), (10e3, "10K"), (1e6, "1M"), (15800.0, "15K8"), (47.0, "47R"),
        (4.7, "4R7"), (1020.0, "1K02"), (0.0, "0R"), (0.001, "R001"), (999.0, "999R"), (1000.0, "1K"),
        (59.04, "59R04"),
        (1e9, "1G"), (3.32e12, "3T32"), (10e6, "10M"), (1234567.0, "1M234567"),
    ],
)  # fmt: skip
def test_resistance_is_written_as_a_letter_code(ohm: float, code: str) -> None:
    assert format_resistance(ohm) == code


def test_every_preferred_value_survives_its_letter_code() -> None:
    # Preferred values of IEC 60063 have up to three figures; from 10 mohm to 100 Gohm.
    for figures in range(100, 1000):
        for exponent in range(-4, 9):
            ohm = float(f"{figures}e{exponent}")
            assert parse(format_resistance(ohm), "resistance", FIELD) == ohm


@pytest.mark.parametrize(
    ("value", "kind", "digits", "text"),
    [
        (0.0019439, "current", 3, "1.94 mA"),
        (4.98640, "voltage", 3, "4.99 V"),
        (298.15, "temperature", 3, "25 °C"),
        (263.15, "temperature", 3, "-10 °C"),
        (378.15, "temperature", 3, "105 °C"),
        (273.15 + 4e-6, "temperature", 3, "0 °C"),
        (298.15 + 0.126, "temperature", 3, "25.1 °C"),
        (274.15 + 0.126, "temperature", 3, "1.13 °C"),
        (15e-9, "current", 3, "15 nA"),
        (0.0001, "temperature_coefficient", 3, "100 ppm/K"),
        (0.01, "ratio", 3, "1 %"),
        (0.149269, "ratio", 3, "14.9 %"),
        (0.0, "current", 3, "0 A"),
        (-0.0, "current", 3, "0 A"),
        (0.0, "ratio", 3, "0 %"),
        # Rounding carries into the next prefix.
        (0.9996, "current", 3, "1 A"),
        (0.99949, "current", 3, "999 mA"),
        (999.6e-9, "current", 3, "1 µA"),
        # Halves go away from zero, on the decimal number that one sees.
        (1.945e-3, "current", 3, "1.95 mA"),
        (-1.945e-3, "current", 3, "-1.95 mA"),
        (1.05, "voltage", 2, "1.1 V"),
        (0.0019439, "current", 5, "1.9439 mA"),
        (0.123, "current", 2, "120 mA"),
        (4700.0, "resistance", 3, "4.7 kΩ"),
        (222.486, "gain", 3, "222"),
        (1234.5, "gain", 3, "1230"),
        (0.0, "gain", 3, "0"),
        (4.7e-9, "capacitance", 3, "4.7 nF"),
        (250.0, "thermal_resistance", 3, "250 K/W"),
        (2e-16, "current", 3, "0.2 fA"),
        (5e15, "frequency", 3, "5000 THz"),
        (1e30, "frequency", 3, "1000000000000000000 THz"),
        (1e40, "frequency", 3, "1e28 THz"),
        (INF, "resistance", 3, "∞ Ω"),
        (-INF, "gain", 3, "-∞"),
        (math.nan, "voltage", 3, "undefined"),
        (np.float64(0.002), "current", 3, "2 mA"),
    ],
)
def test_quantity_for_reading(value: float, kind: str, digits: int, text: str) -> None:
    assert format_quantity(value, kind, digits) == text


@given(kind=kinds, value=st.floats(min_value=1e-12, max_value=1e12), digits=st.integers(1, 17))
def test_quantity_for_reading_is_rounded_within_half_a_digit(kind: str, value: float, digits: int) -> None:
    value = value if kind != "temperature" else 273.15 + value % 1000.0
    number, _, printed = format_quantity(value, kind, digits).partition(" ")
    unit = KINDS[kind].unit
    scales = {prefix + unit: Fraction(10) ** power for prefix, power in PREFIXES.items()}
    scales.update({"%": Fraction(1, 100), "ppm/K": Fraction(1, 10**6)})
    exact = Decimal(repr(value)) - Decimal("273.15" if kind == "temperature" else 0)
    last = exact.adjusted() + 1 - digits
    if kind == "temperature":
        last = max(last, 1 - digits)
    assert abs(Fraction(number) * scales[printed] - Fraction(exact)) <= Fraction(10) ** last / 2


def test_fewer_than_one_digit_is_refused() -> None:
    with pytest.raises(QuantityError, match=r"digits: read 0, which is too few"):
        format_quantity(1.0, "voltage", 0)


@pytest.mark.parametrize(
    ("value", "kind", "text"),
    [
        (0.002, "current", "2 mA"),
        (15e-9, "current", "15 nA"),
        (12.0, "voltage", "12 V"),
        (0.05, "voltage", "50 mV"),
        (1500.0, "voltage", "1.5 kV"),
        (0.01, "ratio", "1 %"),
        (0.136384, "ratio", "13.6384 %"),
        (0.0001, "temperature_coefficient", "100 ppm/K"),
        (263.15, "temperature", "-10 °C"),
        (298.1, "temperature", "24.95 °C"),
        (1e22, "temperature", "1e22 K"),
        (1e-30, "temperature", "1e-30 K"),
        (110.0, "gain", "110"),
        (1800.0, "resistance", "1K8"),
        (1e-30, "resistance", "1e-30 Ω"),
        (1e30, "current", "1e30 A"),
        (5e-324, "voltage", "5e-324 V"),
        (0.0, "power", "0 W"),
    ],
)
def test_exact_text(value: float, kind: str, text: str) -> None:
    assert format_exact(value, kind) == text


@given(data=st.data(), kind=kinds)
def test_exact_text_reads_back_to_the_same_float(data: st.DataObject, kind: str) -> None:
    value = data.draw(values_of(kind))
    assert parse(format_exact(value, kind), kind, FIELD) == value


@given(celsius=st.decimals(min_value=-273, max_value=2000, places=4))
def test_celsius_is_saved_as_it_was_typed(celsius: Decimal) -> None:
    text = format_exact(parse(f"{celsius} °C", "temperature", FIELD), "temperature")
    assert Decimal(text.removesuffix(" °C")) == celsius


@pytest.mark.parametrize(
    ("spread", "kind", "text"),
    [
        (Spread(273.15, 298.15, 343.15), "temperature", "0 : 25 : 70 °C"),
        (Spread(0.0017, 0.002, 0.0023), "current", "1.7 : 2 : 2.3 mA"),
        (Spread(0.0, 0.0, 15e-9), "current", "0 : 0 : 15 nA"),
        (Spread(11.4, 12.0, 12.6), "voltage", "11.4 : 12 : 12.6 V"),
        (Spread(-0.0003, 0.0, 0.0003), "temperature_coefficient", "-300 : 0 : 300 ppm/K"),
        (Spread(110.0, 290.0, 450.0), "gain", "110 : 290 : 450"),
        (Spread(10.0, 1000.0, 10e6), "resistance", "10R : 1K : 10M"),
        # One unit for all would need a long row of zeros.
        (Spread(1e-9, 1e-9, 2.0), "current", "1 nA : 1 nA : 2 A"),
        (Spread(12.0, 12.0, 12.0), "voltage", "12 V"),
    ],
)
def test_spread_text(spread: Spread, kind: str, text: str) -> None:
    assert format_spread(spread, kind) == text


@given(drawn=kind_and_rising(3), rule=st.sampled_from(["mean", "geometric", "ambient"]))
def test_spread_text_reads_back_to_the_same(drawn: tuple[str, list[float]], rule: str) -> None:
    kind, values = drawn
    spread = Spread(*values)
    assert parse_spread(format_spread(spread, kind), kind, FIELD, rule) == spread


@given(
    drawn=kind_and_rising(2),
    opened=st.sampled_from(["low", "high", "none"]),
    sense=st.sampled_from([">=", "<="]),
)
def test_limit_text_reads_back_to_the_same(drawn: tuple[str, list[float]], opened: str, sense: str) -> None:
    kind, (low, high) = drawn
    limit = Interval(-INF if opened == "low" else low, INF if opened == "high" else high)
    assert parse_limit(format_limit(limit, kind), kind, FIELD, sense) == limit


@given(drawn=kind_and_rising(3), form=st.sampled_from(["window", "alone", "least", "greatest"]))
def test_target_text_reads_back_to_the_same(drawn: tuple[str, list[float]], form: str) -> None:
    kind, (low, nominal, high) = drawn
    target = {
        "window": Target(nominal, low, high),
        "alone": Target(nominal, -INF, INF),
        "least": Target(None, low, INF),
        "greatest": Target(None, -INF, high),
    }[form]
    assert parse_target(format_target(target, kind), kind, FIELD) == target


@pytest.mark.parametrize(
    ("write", "message"),
    [
        (lambda: format_exact(-5.0, "resistance"), r"resistance: read -5.0, .* a finite number of 0 or more"),
        (lambda: format_exact(INF, "voltage"), r"voltage: read inf, which no text can hold"),
        (lambda: format_exact(-INF, "voltage"), r"voltage: read -inf, which no text can hold"),
        (lambda: format_exact(math.nan, "voltage"), r"voltage: read nan, which no text can hold"),
        (lambda: format_resistance(-1.0), r"resistance: read -1.0, which no text can hold"),
        (lambda: format_spread(Spread(-1.0, 0.0, 1.0), "power"), r"power: read -1.0"),
        (
            lambda: format_limit(Interval(-INF, INF), "voltage"),
            r"limit: read Interval\(.*\), which has no bound",
        ),
        (lambda: format_target(Target(-1.0, -INF, INF), "gain"), r"gain: read -1.0"),
        (lambda: format_exact(1.0, "volume"), r"kind: read 'volume', which is unknown"),
    ],
)
def test_what_no_text_can_hold_is_not_written(write: Callable[[], str], message: str) -> None:
    with pytest.raises(QuantityError, match=message):
        write()


# --- The whole ------------------------------------------------------------------------------------


typed = st.text(alphabet="0123456789.,:±+-<>=%eEkKmMµuRVAΩFWHzs°C/ p\n_", max_size=14) | st.text(max_size=10)


@given(text=typed, kind=kinds)
def test_any_text_is_read_or_refused_with_texts_that_are_read(text: str, kind: str) -> None:
    readers: list[Callable[[str], object]] = [
        lambda text: parse(text, kind, FIELD),
        lambda text: parse_spread(text, kind, FIELD, "geometric"),
        lambda text: parse_limit(text, kind, FIELD, ">="),
        lambda text: parse_target(text, kind, FIELD),
    ]
    for read in readers:
        try:
            read(text)
            continue
        except QuantityError as error:
            nearest = error.nearest
        assert nearest
        for likely in nearest:
            read(likely)


@pytest.mark.parametrize("kind", sorted(KINDS))
def test_examples_in_messages_are_of_their_kind_and_of_no_other(kind: str) -> None:
    for example in KINDS[kind].examples:
        assert math.isfinite(parse(example, kind, FIELD))
    for other in KINDS.keys() - {kind}:
        with pytest.raises(QuantityError, match=f"read '{KINDS[kind].examples[0]}', which "):
            parse(KINDS[kind].examples[0], other, FIELD)


@pytest.mark.parametrize("module", ["ranges", "reading", "writing"])
def test_examples_in_the_docstrings_hold(module: str) -> None:
    results = doctest.testmod(importlib.import_module(f"synth.quantities.{module}"))
    assert results.attempted >= 1
    assert results.failed == 0


def test_module_imports_no_heavy_library() -> None:
    # The house stands in as an empty package, so that none of its other rooms comes along.
    program = (
        "import sys, types\n"
        "house = sys.modules['synth'] = types.ModuleType('synth')\n"
        f"house.__path__ = [{str(ROOT / 'synth')!r}]\n"
        "import synth.quantities\n"
        "heavy = {'numpy', 'scipy', 'pandas', 'click', 'rich', 'matplotlib'}\n"
        "print(sorted(heavy & set(sys.modules)), sorted(name for name in sys.modules if 'synth.' in name))\n"
    )
    run = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    rooms = [f"synth.quantities{part}" for part in ("", ".kinds", ".ranges", ".reading", ".values", ".writing")]
    assert run.stdout == f"[] {rooms}\n"
