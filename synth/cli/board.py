"""The command ``restpoint board``."""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path

import click

from synth.cli.delivery import is_report
from synth.cli.options import FORMATS, FOUND, NOT_FOUND, Choice, Count, command_line, report_option


def command(meaning: str) -> click.Command:
    """The command, with what it is for in one sentence."""

    def run(
        board_file: Path, form: str, output: Path | None, report: Path | None, force: bool, most: int, seconds: int,
        jobs: int, against: Path | None,
    ) -> int:
        from synth.boards import Board, BoardAnswer, board
        from synth.present.board import changes_text, render, to_csv, to_markdown
        from synth.present.files import refuse, write
        from synth.present.page import board_to_html

        named = {"--output": output, "--report": report}
        files = {option: path for option, path in named.items() if path is not None}
        if report is not None:
            is_report(report, (".html",))
        refuse(files, force)
        request = Board.read(board_file)
        answer = board(
            request,
            most=most,
            seconds=float(seconds),
            workers=jobs,
            against=against,
            progress=_progress(),
            command=command_line(),
        )
        makers: dict[str, Callable[[BoardAnswer], str]] = {
            "table": render, "json": BoardAnswer.to_json, "csv": to_csv, "markdown": to_markdown,
        }
        text = makers[form](answer)
        content: dict[str, Callable[[], str]] = {"--output": lambda: text, "--report": lambda: board_to_html(answer)}
        write({option: (path, content[option]()) for option, path in files.items()})
        if output is None:
            click.echo(text, nl=False)
        if form == "csv" and answer.changes:
            click.echo(changes_text(answer.changes), err=True, nl=False)
        return FOUND if answer.passed else NOT_FOUND

    params: list[click.Parameter] = [
        click.Argument(["board_file"], type=click.Path(path_type=Path), metavar="BOARD.toml"),
        click.Option(["--format", "form"], type=Choice(FORMATS), default=FORMATS[0],
                     help="Form of the answer; csv is the BOM alone."),
        click.Option(["--output"], type=click.Path(path_type=Path), metavar="FILE", help="Write the answer to a file."),
        click.Option(["--against"], type=click.Path(path_type=Path), metavar="OLD.csv",
                     help="List what differs from an earlier BOM in CSV, and why (beside csv on stderr)."),
        report_option(),
        click.Option(["--force"], is_flag=True, help="Allow an existing file to be replaced."),
        click.Option(["--most"], type=Count(1, 100_000), default=5000, show_default=True, metavar="N",
                     help="Candidates of one stage after which its list ends; the proof counts what is left out."),
        click.Option(["--seconds"], type=Count(1), default=60, show_default=True, metavar="N",
                     help="Time for each of the three objectives."),
        click.Option(["--jobs"], type=Count(1, 64), default=1, show_default=True, metavar="N",
                     help="Threads that work on the choice."),
    ]
    return click.Command(
        "board",
        callback=run,
        help=meaning + "\n\nA board file lists stages as [[stage]], each with file = \"STAGE.toml\" or the keys of a stage;"
        " besides count, designators, allowance, outside. At the top: name, stock, on_board, most_new, allowance,"
        " tolerance, tcr.",
        params=params,
    )


def _progress() -> Callable[[str], None] | None:
    """What is being done, on stderr, if that is a terminal."""
    if not sys.stderr.isatty():
        return None

    def say(text: str) -> None:
        click.echo(f"\r{text[:88]:<90}", err=True, nl=False)

    click.get_current_context().call_on_close(lambda: click.echo("\r" + " " * 90 + "\r", err=True, nl=False))
    return say
