"""What a stage offers the search, and the assessment of single candidates.

Rules are those of sections 3 to 6 of the design; the stages are invented. Worst cases are compared with `enumeration.worst`,
which tries vertices by brute force.
"""

import itertools
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from enumeration import every_index, generator, random_spaces, worst
from numpy.testing import assert_allclose

import synth
from synth.box import Meter
from synth.networks import NETWORKS
from synth.quantities import Interval
from synth.spaces import (
    Exact,
    Goal,
    assess,
    assess_all,
    drift_of,
    fitted,
    goal_of,
    spaces_of,
    wanted,
)
from synth.stage import Stage, StageError

LAST_BITS = 1e-14
"""A few roundings of sums without cancellation."""


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E6", "tolerance": "5 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


# --- Spaces -------------------------------------------------------------------------------------------------------


def test_any_network_is_searched_with_and_without_each_optional_role() -> None:
    """Section 5: optional roles are tried both ways under ``any``; a network whose rail is missing is left out."""
    found = {(space.network.name, frozenset(space.roles)) for space in spaces_of(stage(network="any"))}
    expected = set()
    for name, network in NETWORKS.items():
        needed = [role.name for role in network.roles if not role.optional]
        optional = [role.name for role in network.roles if role.optional]
        # A request with a VCE and without a reference element is none for a sink or for compensating junctions.
        if set(network.rails) <= {"vcc"} and name not in ("sink", "diode_divider"):
            for k in range(len(optional) + 1):
                expected |= {(name, frozenset([*needed, *more])) for more in itertools.combinations(optional, k)}
    assert found == expected
    with_vee = {space.network.name for space in spaces_of(stage(network="any", vee="12 V"))}
    assert with_vee == set(NETWORKS) - {"sink", "diode_divider"}
    with_reference = {space.network.name for space in spaces_of(stage(network="any", reference_kind="diode"))}
    assert with_reference == set(NETWORKS) - {"sink", "two_supply"}
    assert {space.network.name for space in spaces_of(stage(network="any", vce=None))} == {"sink"}
    on_collector = {space.network.name for space in spaces_of(stage(network="any", vce=None, vc="7 V"))}
    assert on_collector == {"collector_divider", "collector_feedback", "divider", "fixed_base"}


@pytest.mark.parametrize(
    ("use", "roles"),
    [(None, [("rb", "rc")]), ("yes", [("rb", "rc", "re")]), ("either", [("rb", "rc", "re"), ("rb", "rc")])],
)
def test_an_optional_role_is_used_as_asked(use: str | None, roles: list[tuple[str, ...]]) -> None:
    assert [s.roles for s in spaces_of(stage(network="fixed_base", resistors_re_use=use))] == roles


def test_a_space_has_only_the_rails_of_its_network() -> None:
    given = stage(network=["divider", "fixed_base", "two_supply"], vee="9 V", vbb="3 V")
    rails = {space.network.name: set(space.rails) for space in spaces_of(given)}
    assert rails == {"divider": {"vcc"}, "fixed_base": {"vcc", "vbb"}, "two_supply": {"vcc", "vee"}}


def test_lists_are_ascending_and_combinations_their_product() -> None:
    """E6 has six values a decade; 10 ohm to 10 Mohm are six decades and the last end itself: 37 values."""
    (space,) = spaces_of(stage())
    for part in space.lists.values():
        assert part.nominal.size == 37
        assert np.all(np.diff(part.nominal) > 0.0)
    assert space.combinations == 37**4 == 1874161


def test_a_list_of_one_pins_a_role() -> None:
    (space,) = spaces_of(stage(resistors_re_values="1k8", resistors_rc_values=["1k5", "2k2"]))
    assert space.lists["re"].nominal.tolist() == [1800.0]
    assert space.lists["rc"].nominal.tolist() == [1500.0, 2200.0]
    assert space.combinations == 37 * 37 * 2


