"""The worst case over the whole box, against methods that share nothing with it.

`stages` solves each circuit by its node equations and Newton's method and places points in the box by the contract
(design, section 4); every expected value here comes from there or from a hand derivation beside it. Boxes are random and
invented; a failing one is repeated by its number.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from scipy.constants import Boltzmann, elementary_charge
from scipy.optimize import brentq, minimize_scalar
from stages import (
    ROOM,
    Numbers,
    active,
    any_region,
    circuit,
    edge_box,
    grain,
    law,
    leaky_box,
    level_box,
    point,
    position,
    quantities,
    random_box,
    random_transistor,
    samples,
    saturated,
    scan_and_polish,
    total,
    vertices,
)

from synth.box import Box, Extreme
from synth.limits import Requirement
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.q_point import SATURATED
from synth.quantities import Interval, Spread
from synth.straddle import extreme_in_any_region
from synth.transistor import Transistor

TRUE = 1e-9
"""What the issue asks of a worst case, relative. Rounding adds `grain`."""
SAME = 1e-12
"""The same formula at the same numbers, from a batch of another shape: some tens of ulps."""
BOTH = (1, -1)


def stage(network: str = "divider", *, rails: dict[str, tuple[float, ...]] | None = None, celsius: tuple[float, ...] = (25.0,),
          tolerance: float = 0.0, tcr: float = 0.0, hfe: tuple[float, ...] = (200.0,), vbe: tuple[float, ...] = (0.65,),
          icbo: tuple[float, ...] = (0.0,), parts: dict[str, dict[str, float]] | None = None, device: dict[str, Any] | None = None,
          **ohms: float) -> Box:
    """One stage by its figures: a spread is (value,) or (low, nominal, high); `parts` overrides the band of a role."""

    def spread(x: tuple[float, ...], shift: float = 0.0) -> Spread:
        return Spread(*(v + shift for v in (x if len(x) == 3 else x * 3)))

    def part(role: str, value: float) -> Parts:
        own = {"band": tolerance, "tcr_low": -tcr, "tcr_high": tcr, **(parts or {}).get(role, {})}
        return Parts(nominal=np.array([value]), **{k: np.array([v]) for k, v in own.items()})

    return Box(
        network=NETWORKS[network],
        transistor=Transistor(**{"hfe": spread(hfe), "vbe": spread(vbe), "vbe_ic": 2e-3, "icbo": spread(icbo), **(device or {})}),
        rails={name: spread(x) for name, x in (rails or {"vcc": (12.0,)}).items()},
        temperature=spread(celsius, 273.15),
        parts={role: part(role, value) for role, value in ohms.items()},
    )


def extreme_of(values: Numbers, direction: int) -> Numbers:
    return np.asarray(direction * np.max(direction * values, axis=0))


def beyond(box: Box, names: Sequence[str], direction: int, found: Numbers, worst: Numbers) -> Numbers:
    """How far values found elsewhere lie beyond the reported worst case, relative to it, rounding taken off."""
    nominal = {k: np.asarray(v) for k, v in box.nominal().items()}
    room = grain(names, nominal)
    excess = np.asarray(direction * (found - worst) - room)
    # A worst case of nothing at all (a fixed drop that blocks) leaves no room for any excess.
    with np.errstate(divide="ignore", invalid="ignore"):
        relative = excess / np.maximum(np.abs(worst), room)
    return np.asarray(np.where(excess <= 0.0, np.fmax(relative, -1.0), relative))


def assert_never_less(box: Box, names: Sequence[str], direction: int, found: Numbers, worst: Numbers, case: object) -> None:
    escape = beyond(box, names, direction, found, worst)
    k = int(np.argmax(escape))
    assert escape[k] <= TRUE, (
        f"{case}: {box.network.name} {names} {direction:+d}: stage {k} reaches {np.broadcast_to(found, worst.shape)[k]!r},"
        f" beyond the worst case {worst[k]!r} by {escape[k]:.1e}: {described(box.take([k]))}"
    )


def described(box: Box) -> str:
    return f"{box.transistor}, {dict(box.rails)}, ambient {box.temperature}, {dict(box.parts)}"


# The box itself


def test_resistor_band_is_tolerance_and_life_plus_tcr() -> None:
    # Contract, section 4: R·(1 ± (tolerance + life + TCR·|T − 25 °C|)); 1 % + 100 ppm/K·60 K = 1.6 % of 10 kΩ.
    part = Parts(nominal=np.array([1e4]), band=np.array([0.01]), tcr_low=np.array([-1e-4]), tcr_high=np.array([1e-4]))
    for celsius in (85.0, -35.0):
        low, high = part.ends(celsius + 273.15)
        assert_allclose((low, high), [[9840.0], [10160.0]], rtol=1e-14, atol=0)


def test_tcr_range_that_is_not_symmetric_keeps_its_signs() -> None:
    # −200 : 800 ppm/K over 50 K: −1 % : 4 % when hot; over −50 K: −4 % : 1 % when cold.
    part = Parts(nominal=np.array([1e3]), band=np.array([0.0]), tcr_low=np.array([-2e-4]), tcr_high=np.array([8e-4]))
    assert_allclose(part.ends(ROOM + 50.0), [[990.0], [1040.0]], rtol=1e-13, atol=0)
    assert_allclose(part.ends(ROOM - 50.0), [[960.0], [1010.0]], rtol=1e-13, atol=0)


@pytest.mark.parametrize("number", range(6))
def test_points_of_the_box_follow_the_contract(number: int) -> None:
    rng = np.random.default_rng(number)
    box = random_box(rng, 7)
    u = samples(rng, box, 20, at_ends=0.4)
    wanted = point(box, u)
    low, high = box.temperature.low, box.temperature.high
    given = box.values({**u, "temperature": low + (high - low) * u["temperature"]})
    if box.reference is not None:
        given["vref"] = box.sources(given)["vref"]
    assert given.keys() == wanted.keys()
    for name, value in wanted.items():
        # δ = VBE − nominal is a difference of like numbers, so its last bits are those of VBE.
        # So is the voltage of a reference without current.
        atol = {"delta": 1e-15, "delta_ref": 1e-14, "vref": 1e-14}.get(name, 0.0)
        assert_allclose(np.broadcast_to(given[name], value.shape), value, rtol=1e-13, atol=atol, err_msg=name)


def test_nominal_is_every_nominal_value() -> None:
    box = stage(rails={"vcc": (9.0, 12.0, 16.0)}, celsius=(0.0, 25.0, 70.0), tolerance=0.05, tcr=1e-4, hfe=(100.0, 200.0, 400.0),
                vbe=(0.6, 0.65, 0.7), icbo=(0.0, 0.0, 1e-8), r1=68e3, r2=22e3, rc=3.3e3, re=1e3)
    wanted = {"temperature": ROOM, "vcc": 12.0, "delta": 0.0, "hfe": 200.0, "icbo": 0.0, "r1": 68e3, "r2": 22e3, "rc": 3.3e3, "re": 1e3}
    assert {name: float(np.squeeze(v)) for name, v in box.nominal().items()} == wanted


def test_take_keeps_the_chosen_stages_in_order() -> None:
    box = random_box(np.random.default_rng(1), 5, network="divider")
    some = box.take([3, 0])
    assert some.size == 2
    assert_array_equal(some.parts["re"].nominal, box.parts["re"].nominal[[3, 0]])
    assert_array_equal(some.extreme(("vce",), 1).value, box.extreme(("vce",), 1).value[[3, 0]])


def test_meter_counts_scalar_solves() -> None:
    box = random_box(np.random.default_rng(2), 5)
    before = box.meter.solves
    box.solve({**box.nominal(), "hfe": np.full((3, 5), 100.0)})
    assert box.meter.solves - before == 15


@pytest.mark.parametrize("number", range(10))
def test_active_law_agrees_with_the_node_equations(number: int) -> None:
    rng = np.random.default_rng(100 + number)
    box = random_box(rng, 20)
    p = point(box, samples(rng, box, 50, at_ends=0.3))
    found, q = active(box.network.name, box.transistor, p), box.solve(p, active_law=True)
    for names in quantities(box):
        excess = np.abs(box.measure(names, p, q) - total(names, found)) - grain(names, p)
        # The logarithm of IC has an argument of some hundreds at most, whose ulp is IC's relative error.
        assert np.all(excess <= 1e-12 * np.abs(total(names, found))), names


@pytest.mark.parametrize("number", range(10))
def test_region_aware_law_agrees_with_the_node_equations(number: int) -> None:
    rng = np.random.default_rng(200 + number)
    box = edge_box(rng, 20)
    p = point(box, samples(rng, box, 50, at_ends=0.3))
    found, q = any_region(box.network.name, box.transistor, p), box.solve(p)
    for names in quantities(box):
        wanted, given = total(names, found), box.measure(names, p, q)
        assert_array_equal(np.isnan(given), np.isnan(wanted))
        excess = np.abs(given - wanted) - grain(names, p)
        # Near the edge the two may take different branches; both are right there to the rounding of VCE.
        with np.errstate(invalid="ignore"):
            assert not np.any(excess > 1e-11 * np.abs(wanted)), names


def test_sum_of_quantities_is_the_sum_of_their_measures() -> None:
    box = random_box(np.random.default_rng(3), 4, network="divider")
    v = box.nominal()
    q = box.solve(v)
    wanted = box.measure(("ic",), v, q) + box.measure(("i_r1",), v, q)
    assert_allclose(box.measure(("ic", "i_r1"), v, q), wanted, rtol=1e-15, atol=0)
    # Kirchhoff: all that VCC delivers goes through rc and r1.
    assert_allclose(box.measure(("rail_vcc",), v, q), wanted, rtol=1e-13, atol=0)


def test_sign_of_a_sum_is_known_only_where_its_parts_agree() -> None:
    box = random_box(np.random.default_rng(3), 1, network="divider")
    assert box.sign(("ic", "i_r1"), "re") == -1  # both fall
    assert box.sign(("ic", "i_r1"), "hfe") is None  # more IC, less base voltage left for r1
    assert box.sign(("ic",), "rc") == 0
    assert box.sign(("vce",), "vcc") is None


# The true extreme, by the active-region law


@pytest.mark.parametrize("number", range(40))
def test_never_less_than_any_vertex(number: int) -> None:
    rng = np.random.default_rng(1000 + number)
    box = random_box(rng, 4)
    found = law(box, vertices(box))
    for names in quantities(box):
        for direction in BOTH:
            worst = box.extreme(names, direction).value
            assert_never_less(box, names, direction, extreme_of(total(names, found), direction), worst, number)


@pytest.mark.parametrize("number", range(40))
def test_quick_look_is_the_best_vertex(number: int) -> None:
    # `thorough=False` promises a value that the true extreme reaches or exceeds; full enumeration is its slow equivalent.
    rng = np.random.default_rng(1500 + number)
    box = random_box(rng, 4)
    found = law(box, vertices(box))
    for names in quantities(box):
        for direction in BOTH:
            quick, worst = box.extreme(names, direction, thorough=False).value, box.extreme(names, direction).value
            assert np.all(direction * (worst - quick) >= 0.0)
            best = extreme_of(total(names, found), direction)
            assert_never_less(box, names, direction, best, quick, number)
            assert_never_less(box, names, -direction, best, quick, number)


def proved_everywhere(box: Box, names: Sequence[str], found: dict[str, Numbers], p: dict[str, Numbers]) -> Numbers:
    """Stages where every sign is proved and its premise (IB ≥ 0, IC ≥ ICBO, VBE ≥ 0) holds at every vertex."""
    signs = [box.sign(names, axis) for axis in box.axes]
    leak = p["icbo"] * box.transistor.leakage_factor(p["temperature"])
    premise = np.all((found["ib"] >= 0.0) & (found["ic"] >= leak) & (found["vbe"] >= 0.0), axis=0)
    return np.asarray(premise & (None not in signs))


def test_equal_to_full_enumeration_where_all_signs_are_proved() -> None:
    counted = 0
    for number in range(60):
        rng = np.random.default_rng(2000 + number)
        celsius = float(rng.choice([-40.0, 0.0, 25.0, 85.0]))
        box = random_box(rng, 6, temperature=Spread.exact(celsius + 273.15))
        u = vertices(box)
        p, found = point(box, u), law(box, u)
        for names in quantities(box):
            proved = proved_everywhere(box, names, found, p)
            for direction in BOTH:
                worst = box.extreme(names, direction).value
                best = extreme_of(total(names, found), direction)
                room = TRUE * np.abs(best) + grain(names, {k: np.asarray(v) for k, v in box.nominal().items()})
                assert np.all(np.abs(worst - best)[proved] <= np.broadcast_to(room, worst.shape)[proved]), (number, names, direction)
                counted += int(proved.sum())
    assert counted > 1000


def compare_with_scan(numbers: Sequence[int], build: Callable[[np.random.Generator], Box], starts: int = 3,
                      only: Sequence[Sequence[str]] | None = None) -> float:
    largest = 0.0
    for number in numbers:
        rng = np.random.default_rng(number)
        box = build(rng)
        for names in only or quantities(box):
            for direction in BOTH:
                worst = box.extreme(names, direction)
                best = np.array([scan_and_polish(box, rng, names, direction, starts)])
                assert_never_less(box, names, direction, best, worst.value, number)
                assert_never_less(box, names, -direction, best, worst.value, f"{number}, never reached by scan and polish")
                largest = max(largest, float(np.abs(beyond(box, names, direction, best, worst.value))[0]))
    return largest


def test_equal_to_dense_scan_and_polish(record_property: Callable[[str, object], None]) -> None:
    record_property("largest relative difference", compare_with_scan(range(3000, 3060), lambda rng: random_box(rng, 1)))


def test_vce_equal_to_dense_scan_and_polish_where_it_is_level(record_property: Callable[[str, object], None]) -> None:
    largest = compare_with_scan(range(3200, 3300), lambda rng: level_box(rng, 1), only=(("vce",),))
    record_property("largest relative difference", largest)


@pytest.mark.parametrize("celsius", [(-40.0, 25.0, 25.0), (-55.0, 20.0, 20.0), (-20.0, 25.0, 85.0)])
def test_equal_to_dense_scan_and_polish_on_wide_rails_and_cold_ambients(celsius: tuple[float, float, float]) -> None:
    # The case that the issue names: wide rails, cold-to-25 °C ambients with 400 ppm/K, minimum leakage.
    ambient = Spread(*(c + 273.15 for c in celsius))

    def build(rng: np.random.Generator) -> Box:
        rails = {"vcc": Spread(9.0, 12.0, 16.0)}
        device = random_transistor(rng, icbo=Spread(1e-9, 1e-8, 3e-8), icbo_hot=None, material="silicon")
        name = str(rng.choice(["divider", "fixed_base", "collector_feedback", "collector_divider"]))
        box = random_box(rng, 1, network=name, rails=rails, transistor=device, temperature=ambient)
        parts = {
            role: Parts(nominal=part.nominal, band=part.band, tcr_low=np.array([-4e-4]), tcr_high=np.array([4e-4]))
            for role, part in box.parts.items()
        }
        return Box(network=box.network, transistor=device, rails=rails, temperature=ambient, parts=parts)

    compare_with_scan(range(3100, 3104), build)


@pytest.mark.long
@pytest.mark.parametrize("number", range(20))
def test_equal_to_dense_scan_and_polish_long(number: int, record_property: Callable[[str, object], None]) -> None:
    first = 100_000 + 50 * number
    build: Callable[[np.random.Generator], Box] = lambda rng: random_box(rng, 1)  # noqa: E731
    record_property("largest relative difference", compare_with_scan(range(first, first + 50), build, starts=6))


def sweep(rng: np.random.Generator, boxes: int, size: int, count: int, build: Callable[[np.random.Generator, int], Box],
          keep: Callable[[Box, dict[str, Numbers], dict[str, Numbers]], Numbers] | None = None) -> int:
    """Sample the inside of random stages and look for an escape; returns the number of samples."""
    seen = 0
    for number in range(boxes):
        box = build(rng, size)
        # One stage in two is sampled all over, the others near the faces of their box, where extremes are.
        u = samples(rng, box, count, at_ends=float(rng.choice([0.0, 0.8])))
        p = point(box, u)
        found = active(box.network.name, box.transistor, p)
        if keep is not None:
            kept = np.flatnonzero(keep(box, p, found))
            if not kept.size:
                continue
            box = box.take(kept)
            found = {name: np.broadcast_to(x, (count, size))[:, kept] for name, x in found.items()}
        for names in quantities(box):
            values = total(names, found)
            for direction in BOTH:
                worst = box.extreme(names, direction).value
                assert_never_less(box, names, direction, extreme_of(values, direction), worst, number)
        seen += count * box.size
    return seen


def test_no_escape_among_half_a_million_interior_samples_of_random_stages() -> None:
    assert sweep(np.random.default_rng(4000), boxes=50, size=10, count=1000, build=random_box) == 500_000


@pytest.mark.long
@pytest.mark.parametrize("number", range(10))
def test_no_escape_among_ten_million_interior_samples_long(number: int) -> None:
    assert sweep(np.random.default_rng([4100, number]), boxes=400, size=10, count=2500, build=random_box) == 10_000_000


# Hunts: places where an extreme hides


def rest(box: Box, u: dict[str, float], axis: str, names: Sequence[str]) -> Callable[[float], float]:
    """A quantity along one coordinate, the others held."""

    def value(x: float) -> float:
        return float(total(names, law(box, {a: np.array([x if a == axis else u[a]]) for a in position(box)}))[0])

    return value


def inside(f: Callable[[float], float], direction: int, low: float = 0.0, high: float = 1.0) -> tuple[float, float]:
    """Interior extreme of a smooth function by Brent's method, which is good to some 1e-8 in x and so 1e-15 in value."""
    found = minimize_scalar(lambda x: -direction * f(x), bounds=(low, high), method="bounded", options={"xatol": 1e-10})
    return float(found.x), -direction * float(found.fun)


