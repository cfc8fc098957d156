"""Figures: no text over another or cut off whatever the values, the numbers in them, and files that come out the same.

The stages are invented and reach from microamperes to amperes and from 1.5 V to 250 V, over every network. Extents are those
of the finished figure.
"""

from __future__ import annotations

import itertools
import math
from functools import cache
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import matplotlib
import numpy as np
import pytest
from matplotlib.figure import Figure
from matplotlib.text import Text
from numpy.testing import assert_allclose

import synth
from synth.answer import Answer, Candidate
from synth.explain import cause_words
from synth.networks import NETWORKS
from synth.present import figures as pictures
from synth.present.figures import (
    NAMES,
    budget,
    figures,
    files,
    frontier,
    histogram,
    load_line,
    offers_of,
    saved,
    sheet,
    stress,
    styled,
)
from synth.present.figures.style import engineering
from synth.stage import Stage
from synth.statistics import Lot
from synth.views import box_of, curve, units

LOT = Lot(units=1024)
TYPE = {"vceo": "45 V", "ic_max": "100 mA", "ptot": "250 mW"}
CASES: dict[str, tuple[dict[str, str], dict[str, str]]] = {
    "divider, usual": (
        {"supply": "12 V ± 5 %", "ic": "2 mA ± 20 %", "vce": "5 V ± 30 %", "hfe": "200 : 450", "style": "0805", **TYPE},
        {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"},
    ),
    "divider, 250 V": (
        {"supply": "250 V ± 10 %", "ic": "2 mA", "vce": "110 V", "hfe": "60 : 200", "vceo": "300 V", "style": "0805"},
        {"r1": "470k", "r2": "24k", "rc": "56k", "re": "5k6"},
    ),
    "divider, positive ground": (
        {"supply": "9 V ± 5 %", "ic": "1 mA", "vce": "3 V", "hfe": "60 : 120", "polarity": "pnp", "ground": "positive",
         "name": "a stage with a name so long that a title of one line could never hold it, whatever the width"},
        {"r1": "33k", "r2": "12k", "rc": "3k9", "re": "1k5"},
    ),
    "fixed_base, microamperes": (
        {"supply": "1.5 V ± 10 %", "ic": "5 uA", "vce": "1.2 V", "hfe": "200 : 400"}, {"rb": "47M", "rc": "47k"},
    ),
    "fixed_base, saturates": (
        {"supply": "12 V ± 5 %", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450"}, {"rb": "1M", "rc": "3k3"},
    ),
    "collector_feedback, 1.5 V": (
        {"supply": "1.2 : 1.5 : 1.6 V", "ic": "100 uA", "vce": "0.8 V", "hfe": "100 : 300"}, {"rb": "220k", "rc": "6k8"},
    ),
    "collector_divider": (
        {"supply": "12 V ± 5 %", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450"},
        {"r1": "20k", "r2": "20k", "rc": "1k8", "re": "1k6"},
    ),
    "two_supply": (
        {"supply": "15 V ± 5 %", "vee": "15 V ± 5 %", "ic": "1 mA ± 10 %", "vc": "7.5 V", "hfe": "100 : 300"},
        {"rb": "47k", "rc": "7k5", "re": "14k"},
    ),
    "follower, 1 A": (
        {"supply": "12 V", "ic": "1 A", "vce": "6 V", "hfe": "40 : 120", "vbe_ic": "1 A", "vbe": "0.8 V ± 50 mV",
         "ptot": "20 W", "ic_max": "3 A", "vceo": "60 V"},
        {"r1": "56R", "r2": "100R", "re": "5R6"},
    ),
    "diode_divider": (
        {"supply": "12 V ± 5 %", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "reference_kind": "diode"},
        {"r1": "22k", "r2": "10k", "rc": "1k8", "re": "1k8"},
    ),
    "sink, Zener": (
        {"supply": "12 V ± 5 %", "ic": "10 mA", "hfe": "200 : 450", "vload": "18 : 24 : 29 V", "reference_kind": "zener",
         "reference_voltage": "5.1 V ± 5 %"},
        {"r1": "1k2", "re": "442R"},
    ),
    "divider, no spread": (
        {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "200", "vbe": "0.65 V", "temperature": "25 °C",
         "tolerance": "0.01 %", "tcr": "0 ppm/K"},
        {"r1": "43k", "r2": "24k", "rc": "1k8", "re": "1k8"},
    ),
}  # fmt: skip
every_case = pytest.mark.parametrize("case", CASES)


@cache
def judged(case: str) -> tuple[Stage, Answer, Candidate]:
    keys, values = CASES[case]
    stage = synth.Stage(network=case.split(",")[0], **{"tolerance": "1 %", **keys}).replace(**values)
    answer = synth.check(stage)
    assert answer.best is not None
    return stage, answer, answer.best


@cache
def drawn(case: str) -> dict[str, Figure]:
    stage, answer, _ = judged(case)
    return dict(figures(stage, answer, lot=LOT))


def texts(figure: Figure) -> list[Text]:
    return [t for t in figure.findobj(Text) if t.get_visible() and t.get_text().strip()]


def test_cases_cover_every_network() -> None:
    assert {case.split(",")[0] for case in CASES} == set(NETWORKS)


def no_text_is_hidden(figure: Figure) -> None:
    """No text over another, none cut off."""
    with styled():
        figure.draw_without_rendering()
    width, height = figure.get_size_inches() * figure.dpi
    boxes = [(t.get_text(), t.get_window_extent()) for t in texts(figure)]
    assert len(boxes) > 8
    for text, box in boxes:
        assert min(box.x0, box.y0, width - box.x1, height - box.y1) > -0.5, f"{text!r} is cut"
    for (one, a), (two, b) in itertools.combinations(boxes, 2):
        apart = a.x1 <= b.x0 or b.x1 <= a.x0 or a.y1 <= b.y0 or b.y1 <= a.y0
        assert apart, f"{one!r} over {two!r}"


@every_case
def test_no_text_lies_over_another(case: str) -> None:
    found = drawn(case)
    assert {"load_line", "yield"} <= set(found) <= set(NAMES)
    for figure in found.values():
        no_text_is_hidden(figure)


def test_a_hidden_text_is_seen() -> None:
    with styled():
        figure = sheet()
        ax = load_line(figure.add_subplot(), *judged("divider, usual")[1:])
    no_text_is_hidden(figure)
    ax.text(1.0, 0.001, "one")
    ax.text(1.0, 0.001, "two")
    with pytest.raises(AssertionError, match="'one' over 'two'"):
        no_text_is_hidden(figure)


def test_functions_take_and_return_axes() -> None:
    stage, answer, candidate = judged("divider, usual")
    built = units(stage, candidate, ("ic", "vce"), LOT)
    found = curve(box_of(stage, candidate), "hfe", ("ic", "vce"))
    assert found is not None
    for make in (
        lambda ax: load_line(ax, answer, candidate, built),
        lambda ax: budget(ax, candidate, "ic"),
        lambda ax: stress(ax, candidate),
        lambda ax: histogram(ax, answer, built, "vce"),
        lambda ax: pictures.over(ax, answer, found, "ic"),
        lambda ax: frontier(ax, offers_of(answer, candidate)),
    ):
        ax = sheet().add_subplot()
        assert make(ax) is ax


# --- What the figures say -------------------------------------------------------------------------------------------


def test_load_line_ends_where_the_circuit_says() -> None:
    """By hand: with the transistor cut off VCE is VCC, with VCE 0 the current is VCC/(rc + re·(1 + 1/h)), a straight line."""
    _, answer, candidate = judged("divider, usual")
    ax = load_line(sheet().add_subplot(), answer, candidate)
    x, y = ax.lines[0].get_data()
    share = candidate.nominal.ib / candidate.nominal.ic
    # A closed form in doubles.
    assert_allclose(x, [0.0, 12.0], rtol=1e-12, atol=0)
    assert_allclose(y[0], 12.0 / (1800.0 + 1800.0 * (1.0 + share)), rtol=1e-12, atol=0)
    # The Q-point lies on it.
    on_line = y[0] * (1.0 - candidate.nominal.vce / x[1])
    assert_allclose(on_line, candidate.nominal.ic, rtol=1e-9, atol=0)


def test_box_of_the_load_line_holds_every_unit() -> None:
    stage, answer, candidate = judged("divider, usual")
    built = units(stage, candidate, ("ic", "vce"), LOT)
    ax = load_line(sheet().add_subplot(), answer, candidate, built)
    x, y = ax.lines[1].get_data()
    box = next(p for p in ax.patches if not p.get_fill())
    left, low = box.get_xy()
    assert len(x) == 600
    assert left <= np.min(x)
    assert np.max(x) <= left + box.get_width()
    assert low <= np.min(y)
    assert np.max(y) <= low + box.get_height()


@pytest.mark.parametrize("quantity", ["ic", "vce"])
def test_bars_of_a_budget_are_sorted_and_add_up(quantity: str) -> None:
    """The shares of a budget add up to the drift, to rounding; so do the bars."""
    _, _, candidate = judged("divider, usual")
    ax = budget(sheet().add_subplot(), candidate, quantity)
    lengths = [bar.get_width() for bar in ax.patches]
    assert lengths[:-1] == sorted(lengths[:-1], reverse=True)
    assert_allclose(sum(lengths), candidate.drift.of()[quantity], rtol=1e-9, atol=0)
    names = [t.get_text() for t in ax.get_yticklabels()]
    assert names[0] == cause_words(candidate.budget[quantity][0].cause)


def test_curves_meet_the_worst_case_of_the_answer() -> None:
    """The band over an axis has the extremes of the whole box as its least and greatest, where they lie at an end of the axis."""
    stage, _, candidate = judged("divider, usual")
    for axis in ("vcc", "hfe"):
        found = curve(box_of(stage, candidate), axis, ("ic",))
        assert found is not None
        # The same extremes by the same law, at the ends that decide: IC rises with both.
        assert_allclose([found.low["ic"][0], found.high["ic"][-1]], candidate.worst.ic, rtol=1e-9, atol=0)
        assert np.all(found.low["ic"] <= found.nominal["ic"])
        assert np.all(found.nominal["ic"] <= found.high["ic"])


@pytest.mark.parametrize(("r1", "whole"), [("33k + 10k", 43e3), ("82k || 91k", 82e3 * 91e3 / 173e3)])
def test_a_pair_is_drawn_from_its_two_parts(r1: str, whole: float) -> None:
    """By hand: resistances in series add up, in parallel their conductances do."""
    stage, _, _ = judged("divider, usual")
    answer = synth.check(stage, r1=r1)
    assert answer.best is not None
    box = box_of(stage, answer.best)
    # A sum, or a product over a sum, of doubles.
    assert_allclose(box.parts["r1"].nominal, [whole], rtol=1e-12, atol=0)
    assert_allclose(box.extreme(("ic",), 1).value[0], answer.best.worst.ic[1], rtol=1e-9, atol=0)


def test_a_curve_without_width_is_left_out() -> None:
    stage, _, candidate = judged("divider, no spread")
    assert curve(box_of(stage, candidate), "temperature", ("ic",)) is None
    assert "curves" not in drawn("divider, no spread")


def test_bars_of_stress_are_worst_over_allowed() -> None:
    """By hand: 12.6 V, the most of the rail, against three quarters of VCEO 45 V, the policy that holds unasked."""
    _, _, candidate = judged("divider, usual")
    ax = stress(sheet().add_subplot(), candidate)
    rows = dict(zip([t.get_text() for t in ax.get_yticklabels()], [b.get_width() for b in ax.patches], strict=True))
    assert_allclose(rows["VCEO"], 12.6 / (0.75 * 45.0), rtol=1e-12, atol=0)
    assert list(rows.values()) == sorted(rows.values(), reverse=True)
    assert {"R1 power", "R1 voltage", "IC max"} <= set(rows)


def test_overstress_is_seen_without_colour() -> None:
    """A part above its rating passes the dashed line at 100 %."""
    _, _, candidate = judged("divider, 250 V")
    ax = stress(sheet().add_subplot(), candidate)
    assert max(bar.get_width() for bar in ax.patches) > 1.0
    line = next(line for line in ax.lines if line.get_linestyle() == "--")
    assert set(line.get_xdata()) == {1.0}


def test_histogram_counts_every_unit() -> None:
    stage, answer, candidate = judged("divider, usual")
    built = units(stage, candidate, ("ic", "vce"), LOT)
    ax = histogram(sheet().add_subplot(), answer, built, "ic")
    heights = next(p for p in ax.patches if type(p).__name__ == "StepPatch").get_data().values
    # Shares of a whole.
    assert_allclose(heights.sum(), 1.0, rtol=1e-12, atol=0)
    assert "1024 units" in ax.get_title(loc="left") + ax.get_title()


REQUEST = {"supply": "12 V ± 5 %", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": "E12", "tolerance": "5 %"}


def test_frontier_of_a_list_has_nothing_below_its_steps() -> None:
    answer = synth.find(synth.Stage(**REQUEST), top=8)
    ax = frontier(sheet().add_subplot(), offers_of(answer, answer.candidates[2]))
    points = [(c.supply_current, c.drift.q_point) for c in answer.candidates]
    corners = set(zip(*ax.lines[0].get_data(), strict=True))
    best = {p for p in points if not any(o != p and o[0] <= p[0] and o[1] <= p[1] for o in points)}
    assert best <= corners
    ring = next(c for c in ax.collections if c.get_label() == "chosen")
    assert tuple(ring.get_offsets()[0]) == points[2]
    figure = ax.get_figure()
    assert isinstance(figure, Figure)
    no_text_is_hidden(figure)


def test_frontier_that_was_asked_for_is_drawn_along_each_axis() -> None:
    """Every point of an exact frontier is a corner of the steps; where more is better they run the other way."""
    stage = synth.Stage(**REQUEST)
    answer = synth.find(stage, top=2, frontier="supply_current,input_resistance")
    assert answer.frontier is not None
    assert len(answer.frontier.points) > 3
    figure = dict(figures(stage, answer, lot=LOT))["frontier"]
    no_text_is_hidden(figure)
    assert [ax.get_xlabel() for ax in figure.axes] == ["supply current [mA]", "input resistance [kΩ]"]
    for ax, axis, sign in zip(figure.axes, answer.frontier.axes, (1.0, -1.0), strict=True):
        points = {(p.figures[axis], p.drift) for p in answer.frontier.points}
        corners = set(zip(*ax.lines[0].get_data(), strict=True))
        best = {p for p in points if not any(o != p and sign * o[0] <= sign * p[0] and o[1] <= p[1] for o in points)}
        assert best <= corners


# --- Axes -----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("low", "high", "unit", "label", "some"),
    [
        (0.0, 2.2e-3, "A", "x [mA]", "1.0"),
        (0.0, 4.1e-6, "A", "x [µA]", "2"),
        (0.0, 1.3, "A", "x [A]", "0.50"),
        (0.0, 262.0, "V", "x [V]", "100"),
        (-0.05, 0.6, "%", "x [%]", "20"),
        (0.0199995, 0.0200005, "A", "x [mA]", "20.0000"),
        (263.15, 328.15, "°C", "x [°C]", "20"),
        (100.0, 450.0, "", "x", "200"),
        (-12e-3, 0.0, "V", "x [mV]", "−10"),
        (5.0, 5.0, "V", "x [V]", "5"),
    ],
)
def test_an_axis_has_one_prefix(low: float, high: float, unit: str, label: str, some: str) -> None:
    ax = sheet().add_subplot()
    engineering(ax, "x", low, high, "x", unit, zero=273.15 if unit == "°C" else 0.0)
    shown = [t.get_text() for t in ax.get_xticklabels()]
    assert ax.get_xlabel() == label
    assert some in shown
    assert len(shown) == len(set(shown)) >= 2
    scale = {"mA": 1e-3, "µA": 1e-6, "mV": 1e-3, "%": 1e-2}.get(label[3:-1], 1.0)
    zero = 273.15 if unit == "°C" else 0.0
    # Ticks are where they say they are, to the digits shown.
    for place, text in zip(ax.get_xticks(), shown, strict=True):
        decimals = len(text.partition(".")[2])
        assert math.isclose((place - zero) / scale, float(text.replace("−", "-")), rel_tol=0.0, abs_tol=0.51 * 10.0**-decimals)


# --- Files ----------------------------------------------------------------------------------------------------------


def test_files_come_out_the_same_and_texts_stay_texts() -> None:
    stage, answer, _ = judged("follower, 1 A")
    once, twice = (files(stage, answer, lot=LOT) for _ in range(2))
    assert list(once) == list(twice)
    assert {name.partition(".")[0] for name in once} == set(NAMES) - {"frontier"}
    for name, content in once.items():
        assert content == twice[name], name
        if name.endswith(".svg"):
            root = ElementTree.fromstring(content)
            words = " ".join("".join(e.itertext()) for e in root.iter("{http://www.w3.org/2000/svg}text"))
            assert "IC" in words, name
            assert b"<dc:date>" not in content
        else:
            assert content.startswith(b"\x89PNG\r\n\x1a\n")


def test_settings_of_matplotlib_stay_as_they_were() -> None:
    import matplotlib.pyplot as plt

    before = dict(matplotlib.rcParams)
    stage, answer, _ = judged("divider, no spread")
    told: list[str] = []
    for name, figure in figures(stage, answer, lot=LOT, progress=told.append):
        assert told[-1] == name
        assert dict(matplotlib.rcParams) == before
        saved(figure, "svg")
    assert dict(matplotlib.rcParams) == before
    assert not plt.get_fignums()


def run(argv: list[str], capsys: pytest.CaptureFixture[str]) -> tuple[int, str, str]:
    from synth.cli import main

    with pytest.raises(SystemExit) as stop:
        main(argv)
    out, err = capsys.readouterr()
    return int(stop.value.code or 0), out, err


ARGUMENTS = ["check", "--supply", "12V", "--ic", "2mA", "--vce", "5V", "--hfe", "200", "--vbe", "0.65V", "--temperature", "25°C",
             "--tolerance", "0.01%", "--tcr", "0ppm/K", "--r1", "43k", "--r2", "24k", "--rc", "1k8", "--re", "1k8"]  # fmt: skip


def test_figures_are_written_to_a_folder(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "pictures"
    code, out, err = run([*ARGUMENTS, "--figures", str(folder), "--symbols", "zigzag"], capsys)
    assert code == 0
    assert out.startswith("PASS")
    written = sorted(path.name for path in folder.iterdir())
    assert "circuit.svg" in written
    assert "load_line.png" in written
    assert all(name in err for name in written)
    # A second time they would be in the way.
    code, out, err = run([*ARGUMENTS, "--figures", str(folder)], capsys)
    assert (code, out) == (2, "")
    assert "circuit.svg' exists already" in err
    before = (folder / "circuit.svg").read_bytes()
    assert run([*ARGUMENTS, "--figures", str(folder), "--force"], capsys)[0] == 0
    assert (folder / "circuit.svg").read_bytes() != before


def test_a_terminal_is_told_what_is_drawn(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    from synth.cli import pictures as command

    stage, answer, _ = judged("divider, no spread")
    monkeypatch.setattr("sys.stderr.isatty", lambda: True, raising=False)
    command.files(answer, stage.replace(units=64), {"figures": tmp_path})
    assert "3 of 7 drawn, now curves" in capsys.readouterr().err


def test_a_folder_that_cannot_be_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "file").write_text("x")
    for name, reason in (("file", "which is a file, accepted is a folder"), ("no/where", "a folder in one that exists")):
        code, out, err = run([*ARGUMENTS, "--figures", str(tmp_path / name)], capsys)
        assert (code, out) == (2, "")
        assert name in err
        assert reason in err


def test_nothing_is_drawn_where_nothing_qualifies(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    options = ["--supply", "12V ± 30 %", "--ic", "2 mA ± 1 %", "--vce", "5V", "--hfe", "100:450", "--series", "E6"]
    code, out, err = run(["find", *options, "--figures", str(tmp_path / "new"), "--draw"], capsys)
    assert code == 1
    assert out.startswith("FAIL")
    assert "nothing to draw" in err
    assert not (tmp_path / "new").exists()


# --- Drawn in a terminal, shown in a notebook ----------------------------------------------------------------------


@every_case
def test_drawing_keeps_to_the_width(case: str) -> None:
    from synth.present.drawing import draw

    _, answer, candidate = judged(case)
    for columns in (20, 40, 63, 80, 100, 300):
        text = draw(answer, candidate, columns=columns)
        assert max(map(len, text.splitlines())) <= min(max(columns, 40), 100)
        assert "\x1b" not in text
        assert text.count("◆") == 2


def test_drawing_puts_the_q_point_where_it_is() -> None:
    """By hand: on 96 columns or so VCE 5 V of 12 V lies at 41 % of the width, to half a character and the margin."""
    from synth.present.drawing import draw

    _, answer, candidate = judged("divider, no spread")
    row = next(line for line in draw(answer, candidate, columns=100).splitlines() if "◆" in line)
    start, field = row.index("│") + 1, 100 - row.index("│") - 1
    assert abs((row.index("◆") - start) / field - candidate.nominal.vce / (1.02 * 12.0)) < 1.5 / field


def test_longest_bar_is_the_largest_cause() -> None:
    from synth.present.drawing import draw

    _, answer, candidate = judged("divider, usual")
    text = draw(answer, candidate, columns=100)
    first = text[text.index("IC drifts") :].splitlines()[1]
    assert first.strip().startswith(cause_words(candidate.budget["ic"][0].cause))
    assert first.count("█") == max(line.count("█") for line in text.splitlines())


def test_drawing_in_colour_or_ascii_says_the_same() -> None:
    from synth.present.drawing import draw

    _, answer, candidate = judged("fixed_base, microamperes")
    plain, colour = (draw(answer, candidate, colour=c) for c in (False, True))
    assert "\x1b[" in colour
    import re as regex

    assert regex.sub(r"\x1b\[[0-9;]*m", "", colour) == plain
    ascii_text = draw(answer, candidate, ascii_only=True)
    assert ascii_text.isascii()
    assert "Q Q-point" in ascii_text
    assert "uA" in ascii_text


def test_draw_is_plain_in_a_pipe(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, _ = run([*ARGUMENTS, "--draw"], capsys)
    assert code == 0
    assert "◆ Q-point" in out
    assert "\x1b" not in out
    code, out, err = run([*ARGUMENTS, "--draw", "--format", "json"], capsys)
    assert (code, out) == (2, "")
    assert "--draw: goes with --format table, read 'json'" in err


@pytest.mark.parametrize(("setting", "coloured"), [({}, True), ({"NO_COLOR": "1"}, False), ({"TERM": "dumb"}, False)])
def test_draw_is_coloured_in_a_terminal_only(
    setting: dict[str, str], coloured: bool, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """NO_COLOR, a convention of many programs: whatever its value, no colour is added."""
    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.setenv("TERM", "xterm")
    for name, value in setting.items():
        monkeypatch.setenv(name, value)
    _, answer, _ = judged("divider, usual")
    from synth.cli import pictures as command

    monkeypatch.setattr("sys.stdout.isatty", lambda: True, raising=False)
    options: dict[str, Any] = {"draw": True, "output": None}
    assert ("\x1b[" in command.drawing(answer, options)) == coloured


def test_a_notebook_shows_a_table_and_runs_nothing() -> None:
    stage, _, _ = judged("divider, usual")
    answer = synth.check(stage.replace(name="<script>alert(1)</script>"))
    shown = answer._repr_html_()
    assert "<script>" not in shown
    assert "&lt;script&gt;" in shown
    root = ElementTree.fromstring(shown)
    cells = ["".join(e.itertext()) for e in root.iter("td")]
    assert cells[:3] == ["1", "divider", "R1 43K, R2 24K, RC 1K8, RE 1K8"]
    assert len(list(root.iter("th"))) == len(cells) == 7
    options = {"supply": "12V ± 30 %", "ic": "2 mA ± 1 %", "vce": "5V", "hfe": "100:450", "series": "E6"}
    nothing = synth.find(synth.Stage(**options))._repr_html_()
    assert "nothing qualifies" in nothing
    assert "target.ic" in nothing


# --- README ---------------------------------------------------------------------------------------------------------

ROOT = Path(__file__).resolve().parents[1]


def spoken(path: Path) -> list[str]:
    return ["".join(e.itertext()) for e in ElementTree.parse(path).getroot().iter("{http://www.w3.org/2000/svg}text")]


def places(path: Path) -> np.ndarray:
    found = ElementTree.parse(path).getroot().iter("{http://www.w3.org/2000/svg}text")
    return np.array([[float(e.attrib["x"]), float(e.attrib["y"])] for e in found])


def test_pictures_of_the_readme_are_those_of_today(tmp_path: Path) -> None:
    """What they say is compared, not how a version of a library writes it down; in the circuit also where it stands [pt]."""
    import runpy

    runpy.run_path(str(ROOT / "examples" / "pictures.py"))["main"]([str(tmp_path)])
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    for name in ("circuit.svg", "load_line.svg"):
        kept = ROOT / "examples" / "pictures" / name
        assert f"(examples/pictures/{name})" in readme
        assert spoken(tmp_path / name) == spoken(kept), "run python examples/pictures.py"
        assert len(spoken(kept)) > 10
    now, then = (places(folder / "circuit.svg") for folder in (tmp_path, ROOT / "examples" / "pictures"))
    assert_allclose(now - now[0], then - then[0], rtol=0, atol=0.1)


def test_the_readme_is_told_when_its_pictures_are_stale(tmp_path: Path) -> None:
    """The check above would notice another resistor."""
    kept = (ROOT / "examples" / "pictures" / "circuit.svg").read_text(encoding="utf-8")
    (tmp_path / "circuit.svg").write_text(kept.replace("160K", "150K"), encoding="utf-8")
    assert spoken(tmp_path / "circuit.svg") != spoken(ROOT / "examples" / "pictures" / "circuit.svg")
