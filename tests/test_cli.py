"""The command line, run in process: what it prints, where, and with which exit status."""

from __future__ import annotations

import json
import os
import re as regex
import subprocess
import sys
import tomllib
from collections.abc import Callable
from pathlib import Path
from typing import Any, NamedTuple

import pytest
from hypothesis import HealthCheck, event, given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

import synth
from synth.catalogue import transistors
from synth.cli import main
from synth.present.catalogue import TABLES
from synth.stage_keys import KEYS

ROOT = Path(__file__).resolve().parents[1]

# The main example: that of the help text. E24 keeps it quick.
TARGETS = ["--supply", "12V", "--ic", "2mA", "--vce", "5V"]
REQUEST = [*TARGETS, "--hfe", "110:450", "--tolerance", "1%"]
QUICK = [*REQUEST, "--series", "E24"]
FITTED = ["--r1", "43k", "--r2", "24k", "--rc", "1k8", "--re", "1k8"]
TOO_TIGHT = [*REQUEST, "--series", "E12", "--ic", "2 mA ± 1 %"]

STAGE = """
[supply]
vcc = "12 V"
[target]
ic = "2 mA"
vce = "5 V"
[transistor]
hfe = "110 : 450"
[resistors]
series = ["E24"]
tolerance = "1 %"
[values]
r1 = "43k"
r2 = "24k"
rc = "1k8"
re = "1k8"
"""


class Ran(NamedTuple):
    code: int
    out: str
    err: str

    @property
    def answer(self) -> Any:
        return json.loads(self.out)


Run = Callable[..., Ran]


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Run:
    """Run the command in an empty folder."""
    monkeypatch.chdir(tmp_path)

    def call(*argv: str) -> Ran:
        with pytest.raises(SystemExit) as stop:
            main(list(argv))
        out, err = capsys.readouterr()
        assert isinstance(stop.value.code, int)
        return Ran(stop.value.code, out, err)

    return call


def refused(ran: Ran) -> str:
    """What a refusal says, once it is one: exit status 2, one line on stderr, nothing on stdout, nothing written."""
    assert ran.code == 2
    assert ran.out == ""
    (line,) = ran.err.splitlines()
    assert "Traceback" not in line
    assert list(Path().iterdir()) == []
    return line


def resistors(ran: Ran) -> list[dict[str, float]]:
    return [candidate["resistors"] for candidate in ran.answer["candidates"]]


# --- find -----------------------------------------------------------------------------------------------------------


def test_main_example(run: Run) -> None:
    ran = run("find", *REQUEST)
    assert ran.code == 0
    assert ran.err == ""
    assert ran.out.startswith("PASS  ")
    assert regex.search(r"^Best: divider, R1 \w+, R2 \w+, RC \w+, RE \w+$", ran.out, regex.MULTILINE)


def test_answer_of_the_contract(run: Run) -> None:
    """The sample of the design, section 6, whose figures are real: 12 V, 2 mA, 5 V, hFE 110 : 450, E24 at 1 %."""
    ran = run("find", *QUICK, "--format", "json")
    best = ran.answer["candidates"][0]
    assert best["resistors"] == {"r1": 43e3, "r2": 24e3, "rc": 1.8e3, "re": 1.8e3}
    # The sample prints five figures of the worst case of VCE and six of the rest: half a step of the last one.
    assert_allclose(best["nominal"]["ic"], 0.0019439, rtol=3e-5, atol=0)
    assert_allclose(best["nominal"]["vce"], 4.98640, rtol=2e-6, atol=0)
    assert_allclose(best["nominal"]["ib"], 8.73698e-06, rtol=1e-6, atol=0)
    assert_allclose(best["worst"]["ic"], [0.00172723, 0.00214289], rtol=3e-6, atol=0)
    assert_allclose(best["worst"]["vce"], [4.27875, 5.74634], rtol=2e-6, atol=0)
    assert_allclose(best["drift"]["q_point"], 0.149269, rtol=4e-6, atol=0)
    assert_allclose(best["centring"], 0.02807, rtol=2e-4, atol=0)
    assert ran.answer["search"]["combinations"] == 442050625


def test_json_is_all_that_json_prints(run: Run) -> None:
    ran = run("find", *QUICK, "--format", "json")
    assert (ran.code, ran.err) == (0, "")
    assert ran.answer["schema"] == "restpoint/find/1"
    assert ran.answer["version"] == synth.__version__


def test_json_holds_the_command_that_repeats_it(run: Run) -> None:
    ran = run("find", *QUICK, "--ic", "2 mA", "--format", "json")
    assert ran.answer["command"].startswith("restpoint find --supply 12V")
    assert "--ic '2 mA' --format json" in ran.answer["command"]


@pytest.mark.parametrize(("form", "start"), [("table", "PASS  "), ("csv", "rank,network,verdict,r1_ohm,"), ("markdown", "# ")])
def test_other_forms(run: Run, form: str, start: str) -> None:
    ran = run("find", *QUICK, "--format", form)
    assert (ran.code, ran.err) == (0, "")
    assert ran.out.startswith(start)


@pytest.mark.parametrize("form", ["csv", "markdown"])
def test_other_forms_go_to_a_file_too(run: Run, tmp_path: Path, form: str) -> None:
    printed = run("check", *QUICK, *FITTED, "--format", form).out
    assert run("check", *QUICK, *FITTED, "--format", form, "--output", "answer.txt").code == 0
    assert (tmp_path / "answer.txt").read_text(encoding="utf-8") == printed


def test_several_candidates_are_explained(run: Run) -> None:
    ran = run("find", *QUICK, "--explain", "1", "--explain", "3")
    assert regex.findall(r"^Candidate (\d+):", ran.out, regex.MULTILINE) == ["1", "3"]


def test_all_candidates_are_explained(run: Run) -> None:
    ran = run("find", *QUICK, "--top", "4", "--all")
    assert regex.findall(r"^Candidate (\d+):", ran.out, regex.MULTILINE) == ["1", "2", "3", "4"]


