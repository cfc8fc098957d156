"""The command line: parse, call, print, exit. One file a command, which defines ``command``.

Nothing heavy is imported before a subcommand runs, so that ``--help`` answers at once.
"""

from __future__ import annotations

import importlib
import os
import sys
from collections.abc import Sequence
from typing import NoReturn

import click

from synth import __version__
from synth.cli.options import FOUND, NAME, WRONG_INPUT, WrongInput, nearest_of

__all__ = ["COMMANDS", "main"]

COMMANDS = {
    "find": "From targets to ranked, proved and explained resistor values.",
    "check": "Judge the resistors of a given network over its whole box.",
    "refit": "Put another transistor in: both side by side, and the fewest resistors that change.",
    "board": "Choose the resistors of many stages together: the fewest line items, one BOM.",
    "tables": "Show the built-in tables: preferred numbers, codes, resistor styles, transistors.",
    "stage": "Print a commented, empty stage file.",
}
"""Meaning of each command; its file has the same name."""


class _Lazy(click.Group):
    """A group whose commands are built, and their imports paid for, when they are asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = importlib.import_module(f"synth.cli.{cmd_name}").command(COMMANDS[cmd_name])
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))

    def resolve_command(self, ctx: click.Context, args: list[str]) -> tuple[str | None, click.Command | None, list[str]]:
        if args and not args[0].startswith("-") and args[0] not in COMMANDS:
            accepted = ", ".join(COMMANDS)
            raise WrongInput(f"command: read {args[0]!r}, accepted is one of {accepted}{nearest_of(args[0], COMMANDS)}")
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
