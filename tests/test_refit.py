"""Another transistor in a stage that exists: the fewest changes against full enumeration, the contract, the command."""

from __future__ import annotations

import json
import re as regex
from dataclasses import replace
from functools import cache, reduce
from pathlib import Path
from typing import Any

import jsonschema
import numpy as np
import pytest
from enumeration import Row, enumerate_all, every_index, generator, random_spaces
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

import synth
import synth.present
from synth.catalogue import transistors
from synth.cli import main
from synth.networks import NETWORKS
from synth.parts import Parts
from synth.present.refit import render_refit
from synth.replacement import Refit
from synth.replacement.changes import Level, levels, other_values, single_changes
from synth.replacement.sides import device, sides, swap_cautions
from synth.spaces import Goal, Space, fitted
from synth.stage import Stage, StageError

ROOT = Path(__file__).resolve().parents[1]
SCHEMA = json.loads((Path(synth.present.__file__).parent / "schema.json").read_text(encoding="utf-8"))
VALIDATOR = jsonschema.Draft202012Validator(SCHEMA)

SAME_LAW = 1e-12
"""The same candidate in another batch: some ten operations, each good to a few units in the last place."""

OBSOLETE = ROOT / "tests" / "scenarios" / "obsolete.toml"
# A stage with few values to choose from, so that a refit takes little time.
SMALL: dict[str, Any] = {
    "supply": "12 V", "ic": "2 mA ± 25 %", "vce": "5 V ± 30 %", "hfe": "110 : 220", "series": "E6", "tolerance": "1 %",
    "resistors_range": "1k : 47k", "temperature": "25 °C", "bleeder_current": "none", "collector_share": "none",
    "r1": "47k", "r2": "24k", "rc": "1k8", "re": "1k8",
}  # fmt: skip


def refused(message: str, **given: Any) -> None:
    with pytest.raises(StageError, match=message):
        synth.refit(Stage(**SMALL), **given)


# --- Fewest changes against enumeration -----------------------------------------------------------------------------

REFITS = 60
TOP = 3
DRAWS = 3
"""Random spaces looked through for one that needs as many changes as wanted."""


@cache
def case(number: int) -> tuple[Space, Space, dict[str, Parts], Goal, list[Row]]:
    """A random refit: every combination of fitted and allowed values, the fitted ones, what may change, and every row."""
    rng = generator("refit", number)
    names, wanted = list(NETWORKS), -1 if number % 10 == 9 else (0, 1, 2, 1, 2, 3)[number % 6]
    drawn: list[tuple[float, int, Space, Goal, list[int]]] = []
    while len(drawn) < DRAWS and (not drawn or min(drawn)[0] >= 1.0):
        (space,), goal = random_spaces(rng, [names[number % len(names)]], most=24)
        every, passing = every_index(space), [row.index for row in enumerate_all([space], goal)]
        away = np.full(len(every), -1.0)
        if passing:
            # How many roles have to change from each combination.
            away = np.min(np.sum(every[:, None, :] != np.array(passing)[None, :, :], axis=2), axis=1).astype(float)
        miss = np.abs(away - wanted) + rng.uniform(0.0, 0.5, away.size)
        k = int(np.argmin(miss))
        drawn.append((float(miss[k]), len(drawn), space, goal, every[k].tolist()))
    _, _, space, goal, start = min(drawn)
    today = {role: space.lists[role].take([i]) for role, i in zip(space.roles, start, strict=True)}
    for role, part in today.items():
        if rng.random() < 0.15:
            # A value that no list has, between two that it may have.
            today[role] = replace(part, nominal=part.nominal * (1.0 + rng.uniform(0.002, 0.02)))
    free = [role for role in space.roles if rng.random() < 0.85]
    lists = {role: space.lists[role] for role in free}
    both = {role: today[role] if role not in free else reduce(Parts.joined, [today[role], lists[role]]) for role in today}
    for role, part in both.items():
        _, first = np.unique(part.nominal, return_index=True)
        both[role] = part.take(first)
    whole = replace(space, lists=both)
    return whole, replace(space, lists=today), lists, goal, enumerate_all([whole], goal)


def changed(whole: Space, start: Space, index: tuple[int, ...]) -> tuple[str, ...]:
    """Roles of a combination whose value is not the one fitted."""
    today = {role: float(start.lists[role].nominal[0]) for role in whole.roles}
    values = {role: float(whole.lists[role].nominal[i]) for role, i in zip(whole.roles, index, strict=True)}
    return tuple(role for role in whole.roles if values[role] != today[role])