@pytest.mark.parametrize("top", [1, 3])
def test_top_sets_the_number_of_candidates(run: Run, top: int) -> None:
    ran = run("find", *QUICK, "--top", str(top), "--format", "json")
    assert [candidate["rank"] for candidate in ran.answer["candidates"]] == list(range(1, top + 1))


def test_ten_candidates_unless_told_otherwise(run: Run) -> None:
    assert len(run("find", *QUICK, "--format", "json").answer["candidates"]) == 10


@pytest.mark.parametrize("rank", [1, 3])
def test_explain_adds_the_reasons_of_a_candidate(run: Run, rank: int) -> None:
    plain, explained = run("find", *QUICK), run("find", *QUICK, "--explain", str(rank))
    assert explained.code == 0
    assert f"\nCandidate {rank}: divider, R1 " in explained.out
    assert "Budget of VCE" in explained.out
    assert "Candidate" not in plain.out


def test_explain_beyond_the_list_is_refused(run: Run) -> None:
    line = refused(run("find", *QUICK, "--top", "3", "--explain", "4"))
    assert regex.search(r"--explain: read 4, accepted is 1 to 3", line)


def test_polarity_pnp_has_the_resistors_of_npn(run: Run) -> None:
    """A PNP is the mirror image: same magnitudes, node voltages below the grounded positive pole."""
    npn = run("find", *QUICK, "--format", "json")
    pnp = run("find", *QUICK, "--polarity", "pnp", "--supply-ground", "positive", "--format", "json")
    assert pnp.code == 0
    assert resistors(pnp) == resistors(npn)
    ours, theirs = pnp.answer["candidates"][0]["nominal"], npn.answer["candidates"][0]["nominal"]
    assert (ours["ic"], ours["vce"]) == (theirs["ic"], theirs["vce"])
    assert ours["nodes"] == {node: -volt for node, volt in theirs["nodes"].items()}


@pytest.mark.parametrize(
    ("polarity", "ground", "emitter", "collector"),
    [
        # Drops against the 0 V rail: VE = drop of re, VC = 12 V − drop of rc for an NPN on a negative ground.
        ("npn", "negative", (0.0, 1.0), (12.0, -1.0)),
        ("npn", "positive", (-12.0, 1.0), (0.0, -1.0)),
        ("pnp", "negative", (12.0, -1.0), (0.0, 1.0)),
        ("pnp", "positive", (0.0, -1.0), (-12.0, 1.0)),
    ],
)
def test_nodes_stand_against_the_rail_that_is_ground(
    run: Run, polarity: str, ground: str, emitter: tuple[float, float], collector: tuple[float, float]
) -> None:
    ran = run("find", *QUICK, "--top", "1", "--polarity", polarity, "--supply-ground", ground, "--format", "json")
    best = ran.answer["candidates"][0]
    for node, role, (rail, sign) in (("e", "re", emitter), ("c", "rc", collector)):
        # One addition of voltages of at most 12 V.
        assert_allclose(best["nominal"]["nodes"][node], rail + sign * best["roles"][role]["drop"], rtol=1e-13, atol=0)


def test_type_brings_its_gain(run: Run) -> None:
    ran = run("find", *TARGETS, "--type", "BC857B", "--series", "E12", "--format", "json")
    assert ran.code == 0
    row = transistors()["BC857B"]
    assert ran.answer["stage"]["transistor"]["hfe"] == [row.hfe_min, row.hfe_typ, row.hfe_max]
    assert ran.answer["stage"]["transistor"]["polarity"] == "pnp"


def test_several_networks_compete(run: Run) -> None:
    ran = run("find", *QUICK, "--network", "divider", "--network", "fixed_base", "--format", "json")
    assert {entry["network"] for entry in ran.answer["networks"]} == {"divider", "fixed_base"}


def test_nothing_qualifies_is_an_answer(run: Run) -> None:
    ran = run("find", *TOO_TIGHT)
    assert ran.code == 1
    assert ran.err == ""
    assert ran.out.startswith("FAIL  ")
    assert "target.ic" in ran.out


def test_nothing_qualifies_in_json(run: Run) -> None:
    ran = run("find", *TOO_TIGHT, "--format", "json")
    assert (ran.code, ran.err) == (1, "")
    assert ran.answer["candidates"] == []
    assert "target.ic" in ran.answer["infeasible"]["binding"]


def test_change_that_is_proposed_leads_to_an_answer(run: Run) -> None:
    proposed = run("find", *TOO_TIGHT, "--format", "json").answer["infeasible"]["relaxations"]
    assert proposed
    for relaxation in proposed:
        options = [word for path, text in relaxation["change"].items() for word in (KEYS[path].options[0], text)]
        assert run("find", *TOO_TIGHT, *options).code == 0


def test_nothing_qualifies_is_an_answer_where_a_window_would_reach_zero(run: Run) -> None:
    """VCE spreads wider than its target here, so that no window around the target would do."""
    ran = run("find", *QUICK, "--supply", "1.5 V", "--vce", "0.3 V ± 50 mV")
    assert (ran.code, ran.err) == (1, "")
    assert ran.out.startswith("FAIL  ")


def test_request_of_one_combination(run: Run) -> None:
    pinned = [word for role, text in (("r1", "43k"), ("r2", "24k"), ("rc", "1k8"), ("re", "1k8"))
              for word in (f"--resistors-{role}-values", text)]  # fmt: skip
    ran = run("find", *QUICK, *pinned, "--format", "json")
    assert ran.code == 0
    assert ran.answer["search"]["combinations"] == len(ran.answer["candidates"]) == 1
    assert ran.answer["search"]["bound"] is None


# --- Files ----------------------------------------------------------------------------------------------------------


@pytest.fixture
def stage_file(tmp_path: Path) -> Path:
    file = tmp_path / "stage.toml"
    file.write_text(STAGE, encoding="utf-8")
    return file


def test_file_gives_what_its_options_would(run: Run, stage_file: Path) -> None:
    from_file = run("find", str(stage_file), "--format", "json")
    assert resistors(from_file) == resistors(run("find", *QUICK, "--format", "json"))
    assert from_file.answer["stage"]["name"] == "stage"


