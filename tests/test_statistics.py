"""Statistics: distributions, stability factors, sensitivities, root-sum-square and Monte Carlo.

The other side of each check is a general library (scipy.stats, sympy, uncertainties), the closed forms of the textbooks, the
node equations of `stages`, which share nothing with the package, or a figure worked out by hand beside the check.
"""

from __future__ import annotations

import math
from dataclasses import replace

import nodal
import numpy as np
import pytest
import sympy
from numpy.testing import assert_allclose, assert_array_equal
from scipy import stats
from stages import SOLVED, active, any_region, circuit, edge_box, random_box
from uncertainties import ufloat

from synth.box import Box
from synth.limits import Requirement
from synth.networks import NETWORKS
from synth.parts import Pairs, Parts
from synth.preferred.pairs import SERIES
from synth.quantities import Interval, Spread
from synth.statistics import (
    SPREADS,
    Distribution,
    DistributionError,
    Lot,
    draws,
    factors,
    gain_change,
    gradients,
    interval,
    linear_sigma,
    monte_carlo,
    rss,
    sensitivities,
    stability,
)
from synth.straddle import extreme_in_any_region
from synth.transistor import T0, Transistor

U = (np.arange(2000) + 0.5) / 2000


def fixed_box(network: str = "divider", **changes: object) -> Box:
    """A stage with a constant VBE at one temperature, so that its circuit is linear."""
    values = {"r1": 39e3, "r2": 10e3, "rc": 2.2e3, "re": 1e3, "rb": 470e3}
    roles = [role.name for role in NETWORKS[network].roles if not role.optional]
    none = np.zeros(1)
    settings: dict[str, object] = {
        "network": NETWORKS[network],
        "transistor": Transistor(hfe=Spread(100.0, 200.0, 300.0), vbe=Spread(0.6, 0.65, 0.7), vbe_ic=1e-3, vbe_model="fixed"),
        "rails": {"vcc": Spread(11.4, 12.0, 12.6)},
        "temperature": Spread.exact(T0),
        "parts": {
            role: Parts(nominal=np.array([values[role]]), band=np.array([0.05]), tcr_low=none, tcr_high=none) for role in roles
        },
    }
    return Box(**{**settings, **changes})  # type: ignore[arg-type]


# --- Distributions ----------------------------------------------------------------------------------------------------


def test_uniform_and_log_uniform_are_those_of_the_library() -> None:
    # A quantile of a few operations.
    assert_allclose(Distribution().quantile(U, 2.0, 3.0, 5.0), stats.uniform(2.0, 3.0).ppf(U), rtol=1e-15, atol=0)
    found = Distribution(shape="log_uniform").quantile(U, 110.0, 222.0, 450.0)
    assert_allclose(found, stats.loguniform(110.0, 450.0).ppf(U), rtol=1e-13, atol=0)


def test_even_normal_is_the_truncated_normal_of_the_library() -> None:
    law = stats.truncnorm(-3.0, 3.0, loc=0.65, scale=0.05 / 3.0)
    found = Distribution(shape="normal").quantile(U, 0.60, 0.65, 0.70)
    # Both invert the normal integral to some 1e-14 of the width.
    assert_allclose(found, law.ppf(U), rtol=1e-13, atol=0)


def test_uneven_normal_has_its_mode_at_the_nominal_value_and_no_step_there() -> None:
    # Each side is half of a truncated normal; equal heights at the mode share the units as 1 : 3.
    found = Distribution(shape="normal").quantile(U, 1.0, 2.0, 5.0)
    left = stats.truncnorm(-3.0, 0.0, loc=2.0, scale=1.0 / 3.0).ppf(U[U < 0.25] / 0.25)
    right = stats.truncnorm(0.0, 3.0, loc=2.0, scale=1.0).ppf((U[U > 0.25] - 0.25) / 0.75)
    assert_allclose(found, np.concatenate([left, right]), rtol=1e-12, atol=0)


def test_one_sided_normal_stays_on_its_side() -> None:
    found = Distribution(shape="normal").quantile(U, 0.0, 0.0, 3.0)
    # Half of a normal law with sigma 1, cut off at 3.
    assert_allclose(found, stats.truncnorm(0.0, 3.0).ppf(U), rtol=1e-12, atol=0)


