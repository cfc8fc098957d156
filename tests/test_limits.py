"""Limits and windows: what passes, by how much, where they apply, and what is measured.

Words and rules are those of sections 2 and 5 of the design; the stages are invented and their figures worked out by hand
beside each check, with VBE one constant as in a hand calculation.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from stages import SOLVED, Numbers, active, point, random_box, samples, total, vertices

from synth.box import Box, Values
from synth.limits import RULES, Judgement, LimitRule, Requirement, Surroundings, applies, judge, requirements
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.quantities import Interval, Spread
from synth.transistor import Transistor

INF = math.inf
HAND = 1e-13
"""Hand formulas in double precision: some tens of roundings."""


def upper(limit: float) -> Requirement:
    return Requirement(name="supply_current", kind="current", interval=Interval(-INF, limit), judged="box", sums=(("ic",),))


def lower(limit: float) -> Requirement:
    return Requirement(name="vce", kind="voltage", interval=Interval(limit, INF), judged="box", sums=(("vce",),))


def window(low: float, target: float, high: float) -> Requirement:
    return Requirement(name="target.ic", kind="current", interval=Interval(low, high), judged="box", sums=(("ic",),), target=target)


def hand_box(network: str = "divider", rails: dict[str, float] | None = None, hfe: tuple[float, float, float] = (100.0, 100.0, 100.0),
             tolerance: float = 0.0, **ohms: float | list[float]) -> Box:
    """Stages at 25 °C with VBE = 0.65 V whatever the current; a role with several values makes several candidates."""
    count = max(np.size(v) for v in ohms.values())
    zero = np.zeros(count)
    return Box(
        network=NETWORKS[network],
        transistor=Transistor(hfe=Spread(*hfe), vbe=Spread.exact(0.65), vbe_ic=2e-3, vbe_model="fixed", vce_sat=0.2),
        rails={name: Spread.exact(v) for name, v in (rails or {"vcc": 12.0}).items()},
        temperature=Spread.exact(298.15),
        parts={role: Parts(nominal=zero + np.asarray(v), band=zero + tolerance, tcr_low=zero, tcr_high=zero) for role, v in ohms.items()},
    )


def asked(box: Box, name: str, interval: Interval, given: bool = True) -> Requirement:
    """The requirement of one limit, as `requirements` builds it."""
    found = requirements(box.network, Surroundings(rails=box.rails, roles=box.parts, reference=box.reference,
                                                   vce_sat=box.transistor.vce_sat),
                         {name: interval}, {name} if given else set(), {})
    return next(r for r in found if r.name == name)


def judged(box: Box, requirement: Requirement) -> Judgement:
    def worst(names: Sequence[str], direction: int) -> tuple[Numbers, Values]:
        extreme = box.extreme(names, direction)
        return extreme.value, extreme.at

    return judge(box, requirement, worst)


# Passing and margins


@pytest.mark.parametrize(
    ("requirement", "value", "passes", "margin"),
    [
        # Section 2: upper limit (limit − worst)/limit; lower (worst − limit)/limit.
        (upper(2e-3), 1.5e-3, True, 0.25),
        (upper(2e-3), 2.5e-3, False, -0.25),
        (lower(4.0), 5.0, True, 0.25),
        (lower(4.0), 3.0, False, -0.25),
        (lower(4.0), -4.0, False, -2.0),
        # A window: the smaller of both sides over the target, here 1.7 : 2 : 2.4 mA.
        (window(1.7e-3, 2e-3, 2.4e-3), 2e-3, True, 0.15),
        (window(1.7e-3, 2e-3, 2.4e-3), 2.3e-3, True, 0.05),
        (window(1.7e-3, 2e-3, 2.4e-3), 2.5e-3, False, -0.05),
        (window(1.7e-3, 2e-3, 2.4e-3), 1.5e-3, False, -0.1),
    ],
)
def test_margin_follows_the_words(requirement: Requirement, value: float, passes: bool, margin: float) -> None:
    assert bool(requirement.passes(value)) is passes
    # The margins are differences of like numbers: some ulps of the limit, over the limit.
    assert_allclose(requirement.margin(value), margin, rtol=1e-12, atol=0)


def test_window_without_a_target_measures_each_side_against_its_own_end() -> None:
    # Section 5: ">= 3 V" is a window without a target, so the words for limits hold.
    both = Requirement(name="target.vce", kind="voltage", interval=Interval(2.0, 8.0), judged="box")
    assert_allclose(both.margin([2.5, 7.0, 1.0, 10.0]), [0.25, 0.125, -0.5, -0.25], rtol=1e-15, atol=0)


@pytest.mark.parametrize("requirement", [upper(2e-3), lower(2e-3), window(2e-3, 2e-3, 2e-3)])
def test_equality_passes_whatever_the_last_bit_says(requirement: Requirement) -> None:
    for value in (2e-3, np.nextafter(2e-3, 0.0), np.nextafter(2e-3, 1.0)):
        assert requirement.passes(value)
    assert requirement.margin(2e-3) == 0.0


def test_slack_is_of_the_last_bits_only() -> None:
    assert not upper(2e-3).passes(2e-3 * (1.0 + 1e-9))
    assert not lower(2e-3).passes(2e-3 * (1.0 - 1e-9))


@pytest.mark.parametrize("requirement", [upper(2e-3), lower(4.0), window(1.7e-3, 2e-3, 2.4e-3), upper(0.0), lower(0.0)])
def test_nan_fails_and_has_no_margin(requirement: Requirement) -> None:
    assert not requirement.passes(math.nan)
    # "negative fails": a margin that is 0 or more would contradict the verdict.
    assert not requirement.margin(math.nan) >= 0.0


def test_limit_of_zero_has_no_relative_margin() -> None:
    assert_array_equal(lower(0.0).passes([-1e-3, 0.0, 1e-3]), [False, True, True])
    assert_array_equal(lower(0.0).margin([-1e-3, 0.0, 1e-3]), [-INF, INF, INF])
    assert_array_equal(upper(0.0).margin([-1e-3, 0.0, 1e-3]), [INF, INF, -INF])


def test_sides_are_the_ends_that_can_fail() -> None:
    assert upper(2e-3).sides == (1,)
    assert lower(2e-3).sides == (-1,)
    assert window(1e-3, 2e-3, 3e-3).sides == (1, -1)


def test_side_keeps_one_end() -> None:
    both = window(1.7e-3, 2e-3, 2.4e-3)
    assert both.side(1).interval == Interval(-INF, 2.4e-3)
    assert both.side(-1).interval == Interval(1.7e-3, INF)
    assert both.side(1).passes(0.0)
    assert not both.side(-1).passes(0.0)
    # Still relative to the target of the window.
    assert_allclose(both.side(-1).margin(2.3e-3), 0.3, rtol=1e-12, atol=0)


# Where a limit applies


ALWAYS = ("base_resistance", "supply_current", "vce")


@pytest.mark.parametrize("network", NETWORKS)
@pytest.mark.parametrize("name", ALWAYS)
def test_limits_that_apply_to_every_network(network: str, name: str) -> None:
    form = NETWORKS[network]
    # Unasked, the base feed of a network without a signal at the base may be as stiff as it likes.
    quiet = name == "base_resistance" and not form.takes_signal
    assert applies(RULES[name], form, Surroundings(rails=form.rails, roles=form.role_names), False) is not quiet
    assert applies(RULES[name], form, Surroundings(rails=form.rails, roles=form.role_names), True)


@pytest.mark.parametrize("network", NETWORKS)
def test_compliance_is_for_sinks_alone(network: str) -> None:
    form = NETWORKS[network]
    around = Surroundings(rails=form.rails, roles=form.role_names)
    assert applies(RULES["compliance"], form, around, True) is (network == "sink")


def test_compliance_by_hand() -> None:
    # 24 V for the load less 2.2 kohm times 2 mA of emitter current (4.4 V, hFE without end) less 0.2 V of saturation.
    device = Transistor(hfe=Spread.exact(1e9), vbe=Spread.exact(0.6), vbe_ic=2e-3, vbe_model="fixed", vce_sat=0.2)
    part = {name: Parts(nominal=np.array([ohm]), band=np.zeros(1), tcr_low=np.zeros(1), tcr_high=np.zeros(1))
            for name, ohm in (("r1", 7e3), ("r2", 5e3), ("re", 2.2e3))}
    box = Box(network=NETWORKS["sink"], transistor=device, rails={"vcc": Spread.exact(12.0), "vload": Spread.exact(24.0)},
              temperature=Spread.exact(298.15), parts=part)
    for limit, passes in ((19.3, True), (19.5, False)):
        found = judged(box, asked(box, "compliance", Interval(limit, np.inf)))
        # Base 5 V, so re takes 4.4 V. hFE of 1e9 leaves 1e-9 of base current.
        assert_allclose(found.worst, 24.0 - 4.4 - 0.2, rtol=1e-8, atol=0)
        assert_allclose(found.margin, (19.4 - limit) / limit, rtol=1e-6, atol=0)
        assert bool(found.passed[0]) is passes


@pytest.mark.parametrize(
    ("network", "applicable"),
    [("divider", True), ("collector_divider", True), ("follower", True), ("diode_divider", True), ("sink", True),
     ("fixed_base", False), ("collector_feedback", False), ("two_supply", False)],
)
def test_bleeder_needs_a_lower_divider_resistor(network: str, applicable: bool) -> None:
    form = NETWORKS[network]
    assert applies(RULES["bleeder_current"], form, Surroundings(rails=form.rails, roles=form.role_names), True) is applicable
    without = [role for role in form.role_names if role != "r2"]
    assert not applies(RULES["bleeder_current"], form, Surroundings(rails=form.rails, roles=without), True)


@pytest.mark.parametrize("network", [name for name in NETWORKS if {"rc", "re"} <= set(NETWORKS[name].role_names)])
def test_default_collector_share_binds_only_where_rc_and_re_share_their_rails(network: str) -> None:
    # Section 5: default 0.5 where rc and re hang between the same two rails, else 0. With two supplies re hangs from VEE.
    form = NETWORKS[network]
    assert applies(RULES["collector_share"], form, Surroundings(rails=form.rails, roles=form.role_names), False) is (network != "two_supply")
    assert applies(RULES["collector_share"], form, Surroundings(rails=form.rails, roles=form.role_names), True)


@pytest.mark.parametrize(("network", "absent"), [("fixed_base", "re"), ("collector_feedback", "re"), ("collector_divider", "re"), ("follower", "rc")])
def test_collector_share_needs_both_resistors(network: str, absent: str) -> None:
    form = NETWORKS[network]
    roles = [role for role in form.role_names if role != absent]
    assert not applies(RULES["collector_share"], form, Surroundings(rails=form.rails, roles=roles), True)


# What a candidate has to satisfy


def required(network: str = "divider", limits: dict[str, Interval] | None = None, given: Sequence[str] = (),
             windows: dict[str, tuple[Interval, float | None]] | None = None, vce_sat: float = 0.2,
             without: Sequence[str] = ()) -> dict[str, Requirement]:
    form = NETWORKS[network]
    roles = [role for role in form.role_names if role not in without]
    found = requirements(form, Surroundings(rails=form.rails, roles=roles, vce_sat=vce_sat), limits or {}, given, windows or {})
    assert len({r.name for r in found}) == len(found)
    return {r.name: r for r in found}


@pytest.mark.parametrize(
    ("asked_for", "wanted"),
    [
        (None, Interval(0.3, INF)),  # always on: active at every corner
        (Interval(0.1, INF), Interval(0.3, INF)),
        (Interval(3.0, INF), Interval(3.0, INF)),
        (Interval(-INF, 6.0), Interval(0.3, 6.0)),
        (Interval(1.0, 6.0), Interval(1.0, 6.0)),
    ],
)
def test_vce_is_held_above_saturation(asked_for: Interval | None, wanted: Interval) -> None:
    limits = {} if asked_for is None else {"vce": asked_for}
    found = required(limits=limits, given=tuple(limits), vce_sat=0.3)["vce"]
    assert found.interval == wanted
    assert found.judged == "box"
    assert found.sums == (("vce",),)


def test_window_becomes_a_requirement_with_its_target() -> None:
    found = required(windows={"ic": (Interval(1.7e-3, 2.3e-3), 2e-3), "vce": (Interval(3.0, INF), None)})
    assert found["target.ic"].interval == Interval(1.7e-3, 2.3e-3)
    assert found["target.ic"].target == 2e-3
    assert (found["target.ic"].kind, found["target.vce"].kind) == ("current", "voltage")
    assert found["target.vce"].sides == (-1,)
    assert found["target.vce"].target is None
    assert list(found)[:2] == ["target.ic", "target.vce"]


def test_window_open_on_both_sides_asks_nothing() -> None:
    assert set(required(windows={"ic": (Interval(-INF, INF), 2e-3)})) == {"vce"}


def test_limit_that_does_not_apply_is_left_out_and_no_error() -> None:
    limits = {"bleeder_current": Interval(-INF, 2e-4), "collector_share": Interval(0.5, INF), "base_resistance": Interval(1e3, INF)}
    assert set(required("fixed_base", limits, given=tuple(limits), without=("re",))) == {"base_resistance", "vce"}
    assert set(required("divider", limits)) == {"bleeder_current", "collector_share", "base_resistance", "vce"}


def test_default_collector_share_is_not_applied_to_two_supplies() -> None:
    limits = {"collector_share": Interval(0.5, INF)}
    assert "collector_share" not in required("two_supply", limits)
    assert "collector_share" in required("two_supply", limits, given=("collector_share",))


@pytest.mark.parametrize("name", ["bleeder_current", "collector_share", "base_resistance"])
def test_shape_rules_are_judged_at_nominal_values(name: str) -> None:
    assert RULES[name].judged == "nominal"


@pytest.mark.parametrize(
    ("name", "sense"),
    [("bleeder_current", "<="), ("collector_share", ">="), ("base_resistance", ">="), ("supply_current", "<="), ("vce", ">=")],
)
def test_natural_sense_of_each_limit(name: str, sense: str) -> None:
    assert RULES[name].sense == sense


# Judging


def test_bleeder_current_by_hand() -> None:
    # VCC 12 V, r1 = r2 = 10 kΩ: 6 V behind 5 kΩ; h = 100, re = 1 kΩ: IC = 5.35 V/(5 kΩ/100 + 1 kΩ·1.01) = 5.35/1060 A,
    # VB = 0.65 V + 1.01·IC·1 kΩ, and r2 carries VB/10 kΩ = 0.574764 mA.
    box = hand_box(r1=10e3, r2=10e3, rc=1e3, re=1e3)
    wanted = (0.65 + 1.01e3 * 5.35 / 1060.0) / 10e3
    found = judged(box, asked(box, "bleeder_current", Interval(-INF, 6e-4)))
    assert_allclose(found.worst, [wanted], rtol=HAND, atol=0)
    assert_allclose(found.margin, [(6e-4 - wanted) / 6e-4], rtol=1e-11, atol=0)
    assert_array_equal(found.passed, [True])
    assert not judged(box, asked(box, "bleeder_current", Interval(-INF, 5.7e-4))).passed[0]


def test_bleeder_current_is_a_shape_rule_that_tolerances_do_not_touch() -> None:
    exact = hand_box(r1=10e3, r2=10e3, rc=1e3, re=1e3)
    rough = hand_box(hfe=(50.0, 100.0, 400.0), tolerance=0.2, r1=10e3, r2=10e3, rc=1e3, re=1e3)
    limit = Interval(-INF, 6e-4)
    worst = judged(rough, asked(rough, "bleeder_current", limit)).worst
    assert_allclose(worst, judged(exact, asked(exact, "bleeder_current", limit)).worst, rtol=HAND, atol=0)


def test_bleeder_at_its_limit_passes() -> None:
    box = hand_box(r1=10e3, r2=10e3, rc=1e3, re=1e3)
    limit = (0.65 + 1.01e3 * 5.35 / 1060.0) / 10e3
    assert judged(box, asked(box, "bleeder_current", Interval(-INF, limit))).passed[0]


def test_collector_share_equality_passes() -> None:
    # Section 5: rc ≥ re·share/(1 − share) on nominal resistances, equality passes; 0.5 asks for rc ≥ re.
    box = hand_box(r1=10e3, r2=10e3, rc=[1e3, 1.1e3, 910.0], re=1e3)
    found = judged(box, asked(box, "collector_share", Interval(0.5, INF), given=False))
    assert_array_equal(found.passed, [True, True, False])
    assert_allclose(found.worst, [0.5, 1.1 / 2.1, 0.91 / 1.91], rtol=HAND, atol=0)
    assert found.at == {}


@pytest.mark.parametrize(("share", "rc", "re"), [(0.3, 300.0, 700.0), (0.6, 1.5e3, 1e3), (0.8, 4.0e3, 1e3), (0.1, 11.0, 99.0), (2 / 3, 4.4e3, 2.2e3)])
def test_collector_share_equality_passes_at_any_share(share: float, rc: float, re: float) -> None:
    box = hand_box(r1=10e3, r2=10e3, rc=[rc, rc * 0.999], re=re)
    assert_array_equal(judged(box, asked(box, "collector_share", Interval(share, INF))).passed, [True, False])


@pytest.mark.parametrize(
    ("network", "ohms", "wanted"),
    [
        ("divider", {"r1": 30e3, "r2": 20e3, "rc": 1e3, "re": 1e3}, 12e3),
        ("collector_divider", {"r1": 30e3, "r2": 20e3, "rc": 1e3, "re": 1e3}, 12e3),
        ("fixed_base", {"rb": 470e3, "rc": 1e3}, 470e3),
        ("collector_feedback", {"rb": 220e3, "rc": 1e3}, 220e3),
        ("follower", {"r1": 30e3, "r2": 20e3, "re": 1e3}, 12e3),
        ("follower", {"r1": 470e3, "re": 1e3}, 470e3),
    ],
)
def test_base_resistance_is_rb_or_the_divider_in_parallel(network: str, ohms: dict[str, float], wanted: float) -> None:
    box = hand_box(network, **ohms)
    found = judged(box, asked(box, "base_resistance", Interval(wanted, INF)))
    assert_allclose(found.worst, [wanted], rtol=HAND, atol=0)
    assert found.passed[0]  # equality
    assert not judged(box, asked(box, "base_resistance", Interval(1.001 * wanted, INF))).passed[0]


def test_supply_current_by_hand() -> None:
    # Fixed base: IB = 11.35 V/rb, IC = h·IB, both drawn from VCC; the worst is at the greatest gain and the least rb.
    box = hand_box("fixed_base", hfe=(100.0, 200.0, 300.0), tolerance=0.05, rb=1e6, rc=1e3)
    wanted = 301.0 * 11.35 / 0.95e6
    found = judged(box, asked(box, "supply_current", Interval(-INF, 4e-3)))
    assert_allclose(found.worst, [wanted], rtol=HAND, atol=0)
    assert_allclose(found.margin, [1.0 - wanted / 4e-3], rtol=1e-11, atol=0)
    assert_allclose((found.at["rb"], found.at["hfe"]), [[0.95e6], [300.0]], rtol=HAND, atol=0)


def test_supply_current_is_the_largest_of_any_one_rail() -> None:
    # VBB feeds 4.35 V/1 kΩ = 4.35 mA into the base, a part with h = 0.5 passes on half of it: VBB carries the most.
    rails = {"vcc": 12.0, "vbb": 5.0}
    box = hand_box("fixed_base", rails=rails, hfe=(0.5, 0.5, 0.5), rb=[1e3, 1e6], rc=100.0)
    assert_allclose(judged(box, asked(box, "supply_current", Interval(-INF, 1e-2))).worst, [4.35e-3, 4.35e-6], rtol=HAND, atol=0)
    # With gain VCC carries the most: 100·4.35 V/1 MΩ.
    box = hand_box("fixed_base", rails=rails, rb=1e6, rc=100.0)
    assert_allclose(judged(box, asked(box, "supply_current", Interval(-INF, 1e-2))).worst, [4.35e-4], rtol=HAND, atol=0)


def test_supply_current_of_two_supplies_is_the_emitter_current() -> None:
    # Base near 0 V, VEE = 5 V: IB·rb + 0.65 V + 101·IB·re = 5 V; VEE draws IC + IB, VCC only IC.
    box = hand_box("two_supply", rails={"vcc": 5.0, "vee": 5.0}, rb=10e3, rc=1e3, re=2e3)
    wanted = 101.0 * 4.35 / (10e3 + 101.0 * 2e3)
    assert_allclose(judged(box, asked(box, "supply_current", Interval(-INF, 1e-2))).worst, [wanted], rtol=HAND, atol=0)


@pytest.mark.parametrize("network", SOLVED)
def test_supply_current_is_never_less_than_brute_force(network: str) -> None:
    # Vertices and random points, by the node equations; the sum over a rail's branches is Kirchhoff's current law.
    for number in range(4):
        rng = np.random.default_rng([number, len(network)])
        box = random_box(rng, 3, network=network)
        found = judged(box, asked(box, "supply_current", Interval(-INF, 1.0)))
        for u in (vertices(box), samples(rng, box, 2000, at_ends=0.5)):
            q = active(network, box.transistor, point(box, u))
            drawn = [total(("ic", f"i_{'rb' if 'rb' in box.parts else 'r1'}"), q)]
            if network == "collector_feedback":
                drawn = [total(("ic", "ib"), q)]
            elif "vload" in box.rails:
                drawn = [q["ic"], q["i_r1"]]
            elif network == "two_supply" or "vbb" in box.rails:
                drawn = [q["ic"], total(("ic", "ib"), q) if network == "two_supply" else q["ib"]]
            most = np.max([x.max(axis=0) for x in drawn], axis=0)
            # The true extreme is exact to 1e-9 by contract; the sums round at some ulps.
            assert np.all(found.worst >= most * (1.0 - 1e-9)), (network, number)
        assert_array_equal(found.passed, found.worst <= 1.0)


def test_window_is_judged_on_its_worse_side() -> None:
    # IC = h·11.35 V/1 MΩ: 1.135 to 3.405 mA. Around 2 mA the upper side of 1 : 3 mA fails by 0.2025.
    box = hand_box("fixed_base", hfe=(100.0, 200.0, 300.0), rb=1e6, rc=1e3)
    found = judged(box, window(1e-3, 2e-3, 3e-3))
    assert_allclose(found.worst, [3.405e-3], rtol=HAND, atol=0)
    assert_allclose(found.margin, [-0.405e-3 / 2e-3], rtol=1e-11, atol=0)
    assert_allclose(found.at["hfe"], [300.0], rtol=HAND, atol=0)
    # Of 1.2 : 3.6 mA the lower side fails, by 0.0325.
    found = judged(box, window(1.2e-3, 2e-3, 3.6e-3))
    assert_allclose(found.worst, [1.135e-3], rtol=HAND, atol=0)
    assert_allclose(found.margin, [-0.065e-3 / 2e-3], rtol=1e-11, atol=0)
    assert_allclose(found.at["hfe"], [100.0], rtol=HAND, atol=0)
    assert_array_equal(found.passed, [False])


def test_each_candidate_is_judged_for_itself() -> None:
    # At 1 MΩ the upper side of 1 : 3 mA is the worse, at 1.2 MΩ (0.946 to 2.838 mA) the lower.
    box = hand_box("fixed_base", hfe=(100.0, 200.0, 300.0), rb=[1e6, 1.2e6], rc=1e3)
    found = judged(box, window(1e-3, 2e-3, 3e-3))
    assert_allclose(found.worst, [3.405e-3, 100.0 * 11.35 / 1.2e6], rtol=HAND, atol=0)
    assert_allclose(found.at["hfe"], [300.0, 100.0], rtol=HAND, atol=0)


@pytest.mark.parametrize("missing", [1, -1])
def test_window_with_an_unknown_side_fails(missing: int) -> None:
    # A stage without an operating point at one extreme: NaN on that side alone must not be passed over.
    box = hand_box("fixed_base", rb=1e6, rc=1e3)

    def worst(names: Sequence[str], direction: int) -> tuple[Numbers, Values]:
        extreme = box.extreme(names, direction)
        return (np.array([math.nan]) if direction == missing else extreme.value), extreme.at

    found = judge(box, window(1e-4, 1e-3, 2e-3), worst)
    assert_array_equal(found.passed, [False])
    assert not found.margin[0] >= 0.0


def test_vce_below_saturation_fails() -> None:
    # VCE = 12 V − 1.135 mA·rc: 0.65 V at 10 kΩ passes 0.2 V, the active law gives −0.485 V at 11 kΩ.
    box = hand_box("fixed_base", rb=1e6, rc=[10e3, 11e3])
    found = judged(box, asked(box, "vce", Interval(-INF, INF)))
    assert_allclose(found.worst, [0.65, -0.485], rtol=1e-11, atol=0)
    assert_array_equal(found.passed, [True, False])


@pytest.mark.parametrize("name", [name for name, rule in RULES.items() if rule.static is not None])
@pytest.mark.parametrize("network", NETWORKS)
def test_signs_of_a_rule_on_resistances_are_those_of_its_value(name: str, network: str) -> None:
    rule: LimitRule = RULES[name]
    form = NETWORKS[network]
    assert rule.static is not None
    assert rule.static_signs is not None
    static: Callable[..., object] = rule.static
    rng = np.random.default_rng(1)
    signs = rule.static_signs(form)
    if name == "collector_share" and not {"rc", "re"} <= set(form.role_names):
        pytest.skip("no such rule without rc and re")
    for _ in range(50):
        r = {role: float(10.0 ** rng.uniform(1.0, 7.0)) for role in form.role_names}
        here = float(np.asarray(static(form, r)))
        for role in form.role_names:
            step = float(np.asarray(static(form, {**r, role: 2.0 * r[role]}))) - here
            assert np.sign(step) == signs.get(role, 0) or abs(step) <= 1e-15 * abs(here), (role, r)
