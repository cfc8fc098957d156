"""The transistor as data sheets print it: rows of hFE and VCE(sat), Early voltage, what a type brings and with what evidence.

Figures of types are those of the tables, read in makers' data sheets; interpolations are worked by hand beside them.
"""

from __future__ import annotations

import re as regex
from math import log, sqrt
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

import synth
from synth.box import Meter
from synth.catalogue import CatalogueError
from synth.cautions import request_cautions
from synth.quantities import RestpointError
from synth.replacement.sides import sides
from synth.search.certificate import refuse
from synth.spaces import fitted, goal_of, spaces_of
from synth.stage import Stage
from synth.statistics.stability import gradients

DIGITS = 1e-12
"""Interpolation takes a few logarithms and exponentials: some tens of ulps."""


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V", "ic": "1 mA", "vce": "5 V"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


def why(made: Stage, key: str) -> str:
    return next(note.why for note in made.assumed if note.key == key)


def warned(made: Stage) -> set[str]:
    return {warning.name for warning in made.warnings}


# --- hFE against IC -----------------------------------------------------------------------------------------------

ROWS = "0.1 mA = 40 : 200, 10 mA = 100 : 300"


def test_rows_give_the_gain_at_the_target_current() -> None:
    """1 mA lies half-way between the rows in ln IC: geometric means of 40 and 100, and of 200 and 300."""
    made = stage(hfe_rows=ROWS)
    hfe = made.transistor.hfe
    assert_allclose([hfe.low, hfe.high], [sqrt(4000.0), sqrt(60000.0)], rtol=DIGITS, atol=0.0)
    assert_allclose(hfe.nominal, sqrt(hfe.low * hfe.high), rtol=DIGITS, atol=0.0)
    assert "of transistor.hfe_rows, at 1 mA" in why(made, "transistor.hfe")


def test_rows_may_be_a_list() -> None:
    assert stage(hfe_rows=ROWS.split(", ")) == stage(hfe_rows=ROWS)


def test_a_row_without_maximum_takes_five_times_its_minimum_or_the_greatest_stated() -> None:
    made = stage(hfe_rows="0.1 mA = >= 40, 1 mA = >= 70, 10 mA = 100 : 300")
    rows = made.transistor.hfe_rows
    assert rows is not None
    assert rows.high == (300.0, 350.0, 300.0)
    assert "5 times the minimum or the greatest given" in why(made, "transistor.hfe")
    assert "gain_maximum_assumed" in {w.name for w in request_cautions(made)}


@pytest.mark.parametrize(("ic", "beyond"), [("0.09 mA", True), ("0.1 mA", False), ("10 mA", False), ("11 mA", True)])
def test_current_beyond_the_rows_is_warned_of(ic: str, beyond: bool) -> None:
    made = stage(hfe_rows=ROWS, ic=ic)
    assert ("gain_beyond_rows" in warned(made)) == beyond
    if ic == "11 mA":
        assert_allclose([made.transistor.hfe.low, made.transistor.hfe.high], [100.0, 300.0], rtol=DIGITS, atol=0.0)


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"hfe_rows": ROWS, "hfe": "100 : 300"}, "transistor.hfe_rows: .* but transistor.hfe is given too"),
        ({"hfe_rows": "1 mA : 40"}, "transistor.hfe_rows: read '1 mA : 40', of which '1 mA : 40' is no row"),
        ({"hfe_rows": "1 mA ="}, "of which '1 mA =' is no row"),
        ({"hfe_rows": "0 mA = 40"}, "of which '0 mA = 40' has no current"),
        ({"hfe_rows": "1 V = 40"}, "transistor.hfe_rows: read '1 V"),
        ({"hfe_rows": "1 mA = 0 : 40"}, "whose least gain is 0"),
        ({"hfe_rows": "10 mA = 40, 1 mA = 20"}, "read 0.001 A after 0.01 A"),
        ({"hfe_rows": "1 mA = 4 : 9, 2 mA = 40 : 90"}, r"rises as IC to the 3\.32, accepted is a power of at most 0\.95"),
        ({"hfe": "100", "va": "0.5 V"}, "transistor.va: read 0.5 V at least, accepted is 1 V or more"),
        ({"hfe": "100", "va": "50 V", "va_vce": "-1 V"}, "transistor.va_vce: read -1 V"),
        ({"hfe": "100", "vce_sat": "0.2 V", "vce_sat_rows": "1 mA = 0.1 V"}, "vce_sat_rows: .* but transistor.vce_sat is given too"),
        ({"hfe": "100", "vce_sat_rows": "1 mA 0.1 V"}, "of which '1 mA 0.1 V' is no row"),
        ({"hfe": "100", "vce_sat_rows": "1 mA = -0.1 V"}, "transistor.vce_sat .*negative"),
    ],
)
def test_what_contradicts_itself_is_refused(changes: dict[str, object], message: str) -> None:
    with pytest.raises(RestpointError, match=message):
        stage(**changes)