def test_option_overrides_the_key_of_the_file(run: Run, stage_file: Path) -> None:
    ran = run("find", str(stage_file), "--vce", "4 V", "--series", "E12", "--format", "json")
    assert ran.answer["stage"]["target"]["vce"] == [None, 4.0, None]
    assert ran.answer["stage"]["resistors"]["r1"]["series"] == ["E12"]
    assert ran.answer["stage"]["target"]["ic"] == [None, 0.002, None]


def test_stock_list_beside_a_stage_file_is_found(run: Run, tmp_path: Path) -> None:
    """A path in a stage file is relative to it, not to where the command runs."""
    place = tmp_path / "bench"
    place.mkdir()
    (place / "drawer.csv").write_text("value\n1k8\n24k\n43k\n", encoding="utf-8")
    (place / "stage.toml").write_text(STAGE.replace('series = ["E24"]', 'stock = "drawer.csv"'), encoding="utf-8")
    ran = run("find", "bench/stage.toml", "--format", "json")
    assert ran.code == 0
    assert resistors(ran)[0] == {"r1": 43e3, "r2": 24e3, "rc": 1.8e3, "re": 1.8e3}


def test_output_goes_to_a_file(run: Run, tmp_path: Path) -> None:
    printed = run("find", *QUICK, "--format", "json").answer
    ran = run("find", *QUICK, "--format", "json", "--output", "answer.json")
    assert (ran.code, ran.out, ran.err) == (0, "", "")
    written = json.loads((tmp_path / "answer.json").read_text(encoding="utf-8"))
    assert written["candidates"] == printed["candidates"]
    assert [file.name for file in tmp_path.iterdir()] == ["answer.json"]


def test_output_of_a_failure_is_written_too(run: Run, tmp_path: Path) -> None:
    assert run("find", *TOO_TIGHT, "--output", "answer.txt").code == 1
    assert (tmp_path / "answer.txt").read_text(encoding="utf-8").startswith("FAIL  ")


@pytest.mark.parametrize("option", ["--output", "--save"])
def test_existing_file_is_not_replaced(run: Run, tmp_path: Path, option: str) -> None:
    (tmp_path / "old.txt").write_text("old", encoding="utf-8")
    ran = run("find", *QUICK, option, "old.txt")
    assert (ran.code, ran.out) == (2, "")
    assert regex.fullmatch(rf"{option}: 'old.txt' exists already, .*--force\n", ran.err)
    assert (tmp_path / "old.txt").read_text(encoding="utf-8") == "old"


@pytest.mark.parametrize("option", ["--output", "--save"])
def test_existing_file_is_replaced_by_force(run: Run, tmp_path: Path, option: str) -> None:
    (tmp_path / "old.txt").write_text("old", encoding="utf-8")
    assert run("find", *QUICK, option, "old.txt", "--force").code == 0
    assert len((tmp_path / "old.txt").read_text(encoding="utf-8")) > 100


@pytest.mark.parametrize("option", ["--output", "--save"])
def test_folder_that_is_not_there_is_refused(run: Run, option: str) -> None:
    line = refused(run("find", *QUICK, option, "nowhere/answer.txt"))
    assert regex.search(rf"^{option}: .*'nowhere/answer\.txt'", line)


@pytest.mark.parametrize("option", ["--output", "--save"])
def test_folder_in_place_of_a_file_is_refused_even_by_force(run: Run, tmp_path: Path, option: str) -> None:
    (tmp_path / "folder").mkdir()
    ran = run("find", *QUICK, option, "folder", "--force")
    assert (ran.code, ran.out) == (2, "")
    assert regex.search(rf"^{option}: .*'folder'", ran.err)
    assert [file.name for file in tmp_path.iterdir()] == ["folder"]


@pytest.mark.skipif(os.name != "posix" or os.geteuid() == 0, reason="the superuser may write anywhere")
@pytest.mark.parametrize("option", ["--output", "--save"])
def test_folder_that_may_not_be_written_is_refused(run: Run, tmp_path: Path, option: str) -> None:
    (tmp_path / "locked").mkdir(mode=0o500)
    ran = run("find", *QUICK, option, "locked/answer.txt")
    assert (ran.code, ran.out) == (2, "")
    assert regex.search(rf"^{option}: .*'locked/answer\.txt'", ran.err)