@cache
def solved(number: int) -> list[Level]:
    _, start, lists, goal, _ = case(number)
    return levels(start, lists, goal, top=TOP)


def sorted_by_changes(number: int) -> dict[int, list[tuple[float, dict[str, float]]]]:
    """Drift and values of every qualifying combination, best first, by how many resistors it changes."""
    whole, start, _, _, rows = case(number)
    found: dict[int, list[tuple[float, dict[str, float]]]] = {}
    for row in rows:
        values = {role: float(whole.lists[role].nominal[i]) for role, i in zip(whole.roles, row.index, strict=True)}
        found.setdefault(len(changed(whole, start, row.index)), []).append((row.drift, values))
    return found


@pytest.mark.parametrize("number", range(REFITS))
def test_the_best_of_each_number_of_changes_equals_full_enumeration(number: int) -> None:
    """Every subset of roles is tried: what enumeration sorts by hand is what the searches prove."""
    every = sorted_by_changes(number)
    for level in solved(number):
        assert level.outcome.complete
        best = [drift for drift, _ in every.get(level.changes, [])][:TOP]
        found = sorted(f.drift for f in level.outcome.found)[:TOP]
        assert len(found) == len(best)
        assert_allclose(found, best, rtol=SAME_LAW, atol=0)
        if best and level.outcome.found:
            space, index = level.outcome.found[0].space, level.outcome.found[0].index
            values = {role: float(space.lists[role].nominal[i]) for role, i in zip(space.roles, index, strict=True)}
            # Equal drifts stand in any order here; the order rule comes later.
            tied = [v for drift, v in every[level.changes] if drift <= best[0] * (1.0 + 1e-11)]
            assert values in tied
    tried = {level.changes for level in solved(number)}
    assert not set(every) - tried, "a number of changes was left out"
    check_singles(number)


def check_singles(number: int) -> None:
    """What one role alone can do, by sorting every row that changes it alone."""
    whole, start, lists, goal, rows = case(number)
    best: dict[str, float] = {}
    for row in rows:
        roles = changed(whole, start, row.index)
        if len(roles) == 1:
            best[roles[0]] = min(row.drift, best.get(roles[0], np.inf))
    singles = single_changes(start, lists, goal)
    assert {role for role, found in singles.items() if found is not None} == set(best)
    for role, drift in best.items():
        one = singles[role]
        assert one is not None
        assert_allclose(one.drift, drift, rtol=SAME_LAW, atol=0)


@pytest.mark.long
def test_the_random_refits_are_of_every_kind() -> None:
    """They would prove little if none needed one change, or two, or if every one kept all."""
    fewest = [min(sorted_by_changes(number), default=-1) for number in range(REFITS)]
    count = {n: fewest.count(n) for n in set(fewest)}
    assert min(count.get(n, 0) for n in (-1, 0, 1, 2)) >= 3, count


def test_a_value_equal_to_the_fitted_one_is_no_change() -> None:
    part = Parts(nominal=np.array([1e3, 2.2e3]), band=np.full(2, 0.01), tcr_low=np.zeros(2), tcr_high=np.zeros(2))
    # A value that a program worked out may miss the printed one by rounding.
    other = other_values(part, 2.2e3 * (1.0 + 4e-16))
    assert other is not None
    assert other.nominal.tolist() == [1e3]
    assert other_values(other, 1e3) is None


# --- The shared scenario --------------------------------------------------------------------------------------------


@cache
def scenario(tolerance: str) -> Refit:
    return synth.refit(Stage.read(OBSOLETE).replace(hfe="110 : 220", tolerance=tolerance), to_hfe="420 : 800")