VT = 298.15 * Boltzmann / elementary_charge


@pytest.mark.parametrize(("r1", "r2", "rc", "re", "hfe"), [(1e5, 1e4, 1.1e4, 1e3, 450.0), (1e5, 1e4, 6.2e3, 470.0, 100.0),
                                                           (9.1e4, 1e4, 4.7e3, 470.0, 450.0)])
def test_vce_maximum_inside_the_rail_range(r1: float, r2: float, rc: float, re: float, hfe: float) -> None:
    # Hand derivation. With k = r2/(r1+r2), a = (Rp+re)/h + re and b = re/h + rc + re: VCE = VCC − b·IC and
    # k·VCC = a·IC + VBE(IC), so dVCE/dVCC = 1 − b·k/(VT/IC + a) is 0 at IC = VT/(b·k − a).
    k, a, b = r2 / (r1 + r2), (r1 * r2 / (r1 + r2) + re) / hfe + re, re / hfe + rc + re
    ic = VT / (b * k - a)
    vcc = (a * ic + 0.65 + VT * np.log(ic / 2e-3)) / k
    vce = vcc - b * ic
    assert 9.0 < vcc < 16.0
    box = stage(rails={"vcc": (9.0, 12.0, 16.0)}, hfe=(hfe,), r1=r1, r2=r2, rc=rc, re=re)
    corner = law(box, vertices(box))["vce"].max()
    assert vce > 1.004 * corner  # the vertices alone would be 0.4 % short
    worst = box.extreme(("vce",), 1)
    assert_allclose(worst.value, vce, rtol=1e-13, atol=0)
    # Flat at the top: the place is known only to the square root of the rounding of the value.
    assert_allclose(worst.at["vcc"], vcc, rtol=1e-6, atol=0)