def test_measured_values_are_equally_likely() -> None:
    found = Distribution(shape="measured", values=(5.0, 1.0, 2.0)).quantile(np.arange(9) / 9.0, 0.0, 1.0, 9.0)
    assert_array_equal(found, np.repeat([1.0, 2.0, 5.0], 3))


def test_nominal_units_are_all_alike() -> None:
    assert_array_equal(Distribution(shape="nominal").quantile(U, 1.0, 2.0, 4.0), np.full(U.size, 2.0))


@pytest.mark.parametrize("shape", ["uniform", "normal", "log_uniform"])
def test_ends_are_met_and_not_passed(shape: str) -> None:
    u = np.array([0.0, 1.0 - 2.0**-53])
    found = Distribution(shape=shape).quantile(u, 3.0, 7.0, 9.1)  # type: ignore[arg-type]
    assert 3.0 <= found[0] <= 3.0 * (1.0 + 1e-12)
    assert 9.1 * (1.0 - 1e-12) <= found[1] <= 9.1


def test_logarithmic_law_from_zero_is_refused() -> None:
    with pytest.raises(DistributionError, match=r"read log_uniform for a spread that begins at 0, accepted is a spread above 0"):
        Distribution(shape="log_uniform").quantile(U, 0.0, 1.0, 2.0)


@pytest.mark.parametrize(("shape", "values"), [("measured", ()), ("uniform", (1.0,))])
def test_measured_values_belong_to_their_shape(shape: str, values: tuple[float, ...]) -> None:
    with pytest.raises(DistributionError, match=rf"read {shape} with {len(values)} values, accepted is measured values"):
        Distribution(shape=shape, values=values)  # type: ignore[arg-type]


def test_hfe_is_log_uniform_and_the_rest_uniform_by_default() -> None:
    assert {name for name in SPREADS if Lot().law(name).shape != "uniform"} == {"hfe"}
    assert Lot().law("hfe").shape == "log_uniform"


# --- The interval of a share ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("passed", "units"), [(0, 10), (1, 10), (7, 10), (10, 10), (65530, 65536), (0, 1)])
def test_interval_is_the_exact_binomial_one_of_the_library(passed: int, units: int) -> None:
    expected = stats.binomtest(passed, units).proportion_ci(0.95, method="exact")
    # The library finds its ends by bracketing.
    assert_allclose(interval(passed, units), (expected.low, expected.high), rtol=1e-9, atol=0)


def test_interval_without_a_failure_follows_its_closed_form() -> None:
    # All n of n: the low end is the share p with p**n = 2.5 %.
    assert_allclose(interval(100, 100)[0], 0.025**0.01, rtol=1e-12, atol=0)
    assert interval(100, 100)[1] == 1.0


# --- Stability factors ------------------------------------------------------------------------------------------------

BETA, V, VBE = 150.0, 10.0, 0.7


@pytest.mark.parametrize("ico", [0.0, 5e-6])
@pytest.mark.parametrize(
    ("network", "rb", "rf"),
    [
        ("fixed_base", 470e3, 0.0),
        ("divider", 39e3 * 10e3 / 49e3, 1e3),
        ("collector_feedback", 470e3, 2.2e3),
        ("two_supply", 470e3, 1e3),
        ("follower", 39e3 * 10e3 / 49e3, 1e3),
    ],
)
def test_factors_are_the_textbook_forms_of_a_single_loop(network: str, rb: float, rf: float, ico: float) -> None:
    """S = (1+β)(RB+RF)/D, S' = −β/D, S'' = (RB+RF)(V−VBE+RB·ICO)/D² with D = RB+(1+β)RF: reference/physics.md, section 6."""
    r = {"r1": 39e3, "r2": 10e3, "rc": 2.2e3, "re": 1e3, "rb": 470e3}
    form = NETWORKS[network]
    if network in ("fixed_base", "collector_feedback"):
        del r["re"]
    source = V * 10e3 / 49e3 if network in ("divider", "follower") else V
    port = form.two_port({"vcc": V, "vee": V}, r, T0)
    d = rb + (1.0 + BETA) * rf
    ic = (BETA * (source - VBE) + (1.0 + BETA) * (rb + rf) * ico) / d
    found = factors(port, hfe=BETA, ic=ic, icbo=ico)
    expected = ((1.0 + BETA) * (rb + rf) / d, -BETA / d, (rb + rf) * (source - VBE + rb * ico) / d**2)
    # A few sums of positive terms, one difference of IC and ICO.
    assert_allclose(found, expected, rtol=1e-13, atol=0)