def test_obsolete_gain_bin_needs_one_resistor_of_one_per_cent() -> None:
    """At 1 % one E24 resistor does it: r2 from 27 to 24 kohm, by hand and by a check of every other single change."""
    refit = scenario("1 %")
    assert refit.after.candidates[0].verdict == "fail"
    best = refit.best
    assert best is not None
    assert (best.changed, best.candidate.resistors["r2"], best.was) == (("r2",), 24e3, {"r2": 27e3})
    # By hand with VBE 0.65 V at hFE 579.7: VBB = 12 V·24/124 = 2.323 V, Rp = 19.35 kohm.
    vbb, rp, gain = 12.0 * 24.0 / 124.0, 100e3 * 24e3 / 124e3, (420.0 * 800.0) ** 0.5
    hand = (vbb - 0.65) / (rp / gain + 1e3 * (1.0 + 1.0 / gain))
    # VBE at 1.6 mA lies 6 mV below that at 2 mA: 0.4 % of the 1.6 V over re.
    assert_allclose(best.candidate.nominal.ic, hand, rtol=5e-3, atol=0)
    # Every other E24 value of one role at a time, its worst case by Newton's method on the node equations.
    today, goal = fitted(Stage.read(OBSOLETE).replace(hfe="420 : 800", tolerance="1 %")), Goal(ic=1.6e-3)
    found = []
    e24 = (10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91)
    for role in today.roles:
        values = np.array([digit * decade for decade in (1.0, 1e1, 1e2, 1e3, 1e4, 1e5) for digit in e24])
        ones = np.ones(values.size)
        parts = Parts(nominal=values, band=0.01 * ones, tcr_low=-1e-4 * ones, tcr_high=1e-4 * ones)
        space = replace(today, lists={**today.lists, role: parts})
        rows = enumerate_all([space], goal, brute=True)
        found += [(row.drift, role, float(values[row.index[space.roles.index(role)]])) for row in rows]
    others = [row for row in found if row[2] != best.was.get(row[1])]
    assert min(others)[1:] == ("r2", 24e3)
    # Newton's method stops at 1e-12 of the current, and drift is the difference of two such figures.
    assert_allclose(min(others)[0], best.candidate.drift.q_point, rtol=1e-9, atol=0)


def test_obsolete_gain_bin_of_five_per_cent_needs_three() -> None:
    """True extremes of 5 % parts are wider than the window leaves room for: no one or two resistors do it, proved."""
    refit = scenario("5 %")
    assert [step.status for step in refit.steps] == ["infeasible"] * 3 + ["optimal"] * 2
    best = refit.best
    assert best is not None
    assert best.changed == ("r2", "rc", "re")
    # Even the old bin did not pass: two 5 % resistors alone move VBB by 7.6 %, and with it VE by 10.5 %.
    assert refit.before.candidates[0].verdict == "fail"


def test_unconstrained_best_is_that_of_find() -> None:
    """All four free: the same as finding values anew, since no fitted value belongs to the best."""
    refit = scenario("1 %")
    found = synth.find(Stage.read(OBSOLETE).replace(hfe="420 : 800", tolerance="1 %"), top=1).best
    assert found is not None
    assert refit.unconstrained is not None
    least = refit.candidates[refit.unconstrained - 1]
    assert_allclose(least.drift.q_point, found.drift.q_point, rtol=SAME_LAW, atol=0)


def test_equal_drifts_stay_near_what_is_fitted() -> None:
    """Without a VCE target rc does not drift IC: of equals that which is nearest to the 4K7 fitted comes first."""
    best = scenario("5 %").changes[0].candidate
    nearer = synth.check(Stage.read(OBSOLETE).replace(hfe="420 : 800"), **{**best.resistors, "rc": 430.0})
    assert best.resistors["rc"] == 390.0
    assert not nearer.passed


# --- The same transistor --------------------------------------------------------------------------------------------


@settings(max_examples=3, deadline=None, derandomize=True)
@given(
    st.sampled_from(["BC547B", "BC847C", "2N3904", "2N5088"]),
    st.sampled_from([("47k", "24k", "1k8", "1k8"), ("43k", "24k", "1k8", "1k8"), ("15k", "6k8", "2k2", "1k"), ("33k", "15k", "1k5", "1k5")]),
)
def test_the_same_transistor_changes_nothing(kind: str, values: tuple[str, ...]) -> None:
    today = dict(zip(("r1", "r2", "rc", "re"), values, strict=True))
    stage = Stage(**{k: v for k, v in SMALL.items() if k != "hfe"} | today | {"type": kind})
    refit = synth.refit(stage, to=kind, keep=("r1", "r2", "rc", "re"))
    assert {line.standing for line in refit.comparison} <= {"same", "moved"}
    assert all(not line.by for line in refit.comparison)
    assert refit.cautions == ()
    assert refit.passed == refit.before.passed
    if refit.best is not None:
        assert refit.best.changed == ()
        assert refit.best.candidate.drift == refit.before.candidates[0].drift


