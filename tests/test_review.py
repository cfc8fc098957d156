"""What a review asks of a candidate: distributions and measurements as keys, the bench, records of resistors, statistics.

Expected figures are worked out by hand beside each check, or come from judging the changed stage by itself.
"""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

import synth
from synth.quantities import Spread
from synth.stage import Stage, StageError

FITTED = {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}
PLAIN = {"supply": "12 V ± 5 %", "ic": "2 mA ± 20 %", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}


def stage(**changes: object) -> Stage:
    return Stage(**(PLAIN | changes))  # type: ignore[arg-type]


# --- Distributions as keys --------------------------------------------------------------------------------------------


def test_lot_is_as_the_keys_say() -> None:
    made = stage(units="1000", seed="0", distribution_points="random", distribution_hfe="normal", distribution_vcc="nominal")
    assert (made.lot.units, made.lot.seed, made.lot.points) == (1000, 0, "random")
    assert {name: law.shape for name, law in made.lot.laws.items()} == {"hfe": "normal", "vcc": "nominal"}
    assert made.as_dict()["distribution"] == {"units": 1000, "seed": 0, "points": "random", "hfe": "normal", "vcc": "nominal"}
    assert Stage.from_keys(made.given).lot == made.lot


def test_measured_values_come_from_the_key_or_a_file(tmp_path: Path) -> None:
    assert stage(distribution_hfe=["212", "233", "305"]).lot.laws["hfe"].values == (212.0, 233.0, 305.0)
    assert stage(distribution_tolerance="0.2 %, -0.3 %").lot.laws["tolerance"].values == (0.002, -0.003)
    (tmp_path / "lot.csv").write_text("unit,value\n1,212\n2,233\n3,\n", encoding="utf-8")
    (tmp_path / "stage.toml").write_text(
        "\n".join(
            [
                '[supply]\nvcc = "12 V"', '[target]\nic = "2 mA"\nvce = "5 V"', '[transistor]\nhfe = "110 : 450"',
                '[distribution]\nhfe = ["lot.csv"]',
            ]
        ),
        encoding="utf-8",
    )  # fmt: skip
    assert Stage.read(tmp_path / "stage.toml").lot.laws["hfe"].values == (212.0, 233.0)


@pytest.mark.parametrize(
    ("key", "text", "said"),
    [
        ("distribution_hfe", "gaussian", r"read 'gaussian', which is unknown, accepted is one of uniform, normal"),
        ("distribution_hfe", "212, 500", r"of which 500 lies outside the spread of 110 : 450"),
        ("distribution_tolerance", "2 %", r"of which 2 % lies outside the spread of -1 % : 1 %"),
        ("distribution_icbo", "log_uniform", r"read 'log_uniform', which needs a spread above 0, .*nearest is 'uniform'"),
        ("distribution_hfe", "nowhere.csv", r"read 'nowhere.csv', which cannot be read \(No such file"),
        ("distribution_reference", "1.2 V", r"read '1.2 V', which is no distribution of a reference element"),
        ("distribution_reference", "log_uniform", r"read 'log_uniform', whose coefficient may be 0"),
        ("units", "0", r"distribution.units: read '0', which is no such number, accepted is a whole number from 1 to 10000000"),
        ("units", "2.5", r"distribution.units: read '2.5'.*nearest is '2'"),
        ("measured_r1", "1 kohm ± 100 %", r"measured.r1: read '1 kohm ± 100 %', which with its uncertainty goes down to 0"),
        ("measured_rb", "100 kohm", r"measured.rb: read 'rb', which is no role of divider"),
    ],
)
def test_wrong_key_is_refused(key: str, text: str, said: str) -> None:
    with pytest.raises(StageError, match=said):
        stage(**{key: text})


def test_file_without_the_column_is_refused(tmp_path: Path) -> None:
    (tmp_path / "lot.csv").write_text("gain\n212\n", encoding="utf-8")
    with pytest.raises(StageError, match=r"read '.*lot.csv', which has no value in a column named value"):
        stage(distribution_hfe=str(tmp_path / "lot.csv"))


# --- Measured parts ---------------------------------------------------------------------------------------------------


