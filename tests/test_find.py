"""`find` and `check` as a whole: the figures of the contract, order, networks, saturated stages, mirror images.

Contract means section 6 of the design, whose sample prints real figures for 12 V, 2 mA, 5 V, hFE 110 : 450, E24 at 1 %.
"""

import importlib
import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from enumeration import enumerate_all, every_index, worst
from numpy.testing import assert_allclose

import synth
from synth.answer import Candidate
from synth.box import Box, Meter
from synth.networks import NETWORKS
from synth.search import Outcome, search
from synth.spaces import fitted, goal_of, spaces_of
from synth.stage import Stage, StageError

CONTRACT = {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}
SAME = 1e-12
"""The same worst case asked twice in unlike batches."""


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


def best_of(answer: synth.Answer) -> Candidate:
    assert answer.best is not None
    return answer.best


def digits(value: float, text: str, units: float = 0.5) -> None:
    """The value rounds to the printed text: it lies within half a unit of the last digit."""
    decimals = len(text.partition("e")[0].partition(".")[2])
    exponent = int(text.partition("e")[2] or 0)
    assert_allclose(value, float(text), rtol=0.0, atol=(units + 1e-7) * 10.0 ** (exponent - decimals))


# --- The contract -------------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def contract() -> synth.Answer:
    return synth.find(stage(), top=10)


def test_find_gives_the_candidate_of_the_contract(contract: synth.Answer) -> None:
    best = best_of(contract)
    assert (best.rank, best.network) == (1, "divider")
    assert dict(best.resistors) == {"r1": 43000.0, "r2": 24000.0, "rc": 1800.0, "re": 1800.0}


def check_contract(best: Candidate) -> None:
    digits(best.nominal.ic, "0.0019439")
    digits(best.nominal.vce, "4.98640")
    # The last digit of the contract's figure is one too high: 30-digit arithmetic gives 8.736974e-06 (below).
    digits(best.nominal.ib, "8.73698e-06", units=1.0)
    assert best.nominal.region == "active"
    for found, printed in zip(best.worst["ic"], ("0.00172723", "0.00214289"), strict=True):
        digits(found, printed)
    for found, printed in zip(best.worst["vce"], ("4.27875", "5.74634"), strict=True):
        digits(found, printed)
    digits(best.drift.ic, "0.136384")
    assert best.drift.vce is not None
    digits(best.drift.vce, "0.149269")
    digits(best.drift.q_point, "0.149269")
    digits(best.centring, "0.02807")


def test_figures_of_the_contract_to_the_printed_digits(contract: synth.Answer) -> None:
    check_contract(best_of(contract))


def test_nominal_q_point_of_the_contract_to_the_last_bits(contract: synth.Answer) -> None:
    """The base loop solved with 30 digits (mpmath findroot; k and q of the SI, 25 °C, hFE = sqrt(110·450))."""
    point = best_of(contract).nominal
    assert_allclose(point.ic, 0.00194385390205740924771, rtol=1e-14, atol=0.0)
    assert_allclose(point.ib, 8.73697355610494511888e-06, rtol=1e-14, atol=0.0)
    assert_allclose(point.vce, 4.98639940019233780703, rtol=1e-14, atol=0.0)


def test_check_prints_the_same_figures() -> None:
    answer = synth.check(stage(), **CONTRACT)
    assert (answer.kind, answer.search, len(answer.candidates), answer.passed) == ("check", None, 1, True)
    check_contract(best_of(answer))


def test_the_search_of_the_contract_is_proved(contract: synth.Answer) -> None:
    """E24 from 10 ohm to 10 Mohm: 6 decades of 24 and the last end, 145 values in each of four roles."""
    search = contract.search
    assert search is not None
    assert (search.status, search.complete, search.combinations) == ("optimal", True, 145**4)
    assert search.combinations == 442050625
    assert 0 < search.evaluated < search.combinations // 100
    assert search.bound is not None
    assert search.bound >= contract.candidates[-1].drift.q_point * (1.0 - SAME)