@pytest.mark.parametrize("option", ["--output", "--save"])
def test_disk_that_refuses_leaves_nothing_behind(
    run: Run, tmp_path: Path, option: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    line = refused(run("find", *QUICK, option, "answer.txt"))
    assert regex.search(rf"^{option}: .*'answer\.txt'.*No space left on device", line)


def test_two_files_are_written_both_or_neither(run: Run) -> None:
    line = refused(run("find", *QUICK, "--output", "answer.txt", "--save", "nowhere/stage.toml"))
    assert regex.search(r"^--save: .*'nowhere/stage\.toml'", line)


@pytest.mark.parametrize("force", [[], ["--force"]])
def test_two_files_of_one_name_are_refused(run: Run, force: list[str]) -> None:
    line = refused(run("find", *QUICK, "--output", "same.txt", "--save", "same.txt", *force))
    assert "same.txt" in line


def test_save_spells_out_what_was_assumed(run: Run, tmp_path: Path) -> None:
    ran = run("find", *QUICK, "--save", "stage.toml")
    assert ran.code == 0
    assert ran.out.startswith("PASS  ")
    text = (tmp_path / "stage.toml").read_text(encoding="utf-8")
    saved = tomllib.loads(text)
    assert saved["ambient"]["temperature"] == "0 : 25 : 70 °C"
    assert saved["transistor"]["vbe"] == "0.65 V ± 50 mV"
    assert "# assumed: not given" in text


@pytest.mark.parametrize(
    "options",
    [
        QUICK,
        [*QUICK, "--ic", "2 mA ± 20 %", "--vce", ">= 3 V", "--supply-current", "3 mA", "--base-resistance", "none"],
        [*TARGETS, "--type", "BC857B", "--series", "E12", "--supply", "12 V ± 5 %", "--resistors-rc-tolerance", "2 %"],
        [*QUICK, "--network", "fixed_base", "--resistors-re-use", "either", "--vbb", "5 V", "--temperature", "-10:40°C"],
        [*QUICK, "--series", "E3", "--network", "any", "--vee", "5 V"],
        [*REQUEST, "--hfe", ">= 110", "--series", "E12", "--transistor-icbo", "0 : 1 : 5 nA"],
    ],
    ids=["plain", "limits", "pnp type", "fixed base", "any", "open gain"],
)
def test_saved_file_gives_the_same_candidates(run: Run, options: list[str]) -> None:
    first = run("find", *options, "--format", "json", "--save", "stage.toml")
    again = run("find", "stage.toml", "--format", "json")
    assert (first.code, again.code) == (0, 0)
    assert again.answer["candidates"] == first.answer["candidates"]
    assert again.answer["stage"] == first.answer["stage"] | {"name": again.answer["stage"]["name"]}


def test_saved_file_finds_its_stock_list_from_another_folder(run: Run, tmp_path: Path) -> None:
    (tmp_path / "drawer.csv").write_text("value\n1k8\n24k\n43k\n", encoding="utf-8")
    (tmp_path / "kept").mkdir()
    first = run("find", *REQUEST, "--stock", "drawer.csv", "--save", "kept/stage.toml", "--format", "json")
    again = run("find", "kept/stage.toml", "--format", "json")
    assert again.answer["candidates"] == first.answer["candidates"]


# --- check ----------------------------------------------------------------------------------------------------------


def test_check_passes(run: Run) -> None:
    ran = run("check", *QUICK, *FITTED)
    assert (ran.code, ran.err) == (0, "")
    assert ran.out.startswith("PASS  ")


def test_check_fails(run: Run) -> None:
    ran = run("check", *QUICK, *FITTED, "--ic", "2 mA ± 1 %")
    assert (ran.code, ran.err) == (1, "")
    assert ran.out.startswith("FAIL  ")
    assert regex.search(r"^  target.ic .*  fail  ", ran.out, regex.MULTILINE)


def test_check_of_a_file(run: Run, stage_file: Path) -> None:
    ran = run("check", str(stage_file), "--format", "json")
    assert ran.code == 0
    assert ran.answer["schema"] == "restpoint/check/1"
    assert resistors(ran) == [{"r1": 43e3, "r2": 24e3, "rc": 1.8e3, "re": 1.8e3}]


def test_check_agrees_with_find(run: Run) -> None:
    fitted = run("check", *QUICK, *FITTED, "--format", "json").answer["candidates"][0]
    best = run("find", *QUICK, "--top", "1", "--format", "json").answer["candidates"][0]
    assert fitted["resistors"] == best["resistors"]
    # Solved in batches of another size; the closed form differs by a few units in the last place.
    assert_allclose(fitted["worst"]["vce"], best["worst"]["vce"], rtol=1e-12, atol=0)


def test_check_explains(run: Run) -> None:
    ran = run("check", *QUICK, *FITTED, "--explain")
    assert "Budget of IC" in ran.out


def test_check_of_a_saturated_transistor_fails(run: Run) -> None:
    """RC takes all of the supply: 12 V across 4k7 and 1k at more than 2 mA. No limit but that of staying active is left."""
    off = ["--bleeder-current", "none", "--collector-share", "none", "--base-resistance", "none"]
    ran = run("check", *QUICK, *off, "--r1", "10k", "--r2", "10k", "--rc", "4k7", "--re", "1k", "--format", "json")
    candidate = ran.answer["candidates"][0]
    assert candidate["nominal"]["region"] == "saturated"
    assert candidate["verdict"] == "fail"
    assert ran.code == 1


def test_check_of_a_saturated_transistor_obeys_kirchhoff(run: Run) -> None:
    ran = run("check", *QUICK, "--r1", "10k", "--r2", "10k", "--rc", "4k7", "--re", "1k", "--format", "json")
    candidate = ran.answer["candidates"][0]
    nominal, roles = candidate["nominal"], candidate["roles"]
    # Rounding of a solution that converges to a few units in the last place.
    assert_allclose(roles["rc"]["current"], nominal["ic"], rtol=1e-9, atol=0)
    assert_allclose(roles["rc"]["drop"] + nominal["vce"] + roles["re"]["drop"], 12.0, rtol=1e-9, atol=0)


def test_check_with_a_role_of_another_network_is_refused(run: Run) -> None:
    assert regex.search(r"^values\.rb: .*no role of divider", refused(run("check", *QUICK, *FITTED, "--rb", "10k")))


def test_check_without_values_is_refused(run: Run) -> None:
    assert regex.search(r"values .*accepted is .*r1 r2 rc re", refused(run("check", *QUICK)))


def test_check_with_a_value_missing_is_refused(run: Run) -> None:
    line = refused(run("check", *QUICK, *FITTED[:6]))
    assert regex.search(r"values.*\bre\b", line)


# --- tables, stage, help --------------------------------------------------------------------------------------------


def test_tables_lists_the_tables(run: Run) -> None:
    ran = run("tables")
    assert (ran.code, ran.err) == (0, "")
    for name in TABLES:
        assert regex.search(rf"^  {name} ", ran.out, regex.MULTILINE)


@pytest.mark.parametrize(
    ("name", "line"),
    [
        # IEC 60063 and IEC 60062; the rest from the tables themselves, whose own tests check them.
        ("series", r"^  E6 +20 % +100 150 220 330 470 680$"),
        ("tolerances", r"^  F +±1 % "),
        ("tcr", r"^  S +brown +100 ppm/K"),
        ("styles", r"^  0805 +thick film "),
        ("transistors", r"^  BC847B +npn +SOT-23 +45 V +100 mA +200 : 450 +2 mA "),
        # ECSS-Q-ST-30-11C, from memory: resistors 50 % power and 80 % voltage, transistors 75 %, 75 % and 65 %.
        ("derating", r"^  ECSS-Q-ST-30-11C +50 % +80 % +75 % +75 % +65 % +110 °C or TJ max - 40 K +memory"),
        ("gains", r"^  2N3904 +1 mA +1 V +25 °C +70 : – "),
    ],
)
def test_table(run: Run, name: str, line: str) -> None:
    ran = run("tables", name)
    assert (ran.code, ran.err) == (0, "")
    assert regex.search(line, ran.out, regex.MULTILINE)


def test_every_table_has_a_test() -> None:
    names = {"series", "tolerances", "tcr", "styles", "transistors", "gains", "derating", "warnings"}
    assert names == set(TABLES)


def test_unknown_table_is_refused(run: Run) -> None:
    line = refused(run("tables", "transistor"))
    assert regex.search(r"'transistor'.*'?transistors'?", line)


def test_empty_stage_file_is_toml_that_asks_for_nothing(run: Run) -> None:
    ran = run("stage")
    assert (ran.code, ran.err) == (0, "")
    tables = tomllib.loads(ran.out)
    assert all(value == {} or all(inner == {} for inner in value.values()) for value in tables.values())


def test_empty_stage_file_is_refused_for_what_it_lacks(run: Run, tmp_path: Path) -> None:
    (tmp_path / "empty.toml").write_text(run("stage").out, encoding="utf-8")
    ran = run("find", "empty.toml")
    assert (ran.code, ran.out) == (2, "")
    assert ran.err.startswith("supply.vcc ")


def test_empty_stage_file_works_once_the_needed_keys_are_filled(run: Run, tmp_path: Path) -> None:
    text = run("stage").out
    for key in ("vcc", "ic", "hfe"):
        # The first `hfe` is that of [transistor], the other one of [replacement].
        text, count = regex.subn(rf"^#({key} = )", r"\1", text, count=1, flags=regex.MULTILINE)
        assert count == 1
    # The first `vce` is the target, the other one a limit.
    text = regex.sub(r"^#(vce = )", r"\1", text, count=1, flags=regex.MULTILINE)
    (tmp_path / "filled.toml").write_text(text, encoding="utf-8")
    ran = run("find", "filled.toml", "--series", "E12", "--tolerance", "1 %", "--top", "1")
    assert (ran.code, ran.err) == (0, "")


@pytest.mark.parametrize("part", [0, *(pytest.param(k, marks=pytest.mark.long) for k in (1, 2))])
def test_every_key_of_the_empty_stage_file_can_be_uncovered(run: Run, tmp_path: Path, part: int) -> None:
    """Each example that the file prints is one that the reader accepts, alone beside the needed keys."""
    (tmp_path / "drawer.csv").write_text("value\n1k\n1k8\n2k\n22k\n24k\n43k\n", encoding="utf-8")
    rails = ["--vee", "12 V", "--network", "divider", "--network", "fixed_base"]
    fixed = {"target.ic", "target.vce", "target.vc", "target.ve", "signal.unbypassed", "supply.vcc", "transistor.hfe", "transistor.hfe_rows", "supply.vee", "network", "transistor.vbe"}
    for path, key in list(KEYS.items())[part::3]:
        if path in fixed or key.table.startswith("resistors.") or key.leaf == "vbe_ic":
            continue
        if key.table in ("values", "replacement", "distribution", "measured"):
            continue
        # A diode has a default for every other key.
        rest = ["--reference-kind", "diode"] if key.table == "reference" and key.leaf != "kind" else []
        rest += ["--signal-capacitor", "100 uF"] if path == "limits.lower_corner" else []
        series = [] if key.leaf in ("stock", "series") else ["--series", "E3"]
        ran = run("find", *TARGETS, "--hfe", "110:450", *rails, *rest, *series, "--top", "1", key.options[-1], key.example)
        assert ran.code in (0, 1), (path, ran.err)


@pytest.mark.parametrize("command", ["find", "check"])
def test_a_replacement_goes_with_refit_alone(run: Run, command: str) -> None:
    line = refused(run(command, *TARGETS, "--hfe", "110:450", "--to", "BC847C"))
    assert regex.search(r"^--to: read 'BC847C', which this command makes no use of, .* with the command refit$", line)


def test_version(run: Run) -> None:
    ran = run("--version")
    assert (ran.code, ran.err) == (0, "")
    assert regex.fullmatch(rf"restpoint.* {regex.escape(synth.__version__)}\n", ran.out)


@pytest.mark.parametrize("option", ["--help", "-h"])
def test_help_names_the_commands_and_a_first_step(run: Run, option: str) -> None:
    ran = run(option)
    assert (ran.code, ran.err) == (0, "")
    for word in ("find", "check", "tables", "stage", "restpoint find --supply 12V"):
        assert word in ran.out
    assert max(map(len, ran.out.splitlines())) <= 100


def test_nothing_at_all_shows_the_help(run: Run) -> None:
    ran = run()
    helped = run("--help")
    assert ran.out + ran.err == helped.out
    assert ran.code in (0, 2)


def test_first_step_of_the_help_works(run: Run) -> None:
    text = " ".join(run("--help").out.split())
    found = regex.search(r"restpoint (find .*?--tolerance 1%)", text)
    assert found is not None
    assert run(*found[1].split()).code == 0


@pytest.mark.parametrize("command", ["find", "check", "tables", "stage"])
def test_help_of_a_command(run: Run, command: str) -> None:
    ran = run(command, "--help")
    assert (ran.code, ran.err) == (0, "")
    assert f"Usage: restpoint {command}" in ran.out
    assert max(map(len, ran.out.splitlines())) <= 100


def test_help_of_find_shows_every_option_of_the_contract(run: Run) -> None:
    """Short forms fixed in the design, section 6; limits and [values] go by their own names."""
    short = "--supply --vee --vbb --ic --vce --type --hfe --vbe --polarity --series --stock --tolerance --tcr --range --network"
    own = "--temperature --bleeder-current --collector-share --base-resistance --supply-current --r1 --r2 --rb --rc --re"
    other = "--top --format --output --force --explain --save"
    words = set(regex.findall(r"--[a-z][a-z0-9-]*", run("find", "--help").out))
    assert {*short.split(), *own.split(), *other.split()} <= words


def test_every_key_is_an_option(run: Run) -> None:
    for path, key in KEYS.items():
        assert f"--{path.replace('.', '-').replace('_', '-')}" in key.options
        ran = run("find", f"--{path.replace('.', '-').replace('_', '-')}", "")
        assert ran.code == 2
        assert "o such option" not in ran.err


# --- Wrong input ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("argv", "said"),
    [
        (["fnd"], r"'fnd'.*find, check, .*tables, stage.*nearest is 'find'"),
        (["find", *TARGETS, "--hffe", "110:450"], r"'--hffe'.*--hfe"),
        (["find", *TARGETS, "--suply-vcc", "12V"], r"'--suply-vcc'.*--supply-vcc"),
        (["find", *QUICK, "--format", "jsn"], r"--format.*'jsn'.*'?json'?"),
        (["find", *QUICK, "--top", "0"], r"--top.*\b0\b.*\b1\b"),
        (["find", *QUICK, "--top", "many"], r"--top.*'many'.*(number|integer)"),
        (["find", *QUICK, "--supply"], r"--supply"),
        (["find", "a.toml", "b.toml"], r"b\.toml"),
        (["find", *QUICK, "--explain", "0"], r"--explain.*\b0\b.*\b1\b"),
        (["stage", "more"], r"more"),
    ],
    ids=lambda value: " ".join(value[-2:]) if isinstance(value, list) else "",
)
def test_wrong_use_is_refused(run: Run, argv: list[str], said: str) -> None:
    assert regex.search(said, refused(run(*argv)))


