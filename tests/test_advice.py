"""What binds when nothing qualifies: the conflicting set is minimal and every relaxation works, tested by applying it.

Small requests are settled by full enumeration (`enumeration`), real ones by a search of their own.
"""

import itertools
import math
from functools import cache
from pathlib import Path

import pytest
from enumeration import enumerate_all
from numpy.testing import assert_allclose
from relaxations import infeasible

import synth
from synth.answer import Infeasible
from synth.quantities import RestpointError
from synth.search import search
from synth.spaces import goal_of, spaces_of
from synth.stage import Stage, StageError

GAP = 0.005
"""What advice may leave between the drift it quotes and the least one: half a per cent, far below the figures printed."""

LEVERS = {"supply", "transistor", "resistors", "ambient", "network"}
"""Tables and keys that advice may change besides limits and targets."""

REQUESTS: dict[str, dict[str, object]] = {
    "window of IC": {"ic": "2 mA ± 5 %"},
    "window of VCE": {"vce": "5 V ± 5 %"},
    "both windows": {"ic": "2 mA ± 10 %", "vce": "5 V ± 10 %", "resistors_re_values": "1k8"},
    "one-sided window of VCE": {"ic": "2 mA ± 20 %", "vce": ">= 11 V"},
    "ceiling of VCE": {"ic": "2 mA ± 5 %", "vce": "<= 3 V"},
    "lopsided window": {"ic": "1.99 : 2 : 2.4 mA"},
    "share": {"ic": "2 mA ± 15 %", "collector_share": "0.8"},
    "share with a ceiling": {
        "collector_share": "<= 0.45",
        "resistors_re_values": ["1k5", "1k8"],
        "resistors_rc_values": ["1k8", "2k2"],
    },
    "supply current": {"ic": "2 mA ± 20 %", "supply_current": "1.9 mA"},
    "base resistance": {"ic": "2 mA ± 20 %", "base_resistance": "60 kohm", "bleeder_current": "1 mA"},
    "range of VCE": {"limits_vce": "4.9 : 5.1 V"},
    "bleeder": {"ic": "2 mA ± 12 %", "bleeder_current": "60 µA"},
}
"""Requests that nothing meets, each for another reason; E12, a decade for each role of a divider."""

SMALL: dict[str, object] = {
    "resistors_r1_values": ["33k", "39k", "43k", "47k", "56k"],
    "resistors_r2_values": ["18k", "20k", "22k", "24k", "27k"],
    "resistors_rc_values": ["1k5", "1k8", "2k2", "2k7"],
    "resistors_re_values": ["1k5", "1k8", "2k2"],
}
"""Few enough to enumerate."""


RANGES = {f"resistors_{role}_range": "10k : 100k" if role in ("r1", "r2") else "1k : 10k" for role in ("r1", "r2", "rc", "re")}


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E12", "tolerance": "1 %"}
    return Stage(**{**given, **RANGES, **changes})  # type: ignore[arg-type]


def advice(given: Stage) -> Infeasible:
    answer = synth.find(given, top=1)
    assert answer.search is not None
    assert answer.search.status == "infeasible"
    assert answer.best is None
    assert answer.infeasible is not None
    return answer.infeasible


@cache
def known(request_name: str) -> Infeasible:
    return advice(stage(**REQUESTS[request_name]))


def names(given: Stage) -> set[str]:
    return {need.name for space in spaces_of(given) for need in space.requirements}


def qualifies(given: Stage, kept: set[str]) -> bool:
    """Whether anything meets the requirements kept; staying active is physics and always kept."""
    dropped = names(given) - kept - {"vce"}
    return bool(search(spaces_of(given, dropped), goal_of(given), top=1).found)


def check_minimal(given: Stage, found: Infeasible) -> None:
    binding = set(found.binding)
    assert binding <= names(given)
    assert not qualifies(given, binding)
    for name in binding - {"vce"}:
        assert qualifies(given, binding - {name}), name


def check_relaxations(given: Stage, found: Infeasible) -> None:
    for relaxation in found.relaxations:
        relaxed = given.with_keys(dict(relaxation.change))
        best = synth.find(relaxed, top=1).best
        assert best is not None, relaxation.change
        assert best.verdict == "pass"
        assert best.drift.q_point * (1.0 - 1e-12) <= relaxation.drift <= best.drift.q_point / (1.0 - GAP) * (1.0 + 1e-12)
        key = next(iter(relaxation.change))
        is_limit = key.startswith(("limits.", "target."))
        assert key.removeprefix("limits.") in found.binding if is_limit else key.split(".")[0] in LEVERS