def test_the_best_of_the_contract_holds_against_brute_force_around_it() -> None:
    """Every combination within four steps of each value, judged with the brute-force worst case on the nearest ones."""
    near = {"r1": ("33k", "51k"), "r2": ("18k", "33k"), "rc": ("1k3", "2k4"), "re": ("1k3", "2k4")}
    given = stage(**{f"resistors_{role}_range": f"{low} : {high}" for role, (low, high) in near.items()})
    spaces = spaces_of(given)
    rows = enumerate_all(spaces, goal_of(given))
    assert spaces[0].fitted(np.array([rows[0].index], dtype=np.int32))[0] == dict(best_of(synth.find(stage(), top=1)).resistors)
    assert rows[1].drift > rows[0].drift


def test_candidates_are_ranked_and_listed_once(contract: synth.Answer) -> None:
    assert [c.rank for c in contract.candidates] == list(range(1, 11))
    assert len({tuple(c.resistors.values()) for c in contract.candidates}) == 10
    drifts = [float(f"{c.drift.q_point:.11e}") for c in contract.candidates]
    keys = [(d, c.centring) for d, c in zip(drifts, contract.candidates, strict=True)]
    assert keys == sorted(keys)


def test_a_shorter_list_is_the_beginning_of_a_longer_one(contract: synth.Answer) -> None:
    three = synth.find(stage(), top=3)
    assert [c.resistors for c in three.candidates] == [c.resistors for c in contract.candidates[:3]]
    assert three.search is not None
    assert three.search.bound is not None
    # The bound speaks of everything that is not listed: here of the fourth.
    assert three.search.bound <= contract.candidates[3].drift.q_point * (1.0 + SAME)


def test_every_candidate_passes_every_verdict_and_agrees_with_a_check(contract: synth.Answer) -> None:
    for candidate in contract.candidates[::3]:
        fresh = best_of(synth.check(stage(), **candidate.resistors))
        assert candidate.verdict == fresh.verdict == "pass"
        assert_allclose(fresh.drift.q_point, candidate.drift.q_point, rtol=SAME, atol=0.0)
        assert [v.name for v in fresh.limits] == [v.name for v in candidate.limits]
        assert_allclose([v.worst for v in fresh.limits], [v.worst for v in candidate.limits], rtol=SAME, atol=0.0)


def test_answers_are_valid_json_without_infinities(contract: synth.Answer) -> None:
    body = json.loads(contract.to_json())
    assert body["schema"] == "restpoint/find/1"
    assert body["candidates"][0]["resistors"] == {"r1": 43000.0, "r2": 24000.0, "rc": 1800.0, "re": 1800.0}
    assert body["infeasible"] is None
    assert json.loads(synth.check(stage(), **CONTRACT).to_json())["schema"] == "restpoint/check/1"


def test_warnings_are_those_of_the_first_candidate() -> None:
    answer = synth.find(stage(hfe="20 : 60"), top=3)
    assert answer.warnings == synth.check(stage(hfe="20 : 60"), **best_of(answer).resistors).warnings
    assert answer.warnings


# --- Order --------------------------------------------------------------------------------------------------------


def test_ties_follow_the_written_order() -> None:
    """Without a VCE target rc moves nothing but the current drawn stays the same: the order falls to the values."""
    given = stage(
        vce=">= 3 V", resistors_rc_values=["1k", "1k2", "1k5", "1k8"], resistors_re_values="1k", collector_share="0.4"
    )
    answer = synth.find(given, top=8)
    spaces = spaces_of(given)
    pinned = {role: best_of(answer).resistors[role] for role in ("r1", "r2")}
    same = [c for c in answer.candidates if {r: c.resistors[r] for r in pinned} == pinned]
    assert len(same) == 4
    # One and the same drift, centring and current; rc = re = 1k makes one distinct value less, then the values ascend.
    assert [c.resistors["rc"] for c in same] == [1e3, 1200.0, 1500.0, 1800.0]
    assert len({f"{c.drift.q_point:.11e}" for c in same}) == 1
    assert [c.rank for c in same] == [1, 2, 3, 4]
    assert spaces[0].roles == ("r1", "r2", "rc", "re")


