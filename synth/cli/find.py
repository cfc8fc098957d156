"""The command ``restpoint find``."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from synth.cli.batch import batch_options, run_batch
from synth.cli.delivery import deliver, files, progress, stopper, wants_statistics
from synth.cli.options import (
    FORMATS,
    Count,
    WrongInput,
    command_line,
    key_options,
    output_options,
    picture_options,
    read_stage,
    report_option,
    statistics_option,
)


def command(meaning: str) -> click.Command:
    """The command, with what it is for in one sentence."""

    def run(
        stage_file: Path | None,
        top: int,
        metric: str,
        frontier: str | None,
        budget: str | None,
        explain: tuple[int, ...],
        every: bool,
        advise: bool,
        **options: Any,
    ) -> int:
        from synth.solve import find

        for key, value in options.items():
            role = key.removeprefix("key_values__")
            if role != key and value is not None:
                pin = f"--resistors-{role}-values {value}"
                raise WrongInput(f"--{role}: find chooses values itself, accepted is {pin!r} to pin one, or the command check")
        rows, jobs, scheduler = (options.pop(name) for name in ("batch", "jobs", "scheduler"))
        if rows is not None:
            single = {
                "--metric": metric != "corners", "--frontier": frontier, "--budget": budget, "--explain": explain,
                "--all": every, "--advise": advise, "--report": options.get("report"),
                "--certificate": options.get("certificate"),
            }  # fmt: skip
            for name in (name for name, given in single.items() if given):
                raise WrongInput(f"{name}: goes with a single stage, not with --batch")
            return run_batch(stage_file, rows, jobs, scheduler, options)
        if scheduler is not None:
            raise WrongInput("--scheduler: goes with --batch, whose rows are shared out")
        if advise and metric != "corners":
            raise WrongInput(f"--advise: starts from the drift of the Q-point, read --metric {metric!r}, accepted is corners")
        files(options)
        stage = read_stage(stage_file, options)
        proof: list[str] = []
        answer = find(
            stage,
            top=top,
            metric=metric,
            frontier=frontier or "",
            records=options["form"] == "json" or options["report"] is not None,
            statistics=wants_statistics(options),
            advise=advise,
            progress=progress(),
            stop=stopper(budget),
            jobs=jobs,
            keep=proof.extend if options["certificate"] else None,
            command=command_line(),
        )
        if options["certificate"] and not proof:
            click.echo("certificate: not written, since the search was stopped before its proof was complete", err=True)
            options["certificate"] = None
        options["proof"] = proof
        ranks = [c.rank for c in answer.candidates] if every else list(explain)
        return deliver(answer, stage, ranks, options)

    return click.Command(
        "find",
        callback=run,
        help=meaning + "\n\nGive a stage file, options, or both; an option overrides the file's key. Every key of"
        " [resistors] can be given for one role as well, as in --resistors-re-values 1k8.",
        params=[
            click.Argument(["stage_file"], required=False, type=click.Path(path_type=Path), metavar="[STAGE.toml]"),
            *key_options(),
            click.Option(["--top"], type=Count(1, 1000), default=10, show_default=True, metavar="N",
                         help="How many candidates to list and prove."),
            click.Option(["--metric"], default="corners", show_default=True, metavar="TEXT",
                         help="What ranks: corners, rss, ic, vce, or weights such as 'ic=1, vce=0.5'."),
            click.Option(["--frontier"], metavar="AXES",
                         help="Find what no candidate beats in drift and in supply_current, input_resistance, gain, swing,"
                         " distinct_values, parts or price; several with commas."),
            click.Option(["--budget"], metavar="TIME", help="Stop after this time, such as 2s, with the best so far."),
            click.Option(["--certificate"], type=click.Path(path_type=Path), metavar="FILE",
                         help="Write what excludes every other combination, for python -m tests.certificate FILE to check."),
            click.Option(["--explain"], type=Count(1), metavar="N", multiple=True,
                         help="Explain candidate N as well."),
            click.Option(["--advise"], is_flag=True,
                         help="Search again for what would buy or save most: finer values, better parts, cheaper parts."),
            click.Option(["--all", "every"], is_flag=True, help="Explain every candidate listed."),
            *picture_options(),
            *output_options(FORMATS),
            report_option(),
            *batch_options(),
            statistics_option(),
        ],
    )
