"""The command ``restpoint stage``."""

from __future__ import annotations

import click

from synth.cli.options import FOUND


def command(meaning: str) -> click.Command:
    """The command, with what it is for in one sentence."""

    def run() -> int:
        from synth.stage import template

        click.echo(template(), nl=False)
        return FOUND

    return click.Command("stage", callback=run, help=meaning)