def test_factors_of_collector_feedback_with_a_divider() -> None:
    """K = 1+(R1+RC)/R2, A = R1+RC+K·RE, D = R1+(1+β)(RC+K·RE): reference/physics.md, section 6."""
    r1, r2, rc, re, ico = 100e3, 22e3, 2.2e3, 470.0, 2e-6
    k = 1.0 + (r1 + rc) / r2
    a, d = r1 + rc + k * re, r1 + (1.0 + BETA) * (rc + k * re)
    ic = (BETA * (V - k * VBE) + (1.0 + BETA) * a * ico) / d
    port = NETWORKS["collector_divider"].two_port({"vcc": V}, {"r1": r1, "r2": r2, "rc": rc, "re": re}, T0)
    expected = ((1.0 + BETA) * a / d, -BETA * k / d, a * (V - k * VBE + r1 * ico) / d**2)
    assert_allclose(factors(port, hfe=BETA, ic=ic, icbo=ico), expected, rtol=1e-12, atol=0)


@pytest.mark.parametrize("network", SOLVED)
def test_factors_are_the_derivatives_of_the_symbolic_solution(network: str) -> None:
    """sympy solves the node equations of each network for IC and VCE and differentiates them."""
    form = NETWORKS[network]
    rails = [*form.rails, *form.optional_rails]
    vref = sympy.Symbol("vref")
    symbols = {name: sympy.Symbol(name, positive=True) for name in (*rails, *form.role_names, "r_ref", "hfe", "icbo", "vbe")}
    has_reference = form.reference == "needed"
    unknown = {node: sympy.Symbol(f"u_{node}") for node in ("b", "c", "e", "m")}
    fixed = {"0": sympy.Integer(0), **{n: -symbols[n] if n in nodal.BELOW_GROUND else symbols[n] for n in rails}}
    if not has_reference:
        fixed["m"] = sympy.Integer(0)
    volts = {**unknown, **fixed, **{node: fixed[rail] for node, rail in form.tied.items()}}
    ib, ic = sympy.symbols("ib ic")
    into = {node: sympy.Integer(0) for node in ("b", "c", "e", "m")}
    for role in form.roles:
        one, two = role.nodes
        current = (volts[one] - volts[two]) / symbols[role.name]
        for node, sign in ((one, -1), (two, 1)):
            if node in into:
                into[node] += sign * current
    h, i0 = symbols["hfe"], symbols["icbo"]
    laws = [into["b"] - ib, into["e"] + ib + ic, volts["b"] - volts["e"] - symbols["vbe"], ic - h * ib - (h + 1) * i0]
    wanted = [ib, ic, unknown["b"], unknown["e"]]
    if "c" not in form.tied:
        laws.append(into["c"] - ic)
        wanted.append(unknown["c"])
    if has_reference:
        laws.append(into["m"] - (volts["m"] - vref) / symbols["r_ref"])
        wanted.append(unknown["m"])
    # The currents of the loop are linear in the unknowns: one solution.
    matrix, right = sympy.linear_eq_to_matrix(laws, wanted)
    numbers = {
        "vcc": 12.0, "vbb": 5.0, "vee": 9.0, "vload": 20.0, "r1": 39e3, "r2": 10e3, "rc": 2.2e3, "re": 1e3, "rb": 330e3,
        "r_ref": 40.0, "hfe": 150.0, "icbo": 20e-9, "vbe": 0.65,
    }  # fmt: skip
    at = {symbols[name]: sympy.Float(numbers[name], 40) for name in symbols} | {vref: sympy.Rational(12, 10)}
    solved = matrix.subs(at).LUsolve(right.subs(at))

    def derivative(symbol: sympy.Symbol) -> sympy.Matrix:
        # From A·x = b: A·dx = db − dA·x, exact.
        return matrix.subs(at).LUsolve(right.diff(symbol).subs(at) - matrix.diff(symbol).subs(at) * solved)

    def vce_of(column: sympy.Matrix, symbol: sympy.Symbol | None) -> sympy.Expr:
        if "c" not in form.tied:
            return column[4] - column[3]
        held = fixed[form.tied["c"]]
        return (held.subs(at) if symbol is None else held.diff(symbol)) - column[3]

    reference = None
    if has_reference:
        from synth.reference import Reference

        exact = Spread.exact
        reference = Reference(kind="zener", voltage=exact(1.2), current=1e-30, tc=exact(0.0), slope=exact(numbers["r_ref"]))
    none = np.zeros(1)
    box = fixed_box(
        network,
        rails={name: Spread.exact(numbers[name]) for name in rails},
        transistor=Transistor(
            hfe=Spread.exact(150.0), vbe=Spread.exact(0.65), vbe_ic=1e-3, vbe_model="fixed", icbo=Spread.exact(20e-9),
        ),
        reference=reference,
        parts={
            name: Parts(nominal=np.array([numbers[name]]), band=none, tcr_low=none, tcr_high=none) for name in form.role_names
        },
    )
    found = gradients(box, box.nominal())
    pairs = {"delta": symbols["vbe"], "delta_ref": vref}
    for name, (ic_slope, vce_slope) in found.items():
        symbol = pairs.get(name, symbols.get(name))
        expected = derivative(symbol)
        # The package works in doubles, with differences of voltages of some ten volts; a zero is zero to their rounding.
        scale = abs(float(solved[1])) / max(abs(float(at[symbol])), 1e-12)
        assert_allclose(ic_slope, float(expected[1]), rtol=1e-10, atol=1e-14 * scale)
        assert_allclose(vce_slope, float(vce_of(expected, symbol)), rtol=1e-10, atol=1e-13 * 12.0 * scale / float(solved[1]))
    plain = stability(box)
    assert plain is not None
    for figure, symbol in ((plain.ico, i0), (plain.vbe, symbols["vbe"]), (plain.hfe, h)):
        assert_allclose(figure, float(derivative(symbol)[1]), rtol=1e-10, atol=0)