@pytest.mark.parametrize("knee", [9.7, 12.3, 14.9])
def test_vce_maximum_where_a_fixed_drop_starts_to_conduct(knee: float) -> None:
    # Hand calculation: below VCC = VBE·(r1+r2)/r2 no current flows and VCE = VCC; above, VCE falls as rc·k > re.
    r2 = 1e4
    r1 = r2 * (knee - 0.65) / 0.65
    box = stage(rails={"vcc": (9.0, 12.0, 16.0)}, device={"vbe_model": "fixed"}, r1=r1, r2=r2, rc=3.3e4, re=100.0)
    assert_allclose(box.extreme(("vce",), 1).value, knee, rtol=TRUE, atol=0)


def test_vce_maximum_inside_the_band_of_re() -> None:
    # A small drop over rc: raising re takes current, but soon takes more voltage itself.
    box = stage(rails={"vcc": (4.9,)}, hfe=(11.18,), parts={"re": {"band": 0.2}}, r1=991.0, r2=2508.0, rc=77.4, re=1375.0)
    f = rest(box, dict.fromkeys(position(box), 0.0), "re", ("vce",))
    x, vce = inside(f, 1)
    assert 0.1 < x < 0.9
    assert vce > 1.0001 * max(f(0.0), f(1.0))
    assert_allclose(box.extreme(("vce",), 1).value, vce, rtol=1e-12, atol=0)


