"""Random requests that nothing meets: the first change advised, given as options, has to make the command succeed.

``python -m tests.relaxations`` prints ten of them (invented stages).
"""

from __future__ import annotations

import contextlib
import io
import json

import numpy as np

from synth.cli import main
from synth.stage_keys import KEYS


def run(words: list[str]) -> tuple[int, str]:
    """Exit status and standard output of a command line."""
    out = io.StringIO()
    with contextlib.redirect_stdout(out):
        try:
            main(words)
        except SystemExit as ended:
            return int(ended.code or 0), out.getvalue()
    raise AssertionError("the command line always ends")


def request(rng: np.random.Generator) -> list[str]:
    """Options of a random divider stage whose windows are a little too narrow for its spreads."""
    vcc = float(rng.choice([5.0, 9.0, 12.0, 15.0, 24.0]))
    ic = float(rng.choice([0.2, 0.5, 1.0, 2.0, 5.0]))
    least = int(rng.choice([60, 100, 200]))
    options = {
        "--supply": f"{vcc} V ± {rng.choice([2, 5, 8])} %",
        "--ic": f"{ic} mA ± {rng.choice([6, 8, 10, 12])} %",
        "--vce": f"{0.4 * vcc:g} V",
        "--hfe": f"{least} : {least * int(rng.choice([2, 3, 4]))}",
        "--series": str(rng.choice(["E12", "E24"])),
        "--tolerance": str(rng.choice(["1 %", "2 %"])),
    }
    return [word for pair in options.items() for word in pair]


def infeasible(count: int, seed: int = 0) -> list[tuple[list[str], list[str], int]]:
    """Request, first change as options, and the exit status with it.

    Returns
    -------
    list of tuple
        `count` requests that nothing meets and for which advice found a single change.
    """
    rng = np.random.default_rng(seed)
    rows: list[tuple[list[str], list[str], int]] = []
    while len(rows) < count:
        words = request(rng)
        code, text = run(["find", *words, "--format", "json"])
        if code == 0:
            continue
        assert code == 1
        advised = json.loads(text)["infeasible"]["relaxations"]
        if not advised:
            continue
        change = [word for key, value in advised[0]["change"].items() for word in (KEYS[key].options[0], value)]
        rows.append((words, change, run(["find", *words, *change])[0]))
    return rows


if __name__ == "__main__":
    for words, change, code in infeasible(10):
        print(f"{' '.join(words)}\n    with {' '.join(change)}: exit status {code}")
