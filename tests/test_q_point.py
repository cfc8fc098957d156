"""The Q-point solver against high precision, against a general nodal solution, and against Kirchhoff's laws.

Derived means worked out from the two-port equations and the junction law, not from the solver's closed form: `exact`
finds the root of the circuit's own equations with 40 digits.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace

import mpmath
import nodal
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from mpmath import mpf
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from synth.networks import NETWORKS, QPoint
from synth.q_point import ACTIVE, CUT_OFF, REGIONS, SATURATED, UnknownNetwork, operating_point, solve, solve_active
from synth.quantities import Spread
from synth.transistor import Transistor

Array = NDArray[np.float64]
EPS = float(np.finfo(float).eps)

MODELS = ("junction", "fixed")
SHAPES = {
    "divider": ("r1", "r2", "rc", "re"),
    "fixed_base": ("rb", "rc", "re"),
    "fixed_base without re": ("rb", "rc"),
    "fixed_base with vbb": ("rb", "rc", "re"),
}
"""The circuits of this file and the roles that each uses."""


def device(model: str, **changes: object) -> Transistor:
    given = {"hfe": Spread(1.0, 100.0, 1e5), "vbe": Spread(0.6, 0.65, 0.7), "vbe_ic": 2e-3, "vbe_model": model}
    return Transistor(**{**given, **changes})  # type: ignore[arg-type]


@dataclass(frozen=True)
class Cases:
    """n circuits of one kind with everything that their Q-point depends on."""

    shape: str
    rails: dict[str, Array]
    r: dict[str, Array]
    hfe: Array
    icbo: Array
    delta: Array
    temperature: Array

    @property
    def network(self) -> str:
        return self.shape.split()[0]

    def solve(self, transistor: Transistor, active: bool = False) -> QPoint:
        law = solve_active if active else solve
        return law(
            NETWORKS[self.network],
            transistor,
            self.rails,
            self.r,
            hfe=self.hfe,
            icbo=self.icbo,
            delta=self.delta,
            temperature=self.temperature,
        )

    def only(self, keep: NDArray[np.bool_]) -> "Cases":
        rails = {k: v[keep] for k, v in self.rails.items()}
        r = {k: v[keep] for k, v in self.r.items()}
        device = {k: getattr(self, k)[keep] for k in ("hfe", "icbo", "delta", "temperature")}
        return Cases(self.shape, rails, r, **device)


def log_uniform(rng: np.random.Generator, low: float, high: float, n: int) -> Array:
    return np.asarray(np.exp(rng.uniform(np.log(low), np.log(high), n)))


def whole_range(shape: str, n: int, seed: int) -> Cases:
    """The whole declared range of the inputs."""
    rng = np.random.default_rng(seed)
    names = ("vcc", "vbb") if "vbb" in shape else ("vcc",)
    return Cases(
        shape,
        {name: log_uniform(rng, 0.1, 1000.0, n) for name in names},
        {role: log_uniform(rng, 1e-3, 1e9, n) for role in SHAPES[shape]},
        log_uniform(rng, 1.0, 1e5, n),
        np.where(rng.random(n) < 0.3, 0.0, log_uniform(rng, 1e-12, 1e-3, n)),
        rng.uniform(-0.1, 0.1, n),
        rng.uniform(200.0, 450.0, n),
    )


def practical(shape: str, n: int, seed: int) -> Cases:
    """Values as built stages have them: most are active, some saturated."""
    rng = np.random.default_rng(seed)
    names = ("vcc", "vbb") if "vbb" in shape else ("vcc",)
    low = {"r1": 3e4, "r2": 3e3, "rc": 300.0, "re": 100.0, "rb": 1e5}
    return Cases(
        shape,
        {name: rng.uniform(3.0, 30.0, n) for name in names},
        {role: log_uniform(rng, low[role], 30.0 * low[role], n) for role in SHAPES[shape]},
        log_uniform(rng, 20.0, 900.0, n),
        np.where(rng.random(n) < 0.3, 0.0, log_uniform(rng, 1e-12, 1e-6, n)),
        rng.uniform(-0.1, 0.1, n),
        rng.uniform(218.15, 423.15, n),
    )


Draw = Callable[[str, int, int], Cases]


# ---------------------------------------------------------------------------------------------- high precision


@dataclass(frozen=True)
class Port:
    """One case's two-port and transistor in high precision."""

    e_b: mpf
    z_bb: mpf
    z_bc: mpf
    e_c: mpf
    z_cb: mpf
    z_cc: mpf
    vt: mpf
    reference: mpf
    ic0: mpf
    hfe: mpf
    icbo: mpf
    vce_sat: mpf


