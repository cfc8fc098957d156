"""Where an answer goes: standard output, files, and a bar on stderr while it is worked out."""

from __future__ import annotations

import sys
import threading
import time
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from synth.cli import pictures
from synth.cli.options import FOUND, NOT_FOUND, WrongInput

if TYPE_CHECKING:
    from synth.answer import Answer
    from synth.stage import Stage

QUIET_SECONDS = 0.5
"""A search shorter than this shows no progress bar [s]."""


def files(options: dict[str, Any]) -> dict[str, Path]:
    """Files that the options name; refused before the work if they cannot be written."""
    from synth.present.files import refuse

    names = ("output", "save", "report", "certificate")
    files: dict[str, Path] = {f"--{name}": options[name] for name in names if options.get(name) is not None}
    if "--report" in files:
        is_report(files["--report"], tuple(REPORTS))
    pictures.refuse(options)
    refuse(files, options["force"])
    return files


def is_report(path: Path, endings: Sequence[str]) -> None:
    """Refuse the file of a report whose ending names no form that there is."""
    if path.suffix.lower() not in endings:
        raise WrongInput(f"--report: read {str(path)!r}, accepted is a file name that ends in {' or '.join(endings)}")


def _page(answer: Answer) -> str:
    from synth.present.page import to_html

    return to_html(answer)


def _document(answer: Answer) -> str:
    from synth.present.document import to_document
    from synth.report import report

    return to_document(report(answer))


REPORTS: dict[str, Callable[[Answer], str]] = {".html": _page, ".md": _document}
"""Who makes a report, by the ending of its file."""


def wants_statistics(options: dict[str, Any]) -> bool:
    """Whether the answer is asked for root-sum-square and Monte Carlo."""
    report: Path | None = options.get("report")
    return bool(options["statistics"]) or (report is not None and report.suffix.lower() == ".md")


def deliver(answer: Answer, stage: Stage, explain: Sequence[int], options: dict[str, Any]) -> int:
    """Write the answer and the request where they were asked for; the exit status."""
    from synth.answer import Answer
    from synth.present.export import to_csv, to_markdown
    from synth.present.terminal import explanation, render

    makers: dict[str, Callable[[Answer], str]] = {
        "table": render, "json": Answer.to_json, "csv": to_csv, "markdown": to_markdown,
    }
    if explain and options["form"] != "table":
        raise WrongInput(f"--explain: goes with --format table, read {options['form']!r}, which holds the reasons already")
    text = makers[options["form"]](answer)
    if answer.candidates:
        count = len(answer.candidates)
        for rank in explain:
            if rank > count:
                raise WrongInput(f"--explain: read {rank}, accepted is 1 to {count}")
            text += "\n" + explanation(answer, rank)
    text += pictures.drawing(answer, options)
    content: dict[str, Callable[[Path], str]] = {
        "--output": lambda path: text,
        "--certificate": lambda path: "".join(f"{line}\n" for line in options["proof"]),
        "--save": lambda path: stage.to_toml(path.parent),
        "--report": lambda path: REPORTS[path.suffix.lower()](answer),
    }
    named: dict[str, tuple[Path, str | bytes]] = {
        option: (path, content[option](path)) for option, path in files(options).items()
    }
    pictures.write({**named, **pictures.files(answer, stage, options)}, options)
    if options["output"] is None:
        click.echo(text, nl=False)
    return FOUND if answer.passed else NOT_FOUND


def stopper(budget: str | None) -> Callable[[], bool]:
    """Asked by a search whether to stop: the time is up, or the user pressed Ctrl-C, which a second time ends the program."""
    import signal

    from synth.quantities import parse

    seconds = float("inf") if budget is None else parse(budget, "time", "budget")
    end = time.monotonic() + seconds
    asked = False

    def note(number: int, frame: object) -> None:
        nonlocal asked
        if asked:
            raise KeyboardInterrupt
        asked = True

    # Only the main thread may listen; elsewhere, as in a test runner of threads, the time alone counts.
    if threading.current_thread() is threading.main_thread():
        before = signal.signal(signal.SIGINT, note)
        click.get_current_context().call_on_close(lambda: signal.signal(signal.SIGINT, before))
    return lambda: asked or time.monotonic() > end


def progress() -> Callable[[float, float, int], bool] | None:
    """A bar on stderr that shows how near the proof is, if stderr is a terminal and the search takes long."""
    if not sys.stderr.isatty():
        return None
    start = last = time.monotonic()
    shown = False

    def report(bound: float, best: float, blocks: int) -> bool:
        nonlocal last, shown
        now = time.monotonic()
        if now - start > QUIET_SECONDS and now - last > 0.1:
            last, shown = now, True
            share = min(bound / best, 1.0) if 0.0 < best < float("inf") else 0.0
            bar = "█" * round(30 * share) + "·" * (30 - round(30 * share))
            best_text = f"best {100 * best:.1f} %, gap {100 * (1.0 - share):.1f} %" if best < float("inf") else "none yet"
            text = f"\r{bar} {best_text}, nothing below {100 * bound:.1f} %, {blocks} blocks open   "
            click.echo(text, err=True, nl=False)
        return True

    def finish() -> None:
        if shown:
            click.echo("\r" + " " * 90 + "\r", err=True, nl=False)

    click.get_current_context().call_on_close(finish)
    return report