@pytest.mark.parametrize("network", SOLVED)
def test_closed_form_is_the_derivative_of_the_exact_solver(network: str) -> None:
    """Of the solver of the package by central differences, and of the node equations by a complex step."""
    rng = np.random.default_rng(20)
    for _ in range(5):
        box = random_box(rng, 4, network=network)
        values = box.nominal()
        names = [n for n in values if n != "temperature"]
        found = gradients(box, values)
        for name in names:
            size = np.maximum(np.abs(values[name]), 1e-9 if name == "icbo" else 0.1)
            step = 1e-5 * size
            up, down = ({**values, name: values[name] + sign * step} for sign in (1.0, -1.0))
            two, one = box.solve(up, active_law=True), box.solve(down, active_law=True)
            for slope, after, before, scale in zip(
                found[name], (two.ic, two.vce), (one.ic, one.vce), (two.ic, values["vcc"]), strict=True
            ):
                # Truncation 1e-10 of a curvature of order one, rounding 1e-16/1e-5 of what is differenced.
                close = 1e-7 * np.abs(slope) + 1e-9 * scale / size
                assert np.all(np.abs((after - before) / (2.0 * step) - slope) <= close), (network, name)
            p = circuit(box, values)
            if name not in p or name in ("delta_ref", "r_ref", "hfe", "icbo"):
                continue
            moved = active(network, box.transistor, {**p, name: p[name] + 1j * 1e-20 * size})
            for slope, key, scale in zip(found[name], ("ic", "vce"), (two.ic, values["vcc"]), strict=True):
                expected = np.imag(moved[key]) / (1e-20 * size)
                assert np.all(np.abs(expected - slope) <= 1e-9 * np.abs(slope) + 1e-12 * scale / size), (network, name)