def port(cases: Cases, transistor: Transistor, k: int) -> Port:
    """The two-port by hand from the circuit; the bandgap law with VG = 1.17 V and XTI = 3 (common practice)."""
    r = {role: mpf(float(v[k])) for role, v in cases.r.items()}
    vcc = mpf(float(cases.rails["vcc"][k]))
    re, rc = r.get("re", mpf(0)), r["rc"]
    if cases.network == "divider":
        parallel, e_b = 1 / (1 / r["r1"] + 1 / r["r2"]), vcc * r["r2"] / (r["r1"] + r["r2"])
    else:
        parallel, e_b = r["rb"], mpf(float(cases.rails.get("vbb", cases.rails["vcc"])[k]))
    t, t0 = mpf(float(cases.temperature[k])), mpf("298.15")
    vt = t * mpf("1.380649e-23") / mpf("1.602176634e-19")
    reference = mpf(transistor.vbe.nominal)
    if transistor.vbe_model == "junction":
        reference = mpf(1.17) - (mpf(1.17) - reference) * t / t0 - 3 * vt * mpmath.log(t / t0)
    return Port(
        e_b, parallel + re, re, vcc, re, rc + re, vt, reference + mpf(float(cases.delta[k])), mpf(transistor.vbe_ic),
        mpf(float(cases.hfe[k])), mpf(float(cases.icbo[k])), mpf(transistor.vce_sat),
    )  # fmt: skip


def exact_active(p: Port, fixed: bool) -> mpf:
    """IC of the active region: root of the base loop, with IC = hFE*IB + (hFE + 1)*ICBO."""

    def base(ic: mpf) -> mpf:
        return (ic - (p.hfe + 1) * p.icbo) / p.hfe

    def loop(ic: mpf) -> mpf:
        return p.e_b - p.z_bb * base(ic) - p.z_bc * ic - p.reference

    if fixed:
        # Linear in IC; a fixed drop that the base loop does not reach blocks.
        rise = loop(mpf(0)) - loop(mpf(1))
        return max(loop(mpf(0)) / rise, mpf(0))

    # In the logarithm of IC the residual falls steadily; both ends are found by widening a bracket.
    def residual(u: mpf) -> mpf:
        return loop(mpmath.exp(u)) - p.vt * (u - mpmath.log(p.ic0))

    low = high = mpmath.log(p.ic0)
    while residual(low) <= 0:
        low -= 16
    while residual(high) >= 0:
        high += 4
    return mpmath.exp(mpmath.findroot(residual, (low, high), solver="anderson", tol=mpf(10) ** -35, maxsteps=200))


def exact_saturated(p: Port, fixed: bool) -> mpf | None:
    """IC with VCE = VCE(sat) in both loops: the upper root, or None where there is none."""

    # KVL of the collector loop with IB from the base loop; VBE by the law.
    def loop(ic: mpf, vbe: mpf) -> mpf:
        ib = (p.e_b - vbe - p.z_bc * ic) / p.z_bb
        return p.e_c - p.z_cb * ib - p.z_cc * ic - p.vce_sat

    if fixed or p.z_cb == 0:
        rise = loop(mpf(0), p.reference) - loop(mpf(1), p.reference)
        ic = loop(mpf(0), p.reference) / rise
        return ic if ic > 0 else None

    def residual(u: mpf) -> mpf:
        return loop(mpmath.exp(u), p.reference + p.vt * (u - mpmath.log(p.ic0)))

    # Concave in u: its slope changes sign once, where z_cb/z_bb*VT = (z_cc - z_cb*z_bc/z_bb)*IC.
    top = mpmath.log(p.z_cb / p.z_bb * p.vt / (p.z_cc - p.z_cb * p.z_bc / p.z_bb))
    if residual(top) <= 0:
        return None
    high = top + 1
    while residual(high) >= 0:
        high += 4
    return mpmath.exp(mpmath.findroot(residual, (top, high), solver="anderson", tol=mpf(10) ** -35, maxsteps=200))