def test_several_networks_compete_in_one_list_and_each_is_accounted_for() -> None:
    given = stage(network=["divider", "fixed_base", "collector_feedback"], series="E12", tolerance="5 %")
    answer = synth.find(given, top=4)
    alone = {
        name: best_of(synth.find(stage(network=name, series="E12", tolerance="5 %"), top=1)).drift.q_point
        for name in ("divider", "fixed_base", "collector_feedback")
    }
    assert {n.network for n in answer.networks} == set(alone)
    for network in answer.networks:
        assert network.best is not None
        assert_allclose(network.best, alone[network.network], rtol=SAME, atol=0.0)
        assert network.why
    order = [n.best for n in answer.networks if n.best is not None]
    assert order == sorted(order)
    assert answer.networks[0].network == best_of(answer).network


def test_any_network_finds_the_best_of_all() -> None:
    pins = {"rc": "1k : 3k3", "re": "470 ohm : 2k2"}
    given = {"series": "E6", "tolerance": "5 %", "resistors_range": "1k : 1M"}
    answer = synth.find(stage(network="any", **given, **{f"resistors_{r}_range": text for r, text in pins.items()}), top=5)
    singles = []
    for name, network in NETWORKS.items():
        if "vee" in network.rails or network.sinks or network.reference == "needed":
            continue
        own = {f"resistors_{role}_range": text for role, text in pins.items() if role in network.role_names}
        either = {f"resistors_{role.name}_use": "either" for role in network.roles if role.optional}
        found = synth.find(stage(network=name, **given, **own, **either), top=1).best
        singles += [found.drift.q_point] if found else []
    assert_allclose(best_of(answer).drift.q_point, min(singles), rtol=SAME, atol=0.0)


def test_a_network_that_cannot_is_said_to() -> None:
    """Grounded-emitter fixed bias drifts with hFE: 110 to 450 does not fit into ± 30 %."""
    answer = synth.find(stage(network=["divider", "fixed_base"], ic="2 mA ± 30 %"), top=2)
    (cannot,) = (n for n in answer.networks if n.network == "fixed_base")
    assert cannot.best is None
    assert "no combination meets every limit" in cannot.why


# --- Stopping -----------------------------------------------------------------------------------------------------


def test_a_stopped_search_is_not_called_infeasible() -> None:
    """Nothing was found yet, and nothing is proved: neither the status nor a network may say that nothing qualifies."""
    answer = synth.find(stage(ic="2 mA ± 5 %"), top=1, progress=lambda *_: False)
    assert answer.search is not None
    assert (answer.search.status, answer.search.complete) == ("unknown", False)
    assert answer.infeasible is None
    assert answer.best is None
    for network in answer.networks:
        assert "no combination meets every limit" not in network.why


def test_a_stopped_search_stops_for_every_network(monkeypatch: pytest.MonkeyPatch) -> None:
    """What the user stopped is not taken up again to fill in the networks that are not listed."""
    finished = []

    def counted(*args: Any, **kw: Any) -> Outcome:
        outcome = search(*args, **kw)
        finished.append(outcome.complete)
        return outcome

    monkeypatch.setattr(importlib.import_module(synth.find.__module__), "search", counted)
    given = stage(network=["divider", "fixed_base", "two_supply"], vee="12 V")
    answer = synth.find(given, top=1, progress=lambda *_: False)
    assert answer.search is not None
    assert not answer.search.complete
    assert not any(finished)


def test_progress_is_told_the_bound_the_best_and_the_open_blocks() -> None:
    seen: list[tuple[float, float, int]] = []
    answer = synth.find(stage(), top=1, progress=lambda *report: seen.append(report) is None)  # type: ignore[func-returns-value]
    assert answer.search is not None
    assert answer.search.complete
    assert seen
    for bound, best, blocks in seen:
        assert 0.0 <= bound <= best_of(answer).drift.q_point * (1.0 + 1e-9)
        assert best >= best_of(answer).drift.q_point
        assert blocks >= 1