def test_measured_parts_stand_for_nominal_ones() -> None:
    """The same as a stage with those values as its own: resistors with their uncertainty as tolerance, hFE as its spread."""
    measured = synth.check(
        stage(measured_r1="43.2 kohm ± 0.2 %", measured_re="1.79 kohm ± 2 ohm", measured_hfe="312 ± 5", measured_vbe="0.63 V"),
        **FITTED,
    )
    own = synth.check(
        stage(
            hfe="307 : 312 : 317", vbe="0.63 V", resistors_r1_tolerance="0.2 %",
            resistors_re_tolerance=2.0 / 1790.0, resistors_r1_values="43.2k", resistors_re_values="1.79k",
        ),
        r1="43.2k", r2="24k", rc="1k8", re="1.79k",
    )  # fmt: skip
    assert measured.best is not None
    assert own.best is not None
    assert measured.best.resistors == {"r1": 43200.0, "r2": 24e3, "rc": 1.8e3, "re": 1790.0}
    # The half-width of re comes from a difference of two ends: some ulps of one.
    assert_allclose(measured.worst.ic, own.worst.ic, rtol=1e-12, atol=0)
    assert_allclose(measured.worst.vce, own.worst.vce, rtol=1e-12, atol=0)


def test_measured_resistor_is_pinned_in_a_search() -> None:
    found = synth.find(stage(measured_re="1.79 kohm ± 0.1 %"), top=1)
    assert found.best is not None
    assert found.best.resistors["re"] == 1790.0


def test_readings_are_compared_on_the_bench() -> None:
    """Parts known exactly and VBE constant: VB, VE and VC by Ohm's law at the supply of the bench."""
    exact = {"hfe": "200", "vbe": "0.65 V", "vbe_model": "fixed", "measured_r1": "43k", "measured_r2": "24k",
             "measured_rc": "1k8", "measured_re": "1k8", "measured_vcc": "12.4 V"}
    ib = (12.4 * 24.0 / 67.0 - 0.65) / (43e3 * 24e3 / 67e3 + 201.0 * 1.8e3)
    ve = 201.0 * ib * 1.8e3
    vc = 12.4 - 200.0 * ib * 1.8e3
    made = synth.check(stage(**exact, measured_vb=f"{ve + 0.65:.5f} V ± 1 mV", measured_vc="9.5 V ± 10 mV"), **FITTED)
    assert made.best is not None
    one, two = made.best.comparisons
    assert (one.reading, one.verdict, one.off) == ("vb", "agrees", 0.0)
    assert_allclose(one.expected, np.full(3, ve + 0.65), rtol=1e-12, atol=0)
    assert (two.reading, two.verdict) == ("vc", "differs")
    assert_allclose(two.expected, np.full(3, vc), rtol=1e-12, atol=0)
    assert_allclose(two.off, 9.49 - vc, rtol=1e-9, atol=0)
    assert "reading_differs" in {w.name for w in made.warnings}
    bench = made.best.bench
    assert bench is not None
    assert bench.conditions == {"vcc": (12.4, 12.4, 12.4), "temperature": (298.15, 298.15, 298.15)}


def test_bench_holds_the_supply_and_the_temperature_still() -> None:
    made = synth.check(stage(), **FITTED).best
    assert made is not None
    still = synth.check(stage(supply="12 V", temperature="25 °C"), **FITTED).best
    assert made.bench is not None
    assert made.readings is not None
    assert still is not None
    assert still.readings is not None
    for node, ends in made.bench.nodes.items():
        assert_allclose(ends, still.readings.nodes[node], rtol=1e-14, atol=0)
        # Over the box the range is wider on both sides.
        assert made.readings.nodes[node][0] < ends[0]
        assert made.readings.nodes[node][2] > ends[2]


# --- Records of resistors ---------------------------------------------------------------------------------------------


def test_record_of_a_resistor_says_what_judging_the_change_says() -> None:
    made = synth.check(stage(), **FITTED).best
    assert made is not None
    record = made.roles["r1"].record
    assert record is not None
    assert [row.tolerance for row in record.classes] == [0.005, 0.02]
    for row in record.classes:
        other = synth.check(stage(resistors_r1_tolerance=row.tolerance), **FITTED).best
        assert other is not None
        assert_allclose(row.drift, other.drift.q_point, rtol=1e-12, atol=0)
        assert row.verdict == other.verdict
    assert made.verdict == "pass"
    assert record.replaceable is not None
    low, high = record.replaceable
    assert low < 43e3 < high
    # Just inside everything passes; a little beyond something fails (the last step is halved six times).
    for ohms, verdict in ((low * 1.0001, "pass"), (high * 0.9999, "pass"), (low * 0.99, "fail"), (high * 1.01, "fail")):
        assert synth.check(stage(), **{**FITTED, "r1": ohms}).candidates[0].verdict == verdict
    assert record.power == made.stress["r1"].power