@pytest.fixture(autouse=True)
def forty_digits() -> object:
    """40 digits, so that 30 are left where the loops lose ten to cancellation."""
    with mpmath.workdps(40):
        yield


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("shape", SHAPES)
def test_active_law_equals_high_precision(shape: str, model: str) -> None:
    q, n = device(model), 400
    cases = whole_range(shape, n, seed=11)
    ic = cases.solve(q, active=True).ic
    ports = [port(cases, q, k) for k in range(n)]
    expected = np.array([float(exact_active(p, model == "fixed")) for p in ports])
    # The exponent of IC is (drive - VBE)/VT, at most 60 where IC is not set by a resistance: 60 roundings of 2e-16 in
    # VBE, E and VT each, times a few terms, are 1e-13; rtol 1e-12 leaves ten times that. A fixed drop subtracts from E:
    # the few roundings of E grow by E/(E - VBE).
    rtol = np.full(n, 1e-12)
    if model == "fixed":
        drive = np.array([float(p.e_b + p.z_bb * p.icbo * (1 + 1 / p.hfe)) for p in ports])
        left = np.array([float(p.e_b + p.z_bb * p.icbo * (1 + 1 / p.hfe) - p.reference) for p in ports])
        rtol = np.maximum(rtol, 8.0 * EPS * drive / np.maximum(left, 1e-300))
    assert np.all(np.abs(ic - expected) <= rtol * expected), np.max(np.abs(ic / expected - 1.0))
    assert np.sum(expected > 1e-280) > n // 2


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("shape", SHAPES)
def test_saturated_current_equals_high_precision(shape: str, model: str) -> None:
    q = device(model)
    cases = whole_range(shape, 600, seed=12)
    cases = cases.only(cases.solve(q).region == SATURATED)
    found = cases.solve(q)
    rtol, error = [], []
    for k in range(found.ic.size):
        p = port(cases, q, k)
        expected = exact_saturated(p, model == "fixed")
        if expected is None:
            assert np.isnan(found.ic[k])
            assert np.isnan(found.vce[k])
            continue
        ratio = p.z_cb / p.z_bb
        junction = model == "junction"
        vbe = p.reference + p.vt * mpmath.log(expected / p.ic0) if junction else p.reference
        ib = (p.e_b - vbe - p.z_bc * expected) / p.z_bb
        if expected > p.hfe * ib + (p.hfe + 1) * p.icbo:
            # Not a saturated state: hFE*IB would not carry it. The test on the gain judges what is made of it.
            continue
        # D = z_cc - k*z_bc and C = e_c - VCE(sat) - k*(e_b - VBE) are differences: a few roundings of their terms over
        # the slope of the residual in ln IC is the best that the four resistances of a two-port can carry.
        terms = p.e_c + p.vce_sat + ratio * (p.e_b + abs(vbe)) + (p.z_cc + ratio * p.z_bc) * expected
        slope = (p.z_cc - ratio * p.z_bc) * expected - (ratio * p.vt if junction else 0)
        rtol.append(float(max(mpf("1e-12"), 8 * mpf(EPS) * terms / abs(slope))))
        error.append(float(abs(mpf(float(found.ic[k])) / expected - 1)))
        assert found.vce[k] == q.vce_sat
    assert np.all(np.array(error) <= np.array(rtol)), np.max(error)
    # Most are judged at the plain 1e-12; the loss is greatest where re exceeds the base's feed by many decades.
    assert np.sum(np.array(rtol) == 1e-12) > 0.75 * len(rtol) > 25


# ---------------------------------------------------------------------------------------------- nodal analysis

NODAL = [
    pytest.param(name, rails, roles, model, id=f"{name}-{'+'.join(rails)}-{'+'.join(roles)}-{model}")
    for name, network in NETWORKS.items()
    for rails, roles in nodal.variants(network)
    for model in MODELS
]