def test_vbe_that_follows_ic_weakens_every_factor() -> None:
    box = random_box(np.random.default_rng(3), 1, network="divider", transistor=Transistor(
        hfe=Spread(100.0, 200.0, 300.0), vbe=Spread(0.6, 0.65, 0.7), vbe_ic=1e-3
    ))
    held, follows = stability(box), stability(box, follows=True)
    assert held is not None
    assert follows is not None
    assert abs(follows.vbe) < abs(held.vbe)
    assert follows.ico < held.ico
    # The derivative of the exact solver is the one that follows.
    rows = {row.parameter: row for row in sensitivities(box)}
    assert_allclose(rows["vbe"].ic, follows.vbe, rtol=1e-12, atol=0)


def test_saturated_stage_has_no_stability_factors() -> None:
    box = fixed_box(rails={"vcc": Spread.exact(12.0)})
    box = replace(box, parts={**box.parts, "rc": replace(box.parts["rc"], nominal=np.array([100e3]))})
    assert stability(box) is None
    assert sensitivities(box) == ()
    assert math.isnan(linear_sigma(box, "ic", life={}))


def test_gain_change_is_exact_for_any_change() -> None:
    """A divider with VBE constant, IC = β(V−VBE)/(RB+(1+β)RE) by hand at both gains."""
    rb, re, v = 8e3, 1e3, 2.5
    one, two = (h * (v - 0.7) / (rb + (1.0 + h) * re) for h in (50.0, 400.0))
    port = NETWORKS["fixed_base"].two_port({"vcc": 12.0, "vbb": v}, {"rb": rb, "rc": 1e3, "re": re}, T0)
    found = gain_change(port, before=50.0, after=400.0, ic=one)
    assert_allclose(found * 350.0, two - one, rtol=1e-13, atol=0)


# --- Root-sum-square --------------------------------------------------------------------------------------------------


def test_linear_propagation_is_that_of_the_library() -> None:
    """`uncertainties` propagates through the hand formula of the divider, IC = β(V−VBE)/(RP+(1+β)RE)."""
    box = fixed_box()
    third = 1.0 / 3.0
    vcc, vbe, h = ufloat(12.0, 0.6 * third), ufloat(0.65, 0.05 * third), ufloat(200.0, 100.0 * third)
    r1, r2, rc, re = (ufloat(r, 0.05 * r * third) for r in (39e3, 10e3, 2.2e3, 1e3))
    share = r2 / (r1 + r2)
    ic = h * (vcc * share - vbe) / (r1 * share + (1 + h) * re)
    vce = vcc - rc * ic - re * ic * (1 + 1 / h)
    # Both differentiate exactly.
    assert_allclose(linear_sigma(box, "ic", life={}), ic.std_dev, rtol=1e-12, atol=0)
    assert_allclose(linear_sigma(box, "vce", life={}), vce.std_dev, rtol=1e-12, atol=0)