def check_without(given: Stage, found: Infeasible) -> None:
    assert set(found.best_without) == set(found.binding)
    for name, drift in found.best_without.items():
        outcome = search(spaces_of(given, {name}), goal_of(given), top=1)
        assert (drift is None) == (not outcome.found)
        if drift is not None:
            least = outcome.found[0].drift
            assert least * (1.0 - 1e-12) <= drift <= least / (1.0 - GAP) * (1.0 + 1e-12)


LATER = {"both windows", "ceiling of VCE", "window of IC", "lopsided window", "bleeder", "window of VCE"}
"""Requests whose whole check waits for the long run."""


def marks(request_name: str) -> list[pytest.MarkDecorator]:
    return [pytest.mark.long] if request_name in LATER else []


@pytest.mark.parametrize("request_name", [pytest.param(name, marks=marks(name)) for name in REQUESTS])
def test_advice_is_borne_out_by_searches_of_its_own(request_name: str) -> None:
    given, found = stage(**REQUESTS[request_name]), known(request_name)
    check_minimal(given, found)
    check_without(given, found)
    check_relaxations(given, found)


@pytest.mark.parametrize(
    "changes",
    [
        {"ic": "2 mA ± 6 %"},
        {"ic": "2 mA ± 14 %", "vce": "5 V ± 8 %"},
        {"ic": "2 mA ± 15 %", "supply_current": "2.2 mA", "collector_share": "0.6"},
    ],
    ids=["one window", "two windows", "three limits"],
)
def test_the_conflict_of_a_small_request_is_that_of_full_enumeration(changes: dict[str, object]) -> None:
    given = stage(**SMALL, **changes)
    goal = goal_of(given)
    assert enumerate_all(spaces_of(given), goal) == []
    found = advice(given)
    every, binding = names(given), set(found.binding)
    assert enumerate_all(spaces_of(given, every - binding - {"vce"}), goal) == []
    for name in binding - {"vce"}:
        assert enumerate_all(spaces_of(given, every - binding - {"vce"} | {name}), goal) != []
    for relaxation in found.relaxations:
        rows = enumerate_all(spaces_of(given.with_keys(dict(relaxation.change))), goal)
        assert rows
        assert rows[0].drift * (1.0 - 1e-12) <= relaxation.drift <= rows[0].drift / (1.0 - GAP) * (1.0 + 1e-12)


def test_a_conflict_has_no_smaller_conflict_inside() -> None:
    """Every subset of the set named lets something qualify, not only those short of one."""
    given, binding = stage(**REQUESTS["share"]), set(known("share").binding)
    assert len(binding) >= 2
    for k in range(len(binding)):
        for subset in itertools.combinations(sorted(binding), k):
            assert qualifies(given, set(subset)), subset


@pytest.mark.parametrize(
    ("request_name", "key"),
    [
        ("window of IC", "target.ic"),
        ("supply current", "limits.supply_current"),
        pytest.param("bleeder", "limits.bleeder_current", marks=pytest.mark.long),
        pytest.param("share", "limits.collector_share", marks=pytest.mark.long),
    ],
)
def test_a_relaxation_is_the_least_to_three_figures(request_name: str, key: str) -> None:
    """Bisected to under one per cent of the way to the best candidate: three per cent less lets nothing qualify any more."""
    given = stage(**REQUESTS[request_name])
    (text,) = (r.change[key] for r in known(request_name).relaxations if key in r.change)
    after = given.with_keys({key: text})
    if key == "target.ic":
        before, wider = given.ic.high, after.ic.high
    else:
        (end,) = (end for end in ("low", "high") if abs(getattr(given.limits[key[7:]], end)) < float("inf"))
        before, wider = (getattr(g.limits[key[7:]], end) for g in (given, after))
    # Outward rounding moves the end by up to one unit of the third figure.
    unit = 10.0 ** (math.floor(math.log10(wider)) - 2)
    less = before + 0.97 * (wider - before) - math.copysign(unit, wider - before)
    assert abs(less - before) > 0.5 * abs(wider - before)
    change = f"{less!r} A" if key.endswith("current") else repr(less)
    if key == "target.ic":
        change = f"2 mA ± {100.0 * (less / 2e-3 - 1.0)!r} %"
    assert synth.find(given.with_keys({key: change}), top=1).best is None


def test_relaxations_of_what_was_not_asked_for_come_first() -> None:
    """Share and bleeder current are defaults, the window of IC was given."""
    keys = [key for r in known("lopsided window").relaxations for key in r.change]
    assert sorted(keys[:2]) == ["limits.bleeder_current", "limits.collector_share"]
    # The window is what the request is for.
    assert keys[-1] == "target.ic"