def test_ic_minimum_inside_the_ambient_range() -> None:
    # TCR of re against the slope of VBE, and leakage that cannot be absent: IC falls after 25 °C and rises again when hot.
    box = stage(celsius=(25.0, 25.0, 85.0), tolerance=0.01, parts={"re": {"tcr_low": -1e-3, "tcr_high": 1e-3}}, hfe=(150.0,),
                icbo=(15e-9,), r1=62e3, r2=43e3, rc=1e3, re=2e3)
    u = {**dict.fromkeys(position(box), 0.0), "r1": 1.0, "re": 1.0}
    f = rest(box, u, "temperature", ("ic",))
    x, ic = inside(f, -1)
    assert 0.1 < x < 0.9
    assert ic < 0.999 * min(f(0.0), f(1.0))
    assert_allclose(box.extreme(("ic",), -1).value, ic, rtol=TRUE, atol=0)


@pytest.mark.parametrize("depth", [1e-4, 1e-6, 1e-8])
def test_the_deeper_of_two_valleys_of_temperature(depth: float) -> None:
    # As above, but the cold end is almost as low as the valley when hot: looking only around the best of a few
    # temperatures, one ends in the wrong valley.
    def build(cold: float) -> Box:
        return stage(celsius=(cold, 25.0, 85.0), tolerance=0.01, parts={"re": {"tcr_low": -1e-3, "tcr_high": 1e-3}}, hfe=(150.0,),
                     icbo=(15e-9,), r1=62e3, r2=43e3, rc=1e3, re=2e3)

    def along(box: Box) -> Callable[[float], float]:
        return rest(box, {**dict.fromkeys(position(box), 0.0), "r1": 1.0, "re": 1.0}, "temperature", ("ic",))

    hot = build(25.0)
    _, ic = inside(along(hot), -1)
    cold = brentq(lambda c: along(build(c))(0.0) - ic * (1.0 + depth), 20.0, 24.9, xtol=1e-13)
    assert_allclose(build(cold).extreme(("ic",), -1).value, ic, rtol=TRUE, atol=0)