# --- Check --------------------------------------------------------------------------------------------------------

SATURATED = [
    pytest.param({}, {"r1": "22k", "r2": "22k", "rc": "10k", "re": "1k"}, id="divider"),
    pytest.param({"network": "fixed_base"}, {"rb": "100k", "rc": "10k"}, id="fixed_base"),
    pytest.param({"network": "two_supply", "vee": "12 V"}, {"rb": "10k", "rc": "10k", "re": "3k3"}, id="two_supply"),
    # Some units only: 300 times 11.35 uA through 2k2 leave 4.5 V, 450 times leave 0.7 V of 12 V; 500 would saturate.
    pytest.param({"network": "fixed_base", "hfe": "110 : 600"}, {"rb": "1M", "rc": "2k2"}, id="fixed_base at the hot end"),
]


@pytest.mark.parametrize(("changes", "resistors"), SATURATED)
def test_a_stage_that_saturates_fails(changes: dict[str, object], resistors: dict[str, str]) -> None:
    """Section 5: VCE is active at every corner; a transistor held at VCE(sat) is not."""
    answer = synth.check(stage(**changes), **resistors)
    best = best_of(answer)
    assert "saturated" in best.regions
    (verdict,) = (v for v in best.limits if v.name == "vce")
    assert verdict.verdict == "fail"
    assert best.verdict == "fail"
    assert not answer.passed
    assert "vce" in answer.networks[0].why


@pytest.mark.parametrize(("changes", "resistors"), SATURATED)
def test_worst_case_of_a_stage_that_saturates_covers_every_sample(
    changes: dict[str, object], resistors: dict[str, str]
) -> None:
    given = stage(**changes, **{f"values_{role}": value for role, value in resistors.items()})
    best = best_of(synth.check(given))
    box = fitted(given).box(np.zeros((1, len(resistors)), dtype=np.int32), Meter())
    rng = np.random.default_rng(7)
    for vertices in (False, True):
        sample = {axis: rng.random(20000) for axis in (*box.axes, "temperature")}
        if vertices:
            sample = {axis: np.round(x) for axis, x in sample.items()}
        sample["temperature"] = box.temperature.low + box.temperature.width * sample["temperature"]
        q = box.solve(box.values(sample))
        for quantity, value in (("ic", q.ic), ("vce", q.vce)):
            low, high = best.worst[quantity]
            # The edge of saturation is bisected to the last bit of its position, not of the current.
            assert value.min() >= low * (1.0 - 1e-9)
            assert value.max() <= high * (1.0 + 1e-9)


def test_nominal_saturation_is_on_the_load_line() -> None:
    """By hand: IC = (12 V − 0.2 V)/10 kohm with a grounded emitter, whatever hFE."""
    best = best_of(synth.check(stage(network="fixed_base"), rb="100k", rc="10k"))
    assert best.nominal.region == "saturated"
    assert_allclose(best.nominal.ic, 1.18e-3, rtol=1e-12, atol=0.0)
    assert_allclose(best.nominal.vce, 0.2, rtol=1e-15, atol=0.0)
    # rc at its ends, 1 % and 100 ppm/K over 45 K, decides.
    assert_allclose(best.worst["ic"], (11.8 / 10145.0, 11.8 / 9855.0), rtol=1e-9, atol=0.0)


