"""The command line: parse, call, print, exit.

Nothing heavy is imported before a subcommand runs, so that ``--help`` answers at once.
"""

from __future__ import annotations

import os
import sys
import time
from collections.abc import Callable, Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

import click

from synth import __version__

if TYPE_CHECKING:
    from synth.answer import Answer
    from synth.stage import Stage

NAME = "restpoint"
COMMANDS = {
    "find": "From targets to ranked, proved and explained resistor values.",
    "check": "Judge the resistors of a given network over its whole box.",
    "tables": "Show the built-in tables: preferred numbers, codes, resistor styles, transistors.",
    "stage": "Print a commented, empty stage file.",
}
FOUND, NOT_FOUND, WRONG_INPUT = 0, 1, 2
FORMATS = ("table", "json", "csv", "markdown")
QUIET_SECONDS = 0.5
"""A search shorter than this shows no progress bar [s]."""


class WrongInput(click.ClickException):
    """Wrong input: one sentence on stderr, nothing on stdout, exit status 2."""

    exit_code = WRONG_INPUT


class _Lazy(click.Group):
    """A group whose commands are built, and their imports paid for, when they are asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        builder = _BUILDERS.get(cmd_name)
        return None if builder is None else builder()

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))

    def resolve_command(self, ctx: click.Context, args: list[str]) -> tuple[str | None, click.Command | None, list[str]]:
        if args and not args[0].startswith("-") and args[0] not in COMMANDS:
            accepted = ", ".join(COMMANDS)
            raise WrongInput(f"command: read {args[0]!r}, accepted is one of {accepted}{_nearest(args[0], COMMANDS)}")
        return super().resolve_command(ctx, args)


@click.group(cls=_Lazy, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name=NAME)
def cli() -> None:
    """Bias networks of preferred-number resistors whose Q-point drifts least.

    Start with:  restpoint find --supply 12V --ic 2mA --vce 5V --hfe 110:450 --tolerance 1%
    """


def main(argv: Sequence[str] | None = None) -> NoReturn:
    """Run the command line and exit.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments; those of the process when not given.

    Raises
    ------
    SystemExit
        0 found or passed, 1 nothing qualifies or a verdict fails, 2 wrong input.
    """
    for stream in (sys.stdout, sys.stderr):
        # A terminal or pipe that cannot show Ω or µ gets a replacement mark instead of a crash.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    from synth.quantities import RestpointError

    try:
        words = list(sys.argv[1:] if argv is None else argv)
        code = cli.main(args=words, prog_name=NAME, standalone_mode=False, obj=words)
    except click.exceptions.NoArgsIsHelpError as error:
        click.echo(error.format_message())
        sys.exit(FOUND)
    except click.NoSuchOption as error:
        near = f", nearest is {error.possibilities[0]!r}" if error.possibilities else ""
        _fail(f"option: read {error.option_name!r}, accepted are those of --help{near}")
    except click.exceptions.Abort:
        click.echo("interrupted", err=True)
        sys.exit(130)
    except click.ClickException as error:
        _fail(error.format_message())
    except RestpointError as error:
        _fail(str(error))
    except BrokenPipeError:
        # The reader of our output went away, as `head` does; there is nobody left to tell.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(FOUND)
    sys.exit(code if isinstance(code, int) else FOUND)


def _fail(message: str) -> NoReturn:
    click.echo(" ".join(message.split()), err=True)
    sys.exit(WRONG_INPUT)


class _Choice(click.Choice[str]):
    """One of some words; a refusal names the nearest."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        if value not in self.choices:
            accepted = ", ".join(self.choices)
            raise WrongInput(f"{_name(param)}: read {value!r}, accepted is one of {accepted}{_nearest(value, self.choices)}")
        return value


