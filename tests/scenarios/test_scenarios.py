"""The eight shared scenarios of the study of needs (invented there), as stage files: verdict and what decides.

What each must come to stands in the table of scenarios: which one is impossible and why, which parts it needs.
"""

import subprocess
import sys
from functools import cache
from pathlib import Path

import pytest

import synth
from synth.answer import Answer
from synth.stage import Stage

FOLDER = Path(__file__).parent
NAMES = sorted(file.stem for file in FOLDER.glob("*.toml"))


@cache
def answer(name: str, **changes: str) -> Answer:
    stage = Stage.read(FOLDER / f"{name}.toml").replace(**changes)
    return synth.check(stage) if stage.values else synth.find(stage)


def test_there_are_eight() -> None:
    assert len(NAMES) == 8


@pytest.mark.parametrize("name", ["preamp", "automotive", "education"])
def test_possible_ones_pass_every_verdict(name: str) -> None:
    found = answer(name)
    assert found.search is not None
    assert found.search.complete
    assert found.best is not None
    assert all(v.verdict == "pass" for v in found.best.limits)


def test_preamp_meets_its_signal_limits_at_their_own_points() -> None:
    best = answer("preamp").best
    assert best is not None
    verdicts = {v.name: v for v in best.limits}
    assert verdicts["input_resistance"].worst >= 15e3
    assert verdicts["gain"].worst >= 150.0
    assert verdicts["supply_current"].worst <= 0.7e-3
    # gm falls when hot, r_pi with gain and cold: the two limits are decided at unlike points.
    assert verdicts["gain"].at["temperature"] > verdicts["input_resistance"].at["temperature"]


def test_rf_stage_has_too_much_rail_for_its_transistor() -> None:
    why = answer("rf").infeasible
    assert why is not None
    assert why.binding == ("transistor_stress",)
    # The whole rail of 5.25 V at cut-off, against three quarters of 4.5 V.
    assert "vceo reaches 5.25 V, allowed is 3.38 V" in why.notes["transistor_stress"]
    assert answer("rf", transistor_stress="none").passed


def test_high_voltage_stage_needs_a_string() -> None:
    why = answer("high_voltage").infeasible
    assert why is not None
    assert "resistor_stress" in why.binding
    assert "in series would do for r1" in why.notes["resistor_stress"]
    # Without a style there is no verdict on resistors; the answer still says what carries them.
    free = answer("high_voltage", resistors_style=None).best
    assert free is not None
    assert free.stress["r1"].voltage > 200.0
    assert "high_voltage" in {w.name for w in answer("high_voltage", resistors_style=None).warnings}


def test_battery_stage_names_the_collector_share_first() -> None:
    why = answer("battery").infeasible
    assert why is not None
    assert why.binding[0] == "collector_share"
    assert next(iter(why.relaxations[0].change)) == "limits.collector_share"


def test_no_single_e24_value_of_re_serves_two_supplies() -> None:
    why = answer("two_supply").infeasible
    assert why is not None
    assert why.binding == ("target.ic",)
    assert answer("two_supply", series="E96").passed


def test_higher_gain_bin_breaks_the_fitted_stage() -> None:
    new, old = answer("obsolete"), answer("obsolete", hfe="110 : 220")
    assert not new.passed
    assert {"target.ic", "target.vce"} <= {v.name for v in new.candidates[0].limits if v.verdict == "fail"}
    # By hand with VBE = 0.65 V, Rp = 21.26 kohm, VBB = 2.551 V: 1.67 mA at 155.6, 1.81 mA at 579.7.
    for found, gain, ic in ((old, 155.563, 1.655e-3), (new, 579.655, 1.825e-3)):
        rp, vbb = 100e3 * 27e3 / 127e3, 12.0 * 27.0 / 127.0
        hand = (vbb - 0.65) / (rp / gain + 1e3 * (1.0 + 1.0 / gain))
        assert abs(hand / ic - 1.0) < 0.02
        # VBE at 1.8 mA is 3 mV below that at 2 mA, 0.2 % of what re drops.
        assert abs(found.candidates[0].nominal.ic / hand - 1.0) < 4e-3
    assert new.candidates[0].nominal.ic > old.candidates[0].nominal.ic


@pytest.mark.parametrize("names", [["education", "obsolete"], pytest.param(NAMES, marks=pytest.mark.long)], ids=len)
def test_the_command_prints_the_scenarios(names: list[str]) -> None:
    ran = subprocess.run(
        [sys.executable, "-m", "tests.scenarios", *names], capture_output=True, text=True, check=True, cwd=FOLDER.parents[1]
    )
    for name in names:
        assert f"  {name} (" in ran.stdout
    assert ran.stdout.count("decides: ") >= len(names) // 2
