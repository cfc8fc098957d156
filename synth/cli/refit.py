"""The command ``restpoint refit``."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from synth.cli.delivery import files, progress
from synth.cli.options import FOUND, NOT_FOUND, Count, command_line, key_options, output_options, read_stage

if TYPE_CHECKING:
    from synth.stage import Stage


def _hand_over(text: str, stage: Stage, options: dict[str, Any]) -> None:
    """Write the answer and the request where they were asked for."""
    from synth.present.files import write

    named = files(options)
    content = {option: text if option == "--output" else stage.to_toml(path.parent) for option, path in named.items()}
    write({option: (path, content[option]) for option, path in named.items()})
    if options["output"] is None:
        click.echo(text, nl=False)


def command(meaning: str) -> click.Command:
    """The command, with what it is for in one sentence."""

    def run(stage_file: Path | None, top: int, keep: tuple[str, ...], also_series: tuple[str, ...], also_stock: str | None,
            **options: Any) -> int:
        from synth.present.refit import render_refit
        from synth.replacement import refit

        files(options)
        stage = read_stage(stage_file, options, "refit")
        answer = refit(
            stage, keep=[role for text in keep for role in text.replace(",", " ").split()], top=top,
            also_series=also_series, also_stock=also_stock, progress=progress(), command=command_line(),
        )
        text = answer.to_json() if options["form"] == "json" else render_refit(answer)
        _hand_over(text, stage, options)
        return FOUND if answer.passed else NOT_FOUND

    return click.Command(
        "refit",
        callback=run,
        help=meaning + "\n\nThe fitted values come from [values] of the file or from --r1, --r2, ...; the new transistor from"
        " [replacement] or from --to TYPE, --to-hfe 420:800 and the like.",
        params=[
            click.Argument(["stage_file"], required=False, type=click.Path(path_type=Path), metavar="[STAGE.toml]"),
            *key_options("refit"),
            click.Option(["--keep"], multiple=True, metavar="ROLE", help="A resistor that must not change, such as rc."),
            click.Option(["--also-series"], multiple=True, metavar="SERIES",
                         help="Series that a new resistor may come from besides [resistors]."),
            click.Option(["--also-stock"], metavar="FILE.csv",
                         help="Stock list that a new resistor may come from besides [resistors]."),
            click.Option(["--top"], type=Count(1, 16), default=3, show_default=True, metavar="N",
                         help="How many candidates of each number of changes to list and prove."),
            *output_options(("table", "json")),
        ],
    )
