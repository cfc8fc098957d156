"""Power, voltage, current and junction temperature against printed figures, closed forms and slow equivalents."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal
from numpy.typing import NDArray

from synth import stress
from synth.catalogue import Derating, ResistorStyle, derating, resistor_style, resistor_styles, transistor, transistors
from synth.stress import RUNAWAY, SETTLED, UNDEFINED, StressError, TransistorRatings, junction_temperature

Array = NDArray[np.float64]

ZERO_CELSIUS = 273.15
# A handful of products, quotients and differences of temperatures near 400 K: a few roundings of 1.1e-16, ten times larger
# where a difference of 40 K is taken.
ROUNDING = 1e-14

NONE, HALF, ECSS, EEE = (derating(name) for name in ("none", "half_power", "ECSS-Q-ST-30-11C", "EEE-INST-002"))
POLICIES = [NONE, HALF, ECSS, EEE]
STYLES = list(resistor_styles().values())

every_policy = pytest.mark.parametrize("policy", POLICIES, ids=lambda policy: policy.name)


def kelvin(celsius: float) -> float:
    return celsius + ZERO_CELSIUS


# --- Resistors: power -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("style", "celsius", "watts"),
    [
        # Makers' data sheets: 1/10 W for 0805, full to 70 °C, linear to zero at 155 °C; half way is 112.5 °C.
        ("0805", -55.0, 0.1), ("0805", 70.0, 0.1), ("0805", 112.5, 0.05), ("0805", 155.0, 0.0), ("0805", 200.0, 0.0),
        # One maker stops small chips at 125 °C; half way is 97.5 °C.
        ("0402", 70.0, 0.0625), ("0402", 97.5, 0.03125), ("0402", 125.0, 0.0),
        ("0207 (0.6 W)", 70.0, 0.6), ("0207 (0.6 W)", 138.0, 0.12),
    ],
)  # fmt: skip
def test_power_is_whole_to_70_degrees_and_falls_to_zero(style: str, celsius: float, watts: float) -> None:
    assert_allclose(stress.allowed_power(resistor_style(style), kelvin(celsius), NONE), watts, rtol=ROUNDING, atol=0)


@pytest.mark.parametrize(
    ("policy", "style", "celsius", "watts"),
    [
        # Half of 1/10 W; at 112.5 °C half of the half that the sheet leaves.
        (HALF, "0805", 70.0, 0.05), (HALF, "0805", 112.5, 0.025),
        # EEE-INST-002, from memory: 60 %.
        (EEE, "0805", 70.0, 0.06),
        # ECSS-Q-ST-30-11C, from memory: 50 %; chips whole to 85 °C, zero at 125 °C. At 85 °C the sheet's own line has
        # (155 - 85)/85 left, at 115 °C the policy's (125 - 115)/40 = 1/4 is the lower.
        (ECSS, "0805", 70.0, 0.05), (ECSS, "0805", 85.0, 0.05 * 70.0 / 85.0), (ECSS, "0805", 115.0, 0.0125), (ECSS, "0805", 125.0, 0.0),
        # Axial film: the policy's line (125 to 150 °C) lies above the sheet's until (155 - T)/85 = (150 - T)/25, T = 147.9 °C.
        (ECSS, "0207 (0.6 W)", 112.5, 0.15), (ECSS, "0207 (0.6 W)", 149.0, 0.3 / 25.0), (ECSS, "0207 (0.6 W)", 150.0, 0.0),
    ],
)  # fmt: skip
def test_a_policy_takes_its_share_and_keeps_the_lower_line(policy: Derating, style: str, celsius: float, watts: float) -> None:
    # 149 °C is 1 K from the end: the rounding of 422.15 K, 6e-14 K, counts 6e-14.
    assert_allclose(stress.allowed_power(resistor_style(style), kelvin(celsius), policy), watts, rtol=1e-13, atol=0)


@every_policy
@pytest.mark.parametrize("style", STYLES, ids=lambda style: style.name)
def test_no_policy_grants_more_than_the_maker_and_heat_never_adds(style: ResistorStyle, policy: Derating) -> None:
    t = np.linspace(200.0, 500.0, 301)
    allowed = stress.allowed_power(style, t, policy)
    assert allowed.shape == t.shape
    assert np.all(allowed <= stress.allowed_power(style, t, NONE))
    assert np.all(np.diff(allowed) <= 0)
    assert allowed[-1] == 0


# --- Resistors: voltage -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("policy", "style", "ohms", "volts"),
    [
        # MIL-PRF-39005 and data sheets: sqrt(P R), never above the style limit. 0805: 1/10 W, 150 V.
        (NONE, "0805", 1e3, 10.0), (NONE, "0805", 160e3, 126.49110640673518), (NONE, "0805", 1e6, 150.0),
        # US Navy derating chapter: sqrt(D P R). Half of 1/10 W in 2 kohm is 10 V; the style limit stays whole.
        (HALF, "0805", 2e3, 10.0), (HALF, "0805", 1e6, 150.0),
        # ECSS-Q-ST-30-11C, from memory: 80 % of voltage.
        (ECSS, "0805", 2e3, 10.0), (ECSS, "0805", 1e6, 120.0),
    ],
)  # fmt: skip
def test_voltage_is_the_root_of_power_times_resistance_up_to_the_style_limit(
    policy: Derating, style: str, ohms: float, volts: float
) -> None:
    assert_allclose(stress.allowed_voltage(resistor_style(style), ohms, policy), volts, rtol=ROUNDING, atol=0)


def test_critical_resistance_of_a_quarter_watt_part() -> None:
    # Common practice: 250 V and 1/4 W give 250 kohm.
    assert_allclose(stress.critical_resistance(resistor_style("0207 (0.25 W)"), NONE), 250e3, rtol=ROUNDING, atol=0)


@every_policy
@pytest.mark.parametrize("style", STYLES, ids=lambda style: style.name)
def test_both_voltage_limits_meet_at_the_critical_resistance(style: ResistorStyle, policy: Derating) -> None:
    critical = stress.critical_resistance(style, policy)
    limit = policy.resistor_voltage * style.max_working_voltage_v
    # A root halves the rounding of the resistance.
    below, at, above = stress.allowed_voltage(style, critical * np.array([0.25, 1.0, 4.0]), policy)
    assert_allclose([below, at, above], [0.5 * limit, limit, limit], rtol=ROUNDING, atol=0)


def test_used_shares_and_the_edge_of_what_is_carried() -> None:
    style = resistor_style("0805")
    # 1/10 W at 70 °C: 50 mW are half; 10 V across 1 kohm are all; at 155 °C nothing is allowed, no power uses nothing of it.
    assert_allclose(stress.power_used(style, 0.05, kelvin(70.0), NONE), 0.5, rtol=ROUNDING, atol=0)
    assert_allclose(stress.voltage_used(style, [5.0, 10.0], 1e3, NONE), [0.5, 1.0], rtol=ROUNDING, atol=0)
    assert_array_equal(stress.power_used(style, [0.0, 1e-9], kelvin(155.0), NONE), [0.0, np.inf])
    watts = np.array([0.1, 0.1, 0.1001, 0.0])
    volts = np.array([10.0, 10.01, 10.0, 150.1])
    ohms = np.array([1e3, 1e3, 1e3, 1e6])
    assert stress.carries(style, watts, volts, ohms, kelvin(70.0), NONE).tolist() == [True, False, False, False]


def test_film_of_a_resistor_at_full_power_is_at_its_highest_temperature() -> None:
    # Derating line: full power at 70 °C heats the film to 155 °C, half power by half of those 85 K.
    rise = stress.temperature_rise(resistor_style("0805"), np.array([0.0, 0.05, 0.1]))
    assert_allclose(rise, [0.0, 42.5, 85.0], rtol=ROUNDING, atol=0)


# --- Resistors: choice ------------------------------------------------------------------------------------------------

watts = st.floats(1e-4, 5.0)
ohms = st.floats(1.0, 1e7)
ambients = st.floats(kelvin(-40.0), kelvin(120.0))
policies = st.sampled_from(POLICIES)


@pytest.mark.parametrize(
    ("power", "ohms", "name"),
    [
        # Data sheets: 1/16 W 0402, 1/10 W 0805, 1/8 W 1206, 1/4 W 1210; of equal power the smaller body, 0402 before 0603.
        (0.06, 1e3, "0402"), (0.08, 1e3, "0805"), (0.12, 1e3, "1206"), (0.2, 1e3, "1210"), (0.9, 1e3, "2512"),
        # 50 mW in 220 kohm is 105 V: too much for 0402 and 0603 (50 V), within the 150 V of 0805.
        (0.05, 220e3, "0805"),
        # A 0402 is made from 10 ohm.
        (0.05, 4.7, "0603"),
    ],
)  # fmt: skip
def test_smallest_thick_film_chip(power: float, ohms: float, name: str) -> None:
    chips = [style for style in STYLES if style.technology == "thick film"]
    found = stress.smallest_style(power, (power * ohms) ** 0.5, ohms, kelvin(70.0), NONE, among=chips)
    assert found is not None
    assert found.name == name


def test_every_corner_must_be_carried() -> None:
    # 1/10 W at 70 °C but half of that at 112.5 °C: 60 mW at both needs the next size, 1/8 W of which half is left.
    chips = [style for style in STYLES if style.technology == "thick film"]
    corners = np.array([kelvin(70.0), kelvin(112.5)])
    found = stress.smallest_style(np.array([0.06, 0.06]), 7.0, 1e3, corners, NONE, among=chips)
    assert found is not None
    assert found.name == "1206"


def test_nothing_carries_too_much() -> None:
    assert stress.smallest_style(2.1, 10.0, 47.0, kelvin(25.0), NONE) is None


def body_area(style: ResistorStyle) -> float:
    """By the custom of size codes: chips length and width in hundredths of an inch, axial parts diameter and length in mm."""
    one, other = float(style.size_code[0:2]), float(style.size_code[2:4])
    return one * other * (0.254 if style.style == "chip" else 1.0) ** 2


def passes(style: ResistorStyle, power: float, ohms: float, ambient: float, policy: Derating) -> bool:
    """The rules of the derating table written out for one resistor, with the rounding that equality is allowed."""
    share = min(1.0, max(0.0, (style.zero_power_temperature_k - ambient) / (style.zero_power_temperature_k - style.rated_temperature_k)))
    own = policy.resistor_temperatures(style)
    if own is not None:
        share = min(share, max(0.0, (own[1] - ambient) / (own[1] - own[0])))
    rated = policy.resistor_power * style.power_w_conservative
    volts = (power * ohms) ** 0.5
    limit = min(policy.resistor_voltage * style.max_working_voltage_v, (rated * ohms) ** 0.5)
    return power <= rated * share * (1 + 1e-12) and volts <= limit * (1 + 1e-12) and style.r_min_ohm <= ohms <= style.r_max_ohm


@given(power=watts, ohms=ohms, ambient=ambients, policy=policies)
def test_smallest_style_passes_and_no_smaller_one_does(power: float, ohms: float, ambient: float, policy: Derating) -> None:
    found = stress.smallest_style(power, (power * ohms) ** 0.5, ohms, ambient, policy)
    passing = [style for style in STYLES if passes(style, power, ohms, ambient, policy)]
    assert (found is None) == (not passing)
    if found is not None:
        assert found in passing
        size = found.power_w_conservative, body_area(found)
        assert all((style.power_w_conservative, body_area(style)) >= size for style in passing)


@given(power=watts, ohms=ohms, ambient=ambients, policy=policies, style=st.sampled_from(STYLES), most=st.integers(1, 12))
def test_string_carries_what_each_carries_and_no_shorter_one_does(
    power: float, ohms: float, ambient: float, policy: Derating, style: ResistorStyle, most: int
) -> None:
    found = stress.string_length(style, power, (power * ohms) ** 0.5, ohms, ambient, policy, most=most)
    lengths = [n for n in range(1, most + 1) if passes(style, power / n, ohms / n, ambient, policy)]
    assert found == min(lengths, default=None)


def test_string_across_a_high_voltage_rail() -> None:
    # 275 V (250 V + 10 %) across 330 kohm is 0.229 W: 1206 carries 200 V and 1/8 W, so two; 0805 (1/10 W) needs three.
    power = 275.0**2 / 330e3
    assert stress.string_length(resistor_style("1206"), power, 275.0, 330e3, kelvin(70.0), NONE) == 2
    assert stress.string_length(resistor_style("0805"), power, 275.0, 330e3, kelvin(70.0), NONE) == 3


@pytest.mark.parametrize("n", range(1, 11))
def test_a_string_exactly_at_its_rating_passes(n: int) -> None:
    # n of 1/10 W carry n/10 W at 70 °C: equality passes whatever the rounding of roots and quotients.
    for ohms in (330.0, 1e3, 1.3e3, 4.7e3, 9.1e3, 47e3):
        volts = (0.1 * n * ohms) ** 0.5
        assert stress.string_length(resistor_style("0805"), volts**2 / ohms, volts, ohms, kelvin(70.0), NONE) == n


def test_the_largest_of_a_string_takes_more() -> None:
    # With 5 % the largest of four takes 1.05/(1.05 + 3*0.95) = 26.9 % instead of 25 %, which the four no longer carry.
    style, volts = resistor_style("0805"), (0.4 * 1.3e3) ** 0.5
    share = 1.05 / (1.05 + 4 * 0.95)
    assert 0.4 * share <= 0.1
    assert stress.string_length(style, 0.4, volts, 1.3e3, kelvin(70.0), NONE, band=0.05) == 5
    # The true worst of the largest one's share among all corners of the bands of four.
    corners = np.array(np.meshgrid(*[[0.95, 1.05]] * 4)).reshape(4, -1)
    assert_allclose(np.max(corners[0] / corners.sum(axis=0)), 1.05 / (1.05 + 3 * 0.95), rtol=ROUNDING, atol=0)


def test_a_string_longer_than_sensible_is_none() -> None:
    assert stress.string_length(resistor_style("0805"), 1.01, 10.0, 1e3, kelvin(70.0), NONE) is None
    assert stress.string_length(resistor_style("0805"), 1.0, 10.0, 1e3, kelvin(70.0), NONE) == 10


@pytest.mark.parametrize("band", [-0.01, 1.0, float("nan")])
def test_a_band_outside_its_range_is_refused(band: float) -> None:
    with pytest.raises(StressError, match=rf"band: read {band:g}, accepted is a fraction from 0 to below 1"):
        stress.string_length(resistor_style("0805"), 0.1, 10.0, 1e3, kelvin(70.0), NONE, band=band)


# --- Transistors: allowed power ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("at_25", "slope", "celsius", "printed"),
    [
        # "Electronic Devices", 7th ed., example 4-7: 1 W at 25 °C, 5 mW/°C, at 70 °C.
        (1.0, 5e-3, 70.0, 0.775),
        # "Electronic Principles", 7th ed., example 6-12: 625 mW at 25 °C, 5 mW/°C, at 100 °C; example 12-14: at 50 °C.
        (0.625, 5e-3, 100.0, 0.250),
        (0.625, 5e-3, 50.0, 0.500),
    ],
)
def test_published_power_derating(at_25: float, slope: float, celsius: float, printed: float) -> None:
    # The printed line ends where the power is used up: TJ max = 25 °C + P/slope.
    ratings = TransistorRatings(ptot=at_25, ptot_ambient=kelvin(25.0), tj_max=kelvin(25.0 + at_25 / slope))
    # The examples are exact as printed.
    assert_allclose(stress.allowed_dissipation(ratings, kelvin(celsius), NONE), printed, rtol=ROUNDING, atol=0)


def test_published_thermal_resistance_chain() -> None:
    # "Electronic Devices and Circuit Theory", 10th ed., example 12.18: 0.5 + 0.6 + 1.5 °C/W, 200 °C, 40 °C ambient.
    ratings = TransistorRatings(rth_ja=0.5 + 0.6 + 1.5, tj_max=kelvin(200.0))
    # Printed 61.54: half a unit of the fourth figure.
    assert_allclose(stress.allowed_dissipation(ratings, kelvin(40.0), NONE), 61.54, rtol=0.005 / 61.54, atol=0)


@pytest.mark.parametrize(
    ("celsius", "policy", "watts"),
    [
        # Data sheet of the 2N3904: 625 mW at 25 °C, 5.0 mW/°C, 150 °C. Below 25 °C Ptot stays the limit.
        (-40.0, NONE, 0.625), (25.0, NONE, 0.625), (100.0, NONE, 0.250), (150.0, NONE, 0.0), (170.0, NONE, 0.0),
        # From memory, ECSS-Q-ST-30-11C: 65 %, and no more than heats the junction to 110 °C, (110 - 90)/200.
        (25.0, ECSS, 0.40625), (90.0, ECSS, 0.1), (110.0, ECSS, 0.0),
        # From memory, EEE-INST-002: 60 %, and the lower of 125 °C and 150 - 40 °C.
        (25.0, EEE, 0.375), (90.0, EEE, 0.1),
    ],
)  # fmt: skip
def test_power_of_a_registered_type(celsius: float, policy: Derating, watts: float) -> None:
    ratings = stress.transistor_ratings(transistor("2N3904"))
    # 20 K of 373 K: the rounding of a temperature, 6e-14 K, counts 3e-15; several of them.
    assert_allclose(stress.allowed_dissipation(ratings, kelvin(celsius), policy), watts, rtol=2e-14, atol=0)


@pytest.mark.parametrize("type_", list(transistors()))
def test_power_at_25_degrees_is_the_printed_one(type_: str) -> None:
    row = transistor(type_)
    in_air = row.ptot_w if row.ptot_ref == "ambient" else row.ptot2_w
    allowed = stress.allowed_dissipation(stress.transistor_ratings(row), kelvin(25.0), NONE)
    # Sheets print Ptot and RthJA to two figures: 6 % is their rounding; never above the printed power.
    assert_allclose(allowed, in_air, rtol=0.06, atol=0)
    assert in_air is not None
    assert allowed is not None
    assert allowed <= in_air


def test_without_thermal_resistance_the_printed_power_sets_the_line() -> None:
    # BC847: 250 mW at 25 °C and 150 °C imply 500 K/W.
    row = dataclasses.replace(transistor("BC847B"), rth_ja_k_w=None)
    ratings = stress.transistor_ratings(row)
    assert ratings.rth_ja is None
    assert ratings.thermal_resistance is not None
    assert_allclose(ratings.thermal_resistance, 500.0, rtol=ROUNDING, atol=0)
    assert_allclose(stress.allowed_dissipation(ratings, kelvin(87.5), NONE), 0.125, rtol=ROUNDING, atol=0)


def test_power_at_the_case_says_nothing_about_an_ambient() -> None:
    # 2N3055: 115 W with the case at 25 °C, 6 W in free air. Without both RthJA and the free-air figure nothing is known.
    row = dataclasses.replace(transistor("2N3055"), rth_ja_k_w=None, ptot2_w=None, ptot2_ref=None, ptot2_ref_k=None)
    ratings = stress.transistor_ratings(row)
    assert (ratings.ptot, ratings.ptot_ambient) == (115.0, None)
    assert stress.allowed_dissipation(ratings, kelvin(25.0), NONE) is None
    assert stress.transistor_ratings(transistor("2N3055")).ptot == 6.0


@pytest.mark.parametrize(
    ("rth", "celsius", "watts"),
    # 2N3055 on a heat sink: (200 - TA)/Rth up to the 115 W that the case may take.
    [(3.5, 25.0, 50.0), (3.5, 95.0, 30.0), (1.4, 25.0, 115.0)],
)
@pytest.mark.parametrize("in_free_air", [29.2, None])
def test_a_better_mounting_counts_up_to_the_power_at_the_case(
    rth: float, celsius: float, watts: float, in_free_air: float | None
) -> None:
    row = dataclasses.replace(transistor("2N3055"), rth_ja_k_w=in_free_air)
    ratings = stress.transistor_ratings(row, rth_ja=rth)
    assert_allclose(stress.allowed_dissipation(ratings, kelvin(celsius), NONE), watts, rtol=ROUNDING, atol=0)


def test_a_worse_mounting_lowers_the_power() -> None:
    # BC847 on little copper, 556 K/W: (150 - 25)/556 W instead of 250 mW.
    ratings = stress.transistor_ratings(transistor("BC847B"), rth_ja=556.0)
    assert_allclose(stress.allowed_dissipation(ratings, kelvin(25.0), NONE), 125.0 / 556.0, rtol=ROUNDING, atol=0)
    # On more copper, 357 K/W, the printed 250 mW remains: the sheet has no higher figure.
    better = stress.transistor_ratings(transistor("BC847B"), rth_ja=357.0)
    assert stress.allowed_dissipation(better, kelvin(25.0), NONE) == 0.25
    assert (better.ptot, better.ptot_ambient) == (0.25, kelvin(25.0))


@pytest.mark.parametrize(
    "ratings",
    [
        TransistorRatings(),
        TransistorRatings(rth_ja=200.0),
        TransistorRatings(tj_max=kelvin(150.0)),
        TransistorRatings(ptot=0.5, tj_max=kelvin(150.0)),
        TransistorRatings(ptot=0.5, ptot_ambient=kelvin(25.0)),
    ],
)
def test_unknown_power_is_none(ratings: TransistorRatings) -> None:
    assert stress.allowed_dissipation(ratings, kelvin(25.0), NONE) is None


# --- Transistors: other ratings ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("policy", "volts", "amperes", "celsius"),
    # BC847: VCEO 45 V, IC max 100 mA, TJ max 150 °C (data sheets); shares as above.
    [(NONE, 45.0, 0.1, 150.0), (HALF, 33.75, 0.1, 150.0), (ECSS, 33.75, 0.075, 110.0), (EEE, 33.75, 0.075, 110.0)],
)
def test_voltage_current_and_junction_of_a_registered_type(policy: Derating, volts: float, amperes: float, celsius: float) -> None:
    ratings = stress.transistor_ratings(transistor("BC847B"))
    assert_allclose(stress.allowed_vce(ratings, policy), volts, rtol=ROUNDING, atol=0)
    assert_allclose(stress.allowed_ic(ratings, policy), amperes, rtol=ROUNDING, atol=0)
    assert_allclose(stress.junction_limit(ratings, policy), kelvin(celsius), rtol=ROUNDING, atol=0)


@pytest.mark.parametrize(
    ("type_", "policy", "celsius"),
    # The lower counts: germanium at 90 °C less 40 K; silicon at 200 °C by the absolute figure.
    [("AC128", ECSS, 50.0), ("2N3055", ECSS, 110.0), ("2N3055", EEE, 125.0), ("2N3055", HALF, 200.0)],
)
def test_the_lower_junction_limit_counts(type_: str, policy: Derating, celsius: float) -> None:
    limit = stress.junction_limit(stress.transistor_ratings(transistor(type_)), policy)
    assert_allclose(limit, kelvin(celsius), rtol=ROUNDING, atol=0)


def test_what_is_not_known_is_none() -> None:
    nothing = TransistorRatings()
    assert stress.allowed_vce(nothing, ECSS) is None
    assert stress.allowed_ic(nothing, ECSS) is None
    assert stress.junction_limit(nothing, ECSS) is None
    assert nothing.thermal_resistance is None


@pytest.mark.parametrize("name", [field.name for field in dataclasses.fields(TransistorRatings)])
@pytest.mark.parametrize("value", [0.0, -1.0, float("nan")])
def test_a_rating_must_be_above_zero(name: str, value: float) -> None:
    with pytest.raises(StressError, match=rf"^{name}: read {value:g}, accepted is a rating above 0"):
        TransistorRatings(**{name: value})


def test_power_must_hold_below_the_largest_junction_temperature() -> None:
    with pytest.raises(StressError, match=r"ptot_ambient: read 423\.15 K, accepted is a temperature below .* of 423\.15 K"):
        TransistorRatings(ptot=1.0, ptot_ambient=kelvin(150.0), tj_max=kelvin(150.0))


# --- Junction temperature ---------------------------------------------------------------------------------------------


class Counted:
    """A power law that counts its calls and remembers what it was asked for."""

    def __init__(self, law: Callable[[Array], Any]) -> None:
        self.law, self.calls, self.coldest, self.hottest = law, 0, np.inf, -np.inf

    def __call__(self, t: Array) -> Any:
        self.calls += 1
        self.coldest, self.hottest = min(self.coldest, float(t.min())), max(self.hottest, float(t.max()))
        return self.law(t)


TA, LIMIT, RTH = 298.15, 423.15, 400.0


def exponential(edge: Array, exponent: float) -> Callable[[Array], Array]:
    """P0·exp(a·(T − TA)) with RthJA·P0·a·e = edge."""
    return lambda t: edge / (RTH * exponent * np.e) * np.exp(exponent * (t - TA))


def lambert(edge: float, exponent: float) -> tuple[float, float]:
    """Least solution and loop gain: T − TA = −W0(−RthJA·P0·a)/a, loop gain a·(T − TA), to fifty digits."""
    with mpmath.workdps(50):
        w = mpmath.lambertw(-mpmath.mpf(edge) / mpmath.e)
        return float(mpmath.mpf(TA) - w / mpmath.mpf(exponent)), float(-w)


EDGES = np.array([1e-9, 1e-3, 0.05, 0.3, 0.6, 0.9, 0.99, 0.9999])


@pytest.mark.parametrize("exponent", [0.03, 0.07, 0.15])
def test_exponential_power_settles_at_the_lambert_w_function(exponent: float) -> None:
    power = Counted(exponential(EDGES, exponent))
    junction = junction_temperature(power, TA, np.full(EDGES.shape, RTH), LIMIT)
    exact = np.array([lambert(edge, exponent) for edge in EDGES])
    assert junction.status.tolist() == [SETTLED] * EDGES.size
    # The promise is 1e-12; the worst conditioned here has a loop gain of 0.986, which multiplies 1e-14 by 70.
    assert_allclose(junction.temperature, exact[:, 0], rtol=1e-12, atol=0)
    # Central difference over 2 mK: (a·1e-3)²/6 <= 4e-9 of truncation; rounding of T near 300 K, 6e-14 K over 1e-3 K, and of
    # the solution beside the edge.
    assert_allclose(junction.loop_gain, exact[:, 1], rtol=1e-8, atol=0)
    assert power.calls < 40
    assert power.coldest >= TA - 1.001e-3
    assert power.hottest <= LIMIT


@pytest.mark.parametrize("limit_c", [95.0, 125.0, 150.0, 175.0, 200.0])
@pytest.mark.parametrize("exponent", [0.05, 0.07, 0.15])
def test_runaway_begins_exactly_where_thermal_resistance_times_slope_says(exponent: float, limit_c: float) -> None:
    # T = TA + x has a solution until RthJA·P0·a·e = 1 (tangent of the exponential); its last lies at x = 1/a, 20 K at most.
    away = np.array([1e-11, 1e-9, 1e-6, 1e-3, 0.1, 0.5])
    edges = np.concatenate([1.0 - away, 1.0 + away])
    power = Counted(exponential(edges, exponent))
    junction = junction_temperature(power, TA, np.full(edges.shape, RTH), kelvin(limit_c))
    assert junction.status.tolist() == [SETTLED] * away.size + [RUNAWAY] * away.size
    assert np.all(np.isnan(junction.temperature[away.size :]))
    assert np.all(np.isnan(junction.loop_gain[away.size :]))
    exact = np.array([lambert(edge, exponent)[0] for edge in edges[: away.size]])
    # Beside the tangent 1 − loop gain is sqrt(2·away): it divides the accuracy of 1e-14; each away counts by itself.
    error = np.abs(junction.temperature[: away.size] / exact - 1.0)
    assert np.all(error <= 2e-14 / np.sqrt(2.0 * away))
    assert np.all(junction.loop_gain[: away.size] < 1.0)
    # A bound on the cost of the worst cases, some within 1e-11 of the edge.
    assert power.calls <= 60


def test_ordinary_batches_take_few_calls() -> None:
    settling = Counted(exponential(np.linspace(0.001, 0.5, 50), 0.07))
    junction_temperature(settling, TA, np.full(50, RTH), LIMIT)
    assert settling.calls < 15
    some_run_away = Counted(exponential(np.concatenate([np.linspace(0.001, 0.8, 40), np.linspace(1.2, 50.0, 40)]), 0.07))
    assert np.bincount(junction_temperature(some_run_away, TA, np.full(80, RTH), LIMIT).status).tolist() == [40, 40]
    assert some_run_away.calls < 30


@pytest.mark.parametrize("exponent", [-0.5, -0.05, -0.001])
def test_power_that_falls_with_temperature_settles(exponent: float) -> None:
    p0 = np.array([1e-6, 1e-3, 0.05, 0.25])
    junction = junction_temperature(lambda t: p0 * np.exp(exponent * (t - TA)), TA, np.full(4, RTH), LIMIT)
    with mpmath.workdps(50):
        # x = A·exp(−b·x) gives x = W0(b·A)/b and the loop gain −b·x.
        w = [mpmath.lambertw(-mpmath.mpf(exponent) * mpmath.mpf(p) * RTH) for p in p0]
        exact = np.array([float(mpmath.mpf(TA) - v / mpmath.mpf(exponent)) for v in w])
    assert junction.status.tolist() == [SETTLED] * 4
    assert_allclose(junction.temperature, exact, rtol=1e-12, atol=0)
    # (b·1e-3)²/6 = 4e-8 of truncation for the steepest; rounding of the difference as above.
    assert_allclose(junction.loop_gain, [-float(v) for v in w], rtol=1e-7, atol=0)


def test_constant_power_is_plain_arithmetic() -> None:
    # TJ = TA + RthJA·P, the definition of thermal resistance: 0.1 W in 400 K/W is 40 K.
    power = Counted(lambda t: np.full(t.shape, 0.1))
    junction = junction_temperature(power, TA, RTH, LIMIT)
    assert_allclose(junction.temperature, TA + 40.0, rtol=1e-14, atol=0)
    assert (int(junction.status), float(junction.loop_gain)) == (SETTLED, 0.0)
    assert junction.temperature.shape == ()


def test_published_bound_on_the_thermal_resistance() -> None:
    # "Integrated Electronics", 2nd ed., example 9-5: VCC = 30 V, RC + RE = 6.7 kohm, IC = 1.5 mA rising 0.131 mA over 50 °C;
    # stable below 3.86e4 °C/W. The loop gain over the thermal resistance is its reciprocal.
    vcc, r, slope, rth = 30.0, 6.7e3, 0.131e-3 / 50.0, 1000.0
    settles_at = TA + rth * (vcc * 1.5e-3 - r * 1.5e-3**2)

    def power_of(t: Array) -> Array:
        ic = 1.5e-3 + slope * (t - settles_at)
        return vcc * ic - r * ic**2

    junction = junction_temperature(power_of, TA, rth, LIMIT)
    assert_allclose(junction.temperature, settles_at, rtol=1e-12, atol=0)
    # Printed 3.86e4: half a unit of the third figure.
    assert_allclose(rth / junction.loop_gain, 3.86e4, rtol=0.005 / 3.86, atol=0)


def test_the_first_of_three_solutions_is_found() -> None:
    # Cubic imbalance with zeros chosen by hand: 10, 30 and 60 K above the ambient; the first and third are stable.
    roots = TA + np.array([10.0, 30.0, 60.0])
    scale = 1e-3

    def power_of(t: Array) -> Array:
        g = scale * (t - roots[0]) * (t - roots[1]) * (t - roots[2])
        return (t - TA - g) / RTH

    junction = junction_temperature(power_of, TA, RTH, LIMIT)
    assert_allclose(junction.temperature, roots[0], rtol=1e-12, atol=0)
    # g' = scale·(10 − 30)·(10 − 60) = 1, loop gain 1 − g' = 0: no relative comparison; truncation is scale·1e-6, rounding
    # 300 K·1.1e-16/1e-3 K a few times.
    assert abs(float(junction.loop_gain)) < 2e-9


@given(
    vcc=st.floats(3.0, 40.0),
    load=st.floats(10.0, 1e5),
    share=st.floats(1e-3, 0.9),
    exponent=st.floats(0.0, 0.09),
    rth=st.floats(20.0, 800.0),
    ambient=st.floats(kelvin(-40.0), kelvin(105.0)),
)
def test_no_solution_below_the_one_reported(
    vcc: float, load: float, share: float, exponent: float, rth: float, ambient: float
) -> None:
    """A load line: power rises with the current up to VCC/2, then falls, and the transistor saturates."""

    def power_of(t: Array) -> Array:
        ic = np.minimum(share * vcc / load * np.exp(exponent * (t - ambient)), 0.98 * vcc / load)
        return np.asarray(ic * (vcc - ic * load))

    junction = junction_temperature(power_of, ambient, rth, LIMIT)
    end = float(junction.temperature) if junction.status == SETTLED else LIMIT
    # Slow equivalent: the imbalance at ten thousand temperatures stays below zero up to the solution.
    t = np.linspace(ambient, end, 10_001)[:-1]
    assert junction.status in (SETTLED, RUNAWAY)
    assert np.all(t - ambient - rth * power_of(t) < 1e-10)
    if junction.status == SETTLED:
        # |g| at the solution: its bracket of 1e-14·T and the slope of g, at most 1 + RthJA·|dP/dT| < 1e5 here.
        slope = 1.0 + rth * 0.25 * vcc**2 / load * 0.1
        assert abs(end - ambient - rth * float(power_of(np.array(end)))) <= 1e-11 * slope
        assert junction.loop_gain <= 1.0 + 1e-6


@pytest.mark.parametrize(
    ("ambient", "limit", "exponent", "share", "rth"),
    # Stages whose imbalance comes up to zero, dips and returns within an eighth of the way: long steps see the last zero only.
    [
        (226.33810639970, 477.42492487488, 0.08842215908, 0.02551666488, 170.385751471),
        (309.49280554901, 407.73345617920, 0.09553034011, 0.04395879118, 98.7331770751),
        (228.25715116684, 466.78747264324, 0.09359077424, 0.03519135343, 113.916409067),
        (272.43390974635, 467.94341982020, 0.08902863431, 0.04529340845, 105.050587766),
        (227.53956822448, 439.85392104511, 0.09640488355, 0.02568779114, 157.419945337),
    ],
)
def test_first_of_three_close_solutions_on_a_load_line(
    ambient: float, limit: float, exponent: float, share: float, rth: float
) -> None:
    def power_of(t: Array) -> Array:
        ic = np.minimum(share * np.exp(exponent * (t - ambient)), 0.98)
        return np.asarray(ic * (1.0 - ic))

    junction = junction_temperature(power_of, ambient, rth, limit)
    # Slow equivalent: the first of a hundred thousand temperatures where the imbalance is no longer negative.
    t = np.linspace(ambient, limit, 100_001)
    first = t[np.argmax(t - ambient - rth * power_of(t) >= 0)]
    assert first - t[1] + t[0] <= junction.temperature <= first


def test_a_thousand_stages_beside_the_edge() -> None:
    rng = np.random.default_rng(20)
    ambient, limit, exponent = rng.uniform(220, 380, 1000), rng.uniform(400, 480, 1000), rng.uniform(0.06, 0.3, 1000)
    edge = 1.0 + 10.0 ** rng.uniform(-11, 0, 1000) * rng.choice([-1.0, 1.0], 1000)
    power = Counted(lambda t: edge / (RTH * exponent * np.e) * np.exp(np.minimum(exponent * (t - ambient), 500.0)))
    junction = junction_temperature(power, ambient, np.full(1000, RTH), limit)
    # Every tangent point, 1/a above the ambient, lies below the limit, so the edge alone decides.
    assert_array_equal(junction.status == SETTLED, edge < 1.0)
    assert power.calls <= 60


def test_a_single_stage_may_run_away() -> None:
    junction = junction_temperature(lambda t: 0.2 * np.exp(0.05 * (t - TA)), TA, RTH, LIMIT)
    assert int(junction.status) == RUNAWAY
    assert np.isnan(junction.temperature)


def test_a_solution_beyond_the_limit_does_not_count() -> None:
    # 0.3 W·400 K/W is 120 K: TJ = 418.15 K lies below 423.15 K but not below 410 K; a solution on the limit counts.
    limits = np.array([423.15, 418.15 + 1e-9, 410.0, 290.0])
    junction = junction_temperature(lambda t: np.full(t.shape, 0.3), TA, RTH, limits)
    assert junction.status.tolist() == [SETTLED, SETTLED, RUNAWAY, RUNAWAY]


def test_a_transistor_without_power_stays_at_the_ambient() -> None:
    junction = junction_temperature(lambda t: np.zeros(t.shape), np.array([TA, LIMIT, 430.0]), RTH, LIMIT)
    assert junction.status.tolist() == [SETTLED, SETTLED, RUNAWAY]
    assert_array_equal(junction.temperature, [TA, LIMIT, np.nan])


@pytest.mark.parametrize(
    "bad",
    [
        lambda t: np.full(t.shape, np.nan),
        lambda t: np.full(t.shape, -0.1),
        lambda t: np.where(t > TA + 5.0, np.nan, 0.1),
        lambda t: np.where(np.abs(t - TA - 40.0) < 1e-3, np.nan, 0.1),
        # Above 30 K the heater is off: 40 K of heat below, none above, and so no balance.
        lambda t: np.where(t < TA + 30.0, 0.1, 0.0),
        # Just beyond the edge of runaway, with a gap where the imbalance is least, 1/a above the ambient.
        lambda t: np.where(np.abs(t - TA - 20.0) < 0.05, np.nan, 1.0001 / (RTH * 0.05 * np.e) * np.exp(0.05 * (t - TA))),
        # A gap so narrow that the bracket is almost closed when it is met.
        lambda t: np.where(np.abs(t - lambert(0.6, 0.05)[0]) < 1e-11, np.nan, exponential(np.array(0.6), 0.05)(t)),
    ],
)
def test_power_that_is_none_leaves_the_element_undefined_and_the_others_alone(bad: Callable[[Array], Array]) -> None:
    def power_of(t: Array) -> Array:
        return np.array([0.1, float(bad(t[1:2])[0]), 0.1])

    junction = junction_temperature(power_of, TA, np.full(3, RTH), LIMIT)
    assert junction.status.tolist() == [SETTLED, UNDEFINED, SETTLED]
    # Three roundings of TA + 40 K.
    assert_allclose(junction.temperature, [TA + 40.0, np.nan, TA + 40.0], rtol=1e-14, atol=0)
    assert np.isnan(junction.loop_gain[1])


def test_infinite_power_runs_away() -> None:
    law = np.array([np.inf, 0.1])
    junction = junction_temperature(lambda t: np.broadcast_to(law, t.shape), TA, np.full(2, RTH), LIMIT)
    assert junction.status.tolist() == [RUNAWAY, SETTLED]


def test_status_codes_name_the_states() -> None:
    assert [stress.JUNCTION_STATES[code] for code in (SETTLED, RUNAWAY, UNDEFINED)] == ["settled", "runaway", "undefined"]


@pytest.mark.parametrize("rth", [0.0, -5.0, float("nan")])
def test_a_thermal_resistance_must_be_above_zero(rth: float) -> None:
    with pytest.raises(StressError, match=rf"rth_ja: read {rth:g} K/W, accepted is a thermal resistance above 0 K/W"):
        junction_temperature(lambda t: 0.0 * t, TA, np.array([100.0, rth]), LIMIT)


def test_power_of_another_shape_is_refused() -> None:
    with pytest.raises(StressError, match=r"power_of: read an array of shape \(2,\), accepted is that of its argument, \(3,\)"):
        junction_temperature(lambda t: np.zeros(2), TA, np.full(3, RTH), LIMIT)