@pytest.mark.parametrize(("name", "rails", "roles", "model"), NODAL)
def test_solution_equals_general_nodal_analysis(name: str, rails: tuple[str, ...], roles: tuple[str, ...], model: str) -> None:
    n, network, q = 400, NETWORKS[name], device(model)
    rng = np.random.default_rng(13)
    volts = {rail: rng.uniform(3.0, 30.0, n) for rail in rails if rail not in nodal.REFERENCE}
    if "vref" in rails:
        volts |= {"vref": rng.uniform(0.3, 4.0, n), "r_ref": log_uniform(rng, 1.0, 1e3, n)}
    r = {role: log_uniform(rng, 100.0, 1e6, n) for role in roles}
    h, i0 = log_uniform(rng, 20.0, 900.0, n), np.where(rng.random(n) < 0.3, 0.0, log_uniform(rng, 1e-12, 1e-6, n))
    delta, t = rng.uniform(-0.1, 0.1, n), rng.uniform(218.15, 423.15, n)
    found = solve(network, q, volts, r, hfe=h, icbo=i0, delta=delta, temperature=t)
    expected, saturated = nodal.solve(nodal.Circuit(network, volts, r), q, h, i0, delta, t)
    # A fixed drop that the base loop does not reach blocks; the linear circuit alone would let current flow back.
    blocked = (expected.ic <= 0.0) & ~saturated
    assert np.all(found.ic[blocked] == 0.0)
    # Where a strong base drive lifts the emitter above what the collector's supply allows there is no solution.
    judged = ~blocked & ~np.isnan(found.ic)
    assert judged.sum() > 0.6 * n
    assert np.array_equal((found.region == SATURATED)[judged], saturated[judged])
    # Conductances from 1e-6 to 1e-2 S cost four of sixteen digits, differences of node voltages two more.
    assert_allclose(found.ic[judged], expected.ic[judged], rtol=1e-9, atol=0)
    span = sum(volts.values())
    for one, two in ((found.vbe, expected.vbe), (found.vce, expected.vce)):
        assert np.all(np.abs(one - two)[judged] <= 1e-9 * span[judged])
    # IB is IC/hFE less the leakage: its error scales with its parts.
    assert np.all(np.abs(found.ib - expected.ib)[judged] <= 1e-9 * (found.ic / h + np.abs(expected.ib) + i0)[judged])
    branches = network.branches(volts, r, found)
    for node, voltage in branches.nodes.items():
        assert np.all(np.abs(voltage - expected.node[node])[judged] <= 1e-9 * span[judged]), node
    for rail, current in branches.rail.items():
        scale = found.ic + span * sum(1.0 / r[role.name] for role in network.roles if role.name in r)
        assert np.all(np.abs(current - expected.rail[rail])[judged] <= 1e-9 * scale[judged]), rail


# ---------------------------------------------------------------------------------------------- Kirchhoff and laws


