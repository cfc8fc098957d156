"""Time and memory of the exact search, beside its Q-point solves alone and beside full enumeration.

    python -m tests.bench search [NAME ...]

A name is a series, a series with ``-pairs``, a network, or one of `REQUESTS`. A series asks for the ten best dividers of the
contract (12 V, 2 mA, 5 V, hFE 110 : 450, four roles from 10 ohm to 10 Mohm, default limits), a network for the same with E24.
`omega` is the time over that of one Wright omega call for each solve, in the same run: a figure of the bookkeeping that does not
depend on the machine. `enumeration` is the time of looking at every candidate by the vertices of its box, and at its whole box
where these do not put it beyond the list: from a sample of them (~) where they are too many. `times` is how many searches that is.
Seconds are those of the processor, which other work on the machine does not lengthen.
"""

from __future__ import annotations

import platform
import sys
import time
import tracemalloc
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import wrightomega

from synth.box import Meter
from synth.networks import NETWORKS
from synth.search import search
from synth.spaces import Goal, Space, assess, goal_of, spaces_of
from synth.stage import Stage

SERIES = ("E6", "E12", "E24", "E48", "E96", "E192")
PAIRS = ("E6-pairs", "E12-pairs", "E24-pairs")
REQUESTS = {
    "any": {"network": "any", "ic": "2 mA ± 15 %", "supply": "12 V ± 5 %"},
    "plain": {"hfe": None, "type": "BC847B", "ic": "2 mA ± 20 %", "supply": "12 V ± 5 %", "transistor_stress": "none"},
    "limits": {
        "hfe": None, "type": "BC847B", "ic": "2 mA ± 20 %", "supply": "12 V ± 5 %", "style": "0805", "load": "10 kohm",
        "source": "1 kohm", "supply_current": "3 mA", "input_resistance": "1.5 kohm", "gain": "80", "swing": "1.5 V",
    },
}  # fmt: skip
"""Besides, with E96: every network in one search, and a stage without and with a limit of every kind."""
NEEDS = {
    "two_supply": {"vee": "12 V"},
    "sink": {"vce": None, "vload": "12 V", "reference_kind": "diode"},
    "diode_divider": {"reference_kind": "diode"},
}
"""What a network asks for besides."""
FORMS = tuple(name for name in NETWORKS if name != "divider")
EVERY = (*SERIES, *PAIRS, *FORMS, *REQUESTS)
CHUNK = 8192
"""Arguments of a Wright omega call: as many as a batch of the search has, so that both run in the same cache."""
SAMPLE, WHOLE = 8192, 256
"""Candidates that full enumeration is timed on, and such as are judged over their whole box for what one costs."""


@dataclass(frozen=True, kw_only=True)
class Row:
    """One search.

    Parameters
    ----------
    name : str
        What was searched.
    combinations, solves : int
        Size of the space; scalar Q-point solves [-].
    seconds, omega_seconds : float
        Time of the search, and of one Wright omega call for each solve [s].
    megabytes : float
        Most memory that the search held at a time [MB].
    candidate_omegas, vertex_omegas : float
        Time of judging one candidate over its whole box, and by its vertices alone, over that of one Wright omega call [-].
    enumeration : float
        Time of full enumeration [s].
    measured : bool
        Whether it was, rather than extrapolated from a sample.
    best, bound : float or None
        Drift of the first candidate, None where nothing qualifies; proved lower bound on the drift of what is not listed [-].
    complete : bool
        Whether the list is proved.
    """

    name: str
    combinations: int
    solves: int
    seconds: float
    omega_seconds: float
    megabytes: float
    candidate_omegas: float
    vertex_omegas: float
    enumeration: float
    measured: bool
    best: float | None
    bound: float
    complete: bool

    @property
    def ratio(self) -> float:
        """Time of the search over that of its Wright omega calls [-]."""
        return self.seconds / self.omega_seconds


def request(name: str) -> Stage:
    """The request that is timed: a series in every role with its own tolerance, or a network or request with its own."""
    keys: dict[str, object] = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450"}
    if name in REQUESTS:
        keys |= {"series": "E96", **REQUESTS[name]}
    elif name in NETWORKS:
        keys |= {"series": "E24", "network": name, **NEEDS.get(name, {})}
    else:
        series, _, pairs = name.partition("-")
        keys |= {"series": series, "pairs": bool(pairs)}
    return Stage(**keys)  # type: ignore[arg-type]


def omega_seconds(count: int) -> float:
    """Time of `count` Wright omega calls on arguments like those of a bias stage [s]."""
    arguments = np.linspace(1.0, 120.0, min(count, CHUNK))
    whole, rest = divmod(count, arguments.size)
    start = time.process_time()
    for _ in range(whole):
        wrightomega(arguments)
    wrightomega(arguments[:rest])
    return time.process_time() - start


