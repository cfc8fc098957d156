"""Many stages one by one: every row once, in order, whoever works; a run that was cut off goes on; a worker may die."""

from __future__ import annotations

import csv
import io
import os
import socket
import subprocess
import sys
import time
import tracemalloc
from collections.abc import Callable, Iterator
from concurrent.futures import BrokenExecutor, Executor, Future, ThreadPoolExecutor
from pathlib import Path
from typing import Any

import pytest
from numpy.testing import assert_allclose

import synth
from synth import batch
from synth.batch import COLUMNS, Request, find_many, finished, requests
from synth.cli import main
from synth.quantities import RestpointError, parse
from synth.stage import StageError

ROOT = Path(__file__).resolve().parents[1]
COMMON = ["--supply", "12V", "--hfe", "200:450", "--series", "E6", "--tolerance", "1%", "--range", "470R:220K"]
ROWS = "name,ic,vce\na,1 mA,5 V\nb,2 mA,5 V\nc,2 mA,5 W\nd,2 mA ± 0.1 %,5 V\ne,3 mA\nf,3 mA,4 V\n"


@pytest.fixture
def rows(tmp_path: Path) -> Path:
    path = tmp_path / "rows.csv"
    path.write_text(ROWS, encoding="utf-8")
    return path


def run(*argv: object) -> int:
    with pytest.raises(SystemExit) as stop:
        main([str(word) for word in argv])
    assert isinstance(stop.value.code, int)
    return stop.value.code


def table(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text)))


def requests_of(count: int, ic: Callable[[int], str] = lambda k: f"{1000 + k} uA") -> list[Request]:
    common = {"supply.vcc": "12 V", "target.vce": "5 V", "transistor.hfe": "200 : 450", "resistors.series": "E6"}
    common |= {"resistors.tolerance": "1 %", "network": "collector_feedback"}
    return [Request(line=k, keys=common | {"target.ic": ic(k)}) for k in range(count)]


# --- Rows -----------------------------------------------------------------------------------------------------------


def test_every_row_is_the_best_of_find(rows: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("find", "--batch", rows, *COMMON) == 1
    out = capsys.readouterr()
    found = table(out.out)
    assert [(row["line"], row["name"], row["status"]) for row in found] == [
        ("2", "a", "found"), ("3", "b", "found"), ("4", "c", "bad"), ("5", "d", "none"), ("6", "", "bad"), ("7", "f", "found"),
    ]  # fmt: skip
    for row in found:
        if row["status"] != "found":
            continue
        ic, vce = {"a": ("1 mA", "5 V"), "b": ("2 mA", "5 V"), "f": ("3 mA", "4 V")}[row["name"]]
        stage = synth.Stage(supply="12 V", ic=ic, vce=vce, hfe="200 : 450", series="E6", tolerance="1 %", resistors_range="470R : 220K")
        answer = synth.find(stage)
        best = answer.best
        assert best is not None
        assert {role: parse(row[role], "resistance", role) for role in best.resistors} == best.resistors
        # Judged in batches of another size, whose last bits may differ.
        assert_allclose(float(row["drift"]), best.drift.q_point, rtol=1e-12, atol=0)
        assert_allclose(float(row["ic_max_a"]), best.worst.ic[1], rtol=1e-12, atol=0)
    assert "line 4: target.vce: read '5 W'" in out.err
    assert "line 6: read 2 cells, accepted are 3" in out.err
    assert "6 rows: 3 found, 1 without a candidate, 2 bad" in out.err


def test_rows_of_toml_and_a_file_behind_them(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "rows.toml").write_text(
        '[[stage]]\nname = "one"\ntarget.ic = "2 mA"\n[[stage]]\ntarget.icc = "1 mA"\n', encoding="utf-8"
    )
    (tmp_path / "base.toml").write_text(
        '[supply]\nvcc = "12 V"\n[target]\nic = "1 mA"\nvce = "5 V"\n[transistor]\nhfe = "200 : 450"\n'
        '[resistors]\nstock = "drawer.csv"\n', encoding="utf-8",
    )
    (tmp_path / "drawer.csv").write_text("value\n1K8\n47K\n22K\n", encoding="utf-8")
    assert run("find", tmp_path / "base.toml", "--batch", tmp_path / "rows.toml") == 1
    one, two = table(capsys.readouterr().out)
    assert (one["name"], one["status"], one["re"]) == ("one", "found", "1K8")
    assert two["status"] == "bad"
    assert "nearest is 'target.ic'" in two["reason"]


def test_an_option_holds_for_every_row_and_a_row_before_the_file(tmp_path: Path) -> None:
    path = tmp_path / "rows.csv"
    path.write_text("ic,series\n1 mA,E6\n2 mA,\n", encoding="utf-8")
    one, two = requests(path, {"target.ic": "9 mA", "resistors.stock": "d.csv"}, {"target.vce": "5 V"})
    assert one.keys == {"target.ic": "1 mA", "resistors.series": "E6", "target.vce": "5 V"}
    assert two.keys == {"target.ic": "2 mA", "resistors.stock": "d.csv", "target.vce": "5 V"}


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("icc\n1 mA\n", r"rows\.csv, line 1: read 'icc', which is no key of a stage, .* nearest is 'ic'"),
        ("", r"rows\.csv is empty"),
        ('ic\n"1 mA\n', r"rows\.csv, line 2 is not CSV"),
        (b"ic\n\xff\n", r"rows\.csv is not UTF-8"),
    ],
)
def test_a_file_that_is_no_table_is_refused(tmp_path: Path, content: str | bytes, message: str) -> None:
    path = tmp_path / "rows.csv"
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    with pytest.raises(RestpointError, match=message):
        list(requests(path))