def numeric_port(cases: Cases) -> tuple[Array, ...]:
    """The two-port by hand, in double precision."""
    r, vcc = cases.r, cases.rails["vcc"]
    re = r.get("re", np.zeros_like(vcc))
    if cases.network == "divider":
        parallel, e_b = r["r1"] * r["r2"] / (r["r1"] + r["r2"]), vcc * r["r2"] / (r["r1"] + r["r2"])
    else:
        parallel, e_b = r["rb"], cases.rails.get("vbb", vcc)
    return e_b, parallel + re, re, vcc, re, r["rc"] + re


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("shape", SHAPES)
def test_both_loops_the_gain_and_the_junction_law_are_met(shape: str, model: str) -> None:
    q, cases = device(model), practical(shape, 4000, seed=14)
    found = cases.solve(q)
    e_b, z_bb, z_bc, e_c, z_cb, z_cc = numeric_port(cases)
    active, saturated = found.region == ACTIVE, found.region == SATURATED
    assert active.sum() > 500
    assert saturated.sum() > 500
    # Kirchhoff: each residual is a sum whose terms are known to a few roundings.
    base = e_b - z_bb * found.ib - z_bc * found.ic - found.vbe
    terms = e_b + z_bb * np.abs(found.ib) + z_bc * np.abs(found.ic) + np.abs(found.vbe)
    assert np.all(np.abs(base) <= 1e-12 * terms)
    collector = e_c - z_cb * found.ib - z_cc * found.ic - found.vce
    terms = e_c + z_cb * np.abs(found.ib) + z_cc * np.abs(found.ic) + np.abs(found.vce)
    assert np.all(np.abs(collector) <= 1e-12 * terms)
    # Gain law, where hFE governs: IC = hFE*IB + (hFE + 1)*ICBO.
    gain = cases.hfe * found.ib + (cases.hfe + 1.0) * cases.icbo
    scale = found.ic + (cases.hfe + 1.0) * cases.icbo
    assert np.all(np.abs(gain - found.ic)[active] <= 1e-12 * scale[active])
    # Junction law VBE = VG - (VG - VBE0)*T/T0 - XTI*VT*ln(T/T0) + VT*ln(IC/IC0) + delta (common practice), voltages
    # below 1 V except in the base loop that VBE is taken from.
    t, t0 = cases.temperature, 298.15
    vt = t * (1.380649e-23 / 1.602176634e-19)
    law = np.full_like(t, 0.65) + cases.delta
    if model == "junction":
        law += (1.17 - 0.65) * (1.0 - t / t0) - 3.0 * vt * np.log(t / t0) + vt * np.log(found.ic / 2e-3)
    # A fixed drop that the base loop does not reach carries nothing and has no law.
    carrying = found.ic > 0.0
    assert np.all(np.abs(found.vbe - law)[carrying] <= 1e-12 * (e_b + z_bb * np.abs(found.ib) + 1.0)[carrying])


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("shape", SHAPES)
def test_saturated_current_lies_on_the_load_line(shape: str, model: str) -> None:
    q = device(model)
    for cases in (practical(shape, 4000, seed=15), whole_range(shape, 4000, seed=15)):
        found = cases.solve(q)
        e_c, z_cc = cases.rails["vcc"], cases.r["rc"] + cases.r.get("re", 0.0)
        driven = (found.region == SATURATED) & (found.ib >= 0.0)
        assert driven.sum() > 200
        # KVL with IB >= 0: IC <= (e_c - VCE(sat))/z_cc. Nothing to judge but the rounding of the quotient.
        limit = (e_c - q.vce_sat) / z_cc
        assert np.all(found.ic[driven] <= limit[driven] * (1.0 + 1e-12))


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("draw", [practical, whole_range])
def test_saturation_never_raises_the_current_above_what_gain_allows(draw: Draw, shape: str, model: str) -> None:
    # Common practice: a saturated transistor carries less collector current than hFE times its base current (its forced
    # gain is below hFE), leakage counted as in IC = hFE*IB + (hFE + 1)*ICBO.
    q, cases = device(model), draw(shape, 4000, 16)
    found = cases.solve(q)
    saturated = (found.region == SATURATED) & ~np.isnan(found.ic)
    assert saturated.sum() > 300
    gain = cases.hfe * found.ib + (cases.hfe + 1.0) * cases.icbo
    scale = np.abs(found.ic) + np.abs(cases.hfe * found.ib) + (cases.hfe + 1.0) * cases.icbo
    wrong = saturated & (found.ic - gain > 1e-9 * scale)
    assert not wrong.any(), f"{wrong.sum()} of {saturated.sum()}"
    assert np.all(found.ic[saturated] <= cases.solve(q, active=True).ic[saturated] * (1.0 + 1e-9))


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("shape", SHAPES)
def test_current_is_continuous_at_the_edge_of_saturation(shape: str, model: str) -> None:
    q, cases = device(model), practical(shape, 400, seed=17)
    law = cases.solve(q, active=True)
    cases = cases.only(law.ic > 1e-6 + (cases.hfe + 1.0) * cases.icbo)
    before = cases.solve(q, active=True)
    # Choose rc so that the active law gives VCE = VCE(sat): none of these shapes feeds the collector back to the base.
    _, _, _, e_c, z_cb, _ = numeric_port(cases)
    edge = (e_c - z_cb * (before.ib + before.ic) - q.vce_sat) / before.ic
    cases = cases.only(edge > 1.0)
    assert cases.hfe.size > 100
    edge, step = edge[edge > 1.0], 1e-6
    sides = [replace(cases, r={**cases.r, "rc": edge * (1.0 + s)}) for s in (-step, step)]
    inside, outside = (side.solve(q) for side in sides)
    assert np.all(inside.region == ACTIVE)
    assert np.all(outside.region == SATURATED)
    # One part in 1e6 of rc moves the load line's current by as much, a little more where re lifts the emitter.
    assert_allclose(outside.ic, inside.ic, rtol=1e-4, atol=0)
    assert np.all(outside.ic < inside.ic)
    # VCE moves by at most its whole drop times the step.
    assert np.all(np.abs(outside.vce - inside.vce) <= 2.0 * step * cases.rails["vcc"])


def test_a_computed_current_above_the_load_line_means_saturation() -> None:
    # Common practice: work out hFE*IB; above (VCC - VCE(sat))/RC the transistor is saturated and carries the latter.
    q, cases = device("fixed"), practical("fixed_base without re", 4000, seed=18)
    found = cases.solve(q)
    vcc, rc = cases.rails["vcc"], cases.r["rc"]
    computed = cases.hfe * (vcc - 0.65 - cases.delta) / cases.r["rb"] + (cases.hfe + 1.0) * cases.icbo
    limit = (vcc - 0.2) / rc
    assert np.array_equal(found.region == SATURATED, computed > limit)
    assert 500 < np.sum(found.region == SATURATED) < 3500
    # Two divisions and a sum.
    assert_allclose(found.ic, np.minimum(computed, limit), rtol=1e-14, atol=0)