# --- What a type brings -------------------------------------------------------------------------------------------


def test_a_type_brings_its_rows_with_their_evidence() -> None:
    """Makers' sheets of 2N3904 at 1 V: 40, 70, 100 to 300, 60 and 30 at 0.1, 1, 10, 50 and 100 mA."""
    made = stage(type="2N3904")
    rows = made.transistor.hfe_rows
    assert rows is not None
    assert rows.current == (1e-4, 1e-3, 1e-2, 0.05, 0.1)
    assert rows.low == (40.0, 70.0, 100.0, 60.0, 30.0)
    assert rows.high == (300.0, 350.0, 300.0, 300.0, 300.0)
    assert_allclose([made.transistor.hfe.low, made.transistor.hfe.high], [70.0, 350.0], rtol=DIGITS, atol=0.0)
    assert "at VCE 1 V" in why(made, "transistor.hfe_rows")
    assert "5 times the minimum" in why(made, "transistor.hfe_rows")


def test_only_rows_at_the_voltage_and_temperature_of_the_main_figure_count() -> None:
    # 2N2222A has 50 at 150 mA and 1 V, and 35 at 10 mA and -55 °C, besides its rows at 10 V.
    rows = stage(type="2N2222A").transistor.hfe_rows
    assert rows is not None
    assert rows.low == (35.0, 50.0, 75.0, 100.0, 40.0)


def test_the_typical_gain_keeps_its_place_between_the_rows() -> None:
    """BC107B: 40 at 10 uA, 200 : 290 : 450 at 2 mA; 450 stands for the missing maximum. At 0.1 mA, hand-interpolated."""
    made = stage(type="BC107B", ic="0.1 mA")
    share = log(10.0) / log(200.0)
    low = 40.0 * 5.0**share
    place = log(290.0 / 200.0) / log(450.0 / 200.0)
    hfe = made.transistor.hfe
    assert_allclose([hfe.low, hfe.nominal, hfe.high], [low, low ** (1 - place) * 450.0**place, 450.0], rtol=DIGITS, atol=0.0)


def test_a_type_with_one_row_keeps_a_constant_gain() -> None:
    made = stage(type="BC847B")
    assert made.transistor.hfe_rows is None
    assert (made.transistor.hfe.low, made.transistor.hfe.high) == (200.0, 450.0)


def test_every_figure_of_a_type_can_be_overridden() -> None:
    made = stage(type="2N3904", hfe="90 : 120", vbe="0.6 V", vbe_ic="1 mA", icbo="1 nA", vce_sat="0.1 V", vceo="30 V")
    assert made.transistor.hfe_rows is None
    assert (made.transistor.hfe.low, made.transistor.hfe.high) == (90.0, 120.0)
    assert made.transistor.vce_sat == 0.1
    assert made.ratings.vceo == 30.0
    own = stage(type="2N3904", hfe_rows=ROWS).transistor.hfe_rows
    assert own is not None
    assert own.low == (40.0, 100.0)


def test_what_was_taken_from_the_table_stands_in_the_answer_with_its_evidence() -> None:
    answer = synth.check(stage(type="BC847B"), r1="91k", r2="51k", rc="3k3", re="3k6")
    known = {note.key: (note.value, note.evidence) for note in answer.assumed}
    assert known["transistor.hfe"] == ("200 : 290 : 450", "seen")
    assert known["transistor.vbe"] == ("580 : 660 : 700 mV", "seen")
    assert known["transistor.vceo"] == ("45 V", "seen")
    assert known["transistor.ic_max"] == ("0.1 A", "seen")
    assert known["ambient.temperature"][1] == ""
    hot = [note for note in answer.assumed if note.key == "transistor.icbo"]
    assert regex.search("hot limit from the table", hot[-1].why)


