"""A search that runs out of time or is interrupted answers with what it has, how far from proved that is, and says so.

The request that nothing meets by a hair (invented): collector feedback with a divider, VCE within 5 % and no window on IC,
takes some 5e7 Q-point solves to settle, about half a minute.
"""

import json
import os
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

from synth.cli import main

ROOT = Path(__file__).resolve().parents[1]
LONG = [
    "find", "--network", "collector_divider", "--supply", "12 V", "--ic", "2 mA", "--vce", "5 V ± 5 %",
    "--hfe", "110 : 450", "--series", "E96", "--tolerance", "1 %",
]  # fmt: skip
EASY = ["find", "--supply", "12V", "--ic", "2mA", "--vce", "5V", "--hfe", "110:450", "--tolerance", "1%"]


def run(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str, str]:
    with pytest.raises(SystemExit) as ended:
        main([*arguments])
    shown = capsys.readouterr()
    assert isinstance(ended.value.code, int)
    return ended.value.code, shown.out, shown.err


def test_budget_ends_a_long_search_without_a_candidate(capsys: pytest.CaptureFixture[str]) -> None:
    start = time.monotonic()
    code, out, err = run(capsys, *LONG, "--budget", "0.2 s")
    assert time.monotonic() - start < 10.0
    assert (code, err) == (1, "")
    head = " ".join(out.split("\n\n")[0].split())
    assert head.startswith("OPEN stage: stopped before any of 1.92e+08 combinations was found to meet every limit;")
    assert "it is open whether one does" in head


def test_budget_is_told_in_json(capsys: pytest.CaptureFixture[str]) -> None:
    code, out, _ = run(capsys, *LONG, "--budget", "200 ms", "--format", "json")
    found = json.loads(out)
    assert code == 1
    assert found["candidates"] == []
    assert found["infeasible"] is None
    assert (found["search"]["status"], found["search"]["complete"]) == ("unknown", False)


def test_a_budget_that_suffices_changes_nothing(capsys: pytest.CaptureFixture[str]) -> None:
    plain, timed = (json.loads(run(capsys, *EASY, *more, "--format", "json")[1]) for more in ((), ("--budget", "1000 s")))
    assert timed["search"]["complete"]
    assert timed["candidates"] == plain["candidates"]
    assert timed["search"]["bound"] == plain["search"]["bound"]


def test_best_so_far_is_given_with_its_gap(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    """Stopped right after the coarse pass: its candidates are real, and nothing is proved beyond the first bound."""
    from synth.search import best_first

    run_on = best_first._Work.run

    def hurried(work: best_first._Work) -> bool:
        if isinstance(work.pool, best_first.Best) and work.pool.count:
            work.stop = lambda: True
        return run_on(work)

    monkeypatch.setattr(best_first._Work, "run", hurried)
    code, out, err = run(capsys, *EASY, "--top", "3")
    head = " ".join(out.split("\n\n")[0].split())
    assert (code, err) == (0, "")
    assert head.startswith("PASS stage: stopped early, the best so far of 1.11e+11 combinations;")
    assert "of the best so far" in head or "nothing is known yet" in head
    found = json.loads(run(capsys, *EASY, "--top", "3", "--format", "json")[1])
    assert found["search"]["status"] == "feasible"
    assert not found["search"]["complete"]
    assert found["search"]["bound"] <= 0.14417
    assert found["candidates"][0]["drift"]["q_point"] >= 0.14416


@pytest.mark.parametrize(
    ("text", "message"),
    [("2 V", "budget: read '2 V'"), ("soon", "budget: read 'soon'"), ("-1 s", "budget: read '-1 s'")],
)
def test_a_budget_that_is_no_time_is_refused(text: str, message: str, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, *EASY, "--budget", text)
    assert (code, out) == (2, "")
    assert message in err


def test_ctrl_c_ends_a_search_with_an_answer(capsys: pytest.CaptureFixture[str]) -> None:
    """The signal that a terminal sends on Ctrl-C; the handler that was there before comes back."""
    before = signal.getsignal(signal.SIGINT)
    timer = threading.Timer(0.5, os.kill, (os.getpid(), signal.SIGINT))
    timer.start()
    code, out, _ = run(capsys, *LONG)
    timer.join()
    assert code == 1
    assert out.startswith("OPEN  stage: stopped")
    assert signal.getsignal(signal.SIGINT) is before


def test_ctrl_c_twice_ends_the_program() -> None:
    """Where an answer takes too long to write, too: the second signal is not kept waiting."""
    script = (
        "import os, signal, threading, synth.cli, synth.solve\n"
        "def slow(*given, **more):\n"
        "    for _ in range(2):\n"
        "        os.kill(os.getpid(), signal.SIGINT)\n"
        "synth.solve.find = slow\n"
        f"synth.cli.main({EASY!r})\n"
    )
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    ran = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, env=environment, timeout=60)
    assert ran.returncode == 130
    assert ran.stdout == ""
    assert "Traceback" not in ran.stderr