@pytest.mark.parametrize("hot", [60.0, 80.0, 90.0, 95.0, 100.0, 105.0, 110.0, 115.0, 120.0, 125.0])
@pytest.mark.parametrize(("tcr", "icbo"), [(1.03e-3, 1e-7), (1.299e-3, 5e-7)])
def test_a_valley_close_to_25_degrees_behind_a_cold_end_almost_as_low(hot: float, tcr: float, icbo: float) -> None:
    # The valley lies near 29.5 °C; the hot end of the ambient range shifts the points of any scan across it. The cold end
    # lies above the valley by a third of its depth, so it wins wherever the valley is not looked into.
    def build(cold: float) -> Box:
        return stage(celsius=(cold, 25.0, hot), tolerance=0.01, parts={"re": {"tcr_low": -tcr, "tcr_high": tcr}}, hfe=(150.0,),
                     icbo=(icbo,), r1=62e3, r2=43e3, rc=1e3, re=2e3)

    def along(box: Box) -> Callable[[float], float]:
        return rest(box, {**dict.fromkeys(position(box), 0.0), "r1": 1.0, "re": 1.0}, "temperature", ("ic",))

    f = along(build(25.0))
    x, ic = inside(f, -1, 0.0, 9.0 / (hot - 25.0))
    depth = f(0.0) / ic - 1.0
    assert 29.0 < 25.0 + (hot - 25.0) * x < 30.0
    assert depth > 5e-6
    cold = brentq(lambda c: along(build(c))(0.0) - ic * (1.0 + 0.3 * depth), 15.0, 24.99999, xtol=1e-13)
    assert_allclose(build(cold).extreme(("ic",), -1).value, ic, rtol=TRUE, atol=0)


def test_the_higher_of_two_peaks_of_temperature_of_a_rail_current() -> None:
    def build(hot: float) -> Box:
        parts = {"r1": {"band": 0.0, "tcr_low": -1e-3, "tcr_high": 1e-3}, "r2": {"band": 0.001, "tcr_low": 1e-4, "tcr_high": 3e-4},
                 "re": {"band": 0.1}}
        return stage(rails={"vcc": (15.0, 18.0, 26.0)}, celsius=(-40.0, 0.0, hot), hfe=(42.0, 47.0, 95.0), vbe=(0.55, 0.65, 0.75),
                     icbo=(2.4e-6, 6e-6, 1.2e-5), device={"vbe_model": "fixed"}, parts=parts, r1=15.7e3, r2=2.5e3, rc=880.0, re=300.0)

    def along(box: Box) -> Callable[[float], float]:
        u = {**dict.fromkeys(position(box), 1.0), "delta": 0.0, "r1": 0.0, "re": 0.0}
        return rest(box, u, "temperature", ("ic", "i_r1"))

    _, peak = inside(along(build(5.0)), 1)
    hot = brentq(lambda c: along(build(c))(1.0) - peak * (1.0 - 1e-6), 10.0, 24.0, xtol=1e-13)
    assert_allclose(build(hot).extreme(("ic", "i_r1"), 1).value, peak, rtol=TRUE, atol=0)


def test_resistor_without_tolerance_has_no_width_at_25_degrees_only() -> None:
    # At 25 °C both ends of re are one point; the maximum lies just above, at the end of re that grows.
    box = stage(celsius=(25.0, 25.0, 70.0), hfe=(300.0,), icbo=(2e-7,), parts={"re": {"tcr_low": -1.31243e-3, "tcr_high": 1.31243e-3}},
                r1=33e3, r2=22e3, rc=2.2e3, re=2e3)
    f = rest(box, {**dict.fromkeys(position(box), 0.0), "re": 1.0}, "temperature", ("vce",))
    x, vce = inside(f, 1, 0.0, 0.5)
    assert 0.01 < x < 0.1
    assert vce > (1.0 + 1e-6) * f(0.0)
    assert_allclose(box.extreme(("vce",), 1).value, vce, rtol=TRUE, atol=0)


@pytest.mark.parametrize("direction", BOTH)
def test_base_current_that_flows_backwards_turns_the_sign_of_rb(direction: int) -> None:
    # Hot germanium with 50 µA of leakage: IB < 0 all over the box, so more rb means more IC.
    box = stage("fixed_base", celsius=(60.0, 60.0, 60.0), tolerance=0.05, hfe=(40.0, 60.0, 80.0), vbe=(0.1, 0.15, 0.2), icbo=(5e-6, 5e-6, 8e-6),
                device={"material": "germanium", "vbe_ic": 1e-3}, rails={"vcc": (11.0, 12.0, 13.0), "vbb": (0.4, 0.5, 0.6)},
                rb=10e3, rc=2.2e3, re=470.0)
    u = vertices(box)
    found = law(box, u)
    assert np.all(found["ib"] < 0.0)
    k = int(np.argmax(direction * found["ic"]))
    assert u["rb"][k] == (1.0 if direction > 0 else 0.0)
    for names in (("ic",), ("i_rb",)):
        values = total(names, found)
        assert_allclose(box.extreme(names, direction).value, extreme_of(values, direction), rtol=TRUE, atol=0)


def above_leakage(box: Box, p: dict[str, Numbers], found: dict[str, Numbers]) -> Numbers:
    """Stages whose emitter current never turns round: IC ≥ ICBO and VBE ≥ 0 at every sample."""
    leak = p["icbo"] * box.transistor.leakage_factor(p["temperature"])
    return np.asarray(np.all((found["ic"] >= leak) & (found["vbe"] >= 0.0), axis=0))


