"""Many transistors in one stage, and the change record of a refit."""

from __future__ import annotations

import csv
import json
import re as regex
from functools import cache
from pathlib import Path
from typing import Any

import jsonschema
import pytest
from numpy.testing import assert_allclose

import synth
import synth.present
from synth.catalogue import transistors
from synth.cli import main
from synth.present.change_record import BLANKS, to_change_list, to_change_record
from synth.present.scan import render_scan, scan_csv, scan_json, scan_markdown
from synth.replacement import Refit, Scan, scan
from synth.stage import Stage, StageError

ROOT = Path(__file__).resolve().parents[1]
SCHEMA = json.loads((Path(synth.present.__file__).parent / "among.json").read_text(encoding="utf-8"))
# One role is free: the rest of the time goes into what is tested.
FIXED = ("r1", "rc", "re")
STAGE = Stage.read(ROOT / "tests" / "scenarios" / "obsolete.toml").replace(hfe="110 : 220", tolerance="1 %")


@cache
def scanned() -> Scan:
    return scan(STAGE)


@cache
def refitted() -> Refit:
    return synth.refit(STAGE, to_hfe="420 : 800", keep=FIXED, command="restpoint refit obsolete.toml")


# --- Scan -----------------------------------------------------------------------------------------------------------


def test_every_type_of_the_polarity_is_tried_once() -> None:
    labels = [row.label for row in scanned().tried]
    assert len(labels) == len(set(labels))
    npn = {name for name, row in transistors().items() if row.polarity == "npn"}
    assert npn <= set(labels)
    assert not {name for name, row in transistors().items() if row.polarity == "pnp"} & set(labels)


@pytest.mark.parametrize("kind", ["BC847C", "2N5088", "BC547A"])
def test_a_row_says_what_the_refit_of_that_type_says(kind: str) -> None:
    """The scan judges every value of every role; the refit proves the best single change by its own search."""
    row = next(row for row in scanned().tried if row.label == kind)
    whole = synth.refit(STAGE, to=kind, keep=() if row.role is None else [r for r in ("r1", "r2", "rc", "re") if r != row.role])
    assert row.does == "one"
    best = whole.best
    assert best is not None
    assert best.changed == (row.role,)
    assert best.candidate.resistors[str(row.role)] == row.value
    # The same candidate in another batch; some ten operations.
    assert_allclose(best.candidate.drift.q_point, row.drift, rtol=1e-12, atol=0)


def test_filters_leave_out_what_does_not_reach_them() -> None:
    found = scan(STAGE, least={"vceo": 60.0, "ic_max": 0.09}, packages=["sot-23"], keep=("r1", "r2", "rc", "re"))
    names = {row.label for row in found.tried}
    # From memory of the registered types: of this family only BC846 stands 65 V.
    assert names == {"BC846A", "BC846B", "BC846"}
    assert {row.does for row in found.tried} <= {"kept", "no"}


def test_a_list_of_ones_own_is_tried(tmp_path: Path) -> None:
    file = tmp_path / "drawer.csv"
    file.write_text("name,type,hfe,package,vceo\nold tin,,150 : 200,TO-92,30 V\n,BC547C,,,\n", encoding="utf-8")
    found = scan(STAGE.replace(ic="1.6 mA ± 20 %", vce=">= 1.5 V"), file)
    rows = {row.label: row for row in found.tried}
    assert set(rows) == {"old tin", "BC547C"}
    tin = rows["old tin"].device
    assert tin is not None
    assert (tin.hfe[0], tin.hfe[2], tin.package, tin.vceo) == (150.0, 200.0, "TO-92", 30.0)
    assert rows["old tin"].does == "kept"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("name,gain\nx,100\n", r"drawer\.csv, line 1: read 'gain', which is no column"),
        ("name,type\nx,BC999\n", r"drawer\.csv, line 2: read 'x', which no table knows and which has no hfe"),
        ("name,hfe\nx,many\n", r"drawer\.csv, line 2: read 'x', which is refused \(.*'many'"),
    ],
)
def test_a_list_that_makes_no_sense_is_refused(text: str, message: str, tmp_path: Path) -> None:
    (tmp_path / "drawer.csv").write_text(text, encoding="utf-8")
    with pytest.raises(StageError, match=message):
        scan(STAGE, tmp_path / "drawer.csv")


def test_a_list_that_cannot_be_read_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StageError, match=r"^among: read '.*nowhere\.csv', which cannot be read \(No such file"):
        scan(STAGE, tmp_path / "nowhere.csv")
    (tmp_path / "odd.csv").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(StageError, match=r"^among: read '.*odd\.csv', which is not UTF-8"):
        scan(STAGE, tmp_path / "odd.csv")
    (tmp_path / "long.csv").write_text("type\n" + "BC547C\n" * 5001, encoding="utf-8")
    with pytest.raises(StageError, match=r"^among long\.csv: read '5001 rows', which are too many, accepted is at most 5000"):
        scan(STAGE, tmp_path / "long.csv")


