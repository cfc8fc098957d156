"""The benchmarks run, and what they print is right; how long it took is never asserted.

Besides, the search against two ways that share nothing with it: an integer model that CP-SAT proves, and an optimizer.
"""

import math
import sys
from pathlib import Path

import bench_search
import bench_statistics
import integer_model
import numpy as np
import pytest
import rivals
from bench_search import SERIES, main, measure
from numpy.testing import assert_allclose

from synth.search import search
from synth.spaces import goal_of, spaces_of
from synth.stage import Stage

VALUES = {"E6": 37, "E12": 73}
"""Values from 10 ohm to 10 Mohm: six decades and the last end (IEC 60063)."""


@pytest.mark.parametrize("series", VALUES)
def test_a_row_says_what_was_searched_and_that_it_is_proved(series: str) -> None:
    row = measure(series, top=3)
    assert row.combinations == VALUES[series] ** 4
    assert row.complete
    assert 0 < row.solves < row.combinations
    assert row.best is None or 0.0 < row.best <= row.bound
    assert min(row.seconds, row.omega_seconds, row.megabytes, row.enumeration, row.candidate_omegas, row.vertex_omegas) > 0.0
    assert not row.measured


def test_finer_series_and_pairs_are_no_worse() -> None:
    """E12 contains E6, and its default tolerance is half as wide; pairs of E6 contain E6."""
    found = [search(spaces_of(stage), goal_of(stage), top=1).found for stage in map(bench_search.request, ("E6", "E12", "E6-pairs"))]
    coarse, fine, pairs = (best[0].drift if best else math.inf for best in found)
    assert fine < coarse
    assert pairs <= coarse


@pytest.mark.parametrize("name", bench_search.EVERY)
def test_every_row_is_a_request(name: str) -> None:
    assert isinstance(bench_search.request(name), Stage)


def test_the_table_has_a_row_for_each_name_the_smallest_first(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["E12", "E6"]) == 0
    head, titles, *rows, words = capsys.readouterr().out.splitlines()
    assert "Python" in head
    assert titles.split() == list(bench_search.HEAD)
    assert [row.split()[0] for row in rows] == ["E6", "E12"]
    assert all(len(row.split()) == len(bench_search.HEAD) and row.split()[-1] == "yes" for row in rows)
    assert "Wright omega calls" in words
    assert "power of the number of combinations" in words


def test_an_unknown_name_is_refused(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["E7"]) == 2
    assert capsys.readouterr().err == f"search: read 'E7', accepted are {' '.join(bench_search.EVERY)}\n"


def test_every_series_network_and_pairs_are_searched_by_default() -> None:
    assert SERIES == ("E6", "E12", "E24", "E48", "E96", "E192")
    assert set(bench_search.EVERY) >= {"E24-pairs", "any", *bench_search.FORMS}


@pytest.mark.parametrize(("seconds", "text"), [(3.0, "3s"), (600.0, "10min"), (7.2e4, "20h"), (8.64e5, "10d"), (3.156e9, "1e+02y")])
def test_long_times_are_told_in_longer_units(seconds: float, text: str) -> None:
    assert bench_search._duration(seconds) == text


# --- CP-SAT -------------------------------------------------------------------------------------------------------

MODELS = {
    "contract": {},
    "fixed VBE": {"vbe_model": "fixed"},
    "no limit met": {"collector_share": "0.5", "bleeder_current": "20 uA"},
    "supply and cold": {"supply": "12 V ± 5 %", "temperature": "-40 : 25 : 85 °C", "tolerance": "10 %"},
    "one gain": {"hfe": "200", "ic": "1.5 mA", "vce": "4 V", "tcr": "0 : 400 ppm/K"},
}