@pytest.mark.parametrize(
    ("options", "said"),
    [
        # What has to be given.
        ([], r"^supply\.vcc is not given, accepted is a voltage"),
        (["--supply", "12V"], r"^target\.ic is not given, accepted is a current"),
        (["--supply", "12V", "--ic", "2mA"], r"^target\.vce is not given, accepted is a voltage"),
        (TARGETS, r"^transistor\.hfe is not given and has no default, accepted is a gain"),
        # Texts that are no quantity.
        ([*QUICK, "--supply", ""], r"^supply\.vcc: read '', which is empty, accepted is a voltage"),
        ([*QUICK, "--supply", "twelve"], r"^supply\.vcc: read 'twelve', .*accepted is a voltage"),
        ([*QUICK, "--supply", "1,234 V"], r"^supply\.vcc: read '1,234 V', .*ambiguous.*nearest is '1234 V' or '1\.234 V'"),
        ([*QUICK, "--supply", "12"], r"^supply\.vcc: read '12', .*no unit.*nearest is '12 V'"),
        ([*QUICK, "--supply", "12 mA"], r"^supply\.vcc: read '12 mA', which is a current, accepted is a voltage"),
        ([*QUICK, "--supply", "12 VV"], r"^supply\.vcc: read '12 VV', .*accepted is a voltage"),
        ([*QUICK, "--supply", "nan V"], r"^supply\.vcc: read 'nan V'"),
        ([*QUICK, "--supply", "1e400 V"], r"^supply\.vcc: read '1e400 V'"),
        ([*QUICK, "--ic", "2 Ma"], r"^target\.ic: read '2 Ma', .*accepted is a current"),
        ([*QUICK, "--tolerance", "1"], r"^resistors\.tolerance: read '1', .*per cent.*nearest is '1 %'"),
        ([*QUICK, "--tcr", "100"], r"^resistors\.tcr: read '100', .*no unit.*nearest is '100 ppm/K'"),
        ([*QUICK, "--temperature", "0 : 70"], r"^ambient\.temperature: read '0 : 70', .*no unit"),
        ([*QUICK, "--resistors-r1-values", "4,700k"], r"^resistors\.r1\.values: read '4,700k', .*ambiguous"),
        ([*QUICK, "--range", "10 : 1000"], r"^resistors\.range: read '10 : 1000', .*no unit"),
        # Spreads and limits that are none.
        ([*QUICK, "--hfe", "450 : 110"], r"^transistor\.hfe: read '450 : 110', .*rising order.*nearest is '110 : 450'"),
        ([*QUICK, "--supply", "11 : 12 : 13 : 14 V"], r"^supply\.vcc: read '11 : 12 : 13 : 14 V'"),
        ([*QUICK, "--supply", "12 V ± 5 mA"], r"^supply\.vcc: read '12 V ± 5 mA'"),
        ([*QUICK, "--supply", "12 V ± -5 %"], r"^supply\.vcc: read '12 V ± -5 %'"),
        ([*QUICK, "--supply-current", "3 V"], r"^limits\.supply_current: read '3 V', which is a voltage"),
        ([*QUICK, "--supply-current", "3 mA : 1 mA"], r"^limits\.supply_current: read '3 mA : 1 mA'"),
        # Words that are none of the choices.
        ([*TARGETS, "--type", "BC874B"], r"^transistor\.type: read 'BC874B', .*BC847B"),
        ([*QUICK, "--polarity", "nnp"], r"^transistor\.polarity: read 'nnp', .*npn, pnp.*nearest is .*'npn'"),
        ([*QUICK, "--series", "E25"], r"^resistors\.series: read 'E25', .*nearest is .*'E24'"),
        ([*QUICK, "--network", "divder"], r"^network: read 'divder', .*nearest is 'divider'"),
        ([*QUICK, "--resistors-style", "0850"], r"^resistors\.style: read '0850', .*0805"),
        ([*QUICK, "--resistors-re-use", "maybe"], r"^resistors\.re\.use: read 'maybe', .*yes, no, either"),
        # Requests that are refuted without a search.
        ([*QUICK, "--vce", "12 V"], r"^target\.vce: read '12 V', which is not below the 12 V between the rails"),
        ([*QUICK, "--vce", "-5 V"], r"^target\.vce: read '-5 V'"),
        ([*QUICK, "--ic", "0 A"], r"^target\.ic: read '0 A'"),
        ([*QUICK, "--supply", "0 V"], r"^supply\.vcc: read '0 V'"),
        ([*QUICK, "--hfe", "0 : 100"], r"^transistor\.hfe: read '0 : 100'"),
        ([*QUICK, "--temperature", "-300 : 25 °C"], r"^ambient\.temperature: read '-300 : 25 °C'"),
        ([*QUICK, "--temperature", "0 : 300 °C"], r"^ambient\.temperature: read '0 : 300 °C', .*200 °C"),
        ([*QUICK, "--tolerance", "60 %"], r"^resistors\.tolerance: read '60 %', .*50 %"),
        ([*QUICK, "--range", "1 Gohm : 2 Gohm", "--stock", "no.csv"], r"no\.csv"),
        ([*QUICK, "--network", "two_supply"], r"^supply\.vee is not given, but network two_supply needs it"),
        ([*QUICK, "--resistors-rb-values", "10k"], r"^resistors\.rb\.values: .*no role of divider"),
        ([*QUICK, "--r1", "43k"], r"^--r1: find chooses .*, accepted is '--resistors-r1-values 43k'.*check"),
        ([*QUICK, "--ic", "1 fA"], r"^target\.ic: read '1 fA', .*saturation current"),
        ([*TARGETS, "--type", "BC847B", "--polarity", "pnp"], r"^transistor\.polarity: read 'pnp', but BC847B is npn"),
    ],
    ids=lambda value: " ".join(value[-2:]) if isinstance(value, list) else "",
)
def test_wrong_input_is_refused(run: Run, options: list[str], said: str) -> None:
    assert regex.search(said, refused(run("find", *options)))