def test_band_is_tolerance_plus_life_and_the_coefficient_may_be_one_sided() -> None:
    (space,) = spaces_of(stage(tolerance="2 %", life="3 %", tcr="-800 : 0 : 200 ppm/K"))
    part = space.lists["rc"]
    assert_allclose(part.band, 0.05, rtol=LAST_BITS, atol=0.0)
    assert_allclose(part.tcr_low, -800e-6, rtol=LAST_BITS, atol=0.0)
    assert_allclose(part.tcr_high, 200e-6, rtol=LAST_BITS, atol=0.0)
    low, high = part.take([0]).ends(298.15 + 45.0)
    assert_allclose([low[0], high[0]], [10.0 * (1.0 - 0.05 - 0.036), 10.0 * (1.0 + 0.05 + 0.009)], rtol=LAST_BITS, atol=0.0)


def test_a_stock_row_keeps_its_own_band(tmp_path: Path) -> None:
    (tmp_path / "drawer.csv").write_text("value,tolerance,tcr\n1k,5 %,400 ppm/K\n2k2,,\n4k7,0.1 %,25 ppm/K\n")
    given = stage(series=None, stock="drawer.csv", tolerance="2 %", tcr="100 ppm/K", life="1 %", folder=tmp_path)
    part = spaces_of(given)[0].lists["r1"]
    assert part.nominal.tolist() == [1000.0, 2200.0, 4700.0]
    assert_allclose(part.band, [0.06, 0.03, 0.011], rtol=LAST_BITS, atol=0.0)
    assert_allclose(part.tcr_high, [400e-6, 100e-6, 25e-6], rtol=LAST_BITS, atol=0.0)
    assert_allclose(part.tcr_low, -part.tcr_high, rtol=LAST_BITS, atol=0.0)


def test_requirements_can_be_left_out_by_name() -> None:
    names = [need.name for need in spaces_of(stage(ic="2 mA ± 15 %"))[0].requirements]
    assert names == ["target.ic", "bleeder_current", "collector_share", "base_resistance", "vce"]
    rest = spaces_of(stage(ic="2 mA ± 15 %"), {"target.ic", "vce"})[0].requirements
    assert [need.name for need in rest] == ["bleeder_current", "collector_share", "base_resistance"]


def test_default_share_binds_only_where_rc_and_re_share_their_rails() -> None:
    """Section 5: 0.5 where rc and re hang between the same two rails, else 0; a given share binds everywhere."""
    both = {"network": ["divider", "two_supply"], "vee": "9 V"}
    for given, bound in ((stage(**both), {"divider"}), (stage(**both, collector_share="0.4"), {"divider", "two_supply"})):
        found = {s.network.name for s in spaces_of(given) if any(n.name == "collector_share" for n in s.requirements)}
        assert found == bound


def test_base_feed_is_the_parallel_connection() -> None:
    (space,) = spaces_of(stage(resistors_r1_values="30k", resistors_r2_values="60k"))
    index = np.zeros((1, 4), dtype=np.int32)
    assert_allclose(space.base_feed(space.box(index, Meter())), [20e3], rtol=LAST_BITS, atol=0.0)


def test_goal_is_the_target_and_has_no_vce_where_that_is_a_window() -> None:
    assert goal_of(stage()) == Goal(ic=2e-3, vce=5.0)
    assert goal_of(stage(vce=">= 3 V")) == Goal(ic=2e-3, vce=None)


def test_least_vce_counts_even_without_a_vce_target() -> None:
    assert set(wanted(Goal(ic=1e-3, vce=5.0))) == {("ic", 1), ("ic", -1), ("vce", 1), ("vce", -1)}
    assert set(wanted(Goal(ic=1e-3, vce=None))) == {("ic", 1), ("ic", -1), ("vce", -1)}


# --- Fitted resistors ---------------------------------------------------------------------------------------------