class _Count(click.IntRange):
    """A whole number in a range."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        try:
            return super().convert(value, param, ctx)
        except click.BadParameter as error:
            accepted = f"{self.min} or more" if self.max is None else f"from {self.min} to {self.max}"
            raise WrongInput(f"{_name(param)}: read {value!r}, accepted is a whole number {accepted}") from error


def _name(param: click.Parameter | None) -> str:
    return "value" if param is None else next((o for o in param.opts if o.startswith("--")), param.name or "value")


def _nearest(word: str, choices: Iterable[str]) -> str:
    import difflib

    close = difflib.get_close_matches(word, list(choices), n=1)
    return f", nearest is {close[0]!r}" if close else ""


def _key_options() -> list[click.Parameter]:
    """One option for each key of the stage file."""
    from synth.stage_keys import KEYS

    options: list[click.Parameter] = []
    for key in KEYS.values():
        hidden = key.path.startswith("resistors.") and key.path.count(".") > 1
        options.append(
            click.Option(
                [*key.options, _parameter(key.path)],
                multiple=key.many,
                metavar="TEXT",
                hidden=hidden,
                help=f"{key.meaning} [{key.path}; e.g. {key.example}]",
            )
        )
    return options


def _parameter(path: str) -> str:
    return "key_" + path.replace(".", "__")


def _output_options(formats: Sequence[str]) -> list[click.Parameter]:
    return [
        click.Option(["--format", "form"], type=_Choice(formats), default=formats[0], help="Form of the answer."),
        click.Option(["--output"], type=click.Path(path_type=Path), metavar="FILE", help="Write the answer to a file."),
        click.Option(["--force"], is_flag=True, help="Allow an existing file to be replaced."),
        click.Option(["--save"], type=click.Path(path_type=Path), metavar="STAGE.toml",
                     help="Write the request with every assumed value spelled out."),
    ]


def _stage(path: Path | None, options: dict[str, Any]) -> Stage:
    """The stage of a file, its keys overridden by options."""
    from synth.stage import Stage
    from synth.stage_keys import KEYS

    given = {}
    for key in KEYS.values():
        value = options.get(_parameter(key.path))
        if value not in (None, ()):
            given[key.path] = list(value) if key.many else value
    if path is None:
        return Stage.from_keys(given)
    stage = Stage.read(path)
    return stage.with_keys(given) if given else stage


def _command_line() -> str:
    """The command as it was given, to be repeated."""
    import shlex

    return shlex.join([NAME, *click.get_current_context().find_root().obj])


def _find_command() -> click.Command:
    def run(stage_file: Path | None, top: int, explain: tuple[int, ...], every: bool, **options: Any) -> int:
        from synth.solve import find

        for key, value in options.items():
            role = key.removeprefix("key_values__")
            if role != key and value is not None:
                pin = f"--resistors-{role}-values {value}"
                raise WrongInput(f"--{role}: find chooses values itself, accepted is {pin!r} to pin one, or the command check")
        _files(options)
        stage = _stage(stage_file, options)
        answer = find(stage, top=top, progress=_progress(), command=_command_line())
        ranks = [c.rank for c in answer.candidates] if every else list(explain)
        return _deliver(answer, stage, ranks, options)

    return click.Command(
        "find",
        callback=run,
        help=COMMANDS["find"] + "\n\nGive a stage file, options, or both; an option overrides the file's key. Every key of"
        " [resistors] can be given for one role as well, as in --resistors-re-values 1k8.",
        params=[
            click.Argument(["stage_file"], required=False, type=click.Path(path_type=Path), metavar="[STAGE.toml]"),
            *_key_options(),
            click.Option(["--top"], type=_Count(1, 1000), default=10, show_default=True, metavar="N",
                         help="How many candidates to list and prove."),
            click.Option(["--explain"], type=_Count(1), metavar="N", multiple=True,
                         help="Explain candidate N as well."),
            click.Option(["--all", "every"], is_flag=True, help="Explain every candidate listed."),
            *_output_options(FORMATS),
        ],
    )


def _check_command() -> click.Command:
    def run(stage_file: Path | None, explain: int | None, **options: Any) -> int:
        from synth.solve import check

        _files(options)
        stage = _stage(stage_file, options)
        answer = check(stage, command=_command_line())
        return _deliver(answer, stage, [explain] if explain else [], options)

    return click.Command(
        "check",
        callback=run,
        help=COMMANDS["check"] + "\n\nThe fitted values come from [values] of the file or from --r1, --r2, ...",
        params=[
            click.Argument(["stage_file"], required=False, type=click.Path(path_type=Path), metavar="[STAGE.toml]"),
            *_key_options(),
            click.Option(["--explain"], type=_Count(1), is_flag=False, flag_value=1, metavar="[1]",
                         help="Explain the verdict."),
            *_output_options(FORMATS),
        ],
    )


def _tables_command() -> click.Command:
    from synth.present.catalogue import TABLES

    def run(name: str | None) -> int:
        from synth.present.catalogue import overview, show

        click.echo(overview() if name is None else show(name), nl=False)
        return FOUND

    return click.Command(
        "tables",
        callback=run,
        help=COMMANDS["tables"],
        params=[click.Argument(["name"], required=False, type=_Choice(list(TABLES)))],
    )


def _stage_command() -> click.Command:
    def run() -> int:
        from synth.stage import template

        click.echo(template(), nl=False)
        return FOUND

    return click.Command("stage", callback=run, help=COMMANDS["stage"])


_BUILDERS: dict[str, Callable[[], click.Command]] = {
    "find": _find_command,
    "check": _check_command,
    "tables": _tables_command,
    "stage": _stage_command,
}


def _files(options: dict[str, Any]) -> dict[str, Path]:
    """Files that the options name; refused before the work if they cannot be written."""
    from synth.present.files import refuse

    files = {f"--{name}": options[name] for name in ("output", "save") if options[name] is not None}
    refuse(files, options["force"])
    return files


def _deliver(answer: Answer, stage: Stage, explain: Sequence[int], options: dict[str, Any]) -> int:
    """Write the answer and the request where they were asked for; the exit status."""
    from synth.answer import Answer
    from synth.present.export import to_csv, to_markdown
    from synth.present.files import write
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
    content = {"--output": text, "--save": stage.to_toml(options["save"].parent) if options["save"] else ""}
    write({option: (path, content[option]) for option, path in _files(options).items()})
    if options["output"] is None:
        click.echo(text, nl=False)
    return FOUND if answer.passed else NOT_FOUND


def _progress() -> Callable[[float, float, int], bool] | None:
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
            best_text = f"best {100 * best:.1f} %" if best < float("inf") else "no candidate yet"
            text = f"\r{bar} {best_text}, nothing below {100 * bound:.1f} %, {blocks} blocks open   "
            click.echo(text, err=True, nl=False)
        return True

    def finish() -> None:
        if shown:
            click.echo("\r" + " " * 90 + "\r", err=True, nl=False)

    click.get_current_context().call_on_close(finish)
    return report
