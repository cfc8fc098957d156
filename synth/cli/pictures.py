"""Pictures of an answer: drawn in the terminal, or written to a folder."""

from __future__ import annotations

import os
import shutil
import sys
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from synth.cli.options import WrongInput

if TYPE_CHECKING:
    from synth.answer import Answer
    from synth.stage import Stage

OPTION = "--figures"


def refuse(options: Mapping[str, Any]) -> None:
    """Refuse what cannot be drawn or written, before the work."""
    folder: Path | None = options.get("figures")
    if folder is not None:
        from synth.present.figures import NAMES
        from synth.present.files import refuse, refuse_folder

        refuse_folder(OPTION, folder)
        names = [f"{name}.{form}" for name in NAMES for form in ("svg", "png")] if folder.is_dir() else []
        refuse({f"{OPTION} {name}": folder / name for name in names}, options["force"])
    if options.get("draw") and options["form"] != "table":
        raise WrongInput(f"--draw: goes with --format table, read {options['form']!r}")


def files(answer: Answer, stage: Stage, options: Mapping[str, Any]) -> dict[str, tuple[Path, str | bytes]]:
    """Pictures of the first candidate with their places, where they are asked for."""
    folder: Path | None = options.get("figures")
    if folder is None:
        return {}
    if not answer.candidates:
        click.echo(f"{OPTION}: nothing qualifies, so there is nothing to draw", err=True)
        return {}
    from synth.present.figures import NAMES, files

    def progress(name: str) -> None:
        click.echo(f"\r{NAMES.index(name)} of {len(NAMES)} drawn, now {name}          ", err=True, nl=False)

    watched = sys.stderr.isatty()
    drawn = files(stage, answer, zigzag=options.get("symbols") == "zigzag", progress=progress if watched else None)
    if watched:
        click.echo("\r" + " " * 40 + "\r", err=True, nl=False)
    return {f"{OPTION} {name}": (folder / name, content) for name, content in drawn.items()}


def write(contents: Mapping[str, tuple[Path, str | bytes]], options: Mapping[str, Any]) -> None:
    """Write files, all or none, with the folder of the pictures if it is not there yet."""
    from synth.present.files import FileRefused, write

    folder: Path | None = options.get("figures")
    names = [path.name for option, (path, _) in contents.items() if option.startswith(OPTION)]
    made = folder is not None and bool(names) and not folder.exists()
    if folder is not None and made:
        try:
            folder.mkdir()
        except OSError as error:
            raise FileRefused(f"{OPTION}: cannot make {str(folder)!r}: {error.strerror}, nothing was written") from error
    try:
        write(contents)
    except FileRefused:
        if folder is not None and made:
            folder.rmdir()
        raise
    if names:
        click.echo(f"{folder}: wrote {', '.join(names)}", err=True)


def drawing(answer: Answer, options: Mapping[str, Any]) -> str:
    """Load line and budget in characters, where they are asked for; coloured on a terminal that wants colour."""
    if not options.get("draw") or answer.best is None:
        return ""
    from synth.present.drawing import draw

    to_terminal = options["output"] is None and sys.stdout.isatty()
    columns = shutil.get_terminal_size().columns if to_terminal else 100
    encoding = (sys.stdout.encoding or "ascii") if options["output"] is None else "utf-8"
    ascii_only = not encoding.lower().startswith("utf")
    colour = to_terminal and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"
    return "\n" + draw(answer, answer.best, columns=columns, colour=colour, ascii_only=ascii_only)
