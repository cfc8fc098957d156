"""Options that commands share: one for each key of a stage, and those of the output."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

if TYPE_CHECKING:
    from synth.stage import Stage

NAME = "restpoint"
FOUND, NOT_FOUND, WRONG_INPUT = 0, 1, 2
FORMATS = ("table", "json", "csv", "markdown")


class WrongInput(click.ClickException):
    """Wrong input: one sentence on stderr, nothing on stdout, exit status 2."""

    exit_code = WRONG_INPUT


class Choice(click.Choice[str]):
    """One of some words; a refusal names the nearest."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        """The value, or a refusal that says what is accepted."""
        if value not in self.choices:
            accepted = ", ".join(self.choices)
            near = nearest_of(value, self.choices)
            raise WrongInput(f"{name_of(param)}: read {value!r}, accepted is one of {accepted}{near}")
        return value


class Count(click.IntRange):
    """A whole number in a range."""

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        """The value, or a refusal that says what is accepted."""
        try:
            return super().convert(value, param, ctx)
        except click.BadParameter as error:
            accepted = f"{self.min} or more" if self.max is None else f"from {self.min} to {self.max}"
            raise WrongInput(f"{name_of(param)}: read {value!r}, accepted is a whole number {accepted}") from error


def name_of(param: click.Parameter | None) -> str:
    """Name of an option as a user types it."""
    return "value" if param is None else next((o for o in param.opts if o.startswith("--")), param.name or "value")


def nearest_of(word: str, choices: Iterable[str]) -> str:
    """Ending of a refusal that names the nearest choice; empty where none is near."""
    import difflib

    close = difflib.get_close_matches(word, list(choices), n=1)
    return f", nearest is {close[0]!r}" if close else ""


OWN_TABLES = {"replacement": "refit"}
"""Tables of the stage file that one command alone makes use of."""


def key_options(command: str = "") -> list[click.Parameter]:
    """One option for each key of the stage file; what only another command uses is not shown."""
    from synth.stage_keys import KEYS

    options: list[click.Parameter] = []
    for key in KEYS.values():
        hidden = key.path.startswith("resistors.") and key.path.count(".") > 1
        hidden |= OWN_TABLES.get(key.table, command) != command
        options.append(
            click.Option(
                [*key.options, parameter(key.path)],
                multiple=key.many,
                metavar="TEXT",
                hidden=hidden,
                help=f"{key.meaning} [{key.path}; e.g. {key.example}]",
            )
        )
    return options


def parameter(path: str) -> str:
    """Name under which a command gets the option of a key."""
    return "key_" + path.replace(".", "__")


def output_options(formats: Sequence[str]) -> list[click.Parameter]:
    """Options of a command that gives an answer in one of some forms."""
    return [
        click.Option(["--format", "form"], type=Choice(formats), default=formats[0], help="Form of the answer."),
        click.Option(["--output"], type=click.Path(path_type=Path), metavar="FILE", help="Write the answer to a file."),
        click.Option(["--force"], is_flag=True, help="Allow an existing file to be replaced."),
        click.Option(["--save"], type=click.Path(path_type=Path), metavar="STAGE.toml",
                     help="Write the request with every assumed value spelled out."),
    ]


def report_option() -> click.Parameter:
    """Option of a command whose answer can be written as a report."""
    return click.Option(["--report"], type=click.Path(path_type=Path), metavar="FILE",
                        help="Write FILE.html, a page on its own, or FILE.md, the worst-case report.")  # fmt: skip


def statistics_option() -> click.Parameter:
    """Option of a command that can tell more than the worst case."""
    return click.Option(["--statistics"], is_flag=True,
                        help="Tell root-sum-square and Monte Carlo beside the worst case; see [distribution].")  # fmt: skip


def picture_options() -> list[click.Parameter]:
    """Options of a command that can show its answer in pictures."""
    return [
        click.Option(["--draw"], is_flag=True, help="Draw load line and budget of the first candidate in the terminal."),
        click.Option(["--figures"], type=click.Path(path_type=Path), metavar="DIR",
                     help="Write circuit, load line, budget, curves, yield and stress of the first candidate as SVG and PNG."),
        click.Option(["--symbols"], type=Choice(("rectangle", "zigzag")), default="rectangle",
                     help="Resistors in the circuit: rectangles of IEC 60617, or zigzag lines."),
    ]


def read_stage(path: Path | None, options: dict[str, Any], command: str = "") -> Stage:
    """The stage of a file, its keys overridden by options; those that only another command uses are refused."""
    from synth.stage import Stage
    from synth.stage_keys import KEYS

    given = {}
    for key in KEYS.values():
        value = options.get(parameter(key.path))
        if value not in (None, ()):
            if OWN_TABLES.get(key.table, command) != command:
                accepted = f"accepted is this option with the command {OWN_TABLES[key.table]}"
                raise WrongInput(f"{key.options[0]}: read {value!r}, which this command makes no use of, {accepted}")
            given[key.path] = list(value) if key.many else value
    if path is None:
        return Stage.from_keys(given)
    stage = Stage.read(path)
    return stage.with_keys(given) if given else stage


def command_line() -> str:
    """The command as it was given, to be repeated."""
    import shlex

    return shlex.join([NAME, *click.get_current_context().find_root().obj])
