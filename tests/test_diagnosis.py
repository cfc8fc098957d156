"""What readings say of a unit: the truth lies in every interval, and the part that was spoilt is among those blamed."""

from __future__ import annotations

import json
import re
from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq

from synth.cli import main
from synth.diagnosis import Span, diagnose
from synth.stage import Stage, StageError

STAGE: dict[str, Any] = {
    "supply": "12 V ± 1 %", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %",
    "r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8",
}  # fmt: skip
FITTED = {"r1": 43e3, "r2": 24e3, "rc": 1.8e3, "re": 1.8e3}
VT = 1.380649e-23 / 1.602176634e-19 * 298.15
"""Both constants are exact in the SI of 2019."""


def unit(r: dict[str, float], *, vcc: float = 12.0, hfe: float = 250.0, delta: float = 0.0) -> dict[str, float]:
    """Node voltages of a divider stage at 25 °C from its node equations, by a bracketed root: IC, VB, VE, VC."""

    def vb_error(ic: float) -> float:
        ve = r["re"] * ic * (1.0 + 1.0 / hfe)
        vb = ve + 0.65 + delta + VT * np.log(ic / 2e-3)
        return float((vcc - vb) / r["r1"] - vb / r["r2"] - ic / hfe)

    ic = float(brentq(vb_error, 1e-9, 0.1, xtol=1e-15))
    ve = r["re"] * ic * (1.0 + 1.0 / hfe)
    return {"ic": ic, "ve": ve, "vb": ve + 0.65 + delta + VT * np.log(ic / 2e-3), "vc": vcc - r["rc"] * ic}


def read(nodes: dict[str, float], error: float = 0.0, meter: float = 0.002) -> dict[str, str]:
    """Readings of a meter of some accuracy, off by less than that."""
    return {f"measured_{n}": f"{nodes[n] * (1.0 + error):.9f} V ± {100 * meter} %" for n in ("vb", "vc", "ve")}


def inside(span: Span | None, value: float) -> bool:
    return span is not None and span.low <= value <= span.high


@pytest.mark.parametrize("seed", range(40))
def test_a_sound_unit_is_called_sound_and_the_truth_is_inside(seed: int) -> None:
    """Any unit within every spread, read by a meter within its accuracy."""
    rng = np.random.default_rng(seed)
    r = {role: ohm * (1.0 + rng.uniform(-0.01, 0.01)) for role, ohm in FITTED.items()}
    gain, vcc = float(rng.uniform(110.0, 450.0)), 12.0 * (1.0 + rng.uniform(-0.01, 0.01))
    nodes = unit(r, vcc=vcc, hfe=gain, delta=float(rng.uniform(-0.05, 0.05)))
    found = diagnose(Stage(**STAGE, **read(nodes, error=float(rng.uniform(-0.002, 0.002)))))
    assert found.sound
    assert found.blamed == ()
    assert inside(found.ic, nodes["ic"])
    assert inside(found.hfe, gain)
    assert inside(found.likely_hfe, gain)
    assert inside(found.ib, nodes["ic"] / gain)
    assert inside(found.vce, nodes["vc"] - nodes["ve"])


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize(
    ("role", "factor"),
    [("r1", 0.8), ("r1", 1.5), ("r1", 3.0), ("r2", 0.6), ("r2", 1.2), ("rc", 0.6), ("rc", 1.5), ("re", 0.7), ("re", 1.5), ("re", 3.0)],
)
def test_a_drifted_resistor_is_among_those_blamed(role: str, factor: float, seed: int) -> None:
    """What it drifted to lies in the interval that would explain the readings."""
    rng = np.random.default_rng(seed)
    r = {name: ohm * (1.0 + rng.uniform(-0.01, 0.01)) for name, ohm in FITTED.items()}
    r[role] = FITTED[role] * factor
    nodes = unit(r, hfe=float(rng.uniform(110.0, 450.0)))
    assert nodes["vc"] - nodes["ve"] > 0.5, "the law of the active region has to hold"
    found = diagnose(Stage(**STAGE, **read(nodes)))
    assert not found.sound
    suspect = next(s for s in found.suspects if s.name == role)
    assert suspect.explains
    assert inside(suspect.needed, r[role])
    assert suspect in found.blamed


