"""The examples: each is found, proved, kept within its windows and accepted by an independent check."""

from __future__ import annotations

import csv
import json
import tomllib
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from numpy.testing import assert_allclose

import synth.present
from synth.catalogue import transistors
from synth.cli import main
from synth.networks import NETWORKS
from synth.stage import Stage

EXAMPLES = Path(__file__).resolve().parents[1] / "examples"
# Boards are looked at by test_boards.
FILES = sorted(file for file in EXAMPLES.glob("*.toml") if "[[stage]]" not in file.read_text(encoding="utf-8"))
SCHEMA = json.loads((Path(synth.present.__file__).parent / "schema.json").read_text(encoding="utf-8"))

# A candidate is solved in another batch by `check` than by `find`; the law is the same and converges to a few units in
# the last place of each of some ten operations.
REPEATED = 1e-12

every_example = pytest.mark.parametrize("file", FILES, ids=lambda file: file.stem)


def run(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, dict[str, Any]]:
    with pytest.raises(SystemExit) as stop:
        main([*argv, "--format", "json"])
    out, err = capsys.readouterr()
    assert err == ""
    answer: dict[str, Any] = json.loads(out)
    jsonschema.Draft202012Validator(SCHEMA).validate(answer)
    assert isinstance(stop.value.code, int)
    return stop.value.code, answer


def windows(file: Path) -> dict[str, tuple[float, float]]:
    """Windows of an example as its text says them, read without the package [A, V]."""
    written = {
        "hydrophone_preamp": {"ic": (400e-6, 600e-6), "vce": (3.2, 6.8)},
        "battery_monitor": {"ic": (0.8e-3, 1.2e-3), "vce": (0.5, float("inf"))},
        "high_side": {"ic": (4e-3, 6e-3), "vce": (2.5, 7.5)},
        "cable_driver": {"ic": (2.4e-3, 3.6e-3), "vce": (3.825, 5.175)},
        "wave_staff_amplifier": {"ic": (0.8e-3, 1.2e-3), "vce": (0.9, float("inf"))},
        "pressure_line_stage": {"ic": (1.7e-3, 2.3e-3), "vce": (4.25, 5.75)},
        "float_amplifier": {"ic": (1.6e-3, 2.4e-3), "vce": (3.5, 6.5)},
        "mast_lamp": {"ic": (8.5e-3, 11.5e-3)},
        "conductivity_bridge": {"ic": (0.9e-3, 1.1e-3), "vce": (4.92, 7.08)},
    }
    return written[file.stem]


def test_every_network_has_an_example() -> None:
    shown = {name for file in FILES for name in Stage.read(file).networks}
    assert shown == set(NETWORKS)


