"""The benchmark runs, and what it prints of a search is right; how long it took is never asserted."""

import math

import bench_search
import pytest
from bench_search import main, measure

VALUES = {"E6": 37, "E12": 73}
"""Values from 10 ohm to 10 Mohm: six decades and the last end (IEC 60063)."""


@pytest.mark.parametrize("series", VALUES)
def test_a_row_says_what_was_searched_and_that_it_is_proved(series: str) -> None:
    row = measure(series, top=3)
    assert row.combinations == VALUES[series] ** 4
    assert row.complete
    assert 0 < row.solves < row.combinations
    assert row.best is None or 0.0 < row.best <= row.bound
    assert row.seconds > 0.0
    assert row.omega_seconds > 0.0


def test_finer_series_are_no_worse() -> None:
    """E12 contains E6; its default tolerance is half as wide."""
    coarse, fine = (measure(series, top=1).best for series in ("E6", "E12"))
    assert (math.inf if fine is None else fine) < (math.inf if coarse is None else coarse)


def test_the_table_has_a_row_for_each_series(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["E6", "E12"]) == 0
    head, titles, *rows = capsys.readouterr().out.splitlines()
    assert "Python" in head
    assert titles.split() == ["series", "combinations", "solves", "seconds", "ratio", "best", "bound", "complete"]
    assert [row.split()[0] for row in rows] == ["E6", "E12"]
    assert all(len(row.split()) == 8 and row.split()[-1] == "yes" for row in rows)


def test_an_unknown_series_is_refused(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["E7"]) == 2
    assert capsys.readouterr().err == "series: read 'E7', accepted are E6 E12 E24 E48 E96 E192 any plain limits\n"


def test_every_series_of_the_table_is_searched_by_default() -> None:
    assert bench_search.SERIES == ("E6", "E12", "E24", "E48", "E96", "E192")