def test_random_causes_add_in_squares_and_one_way_causes_linearly() -> None:
    """A follower without spread but in the supply and re: VE = e_b − VBE nearly, IE = VE/re; by hand for a stiff base."""
    none = np.zeros(1)
    box = fixed_box(
        "fixed_base",
        transistor=Transistor(hfe=Spread.exact(1e9), vbe=Spread.exact(0.65), vbe_ic=1e-3, vbe_model="fixed"),
        rails={"vcc": Spread.exact(12.0), "vbb": Spread(1.95, 2.65, 3.35)},
        temperature=Spread(T0, T0, T0 + 50.0),
        parts={
            "rb": Parts(nominal=np.array([1.0]), band=none, tcr_low=none, tcr_high=none),
            "rc": Parts(nominal=np.array([1e3]), band=none, tcr_low=none, tcr_high=none),
            "re": Parts(nominal=np.array([1e3]), band=np.array([0.03]), tcr_low=none - 2e-4, tcr_high=none + 2e-4),
        },
    )
    # Nominal 2 mA; the supply alone ±0.7 mA, re alone 2/0.98 − 2, life (1 %) 2/0.99 − 2, coefficient at 75 °C 1 %: the same.
    found = rss(box, "ic", life={"re": 0.01}, window=Interval(-math.inf, 3e-3)).high
    parts = {term.cause: (term.kind, term.change) for term in found.terms}
    expected = {
        "vbb": ("random", 0.7e-3),
        "re": ("random", 2e-3 * (1.0 / 0.98 - 1.0)),
        "re life": ("one-way", 2e-3 * (1.0 / 0.99 - 1.0)),
        "re coefficient": ("one-way", 2e-3 * (1.0 / 0.99 - 1.0)),
    }
    assert set(parts) == set(expected)
    for cause, (kind, change) in expected.items():
        assert parts[cause][0] == kind
        # The base current of 1e-9 of IC through 1 ohm, and rb of 1 ohm against re, are the difference.
        assert_allclose(parts[cause][1], change, rtol=1e-5, atol=0)
    one_way = 2.0 * expected["re life"][1]
    root = math.hypot(0.7e-3, expected["re"][1])
    assert_allclose(found.total, 2e-3 + one_way + root, rtol=1e-8, atol=0)
    assert found.temperature == T0 + 50.0
    # Room to 3 mA at the hot end, in thirds of the root.
    assert_allclose(found.sigmas, 3.0 * (1e-3 - one_way) / root, rtol=1e-6, atol=0)
    # The point of the sum: the supply goes 0.7/root of its way, re 4.08e-5/root of 2 % besides both one-way parts.
    share = expected["re"][1] / root
    solved = (2.0 + 0.7 * 0.7e-3 / root) / (1.0 - 0.02 - 0.02 * share) * 1e-3
    assert_allclose(found.value, solved, rtol=1e-6, atol=0)


def test_spread_alone_gives_its_own_extreme() -> None:
    """With one cause the three methods have one answer: the end of it."""
    none = np.zeros(1)
    box = fixed_box(transistor=Transistor(hfe=Spread(100.0, 200.0, 300.0), vbe=Spread.exact(0.65), vbe_ic=1e-3, vbe_model="fixed"))
    parts = {role: replace(part, band=none) for role, part in box.parts.items()}
    box = replace(box, rails={"vcc": Spread.exact(12.0)}, parts=parts)
    found = rss(box, "ic", life={})
    for side, direction in ((found.low, -1), (found.high, 1)):
        assert_allclose(side.value, box.extreme(("ic",), direction).value[0], rtol=1e-14, atol=0)
        assert_allclose(side.total, side.value, rtol=1e-14, atol=0)
        assert [term.cause for term in side.terms] == ["hfe"]


def test_pair_of_equal_resistors_strays_by_less_than_one() -> None:
    """Two of 500 Ω ± 5 % in series against one of 1 kΩ ± 5 %: each moves the whole by 2.5 %, both in squares by 5 %/√2."""
    single = fixed_box()
    none = np.zeros(1)
    base = Parts(nominal=np.array([500.0]), band=np.array([0.05]), tcr_low=none, tcr_high=none)
    one = np.zeros(1, dtype=np.int32)
    pair = Parts.of_pairs(Pairs(base=base, join=np.array([SERIES], dtype=np.int8), first=one, second=one))
    paired = replace(single, parts={**single.parts, "re": pair})
    terms = {term.cause: term.change for term in rss(paired, "vce", life={}).low.terms}
    whole = {term.cause: term.change for term in rss(single, "vce", life={}).low.terms}["re"]
    assert terms["rea"] == terms["reb"]
    # VCE bends with re: a quarter of the way from 2.5 % to 5 %.
    assert_allclose(math.hypot(terms["rea"], terms["reb"]), whole / math.sqrt(2.0), rtol=0.03, atol=0)
    ohms = next(draws(paired, Lot(units=16384), {}))["re"]
    # Sigma of an even law of half-width 5 % is 5 %/√3; of the mean of two such 1/√2 of that.
    assert_allclose(ohms.std() / 1e3, 0.05 / math.sqrt(6.0), rtol=2e-3, atol=0)
    # By linear propagation, re alone: 1/√2 of the single one.
    alone = [
        replace(box, parts={k: p if k == "re" else replace(p, band=none) for k, p in box.parts.items()}, rails={"vcc": Spread.exact(12.0)},
                transistor=Transistor(hfe=Spread.exact(200.0), vbe=Spread.exact(0.65), vbe_ic=1e-3, vbe_model="fixed"))
        for box in (single, paired)
    ]  # fmt: skip
    sigmas = [linear_sigma(box, "ic", life={}) for box in alone]
    assert_allclose(sigmas[1], sigmas[0] / math.sqrt(2.0), rtol=1e-12, atol=0)


