"""The board and batch benchmarks run, and what they print is right; how long they took is never asserted."""

from __future__ import annotations

import bench_board
import pytest


def test_lines_of_a_board_of_channels_are_proved() -> None:
    row = bench_board.board("board", 40, 10.0)
    lines, cost, drift = row.selection.bounds
    # Twenty designs of two channels: the channels of a design share all values, so no more than four lines each.
    assert lines.value == lines.bound <= 4 * bench_board.DESIGNS
    assert cost.value == 0.0
    assert drift.bound <= drift.value


def test_every_row_of_the_batch_is_found(capsys: pytest.CaptureFixture[str]) -> None:
    seconds, found = bench_board.batch(4)
    assert found == 4
    assert seconds > 0.0
    assert bench_board.main(["nothing"]) == 2
    assert "accepted are board, hard, batch" in capsys.readouterr().err