def test_a_transistor_that_does_keeps_every_resistor() -> None:
    refit = synth.refit(Stage(**SMALL), to_hfe="150 : 300", keep=("rc", "re"))
    assert refit.best is not None
    assert refit.best.changed == ()
    assert refit.reasons[0].endswith("nothing has to change.")


# --- What may change ------------------------------------------------------------------------------------------------


def test_a_kept_role_stays_in_every_candidate() -> None:
    refit = synth.refit(Stage(**SMALL), to_hfe="420 : 800", keep=("rc", "re"))
    assert refit.keep == ("rc", "re")
    assert len(refit.steps) == 3
    assert refit.changes
    for change in refit.changes:
        assert set(change.changed) <= {"r1", "r2"}
        assert (change.candidate.resistors["rc"], change.candidate.resistors["re"]) == (1800.0, 1800.0)


def test_every_role_kept_leaves_a_verdict() -> None:
    refit = synth.refit(Stage(**SMALL), to_hfe="20 : 30", keep=("r1", "r2", "rc", "re"))
    assert not refit.passed
    assert [step.changes for step in refit.steps] == [0]
    assert refit.answer.infeasible is not None
    assert set(refit.answer.infeasible.binding) <= {"target.ic", "target.vce"}
    assert refit.reasons[-1] == "No resistor may change."


def test_values_come_from_stock_and_series_together(tmp_path: Path) -> None:
    """With the drawer alone nothing will do; with a series beside it one resistor will, and says where it comes from."""
    (tmp_path / "drawer.csv").write_text("value,tolerance\n100k,1 %\n3k3,1 %\n", encoding="utf-8")
    small = {k: v for k, v in SMALL.items() if k not in ("series", "resistors_range")}
    stage = Stage(**small, stock="drawer.csv", folder=tmp_path)
    alone = synth.refit(stage, to_hfe="30 : 45", keep=("rc", "re"))
    both = synth.refit(stage, to_hfe="30 : 45", also_series=("E24",), keep=("rc", "re"))
    assert alone.best is None
    assert both.best is not None
    assert set(both.best.source.values()) == {"series"}
    stock = synth.refit(Stage(**SMALL, folder=tmp_path), to_hfe="30 : 45", also_stock="drawer.csv", keep=("rc", "re"))
    used = {ohm for change in stock.changes for role, ohm in change.candidate.resistors.items() if change.source.get(role) == "stock"}
    assert used <= {100e3, 3.3e3}


def test_values_named_for_a_role_admit_no_others() -> None:
    refit = synth.refit(Stage(**SMALL), to_hfe="420 : 800", resistors_r2_values="22k", also_series=("E96",), keep=("r1", "rc", "re"))
    assert {change.candidate.resistors["r2"] for change in refit.changes} <= {22e3, 24e3}
    assert {source for change in refit.changes for source in change.source.values()} <= {"named"}


def test_a_junction_that_does_not_settle_is_no_change_that_will_do() -> None:
    """Self-heating is judged after the search: candidates that fail it do not count."""
    hot = {"rth_ja": "1600 K/W", "tj_max": "60 °C", "ptot": "1 W", "derating": "none", "ic": "2 mA", "vce": ">= 3 V"}
    drops_little = {"r1": "82k", "r2": "10k", "rc": "470R", "re": "330R"}
    refit = synth.refit(Stage(**SMALL | drops_little | hot), to_hfe="150 : 300", keep=("r1", "r2", "rc", "re"))
    failed = [v.name for v in refit.after.candidates[0].limits if v.verdict == "fail"]
    assert failed == ["transistor_stress.junction"]
    assert (refit.changes, refit.steps[0].status) == ((), "infeasible")
    VALIDATOR.validate(json.loads(refit.to_json()))


# --- Both sides -----------------------------------------------------------------------------------------------------


def test_another_type_brings_its_own_figures() -> None:
    stage = Stage(**{k: v for k, v in SMALL.items() if k != "hfe"}, type="AC128", polarity="pnp", vbe_model="fixed", vce_sat="0.3 V")
    before, after = sides(stage.replace(to="BC557B"))
    row = transistors()["BC557B"]
    assert before.transistor.material == "germanium"
    assert (after.transistor.type, after.transistor.hfe.low, after.transistor.hfe.high) == ("BC557B", row.hfe_min, row.hfe_max)
    # How VBE is counted is a matter of the calculation; what a germanium type saturates at is not.
    assert (after.transistor.vbe_model, after.transistor.vce_sat) == ("fixed", row.vce_sat_max_v)
    assert "replacement.type" not in before.given | after.given