# --- Monte Carlo ------------------------------------------------------------------------------------------------------


def window(name: str, low: float, high: float) -> Requirement:
    kind = "current" if name == "ic" else "voltage"
    return Requirement(name=f"target.{name}", kind=kind, interval=Interval(low, high), judged="box", sums=((name,),))


def supply_only() -> Box:
    none = np.zeros(1)
    box = fixed_box(transistor=Transistor(hfe=Spread.exact(200.0), vbe=Spread.exact(0.65), vbe_ic=1e-3, vbe_model="fixed"))
    return replace(box, parts={role: replace(part, band=none) for role, part in box.parts.items()})


@pytest.mark.parametrize("points", ["sobol", "random"])
def test_share_of_a_linear_stage_is_that_of_its_supply(points: str) -> None:
    """With only VCC spread, and evenly, IC is linear in it: a window from the 30 % to the 80 % point holds half of the units."""
    box = supply_only()
    low, high = (box.extreme(("ic",), side).value[0] for side in (-1, 1))
    ends = (low + 0.3 * (high - low), low + 0.8 * (high - low))
    lot = Lot(units=20000, seed=0, points=points)  # type: ignore[arg-type]
    found = monte_carlo(box, [window("ic", *ends)], lot, life={})
    share = {y.name: y for y in found.yields}["target.ic"]
    assert share.low <= 0.5 <= share.high
    if points == "sobol":
        # One dimension of scrambled points leaves at most a point in each cell astray.
        assert abs(share.passed - 10000) <= 4
    assert found.samples[0].least >= low
    assert found.samples[0].greatest <= high
    # Mean and sigma of an even law.
    assert_allclose(found.samples[0].mean, 0.5 * (low + high), rtol=2e-3, atol=0)
    assert_allclose(found.samples[0].sigma, (high - low) / math.sqrt(12.0), rtol=2e-2, atol=0)


def test_quantiles_are_those_of_the_units() -> None:
    box = supply_only()
    lot = Lot(units=30000, seed=3)
    units = np.concatenate([box.solve(values).ic for values in draws(box, lot, {})])
    assert units.size == 30000
    found = monte_carlo(box, [], lot, life={}).samples[0]
    assert_array_equal(found.quantiles, np.quantile(units, (0.00135, 0.025, 0.5, 0.975, 0.99865)))


def test_seed_repeats_the_lot_and_zero_is_a_seed() -> None:
    box = fixed_box()
    zero, again, one = (monte_carlo(box, [], Lot(units=1000, seed=s), life={}) for s in (0, 0, 1))
    assert zero == again
    assert zero.samples != one.samples
    assert (zero.seed, zero.units, zero.points) == (0, 1000, "sobol")
    random = [monte_carlo(box, [], Lot(units=1000, seed=s, points="random"), life={}) for s in (0, 0, 1)]
    assert random[0] == random[1]
    assert random[0].samples != random[2].samples


def test_distribution_of_a_spread_is_that_of_the_lot() -> None:
    box = fixed_box()
    laws = {"vcc": Distribution(shape="nominal"), "hfe": Distribution(shape="measured", values=(120.0, 250.0)),
            "tolerance": Distribution(shape="measured", values=(0.01,))}
    values = next(draws(box, Lot(units=4096, laws=laws), {}))
    assert_array_equal(np.broadcast_to(values["vcc"], 4096), np.full(4096, 12.0))
    assert set(values["hfe"]) == {120.0, 250.0}
    # Scrambled Sobol points put half of the units on each side.
    assert np.count_nonzero(values["hfe"] == 120.0) == 2048
    assert_allclose(values["r1"], 39e3 * 1.01, rtol=1e-15, atol=0)
    assert np.ptp(values["delta"]) > 0.099