@pytest.mark.parametrize(
    ("line", "said"),
    [
        ("hfee = '110 : 450'\n", r"transistor\.hfee.*nearest is 'transistor\.hfe'"),
        ("[suply]\nvcc = '12 V'\n", r"suply.*\[supply\]"),
        ("[limits]\nsuply_current = '3 mA'\n", r"limits\.suply_current.*nearest is 'limits\.supply_current'"),
        ("vbe = 0.65\n", r"transistor\.vbe.*0\.65.*number without a unit.*\"0\.65 V\""),
        ("vbe = true\n", r"transistor\.vbe.*truth value"),
        ("vbe = \n", r"line 9.*not TOML"),
        ("vbe = '0.65 V'\nvbe = '0.6 V'\n", r"line 10.*not TOML"),
        ("type = 'BC874B'\n", r"transistor\.type.*'BC874B'.*BC847B"),
    ],
)
def test_wrong_stage_file_is_refused(run: Run, tmp_path: Path, line: str, said: str) -> None:
    head = "[supply]\nvcc = '12 V'\n[target]\nic = '2 mA'\nvce = '5 V'\n[transistor]\nhfe = '110 : 450'\n\n"
    (tmp_path / "wrong.toml").write_text(head + line, encoding="utf-8")
    ran = run("find", "wrong.toml")
    assert (ran.code, ran.out) == (2, "")
    (read,) = ran.err.splitlines()
    assert regex.search(said, read)


