"""Every named warning: a stage that deserves it and one, just short of its threshold, that does not.

The thresholds are common practice unless a line says otherwise; the figures beside the cases are worked by hand from the
resistors and Ohm's law, with VBE near 0.64 V.
"""

from __future__ import annotations

import re as regex
from collections.abc import Mapping
from pathlib import Path

import pytest

import synth
from synth.cautions import RULES, pinout
from synth.present.catalogue import show
from synth.stage import Stage, StageError

CONTRACT = {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}
FIXED = {"rb": "1M", "rc": "3k3"}
HOT = {"supply": "24 V", "ic": "20 mA", "vce": "10 V"}
WARM = {"r1": "4k3", "r2": "2k4", "rc": "270 ohm", "re": "390 ohm"}
SIGNAL = {"signal_bypass": "part", "limits_gain": ">= 1"}
STIFF = {"r1": "5k1", "r2": "3k3", "rc": "1k8", "re": "1k8", "bleeder_current": "none"}
TYPE = {"type": "BC847B", "hfe": None}
ROWS = {"hfe": None, "hfe_rows": "0.1 mA = 80 : 300, 2 mA = 110 : 450"}
STIFF_BASE = {
    "network": "fixed_base", "vbb": "0.64 V", "supply": "10 V", "vce": "9.8 V", "hfe": "200", "vbe": "0.64 V",
    "base_resistance": "none", "temperature": "25 °C",
}  # fmt: skip
BARE = {"rb": "10 ohm", "rc": "10 ohm"}
SINK = {"network": "sink", "vce": None}
Fitted = tuple[Mapping[str, object], Mapping[str, str]]

