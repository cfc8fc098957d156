"""Time of the exact search over the preferred series, beside the time of its Q-point solves alone.

    python -m tests.bench.bench_search [SERIES ... any plain limits]

Each row searches the divider of the contract (12 V, 2 mA, 5 V, hFE 110 : 450, four roles from 10 ohm to 10 Mohm, default
limits) for its ten best. `ratio` is the time of the search over the time of one Wright omega call for each of its solves,
measured in the same run: a figure of the bookkeeping that does not depend on the machine.
"""

from __future__ import annotations

import platform
import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import wrightomega

from synth.search import search
from synth.spaces import goal_of, spaces_of
from synth.stage import Stage

SERIES = ("E6", "E12", "E24", "E48", "E96", "E192")
REQUESTS = {
    "any": {"network": "any", "ic": "2 mA ± 15 %", "supply": "12 V ± 5 %"},
    "plain": {"hfe": None, "type": "BC847B", "ic": "2 mA ± 20 %", "supply": "12 V ± 5 %", "transistor_stress": "none"},
    "limits": {
        "hfe": None, "type": "BC847B", "ic": "2 mA ± 20 %", "supply": "12 V ± 5 %", "style": "0805", "load": "10 kohm",
        "source": "1 kohm", "supply_current": "3 mA", "input_resistance": "1.5 kohm", "gain": "80", "swing": "1.5 V",
    },
}  # fmt: skip
"""Besides, with E96: every network in one search, and a stage without and with a limit of every kind."""
CHUNK = 8192
"""Arguments of a Wright omega call: as many as a batch of the search has, so that both run in the same cache."""


@dataclass(frozen=True, kw_only=True)
class Row:
    """One search.

    Parameters
    ----------
    series : str
        Series of preferred values in every role.
    combinations, solves : int
        Size of the space; scalar Q-point solves [-].
    seconds, omega_seconds : float
        Time of the search, and of one Wright omega call for each solve [s].
    best, bound : float or None
        Drift of the first candidate, None where nothing qualifies; proved lower bound on the drift of what is not listed [-].
    complete : bool
        Whether the list is proved.
    """

    series: str
    combinations: int
    solves: int
    seconds: float
    omega_seconds: float
    best: float | None
    bound: float
    complete: bool

    @property
    def ratio(self) -> float:
        """Time of the search over that of its Wright omega calls [-]."""
        return self.seconds / self.omega_seconds


def request(series: str) -> Stage:
    """The request that is timed, with one series in every role and its own tolerance."""
    contract = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450"}
    if series in REQUESTS:
        return Stage(**{**contract, "series": "E96", **REQUESTS[series]})  # type: ignore[arg-type]
    return Stage(**contract, series=series)


def omega_seconds(count: int) -> float:
    """Time of `count` Wright omega calls on arguments like those of a bias stage [s]."""
    arguments = np.linspace(1.0, 120.0, min(count, CHUNK))
    whole, rest = divmod(count, arguments.size)
    start = time.perf_counter()
    for _ in range(whole):
        wrightomega(arguments)
    wrightomega(arguments[:rest])
    return time.perf_counter() - start


def measure(series: str, top: int = 10) -> Row:
    """Search one series and time it."""
    stage = request(series)
    spaces, goal = spaces_of(stage), goal_of(stage)
    start = time.perf_counter()
    outcome = search(spaces, goal, top=top)
    seconds = time.perf_counter() - start
    return Row(
        series=series,
        combinations=outcome.combinations,
        solves=outcome.evaluated,
        seconds=seconds,
        omega_seconds=omega_seconds(outcome.evaluated),
        best=outcome.found[0].drift if outcome.found else None,
        bound=outcome.bound,
        complete=outcome.complete,
    )


def table(rows: Sequence[Row]) -> str:
    """Rows as text."""
    lines = [f"{'series':<7}{'combinations':>13}{'solves':>11}{'seconds':>9}{'ratio':>7}{'best':>10}{'bound':>10}  complete"]
    for row in rows:
        best = "none" if row.best is None else f"{row.best:.5f}"
        lines.append(
            f"{row.series:<7}{row.combinations:>13.4g}{row.solves:>11}{row.seconds:>9.3f}{row.ratio:>7.1f}{best:>10}"
            f"{row.bound:>10.5f}  {'yes' if row.complete else 'no'}"
        )
    return "\n".join(lines)


def main(arguments: Sequence[str] = ()) -> int:
    """Print the table of the series named, all by default."""
    known = (*SERIES, *REQUESTS)
    unknown = [name for name in arguments if name not in known]
    if unknown:
        print(f"series: read {unknown[0]!r}, accepted are {' '.join(known)}", file=sys.stderr)
        return 2
    # The first search also loads and warms what every later one finds ready.
    measure("E6", top=1)
    print(f"{platform.machine()}, Python {platform.python_version()}, numpy {np.__version__}, one core")
    print(table([measure(series) for series in arguments or known]))
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