def test_verdicts_fail_with_negative_margin_and_the_point_that_decides() -> None:
    given = stage(ic="2 mA ± 10 %", supply_current="2 mA", base_resistance="20 kohm")
    best = best_of(synth.check(given, **CONTRACT))
    verdicts = {v.name: v for v in best.limits}
    failing = {name for name, v in verdicts.items() if v.verdict == "fail"}
    assert failing == {"target.ic", "supply_current", "base_resistance"}
    assert all((v.margin < 0.0) == (v.verdict == "fail") for v in best.limits)
    window = verdicts["target.ic"]
    assert window.sense == "within"
    # Margin of a window: the smaller side over the target. 1.8 mA − 1.72723 mA = −0.0364 of 2 mA.
    assert_allclose(window.margin, (best.worst["ic"][0] - 1.8e-3) / 2e-3, rtol=1e-9, atol=0.0)
    box = fitted(given.replace(**CONTRACT)).box(np.zeros((1, 4), dtype=np.int32), Meter())
    for verdict in (window, verdicts["supply_current"]):
        at = {name: np.array([value]) for name, value in verdict.at.items()}
        q = box.solve(at)
        reached = q.ic[0] if verdict is window else q.ic[0] + box.branches(at, q).current["r1"][0]  # type: ignore[index]
        assert_allclose(reached, verdict.worst, rtol=1e-12, atol=0.0)
    # Parallel connection by hand: 43k·24k/67k.
    assert_allclose(verdicts["base_resistance"].worst, 43e3 * 24e3 / 67e3, rtol=1e-14, atol=0.0)
    assert_allclose(verdicts["base_resistance"].margin, 43e3 * 24e3 / 67e3 / 20e3 - 1.0, rtol=1e-12, atol=0.0)


def test_worst_case_of_a_check_is_that_of_brute_force() -> None:
    given = stage(supply="9 : 12 : 16 V", icbo="15 nA", temperature="-40 : 25 : 85 °C").replace(**CONTRACT)
    best = best_of(synth.check(given))
    box: Box = fitted(given).box(np.zeros((1, 4), dtype=np.int32), Meter())
    for quantity in ("ic", "vce"):
        for direction, found in zip((-1, 1), best.worst[quantity], strict=True):
            assert_allclose(found, worst(box, quantity, direction)[0], rtol=2e-6, atol=0.0)


def test_values_of_the_stage_and_keywords_are_the_same() -> None:
    one = synth.check(stage(**{f"values_{role}": value for role, value in CONTRACT.items()}))
    two = synth.check(stage(), **CONTRACT)
    three = synth.check(stage(), r1=43000.0, r2=24000.0, rc=1800.0, re=1800.0)
    four = synth.check(stage(values_r1="1k", values_r2="1k", values_rc="1k", values_re="1k"), **CONTRACT)
    for other in (two, three, four):
        assert best_of(other).worst == best_of(one).worst
        assert best_of(other).explanation == best_of(one).explanation


def test_a_keyword_replaces_one_value() -> None:
    given = stage(**{f"values_{role}": value for role, value in CONTRACT.items()})
    assert best_of(synth.check(given, re="2k")).resistors == {"r1": 43e3, "r2": 24e3, "rc": 1800.0, "re": 2000.0}


def test_check_refuses_half_a_network() -> None:
    with pytest.raises(StageError, match=r"values: read 'r1 r2'.*not the resistors of one network.*divider: r1 r2 rc re"):
        synth.check(stage(), r1="43k", r2="24k")


def test_check_picks_the_network_that_the_values_make_up() -> None:
    answer = synth.check(stage(network=["divider", "fixed_base"]), rb="1M", rc="2k2")
    assert best_of(answer).network == "fixed_base"
    assert [n.network for n in answer.networks] == ["fixed_base"]


def test_shape_rules_that_do_not_apply_are_not_judged() -> None:
    best = best_of(synth.check(stage(network="fixed_base"), rb="1M", rc="2k2"))
    assert {v.name for v in best.limits} == {"base_resistance", "vce"}


def test_a_limit_without_a_finite_margin_is_null_in_json() -> None:
    """A limit of zero that passes has no relative margin."""
    body = json.loads(synth.check(stage(collector_share="0"), **CONTRACT).to_json())
    (share,) = (v for v in body["candidates"][0]["limits"] if v["name"] == "collector_share")
    assert share["margin"] is None
    assert share["verdict"] == "pass"