def test_no_escape_where_leakage_turns_the_base_current_round() -> None:
    assert sweep(np.random.default_rng(4200), boxes=30, size=10, count=500, build=leaky_box, keep=above_leakage) > 50_000


@pytest.mark.long
@pytest.mark.parametrize("number", range(10))
def test_no_escape_where_leakage_turns_the_base_current_round_long(number: int) -> None:
    rng = np.random.default_rng([4300, number])
    assert sweep(rng, boxes=300, size=10, count=2000, build=leaky_box, keep=above_leakage) > 1_000_000


def test_vce_maximum_where_the_collector_current_falls_below_the_leakage() -> None:
    # Deep cut-off: leakage alone feeds the base, and VCE peaks inside the ambient range at the greatest leakage.
    parts = {"r1": {"band": 0.1, "tcr_low": -1e-3, "tcr_high": 1e-3}, "r2": {"band": 0.05, "tcr_low": -1e-3, "tcr_high": -2e-4},
             "rc": {"band": 0.05, "tcr_low": 1e-4, "tcr_high": 3e-4}, "re": {"band": 0.0, "tcr_low": -4e-4, "tcr_high": 4e-4}}
    box = stage(rails={"vcc": (8.4, 13.0, 20.0)}, celsius=(-40.0, 15.0, 15.0), hfe=(21.0,), vbe=(0.63, 0.65, 0.75), icbo=(0.0, 0.0, 250e-6),
                device={"vbe_ic": 1e-3}, parts=parts, r1=1.5e6, r2=26e3, rc=250e3, re=71e3)
    u = {**dict.fromkeys(position(box), 1.0), "r2": 0.0, "rc": 0.0}
    _, vce = inside(rest(box, u, "temperature", ("vce",)), 1, 0.0, 0.2)
    assert_never_less(box, ("vce",), 1, np.array([vce]), box.extreme(("vce",), 1).value, "cut off")


@pytest.mark.long
@pytest.mark.parametrize("number", range(10))
def test_no_escape_of_leaky_stages_cut_off_or_not_long(number: int) -> None:
    assert sweep(np.random.default_rng([4400, number]), boxes=300, size=10, count=2000, build=leaky_box) == 6_000_000


@pytest.mark.parametrize("number", range(6))
def test_germanium_equals_dense_scan_and_polish(number: int) -> None:
    def build(rng: np.random.Generator) -> Box:
        device = random_transistor(rng, material="germanium", vbe=Spread(0.1, 0.15, 0.2), vbe_ic=1e-3, vbe_model="junction",
                                   icbo=Spread(1e-6, 2e-6, 5e-6), icbo_hot=None)
        ambient = Spread(273.15, ROOM, 328.15)
        while True:
            box = random_box(rng, 1, transistor=device, temperature=ambient)
            u = samples(rng, box, 500, at_ends=0.9)
            p = point(box, u)
            if above_leakage(box, p, active(box.network.name, device, p)).all():
                return box

    compare_with_scan([5000 + number], build)


# The point that decides


@pytest.mark.parametrize("number", range(25))
def test_deciding_point_gives_the_extreme_again(number: int) -> None:
    rng = np.random.default_rng(6000 + number)
    box = leaky_box(rng, 6) if number % 3 == 0 else random_box(rng, 6)
    for names in quantities(box):
        for direction in BOTH:
            worst = box.extreme(names, direction)
            again = box.measure(names, worst.at, box.solve(worst.at, active_law=True))
            assert_allclose(again, worst.value, rtol=SAME, atol=0)
            # And it is a point of the box, by the laws written out in `stages`.
            at = circuit(box, worst.at)
            mine = total(names, active(box.network.name, box.transistor, at))
            assert np.all(np.abs(mine - worst.value) <= TRUE * np.abs(mine) + grain(names, at))
            assert_inside(box, worst)


def assert_inside(box: Box, worst: Extreme) -> None:
    t = worst.at["temperature"]
    slack = 1e-13
    assert np.all((t >= box.temperature.low * (1 - slack)) & (t <= box.temperature.high * (1 + slack)))
    for name, spread in box.spreads.items():
        room = slack * max(abs(spread.low), abs(spread.high), 1.0 if name in ("delta", "delta_ref") else 0.0)
        assert np.all((worst.at[name] >= spread.low - room) & (worst.at[name] <= spread.high + room)), name
    for role, part in box.parts.items():
        rise = t - ROOM
        reach = part.band + np.maximum(np.abs(part.tcr_low * rise), np.abs(part.tcr_high * rise))
        assert np.all(np.abs(worst.at[role] - part.nominal) <= part.nominal * (reach + slack)), role


@pytest.mark.parametrize("number", range(15))
def test_anchor_leads_back_to_the_deciding_point(number: int) -> None:
    rng = np.random.default_rng(6100 + number)
    box = leaky_box(rng, 3) if number % 3 == 0 else random_box(rng, 3)
    for names in quantities(box):
        for direction in BOTH:
            worst = box.extreme(names, direction)
            for k in range(box.size):
                one = box.take([k])
                values = one.values(worst.anchor(k))
                for name, x in worst.at.items():
                    assert_allclose(np.squeeze(values[name]), x[k], rtol=SAME, atol=1e-15 if name == "delta" else 0, err_msg=name)
                again = one.measure(names, values, one.solve(values, active_law=True))
                assert_allclose(np.squeeze(again), worst.value[k], rtol=SAME, atol=0)
                assert worst.take(k).anchor(0) == worst.anchor(k)
                assert_array_equal(worst.take(k).value, worst.value[k : k + 1])


def test_anchor_names_only_axes_that_matter() -> None:
    box = stage(celsius=(0.0, 25.0, 70.0), tolerance=0.01, r1=68e3, r2=22e3, rc=3.3e3, re=1e3)
    anchor = box.extreme(("ic",), 1).anchor(0)
    # Of a divider in the active region rc does not enter IC; the rail and the gain have no width here.
    assert anchor == {"r1": 0.0, "r2": 1.0, "re": 0.0, "temperature": 70.0 + 273.15}