def test_a_kept_role_that_is_not_fitted_is_refused() -> None:
    with pytest.raises(StageError, match=r"^keep: read 'rx', which is not fitted, accepted is one of r1, r2, rc, re"):
        scan(STAGE, keep=["rx"])


def test_forms_of_a_scan() -> None:
    body = json.loads(scan_json(scanned(), "restpoint refit"))
    jsonschema.Draft202012Validator(SCHEMA).validate(body)
    assert [row["label"] for row in body["types"]] == [row.label for row in scanned().tried]
    text = render_scan(scanned())
    assert max(map(len, text.splitlines())) <= 100
    assert "BC847C" in text
    rows = list(csv.DictReader(scan_csv(scanned()).splitlines()))
    assert len(rows) == len(scanned().tried)
    assert scan_markdown(scanned()).count("\n| ") == len(scanned().tried) + 1


def test_germanium_brings_its_warnings() -> None:
    """From memory: a germanium transistor needs about half a volt less at the base than a silicon one."""
    stage = STAGE.replace(ic="20 mA", vce=">= 1 V", polarity="pnp", vbe=None, re="47R", rc="220R", r1="4k7", r2="680R")
    found = scan(stage, least={"ic_max": 0.9})
    row = next(row for row in found.tried if row.label == "AC128")
    assert "vbe_class" in {caution.name for caution in row.cautions}


# --- Change record --------------------------------------------------------------------------------------------------


def test_record_says_what_changes_and_what_nobody_looked_at() -> None:
    text = to_change_record(refitted(), "bin out of production", {"r2": "R17", "q": "Q3"})
    assert "| Q3 | transistor | hFE 110 to 220 | hFE 420 to 800 |" in text
    assert "| R17 | r2 | 27K | 24K | series |" in text
    assert "bin out of production" in text
    for blank in BLANKS:
        assert f"| {blank} |  |" in text
    for open_point in ("pinout", "package", "gain"):
        assert regex.search(rf"- \[ \] {open_point}", text)
    assert "restpoint refit obsolete.toml" in text


def test_remaining_margins_are_those_of_the_change() -> None:
    rows = list(csv.DictReader(to_change_list(refitted()).splitlines()))
    best = refitted().best
    assert best is not None
    margins = {v.name: v.margin for v in best.candidate.limits}
    told = {row["name"]: float(row["margin_after"]) for row in rows if row["kind"] == "verdict"}
    # Written with the digits that reproduce them.
    assert told == margins
    parts = {row["role"]: (row["before"], row["after"], row["text"]) for row in rows if row["kind"] == "part"}
    assert parts["r2"] == ("27000.0", "24000.0", "changed")
    assert parts["rc"] == ("4700.0", "4700.0", "stays")


def test_texts_that_a_spreadsheet_would_run_are_inert() -> None:
    text = to_change_list(refitted(), "=1+1", {"r2": "@R"})
    assert not regex.search(r"(^|,)[=@]", text, regex.MULTILINE)


def run(capsys: pytest.CaptureFixture[str], *argv: str) -> tuple[int, str, str]:
    with pytest.raises(SystemExit) as stop:
        main(["refit", str(ROOT / "tests" / "scenarios" / "obsolete.toml"), "--hfe", "110:220", "--tolerance", "1 %", *argv])
    out, err = capsys.readouterr()
    assert isinstance(stop.value.code, int)
    return stop.value.code, out, err


@pytest.mark.parametrize("form", ["markdown", "csv"])
def test_command_writes_the_change_record(form: str, capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    file = tmp_path / "change.txt"
    argv = ["--to-hfe", "420:800", "--keep", "r1 rc re", "--format", form, "--designator", "r2=R17", "--output", str(file)]
    assert run(capsys, *argv) == (0, "", "")
    assert "R17" in file.read_text(encoding="utf-8")


def test_command_scans(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    (tmp_path / "few.csv").write_text("type\nBC847C\nBC857C\n", encoding="utf-8")
    code, out, err = run(capsys, "--among", str(tmp_path / "few.csv"), "--keep", "r1,rc,re", "--format", "json")
    assert (code, err) == (0, "")
    body: dict[str, Any] = json.loads(out)
    assert [(row["label"], row["role"]) for row in body["types"]] == [("BC847C", "r2")]
    code, _, _ = run(capsys, "--among", str(tmp_path / "few.csv"), "--keep", "r1,r2,rc,re")
    assert code == 1


@pytest.mark.parametrize(
    ("argv", "said"),
    [
        (["--to-hfe", "420:800", "--designator", "R17"], r"^--designator: read 'R17', accepted is role=NAME"),
        (["--to-hfe", "420:800", "--designator", "r9=R17"], r"^--designator: read 'r9=R17', accepted is role=NAME"),
        (["--among", "tables", "--least-vceo", "40 A"], r"^least vceo: read '40 A'"),
        (["--among", "nowhere.csv"], r"^among: read 'nowhere\.csv'"),
    ],
)
def test_wrong_input_is_one_sentence(argv: list[str], said: str, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, *argv)
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert regex.search(said, err)