# --- Mirror image -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("network", NETWORKS)
def test_a_pnp_stage_is_the_mirror_image(network: str) -> None:
    """Section 6: ic, ib, vce are magnitudes for either polarity, node voltages carry their sign."""
    more: dict[str, object] = {"vee": "12 V"} if "vee" in NETWORKS[network].rails else {}
    form = NETWORKS[network]
    rest: dict[str, object] = {"vce": None, "compliance": "5 V"} if form.sinks else {}
    rest |= {"reference_kind": "diode", "reference_number": "2"} if form.reference != "no" else {}
    given = stage(network=network, series="E6", tolerance="5 %", icbo="15 nA", **more, **rest)
    mirror = given.replace(polarity="pnp", ground="middle" if more else "positive")
    one, two = synth.find(given, top=2), synth.find(mirror, top=2)
    for npn, pnp in zip(one.candidates, two.candidates, strict=True):
        assert npn.resistors == pnp.resistors
        assert (npn.worst, npn.drift, npn.centring, npn.budget) == (pnp.worst, pnp.drift, pnp.centring, pnp.budget)
        assert (npn.nominal.ic, npn.nominal.vce, npn.nominal.ib) == (pnp.nominal.ic, pnp.nominal.vce, pnp.nominal.ib)
        for node, voltage in npn.nominal.nodes.items():
            assert_allclose(pnp.nominal.nodes[node], -voltage, rtol=1e-14, atol=0.0)
            assert voltage != 0.0 or node == "e"


def test_a_pnp_stage_on_a_negative_ground_hangs_from_the_supply() -> None:
    """Common practice: the emitter side of a PNP stage is the positive rail, so its emitter sits at 12 V − IE·re."""
    best = best_of(synth.check(stage(polarity="pnp"), **CONTRACT))
    ie = best.nominal.ic + best.nominal.ib
    assert_allclose(best.nominal.nodes["e"], 12.0 - 1800.0 * ie, rtol=1e-12, atol=0.0)
    assert_allclose(best.nominal.nodes["c"], 1800.0 * best.nominal.ic, rtol=1e-9, atol=0.0)


# --- Stock --------------------------------------------------------------------------------------------------------


def test_a_drawer_of_mixed_tolerances_is_searched_exactly(tmp_path: Path) -> None:
    """Against full enumeration of the drawer, whose bands overlap; invented."""
    rows = ["value,tolerance,tcr"]
    rng = np.random.default_rng(3)
    for value in ("1k", "1k2", "1k5", "1k8", "2k2", "22k", "24k", "27k", "33k", "39k", "43k", "47k", "56k"):
        tolerance, tcr = rng.choice(["0.1 %", "1 %", "5 %", "10 %"]), rng.choice(["25 ppm/K", "100 ppm/K", "400 ppm/K"])
        rows.append(f"{value},{tolerance},{tcr}")
    (tmp_path / "drawer.csv").write_text("\n".join(rows))
    ranges = {f"resistors_{r}_range": "22k : 56k" if r in ("r1", "r2") else "1k : 2k2" for r in ("r1", "r2", "rc", "re")}
    given = stage(series=None, stock="drawer.csv", folder=tmp_path, **ranges)
    spaces = spaces_of(given)
    assert len(every_index(spaces[0])) == 5 * 5 * 8 * 8
    enumerated = enumerate_all(spaces, goal_of(given))
    answer = synth.find(given, top=5)
    assert [tuple(c.resistors.values()) for c in answer.candidates] == [row.key[6] for row in enumerated[:5]]
    assert_allclose([c.drift.q_point for c in answer.candidates], [r.drift for r in enumerated[:5]], rtol=SAME, atol=0.0)


def test_supply_current_of_an_answer_is_the_largest_of_any_rail(contract: synth.Answer) -> None:
    for candidate in contract.candidates:
        assert candidate.supply_current == max(candidate.nominal.rails.values())
        assert math.isclose(candidate.supply_current, candidate.nominal.ic + candidate.roles["r1"].current, rel_tol=1e-12)