# ---------------------------------------------------------------------------------------------- regions


def test_region_codes_name_the_three_regions() -> None:
    assert (REGIONS[ACTIVE], REGIONS[SATURATED], REGIONS[CUT_OFF]) == ("active", "saturated", "cut off")


@pytest.mark.parametrize("icbo", [0.0, 1e-7])
@pytest.mark.parametrize(("current", "region"), [(0.9e-9, CUT_OFF), (1.1e-9, ACTIVE)])
def test_a_nanoampere_above_iceo_separates_cut_off_from_active(current: float, icbo: float, region: int) -> None:
    # IC = hFE*(VBB - VBE)/rb + (hFE + 1)*ICBO with a fixed VBE: rb for a wanted excess over ICEO.
    q, h, vbb = device("fixed"), 100.0, 0.75
    rb = h * (vbb - 0.65) / current
    rails = {"vcc": 10.0, "vbb": vbb}
    found = solve(NETWORKS["fixed_base"], q, rails, {"rb": rb, "rc": 1e3}, hfe=h, icbo=icbo, delta=0.0, temperature=298.15)
    assert found.region == region
    # 0.1 V as a difference of 0.75 and 0.65 V keeps 15 digits.
    assert_allclose(found.ic, current + (h + 1.0) * icbo, rtol=1e-14, atol=0)


def test_a_fixed_drop_that_the_base_does_not_reach_blocks() -> None:
    q = device("fixed")
    found = solve(
        NETWORKS["divider"], q, {"vcc": 10.0}, {"r1": 1e5, "r2": 5e3, "rc": 1e3, "re": 100.0},
        hfe=100.0, icbo=0.0, delta=0.0, temperature=298.15,
    )  # fmt: skip
    assert (found.ic, found.ib, found.region) == (0.0, 0.0, CUT_OFF)
    # VBE is the unloaded divider's voltage, VCE the rail.
    assert_allclose([found.vbe, found.vce], [10.0 * 5.0 / 105.0, 10.0], rtol=1e-15, atol=0)


def test_active_law_goes_on_below_saturation_and_agrees_above() -> None:
    q, cases = device("junction"), practical("divider", 2000, seed=19)
    found, law = cases.solve(q), cases.solve(q, active=True)
    active = found.region == ACTIVE
    for one, two in zip(found[:4], law[:4], strict=True):
        assert np.array_equal(one[active], two[active])
    saturated = found.region == SATURATED
    assert np.all(law.vce[saturated] < q.vce_sat)
    assert np.all(law.ic[saturated] > found.ic[saturated])
    assert np.all(law.region == ACTIVE)


# ---------------------------------------------------------------------------------------------- limits


@pytest.mark.parametrize("t", [218.15, 298.15, 398.15])
def test_no_resistance_in_the_base_loop_leaves_the_exponential_law(t: float) -> None:
    # VBE is then VBB itself: IC = IC0*exp((VBB - VBE_ref - delta)/VT), textbook law of the junction.
    q = device("junction")
    vt = t * (1.380649e-23 / 1.602176634e-19)
    reference = 1.17 - (1.17 - 0.65) * t / 298.15 - 3.0 * vt * np.log(t / 298.15)
    vbb = reference + vt * np.log([1e-4, 0.5])
    expected = 2e-3 * np.exp((vbb - reference - 0.01) / vt)
    rails, rest = {"vcc": 12.0, "vbb": vbb}, {"hfe": 100.0, "icbo": 0.0, "delta": 0.01, "temperature": t}
    bare = solve(NETWORKS["fixed_base"], q, rails, {"rb": 0.0, "rc": 100.0}, **rest)
    # Differences of voltages near 0.7 V over VT, 0.019 V at least: 40 roundings on either side.
    assert_allclose(bare.ic, expected, rtol=2e-13, atol=0)
    # And it is the limit: 1 uohm against VT/IB of kilohms.
    near = solve(NETWORKS["fixed_base"], q, rails, {"rb": 1e-6, "rc": 100.0}, **rest)
    assert_allclose(near.ic, bare.ic, rtol=1e-8, atol=0)


