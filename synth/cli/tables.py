"""The command ``restpoint tables``."""

from __future__ import annotations

import click

from synth.cli.options import FOUND, Choice


def command(meaning: str) -> click.Command:
    """The command, with what it is for in one sentence."""
    from synth.present.catalogue import TABLES

    def run(name: str | None) -> int:
        from synth.present.catalogue import overview, show

        click.echo(overview() if name is None else show(name), nl=False)
        return FOUND

    return click.Command(
        "tables",
        callback=run,
        help=meaning,
        params=[click.Argument(["name"], required=False, type=Choice(list(TABLES)))],
    )
