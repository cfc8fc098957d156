"""The transistor's laws against printed figures and hand derivations.

k and q are exact SI constants; the bandgap law and its derivative are common practice; limits are those printed in the data
sheets of the registered types; what is only recalled is marked "from memory".
"""

import numpy as np
import pytest
from numpy.testing import assert_allclose

from synth.quantities import Spread
from synth.transistor import GAP_VOLTAGE, T0, Transistor, TransistorError, thermal_voltage

ZERO_CELSIUS = 273.15
BOLTZMANN_PER_CHARGE = 1.380649e-23 / 1.602176634e-19
"""k/q [V/K], both exact by definition of the SI."""

SILICON = {"hfe": Spread(100.0, 200.0, 300.0), "vbe": Spread(0.6, 0.65, 0.7), "vbe_ic": 2e-3}


def device(**changes: object) -> Transistor:
    return Transistor(**{**SILICON, **changes})  # type: ignore[arg-type]


# ---------------------------------------------------------------------------------------------- thermal voltage


@pytest.mark.parametrize(
    ("celsius", "printed"),
    [(-55, 18.80e-3), (-20, 21.81e-3), (25, 25.69e-3), (27, 25.86e-3), (85, 30.86e-3), (125, 34.31e-3)],
)
def test_thermal_voltage_at_common_temperatures(celsius: float, printed: float) -> None:
    # Common practice: 25.7 mV at 25 °C. Four figures are printed: half a unit of the last is 5 uV.
    assert abs(thermal_voltage(celsius + ZERO_CELSIUS) - printed) <= 5e-6


def test_thermal_voltage_broadcasts_and_keeps_its_argument() -> None:
    t = np.array([[200.0], [450.0]])
    # One product of two roundings.
    assert_allclose(thermal_voltage(t), [[200.0 * BOLTZMANN_PER_CHARGE], [450.0 * BOLTZMANN_PER_CHARGE]], rtol=1e-15, atol=0)
    assert t.tolist() == [[200.0], [450.0]]


# ---------------------------------------------------------------------------------------------- base-emitter law


def slope(vbe: float, **changes: object) -> float:
    """dVBE/dT at constant current and 25 °C by a central difference of 2 K [V/K]."""
    q = device(vbe=Spread.exact(vbe), **changes)
    # The third derivative of the law is about XTI*k/q/T0**2 = 3e-9 V/K^3: a sixth of it is lost, 1e-9 V/K.
    return float(q.vbe_at_reference(T0 + 1.0) - q.vbe_at_reference(T0 - 1.0)) / 2.0


def test_vbe_falls_about_two_millivolts_per_kelvin_at_650_millivolts() -> None:
    # Common practice: -2 mV/K for VBE(on) at 2 mA, printed in data sheets; one figure, so half a unit of the next.
    assert abs(slope(0.65) + 2.0e-3) < 0.05e-3


@pytest.mark.parametrize("vbe", [0.55, 0.60, 0.65, 0.70])
def test_slope_is_the_derivative_worked_out_by_hand(vbe: float) -> None:
    # Derivative of the bandgap law at T = T0: (VBE - VG - XTI*VT)/T, VG = 1.17 V, XTI = 3.
    by_hand = (vbe - 1.17 - 3.0 * BOLTZMANN_PER_CHARGE * T0) / T0
    # 1e-9 V/K of the difference formula on 2e-3.
    assert_allclose(slope(vbe), by_hand, rtol=1e-6, atol=0)


@pytest.mark.parametrize(
    ("vbe", "gap_1_12", "gap_1_205"),
    [(0.55, -2.17e-3, -2.46e-3), (0.60, -2.00e-3, -2.29e-3), (0.65, -1.83e-3, -2.12e-3), (0.70, -1.67e-3, -1.95e-3)],
)
def test_slope_lies_between_those_of_the_neighbouring_gap_voltages(vbe: float, gap_1_12: float, gap_1_205: float) -> None:
    # Derived table for gaps of 1.12 and 1.205 V; the slope is linear in the gap, each entry is rounded to 5 uV/K.
    share = (1.17 - 1.12) / (1.205 - 1.12)
    assert abs(slope(vbe) - ((1.0 - share) * gap_1_12 + share * gap_1_205)) <= 5e-6