def test_a_gain_alone_is_another_bin_of_the_same_type() -> None:
    stage = Stage(**{k: v for k, v in SMALL.items() if k != "hfe"}, type="BC847A")
    _, after = sides(stage.replace(to_hfe="420 : 800"))
    assert (after.transistor.type, after.transistor.hfe.low) == ("BC847A", 420.0)
    assert after.ratings == stage.ratings


def test_another_material_drops_what_belonged_to_the_old_one() -> None:
    stage = Stage(**SMALL, material="germanium", vbe="0.2 V", vbe_ic="1 mA", icbo="5 uA")
    _, after = sides(stage.replace(to_material="silicon"))
    # Section 5 of the design: 0.65 V at 2 mA and no leakage unless given.
    assert (after.transistor.vbe.nominal, after.transistor.vbe_ic, after.transistor.icbo.high) == (0.65, 2e-3, 0.0)


def test_the_comparison_says_by_how_much() -> None:
    lines = {line.name: line for line in scenario("1 %").comparison}
    before, after = (answer.candidates[0] for answer in (scenario("1 %").before, scenario("1 %").after))
    assert lines["drift.ic"].standing == "worse"
    assert lines["drift.ic"].by == after.drift.ic - before.drift.ic
    assert lines["nominal.ic"].standing == "moved"
    assert lines["nominal.ic"].by == after.nominal.ic / before.nominal.ic - 1.0
    # A transistor that drops less carries less power.
    assert (lines["transistor.power"].standing, lines["margin.target.vce"].standing) == ("better", "worse")
    assert lines["worst.ic"].before == before.worst.ic


@pytest.mark.parametrize(
    ("old", "new", "names"),
    [
        ("BC547B", "BC847B", {"package"}),
        ("AC128", "BC557B", {"package", "vbe_class", "transition_frequency", "leakage"}),
        ("BC557B", "AC128", {"package", "vbe_class", "transition_frequency", "leakage"}),
        ("BC847A", "BC847C", set()),
    ],
)
def test_a_swap_brings_its_cautions(old: str, new: str, names: set[str]) -> None:
    """From memory: fT of a germanium output type is some MHz, its leakage some µA; gain bins of a type differ in nothing else."""
    base = {k: v for k, v in SMALL.items() if k != "hfe"} | {"ic": "20 mA"}
    one, two = (device(Stage(**base, type=kind)) for kind in (old, new))
    assert {caution.name for caution in swap_cautions(one, two)} == names


def test_what_was_not_verified_is_said() -> None:
    assert {note.name for note in scenario("1 %").not_verified} >= {"pinout", "package", "gain_bandwidth"}


# --- Refusals -------------------------------------------------------------------------------------------------------


def test_no_replacement_is_refused() -> None:
    refused(r"^replacement is not given, accepted is --to TYPE.*nearest is '--to BC847C'$")


def test_an_unknown_type_is_refused() -> None:
    refused(r"^replacement\.type: read 'BC847X', which is unknown, accepted is a row.*'BC847", to="BC847X")


def test_the_other_polarity_is_refused() -> None:
    refused(r"^replacement\.type: read 'BC857B', which is pnp, but the stage has an npn, .* nearest is 'BC8[45]7B'$", to="BC857B")
    refused(r"^replacement\.polarity: read 'pnp', which is pnp, but the stage has an npn.*'npn'$", to_polarity="pnp")


def test_a_wrong_figure_is_refused_under_its_own_name() -> None:
    refused(r"^replacement\.vce_sat: read '-1 V', which is negative", to_vce_sat="-1 V")


def test_a_kept_role_that_is_not_fitted_is_refused() -> None:
    refused(r"^keep: read 'rd', which is not fitted, accepted is one of r1, r2, rc, re, nearest is 'r", to_hfe="420 : 800", keep=("rd",))


@pytest.mark.parametrize("top", [0, True, "3"])
def test_no_number_of_candidates_is_refused(top: Any) -> None:
    refused(rf"^top: read '{top}', which is no number of candidates", to_hfe="420 : 800", top=top)


# --- Contract and command -------------------------------------------------------------------------------------------


