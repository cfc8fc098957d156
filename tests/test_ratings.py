"""Ratings, derating policies and the signal as a stage knows them: defaults, verdicts, refusals.

Figures are worked out by hand beside each check; the stages are invented.
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

import synth
from synth.answer import Candidate
from synth.stage import Stage
from synth.stress import TransistorRatings

CONTRACT = {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}
HAND = 1e-9
"""A hand formula with figures that are exact in the answer."""


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V ± 5 %", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


def checked(**changes: object) -> Candidate:
    return synth.check(stage(**changes), **CONTRACT).candidates[0]


# What is known


def test_nothing_known_nothing_judged() -> None:
    given = stage()
    assert given.ratings == TransistorRatings()
    assert not {"resistor_stress", "transistor_stress"} & set(given.limits)
    assert "derating" not in {note.key for note in given.assumed}


def test_a_type_brings_its_ratings_and_keys_override_them() -> None:
    given = stage(hfe=None, type="BC847B")
    assert (given.ratings.vceo, given.ratings.ic_max) == (45.0, 0.1)
    assert {"derating", "limits.transistor_stress"} <= {note.key for note in given.assumed}
    assert stage(hfe=None, type="BC847B", vceo="30 V").ratings.vceo == 30.0


def test_power_at_25_degrees_implies_a_thermal_resistance() -> None:
    # (150 °C − 25 °C)/0.25 W.
    ratings = stage(ptot="0.25 W", tj_max="150 °C").ratings
    assert ratings.thermal_resistance is not None
    assert_allclose(ratings.thermal_resistance, 500.0, rtol=HAND, atol=0)


def test_a_saved_stage_with_ratings_and_a_signal_reads_back(tmp_path: object) -> None:
    given = stage(vceo="45 V", rth_ja="250 K/W", bypass="part", unbypassed="100 ohm", load="10k", source="1k", derating="EEE-INST-002")
    file = f"{tmp_path}/stage.toml"
    with open(file, "w", encoding="utf-8") as out:
        out.write(given.to_toml())
    again = Stage.read(file)
    assert (again.ratings, again.signal, again.derating) == (given.ratings, given.signal, given.derating)


# Verdicts


def test_whole_rail_counts_against_vceo() -> None:
    # Common practice: at cut-off nothing drops in rc. 12.6 V against 75 % of 16 V passes no more, against 17 V it does.
    for vceo, passes in (("16.7 V", False), ("16.9 V", True)):
        verdict = next(v for v in checked(vceo=vceo).limits if v.name == "transistor_stress.vceo")
        assert_allclose(verdict.worst, 12.6, rtol=HAND, atol=0)
        assert (verdict.verdict == "pass") is passes
    assert_allclose(verdict.limit, 0.75 * 16.9, rtol=HAND, atol=0)


def test_a_bypassed_emitter_is_held_against_the_falling_base() -> None:
    """At switch-off the base is at 0 V and the capacitor keeps VE: 0.75 of VEBO against the greatest drop of re. From memory."""
    drop = synth.check(stage(), **CONTRACT).candidates[0].roles["re"].drop
    fitted = checked(vebo="5 V")
    verdict = next(v for v in fitted.limits if v.name == "transistor_stress.veb")
    assert_allclose(verdict.limit, 3.75, rtol=HAND, atol=0)
    # The greatest drop is above the nominal one by less than the drift.
    assert drop < verdict.worst < drop * 1.15
    assert fitted.transistor is not None
    assert_allclose(fitted.transistor.veb, verdict.worst, rtol=HAND, atol=0)
    for vebo, passes in ((verdict.worst / 0.76, False), (verdict.worst / 0.74, True)):
        (again,) = (v for v in checked(vebo=f"{vebo!r} V").limits if v.name == "transistor_stress.veb")
        assert (again.verdict == "pass") is passes


def test_without_a_capacitor_nothing_holds_the_emitter() -> None:
    assert not [v for v in checked(vebo="5 V", bypass="none").limits if v.name == "transistor_stress.veb"]
    assert stage(vebo="5 V").ratings.vebo == 5.0


def test_two_supplies_add_up_against_vceo() -> None:
    given = stage(network="two_supply", vee="12 V ± 5 %", vceo="45 V", r1=None)
    best = synth.check(given, rb="10k", rc="3k3", re="5k6").candidates[0]
    verdict = next(v for v in best.limits if v.name == "transistor_stress.vceo")
    assert_allclose(verdict.worst, 25.2, rtol=HAND, atol=0)


@pytest.mark.parametrize(
    ("policy", "share", "hot"),
    [
        # Full to 70 °C, linear to zero at 155 °C (makers' sheets): at 100 °C 55/85 are left; half_power takes half of it.
        ("none", 1.0, "100 °C"),
        ("half_power", 0.5, "100 °C"),
        ("half_power", 0.5, "70 °C"),
        ("EEE-INST-002", 0.6, "40 °C"),
    ],
)
def test_power_of_a_resistor_under_a_policy(policy: str, share: float, hot: str) -> None:
    c = checked(style="0805", derating=policy, temperature=f"0 : 25 : {hot}")
    celsius = float(hot.split()[0])
    line = min(1.0, (155.0 - celsius) / 85.0)
    stress = c.stress["rc"]
    assert stress.power_allowed is not None
    # 0805: an eighth of a watt is usual, the table's conservative figure 0.1 W.
    assert_allclose(stress.power_allowed, 0.1 * share * line, rtol=HAND, atol=0)
    verdict = next(v for v in c.limits if v.name == "resistor_stress.rc.power")
    assert_allclose(verdict.worst, stress.power, rtol=HAND, atol=0)
    assert_allclose(verdict.limit, stress.power_allowed, rtol=HAND, atol=0)


def test_worst_power_of_rc_by_hand() -> None:
    # Nothing spreads but rc: 2 V/1 kohm·1.01 at most... the current of the divider stage does not depend on rc, so P = IC²·rc.
    c = synth.check(
        stage(supply="12 V", hfe="200", vbe="0.65 V", vbe_model="fixed", temperature="25 °C", tcr="0 ppm/K"), **CONTRACT
    ).candidates[0]
    high = c.worst.ic[1]
    assert c.stress["rc"].power <= high**2 * 1818.0 * (1 + 1e-12)
    assert c.stress["rc"].power >= high**2 * 1818.0 * (1 - 1e-9)
    assert_allclose(c.stress["rc"].voltage, high * 1818.0, rtol=1e-9, atol=0)


def test_share_of_a_rating_can_be_asked_for() -> None:
    full, half = checked(ic_max="10 mA"), checked(ic_max="10 mA", transistor_stress="20 %")
    (one,), (two,) = ([v for v in c.limits if v.name == "transistor_stress.ic"] for c in (full, half))
    assert_allclose([one.limit, two.limit], [10e-3, 2e-3], rtol=HAND, atol=0)
    assert (one.verdict, two.verdict) == ("pass", "fail")


def test_a_failed_rating_keeps_a_candidate_out_of_a_find() -> None:
    # A window of 1.6 to 2.4 mA leaves nothing below 1.6 mA.
    answer = synth.find(stage(ic="2 mA ± 20 %", ic_max="1.6 mA"), top=1)
    assert answer.infeasible is not None
    assert "transistor_stress" in answer.infeasible.binding
    assert "ic reaches" in answer.infeasible.notes["transistor_stress"]


# Self-heating


def test_junction_settles_where_power_and_temperature_agree() -> None:
    """TJ = TA + RthJA·P(TJ), P solved again at TJ from the laws of the transistor; resistors stay at the ambient."""
    exact = {"supply": "12 V", "hfe": "200", "vbe": "0.65 V", "temperature": "25 °C", "tcr": "0 ppm/K"}
    c = checked(rth_ja="4000 K/W", tolerance="1e-7 %", **exact)
    load = c.transistor
    assert load is not None
    assert load.junction is not None
    assert load.state == "settled"
    q = synth.operating_point(
        network="divider", rails={"vcc": 12.0}, resistors={"r1": 43e3, "r2": 24e3, "rc": 1.8e3, "re": 1.8e3},
        hfe=200.0 * (load.junction / 298.15) ** 1.5, temperature=load.junction,
    )  # fmt: skip
    rise = 4000.0 * float(q.vce * q.ic + q.vbe * q.ib)
    assert rise > 30.0
    # A tolerance of 1e-9 either way is all that is left of the box.
    assert_allclose(load.junction - 298.15, rise, rtol=1e-7, atol=0)
    assert load.heating is not None
    assert_allclose(1.0 + load.heating, float(q.ic) / c.nominal.ic, rtol=1e-7, atol=0)


def test_a_stage_without_feedback_runs_away() -> None:
    """Physics, section 5: stiff base drive without RE runs away once the rise exceeds about VT/(2 mV/K) = 13 K.

    0.64 V across the junction itself, 10 V, 2 mA: 20 mW, so 700 K/W more than do it.
    """
    hot = stage(
        network="fixed_base", vbb="0.64 V", supply="10 V", rth_ja="2000 K/W", vce="9.8 V", hfe="200", vbe="0.64 V",
        base_resistance="none", temperature="25 °C",
    )  # fmt: skip
    answer = synth.check(hot, rb="10 ohm", rc="10 ohm")
    assert "thermal_runaway" in {w.name for w in answer.warnings}
    load = answer.candidates[0].transistor
    assert load is not None
    assert load.state == "runaway"
    assert load.junction is None
    cool = synth.check(hot.replace(rth_ja="100 K/W"), rb="10 ohm", rc="10 ohm").candidates[0].transistor
    assert cool is not None
    assert cool.state == "settled"
    # Loop gain = RthJA·P·|dVBE/dT|/VT of a stiffly driven junction: 100·20 mW·2 mV/K/25.7 mV, about 0.16.
    assert cool.loop_gain is not None
    assert 0.1 < cool.loop_gain < 0.25


# Signal


def test_gain_by_hand() -> None:
    # gm·(rc ∥ load) with gm = IC/VT, the emitter bypassed: 1.8 kohm ∥ 10 kohm = 1525.4 ohm.
    c = checked(load="10k")
    ic = c.nominal.ic
    assert_allclose(c.signal["gain"][1], ic / 0.0256926 * 1525.42, rtol=1e-5, atol=0)
    assert_allclose(c.signal["output_resistance"][1], 1800.0, rtol=1e-9, atol=0)


def test_unbypassed_emitter_sets_the_gain() -> None:
    # Common practice: gain is near rc/re where re is not bypassed.
    c = checked(bypass="none")
    assert 0.95 < c.signal["gain"][1] < 1.0
    assert c.signal["gain"][0] <= c.signal["gain"][1] <= c.signal["gain"][2]


def test_a_sink_has_no_signal() -> None:
    given = stage(network="sink", vce=None, ic="1 mA", gain="10")
    answer = synth.check(given, r1="10k", r2="10k", re="5k1")
    assert answer.candidates[0].signal == {}
    assert "limit_not_applicable" in {w.name for w in answer.warnings}


# Refusals


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ({"derating": "half power"}, None),
        ({"derating": "quarter_power"}, r"derating: read 'quarter_power', which is unknown, accepted is one of none, half_power"),
        ({"vceo": "0 V"}, r"transistor\.vceo: read '0 V', which is no rating, accepted is a rating above 0"),
        ({"rth_ja": "0 K/W"}, r"transistor\.rth_ja: read '0 K/W', which is no rating"),
        ({"tj_max": "20 °C"}, r"transistor\.tj_max: read '20 °C', which is no more than 25 °C"),
        ({"bypass": "part"}, r"signal\.unbypassed is not given, but signal\.bypass is part"),
        ({"unbypassed": "100 ohm"}, r"signal\.unbypassed: read '100 ohm', but signal\.bypass is full"),
        ({"load": "0 ohm"}, r"signal\.load: read '0 ohm', which is no resistance"),
        ({"bypass": "part", "unbypassed": "0 ohm"}, r"signal\.unbypassed: read '0 ohm', which is no resistance"),
        ({"style": "0806"}, r"resistors\.style: read '0806', which is unknown"),
    ],
)
def test_wrong_ratings_are_refused(given: dict[str, object], message: str | None) -> None:
    if message is None:
        assert stage(**given).derating.name == "half_power"
        return
    with pytest.raises(synth.RestpointError, match=message):
        stage(**given)


def test_figures_of_an_answer_are_finite_where_known() -> None:
    c = checked(style="0603", vceo="45 V")
    assert all(np.isfinite([s.power, s.voltage]).all() for s in c.stress.values())
    # Of the swing, the smaller of two, only the least over the box is told.
    assert np.isnan(c.signal["swing"][2])
    assert all(low <= middle for low, middle, _ in c.signal.values())
    assert all(middle <= high for name, (_, middle, high) in c.signal.items() if name != "swing")


def test_power_of_a_resistor_whose_current_turns_round() -> None:
    """Leakage of 1 µA at 25 °C flows out of the base of a hot stage and through RB: u²/R there exceeds what the drive gives."""
    given = stage(
        network="two_supply", vee="12 V ± 5 %", icbo="1 uA", hfe="110 : 450", temperature="0 : 25 : 100 °C", ic="3 mA", vce="8 V"
    )
    stress = synth.check(given, rb="10k", rc="2k7", re="3k9").candidates[0].stress["rb"]
    # At 100 °C the leakage is 2**7.5 = 181 µA; RB is 10 kohm within 1 % and 100 ppm/K·75 K.
    assert_allclose(stress.power, stress.voltage**2 / 10e3, rtol=0.05, atol=0)
    assert stress.power > 0.9 * (181e-6) ** 2 * 10e3


def test_stress_of_a_saturated_stage_stays_on_its_load_line() -> None:
    # 12.6 V is all that there is: no resistor and no transistor has more, and none delivers power.
    best = synth.check(stage(), r1="10k", r2="10k", rc="4k7", re="1k").candidates[0]
    assert "saturated" in best.regions
    assert best.transistor is not None
    assert 0.0 < best.transistor.power < 12.6**2 / 4.0 / 5.7e3 + 1e-3
    assert best.transistor.ic <= 12.6 / 5.6e3
    assert all(0.0 < s.voltage <= 12.6 for s in best.stress.values())


def test_a_relaxation_never_exceeds_the_rating_itself() -> None:
    # 48 V on 45 V of VCEO: derating is not what stands in the way.
    why = synth.find(stage(supply="48 V", vce="20 V", hfe=None, type="BC847B"), top=1).infeasible
    assert why is not None
    assert "more than its rating" in why.notes["transistor_stress"]
    assert not [r for r in why.relaxations if "limits.transistor_stress" in r.change]


def test_a_junction_that_does_not_settle_fails() -> None:
    hot = stage(network="sink", vce=None, ic="10 mA", hfe=None, type="BC547B", vload="30 V", derating="none", bleeder_current="none",
                temperature="-10 : 15 : 55 °C")
    answer = synth.check(hot, r1="10k", r2="1k", re="47R")
    (verdict,) = (v for v in answer.candidates[0].limits if v.name == "transistor_stress.junction")
    assert verdict.verdict == "fail"
    assert not answer.passed