def test_stage_file_that_is_not_there_is_refused(run: Run, stage_file: Path) -> None:
    ran = run("find", "stagee.toml")
    assert (ran.code, ran.out) == (2, "")
    assert regex.fullmatch(r"stage file: read 'stagee\.toml', .*nearest is 'stage\.toml'\n", ran.err)


def test_a_name_that_is_far_from_every_file_suggests_none(run: Run, stage_file: Path) -> None:
    ran = run("find", "hydrophone_preamplifier.toml")
    assert ran.code == 2
    assert "nearest" not in ran.err


@pytest.mark.parametrize(
    "content", [b"\xff\xfe\x00", b"a = [" * 3000, b"\x00" * 10, b"x" * 1_000_001], ids=["bytes", "deep", "null", "long"]
)
def test_file_that_is_no_stage_is_refused(run: Run, tmp_path: Path, content: bytes) -> None:
    (tmp_path / "odd.toml").write_bytes(content)
    ran = run("find", "odd.toml")
    assert (ran.code, ran.out) == (2, "")
    assert len(ran.err.splitlines()) == 1
    assert "odd.toml" in ran.err


def test_folder_in_place_of_a_stage_file_is_refused(run: Run, tmp_path: Path) -> None:
    (tmp_path / "folder").mkdir()
    ran = run("find", "folder")
    assert (ran.code, ran.out) == (2, "")
    assert regex.search(r"^stage file: read 'folder'", ran.err)


@pytest.mark.parametrize(
    ("rows", "said"),
    [
        ("valu\n1k\n", r"drawer\.csv.*valu.*value"),
        ("value\n1x\n", r"drawer\.csv.*line 2.*'1x'"),
        ("value\n\n", r"drawer\.csv"),
        ("value,quantity\n1k,0\n", r"drawer\.csv.*quantity"),
        ("value\n-1k\n", r"drawer\.csv.*line 2.*'-1k'"),
    ],
)
def test_wrong_stock_list_is_refused(run: Run, tmp_path: Path, rows: str, said: str) -> None:
    (tmp_path / "drawer.csv").write_text(rows, encoding="utf-8")
    ran = run("find", *REQUEST, "--stock", "drawer.csv")
    assert (ran.code, ran.out) == (2, "")
    (line,) = ran.err.splitlines()
    assert regex.search(said, line)