def test_record_is_words_about_its_own_figures() -> None:
    made = synth.check(stage(), **FITTED)
    duty = json.loads(made.to_json())["candidates"][0]["roles"]["r2"]
    text = " ".join(duty["rationale"])
    assert duty["meaning"].capitalize() in text
    assert "24K leaves a drift of" in text
    assert "As a 2 % part" in text
    assert "It may be replaced by any value from" in text
    assert {"power", "smallest", "classes", "replaceable"} <= set(duty)


def test_failing_stage_has_no_range_of_replacements() -> None:
    made = synth.check(stage(ic="2 mA ± 1 %"), **FITTED).best
    assert made is not None
    record = made.roles["r1"].record
    assert record is not None
    assert record.replaceable is None
    assert record.text[-1] == "Whether it may be replaced is not told, since a verdict fails already."


# --- Statistics of an answer ------------------------------------------------------------------------------------------


def test_statistics_are_there_when_asked_for() -> None:
    assert synth.check(stage(), **FITTED).candidates[0].statistics is None
    made = synth.check(stage(units="2048", seed="0"), statistics=True, **FITTED)
    found = made.candidates[0].statistics
    assert found is not None
    assert [row.quantity for row in found.rss] == ["ic", "vce"]
    for row in found.rss:
        assert made.worst[row.quantity][0] <= row.low.value <= row.nominal <= row.high.value <= made.worst[row.quantity][1]
    shares = {y.name: y for y in found.monte_carlo.yields}
    # Every verdict over the box passes, so every unit does.
    assert made.passed
    assert shares["all"].passed == 2048
    assert shares["target.ic"].share == 1.0
    plain = json.loads(made.to_json())["candidates"][0]["statistics"]
    assert plain["monte_carlo"]["seed"] == 0
    assert plain["rss"][0]["low"]["terms"][0].keys() == {"cause", "kind", "change"}
    assert plain["rss"][0]["high"]["sigmas"] > 3.0
    assert plain["rss"][1]["high"]["sigmas"] is None


def test_find_has_statistics_of_its_first_candidate_alone() -> None:
    found = synth.find(stage(units="1024"), top=2, statistics=True)
    assert found.candidates[0].statistics is not None
    assert found.candidates[1].statistics is None
    assert found.candidates[1].faults == ()


def test_life_counts_one_way() -> None:
    """IC falls with RE; 1 % of its change over life is a one-way term of about 1 % of VE/(VE + …)."""
    made = synth.check(stage(life="1 %", units="64"), statistics=True, **FITTED).candidates[0].statistics
    assert made is not None
    kinds = {term.cause: term.kind for term in made.rss[0].low.terms}
    assert kinds["re life"] == "one-way"
    assert kinds["re"] == "random"
    assert kinds["hfe"] == "random"
    assert not math.isnan(made.rss[0].sigma)


def test_stage_of_spreads_takes_measured_spreads() -> None:
    assert stage(measured_r1=Spread(42e3, 43e3, 44e3)).measured["r1"] == Spread(42e3, 43e3, 44e3)


def test_every_key_of_lots_and_measurements_is_an_option(capsys: pytest.CaptureFixture[str]) -> None:
    """All of them at once, each with its example; a rail of another network and a role of another one left out."""
    from synth.cli import main
    from synth.stage_keys import KEYS

    words = ["check", "--supply", "12 V ± 5 %", "--ic", "2 mA", "--vce", "5 V", "--hfe", "110 : 450", "--tolerance", "1 %"]
    words += [f"--{role}={value}" for role, value in FITTED.items()]
    for key in KEYS.values():
        if key.table in ("distribution", "measured") and key.leaf not in ("rb", "r1", "r2", "rc", "re"):
            words += [key.options[-1], key.example]
    words += ["--measured-r2", "24.1 kohm ± 0.2 %"]
    with pytest.raises(SystemExit) as ended:
        main(words)
    said = capsys.readouterr()
    assert ended.value.code in (0, 1), said.err
    assert "reading_differs" in said.out