@pytest.mark.parametrize("model", MODELS)
def test_an_absent_emitter_resistor_is_a_short(model: str) -> None:
    q, cases = device(model), practical("fixed_base without re", 500, seed=20)
    absent = cases.solve(q)
    short = replace(cases, r={**cases.r, "re": np.full(500, 1e-9)}).solve(q)
    assert np.array_equal(absent.region, short.region)
    # 1 nohm times (hFE + 1)*IB against rb*IB: 1e-11; in saturation 1 nohm against rc.
    assert_allclose(short.ic, absent.ic, rtol=1e-10, atol=0)


@pytest.mark.parametrize("model", MODELS)
def test_a_divider_without_lower_resistor_is_fixed_base_bias(model: str) -> None:
    q, cases = device(model), practical("fixed_base", 500, seed=21)
    open_r2 = {"r1": cases.r["rb"], "r2": np.full(500, 1e18), "rc": cases.r["rc"], "re": cases.r["re"]}
    divider = replace(cases, shape="divider", r=open_r2).solve(q)
    fixed = cases.solve(q)
    assert np.array_equal(divider.region, fixed.region)
    # r1/r2 of 1e-11 at most.
    assert_allclose(divider.ic, fixed.ic, rtol=1e-10, atol=0)


def test_a_large_gain_leaves_the_emitter_follower_law() -> None:
    # hFE -> infinity, common practice: IC = (VB - VBE)/re with the divider unloaded.
    q, cases = device("fixed"), practical("divider", 500, seed=22)
    many = replace(cases, hfe=np.full(500, 1e16), icbo=np.zeros(500)).solve(q, active=True)
    vb = cases.rails["vcc"] * cases.r["r2"] / (cases.r["r1"] + cases.r["r2"])
    drive = vb - 0.65 - cases.delta
    clear = drive > 0.1
    assert clear.sum() > 200
    # z_bb/(hFE*re) of 1e-13; a difference of volts of 0.1 V at least keeps 14 digits.
    assert_allclose(many.ic[clear], (drive / cases.r["re"])[clear], rtol=2e-12, atol=0)


# ---------------------------------------------------------------------------------------------- arrays


@pytest.mark.parametrize("law", [solve, solve_active])
@pytest.mark.parametrize(("rc", "regions"), [([100.0, 200.0, 300.0], 1), ([100.0, 200.0, 1e6], 2)])
def test_every_figure_has_the_broadcast_shape(law: object, rc: list[float], regions: int) -> None:
    # rc does not enter IC: it alone has the last axis, and VCE alone depends on it.
    q = device("junction")
    found = law(  # type: ignore[operator]
        NETWORKS["divider"], q, {"vcc": np.array([[9.0], [12.0]])},
        {"r1": 47e3, "r2": 15e3, "rc": np.array(rc), "re": 1e3},
        hfe=np.array([[[100.0]], [[200.0]], [[400.0]], [[800.0]]]), icbo=0.0, delta=0.0, temperature=298.15,
    )  # fmt: skip
    assert [x.shape for x in found] == [(4, 2, 3)] * 5
    if law is solve:
        assert len(np.unique(found.region)) == regions


@pytest.mark.parametrize("rc", [1e3, 1e6])
def test_scalars_give_scalars(rc: float) -> None:
    found = solve(
        NETWORKS["divider"], device("junction"), {"vcc": 12.0}, {"r1": 47e3, "r2": 15e3, "rc": rc, "re": 1e3},
        hfe=200.0, icbo=0.0, delta=0.0, temperature=298.15,
    )  # fmt: skip
    assert [np.ndim(x) for x in found] == [0] * 5
    assert found.region == (ACTIVE if rc == 1e3 else SATURATED)
    assert found.region.dtype == np.int8


@pytest.mark.parametrize("model", MODELS)
def test_each_element_is_solved_on_its_own(model: str) -> None:
    # An element's answer does not depend on its neighbours, saturated or not: bit for bit.
    q, cases = device(model), practical("fixed_base", 60, seed=23)
    found = cases.solve(q)
    assert len(np.unique(found.region)) == 2
    for k in range(60):
        one = cases.only(np.arange(60) == k).solve(q)
        assert [x[0] for x in one] == [x[k] for x in found]


def test_arguments_are_not_changed() -> None:
    q, cases = device("junction"), practical("fixed_base with vbb", 200, seed=24)
    arrays = [*cases.rails.values(), *cases.r.values(), cases.hfe, cases.icbo, cases.delta, cases.temperature]
    kept = [x.copy() for x in arrays]
    for x in arrays:
        x.flags.writeable = False
    assert len(np.unique(cases.solve(q).region)) == 2
    assert all(np.array_equal(x, y) for x, y in zip(arrays, kept, strict=True))