CASES: list[tuple[str, Fitted, Fitted]] = [
    # The type's hFE is printed at 2 mA alone.
    ("gain_test_current", ({**TYPE, "ic": "0.19 mA"}, CONTRACT), ({**TYPE, "ic": "0.21 mA"}, CONTRACT)),
    # The hot limit of the type is 5 uA at 150 °C.
    ("hot_leakage", ({"type": "BC847B", "icbo": "6 uA"}, CONTRACT), ({"type": "BC847B", "icbo": "4 uA"}, CONTRACT)),
    # The spread of the stage is 110 to 450.
    ("measured_outside", ({"measured_hfe": "460 ± 5"}, CONTRACT), ({"measured_hfe": "450 ± 5"}, CONTRACT)),
    # A sound collector stands at about 8.5 V, and no unit at 25 °C within a volt of the rail.
    ("reading_differs", ({"measured_vc": "11.9 V"}, CONTRACT), ({"measured_vc": "8.5 V ± 10 mV"}, CONTRACT)),
    # BC847B: 200 : 450 at 2 mA.
    ("measured_outside", ({**TYPE, "measured_hfe": "190"}, CONTRACT), ({**TYPE, "measured_hfe": "210"}, CONTRACT)),
    # The rows end at 2 mA; VCE(sat) is known up to 1 mA, below the 2 mA wanted.
    ("gain_beyond_rows", ({**ROWS, "ic": "2.1 mA"}, CONTRACT), ({**ROWS, "ic": "1.9 mA"}, CONTRACT)),
    (
        "vce_sat_test_current",
        ({"vce_sat_rows": "1 mA = 0.1 V"}, CONTRACT),
        ({"vce_sat_rows": "2 mA = 0.1 V"}, CONTRACT),
    ),
    ("unused_rail", ({"vbb": "5 V"}, CONTRACT), ({"vbb": "5 V", "network": "fixed_base"}, FIXED)),
    (
        "unused_reference",
        ({"reference_kind": "diode"}, CONTRACT),
        ({"reference_kind": "diode", "network": "diode_divider"}, CONTRACT),
    ),
    (
        "limit_not_applicable",
        ({"network": "fixed_base", "bleeder_current": "1 mA"}, FIXED),
        ({"bleeder_current": "1 mA"}, CONTRACT),
    ),
    ("gain_maximum_assumed", ({"hfe": ">= 40"}, CONTRACT), ({"hfe": "40 : 200"}, CONTRACT)),
    # 0.65 V held over 11 K and over 10 K.
    (
        "vbe_fixed",
        ({"vbe_model": "fixed", "temperature": "20 : 31 °C"}, CONTRACT),
        ({"vbe_model": "fixed", "temperature": "20 : 30 °C"}, CONTRACT),
    ),
    # VCE(sat) is 0.2 V.
    ("switch_like", ({"vce": "0.39 V"}, CONTRACT), ({"vce": "0.41 V"}, CONTRACT)),
    (
        "fixed_base_gain",
        ({"network": "fixed_base", "hfe": "100 : 151"}, FIXED),
        ({"network": "fixed_base", "hfe": "100 : 150"}, FIXED),
    ),
    (
        "fixed_base_gain",
        ({"network": "fixed_base"}, FIXED),
        ({"network": "fixed_base", "resistors_re_use": "yes"}, {**FIXED, "re": "1k"}),
    ),
    # rc of 5k6 would have to drop 11 V of the 8 V that re leaves.
    ("saturated", ({}, {**CONTRACT, "rc": "5k6"}), ({}, CONTRACT)),
    # An open-circuit base voltage of 12 V · 0.1/1000.1 turns nothing on.
    ("cut_off", ({}, {**CONTRACT, "r1": "1M", "r2": "100 ohm"}), ({}, CONTRACT)),
    # The default VBE spread of 50 mV is a fifth of VE = 0.25 V; open-circuit base voltages 0.86 V and 1 V less about 0.64 V.
    (
        "emitter_voltage_small",
        ({}, {"r1": "43k", "r2": "3k3", "rc": "1k8", "re": "200 ohm"}),
        ({}, {"r1": "43k", "r2": "3k9", "rc": "1k8", "re": "200 ohm"}),
    ),
    # IC/hFE min = 18 uA: five of them are 90 uA; the contract's bleeder carries 173 uA, less than five of 39 uA.
    ("bleeder_feeble", ({}, {"r1": "130k", "r2": "75k", "rc": "1k8", "re": "1k8"}), ({}, CONTRACT)),
    ("bleeder_feeble", ({"hfe": "50 : 450"}, CONTRACT), ({"hfe": "60 : 450"}, CONTRACT)),
    # 2 mA over 110: thirty base currents are 0.55 mA; 12 V over 8.4k is 1.4 mA, over 67k 0.17 mA.
    ("bleeder_stiff", ({}, STIFF), ({}, CONTRACT)),
    # VB is 36 % of the supply: ±28 % of 12.5 V is most of the drift, ±1 % of 12 V next to nothing.
    ("supply_dominates", ({"supply": "9 : 12.5 : 16 V"}, CONTRACT), ({"supply": "12 V ± 1 %"}, CONTRACT)),
    # Rp = 15.4k; 1 uA at 25 °C is 22.6 uA at 70 °C (doubling per 10 K), 0.35 V of about 3.6 V.. 2 uA is twice that.
    ("leakage_lift", ({"icbo": "2 uA"}, CONTRACT), ({"icbo": "0.5 uA"}, CONTRACT)),
    # 0.1 uA becomes 2.3 uA at 70 °C, against IB of 11 uA; 10 nA a tenth of that.
    (
        "leakage_lift",
        ({"network": "fixed_base", "icbo": "0.1 uA"}, FIXED),
        ({"network": "fixed_base", "icbo": "10 nA"}, FIXED),
    ),
    # IC is near 1.94 mA: 35 % below 3 mA, and 22 % below 2.5 mA; VCE is on target.
    ("off_target", ({"ic": "3 mA"}, CONTRACT), ({"ic": "2.5 mA"}, CONTRACT)),
    # r_intrinsic = 25.7 mV over 1.95 mA is 13.2 ohm.
    (
        "r_intrinsic_gain",
        ({**SIGNAL, "signal_unbypassed": "12 ohm"}, CONTRACT),
        ({**SIGNAL, "signal_unbypassed": "15 ohm"}, CONTRACT),
    ),
    # At 20 Hz r_intrinsic of 13 ohm needs about 600 uF, re of 1.8k alone 4.4 uF; with half of re unbypassed it is 2 times that.
    (
        "bypass_capacitor",
        ({"signal_corner": "20 Hz"}, CONTRACT),
        ({"signal_corner": "20 Hz", "signal_bypass": "part", "signal_unbypassed": "1k2"}, CONTRACT),
    ),
    # 12 V over 3.6 ohm are 3.3 A, over 3.6k 3.3 mA; over 56 ohm 214 mA, a hundred times 2 mA and more.
    ("unit_slip", ({}, {**CONTRACT, "rc": "1.8 ohm", "re": "1.8 ohm"}), ({}, CONTRACT)),
    ("unit_slip", ({}, {**CONTRACT, "r1": "36 ohm", "r2": "20 ohm"}), ({}, CONTRACT)),
    # 100 ppm/K over 45 K are 0.45 %: with 0.6 % of life more than the 1 % of the class, with 0.5 % less.
    ("band_beyond_tolerance", ({"life": "0.6 %"}, CONTRACT), ({"life": "0.5 %"}, CONTRACT)),
    # VCEO 45 V: 80 % are 36 V.
    ("vceo", ({"type": "BC847B", "supply": "36.5 V"}, CONTRACT), ({"type": "BC847B", "supply": "35.5 V"}, CONTRACT)),
    # IC reaches about 2.1 mA.
    ("ic_max", ({"ic_max": "4 mA"}, CONTRACT), ({"ic_max": "5 mA"}, CONTRACT)),
    ("high_voltage", ({"supply": "50 V ± 1 %"}, {**CONTRACT, "rc": "18k"}), ({"supply": "50 V"}, {**CONTRACT, "rc": "18k"})),
    # 100 mW: about 20 mA times 11 V, against 2.1 mA times 5.7 V.
    ("dissipation", (HOT, WARM), ({}, CONTRACT)),
    # 250 mW at 25 °C and 150 °C at most: 160 mW are left at 70 °C; 0.2 W is more than half of it, 11 mW are not.
    ("dissipation", ({**HOT, "ptot": "0.25 W", "tj_max": "150 °C"}, WARM), ({"ptot": "0.25 W", "tj_max": "150 °C"}, CONTRACT)),
    # At most 35 mW (6 V times 5.8 mA) through 250 K/W are 9 K; through 100 K/W they are 3.5 K; re ends the matter.
    ("no_re_heat", ({"network": "fixed_base"}, {**FIXED, "rc": "1k"}), ({"network": "fixed_base", "rth_ja": "50 K/W"}, FIXED)),
    ("no_re_heat", ({"network": "fixed_base"}, {**FIXED, "rc": "1k"}), ({}, CONTRACT)),
    # VE is 36 % of the supply less 0.65 V: of 32 V 10.8 V, 65 mW in 1.8k; of 12 V 3.6 V, 7 mW; a chip 0805 may have 100 mW.
    ("resistor_half", ({"supply": "32 V", "style": "0805", "derating": "none"}, CONTRACT), ({"style": "0805"}, CONTRACT)),
    ("working_voltage", ({"supply": "90 V"}, {**CONTRACT, "rc": "18k"}), ({"supply": "50 V"}, {**CONTRACT, "rc": "18k"})),
    # 270 and 390 ohm at 20 mA dissipate 0.1 W and more; 1/16 W to 70 °C falls to 0.028 W at 100 °C.
    ("hot_resistor", ({**HOT, "temperature": "100 °C"}, WARM), ({**HOT, "temperature": "70 °C"}, WARM)),
    # 12 V over 2 · 1.8k: 20 mW each, half of 1/10 W is more, half of 1/16 W (0402) at 70 °C 31 mW; at 24 V four times that.
    ("resistor_when_shorted", ({"supply": "24 V", "style": "0402"}, CONTRACT), ({"style": "0402"}, CONTRACT)),
    # (155 - 70) K over 1/10 W is 850 K/W: 12 mW warm a chip 0805 by 10 K.
    ("resistor_self_heating", ({**HOT, "style": "0805"}, WARM), ({"style": "0805"}, CONTRACT)),
    # 0.2 W through 1000 K/W is 200 K above 70 °C, beyond 150 °C.
    (
        "junction_too_hot",
        ({**HOT, "rth_ja": "1000 K/W", "tj_max": "150 °C"}, WARM),
        ({"rth_ja": "1000 K/W", "tj_max": "150 °C"}, CONTRACT),
    ),
    # 11 mW through 2000 K/W are 22 K; re holds what that does to VBE and hFE to a few per cent, 100 K/W to a thousandth.
    ("self_heating", ({"rth_ja": "2000 K/W"}, CONTRACT), ({"rth_ja": "100 K/W"}, CONTRACT)),
    # Loop gain RthJA·P·(2 mV/K)/VT of a stiffly driven junction with 20 mW: 0.16 at 100 K/W; with 220 K/W 0.34 cold, and more hot.
    ("thermal_runaway", ({**STIFF_BASE, "rth_ja": "2000 K/W"}, BARE), ({**STIFF_BASE, "rth_ja": "100 K/W"}, BARE)),
    ("thermal_loop_gain", ({**STIFF_BASE, "rth_ja": "220 K/W"}, BARE), ({**STIFF_BASE, "rth_ja": "100 K/W"}, BARE)),
    # IC reaches 2.143 mA without its own heat, and a warm junction has less VBE and more gain.
    (
        "self_heating_window",
        ({"ic": "1.7 : 2 : 2.15 mA", "rth_ja": "2000 K/W"}, CONTRACT),
        ({"ic": "1.7 : 2 : 2.5 mA", "rth_ja": "2000 K/W"}, CONTRACT),
    ),
    (
        "sink_compliance",
        ({**SINK, "compliance": "7.5 V"}, {"r1": "43k", "r2": "24k", "re": "1k8"}),
        ({**SINK, "compliance": "5 V"}, {"r1": "43k", "r2": "24k", "re": "1k8"}),
    ),
]