# Boxes that reach into saturation


def check_any_region(box: Box, u: dict[str, Numbers], case: object, wanted: Sequence[Sequence[str]] | None = None) -> int:
    found = any_region(box.network.name, box.transistor, point(box, u))
    for names in wanted or quantities(box):
        values = total(names, found)
        for direction in BOTH:
            worst = extreme_in_any_region(box, names, direction)
            some = np.where(np.isnan(values), -direction * np.inf, values)
            assert_never_less(box, names, direction, extreme_of(some, direction), worst.value, case)
    return int(np.size(values))


@pytest.mark.parametrize("number", [*range(4), *(pytest.param(k, marks=pytest.mark.long) for k in range(4, 8))])
def test_any_region_never_less_than_any_vertex(number: int) -> None:
    rng = np.random.default_rng(7000 + number)
    box = edge_box(rng, 3)
    check_any_region(box, vertices(box), number)


@pytest.mark.parametrize("number", [*range(4), *(pytest.param(k, marks=pytest.mark.long) for k in range(4, 8))])
def test_any_region_has_no_escape_among_interior_samples(number: int) -> None:
    rng = np.random.default_rng(7100 + number)
    box = edge_box(rng, 4)
    assert check_any_region(box, samples(rng, box, 5000, at_ends=0.7), number) == 20_000


@pytest.mark.long
@pytest.mark.parametrize("number", range(60))
def test_any_region_has_no_escape_among_interior_samples_long(number: int) -> None:
    rng = np.random.default_rng([7200, number])
    box = edge_box(rng, 6)
    check_any_region(box, samples(rng, box, 20_000, at_ends=float(rng.choice([0.0, 0.8]))), number)


@pytest.mark.parametrize("number", range(6))
def test_any_region_deciding_point_gives_the_extreme_again(number: int) -> None:
    rng = np.random.default_rng(7300 + number)
    box = edge_box(rng, 3)
    for names in (("ic",), ("vce",)):
        for direction in BOTH:
            worst = extreme_in_any_region(box, names, direction)
            assert_allclose(box.measure(names, worst.at, box.solve(worst.at)), worst.value, rtol=SAME, atol=0)
            assert_inside(box, worst)


def straddling(**changes: Any) -> Box:
    """A divider stage that saturates with most drive at high VCC, high gain and low re, and is active with least."""
    figures: dict[str, Any] = {
        "rails": {"vcc": (11.4, 12.0, 12.6)}, "hfe": (100.0, 200.0, 400.0), "tolerance": 0.05, "vbe": (0.6, 0.65, 0.7),
        "r1": 82e3, "r2": 22e3, "rc": 4.9e3, "re": 1e3,
    }
    return stage(**{**figures, **changes})


def load_line(box: Box, vcc: float, rc: float, re: float, hfe: float) -> float:
    """IC on the edge of saturation without leakage: VCC − VCE(sat) = rc·IC + re·IC·(1 + 1/h), whatever drives the base."""
    return (vcc - box.transistor.vce_sat) / (rc + re * (1.0 + 1.0 / hfe))


def test_ic_maximum_lies_on_the_edge_of_saturation() -> None:
    box = straddling()
    edge = load_line(box, 12.6, 0.95 * 4.9e3, 0.95e3, 400.0)
    u = vertices(box)
    found = any_region("divider", box.transistor, point(box, u))
    # The edge runs between the vertices: with least drive the active law gives less, with most drive saturation takes some.
    assert found["ic"].max() < edge * (1.0 - 1e-4)
    worst = extreme_in_any_region(box, ("ic",), 1)
    assert_allclose(worst.value, edge, rtol=TRUE, atol=0)
    assert_allclose(extreme_in_any_region(box, ("vce",), -1).value, box.transistor.vce_sat, rtol=SAME, atol=0)
    # The active law alone would promise a current that the load line cannot carry.
    assert box.extreme(("ic",), 1).value[0] > 1.03 * edge


def test_ic_maximum_on_the_edge_with_a_base_rail_of_its_own() -> None:
    # Only VBB drives the base here: rb and VBE are exact. The edge is where VBB makes it.
    box = stage("fixed_base", rails={"vcc": (9.5, 10.0, 10.5), "vbb": (4.0, 5.0, 6.0)}, hfe=(100.0, 150.0, 300.0), parts={"rc": {"band": 0.05}},
                rb=47e3, rc=2.7e3, re=1e3)
    edge = load_line(box, 10.5, 0.95 * 2.7e3, 1e3, 300.0)
    found = any_region("fixed_base", box.transistor, point(box, vertices(box)))
    assert found["ic"].max() < edge * (1.0 - 1e-4)
    assert_allclose(extreme_in_any_region(box, ("ic",), 1).value, edge, rtol=TRUE, atol=0)


def test_ic_maximum_on_the_edge_of_a_stage_with_two_supplies() -> None:
    # VEE drives the base and lengthens the load line; the edge is at rc·IC + re·IE = VCC + VEE − VCE(sat) for any VEE.
    box = stage("two_supply", rails={"vcc": (9.5, 10.0, 10.5), "vee": (4.0, 5.0, 6.0)}, hfe=(100.0, 150.0, 300.0), parts={"rc": {"band": 0.05}},
                rb=10e3, rc=2.5e3, re=1.1e3)
    u = samples(np.random.default_rng(0), box, 20_000, at_ends=0.8)
    found = any_region("two_supply", box.transistor, point(box, u))["ic"]
    assert_never_less(box, ("ic",), 1, found.max(axis=0), extreme_in_any_region(box, ("ic",), 1).value, "two supplies")


