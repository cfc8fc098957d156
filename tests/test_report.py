"""The worst-case report, its document, and the comparison with an answer that was kept.

The content that a review asks for: issue of the maintainers, after common practice of worst-case circuit analysis.
"""

from __future__ import annotations

import hashlib
import json
import re as regex
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from numpy.testing import assert_allclose

import synth
from synth.answer import Answer
from synth.cli import main
from synth.expect import WrongExpectation, changes, read
from synth.networks import NETWORKS
from synth.present.document import to_document
from synth.report import Report, Section, Table, report, stage_hash
from synth.stage import Stage

FITTED = {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"}
PLAIN = {"supply": "12 V ± 5 %", "ic": "2 mA ± 20 %", "vce": "5 V", "hfe": "110 : 450", "series": "E24", "tolerance": "1 %"}
TITLES = (
    "Scope", "Attributes and limits", "Parameters", "Methods", "Equations", "Extreme of every input", "Verdicts and margins",
    "Non-compliances and proposed action", "Budget of the drift", "Sensitivities and stability factors",
    "Three methods side by side", "Yield", "Stress and derating", "Small signal over the box", "Single faults",
    "Rationale of each resistor", "Meter readings", "Unverified assumptions", "To repeat this report",
)  # fmt: skip


def checked(**changes: Any) -> Answer:
    given = {**PLAIN, "units": "2048", "seed": "0", **changes}
    return synth.check(Stage(**given), statistics=True, command="restpoint check stage.toml", **FITTED)


def section(made: Report, title: str) -> Section:
    return next(part for part in made.sections if part.title == title)


def rows(table: Table) -> dict[str, tuple[str, ...]]:
    return {row[0]: row[1:] for row in table.rows}


def test_report_has_every_section_in_order() -> None:
    made = report(checked())
    assert tuple(part.title for part in made.sections if part.title != "Cautions") == TITLES
    assert made.verdict == "PASS: every limit holds at every point of the box."


def test_every_table_is_even() -> None:
    for answer in (checked(), checked(ic="2 mA ± 1 %", style="0402", type="BC847B", hfe=None, measured_vc="8.5 V")):
        for part in report(answer).sections:
            for table in part.tables:
                assert all(len(row) == len(table.headings) for row in table.rows), part.title
                assert all(isinstance(cell, str) and cell for row in table.rows for cell in row), part.title


def test_parameters_have_their_ends_and_sources() -> None:
    made = report(checked(resistors_re_life="0.5 %"))
    first, second = section(made, "Parameters").tables
    found = rows(first)
    assert found["VCC"] == ("11.4 V", "12 V", "12.6 V", "given")
    assert found["VBE at 25 °C"] == ("600 mV", "650 mV", "700 mV", "assumed")
    # 1 % + 0.5 % + 100 ppm/K over the 45 K from 25 °C to 70 °C: 1.95 %.
    assert found["RE"] == ("1.76 kΩ", "1.8 kΩ", "1.84 kΩ", "tolerance and life given, coefficient assumed")
    assert rows(second)["RE"] == ("1 %", "0.5 %", "100 ppm/K over 45 K = 0.45 %", "1.95 %")


def test_type_names_its_evidence() -> None:
    made = report(checked(type="BC847B", hfe=None))
    assert rows(section(made, "Parameters").tables[0])["hFE at 25 °C"][-1].startswith("assumed: from the table of transistors")


def test_extremes_name_the_end_of_every_input() -> None:
    """IC of a divider is least with the least VCC, hFE and R2 and the greatest VBE, R1 and RE: reference/physics.md, section 6."""
    table = section(report(checked(tcr="0 ppm/K")), "Extreme of every input").tables[0]
    column = {row[0]: row[table.headings.index("IC lowest")] for row in table.rows}
    assert column["VCC"] == "11.4 V"
    assert column["VBE against nominal"] == "+50 mV"
    assert column["hFE at 25 °C"] == "110"
    assert (column["R1"], column["R2"], column["RE"]) == ("43.4 kΩ", "23.8 kΩ", "1.82 kΩ")


def test_failing_report_proposes_an_action() -> None:
    made = report(checked(ic="2 mA ± 1 %"))
    assert made.verdict == "FAIL: target.ic."
    (point,) = section(made, "Non-compliances and proposed action").points
    assert regex.match(r"target\.ic: .* at worst against 1\.98 mA to 2\.02 mA, margin -\d.*Proposed: ", point)


def test_report_repeats_itself() -> None:
    answer = checked()
    table = rows(section(report(answer), "To repeat this report").tables[0])
    assert table["seed"] == ("0",)
    assert table["units drawn"] == ("2048",)
    assert table["command"] == ("restpoint check stage.toml",)
    text = json.dumps(answer.stage, sort_keys=True, separators=(",", ":"), default=str)
    assert table["stage hash (SHA-256)"] == (hashlib.sha256(text.encode()).hexdigest()[:16],)
    assert stage_hash(answer.stage) != stage_hash(checked(tolerance="2 %").stage)


def test_yield_names_its_interval_and_only_spreads_that_there_are() -> None:
    shares, laws = section(report(checked(distribution_hfe="212, 333")), "Yield").tables
    assert shares.headings[-1] == "95 % interval (Clopper-Pearson)"
    # All of 2048: the least share is 0.025**(1/2048), to five figures.
    assert rows(shares)["every one of them"] == ("2048 of 2048", "100 %", f"{100.0 * 0.025 ** (1 / 2048):.5g} % to 100 %")
    assert [row[1] for row in laws.rows] == ["uniform", "measured list of 2", "uniform", "uniform", "uniform", "uniform"]


def test_without_statistics_they_are_left_out() -> None:
    answer = synth.check(Stage(**PLAIN), **FITTED)
    titles = [part.title for part in report(answer).sections]
    assert "Yield" not in titles
    assert "Three methods side by side" not in titles


def test_nothing_that_qualifies_is_reported_too() -> None:
    answer = synth.find(Stage(**{**PLAIN, "ic": "2 mA ± 1 %"}), top=1, statistics=True)
    made = report(answer)
    assert made.verdict == "FAIL: nothing meets every limit."
    assert made.sections[0].title == "Scope"
    assert "cannot be met together" in section(made, "Non-compliances and proposed action").paragraphs[0]


def test_saturated_stage_has_no_stability_factors_in_its_report() -> None:
    given = {**PLAIN, "units": "256"}
    answer = synth.check(Stage(**given), statistics=True, r1="10k", r2="10k", rc="4k7", re="1k")
    text = section(report(answer), "Sensitivities and stability factors").paragraphs[0]
    assert text.startswith("The nominal point is saturated")


def test_document_is_inert_markdown() -> None:
    made = to_document(report(checked(name="<b>stage</b> | [x](y) `z`")))
    assert made.startswith("# Worst-case report: \\<b\\>stage\\</b\\> \\| \\[x\\](y) \\`z\\`\n")
    for line in made.splitlines():
        if line.startswith("|"):
            # A bar inside a cell is escaped, so the columns are those of the heading.
            assert regex.fullmatch(r"\|(?:(?:\\.|[^|\\])*\|)+", line)


EVERY: dict[str, tuple[dict[str, Any], dict[str, str]]] = {
    "divider": ({}, FITTED),
    "fixed_base": ({}, {"rb": "1M", "rc": "3k3"}),
    "collector_feedback": ({}, {"rb": "470k", "rc": "3k3"}),
    "collector_divider": ({}, {"r1": "100k", "r2": "22k", "rc": "2k7", "re": "470R"}),
    "two_supply": ({"vee": "12 V"}, {"rb": "10k", "rc": "3k3", "re": "5k6"}),
    "follower": ({}, {"r1": "100k", "r2": "120k", "re": "2k7"}),
    "diode_divider": ({"reference_kind": "diode"}, {"r1": "39k", "r2": "15k", "rc": "1k8", "re": "1k8"}),
    "sink": ({"vce": None}, {"r1": "43k", "r2": "24k", "re": "1k8"}),
}
"""A stage of every network: keys and fitted values, invented."""


@pytest.mark.parametrize("network", NETWORKS)
def test_every_network_has_a_report(network: str) -> None:
    changes, fitted = EVERY[network]
    given = {**PLAIN, "network": network, "units": "64", **changes}
    made = report(synth.check(Stage(**given), statistics=True, **fitted))
    assert {*TITLES} - {part.title for part in made.sections} <= {"Small signal over the box"}
    assert len(section(made, "Single faults").tables[0].rows) == 2 * len(fitted)
    assert len(section(made, "Rationale of each resistor").points) == len(fitted)
    assert to_document(made).count("\n## ") == len(made.sections)


# --- The command line -------------------------------------------------------------------------------------------------

Run = Callable[..., tuple[int, str, str]]
CHECK = [
    "check", "--supply", "12 V ± 5 %", "--ic", "2 mA ± 20 %", "--vce", "5 V", "--hfe", "110:450", "--tolerance", "1%",
    "--r1", "43k", "--r2", "24k", "--rc", "1k8", "--re", "1k8",
]  # fmt: skip


@pytest.fixture(name="run")
def _run(capsys: pytest.CaptureFixture[str]) -> Run:
    def run(*argv: str) -> tuple[int, str, str]:
        with pytest.raises(SystemExit) as ended:
            main(argv)
        out, err = capsys.readouterr()
        return int(ended.value.code or 0), out, err

    return run


def test_report_is_written_as_markdown(run: Run, tmp_path: Path) -> None:
    code, out, err = run(*CHECK, "--report", str(tmp_path / "wca.md"), "--units", "512", "--seed", "0")
    assert (code, err) == (0, "")
    assert out.startswith("PASS")
    text = (tmp_path / "wca.md").read_text(encoding="utf-8")
    assert "512 units on scrambled Sobol points, seed 0" in text
    assert "## 12. Yield" in text


def test_statistics_are_told_where_they_are_asked_for(run: Run) -> None:
    code, out, _ = run(*CHECK, "--statistics", "--units", "512", "--format", "json")
    assert code == 0
    assert json.loads(out)["candidates"][0]["statistics"]["monte_carlo"]["units"] == 512
    assert json.loads(run(*CHECK, "--format", "json")[1])["candidates"][0]["statistics"] is None


def test_answer_that_is_the_same_passes(run: Run, tmp_path: Path) -> None:
    kept = tmp_path / "answer.json"
    kept.write_text(run(*CHECK, "--format", "json")[1], encoding="utf-8")
    code, out, _ = run(*CHECK, "--expect", str(kept))
    assert code == 0
    assert out.endswith(f"Expectation {kept}: unchanged (figures to 1e-09 of their size)\n")


def test_answer_that_has_changed_fails_and_says_what(run: Run, tmp_path: Path) -> None:
    kept = tmp_path / "answer.json"
    kept.write_text(run(*CHECK, "--format", "json")[1], encoding="utf-8")
    code, out, _ = run(*CHECK, "--expect", str(kept), "--re", "1k6")
    assert code == 1
    assert "  candidates[0].resistors.re: 1800 -> 1600\n" in out
    # JSON for programs stays JSON; what changed then stands on stderr.
    code, out, err = run(*CHECK, "--re", "1k6", "--expect", str(kept), "--format", "json")
    assert code == 1
    assert json.loads(out)["candidates"][0]["resistors"]["re"] == 1600.0
    assert "candidates[0].resistors.re: 1800 -> 1600" in err


@pytest.mark.parametrize(
    ("content", "said"),
    [
        (None, r"which cannot be read \(No such file"),
        ("{", "which is no JSON"),
        ('{"schema": "restpoint/find/1"}', "whose schema is 'restpoint/find/1', accepted is the JSON that restpoint check"),
        ("[]", "whose schema is None"),
    ],
)
def test_file_that_is_no_answer_is_refused(run: Run, tmp_path: Path, content: str | None, said: str) -> None:
    path = tmp_path / "kept.json"
    if content is not None:
        path.write_text(content, encoding="utf-8")
    with pytest.raises(WrongExpectation, match=said):
        read(path)
    code, out, err = run(*CHECK, "--expect", str(path))
    assert (code, out) == (2, "")
    assert regex.search(said, err)


def test_difference_beyond_rounding_is_a_change() -> None:
    answer = synth.check(Stage(**PLAIN), **FITTED)
    kept = json.loads(answer.to_json())
    assert changes(kept, answer) == ()
    ic = kept["candidates"][0]["nominal"]["ic"]
    kept["candidates"][0]["nominal"]["ic"] = ic * (1.0 + 0.9e-9)
    kept["candidates"][0]["explanation"] = ["other words"]
    assert changes(kept, answer) == ()
    kept["candidates"][0]["nominal"]["ic"] = ic * (1.0 + 1.1e-9)
    kept["candidates"][0]["limits"].pop()
    kept["gone"] = 1
    found = changes(kept, answer)
    assert [line.partition(":")[0] for line in found] == ["candidates[0].nominal.ic", "candidates[0].limits", "gone"]
    assert_allclose(float(found[0].rpartition(" ")[2]), ic, rtol=1e-11, atol=0)


def test_three_methods_stand_side_by_side_in_the_terminal(run: Run) -> None:
    code, out, _ = run(*CHECK, "--statistics", "--units", "512", "--seed", "0", "--ic", "1.9 : 2 : 2.1 mA")
    assert code == 1
    lines = out.splitlines()
    start = lines.index("Three methods")
    assert lines[start + 1].split() == ["method", "IC", "VCE", "its", "question"]
    assert [line.split("  ")[1] for line in lines[start + 2 : start + 5]] == [
        "extreme value", "root-sum-square, 3 sigma", "Monte Carlo, 99.73 %",
    ]  # fmt: skip
    assert lines[start + 5].startswith("  512 units on Sobol points, seed 0: 512 active")
    assert "(Clopper-Pearson)" in lines[start + 6]
    assert lines[start + 7].startswith("  by limit: target.ic ")
    assert max(map(len, lines)) <= 100
    assert "Three methods" not in run(*CHECK)[1]