def test_slope_becomes_flatter_by_the_thermal_voltage_per_kelvin_and_decade() -> None:
    q = device()
    ten_up = (q.vbe_at(20e-3, T0 + 1.0) - q.vbe_at(20e-3, T0 - 1.0)) / 2.0
    here = (q.vbe_at(2e-3, T0 + 1.0) - q.vbe_at(2e-3, T0 - 1.0)) / 2.0
    # k/q*ln 10 = 0.198 mV/K, derived; the difference of voltages near 0.7 V leaves 1e-16/2e-4.
    assert_allclose(ten_up - here, BOLTZMANN_PER_CHARGE * np.log(10.0), rtol=1e-11, atol=0)
    assert abs(ten_up - here - 0.198e-3) <= 0.5e-6


@pytest.mark.parametrize("t", [200.0, 298.15, 450.0])
def test_a_decade_of_current_adds_the_thermal_voltage_times_ln_ten(t: float) -> None:
    q = device()
    # Difference of two voltages near 0.7 V against 0.04 to 0.09 V: 20 roundings at most.
    assert_allclose(q.vbe_at(1e-2, t) - q.vbe_at(1e-3, t), BOLTZMANN_PER_CHARGE * t * np.log(10.0), rtol=1e-14, atol=0)


def test_a_decade_is_about_sixty_millivolts_at_room_temperature() -> None:
    # Common practice: "60 mV per decade" (59.2 mV at 25 °C).
    q = device()
    assert abs(float(q.vbe_at(1e-2, T0) - q.vbe_at(1e-3, T0)) - 59.2e-3) <= 0.05e-3


def test_reference_point_is_the_data_sheet_figure() -> None:
    q = device()
    assert q.vbe_at(2e-3, T0) == 0.65
    # One addition, at most one rounding.
    assert_allclose(q.vbe_at(2e-3, T0, delta=np.array([-0.05, 0.05])), [0.60, 0.70], rtol=3e-16, atol=0)


def test_unit_spread_stays_constant_over_temperature_and_current() -> None:
    q = device()
    t, ic = np.array([[233.15], [398.15]]), np.array([1e-6, 1e-3, 0.1])
    # Difference of two voltages below 1 V against 0.05 V.
    assert_allclose(q.vbe_at(ic, t, 0.05) - q.vbe_at(ic, t), np.full((2, 3), 0.05), rtol=1e-14, atol=0)


@pytest.mark.parametrize("material", ["silicon", "germanium"])
@pytest.mark.parametrize("t", [218.15, 273.15, 398.15])
def test_saturation_current_grows_by_the_bandgap_law(material: str, t: float) -> None:
    q = device(material=material, vbe=Spread.exact(0.65 if material == "silicon" else 0.15))
    gap = {"silicon": 1.17, "germanium": 0.744}[material]
    # IS(T)/IS(T0) = (T/T0)**3*exp(gap/(k/q)*(1/T0 - 1/T)), common practice for a diffusion-limited junction.
    expected = (t / T0) ** 3 * np.exp(gap / BOLTZMANN_PER_CHARGE * (1.0 / T0 - 1.0 / t))
    # Exponents up to 60 lose 60 roundings on each side.
    assert_allclose(q.saturation_current(t) / q.saturation_current(T0), expected, rtol=5e-14, atol=0)


@pytest.mark.parametrize("t", [218.15, 298.15, 398.15])
def test_vbe_vanishes_at_the_saturation_current(t: float) -> None:
    q = device()
    # Zero by definition; what remains is the rounding of two voltages below 1 V.
    assert abs(float(q.vbe_at(q.saturation_current(t), t))) < 1e-15


def test_saturation_current_at_room_temperature_by_hand() -> None:
    # 2 mA*exp(-0.65/0.0256926) = 2e-3*exp(-25.2991) = 2.0595e-14 A; VT to six figures leaves 2e-6*25.3 of the current.
    assert_allclose(device().saturation_current(T0), 2.0595e-14, rtol=5e-5, atol=0)


def test_germanium_slope_is_of_the_same_order() -> None:
    # From memory: germanium about -2 mV/K as silicon.
    assert -2.5e-3 < slope(0.15, material="germanium") < -1.5e-3
    assert GAP_VOLTAGE["germanium"] < GAP_VOLTAGE["silicon"]


def test_fixed_vbe_ignores_current_and_temperature() -> None:
    q = device(vbe_model="fixed")
    assert np.array_equal(q.vbe_at_reference(np.array([200.0, 450.0])), [0.65, 0.65])
    vbe = q.vbe_at(np.array([1e-12, 1.0]), np.array([[200.0], [298.15], [450.0]]))
    assert vbe.shape == (3, 2)
    assert np.all(vbe == 0.65)
    # Its unit spread still counts.
    assert_allclose(q.vbe_at(1e-3, T0, 0.05), 0.70, rtol=3e-16, atol=0)


