"""The refits shown as examples, each run as its comments say."""

from __future__ import annotations

import json
import shlex
from pathlib import Path
from typing import Any

import jsonschema
import pytest

import synth.present
from synth.catalogue import transistors
from synth.cli import main
from synth.quantities import format_resistance
from synth.replacement.sides import device, sides, swap_cautions
from synth.stage import Stage

FOLDER = Path(__file__).resolve().parents[1] / "examples" / "refits"
FILES = sorted(FOLDER.glob("*.toml"))
SCHEMA = json.loads((Path(synth.present.__file__).parent / "schema.json").read_text(encoding="utf-8"))


def run(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, str]:
    with pytest.raises(SystemExit) as stop:
        main(list(argv))
    out, err = capsys.readouterr()
    assert err == ""
    assert isinstance(stop.value.code, int)
    return stop.value.code, out


def refit(capsys: pytest.CaptureFixture[str], name: str, *options: str) -> tuple[int, dict[str, Any]]:
    code, out = run(capsys, "refit", str(FOLDER / f"{name}.toml"), *options, "--format", "json")
    answer: dict[str, Any] = json.loads(out)
    jsonschema.Draft202012Validator(SCHEMA).validate(answer)
    return code, answer


# What each comment promises; the values by hand below.
@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("gain_bin", {"r1": "160K"}),
        ("shore_receiver", {"r2": "5K1"}),
        ("nothing_changes", {}),
        ("higher_gain_breaks", {"rb": "910K"}),
    ],
)
def test_example_changes_what_its_comment_says(name: str, changes: dict[str, str], capsys: pytest.CaptureFixture[str]) -> None:
    # What one role alone can do is proved with every other kept: the shortest proof of the fewest changes.
    fitted = Stage.read(FOLDER / f"{name}.toml").values
    keep = [word for role in fitted if role not in changes for word in ("--keep", role)]
    code, answer = refit(capsys, name, *keep)
    assert code == 0
    assert answer["before"]["candidates"][0]["verdict"] == "pass"
    assert answer["after"]["candidates"][0]["verdict"] == ("fail" if changes else "pass")
    best = answer["candidates"][0]
    assert {role: format_resistance(best["resistors"][role]) for role in best["changed"]} == changes


def test_the_base_of_the_shore_receiver_rises_by_what_silicon_needs() -> None:
    """By hand: VBB = 9 V·r2/(r1 + r2) rises from 1.857 V to 2.284 V, nearly the half volt between the two junctions."""
    assert abs(9.0 * 5.1 / 20.1 - 9.0 * 3.9 / 18.9 - 0.426) < 1e-3


def test_germanium_to_silicon_is_warned_of() -> None:
    old, new = map(device, sides(Stage.read(FOLDER / "shore_receiver.toml")))
    assert {note.name for note in swap_cautions(old, new)} >= {"vbe_class", "transition_frequency", "package", "leakage"}


def test_higher_gain_cannot_be_cured_while_the_base_resistor_stays(capsys: pytest.CaptureFixture[str]) -> None:
    code, answer = refit(capsys, "higher_gain_breaks", "--keep", "rb")
    assert (code, answer["candidates"]) == (1, [])
    assert answer["infeasible"]["binding"]


@pytest.mark.parametrize("file", FILES, ids=lambda file: file.stem)
def test_example_is_a_demonstration_with_registered_types(file: Path) -> None:
    text = file.read_text(encoding="utf-8")
    assert "invented" in text
    assert max(map(len, text.splitlines())) <= 128
    stage = Stage.read(file)
    assert {stage.transistor.type, stage.replacement["type"]} <= set(transistors())
    for line in text.splitlines():
        if line.startswith("#   restpoint "):
            words = shlex.split(line[1:])
            assert words[1:3] == ["refit", file.name]