def agree(series: str, **changes: str) -> integer_model.Proof:
    row = integer_model.compare(series, **changes)
    assert row.proof.complete
    if row.search_drift is None:
        assert row.proof.index is None
        assert row.proof.bound == integer_model.START
    else:
        # Both measured in floating point over the whole box; nothing lies below by more than one step of the model.
        assert_allclose(row.proof.drift, row.search_drift, rtol=1e-12, atol=0.0)
        assert row.proof.bound >= row.search_drift * (1.0 - 2.0 * integer_model.STEP)
    return row.proof


@pytest.mark.parametrize("name", MODELS)
def test_an_integer_model_proves_the_same_winner(name: str) -> None:
    agree("E3", **MODELS[name])


def test_the_integer_models_are_of_both_kinds() -> None:
    assert agree("E3", **MODELS["contract"]).index is not None
    assert agree("E3", **MODELS["no limit met"]).index is None


def test_what_the_model_admits_is_measured_and_what_fails_is_barred() -> None:
    """A measure that refuses the first three answers: the model must then offer others, and end with the best of those."""
    space, goal = integer_model.narrow("E3", **MODELS["fixed VBE"])
    refused: list[tuple[int, ...]] = []

    def measure_late(index: tuple[int, ...]) -> float | None:
        if len(refused) < 3:
            refused.append(index)
            return None
        assert index not in refused
        return integer_model.measured(space, goal, index)

    proof = integer_model.prove(space, goal, measure_late)
    assert len(set(refused)) == 3
    assert proof.complete
    assert proof.models >= 4


@pytest.mark.long
@pytest.mark.parametrize("name", MODELS)
def test_an_integer_model_proves_the_same_winner_among_a_thousand(name: str) -> None:
    agree("E6", **MODELS[name])


# --- Rivals -------------------------------------------------------------------------------------------------------


def test_the_search_is_never_worse_than_a_rival() -> None:
    for number in range(4):
        duel = rivals.duel(number, generations=6)
        for rival, best in ((duel.textbook, duel.exact), (duel.optimizer, duel.exact), (duel.textbook, duel.exact_same_re)):
            assert best.drift <= rival.drift * (1.0 + 1e-12)
        assert duel.exact.drift <= duel.exact_same_re.drift * (1.0 + 1e-12)


def test_the_textbook_procedure_follows_its_rules() -> None:
    """By hand: 12 V, 2 mA, 5 V; VE 1.2 V over 600 ohm, 5.8 V over 2.9 kohm, VB 1.85 V over 9.25 kohm at 0.2 mA, and 10.15 V
    over r1 at 0.2 mA and 2 mA / sqrt(110 · 450) = 9 uA: 48.6 kohm; of E24 620 (609 would be as far), 3k, 9k1 and 47k."""
    stage = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450", series="E24")
    assert rivals.textbook(stage) == {"r1": 47e3, "r2": 9.1e3, "rc": 3e3, "re": 620.0}


def test_the_comparison_is_printed(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(rivals, "GENERATIONS", 2)
    assert rivals.main(["2"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert lines[0].startswith("2 random divider stages")
    assert [line[:8] for line in lines[2:6]] == ["textbook", "optimize", "exact se", "exact, t"]
    assert "never worse" in lines[2]
    assert "cuts the textbook's drift" in lines[6]


def test_one_command_prints_each_table(capsys: pytest.CaptureFixture[str]) -> None:
    sys.path.insert(0, str(Path(__file__).resolve().parents[2]))
    from tests.bench.__main__ import main as bench

    assert bench(["integer", "E3"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert np.all([word in lines[1] for word in ("combinations", "models", "over search", "proved")])
    assert lines[2].split()[-1] == "yes"
    assert bench(["sorting"]) == 2
    assert capsys.readouterr().err == "bench: read 'sorting', accepted are search integer rivals statistics\n"


def test_a_lot_of_units_is_drawn_and_timed(capsys: pytest.CaptureFixture[str]) -> None:
    assert bench_statistics.main(["4096"]) == 0
    row = capsys.readouterr().out.splitlines()[1].split()
    assert row[0] == "4096"
    assert float(row[2]) > 0.0
    assert 0.0 <= float(row[3].rstrip("%")) <= 100.0