def test_a_drifted_collector_resistor_is_told_from_the_others() -> None:
    """IC through re and through rc disagree: neither divider resistor can explain that, nor can the transistor."""
    nodes = unit({**FITTED, "rc": 3e3})
    found = diagnose(Stage(**STAGE, **read(nodes)))
    blamed = {s.name for s in found.blamed}
    assert "rc" in blamed
    assert not blamed & {"r1", "r2", "transistor"}
    # Whether rc or re drifted no voltage tells: either current is among what is left.
    assert inside(found.ic, nodes["ic"])


@pytest.mark.parametrize("vcc", [9.0, 14.0])
def test_a_wrong_supply_is_blamed(vcc: float) -> None:
    nodes = unit(FITTED, vcc=vcc)
    found = diagnose(Stage(**STAGE, **read(nodes)))
    supply = next(s for s in found.suspects if s.name == "vcc")
    assert not found.sound
    assert supply in found.blamed
    assert inside(supply.needed, vcc)


def test_gain_out_of_its_spread_blames_the_transistor() -> None:
    """A tenth of the least gain: the divider sags by more than 1 % resistors can, and re and rc still agree."""
    nodes = unit(FITTED, hfe=11.0)
    found = diagnose(Stage(**STAGE, **read(nodes)))
    assert not found.sound
    transistor = next(s for s in found.suspects if s.name == "transistor")
    assert transistor in found.blamed
    assert "hFE lies outside" in transistor.text
    assert inside(found.hfe, 11.0)
    assert found.likely_hfe is None


def test_an_open_junction_is_told_by_its_voltage() -> None:
    """Emitter lead open: no current, the base at the divider's own voltage, the collector at the supply."""
    vb = 12.0 * 24.0 / 67.0
    found = diagnose(Stage(**STAGE, measured_vb=f"{vb:.6f} V ± 0.2 %", measured_vc="12 V ± 0.2 %", measured_ve="0 V ± 1 mV"))
    assert not found.sound
    transistor = next(s for s in found.suspects if s.name == "transistor")
    assert transistor in found.blamed
    assert "open" in transistor.text


def test_a_pnp_below_a_positive_ground_reads_negative() -> None:
    """The mirror image, its emitter's rail being the positive pole at 0 V: every node reads below it."""
    nodes = unit(FITTED)
    mirrored = {f"measured_{n}": f"{-nodes[n]:.9f} V ± 10 mV" for n in ("vb", "vc", "ve")}
    found = diagnose(Stage(**STAGE, polarity="pnp", ground="positive", **mirrored))
    assert found.sound
    assert inside(found.ic, nodes["ic"])


def test_too_few_readings_are_refused() -> None:
    with pytest.raises(StageError, match=r"^measured: read 'vb', which is too little to tell anything by, accepted is at least two"):
        diagnose(Stage(**STAGE, measured_vb="4 V ± 10 mV"))


def test_a_network_whose_load_is_unknown_is_refused() -> None:
    stage = Stage(supply="12 V", ic="5 mA", hfe="110 : 450", network="sink", re="470R", r1="10k", r2="3k3",
                  measured_vb="3 V ± 10 mV", measured_ve="2.35 V ± 10 mV")  # fmt: skip
    with pytest.raises(StageError, match=r"^network: read 'sink', whose reference element or load no reading"):
        diagnose(stage)


# --- Command --------------------------------------------------------------------------------------------------------


def run(capsys: pytest.CaptureFixture[str], nodes: dict[str, float], *argv: str) -> tuple[int, str, str]:
    options = [f"--{key.replace('_', '-')}={value}" for key, value in {**STAGE, **read(nodes)}.items()]
    with pytest.raises(SystemExit) as stop:
        main(["refit", "--diagnose", *options, *argv])
    out, err = capsys.readouterr()
    assert isinstance(stop.value.code, int)
    return stop.value.code, out, err


def test_command_names_what_explains_the_readings(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, unit({**FITTED, "rc": 3e3}))
    assert (code, err) == (1, "")
    assert out.startswith("FAULT")
    assert re.search(r"RC +explains the readings if it is 2\.\d+ to 3\.\d+ kΩ instead of 1K8", out)
    assert max(map(len, out.splitlines())) <= 100


def test_command_finds_a_sound_unit_sound(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, _ = run(capsys, unit(FITTED), "--format", "json")
    assert code == 0
    body = json.loads(out)
    assert (body["schema"], body["sound"], body["blamed"]) == ("restpoint/diagnosis/1", True, [])
    assert body["hfe"][0] <= 250.0


def test_a_form_that_a_diagnosis_does_not_have_is_refused(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, unit(FITTED), "--format", "csv")
    assert (code, out, err) == (2, "", "--diagnose: goes with --format table or json, read 'csv'\n")