def enumerate_some(spaces: Sequence[Space], goal: Goal, limit: float, sample: int = SAMPLE) -> tuple[int, float]:
    """Candidates judged of each space, all or a random sample, up to a drift, and the time it took to judge them [s]."""
    rng = np.random.default_rng(1)
    count, seconds = 0, 0.0
    for space in spaces:
        sizes = [space.lists[role].nominal.size for role in space.roles]
        if space.combinations <= sample:
            index = np.stack([axis.ravel() for axis in np.indices(sizes)], axis=1).astype(np.int32)
        else:
            index = np.stack([rng.integers(0, size, sample) for size in sizes], axis=1).astype(np.int32)
        start = time.process_time()
        for at in range(0, len(index), 1024):
            assess(space, index[at : at + 1024], goal, Meter(), limit)
        seconds += time.process_time() - start
        count += len(index)
    return count, seconds


def measure(name: str, top: int = 10) -> Row:
    """Search one space and time it, then again to see its memory."""
    stage = request(name)
    spaces, goal = spaces_of(stage), goal_of(stage)
    start = time.process_time()
    outcome = search(spaces, goal, top=top)
    seconds = time.process_time() - start
    omega = omega_seconds(outcome.evaluated)
    last = outcome.found[min(top, len(outcome.found)) - 1].drift if outcome.found else np.inf
    judged, took = enumerate_some(spaces, goal, last)
    one = omega / max(outcome.evaluated, 1)
    whole, whole_took = enumerate_some(spaces[:1], goal, np.inf, WHOLE)
    tracemalloc.start()
    search(spaces_of(stage), goal, top=top)
    megabytes = tracemalloc.get_traced_memory()[1] / 1e6
    tracemalloc.stop()
    return Row(
        name=name,
        combinations=outcome.combinations,
        solves=outcome.evaluated,
        seconds=seconds,
        omega_seconds=omega,
        megabytes=megabytes,
        candidate_omegas=whole_took / whole / one,
        vertex_omegas=took / judged / one,
        enumeration=took / judged * outcome.combinations,
        measured=judged == outcome.combinations,
        best=outcome.found[0].drift if outcome.found else None,
        bound=outcome.bound,
        complete=outcome.complete,
    )


HEAD = ("name", "combinations", "solves", "seconds", "omega", "MB", "enumeration", "times", "best", "bound", "proved")


def table(rows: Sequence[Row]) -> str:
    """Rows as text, the smallest space first."""
    cells = [HEAD]
    for row in sorted(rows, key=lambda row: row.combinations):
        cells.append(
            (
                row.name,
                f"{row.combinations:.3g}",
                str(row.solves),
                f"{row.seconds:.3f}",
                f"{row.ratio:.1f}",
                f"{row.megabytes:.0f}",
                f"{'' if row.measured else '~'}{_duration(row.enumeration)}",
                f"{row.enumeration / row.seconds:.2g}",
                "none" if row.best is None else f"{row.best:.5f}",
                f"{row.bound:.5f}",
                "yes" if row.complete else "no",
            )
        )
    widths = [max(len(line[j]) for line in cells) for j in range(len(HEAD))]
    return "\n".join(
        "  ".join(cell.ljust(w) if j == 0 else cell.rjust(w) for j, (cell, w) in enumerate(zip(line, widths, strict=True)))
        for line in cells
    )


def _duration(seconds: float) -> str:
    for limit, unit, name in ((120.0, 1.0, "s"), (7200.0, 60.0, "min"), (2e5, 3600.0, "h"), (6e7, 86400.0, "d")):
        if seconds < limit:
            return f"{seconds / unit:.3g}{name}"
    return f"{seconds / 3.156e7:.2g}y"


def growth(rows: Sequence[Row]) -> str:
    """How the solves grow with the space, and what one candidate costs, in words."""
    plain = [row for row in rows if row.name in SERIES]
    whole, vertices = (np.median([getattr(row, name) for row in rows]) for name in ("candidate_omegas", "vertex_omegas"))
    words = [f"one candidate costs {whole:.0f} Wright omega calls over its whole box, {vertices:.0f} by its vertices"]
    if len(plain) > 1:
        sizes, solves = (np.log([getattr(row, name) for row in plain]) for name in ("combinations", "solves"))
        words.append(f"solves grow as the {np.polyfit(sizes, solves, 1)[0]:.2f} power of the number of combinations")
    return "; ".join(words)


def main(arguments: Sequence[str] = ()) -> int:
    """Print the table of what is named, everything by default."""
    unknown = [name for name in arguments if name not in EVERY]
    if unknown:
        print(f"search: read {unknown[0]!r}, accepted are {' '.join(EVERY)}", file=sys.stderr)
        return 2
    # The first search also loads and warms what every later one finds ready.
    measure("E6", top=1)
    print(f"{platform.machine()}, Python {platform.python_version()}, numpy {np.__version__}, one core")
    rows = [measure(name) for name in arguments or EVERY]
    print(table(rows))
    print(growth(rows))
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