def test_fitted_values_make_a_space_of_one() -> None:
    values = {"values_r1": "15k8", "values_r2": "14k3", "values_rc": "1k02", "values_re": "2k49"}
    space = fitted(stage(network=["divider", "fixed_base"], tolerance="1 %", **values))
    assert (space.network.name, space.combinations) == ("divider", 1)
    assert space.fitted(np.zeros((1, 4), dtype=np.int32)) == [{"r1": 15800.0, "r2": 14300.0, "rc": 1020.0, "re": 2490.0}]
    assert_allclose(space.lists["rc"].band, [0.01], rtol=LAST_BITS, atol=0.0)


def test_fitted_values_may_lie_outside_the_range_of_the_search() -> None:
    space = fitted(stage(network="fixed_base", values_rb="22M", values_rc="1 ohm"))
    assert space.lists["rb"].nominal.tolist() == [22e6]


def test_fitted_refuses_values_of_no_network() -> None:
    with pytest.raises(StageError, match=r"values: read 'r1 rc'.*not the resistors of one network.*divider: r1 r2 rc re"):
        fitted(stage(values_r1="10k", values_rc="1k"))


def test_fitted_refuses_a_stage_without_values() -> None:
    with pytest.raises(StageError, match=r"values is not the resistors of one network.*fixed_base: rb rc re"):
        fitted(stage(network="fixed_base"))


def test_fitted_refuses_values_of_two_networks() -> None:
    """rb and rc are fixed base bias as well as collector feedback."""
    expected = r"values: read 'rb rc'.*several networks.*collector_feedback: rb rc re; or fixed_base"
    with pytest.raises(StageError, match=expected):
        fitted(stage(network=["collector_feedback", "fixed_base"], values_rb="1M", values_rc="2k2"))


# --- Assessment ---------------------------------------------------------------------------------------------------


def test_drift_is_the_larger_excursion() -> None:
    """By hand: IC 1.5 to 2.2 mA around 2 mA, VCE 4.5 to 6 V around 5 V."""
    ends = {("ic", 1): [2.2e-3], ("ic", -1): [1.5e-3], ("vce", 1): [6.0], ("vce", -1): [4.5]}
    arrays = {key: np.array(value) for key, value in ends.items()}
    drifts, both = drift_of(arrays, Goal(ic=2e-3, vce=5.0))
    assert list(drifts) == ["ic", "vce"]
    assert_allclose([drifts["ic"][0], drifts["vce"][0], both[0]], [0.25, 0.2, 0.25], rtol=LAST_BITS, atol=0.0)
    drifts, both = drift_of(arrays, Goal(ic=2e-3))
    assert list(drifts) == ["ic"]
    assert_allclose([drifts["ic"][0], both[0]], [0.25, 0.25], rtol=LAST_BITS, atol=0.0)


@pytest.mark.parametrize("network", NETWORKS)
def test_worst_case_of_a_candidate_is_that_of_brute_force(network: str) -> None:
    """Below an interior extreme a golden section may stay by 1e-10, the brute-force zoom by 2e-6."""
    (space,), goal = random_spaces(generator("spaces", network), [network], most=3)
    exact = Exact(space.box(every_index(space), Meter()), goal)
    for (quantity, side), extreme in exact.extremes.items():
        brute = worst(exact.box, quantity, side)
        assert_allclose(exact.worst((quantity,), side)[0], brute, rtol=2e-6, atol=0.0)
        assert np.all(side * (extreme.value - brute) >= -1e-10 * np.abs(brute))


@pytest.mark.parametrize("network", NETWORKS)
def test_assessment_at_a_limit_keeps_what_is_within_and_bounds_the_rest(network: str) -> None:
    tried = 0
    for number in range(12):
        (space,), goal = random_spaces(generator("limit", network, number), [network], most=16)
        index = every_index(space)
        every, beyond = assess(space, index, goal, Meter())
        assert beyond == np.inf
        limit = float(np.median([f.drift for f in every])) if every else np.inf
        # Without a VCE target drifts may be equal, and nothing lies beyond.
        if len(every) < 3 or limit >= max(f.drift for f in every):
            continue
        tried += 1
        near, beyond = assess(space, index, goal, Meter(), limit)
        assert {f.index for f in near} == {f.index for f in every if f.drift <= limit}
        # A lower bound of every qualifying candidate that was dropped.
        assert limit < beyond <= min(f.drift for f in every if f.drift > limit)
    assert tried >= 1


