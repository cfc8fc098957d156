"""The command ``restpoint check``."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from synth.cli.delivery import deliver, files
from synth.cli.options import (
    FORMATS,
    Count,
    command_line,
    key_options,
    output_options,
    picture_options,
    read_stage,
    report_option,
)


def command(meaning: str) -> click.Command:
    """The command, with what it is for in one sentence."""

    def run(stage_file: Path | None, explain: int | None, **options: Any) -> int:
        from synth.solve import check

        files(options)
        stage = read_stage(stage_file, options)
        answer = check(stage, command=command_line())
        return deliver(answer, stage, [explain] if explain else [], options)

    return click.Command(
        "check",
        callback=run,
        help=meaning + "\n\nThe fitted values come from [values] of the file or from --r1, --r2, ...",
        params=[
            click.Argument(["stage_file"], required=False, type=click.Path(path_type=Path), metavar="[STAGE.toml]"),
            *key_options(),
            click.Option(["--explain"], type=Count(1), is_flag=False, flag_value=1, metavar="[1]",
                         help="Explain the verdict."),
            *picture_options(),
            *output_options(FORMATS),
            report_option(),
        ],
    )