def test_a_file_that_is_not_there_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StageError, match=r"batch: read '.*absent\.csv', which cannot be read"):
        list(requests(tmp_path / "absent.csv"))
    (tmp_path / "rows.toml").write_text("stage = 1\n", encoding="utf-8")
    with pytest.raises(StageError, match=r"rows\.toml: read 'stage', which is no list of tables"):
        list(requests(tmp_path / "rows.toml"))


@pytest.mark.parametrize(
    ("argv", "said"),
    [
        (["--batch", "rows.csv", "--format", "json"], "--batch: goes with --format csv"),
        (["--batch", "rows.csv", "--advise"], "--advise: goes with a single stage"),
        (["--scheduler", "tcp://127.0.0.1:1"], "--scheduler: goes with --batch"),
    ],
)
def test_options_that_do_not_go_together(argv: list[str], said: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("find", *argv) == 2
    assert said in capsys.readouterr().err


def test_a_scheduler_that_does_not_answer_is_refused(rows: Path, monkeypatch: pytest.MonkeyPatch, capsys: Any) -> None:
    distributed = pytest.importorskip("distributed")

    def silent(address: str, timeout: str) -> None:
        raise OSError(f"Timed out trying to connect to {address}")

    monkeypatch.setattr(distributed, "Client", silent)
    assert run("find", "--batch", rows, *COMMON, "--scheduler", "tcp://127.0.0.1:1") == 2
    assert "--scheduler: read 'tcp://127.0.0.1:1', where no scheduler answers" in capsys.readouterr().err
    monkeypatch.setitem(sys.modules, "distributed", None)
    assert run("find", "--batch", rows, *COMMON, "--scheduler", "tcp://127.0.0.1:1") == 2
    assert "--scheduler: needs the extra 'cluster'" in capsys.readouterr().err


# --- Going on -------------------------------------------------------------------------------------------------------


def test_an_interrupted_run_goes_on_where_it_stopped(
    rows: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    computed: list[str] = []
    own = batch._best

    def best(stage: synth.Stage) -> dict[str, object]:
        if len(computed) == 2 and not going_on:
            raise KeyboardInterrupt
        computed.append(stage.name)
        return own(stage)

    monkeypatch.setattr(batch, "_best", best)
    target, going_on = tmp_path / "table.csv", False
    command = ["find", "--batch", rows, *COMMON, "--output", target]
    with pytest.raises(SystemExit) as stop:
        main([str(word) for word in command])
    assert stop.value.code == 130
    assert not target.exists()
    part = tmp_path / "table.csv.part"
    assert [row["name"] for row in table(part.read_text(encoding="utf-8"))][:2] == ["a", "b"]
    # A kill may also cut a row in two.
    part.write_text(part.read_text(encoding="utf-8") + "5,d,fou", encoding="utf-8")
    going_on = True
    assert run(*command) == 1
    assert computed == ["a", "b", "d", "f"]
    assert not part.exists()
    first = target.read_text(encoding="utf-8")
    assert [row["line"] for row in table(first)] == ["2", "3", "4", "5", "6", "7"]
    capsys.readouterr()
    # Not over a finished table unasked; with --force its rows are taken over, a row that changed is worked on.
    assert run(*command) == 2
    rows.write_text(ROWS.replace("5 W", "6 V"), encoding="utf-8")
    assert run(*command, "--force") == 1
    assert computed == ["a", "b", "d", "f", "c"]
    assert [row["line"] for row in table(target.read_text(encoding="utf-8"))] == ["2", "3", "4", "5", "6", "7"]


def test_a_row_is_known_by_all_that_decides_it(tmp_path: Path) -> None:
    (tmp_path / "d.csv").write_text("value\n1K\n", encoding="utf-8")
    one = Request(line=1, keys={"resistors.stock": "d.csv"}, folder=str(tmp_path))
    key = one.key
    assert key == Request(line=7, keys={"resistors.stock": "d.csv"}, folder=str(tmp_path)).key
    (tmp_path / "d.csv").write_text("value\n2K\n", encoding="utf-8")
    assert one.key != key
    assert Request(line=1, keys={"target.ic": "1 mA"}).key != Request(line=1, keys={"target.ic": "2 mA"}).key


def test_rows_that_were_lost_are_worked_on_again() -> None:
    text = batch.header() + "1,a,found" + "," * (len(COLUMNS) - 4) + ",k1\n" + "2,b,lost" + "," * (len(COLUMNS) - 4) + ",k2\n"
    assert set(finished(text)) == {"k1"}
    assert finished("another table\n1\n") == {}


# --- Who works ------------------------------------------------------------------------------------------------------


class Counting(Executor):
    """An executor that answers late and out of order, and counts what was given out and not yet asked for."""

    def __init__(self) -> None:
        self.open = self.most = 0

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        future: Future[Any] = Future()
        self.open += 1
        self.most = max(self.most, self.open)

        def answer() -> None:
            self.open -= 1
            future.set_result(fn(*args, **kwargs))

        future.result = lambda timeout=None: (answer(), Future.result(future))[1]  # type: ignore[method-assign, assignment]
        return future


class Ready(Executor):
    """An executor that has the answer at once."""

    def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
        future: Future[Any] = Future()
        future.set_result(fn(*args, **kwargs))
        return future


def test_a_bounded_number_of_rows_is_given_out_and_all_come_back_in_order() -> None:
    executor = Counting()
    found = find_many(requests_of(300), executor=executor, ahead=16, work=lambda request: {"line": request.line})
    assert [row["line"] for row in found] == list(range(300))
    assert executor.most == 16


def test_any_executor_gives_the_same_rows() -> None:
    asked = requests_of(6)
    here = list(find_many(asked))
    with ThreadPoolExecutor(2) as executor:
        assert list(find_many(asked, executor=executor)) == here
    assert {row["status"] for row in here} == {"found"}
    stages = [synth.Stage.from_keys(request.keys) for request in asked[:2]]
    assert [row["rb"] for row in synth.find_many(stages)] == [row["rb"] for row in here[:2]]


def test_memory_does_not_grow_with_the_number_of_rows() -> None:
    def peak(count: int) -> int:
        def source() -> Iterator[Request]:
            for k in range(count):
                yield Request(line=k, keys={"name": f"stage {k}"})

        executor = Ready()
        tracemalloc.start()
        for _ in find_many(source(), executor=executor, work=lambda request: {"line": request.line, "key": request.key}):
            pass
        most = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        return most

    peak(100)
    # Fifteen times the rows; what they may differ by is noise of the allocator, far below one row of bookkeeping each.
    assert peak(3000) < peak(200) + 100_000


def test_a_row_whose_worker_dies_is_told_and_the_rest_goes_on() -> None:
    class Dying(ThreadPoolExecutor):
        def submit(self, fn: Callable[..., Any], /, *args: Any, **kwargs: Any) -> Future[Any]:
            if args[0].line == 1:
                raise BrokenExecutor("a process ended")
            future: Future[Any] = Future()
            if args[0].line == 2:
                future.set_exception(MemoryError("no room"))
            else:
                future.set_result({"line": args[0].line, "status": "found"})
            return future

    found = list(find_many(requests_of(4), executor=Dying(1)))
    assert [(row["line"], row["status"]) for row in found] == [(0, "found"), (1, "lost"), (2, "lost"), (3, "found")]
    assert found[1]["reason"] == "BrokenExecutor: a process ended"


def test_processes_share_the_rows(rows: Path, tmp_path: Path) -> None:
    assert run("find", "--batch", rows, *COMMON, "--jobs", 2, "--output", tmp_path / "two.csv") == 1
    assert run("find", "--batch", rows, *COMMON, "--output", tmp_path / "one.csv") == 1
    assert (tmp_path / "two.csv").read_bytes() == (tmp_path / "one.csv").read_bytes()


# --- A cluster ------------------------------------------------------------------------------------------------------


def dask(*argv: str, folder: Path) -> subprocess.Popen[bytes]:
    """A scheduler or a worker as the README starts it."""
    script = Path(sys.executable).with_name("dask")
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join([str(ROOT), str(ROOT / "tests")])}
    return subprocess.Popen(
        [sys.executable, str(script), *argv], cwd=folder, env=environment, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )


def slow_solved(request: Request) -> dict[str, object]:
    """A row that takes long enough for a worker to be killed in the middle of one."""
    time.sleep(0.05)
    return batch.solved(request) | {"name": str(os.getpid())}


@pytest.mark.filterwarnings("ignore")
def test_a_worker_is_killed_midway_and_no_row_is_lost_and_none_comes_twice(tmp_path: Path) -> None:
    """With a real scheduler and two worker processes on loopback."""
    distributed = pytest.importorskip("distributed")
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        address = f"tcp://127.0.0.1:{free.getsockname()[1]}"
    scheduler = dask("scheduler", "--host", "127.0.0.1", "--port", address.rpartition(":")[2], "--no-dashboard", folder=tmp_path)
    plain = ("--nthreads", "1", "--no-nanny", "--no-dashboard")
    workers = [dask("worker", address, *plain, "--name", name, folder=tmp_path) for name in ("one", "two")]
    try:
        with distributed.Client(address, timeout="60s") as client:
            client.wait_for_workers(2, timeout=60)
            asked = requests_of(30)
            found: list[batch.Row] = []
            victim = workers[0]
            with client.get_executor(pure=False) as executor:
                for row in find_many(asked, executor=executor, ahead=30, work=slow_solved):
                    found.append(row)
                    if len(found) == 8:
                        victim.kill()
            assert victim.wait(timeout=30) != 0
            assert len(client.scheduler_info()["workers"]) == 1
    finally:
        for process in (*workers, scheduler):
            process.kill()
            process.wait(timeout=30)
    assert [row["line"] for row in found] == list(range(30))
    assert {row["status"] for row in found} == {"found"}
    # Both had a part in it, and the one left finished what the other had begun.
    assert {row["name"] for row in found} == {str(worker.pid) for worker in workers}
    alone = list(find_many(asked[-3:]))
    assert [row["drift"] for row in found[-3:]] == [row["drift"] for row in alone]
