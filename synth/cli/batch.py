"""``restpoint find --batch``: a table of stages in, a table of answers out."""

from __future__ import annotations

import itertools
import os
import sys
from collections import Counter
from collections.abc import Iterator
from concurrent.futures import Executor
from contextlib import contextmanager
from functools import partial
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any

import click

from synth.cli.options import FOUND, NOT_FOUND, WrongInput, parameter

if TYPE_CHECKING:
    from synth.batch import Request, Row


def batch_options() -> list[click.Parameter]:
    """Options of a batch."""
    return [
        click.Option(["--batch"], type=click.Path(path_type=Path), metavar="ROWS.csv",
                     help="Find for every row of a table: CSV with keys of a stage as header, or TOML with [[stage]]."),
        click.Option(["--jobs"], type=click.IntRange(1, 1024), default=1, show_default=True, metavar="N",
                     help="Threads of a search, or processes that share the rows of --batch; the answer stays the same."),
        click.Option(["--scheduler"], metavar="ADDRESS",
                     help="Dask scheduler whose workers share the rows of --batch, as tcp://127.0.0.1:8786."),
    ]  # fmt: skip


def run_batch(base: Path | None, rows: Path, jobs: int, scheduler: str | None, options: dict[str, Any]) -> int:
    """Work through a file of stages; the exit status."""
    from synth.batch import find_many, finished, requests
    from synth.present.batch import row_text
    from synth.present.files import refuse
    from synth.stage_file import read_toml
    from synth.stage_keys import KEYS

    if options["form"] not in ("table", "csv") or options["save"] is not None:
        raise WrongInput("--batch: goes with --format csv and without --save, for it gives one table of CSV")
    output: Path | None = options["output"]
    refuse({} if output is None else {"--output": output}, options["force"])
    common = {} if base is None else _absolute(read_toml(base), base.parent)
    given = {key.path: options.get(parameter(key.path)) for key in KEYS.values()}
    fixed = {path: KEYS[path].text(list(v) if isinstance(v, tuple) else v) for path, v in given.items() if v not in (None, ())}
    total = sum(1 for _ in requests(rows))
    asked = partial(requests, rows, common, _absolute(fixed, Path()))
    log = None if output is None else output.with_name(output.name + ".part")
    known: dict[str, Row] = {}
    for file in (output, log):
        if file is not None and file.is_file():
            known |= finished(file.read_text(encoding="utf-8"))
    seen: Counter[str] = Counter()
    with _log(log) as stream, _executor(jobs, scheduler) as executor, _bar(total) as step:
        for row in find_many(asked(), executor=executor, done=known):
            if log is None or row["key"] not in known:
                stream.write(row_text(row))
                stream.flush()
            seen[str(row["status"])] += 1
            if row["status"] in ("bad", "lost"):
                click.echo(f"{rows}, line {row['line']}: {row['reason']}", err=True)
            step()
    if output is not None and log is not None:
        if known:
            _sort(log, asked(), known)
        os.replace(log, output)
    words = {"found": "found", "none": "without a candidate", "bad": "bad", "lost": "lost"}
    told = ", ".join(f"{seen[status]} {text}" for status, text in words.items() if seen[status])
    click.echo(f"{total} rows: {told or 'none'}", err=True)
    return FOUND if seen["found"] == total else NOT_FOUND


def _absolute(keys: dict[str, str], folder: Path) -> dict[str, str]:
    """Keys whose paths hold from any folder."""
    return {path: str((folder / text).absolute()) if path.endswith("stock") else text for path, text in keys.items()}


@contextmanager
def _log(path: Path | None) -> Iterator[IO[str]]:
    """Where rows go as they come: standard output, or a file beside the one named, which the next run goes on with."""
    from synth.batch import header

    if path is None:
        sys.stdout.write(header())
        yield sys.stdout
        return
    text = path.read_text(encoding="utf-8") if path.is_file() else ""
    whole = text[: text.rfind("\n") + 1]
    with path.open("w" if not whole.startswith(header()) else "r+", encoding="utf-8", newline="") as stream:
        if whole.startswith(header()):
            # What a killed run wrote of its last row is written anew.
            stream.seek(len(whole.encode()))
            stream.truncate()
        else:
            stream.write(header())
        yield stream


def _sort(log: Path, asked: Iterator[Request], known: dict[str, Row]) -> None:
    """Put the rows of several runs into the order of the request."""
    from synth.batch import finished, header
    from synth.present.batch import row_text

    rows = known | finished(log.read_text(encoding="utf-8"))
    scratch = log.with_name(log.name + ".new")
    with scratch.open("w", encoding="utf-8", newline="") as stream:
        stream.write(header())
        for request in asked:
            stream.write(row_text({**rows[request.key], "line": request.line}))
    os.replace(scratch, log)


@contextmanager
def _executor(jobs: int, scheduler: str | None) -> Iterator[Executor | None]:
    """Who works: this process, some processes of this machine, or the workers of a cluster."""
    if scheduler is not None:
        try:
            from distributed import Client
        except ImportError as error:
            raise WrongInput("--scheduler: needs the extra 'cluster', as in: pip install 'restpoint[cluster]'") from error
        try:
            client = Client(scheduler, timeout="10s")  # type: ignore[no-untyped-call]
        except OSError as error:
            raise WrongInput(f"--scheduler: read {scheduler!r}, where no scheduler answers") from error
        with client, client.get_executor() as executor:  # type: ignore[no-untyped-call]
            yield executor
    elif jobs > 1:
        from concurrent.futures import ProcessPoolExecutor
        from multiprocessing import get_context

        # A fresh interpreter for each: a copy of a process that has threads may hang.
        with ProcessPoolExecutor(jobs, mp_context=get_context("spawn")) as executor:
            yield executor
    else:
        yield None


@contextmanager
def _bar(total: int) -> Iterator[Any]:
    """A bar on stderr, if that is a terminal."""
    if not sys.stderr.isatty():
        yield lambda: None
        return
    count = itertools.count(1)

    def step() -> None:
        done = next(count)
        filled = round(30 * done / max(total, 1))
        click.echo(f"\r{'█' * filled}{'·' * (30 - filled)} {done} of {total} rows   ", err=True, nl=False)

    yield step
    click.echo("\r" + " " * 90 + "\r", err=True, nl=False)
