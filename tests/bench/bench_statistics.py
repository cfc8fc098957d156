"""Time of a lot of units drawn by Monte Carlo, beside one Wright omega call for each of them.

    python -m tests.bench statistics [UNITS]
"""

from __future__ import annotations

import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from scipy.special import wrightomega

import synth
from synth.box import Meter
from synth.spaces import fitted
from synth.stage import Stage
from synth.statistics import monte_carlo

PREAMP = Path(__file__).resolve().parents[1] / "scenarios" / "preamp.toml"
"""The shared scenario of a preamp (invented), with the resistors that are best for it."""


@dataclass(frozen=True)
class Row:
    """One lot: units, seconds of the processor, the same number of Wright omega calls [s], share of units inside every window."""

    units: int
    seconds: float
    reference: float
    inside: float


def run(units: int) -> Row:
    """Draw a lot, solve and judge it."""
    stage = Stage.read(PREAMP)
    best = synth.find(stage, top=1).best
    assert best is not None
    stage = stage.replace(**best.resistors)
    space = fitted(stage)
    box = space.box(np.zeros((1, len(space.roles)), dtype=np.int32), Meter())
    lot = replace(stage.lot, units=units)
    start = time.process_time()
    found = monte_carlo(box, space.requirements, lot, life=dict.fromkeys(space.roles, 0.0))
    seconds = time.process_time() - start
    argument = np.random.default_rng(0).uniform(0.0, 100.0, units)
    start = time.process_time()
    wrightomega(argument)
    reference = time.process_time() - start
    return Row(units, seconds, reference, min((y.share for y in found.yields), default=np.nan))


def main(words: Sequence[str]) -> int:
    """Print the table."""
    print("units      seconds  per Wright omega call  least share inside a window")
    for units in [int(word) for word in words] or [2**16, 2**20]:
        row = run(units)
        print(f"{row.units:<9d}  {row.seconds:7.2f}  {row.seconds / row.reference:21.1f}  {row.inside:.4%}")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