def test_laws_broadcast_take_scalars_and_leave_their_arguments() -> None:
    q = device(icbo=Spread(0.0, 0.0, 1e-8), icbo_hot=(1e-5, 423.15))
    t, ic = np.array([[250.0], [350.0]]), np.array([1e-4, 1e-3, 1e-2])
    kept = t.copy(), ic.copy()
    assert q.vbe_at(ic, t).shape == (2, 3)
    for law in (q.vbe_at_reference, q.saturation_current, q.gain_factor, q.leakage_factor):
        assert law(t).shape == (2, 1)
        assert np.ndim(law(300.0)) == 0
    assert np.array_equal(t, kept[0])
    assert np.array_equal(ic, kept[1])


# ---------------------------------------------------------------------------------------------- gain


def test_gain_rises_as_the_exponent_one_and_a_half_says() -> None:
    # Derived from the printed exponent 1.5 of the 2N5088: x1.54 at 125 °C, 0.50 %/K at 25 °C; three and two figures.
    q = device()
    assert abs(float(q.gain_factor(125.0 + ZERO_CELSIUS)) - 1.54) <= 0.005
    assert abs(float(q.gain_factor(T0 + 1.0)) - 1.0 - 0.0050) <= 0.00005


def test_gain_falls_faster_when_cold() -> None:
    # Ratio of hFE at -55 °C to that at 25 °C printed in data sheets: 2N3019 40/100, 2N1613 35/80 and 20/35, 2N2222A
    # 35/75. One law for all lies among them.
    printed = [40 / 100, 35 / 80, 20 / 35, 35 / 75]
    cold = float(device().gain_factor(-55.0 + ZERO_CELSIUS))
    assert min(printed) < cold < max(printed)
    # (218.15/298.15)**2.5 = 0.7316748**2.5 = 0.53535*0.85538 by hand.
    assert_allclose(cold, 0.53535 * 0.85538, rtol=2e-5, atol=0)


def test_gain_is_one_and_continuous_at_25_celsius() -> None:
    q = device()
    assert q.gain_factor(T0) == 1.0
    below, above = q.gain_factor(T0 * (1.0 - 1e-9)), q.gain_factor(T0 * (1.0 + 1e-9))
    # The exponents differ below and above; they show in the slopes alone. Differences of 1e-9 carry 1e-7 of rounding.
    assert_allclose([1.0 - below, above - 1.0], [2.5e-9, 1.5e-9], rtol=1e-6, atol=0)


# ---------------------------------------------------------------------------------------------- leakage


@pytest.mark.parametrize(("celsius", "factor"), [(5, 0.25), (25, 1), (35, 2), (85, 64), (125, 1024)])
def test_leakage_doubles_every_ten_kelvin(celsius: float, factor: float) -> None:
    # Common practice. A power of two of an exponent with 10 roundings.
    assert_allclose(device().leakage_factor(celsius + ZERO_CELSIUS), factor, rtol=1e-13, atol=0)


def test_fifteen_nanoamperes_become_3_84_microamperes_at_105_celsius() -> None:
    # Printed example of the doubling rule: "Electronic Devices and Circuits", 5th ed., ch. 5, Example 5-18; seen in a
    # transcription. Three figures.
    q = device(icbo=Spread(0.0, 0.0, 15e-9))
    assert abs(15e-9 * float(q.leakage_factor(105.0 + ZERO_CELSIUS)) - 3.84e-6) <= 0.005e-6


HOT_LIMITS = [
    ("2N2222A", 10e-9, 10e-6, 150, 12.5),
    ("BC547", 15e-9, 5e-6, 150, 14.9),
    ("BC107", 15e-9, 4e-6, 125, 12.4),
    ("BD139", 0.1e-6, 10e-6, 125, 15.1),
    ("2N5551", 50e-9, 50e-6, 100, 7.5),
    ("2N3055", 1e-3, 5e-3, 150, 54.0),
]
"""Type, leakage limits at 25 °C and hot [A], hot temperature [°C], all from data sheets; derived doubling step [K]."""