def test_a_relaxed_range_keeps_its_other_end() -> None:
    """4.9 : 5.1 V widened below is still a range: giving up the upper end as well would be a second change."""
    given = stage(**REQUESTS["range of VCE"])
    for relaxation in known("range of VCE").relaxations:
        (text,) = relaxation.change.values()
        before, after = given.limits["vce"], given.with_keys(dict(relaxation.change)).limits["vce"]
        assert after.low == before.low or after.high == before.high, text


def test_the_relaxed_end_of_a_ceiling_stays_a_ceiling() -> None:
    """The natural sense of a share is a least one; a bare value would turn the ceiling round."""
    given, found = stage(**REQUESTS["share with a ceiling"]), known("share with a ceiling")
    assert found.binding == ("collector_share",)
    relaxation = found.relaxations[0]
    before, after = (g.limits["collector_share"] for g in (given, given.with_keys(dict(relaxation.change))))
    assert after.low == before.low
    # 1k8 beside 1k8 is a share of one half.
    assert_allclose(after.high, 0.5, rtol=1e-12, atol=0.0)


def test_a_lopsided_window_keeps_its_other_end() -> None:
    given = stage(**REQUESTS["lopsided window"])
    for relaxation in known("lopsided window").relaxations:
        if "target.ic" in relaxation.change:
            before, after = given.ic, given.with_keys(dict(relaxation.change)).ic
            assert after.low <= before.low
            assert after.high >= before.high


@pytest.mark.parametrize("networks", [["divider", "fixed_base"], ["fixed_base", "divider"]], ids="+".join)
def test_a_limit_means_its_own_current_in_each_network(networks: list[str]) -> None:
    """The supply current of a divider has a bleeder in it, that of fixed base bias a base current."""
    given = stage(network=networks, series="E6", tolerance="5 %", ic="2 mA ± 40 %", supply_current="1.2 mA")
    found = advice(given)
    assert "supply_current" in found.binding
    check_minimal(given, found)
    check_without(given, found)
    check_relaxations(given, found)


def test_advice_over_several_networks_is_borne_out() -> None:
    given = stage(network=["divider", "fixed_base", "two_supply"], vee="12 V", series="E6", tolerance="5 %", ic="2 mA ± 3 %")
    found = advice(given)
    check_minimal(given, found)
    check_relaxations(given, found)
    assert found.relaxations


def test_separate_conflicts_have_no_single_relaxation() -> None:
    """Either window alone makes the request impossible, so nothing is gained by giving up one."""
    given = stage(ic="2 mA ± 1 %", vce="5 V ± 1 %")
    found = advice(given)
    check_minimal(given, found)
    assert len(found.binding) < len(names(given))
    assert not any(key.startswith(("limits.", "target.")) for r in found.relaxations for key in r.change)
    assert set(found.best_without.values()) == {None}


def test_a_feasible_request_has_no_advice() -> None:
    assert synth.find(stage(**SMALL), top=1).infeasible is None


def test_relaxed_limits_are_read_back_as_printed() -> None:
    found = known("base resistance")
    given = stage(**REQUESTS["base resistance"])
    (text,) = (r.change["limits.base_resistance"] for r in found.relaxations if "limits.base_resistance" in r.change)
    after = given.with_keys({"limits.base_resistance": text}).limits["base_resistance"]
    assert after.low < 100e3
    # Three figures in letter code: a power of ten times a whole number below 1000.
    assert_allclose(after.low, float(f"{after.low:.3g}"), rtol=1e-15, atol=0.0)


@pytest.mark.parametrize("count", [2, pytest.param(10, marks=pytest.mark.long)])
def test_the_first_change_given_as_options_makes_the_command_succeed(count: int) -> None:
    """Random invented stages; `python -m tests.relaxations` prints them."""
    rows = infeasible(count)
    assert [code for _, _, code in rows] == [0] * count


# --- Changes besides limits -----------------------------------------------------------------------------------------


BATTERY = Path(__file__).parent / "scenarios" / "battery.toml"


@cache
def battery() -> Infeasible:
    return advice(Stage.read(BATTERY))


def test_a_battery_stage_is_told_of_the_share_first_and_then_of_the_supply() -> None:
    """As the shared needs ask: impossible while rc takes half the voltage; then the supply range."""
    found = battery()
    assert set(found.binding) == {"collector_share", "target.ic"}
    keys = [next(iter(r.change)) for r in found.relaxations]
    assert keys[:2] == ["limits.collector_share", "supply.vcc"]
    assert keys[-1] == "target.ic"
    assert "network" in keys


def test_a_narrowed_supply_keeps_its_nominal_value_and_is_narrower() -> None:
    given = Stage.read(BATTERY)
    (text,) = (r.change["supply.vcc"] for r in battery().relaxations if "supply.vcc" in r.change)
    after = given.with_keys({"supply.vcc": text}).rails["vcc"]
    before = given.rails["vcc"]
    assert after.nominal == before.nominal
    assert before.low < after.low <= after.nominal <= after.high < before.high