def test_a_pnp_stage_has_the_magnitudes_of_its_npn_mirror() -> None:
    cases = practical("divider", 500, seed=25)
    npn, pnp = cases.solve(device("junction")), cases.solve(device("junction", polarity="pnp"))
    assert all(np.array_equal(x, y) for x, y in zip(npn, pnp, strict=True))


def decades(low: float, high: float) -> st.SearchStrategy[float]:
    return st.floats(np.log10(low), np.log10(high)).map(lambda x: float(10.0**x))


@given(
    shape=st.sampled_from(sorted(SHAPES)),
    model=st.sampled_from(MODELS),
    volts=st.lists(decades(0.1, 1000.0), min_size=2, max_size=2),
    ohms=st.lists(decades(1e-3, 1e9), min_size=4, max_size=4),
    hfe=decades(1.0, 1e5),
    icbo=st.one_of(st.just(0.0), decades(1e-15, 1e-3)),
    delta=st.floats(-0.1, 0.1),
    temperature=st.floats(200.0, 450.0),
)
def test_every_figure_is_finite_or_nan_in_saturation(
    shape: str, model: str, volts: list[float], ohms: list[float], hfe: float, icbo: float, delta: float,
    temperature: float,
) -> None:  # fmt: skip
    names = ("vcc", "vbb") if "vbb" in shape else ("vcc",)
    # Warnings are errors here: nothing may overflow on the way either.
    found = solve(
        NETWORKS[shape.split()[0]], device(model), dict(zip(names, volts, strict=False)),
        dict(zip(SHAPES[shape], ohms, strict=False)), hfe=hfe, icbo=icbo, delta=delta, temperature=temperature,
    )  # fmt: skip
    figures = np.array(found[:4])
    if found.region == SATURATED and np.isnan(found.ic):
        assert np.all(np.isnan(figures))
    else:
        assert np.all(np.isfinite(figures))
        assert found.ic >= 0.0
    assert found.region in (ACTIVE, SATURATED, CUT_OFF)


# ---------------------------------------------------------------------------------------------- by name


@pytest.mark.parametrize("model", MODELS)
def test_a_network_is_solved_by_its_name(model: str) -> None:
    # By name, with figures other than the defaults, against the nodal solution.
    vcc, h, t = np.array([[9.0], [15.0]]), np.array([60.0, 200.0, 600.0]), 320.0
    r = {"r1": 43e3, "r2": 24e3, "rc": 1.8e3, "re": 1.8e3}
    found = operating_point(
        network="divider", rails={"vcc": vcc}, resistors=r, hfe=h, temperature=t, vbe=0.2, vbe_ic=1e-3,
        vbe_model=model, icbo=2e-6, vce_sat=0.1, material="germanium",
    )  # fmt: skip
    assert [x.shape for x in found] == [(2, 3)] * 5
    q = device(model, material="germanium", vbe=Spread.exact(0.2), vbe_ic=1e-3, vce_sat=0.1)
    flat = {"vcc": np.repeat(vcc.ravel(), 3)}
    circuit = nodal.Circuit(NETWORKS["divider"], flat, {k: np.full(6, v) for k, v in r.items()})
    expected, _ = nodal.solve(circuit, q, np.tile(h, 2), np.full(6, 2e-6), np.zeros(6), np.full(6, t))
    assert_allclose(found.ic.ravel(), expected.ic, rtol=1e-9, atol=0)
    assert_allclose(found.vce.ravel(), expected.vce, rtol=1e-9, atol=0)


def test_defaults_of_the_solution_by_name_are_those_of_a_silicon_stage_at_25_celsius() -> None:
    r = {"r1": 43e3, "r2": 24e3, "rc": 1.8e3, "re": 1.8e3}
    found = operating_point(network="divider", rails={"vcc": 12.0}, resistors=r, hfe=220.0)
    given = solve(
        NETWORKS["divider"], device("junction", vbe=Spread.exact(0.65), vbe_ic=2e-3, vce_sat=0.2), {"vcc": 12.0}, r,
        hfe=220.0, icbo=0.0, delta=0.0, temperature=298.15,
    )  # fmt: skip
    assert [float(x) for x in found] == [float(x) for x in given]


def test_an_unknown_network_is_refused_by_name() -> None:
    with pytest.raises(UnknownNetwork, match=r"network: read 'dividor', accepted is one of .*divider, fixed_base"):
        operating_point(network="dividor", rails={"vcc": 12.0}, resistors={}, hfe=100.0)
