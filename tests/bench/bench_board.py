"""Time and proof of the choice for a large board, and of a long batch.

    python -m tests.bench.bench_board [board | hard | batch] [size]

`board` is an instrument with channels: `size` stages (200) in twenty designs of equally many channels, fifty candidates each,
400 values of E96. The candidates of a design trade its impedance level and its ratios against drift as those of a divider do;
every channel has the candidates of its design with drifts of its own, for its units differ. `hard` draws the candidates of every stage at random instead:
no two stages have anything in common, and no proof is to be expected. `batch` finds the best of `size` (1,000) stages on E24 by
two processes, and of a tenth of them, so that the cost of one stage can be compared.
"""

from __future__ import annotations

import itertools
import platform
import random
import sys
import time
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from multiprocessing import get_context
from typing import Any

from synth.batch import Request, find_many
from synth.boards.candidates import Choice, Choices, useful
from synth.boards.model import Demand, Selection, choose
from synth.boards.purchase import Need, Part
from synth.preferred import series_values

DESIGNS, CANDIDATES, VALUES = 20, 50, 400
SECONDS = 20.0
"""Time that the whole choice may take on two cores [s]."""


@dataclass(frozen=True, kw_only=True)
class BoardRow:
    """One board: its size, what was proved, wall and processor time [s]."""

    stages: int
    selection: Selection
    seconds: float
    processor_seconds: float

    @property
    def gap(self) -> float:
        """Relative gap of the number of lines [-]."""
        return self.selection.bounds[0].gap if self.selection.bounds else 1.0


def needs_of_values() -> list[Need]:
    """The values as needs of one class."""
    values = series_values("E96", 10.0, 1e7)[:VALUES]
    return [Need(float(value), 0.01, -1e-4, 1e-4, None) for value in values]


def _choices(rows: Sequence[tuple[float, tuple[int, ...]]], needs: Sequence[Need]) -> Choices:
    space: Any = None
    kept = tuple(
        Choice(network="divider", needs=dict(zip(("r1", "r2", "rc", "re"), (needs[k] for k in at), strict=True)), drift=drift,
               space=space, index=())
        for drift, at in sorted(rows)
    )  # fmt: skip
    return Choices(kept=kept, found=len(kept), best=kept[0].drift, allowed=1.0, reached=None, combinations=0, evaluated=0)


def channels(size: int, rng: random.Random) -> list[Choices]:
    """Stages of an instrument with channels."""
    needs, found = needs_of_values(), []
    for design in range(DESIGNS):
        base = [rng.randrange(10, VALUES - 10) for _ in range(4)]
        best = []
        for level, *ratios in itertools.product(range(-6, 7), (-1, 0, 1), (-1, 0, 1), (-1, 0, 1)):
            # The level of the divider is cheap to move, its ratio, rc and re are dear.
            drift = 0.12 + 0.001 * abs(level) + 0.006 * sum(map(abs, ratios)) + 0.0002 * rng.random()
            at = (base[0] + level, base[1] + level + ratios[0], base[2] + ratios[1], base[3] + ratios[2])
            best.append((drift, at))
        best = sorted(best)[:CANDIDATES]
        for _ in range(size // DESIGNS + (design < size % DESIGNS)):
            own = [(drift + 0.003 * rng.random(), at) for drift, at in best]
            found.append(_choices(own, needs))
    return found


def strangers(size: int, rng: random.Random) -> list[Choices]:
    """Stages that have nothing in common."""
    needs, found = needs_of_values(), []
    for _ in range(size):
        base = [rng.randrange(10, VALUES - 10) for _ in range(4)]
        rows = [
            (0.1 + 0.05 * rng.random(), tuple(b + rng.randint(-6, 6) for b in base)) for _ in range(CANDIDATES)
        ]
        found.append(_choices(rows, needs))
    return found


def board(kind: str, size: int, seconds: float = SECONDS) -> BoardRow:
    """Choose for one board and time it."""
    rng = random.Random(9)
    sets = (channels if kind == "board" else strangers)(size, rng)
    parts = [Part(value=n.value, tolerance=n.tolerance, tcr_low=n.tcr_low, tcr_high=n.tcr_high) for n in needs_of_values()]
    start, processor = time.perf_counter(), time.process_time()
    demands = [Demand(choices=useful(s, parts, 1, 4 * size), count=1) for s in sets]
    selection = choose(demands, parts, seconds=seconds, workers=1)
    return BoardRow(
        stages=size,
        selection=selection,
        seconds=time.perf_counter() - start,
        processor_seconds=time.process_time() - processor,
    )


def rows_of_batch(size: int) -> list[Request]:
    """Stages of a batch: collector currents from 0.5 to 5 mA on supplies from 5 to 24 V."""
    rows = []
    for k in range(size):
        vcc = (5.0, 9.0, 12.0, 15.0, 24.0)[k % 5]
        keys = {"supply.vcc": f"{vcc:g} V ± 5 %", "target.ic": f"{500 + 4500 * k / size:.0f} µA", "target.vce": f"{0.4 * vcc:g} V"}
        common = {"transistor.hfe": "200 : 450", "resistors.series": "E24", "resistors.tolerance": "1 %"}
        rows.append(Request(line=k + 1, keys=keys | common))
    return rows


def batch(size: int, jobs: int = 2) -> tuple[float, int]:
    """Wall time of a batch [s], and how many of its rows were found."""
    with ProcessPoolExecutor(jobs, mp_context=get_context("spawn")) as executor:
        list(find_many(rows_of_batch(jobs), executor=executor))
        start = time.perf_counter()
        found = sum(row["status"] == "found" for row in find_many(rows_of_batch(size), executor=executor))
        return time.perf_counter() - start, found


def main(arguments: Sequence[str] = ()) -> int:
    """Print the figures."""
    kind = arguments[0] if arguments else "board"
    if kind not in ("board", "hard", "batch"):
        print(f"kind: read {kind!r}, accepted are board, hard, batch", file=sys.stderr)
        return 2
    size = int(arguments[1]) if len(arguments) > 1 else 1000 if kind == "batch" else 200
    print(f"{platform.machine()}, Python {platform.python_version()}")
    if kind == "batch":
        for part in (max(1, size // 10), size):
            seconds, found = batch(part)
            print(f"{part} stages on E24 by 2 processes: {seconds:.1f} s, {1000 * seconds / part:.0f} ms each, {found} found")
        return 0
    row = board(kind, size)
    print(f"{row.stages} stages of {CANDIDATES} candidates, {VALUES} values: {row.selection.status}")
    for bound in row.selection.bounds:
        print(f"  {bound.name:<10} {bound.value:10.6g}  proved at least {bound.bound:10.6g}  gap {100 * bound.gap:.2f} %")
    print(f"  {row.seconds:.1f} s, of the processor {row.processor_seconds:.1f} s")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