def test_refusal_comes_before_the_search(run: Run, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A file name that cannot be used is told at once, not after minutes of searching."""

    def never(*_: object, **__: object) -> None:
        raise AssertionError("searched first")

    (tmp_path / "old.txt").write_text("old", encoding="utf-8")
    monkeypatch.setattr("synth.solve.find", never)
    ran = run("find", *QUICK, "--output", "old.txt")
    assert ran.code == 2


# --- Whatever happens -----------------------------------------------------------------------------------------------

WORDS = st.sampled_from(
    [
        "find", "check", "tables", "stage", "series", "--help", "--version", "--format", "json", "table", "--top", "--explain",
        "1", "0", "-1", "--force", "--output", "--save", "--", "-", "", " ", "±", "∞", "nan", "1e999", "\udcff", "\u202e", "💡",
        "divider", "any", "fixed_base", "E3", "E24", "none", "yes", "BC847B", "BC857C", "2N3904", "12V", "9 : 12 : 16 V",
        "5 V ± 5 %", "2mA", "1 µA", ">= 3 V", "<= 3 mA", "110:450", "110", "1%", "50 %", "4k7", "1k8, 2k", "10 ohm : 1k",
        "-40 : 85 °C", "100 ppm/K", "/", ".", "nowhere.toml", "--unknown", "--supply=12V", "-x", "a" * 300,
    ]
)  # fmt: skip
# No process can be handed a null byte.
ANYTHING = st.text(st.characters(exclude_characters="\0", exclude_categories=("Cs",)), max_size=12)
OPTIONS = st.sampled_from([name for key in KEYS.values() for name in key.options])
FURTHER = {
    "voltage": ("9 : 12 : 16 V", "1.5 V", "5 V ± 5 %", "60 V", "<= 6 V", "0 V", "none"),
    "current": ("1 µA", "2 mA ± 1 %", "20 mA", ">= 1 mA", "0 : 0 : 2 µA"),
    "resistance": ("4k7", "1k : 47k", "10 ohm", "100k", "1R, 1M"),
    "ratio": ("0.1 %", "50 %", "0.9", "0 %"),
    "gain": ("110", ">= 40", "20 : 900"),
    "temperature": ("25 °C", "-55 : 125 °C", "300 K"),
}


def fitting(path: str) -> st.SearchStrategy[tuple[str, str]]:
    """A key and a text of its kind: most of them are accepted, so that the search, too, sees odd requests."""
    kind, choices = KEYS[path].kind, KEYS[path].choices
    alike = [key.example for key in KEYS.values() if key.kind == kind and key.form == KEYS[path].form]
    return st.tuples(st.just(path), st.sampled_from([*alike, *choices, *FURTHER.get(kind, ())]))


FITTING = st.sampled_from(list(KEYS)).flatmap(fitting)
PAIRS = st.one_of(
    FITTING,
    st.tuples(st.sampled_from(list(KEYS)), st.one_of(WORDS, ANYTHING)),
)
# Few values to choose from keep what is random quick to search.
ASKED = {
    "supply.vcc": "12 V", "target.ic": "2 mA", "target.vce": "5 V", "transistor.hfe": "110 : 450",
    "resistors.series": "E3", "resistors.range": "1k : 47k",
}  # fmt: skip
HAD = {"values.r1": "43k", "values.r2": "24k", "values.rc": "1k8", "values.re": "1k8"}


def command_line(command: str, pairs: list[tuple[str, str]]) -> list[str]:
    given = ASKED | (HAD if command == "check" else {}) | dict(pairs)
    return [command, *(word for path, text in given.items() for word in (KEYS[path].options[0], text))]


ARGUMENTS = st.one_of(
    st.lists(st.one_of(WORDS, OPTIONS, ANYTHING), max_size=6),
    st.builds(command_line, st.sampled_from(["find", "check"]), st.lists(PAIRS, max_size=2)),
    st.builds(command_line, st.sampled_from(["find", "check"]), st.lists(FITTING, max_size=3)),
)


@settings(max_examples=15, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(argv=ARGUMENTS)
def test_no_arguments_lead_to_a_traceback(run: Run, argv: list[str]) -> None:
    """Any other exception than SystemExit fails here, as does a warning, an odd exit status or a chatty refusal."""
    before = sorted(Path().iterdir())
    ran = run(*argv)
    assert ran.code in (0, 1, 2)
    event(f"exit status {ran.code}")
    if ran.code == 2:
        assert ran.out == ""
        assert len(ran.err.splitlines()) == 1
        assert sorted(Path().iterdir()) == before
    else:
        assert ran.err == ""
    for file in set(Path().iterdir()) - set(before):
        file.unlink()


@pytest.mark.parametrize("variables", [{}, {"NO_COLOR": "1"}, {"FORCE_COLOR": "1", "CLICOLOR_FORCE": "1"}, {"TERM": "dumb"}])
def test_output_to_a_pipe_is_plain(run: Run, monkeypatch: pytest.MonkeyPatch, variables: dict[str, str]) -> None:
    for name, value in variables.items():
        monkeypatch.setenv(name, value)
    for argv in (["find", *QUICK, "--explain", "1"], ["check", *QUICK, *FITTED], ["tables", "series"], ["find", "--help"]):
        assert "\x1b" not in run(*argv).out


def test_interruption_is_no_traceback(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*_: object, **__: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("synth.solve.find", interrupted)
    ran = run("find", *QUICK)
    # 128 + 2, as shells report the end by an interrupt.
    assert ran.code == 130
    assert ran.out == ""
    assert ran.err.split() == ["interrupted"]


# --- As a process ---------------------------------------------------------------------------------------------------


def process(*argv: str, **settings: Any) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONIOENCODING": "utf-8"} | settings.pop("env", {})
    command = [sys.executable, "-m", "synth", *argv]
    return subprocess.run(command, capture_output=True, text=True, encoding="utf-8", env=environment, check=False, **settings)


def test_process_shows_its_help(tmp_path: Path) -> None:
    ran = process("--help", cwd=tmp_path)
    assert (ran.returncode, ran.stderr) == (0, "")
    assert ran.stdout.startswith("Usage: restpoint ")
    assert list(tmp_path.iterdir()) == []


def test_process_survives_an_output_that_cannot_show_ohm(tmp_path: Path) -> None:
    ran = process("find", *QUICK, cwd=tmp_path, env={"PYTHONIOENCODING": "ascii"})
    assert (ran.returncode, ran.stderr) == (0, "")
    assert ran.stdout.startswith("PASS")


def test_process_survives_a_reader_that_leaves(tmp_path: Path) -> None:
    command = [sys.executable, "-m", "synth", "tables", "gains"]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    with subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, cwd=tmp_path, env=environment) as ran:
        assert ran.stdout is not None
        assert ran.stderr is not None
        ran.stdout.close()
        err = ran.stderr.read()
    assert err == b""
    assert ran.returncode in (0, 1)


def test_advice_starts_from_the_drift_of_the_q_point(run: Run) -> None:
    line = refused(run("find", *TARGETS, "--hfe", "110:450", "--advise", "--metric", "rss"))
    assert line.rstrip() == "--advise: starts from the drift of the Q-point, read --metric 'rss', accepted is corners"
