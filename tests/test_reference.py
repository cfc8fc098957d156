"""The reference element of a base voltage: its straight line, its defaults, what it does to a stage, what is refused.

Figures are worked out by hand beside each check; the stages are invented.
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

import synth
from synth.quantities import Spread
from synth.reference import Reference
from synth.stage import Stage, StageError

HAND = 1e-12
"""Hand formulas in double precision: some tens of roundings."""
ROOM = 298.15

ZENER = Reference(
    kind="zener",
    voltage=Spread(4.8, 5.1, 5.4),
    current=5e-3,
    tc=Spread(-2e-3, -1e-3, 1e-3),
    slope=Spread(10.0, 40.0, 60.0),
)
"""A 5.1 V diode at 5 mA; invented."""


def stage(**changes: object) -> Stage:
    given = {"network": "sink", "supply": "12 V", "ic": "10 mA", "hfe": "100 : 300", "tolerance": "1 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


def amplifier(**changes: object) -> Stage:
    given = {"supply": "12 V ± 2 %", "ic": "2 mA", "vce": "5 V", "hfe": "200 : 450", "series": "E24", "tolerance": "1 %"}
    return Stage(**{**given, **changes})  # type: ignore[arg-type]


# The straight line


def test_line_passes_through_the_test_point() -> None:
    # 5.1 V − 1 mV/K · 50 K = 5.05 V at 75 °C and 5 mA; 40 ohm take 0.2 V of it at no current.
    line = ZENER.line(0.0, 40.0, ROOM + 50.0)
    assert_allclose(line["vref"], 5.05 - 0.2, rtol=HAND, atol=0)
    assert_allclose(line["vref"] + line["r_ref"] * 5e-3, 5.05, rtol=HAND, atol=0)


def test_deviation_widens_away_from_room_temperature() -> None:
    # 40 K warmer: −0.3 V with 1 mV/K below nominal, +0.3 V with 2 mV/K above; 40 K colder the other way about.
    assert_allclose(ZENER.deviation(ROOM + 40.0), [-0.3 - 0.04, 0.3 + 0.08], rtol=HAND, atol=0)
    assert_allclose(ZENER.deviation(ROOM - 40.0), [-0.3 - 0.08, 0.3 + 0.04], rtol=HAND, atol=0)
    assert_allclose(ZENER.deviation(ROOM), [-0.3, 0.3], rtol=HAND, atol=0)


# Defaults


def test_diode_has_the_law_of_the_transistor() -> None:
    # A tenth of 10 mA is 1 mA: 0.65 V + VT·ln(1 mA/2 mA) with VT = 25.6926 mV; slope VT/1 mA; −(1.17 − V)/T0 − 3·VT/T0.
    reference = stage(reference_kind="diode").reference
    assert reference is not None
    vt = 8.617333262e-5 * ROOM
    volts = 0.65 - vt * np.log(2.0)
    # The texts under assumed have four figures.
    assert_allclose(reference.voltage.nominal, volts, rtol=1e-4, atol=0)
    assert_allclose(reference.slope.nominal, vt / 1e-3, rtol=1e-3, atol=0)
    assert_allclose(reference.tc.nominal, (volts - 1.17) / ROOM - 3.0 * vt / ROOM, rtol=1e-3, atol=0)
    assert reference.current == 1e-3


def test_elements_in_series_add_up() -> None:
    one = stage(reference_kind="diode").reference
    two = stage(reference_kind="diode", reference_number="2").reference
    assert one is not None
    assert two is not None
    for name in ("voltage", "tc", "slope"):
        for end in ("low", "nominal", "high"):
            assert_allclose(getattr(getattr(two, name), end), 2.0 * getattr(getattr(one, name), end), rtol=HAND, atol=0)


@pytest.mark.parametrize(("volts", "sign"), [("3.3 V", -1.0), ("9.1 V", 1.0)])
def test_usual_coefficient_of_a_zener_diode_turns_near_five_volts(volts: str, sign: float) -> None:
    # Common practice: below about 5 V tunnelling (falls with temperature), above it avalanche (rises).
    reference = stage(reference_kind="zener", reference_voltage=volts).reference
    assert reference is not None
    assert np.sign(reference.tc.nominal) == sign


def test_what_is_assumed_of_a_reference_is_listed() -> None:
    listed = {note.key for note in stage(reference_kind="led", reference_voltage="1.8 V ± 0.1 V").assumed}
    assert {f"reference.{leaf}" for leaf in ("number", "current", "tc", "slope")} <= listed


def test_a_saved_stage_with_a_reference_reads_back(tmp_path: object) -> None:
    given = stage(reference_kind="zener", reference_voltage="5.1 V ± 5 %", vload="24 V")
    file = f"{tmp_path}/sink.toml"
    with open(file, "w", encoding="utf-8") as out:
        out.write(given.to_toml())
    again = Stage.read(file)
    assert (again.reference, again.rails, again.voltages) == (given.reference, given.rails, {})


# What it does


def test_compensating_junction_takes_temperature_out_of_the_drift() -> None:
    """Common practice: a diode like the base-emitter junction, in series with r2, follows it.

    Both networks with the same resistors in effect: by hand the divider's r2 is larger by what the diode drops. The drift
    that temperature alone causes is then less than half.
    """
    cold_hot = {"temperature": "-20 : 25 : 70 °C", "tcr": "0 ppm/K"}
    plain = synth.check(amplifier(**cold_hot), r1="43k", r2="20k", rc="1k8", re="1k6").candidates[0]
    diode = synth.check(
        amplifier(network="diode_divider", reference_kind="diode", **cold_hot), r1="43k", r2="17k4", rc="1k8", re="1k6"
    ).candidates[0]
    assert_allclose(diode.nominal.ic, plain.nominal.ic, rtol=0.03, atol=0)

    def spread(answer: object, hot: str) -> float:
        fixed = {**cold_hot, "temperature": hot, "vbe": "0.65 V", "hfe": "300", "supply": "12 V"}
        network = {"network": "diode_divider", "reference_kind": "diode", "reference_voltage": "0.5913 V"} if answer is diode else {}
        values = {"r1": "43k", "r2": "17k4" if answer is diode else "20k", "rc": "1k8", "re": "1k6"}
        return synth.check(amplifier(**{**fixed, **network}), **values).candidates[0].nominal.ic

    drift = {id(c): spread(c, "70 °C") - spread(c, "-20 °C") for c in (plain, diode)}
    assert abs(drift[id(diode)]) < 0.5 * abs(drift[id(plain)])


def test_sink_by_hand() -> None:
    # 5 V at the base, 0.6 V across the junction, 440 ohm: IE = 10 mA; a gain of 10^6 leaves 1e-6 of it to the base.
    fixed = {"vbe_model": "fixed", "vbe": "0.6 V", "hfe": "1e6", "temperature": "25 °C", "vload": "24 V", "tcr": "0 ppm/K"}
    answer = synth.check(
        stage(reference_kind="zener", reference_voltage="5 V", reference_slope="0 ohm", reference_tc="0 V/K", **fixed),
        r1="1k", re="440 ohm",
    )
    best = answer.candidates[0]
    assert_allclose(best.nominal.ic, 4.4 / 440.0, rtol=2e-6, atol=0)
    assert_allclose(best.nominal.vce, 24.0 - 4.4, rtol=1e-9, atol=0)
    assert best.roles["r1"].between == ("VCC", "base")
    (compliance,) = (v for v in best.limits if v.name == "compliance")
    # re at 1 % below nominal draws no more emitter voltage: 24 V − 4.4 V − 0.2 V at every corner.
    assert_allclose(compliance.worst, 19.4, rtol=1e-9, atol=0)
    assert compliance.limit == 8.0


def test_source_is_the_mirror_image_of_a_sink() -> None:
    given = stage(reference_kind="zener", reference_voltage="5.1 V ± 5 %", series="E12", tolerance="5 %")
    npn, pnp = (synth.find(s, top=1).best for s in (given, given.replace(polarity="pnp", ground="positive")))
    assert npn is not None
    assert pnp is not None
    assert npn.resistors == pnp.resistors
    assert_allclose(pnp.nominal.nodes["b"], -npn.nominal.nodes["b"], rtol=HAND, atol=0)


# Refusals


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ({"reference_kind": "zener"}, r"reference\.voltage is not given and has no default for zener, accepted is the voltage"),
        ({"reference_kind": "zener", "reference_voltage": "15 V"}, r"reference\.voltage: read '15 V', which is not below the supply"),
        ({"reference_kind": "diode", "reference_current": "0 A"}, r"reference\.current: read '0 A', which is no current"),
        ({"reference_kind": "diode", "reference_voltage": "-0.1 : 0.7 V"}, r"reference\.voltage: read '-0\.1 : 0\.7 V', which goes down"),
        ({"reference_kind": "diode", "reference_slope": "-1 : 20 ohm"}, r"reference\.slope: .*-1"),
        ({"reference_kind": "diodes"}, r"reference\.kind: read 'diodes', which is unknown.*nearest is 'diode'"),
        ({"vce": "5 V"}, r"target\.vce: read '5 V', which means nothing for sink: the load decides it"),
        ({"network": "diode_divider", "vce": "5 V"}, r"reference\.kind is not given, but network diode_divider needs it"),
        ({"network": ["sink", "divider"], "vce": "5 V"}, r"of which sink leaves VCE to its load"),
        ({"network": "follower", "vc": "5 V"}, r"target\.vc: read '5 V', but the collector of follower sits on its rail"),
        ({"network": "divider", "vce": "5 V", "ve": "1 V"}, r"target\.ve: read '1 V', but target\.vce is given too"),
        ({"network": "fixed_base", "ve": "1 V", "resistors_re_use": "no"}, r"resistors\.re\.use: read 'no', but target\.ve is the drop"),
        ({"network": "divider", "vc": "12 V"}, r"target\.vc: read '12 V', which is not below the 12 V between the rails"),
        ({"resistors_r2_use": "no"}, r"resistors\.r2\.use: read 'no', without which sink cannot do"),
        ({"values_rb": "10k"}, r"values\.rb: read 'rb', which is no role of sink"),
    ],
)
def test_what_contradicts_itself_is_refused(given: dict[str, object], message: str) -> None:
    with pytest.raises(synth.RestpointError, match=message):
        stage(**given)


def test_reference_that_no_network_uses_is_warned_about() -> None:
    warned = {w.name: w.text for w in amplifier(reference_kind="diode").warnings}
    assert "divider does not use it" in warned["unused_reference"]


def test_error_of_a_stage_is_one_of_the_package() -> None:
    assert issubclass(StageError, synth.RestpointError)


# Targets of VC and VE


def test_vc_and_ve_drift_from_their_own_targets() -> None:
    for quantity, target in (("vc", 8.0), ("ve", 2.0)):
        answer = synth.find(amplifier(vce=None, **{quantity: f"{target} V"}), top=3)
        best = answer.best
        assert best is not None
        low, high = best.worst[quantity]
        assert_allclose(best.drift.of()[quantity], max(high / target - 1.0, 1.0 - low / target), rtol=1e-12, atol=0)
        assert set(best.drift.of()) == {"ic", quantity}
        assert quantity in best.budget
        # Against 0 V the collector of an NPN stage on a negative ground reads VC, and re drops VE.
        node = {"vc": best.nominal.nodes["c"], "ve": best.roles["re"].drop}[quantity]
        assert_allclose(getattr(best.nominal, quantity), node, rtol=1e-12, atol=0)


def test_a_diode_is_kept_where_its_straight_line_holds() -> None:
    """VT over its test current is no slope at ten times that current: half to twice it is allowed."""
    best = synth.find(stage(tolerance="5 %", reference_kind="diode", reference_number="2"), top=1).best
    assert best is not None
    (verdict,) = (v for v in best.limits if v.name == "reference_current")
    assert verdict.limit == (0.5e-3, 2e-3)
    assert verdict.verdict == "pass"


def test_fixed_vbe_is_compensated_by_a_fixed_diode() -> None:
    reference = stage(reference_kind="diode", vbe_model="fixed").reference
    assert reference is not None
    assert reference.tc == Spread.exact(0.0)


def test_defaults_of_an_led_fit_each_other() -> None:
    # A tenth of IC in the bleeder would never light an LED of 2 mA: its own limit takes the place.
    given = amplifier(network="diode_divider", reference_kind="led", reference_voltage="1.8 V", hfe="110 : 450", series="E96")
    answer = synth.find(given, top=1)
    assert answer.passed