def test_tolerance_life_and_coefficient_are_drawn_apart() -> None:
    """Variance of a sum of three even laws: the sum of (half-width)²/3, here at 65 °C."""
    none = np.zeros(1)
    box = replace(supply_only(), temperature=Spread.exact(T0 + 40.0))
    part = Parts(nominal=np.array([39e3]), band=np.array([0.03]), tcr_low=none - 2e-4, tcr_high=none + 2e-4)
    box = replace(box, parts={**box.parts, "r1": part})
    r1 = next(draws(box, Lot(units=16384), {"r1": 0.01}))["r1"] / 39e3 - 1.0
    sigma = math.sqrt((0.02**2 + 0.01**2 + 0.008**2) / 3.0)
    assert_allclose(r1.std(), sigma, rtol=1e-3, atol=0)
    assert np.abs(r1).max() <= 0.038


def test_saturated_and_cut_off_units_are_counted() -> None:
    box = fixed_box(rails={"vcc": Spread(0.5, 12.0, 30.0)})
    box = replace(box, parts={**box.parts, "rc": replace(box.parts["rc"], nominal=np.array([10e3]))})
    found = monte_carlo(box, [window("vce", 0.2, 1e3)], Lot(units=4096), life={})
    assert set(found.regions) == {"active", "saturated", "cut off"}
    assert sum(found.regions.values()) == 4096
    # Against the node equations, unit by unit: below VCE(sat) by the active law is what saturates.
    values = next(draws(box, Lot(units=4096), {}))
    ic = any_region("divider", box.transistor, circuit(box, values))["ic"]
    assert found.regions["cut off"] == np.count_nonzero(ic < 1e-9)


def test_limit_on_vce_passes_active_units_alone() -> None:
    box = fixed_box(rails={"vcc": Spread(0.5, 12.0, 30.0)})
    box = replace(box, parts={**box.parts, "rc": replace(box.parts["rc"], nominal=np.array([10e3]))})
    need = Requirement(name="vce", kind="voltage", interval=Interval(0.2, math.inf), judged="box", sums=(("vce",),))
    found = monte_carlo(box, [need], Lot(units=4096), life={})
    assert {y.name: y.passed for y in found.yields} == {"vce": found.regions["active"], "all": found.regions["active"]}


# --- The three methods ------------------------------------------------------------------------------------------------


def three_methods(rng: np.random.Generator, network: str, units: int) -> None:
    """Extreme value holds every unit of a lot and the root-sum-square range of one random stage."""
    box = edge_box(rng, 1) if rng.random() < 0.15 else random_box(rng, 1, network=network)
    life = {role: float(part.band[0]) * rng.random() for role, part in box.parts.items()}
    straddles = box.extreme(("vce",), -1).value[0] < box.transistor.vce_sat
    lot = Lot(units=units, seed=int(rng.integers(1000)), points=("sobol", "random")[rng.integers(2)])
    found = monte_carlo(box, [], lot, life=life)
    for sample in found.samples:
        name = sample.quantity
        ends = [
            (extreme_in_any_region(box, (name,), side) if straddles else box.extreme((name,), side)).value[0] for side in (-1, 1)
        ]
        # VCE is a difference of voltages of the size of the rails.
        slack = 1e-12 * (abs(ends[1]) if name == "ic" else sum(s.high for s in box.rails.values()))
        assert ends[0] - slack <= sample.least <= sample.greatest <= ends[1] + slack, (box.network.name, name)
        sums = rss(box, name, life=life)
        assert ends[0] - slack <= sums.low.value <= sums.high.value <= ends[1] + slack, (box.network.name, name)


@pytest.mark.parametrize("network", SOLVED)
def test_extreme_value_holds_the_other_two(network: str) -> None:
    rng = np.random.default_rng(sum(network.encode()))
    for _ in range(2):
        three_methods(rng, network, 1000)


@pytest.mark.long
@pytest.mark.parametrize("network", SOLVED)
def test_extreme_value_holds_the_other_two_on_five_hundred_stages(network: str) -> None:
    """63 stages of each of the eight networks, ten thousand units each."""
    rng = np.random.default_rng(sum(network.encode()) + 1)
    for _ in range(63):
        three_methods(rng, network, 10000)