def test_a_candidate_beyond_the_limit_only_by_an_interior_extreme_is_still_bounded() -> None:
    """On a rail of 9 to 16 V VCE is greatest inside (section 4): every vertex lies within the limit, the box does not."""
    values = {"r1": ["33k", "39k", "47k"], "r2": ["1k8", "2k2", "2k7"], "rc": ["4k7", "10k"], "re": ["100 ohm", "220 ohm"]}
    given = stage(supply="9 : 12 : 16 V", **{f"resistors_{role}_values": ohms for role, ohms in values.items()})
    (space,) = spaces_of(given)
    goal, index = Goal(ic=2e-3, vce=1.5), every_index(space)
    box = space.box(index, Meter())
    rough = drift_of({key: box.extreme((key[0],), key[1], thorough=False).value for key in wanted(goal)}, goal)[1]
    true = Exact(box, goal).drift
    (inside,) = np.nonzero(true > rough * 1.001)
    assert inside.size >= 5
    free = replace(space, requirements=())
    for k in inside[:5]:
        limit = 0.5 * (rough[k] + true[k])
        found, beyond = assess(free, index[[k]], goal, Meter(), limit)
        assert found == []
        assert_allclose(beyond, true[k], rtol=1e-12, atol=0.0)


@pytest.mark.parametrize("network", NETWORKS)
def test_assessment_of_all_says_what_fails_and_agrees_with_the_assessment_of_those_that_qualify(network: str) -> None:
    (space,), goal = random_spaces(generator("all", network), [network], most=40)
    index = every_index(space)
    qualifying = {f.index: f.drift for f in assess(space, index, goal, Meter())[0]}
    names = {need.name for need in space.requirements}
    for row, result in zip(index, assess_all(space, index, goal, Meter()), strict=True):
        place = tuple(int(i) for i in row)
        assert (place in qualifying) == (not result.fails)
        assert set(result.fails) <= names
        assert (result.drift is None) <= ("vce" in result.fails)
        if place in qualifying:
            assert_allclose(result.drift, qualifying[place], rtol=1e-12, atol=0.0)


def test_a_candidate_that_saturates_has_no_drift() -> None:
    given = stage(values_r1="22k", values_r2="22k", values_rc="10k", values_re="1k")
    (result,) = assess_all(fitted(given), np.zeros((1, 4), dtype=np.int32), goal_of(given), Meter())
    assert result.drift is None
    assert "vce" in result.fails


def test_equality_passes_a_limit() -> None:
    """rc = re is a share of exactly one half, the default limit (section 5: equality passes)."""
    given = stage(values_r1="43k", values_r2="24k", values_rc="1k8", values_re="1k8", tolerance="1 %")
    index = np.zeros((1, 4), dtype=np.int32)
    assert assess_all(fitted(given), index, goal_of(given), Meter())[0].fails == ()
    less = assess_all(fitted(given.replace(rc="1k79")), index, goal_of(given), Meter())[0]
    assert less.fails == ("collector_share",)


def test_requirement_of_a_window_has_the_target_it_is_measured_by() -> None:
    (space,) = spaces_of(stage(ic="1.7 : 2 : 2.4 mA", vce=">= 3 V"))
    ic, vce = (next(n for n in space.requirements if n.name == f"target.{q}") for q in ("ic", "vce"))
    assert (ic.interval, ic.target) == (Interval(1.7e-3, 2.4e-3), 2e-3)
    assert (vce.interval, vce.target) == (Interval(3.0, np.inf), None)


def test_a_space_is_shared_by_the_package_interface() -> None:
    """`find` counts the combinations of the same spaces."""
    given = stage(resistors_re_values="1k8", resistors_rc_values="1k8")
    assert synth.find(given, top=1).search.combinations == 37 * 37  # type: ignore[union-attr]