@every_example
def test_example_is_found_and_proved(file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, answer = run(capsys, "find", str(file))
    assert code == 0
    assert (answer["search"]["status"], answer["search"]["complete"]) == ("optimal", True)
    # About a second on one core; counted, since clocks are for benchmarks.
    assert answer["search"]["evaluated"] < 2_000_000


@every_example
def test_example_stays_within_its_windows(file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _, answer = run(capsys, "find", str(file))
    for candidate in answer["candidates"]:
        for quantity, (low, high) in windows(file).items():
            least, greatest = candidate["worst"][quantity]
            assert low <= least <= candidate["nominal"][quantity] <= greatest <= high


@every_example
def test_winner_of_example_passes_a_check_of_its_own(file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _, answer = run(capsys, "find", str(file))
    best = answer["candidates"][0]
    fitted = [word for role, ohm in best["resistors"].items() for word in (f"--{role}", f"{ohm!r} ohm")]
    code, verdict = run(capsys, "check", str(file), *fitted, "--network", best["network"])
    assert code == 0
    (again,) = verdict["candidates"]
    assert again["resistors"] == best["resistors"]
    for quantity in ("ic", "vce"):
        assert_allclose(again["worst"][quantity], best["worst"][quantity], rtol=REPEATED, atol=0)
    assert_allclose(again["drift"]["q_point"], best["drift"]["q_point"], rtol=REPEATED, atol=0)


@every_example
def test_nominal_point_of_example_obeys_kirchhoff(file: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Sums of drops around the loops, from the JSON alone: rails = rc + VCE + re, and IE = IC + IB through re."""
    _, answer = run(capsys, "find", str(file))
    for candidate in answer["candidates"]:
        roles, nominal = candidate["roles"], candidate["nominal"]
        supply = answer["stage"]["supply"]
        rails = supply.get("vload", supply["vcc"])[1] + (supply["vee"][1] if "vee" in supply else 0.0)
        drops = sum(roles[role]["drop"] for role in ("rc", "re") if role in roles)
        # Rounding of a few additions of voltages below 30 V.
        assert_allclose(drops + nominal["vce"], rails, rtol=1e-12, atol=0)
        if "re" in roles:
            assert_allclose(roles["re"]["current"], nominal["ic"] + nominal["ib"], rtol=1e-12, atol=0)
        for role, duty in roles.items():
            assert_allclose(duty["drop"], candidate["resistors"][role] * duty["current"], rtol=1e-12, atol=0)


@every_example
def test_example_says_that_it_is_invented(file: Path) -> None:
    text = file.read_text(encoding="utf-8")
    comments = [line for line in text.splitlines() if line.startswith("#")]
    assert any("invented" in line for line in comments)
    assert len(comments) >= 8
    assert max(map(len, text.splitlines())) <= 120


@every_example
def test_type_of_example_is_registered(file: Path) -> None:
    kind = tomllib.loads(file.read_text(encoding="utf-8"))["transistor"].get("type")
    assert kind is None or kind in transistors()


def test_stock_list_of_an_example_is_used(capsys: pytest.CaptureFixture[str]) -> None:
    file = EXAMPLES / "battery_monitor.toml"
    stock = tomllib.loads(file.read_text(encoding="utf-8"))["resistors"]["stock"]
    with (EXAMPLES / stock).open(encoding="utf-8", newline="") as lines:
        rows = list(csv.DictReader(lines))
    # Letter codes of IEC 60062 turned back into ohm by hand.
    ohms = {
        float(text.replace("R", "")) if "R" in text else round(1e3 * float(text.replace("K", ".")), 6)
        for text in (row["value"] for row in rows if row["quantity"] != "0")
    }
    assert len(ohms) == len(rows) - 1
    _, answer = run(capsys, "find", str(file))
    assert {ohm for candidate in answer["candidates"] for ohm in candidate["resistors"].values()} <= ohms


def test_an_example_shows_a_verdict_that_fails(capsys: pytest.CaptureFixture[str]) -> None:
    """What the comment beside [values] of the high side promises."""
    code, answer = run(capsys, "check", str(EXAMPLES / "high_side.toml"))
    assert code == 1
    failed = {limit["name"] for limit in answer["candidates"][0]["limits"] if limit["verdict"] == "fail"}
    assert failed == {"target.ic", "bleeder_current"}


def test_nodes_of_the_high_side_stand_against_the_negative_pole(capsys: pytest.CaptureFixture[str]) -> None:
    """With the negative pole at 0 V the emitter of a PNP is one drop below the supply, its collector one drop above 0 V."""
    _, answer = run(capsys, "find", str(EXAMPLES / "high_side.toml"))
    best = answer["candidates"][0]
    nodes, drop = best["nominal"]["nodes"], {role: duty["drop"] for role, duty in best["roles"].items()}
    # One subtraction of voltages below 20 V.
    assert_allclose(nodes["e"], 12.6 - drop["re"], rtol=1e-13, atol=0)
    assert_allclose(nodes["b"], 12.6 - drop["r2"], rtol=1e-13, atol=0)
    assert_allclose(nodes["c"], drop["rc"], rtol=1e-13, atol=0)
