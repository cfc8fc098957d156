"""Preferred numbers against the definition in IEC 60063 and the lists that every parts catalogue prints.

Source: IEC 60063:2015, Preferred number series for resistors and capacitors (tables not available; what is
from memory is marked). Significands are three figures, 100 to 999. The formula is worked in integers, so that
no rounding of floats can decide: round(100*10**(k/n)) is the m with (2m-1)**n <= 200**n * 10**k < (2m+1)**n.
"""

from __future__ import annotations

import itertools

import pytest

from synth import catalogue
from synth.preferred import significands

# The eight values of E24 that are not the rounded power of ten, and what rounding would give: historical
# values that the standard kept. Common practice.
HISTORICAL = {26: 27, 29: 30, 32: 33, 35: 36, 38: 39, 42: 43, 46: 47, 83: 82}


def rounded_power(k: int, n: int, scale: int) -> int:
    """Round scale*10**(k/n) to the nearest whole number, by integer arithmetic."""
    return next(m for m in itertools.count(scale) if (2 * scale) ** n * 10**k < (2 * m + 1) ** n)


def test_the_series_are_those_of_the_standard() -> None:
    assert list(catalogue.preferred_numbers()) == ["E3", "E6", "E12", "E24", "E48", "E96", "E192"]


@pytest.mark.parametrize("n", [48, 96])
def test_series_of_three_figures_are_rounded_powers(n: int) -> None:
    assert significands(f"E{n}") == tuple(rounded_power(k, n, 100) for k in range(n))


def test_e192_is_rounded_powers_but_for_920() -> None:
    # 100*10**(185/192) = 919.479, yet the standard has 920. From memory.
    expected = [rounded_power(k, 192, 100) for k in range(192)]
    assert expected[185] == 919
    expected[185] = 920
    assert significands("E192") == tuple(expected)


def test_e24_is_the_list_of_every_catalogue() -> None:
    # The 24 values, common practice (colour-band charts).
    printed = "10 11 12 13 15 16 18 20 22 24 27 30 33 36 39 43 47 51 56 62 68 75 82 91"
    assert significands("E24") == tuple(10 * int(value) for value in printed.split())


def test_e24_deviates_from_rounded_powers_in_the_eight_historical_values() -> None:
    powers = [rounded_power(k, 24, 10) for k in range(24)]
    assert significands("E24") == tuple(10 * HISTORICAL.get(power, power) for power in powers)
    assert set(HISTORICAL) <= set(powers)


@pytest.mark.parametrize(
    ("coarse", "fine", "step"),
    [
        ("E12", "E24", 2),
        ("E6", "E24", 4),
        ("E3", "E24", 8),
        ("E48", "E96", 2),
        ("E96", "E192", 2),
        ("E48", "E192", 4),
    ],
)
def test_a_coarser_series_is_every_nth_value_of_the_finer(coarse: str, fine: str, step: int) -> None:
    # By construction of the standard; the step of E3 from memory.
    assert significands(coarse) == significands(fine)[::step]


@pytest.mark.parametrize(
    ("series", "expected"),
    # Common practice (colour-band charts); E3 from memory.
    [
        ("E3", (100, 220, 470)),
        ("E6", (100, 150, 220, 330, 470, 680)),
        ("E12", (100, 120, 150, 180, 220, 270, 330, 390, 470, 560, 680, 820)),
    ],
)
def test_short_series(series: str, expected: tuple[int, ...]) -> None:
    assert significands(series) == expected


def test_values_that_e96_has_and_e24_has_not() -> None:
    # Marking table of chip resistors in 1 % (two-digit codes 01 to 96): code 01 is 100, 02 102, 30 200, 68
    # 499, 96 976. From memory.
    e96 = significands("E96")
    assert (e96[0], e96[1], e96[29], e96[67], e96[95]) == (100, 102, 200, 499, 976)


@pytest.mark.parametrize(
    ("series", "half_step_per_cent", "touching"),
    # The half-step (q - 1)/(q + 1) with q = 10**(1/n) is the tolerance at which neighbouring bands touch.
    # Printed to one decimal in texts on preferred numbers, from memory; they add that the bands of E6 to E24
    # overlap at the usual tolerance and those of E48 to E192 do not.
    [
        ("E6", 19.0, True),
        ("E12", 9.6, True),
        ("E24", 4.8, True),
        ("E48", 2.4, False),
        ("E96", 1.2, False),
        ("E192", 0.6, False),
    ],
)
def test_half_step_against_the_usual_tolerance(
    series: str, half_step_per_cent: float, touching: bool
) -> None:
    q = 10 ** (1 / len(significands(series)))
    half_step = (q - 1) / (q + 1)
    assert round(100 * half_step, 1) == half_step_per_cent
    assert (catalogue.series_tolerance(series) > half_step) is touching