def test_where_the_resistors_alone_are_too_wide_a_finer_class_is_named() -> None:
    """5 % resistors in a 12 % window beside 2 : 1 gain; 2 % and 1 % are classes of IEC 60063."""
    given = stage(ic="2 mA ± 12 %", tolerance="5 %", series="E12", hfe="200 : 400", temperature="20 : 25 : 30 °C")
    changes = [dict(r.change) for r in advice(given).relaxations]
    assert {"resistors.tolerance"} in [set(change) for change in changes]


def test_a_drawer_that_lacks_a_value_is_told_which(tmp_path: Path) -> None:
    """Two times 1K8 drop 7.2 V of the 12 V at 2 mA; for 7 V across the transistor one of them has to be smaller."""
    (tmp_path / "drawer.csv").write_text("value\n33k\n39k\n18k\n20k\n22k\n1k8\n", encoding="utf-8")
    given = stage(ic="2 mA ± 25 %", vce="7 V ± 20 %", collector_share="0.2", stock=str(tmp_path / "drawer.csv"), series=None, **{
        f"resistors_{role}_range": None for role in ("r1", "r2", "rc", "re")
    })
    found = advice(given)
    named = [dict(r.change) for r in found.relaxations if next(iter(r.change)).endswith(".values")]
    assert named
    for change in named:
        ((key, text),) = change.items()
        assert synth.find(given.with_keys({key: text}), top=1).best is not None


def test_a_follower_is_no_advice_for_a_stage_with_its_output_at_the_collector() -> None:
    names = {r.change.get("network") for r in battery().relaxations}
    assert "follower" not in names
    assert "collector_feedback" in names


def test_values_that_leave_no_room_for_vce_are_refused() -> None:
    """10 kilohm drop 10 V at half the target of 2 mA; a window of 15 % asks for 1.7 mA at least."""
    with pytest.raises(StageError, match=r"resistors\.re\.values: read '10k', with which re would drop 10 V at only 1 mA"):
        stage(resistors_re_values="10k", resistors_re_range=None)
    with pytest.raises(StageError, match="accepted is less than 5K59 for rc and re together"):
        stage(ic="2 mA ± 15 %", vce="5 V ± 50 %", resistors_re_values="2k7", resistors_rc_values="3k3")


def test_values_that_leave_room_are_not_refused() -> None:
    assert stage(resistors_re_values="3k3").role("re").values
    assert stage(resistors_re_values="10k", network=["divider", "fixed_base"], vce="5 V", supply="24 V").role("re").values


# --- Requests that must be refused or redirected (shared needs) -----------------------------------------------------


PLAIN = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450"}


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"ic": "50 mA", "vce": "0.2 V"}, r"saturated switch"),
        ({"resistors_re_values": "10k"}, r"with which re would drop 10 V at only 1 mA"),
        ({"vce": "13 V"}, r"target\.vce: read '13 V', which is not below the 12 V between the rails"),
        ({"hfe": "450 : 110"}, r"transistor\.hfe"),
        ({"hfe": "0 : 110"}, r"transistor\.hfe.*least gain"),
    ],
    ids=["relay driver", "drop of re", "VCE above the supply", "gain the wrong way round", "no gain"],
)
def test_what_no_search_can_mend_is_refused(changes: dict[str, object], message: str) -> None:
    with pytest.raises(RestpointError, match=message):
        Stage(**{**PLAIN, **changes})  # type: ignore[arg-type]


def test_a_drawer_without_the_decade_is_refused_with_what_it_holds(tmp_path: Path) -> None:
    (tmp_path / "drawer.csv").write_text("value\n1M\n2M2\n", encoding="utf-8")
    given = Stage(**PLAIN, stock=str(tmp_path / "drawer.csv"), resistors_rc_range="100 ohm : 10 kohm")  # type: ignore[arg-type]
    with pytest.raises(StageError, match=r"rc.*drawer\.csv.*1M"):
        synth.find(given)


def test_a_window_narrower_than_the_resistors_is_redirected() -> None:
    """All else exact, 5 % resistors scatter IC by about 5 %: nothing but a finer class or a wider window helps."""
    given = stage(
        ic="2 mA ± 3 %", tolerance="5 %", tcr="0 ppm/K", hfe="200 : 200", vbe="0.65 : 0.65 V", temperature="25 °C",
        vbe_model="fixed",
    )  # fmt: skip
    found = advice(given)
    assert "target.ic" in found.binding
    assert found.notes["resistors"].startswith("with everything else at its nominal value")
    assert any("resistors.tolerance" in r.change for r in found.relaxations)
