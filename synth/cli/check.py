"""The command ``restpoint check``."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from synth.cli.delivery import deliver, files, wants_statistics
from synth.cli.options import (
    FORMATS,
    FOUND,
    NOT_FOUND,
    Count,
    command_line,
    key_options,
    output_options,
    picture_options,
    read_stage,
    report_option,
    statistics_option,
)

if TYPE_CHECKING:
    from synth.answer import Answer


def command(meaning: str) -> click.Command:
    """The command, with what it is for in one sentence."""

    def run(stage_file: Path | None, explain: int | None, expect: Path | None, **options: Any) -> int:
        from synth.expect import read
        from synth.solve import check

        files(options)
        kept = None if expect is None else read(expect)
        stage = read_stage(stage_file, options)
        wanted = wants_statistics(options) or _has_statistics(kept)
        answer = check(stage, statistics=wanted, command=command_line())
        code = deliver(answer, stage, [explain] if explain else [], options)
        return code if kept is None else max(code, _compared(kept, answer, expect, options))

    return click.Command(
        "check",
        callback=run,
        help=meaning + "\n\nThe fitted values come from [values] of the file or from --r1, --r2, ...",
        params=[
            click.Argument(["stage_file"], required=False, type=click.Path(path_type=Path), metavar="[STAGE.toml]"),
            *key_options(),
            click.Option(["--expect"], type=click.Path(path_type=Path), metavar="ANSWER.json",
                         help="Compare with an answer of check that was kept; exit 1 where it has changed."),
            click.Option(["--explain"], type=Count(1), is_flag=False, flag_value=1, metavar="[1]",
                         help="Explain the verdict."),
            *picture_options(),
            *output_options(FORMATS),
            report_option(),
            statistics_option(),
        ],
    )


def _has_statistics(kept: Mapping[str, Any] | None) -> bool:
    """Whether an answer that was kept tells statistics, which are then to be compared too."""
    candidates = (kept or {}).get("candidates")
    first = candidates[0] if isinstance(candidates, list) and candidates else None
    return isinstance(first, dict) and first.get("statistics") is not None


def _compared(kept: Mapping[str, Any], answer: Answer, path: Path | None, options: dict[str, Any]) -> int:
    """Say what has changed against an answer that was kept; the exit status."""
    from synth.expect import RTOL, changes

    found = changes(kept, answer)
    lines = [f"Expectation {path}: {f'{len(found)} changed' if found else 'unchanged'} (figures to {RTOL:g} of their size)"]
    lines += [f"  {line}" for line in found]
    # Beside a table for readers; JSON and files for programs stay what they are.
    click.echo("\n".join(lines), err=options["form"] != "table" or options["output"] is not None)
    return NOT_FOUND if found else FOUND