@pytest.mark.parametrize("rb", [220e3, 470e3, 680e3])
def test_fixed_base_without_re_is_held_by_the_load_line(rb: float) -> None:
    # From saturated all over (220 kΩ) to straddling: IC never exceeds (VCC − VCE(sat))/rc.
    box = stage("fixed_base", rails={"vcc": (11.4, 12.0, 12.6)}, celsius=(0.0, 25.0, 70.0), hfe=(100.0, 200.0, 450.0), tolerance=0.05, tcr=1e-4,
                vbe=(0.6, 0.65, 0.7), rb=rb, rc=2.2e3)
    # 5 % and 100 ppm/K over 45 K, the farther end.
    line = (12.6 - 0.2) / (2.2e3 * (1.0 - 0.05 - 45e-4))
    worst = extreme_in_any_region(box, ("ic",), 1)
    assert_allclose(worst.value, line, rtol=TRUE, atol=0)
    assert box.solve(worst.at).region[0] == SATURATED
    assert_allclose(extreme_in_any_region(box, ("vce",), -1).value, 0.2, rtol=SAME, atol=0)


def test_active_box_has_the_same_extremes_in_any_region() -> None:
    # No point saturates, so the two laws agree everywhere (section 4) and so must their extremes.
    box = stage(rails={"vcc": (9.0, 12.0, 16.0)}, celsius=(-20.0, 25.0, 60.0), tolerance=0.01, tcr=1e-4, hfe=(200.0, 300.0, 450.0), vbe=(0.63, 0.65, 0.67),
                r1=1e5, r2=1e4, rc=8.2e3, re=1e3)
    assert law(box, vertices(box))["vce"].min() > 0.5
    for names in (("ic",), ("vce",), ("i_r1",), ("i_r2",), ("ic", "i_r1")):
        for direction in BOTH:
            wanted = box.extreme(names, direction).value
            assert_allclose(extreme_in_any_region(box, names, direction).value, wanted, rtol=TRUE, atol=0, err_msg=f"{names} {direction}")


def test_vce_maximum_inside_a_rail_range_that_ends_in_saturation() -> None:
    # As in the active region: IC = VT/(b·k − a) where dVCE/dVCC = 0; at 16 V this stage is saturated.
    r1, r2, rc, re, hfe = 150e3, 8.2e3, 18e3, 10.0, 200.0
    k, a, b = r2 / (r1 + r2), (r1 * r2 / (r1 + r2) + re) / hfe + re, re / hfe + rc + re
    ic = VT / (b * k - a)
    vcc = (a * ic + 0.65 + VT * np.log(ic / 2e-3)) / k
    assert 9.0 < vcc < 16.0
    box = stage(rails={"vcc": (9.0, 12.0, 16.0)}, r1=r1, r2=r2, rc=rc, re=re)
    assert any_region("divider", box.transistor, point(box, vertices(box)))["vce"].min() < 0.2001
    assert_allclose(extreme_in_any_region(box, ("vce",), 1).value, vcc - b * ic, rtol=1e-12, atol=0)


def test_supply_current_on_the_edge_of_saturation() -> None:
    # On the edge IC does not depend on the divider, so the supply current is greatest there with the least r1, and r2 such
    # that the edge is reached. That is a point of the box, found here by bisection of VCE = VCE(sat).
    box = straddling(tolerance=0.1, hfe=(400.0,), vbe=(0.65,), rails={"vcc": (12.0,)}, r1=8.2e3, r2=2.2e3, rc=4.2e3)
    u = {**dict.fromkeys(position(box), 0.0)}
    f = rest(box, u, "r2", ("vce",))
    assert f(0.0) > 0.2 > f(1.0)
    x = brentq(lambda x: f(x) - 0.2, 0.0, 1.0, xtol=1e-15)
    edge = rest(box, u, "r2", ("ic", "i_r1"))(x)
    values = any_region("divider", box.transistor, point(box, vertices(box)))
    assert edge > 1.0001 * total(("ic", "i_r1"), values).max()
    worst = extreme_in_any_region(box, ("ic", "i_r1"), 1).value
    assert_never_less(box, ("ic", "i_r1"), 1, np.array([edge]), worst, "edge")


def test_temperature_at_which_the_edge_is_just_reached() -> None:
    # With most drive the stage is on the edge at 45 °C, active below; rc grows with temperature, so IC on the load line
    # falls: the maximum is where both laws meet, inside the ambient range.
    parts = {"rc": {"band": 0.0, "tcr_low": 1e-3, "tcr_high": 1e-3}}
    box = stage("fixed_base", celsius=(0.0, 25.0, 70.0), hfe=(200.0,), parts=parts, rb=390e3, rc=1.94e3)
    u = dict.fromkeys(position(box), 0.0)
    f = rest(box, u, "temperature", ("vce",))
    assert f(0.0) > 0.2 > f(1.0)
    x = brentq(lambda x: f(x) - 0.2, 0.0, 1.0, xtol=1e-15)
    ic = rest(box, u, "temperature", ("ic",))(x)
    assert_allclose(extreme_in_any_region(box, ("ic",), 1).value, ic, rtol=TRUE, atol=0)


def test_stage_without_any_operating_point_has_no_worst_case() -> None:
    # The base rail lifts the emitter above VCC: no IC ≥ 0 satisfies both equations, and nothing may pass on such figures.
    box = stage("fixed_base", rails={"vcc": (5.0,), "vbb": (30.0,)}, tolerance=0.01, rb=100.0, rc=10e3, re=1e3)
    assert np.isnan(saturated("fixed_base", box.transistor, point(box, vertices(box)))["ic"]).all()
    window = Requirement(name="target.ic", kind="current", interval=Interval(1e-4, 1e-3), judged="box", target=5e-4)
    for direction in BOTH:
        worst = extreme_in_any_region(box, ("ic",), direction).value
        assert not window.side(direction).passes(worst).any(), (direction, worst)