def test_bin_letters_are_not_trusted_across_types() -> None:
    """BC557B is 180 : 460 where BC847B is 200 : 450; a type with the same letter that is not in the table is refused."""
    assert stage(type="BC557B", polarity="pnp").transistor.hfe.low == 180.0
    assert stage(type="BC847").transistor.hfe == stage(type="BC847", hfe="110 : 800").transistor.hfe
    with pytest.raises(CatalogueError, match="BC549B"):
        stage(type="BC549B")


@pytest.mark.parametrize(
    "changes",
    [
        {"type": "2N3904"},
        {"hfe_rows": "0.1 mA = >= 40, 10 mA = 100 : 300"},
        {"type": "BC847B", "va": "50 : 100 V"},
        {"hfe": "100 : 300", "vce_sat_rows": "1 mA = 0.1 V, 10 mA = 0.25 V"},
    ],
)
def test_a_saved_stage_reads_back_equal(changes: dict[str, object], tmp_path: Path) -> None:
    made = stage(**changes)
    file = tmp_path / "stage.toml"
    file.write_text(made.to_toml(), encoding="utf-8")
    assert Stage.read(file) == made


def test_a_gain_given_anew_takes_the_place_of_rows_and_the_reverse() -> None:
    assert stage(hfe_rows=ROWS).replace(hfe="100 : 200") == stage(hfe="100 : 200")
    assert stage(hfe="100 : 200").replace(hfe_rows=ROWS) == stage(hfe_rows=ROWS)
    assert stage(hfe="100", vce_sat_rows="10 mA = 0.3 V").replace(vce_sat="0.1 V") == stage(hfe="100", vce_sat="0.1 V")


def test_another_type_brings_its_own_gain_and_no_early_voltage_of_the_old() -> None:
    before, after = sides(stage(type="2N3904", va="50 : 100 V", to="BC847B"))
    assert before.transistor.hfe_rows is not None
    assert (after.transistor.hfe_rows, after.transistor.va) == (None, None)
    assert after.transistor.hfe.low == 200.0


@pytest.mark.long
def test_advice_works_where_a_type_brings_rows() -> None:
    answer = synth.find(stage(type="2N3904", series="E3", tolerance="1 %", ic="1 mA ± 1 %", resistors_rc_values="3k3"))
    assert answer.infeasible is not None
    assert "target.ic" in answer.infeasible.binding


def test_no_certificate_of_a_gain_that_moves() -> None:
    made = stage(hfe_rows=ROWS, series="E3")
    with pytest.raises(RestpointError, match="certificate: read hfe_rows or va"):
        refuse(spaces_of(made), goal_of(made))


# --- Early voltage and VCE(sat) -----------------------------------------------------------------------------------


def test_the_early_voltage_counts_from_the_voltage_of_the_test() -> None:
    assert stage(hfe="100", va="50 : 100 V").transistor.va_vce == 5.0
    # The table tests hFE of 2N3904 at 1 V.
    made = stage(type="2N3904", va="100 V")
    assert made.transistor.va_vce == 1.0
    assert_allclose(made.transistor.early_factor(100.0, 11.0), 111.0 / 101.0, rtol=DIGITS, atol=0.0)


def test_early_effect_of_a_fixed_base_stage_by_hand() -> None:
    """IB = (12 V - 0.65 V)/1 Mohm = 11.35 uA; IC = 100·IB·(50 + VCE)/(50 + 5) with VCE = 12 V - 1 kohm·IC.

    IC·(55 + 1.135) = 1.135 mA·62: IC = 1.253585... mA.
    """
    made = stage(network="fixed_base", hfe="100", va="50 V", vbe="0.65 V", vbe_model="fixed", temperature="25 °C",
                 values_rb="1M", values_rc="1k", vce="10 V")  # fmt: skip
    best = synth.check(made).best
    assert best is not None
    assert_allclose(best.nominal.ic, 1.135e-3 * 62.0 / (55.0 + 1.135), rtol=1e-12, atol=0.0)
    assert {share.cause for share in best.budget["ic"]} <= {"centring", "rb", "rc"}


