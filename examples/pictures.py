"""Draws the two pictures of README.md from the hydrophone stage beside it, a demonstration with invented figures.

    python examples/pictures.py

A test draws them again and fails if what they say has changed.
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from pathlib import Path

import synth
from synth.present.circuit import to_svg
from synth.present.figures import figures, saved

HERE = Path(__file__).resolve().parent


def main(argv: Sequence[str]) -> None:
    """Write circuit.svg and load_line.svg to the folder named, or to the one beside this file."""
    folder = Path(argv[0]) if argv else HERE / "pictures"
    stage = synth.Stage.read(HERE / "hydrophone_preamp.toml")
    answer = synth.find(stage, top=1)
    assert answer.best is not None
    folder.mkdir(exist_ok=True)
    (folder / "circuit.svg").write_text(to_svg(answer, answer.best, on_white=True) + "\n", encoding="utf-8")
    load_line = next(figure for name, figure in figures(stage, answer) if name == "load_line")
    (folder / "load_line.svg").write_bytes(saved(load_line, "svg"))


if __name__ == "__main__":
    main(sys.argv[1:])