def test_json_is_that_of_the_contract() -> None:
    for refit in (scenario("1 %"), scenario("5 %"), synth.refit(Stage(**SMALL), to_hfe="20 : 30", keep=("rc", "re"))):
        body = json.loads(refit.to_json())
        VALIDATOR.validate(body)
        assert body["schema"] == "restpoint/refit/1"
        # Section 6 of the design: before and after are check-like, candidates have what they change.
        assert body["before"]["schema"] == body["after"]["schema"] == "restpoint/check/1"
        for candidate, change in zip(body["candidates"], refit.changes, strict=True):
            assert candidate["changed"] == list(change.changed)
            today = body["after"]["candidates"][0]["resistors"]
            assert [role for role in today if candidate["resistors"][role] != today[role]] == candidate["changed"]


@pytest.mark.parametrize("key", ["before", "after", "comparison", "steps", "singles", "transistors", "not_verified"])
def test_a_missing_part_of_the_contract_is_noticed(key: str) -> None:
    body = json.loads(scenario("1 %").to_json())
    del body[key]
    assert not VALIDATOR.is_valid(body)


def run(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, str, str]:
    with pytest.raises(SystemExit) as stop:
        main(["refit", *argv])
    out, err = capsys.readouterr()
    assert isinstance(stop.value.code, int)
    return stop.value.code, out, err


SMALL_OPTIONS = [
    "--supply", "12 V", "--ic", "2 mA ± 25 %", "--vce", "5 V ± 30 %", "--hfe", "110:220", "--series", "E6", "--tolerance", "1 %",
    "--range", "1k:47k", "--temperature", "25 °C", "--bleeder-current", "none", "--collector-share", "none",
    "--r1", "47k", "--r2", "24k", "--rc", "1k8", "--re", "1k8",
]  # fmt: skip


def test_command_tells_that_nothing_has_to_change(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, *SMALL_OPTIONS, "--to-hfe", "150:300", "--keep", "rc,re")
    assert (code, err) == (0, "")
    assert out.startswith("KEEP  stage: hFE 150 to 300 in place of hFE 110 to 220\n")
    assert max(map(len, out.splitlines())) <= 100


def test_command_fails_with_the_reason_as_the_answer(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, *SMALL_OPTIONS, "--to-hfe", "20:30", "--keep", "rc", "--keep", "r1 r2 re")
    assert (code, err) == (1, "")
    assert out.startswith("FAIL")
    assert regex.search(r"cannot be met: target\.(ic|vce)", out)


def test_command_recommends_the_fewest_changes(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, str(OBSOLETE), "--hfe", "110:220", "--to-hfe", "420:800", "--tolerance", "1 %", "--keep", "rc,r1", "--format", "json")
    assert (code, err) == (0, "")
    body = json.loads(out)
    VALIDATOR.validate(body)
    assert body["candidates"][0]["changed"] == ["r2"]
    assert body["command"].startswith("restpoint refit ")


@pytest.mark.parametrize(
    ("argv", "said"),
    [
        (["--to", "BC857B"], r"replacement\.type: read 'BC857B'.*npn"),
        ([], r"replacement is not given.*--to TYPE"),
        (["--to-hfe", "420:800", "--keep", "rx"], r"keep: read 'rx'"),
        (["--to-hfe", "800:420"], r"replacement\.hfe.*'800:420'"),
    ],
)
def test_wrong_input_is_one_sentence(argv: list[str], said: str, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, *SMALL_OPTIONS, *argv)
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert regex.search(said, err)


def test_text_shows_both_sides_and_every_step() -> None:
    text = render_refit(scenario("1 %"))
    for words in ("Transistors as they were counted", "On the resistors fitted today", "Fewest changes", "Not verified",
                  "R2 27K to 24K", "least", "recommended"):
        assert words in text
    assert max(map(len, text.splitlines())) <= 100


def test_replacement_may_stand_in_the_file(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    file = tmp_path / "stage.toml"
    file.write_text(OBSOLETE.read_text(encoding="utf-8") + '[replacement]\nhfe = "420 : 800"\n', encoding="utf-8")
    code, out, _ = run(capsys, str(file), "--hfe", "110:220", "--tolerance", "1 %", "--keep", "r1,rc,re", "--format", "json")
    assert code == 0
    assert json.loads(out)["transistors"]["after"]["hfe"][::2] == [420.0, 800.0]