@pytest.mark.parametrize(("name", "cold", "hot", "celsius", "step"), HOT_LIMITS)
def test_leakage_passes_through_both_printed_limits(name: str, cold: float, hot: float, celsius: float, step: float) -> None:
    t = celsius + ZERO_CELSIUS
    q = device(type=name, icbo=Spread(0.0, 0.0, cold), icbo_hot=(hot, t))
    assert q.leakage_factor(T0) == 1.0
    # A quotient and a product.
    assert_allclose(cold * q.leakage_factor(t), hot, rtol=1e-15, atol=0)
    # The step is printed to three figures, 54 to two: at half a unit of the last figure up or down the factor must be
    # on either side of 2.
    half = 0.5 if step == 54.0 else 0.05
    assert q.leakage_factor(T0 + step - half) < 2.0 < q.leakage_factor(T0 + step + half)


def test_leakage_exponential_is_straight_on_a_logarithmic_scale() -> None:
    q = device(icbo=Spread(0.0, 0.0, 15e-9), icbo_hot=(5e-6, 150.0 + ZERO_CELSIUS))
    # Halfway in temperature is the geometric mean in current.
    assert_allclose(q.leakage_factor(87.5 + ZERO_CELSIUS), np.sqrt(5e-6 / 15e-9), rtol=1e-14, atol=0)


def test_hot_limit_without_a_limit_at_25_celsius_leaves_the_doubling_rule() -> None:
    # No exponential leads from 0 A to a hot limit; the factor then multiplies nothing but must stay finite.
    q = device(icbo_hot=(5e-6, 150.0 + ZERO_CELSIUS))
    assert_allclose(q.leakage_factor(35.0 + ZERO_CELSIUS), 2.0, rtol=1e-14, atol=0)


# ---------------------------------------------------------------------------------------------- contradictions


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"hfe": Spread(0.0, 100.0, 200.0)}, r"transistor\.hfe: read 0 as the least gain, .*above 0"),
        ({"hfe": Spread(-5.0, 100.0, 200.0)}, r"transistor\.hfe: read -5 as the least gain"),
        ({"vbe": Spread(0.0, 0.6, 0.7)}, r"transistor\.vbe: read 0 V as the least VBE, .*more than 0 V"),
        ({"vbe": Spread(-0.05, 0.6, 0.7)}, r"transistor\.vbe: read -0\.05 V as the least VBE"),
        ({"vbe_ic": 0.0}, r"transistor\.vbe_ic: read 0 A, .*above 0 A"),
        ({"vbe_ic": -2e-3}, r"transistor\.vbe_ic: read -0\.002 A"),
        ({"icbo": Spread(-1e-9, 0.0, 1e-8)}, r"transistor\.icbo: read -1e-09 A as the least leakage, .*0 A or more"),
        (
            {"icbo": Spread(0.0, 0.0, 2e-8), "icbo_hot": (1e-8, 423.15)},
            r"transistor\.icbo: read a hot limit of 1e-08 A at 150 °C,.*25 °C limit of 2e-08 A",
        ),
        (
            {"icbo": Spread(0.0, 0.0, 2e-8), "icbo_hot": (1e-5, 263.15)},
            r"transistor\.icbo: read a hot limit of 1e-05 A at -10 °C,.*above 25 °C",
        ),
        ({"icbo_hot": (1e-5, T0)}, r"transistor\.icbo: read a hot limit of 1e-05 A at 25 °C"),
    ],
)
def test_a_description_that_contradicts_itself_is_refused(changes: dict[str, object], text: str) -> None:
    with pytest.raises(TransistorError, match=text):
        device(**changes)


@pytest.mark.parametrize(
    "changes",
    [
        {"hfe": Spread(1e-9, 100.0, 200.0)},
        {"vbe": Spread(1e-9, 0.6, 0.7)},
        {"vbe_ic": 1e-15},
        {"icbo": Spread(0.0, 0.0, 0.0)},
        {"icbo": Spread(0.0, 0.0, 1e-8), "icbo_hot": (1e-8, 298.16)},
    ],
)
def test_the_limits_of_what_is_accepted(changes: dict[str, object]) -> None:
    assert isinstance(device(**changes), Transistor)


def test_polarity_changes_no_magnitude() -> None:
    # A PNP is the mirror image of an NPN: the same formulas hold for magnitudes.
    npn, pnp = device(), device(polarity="pnp")
    t = np.array([233.15, 298.15, 398.15])
    assert np.array_equal(npn.vbe_at(1e-3, t), pnp.vbe_at(1e-3, t))
    assert np.array_equal(npn.gain_factor(t), pnp.gain_factor(t))
    assert np.array_equal(npn.leakage_factor(t), pnp.leakage_factor(t))