def test_sensitivity_to_the_early_voltage_by_hand() -> None:
    """IC = B·(VA + 12 V)/(VA + 5 V + B·1 kohm) with B = 100·IB = 1.135 mA: dIC/dVA = B·(5 + 1.135 - 12)/(56.135 V)²/V."""
    made = stage(network="fixed_base", hfe="100", va="50 V", vbe="0.65 V", vbe_model="fixed", temperature="25 °C",
                 values_rb="1M", values_rc="1k", vce="10 V")  # fmt: skip
    space = fitted(made)
    box = space.box(np.zeros((1, 2), dtype=np.int32), Meter())
    found = gradients(box, box.nominal())["va"][0]
    assert_allclose(found, 1.135e-3 * (5.0 + 1.135 - 12.0) / 56.135**2, rtol=1e-7, atol=0.0)


def test_a_spread_of_the_early_voltage_is_a_cause_of_its_own() -> None:
    made = stage(network="fixed_base", hfe="100", va="20 : 100 V", values_rb="1M", values_rc="1k", vce="10 V")
    best = synth.check(made).best
    assert best is not None
    assert "early" in {share.cause for share in best.budget["ic"]}


@pytest.mark.parametrize(("ic", "volts", "told"), [("1 mA", 0.1, False), ("2 mA", 0.3, False), ("20 mA", 0.3, True)])
def test_vce_sat_is_that_of_the_row_at_or_above_the_greatest_current(ic: str, volts: float, told: bool) -> None:
    made = stage(hfe="100", ic=ic, vce_sat_rows="1 mA = 0.1 V, 10 mA = 0.3 V")
    assert made.transistor.vce_sat == volts
    assert ("vce_sat_test_current" in warned(made)) == told


def test_the_window_decides_which_row_of_vce_sat_counts() -> None:
    made = stage(hfe="100", ic="1 mA ± 20 %", vce_sat_rows="1 mA = 0.1 V, 10 mA = 0.3 V")
    assert made.transistor.vce_sat == 0.3
    # BC847B: 0.25 V at 10 mA.
    assert "vce_sat_test_current" in warned(stage(type="BC847B", ic="11 mA"))
    assert "vce_sat_test_current" not in warned(stage(type="BC847B", ic="10 mA"))


# --- Other figures of data sheets ---------------------------------------------------------------------------------


def test_an_asymmetric_vbe_spread_counts_each_side() -> None:
    """VBE fixed at 0.58 : 0.66 : 0.70 V: of IB = (12 V - VBE)/1 Mohm the two ends lie 80 and 40 nA from nominal."""
    made = stage(network="fixed_base", hfe="100", vbe="0.58 : 0.66 : 0.7 V", vbe_model="fixed", tolerance="1e-9",
                 temperature="25 °C", values_rb="1M", values_rc="1k", vce="10 V", tcr="0 ppm/K", series="E96")  # fmt: skip
    best = synth.check(made).best
    assert best is not None
    low, high = best.worst.ic
    assert_allclose([high - best.nominal.ic, best.nominal.ic - low], [8e-6, 4e-6], rtol=1e-3, atol=0.0)


def test_a_one_sided_tcr_counts_one_side() -> None:
    # -300 ppm/K from 25 °C to 70 °C lower rb by 1.35 % at most and never raise it; IB goes as 1/rb.
    made = stage(network="fixed_base", hfe="100", vbe="0.65 V", vbe_model="fixed", tolerance="1e-9", temperature="25 : 70 °C",
                 values_rb="1M", values_rc="1k", vce="10 V", tcr="-300 : 0 ppm/K", series="E96")  # fmt: skip
    box = synth.check(made).best
    assert box is not None
    low, high = box.worst.ic
    gain = (343.15 / 298.15) ** 1.5
    assert_allclose(high, 1.135e-3 * gain / (1.0 - 0.0135), rtol=1e-6, atol=0.0)
    assert_allclose(low, 1.135e-3, rtol=1e-6, atol=0.0)


def test_germanium_near_its_saturation_current_is_refused_with_the_reason() -> None:
    with pytest.raises(RestpointError, match=r"within 10 times of the saturation current, .* at 70 °C"):
        stage(material="germanium", hfe="60 : 175", ic="10 uA", temperature="0 : 70 °C")