def stage(**changes: object) -> Stage:
    given = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


def names(case: Fitted) -> set[str]:
    changes, resistors = case
    return {w.name for w in synth.check(stage(**changes), **resistors).warnings}


@pytest.mark.parametrize(("name", "does", "does_not"), CASES, ids=[f"{c[0]}-{k}" for k, c in enumerate(CASES)])
def test_warning_is_given_where_it_is_due_and_nowhere_else(name: str, does: Fitted, does_not: Fitted) -> None:
    assert name in names(does)
    assert name not in names(does_not)


def test_every_warning_has_a_case_of_its_own() -> None:
    assert {case[0] for case in CASES} | {"pinout"} == set(RULES)


def test_a_quiet_stage_has_no_warnings() -> None:
    assert names(({}, CONTRACT)) == set()


def test_what_is_told_while_a_stage_is_read_is_listed() -> None:
    emitted = {
        word.split('"')[1]
        for file in (Path(synth.__file__).parent).rglob("*.py")
        for word in regex.findall(r'(?:StageWarning|Caution)\(\s*name="[a-z_]+"', file.read_text(encoding="utf-8"))
    }
    assert emitted <= {rule.name for rule in RULES.values() if rule.told == "reading"}


def test_the_table_shows_every_threshold() -> None:
    text = " ".join(show("warnings").split())
    for rule in RULES.values():
        assert f"{rule.name} {rule.threshold[0].upper()}{rule.threshold[1:]}. {rule.reason}" in text


# --- Substitution and switches ------------------------------------------------------------------------------------


def test_pins_are_warned_of_when_another_type_is_fitted() -> None:
    # TO-92 against SOT-23 in every maker's sheet; the order of pins of 2N3904 and BC547 differs within TO-92 (facts of the trade).
    assert "TO-92 and BC847B in SOT-23" in (pinout("BC547B", "BC847B") or "")
    assert "order of emitter, base and collector" in (pinout("2N3904", "BC547B") or "")
    assert pinout("bc547b", "BC547B") is None
    assert "fitting another type" in (pinout("", "") or "")


def test_a_relay_driver_is_refused_with_the_request_that_would_be_meant() -> None:
    """A relay of 50 mA on 12 V: a forced gain of ten takes 5 mA, so (12 V - 0.7 V)/5 mA = 2.26 kohm feed the base."""
    with pytest.raises(StageError, match=r"saturated switch .* IC/IB = 10 that is IB = 5 mA, about 2\.26 kΩ from 12 V"):
        stage(ic="50 mA", vce="0.2 V")
    with pytest.raises(StageError, match=r"IB = 5 mA, accepted is more than 200 mV"):
        stage(ic="50 mA", vce="0.1 V", network="fixed_base", vbb="0.5 V")
