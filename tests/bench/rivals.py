"""Other ways to the same resistors: the textbook procedure, a general optimizer with rounding, full enumeration.

    python -m tests.bench rivals [NUMBER]

draws random stages (200 when no number is given) and lets each way bias them. All are judged alike, by the worst case over the
whole box, and by equal limits: those of the exact search are the default limits, widened to what the textbook network needs
where that exceeds them. A second comparison holds the emitter drop: re is pinned to the textbook's value. The stages are
invented; the textbook procedure is common practice.
"""

from __future__ import annotations

import itertools
import time
import zlib
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from synth.box import Box, Values
from synth.limits import judge
from synth.parts import Parts
from synth.preferred import nearest
from synth.search import search
from synth.spaces import Goal, Space, drift_of, goal_of, spaces_of, wanted
from synth.stage import Stage

Array = NDArray[np.float64]

ROLES = ("r1", "r2", "rc", "re")
STAGES = 200
BLEED, DROP = 10.0, 10.0
"""The textbook procedure: a tenth of IC in the divider, a tenth of the supply across re."""
POPULATION, GENERATIONS = 15, 60
"""Of differential evolution: members for each resistor, the usual number, and generations."""
PENALTY = 10.0
"""What a candidate that fails a limit costs, beside its drift and by how much it fails [-]."""


@dataclass(frozen=True, kw_only=True)
class Result:
    """What a way found: drift [-] (infinite if it leaves the active region or a limit), supply current [A], time [s]."""

    drift: float
    supply: float
    seconds: float


@dataclass(frozen=True, kw_only=True)
class Duel:
    """One stage: each way's result under equal limits, and the exact search with the textbook's emitter resistor."""

    textbook: Result
    optimizer: Result
    exact: Result
    exact_same_re: Result


def random_stage(number: int) -> dict[str, str]:
    """Keys of an invented divider stage that has room for the textbook procedure."""
    rng = np.random.default_rng(zlib.crc32(f"duel {number}".encode()))
    supply = float(rng.choice([5.0, 6.0, 9.0, 12.0, 15.0, 18.0, 24.0]))
    least = 10.0 ** rng.uniform(1.7, 2.5)
    series, tolerance = (("E12", "5 %"), ("E24", "5 %"), ("E24", "1 %"), ("E96", "1 %"))[rng.integers(4)]
    return {
        "supply": f"{supply:g} V ± {rng.choice([0, 2, 5])} %",
        "ic": f"{10.0 ** rng.uniform(-4.0, -2.0):.3g} A",
        "vce": f"{supply * rng.uniform(0.3, 0.55):.3g} V",
        "hfe": f"{least:.3g} : {least * rng.uniform(1.5, 4.5):.3g}",
        "series": series,
        "tolerance": tolerance,
        "temperature": str(rng.choice(["0 : 25 : 70 °C", "-20 : 25 : 60 °C", "10 : 25 : 40 °C"])),
    }


def textbook(stage: Stage) -> dict[str, float]:
    """The four resistors by the usual rules of thumb, each rounded to the nearest value of the series [ohm]."""
    supply, ic, device = stage.rails["vcc"].nominal, stage.ic.nominal or 0.0, stage.transistor
    vce = stage.voltages["vce"].nominal or 0.0
    drop, base = supply / DROP, ic / device.hfe.nominal
    above = drop + device.vbe.nominal
    exact = {
        "r1": (supply - above) / (ic / BLEED + base),
        "r2": above / (ic / BLEED),
        "rc": (supply - vce - drop) / ic,
        "re": drop / ic,
    }
    return {role: nearest(ohms, stage.role(role).series) for role, ohms in exact.items()}


def box_of(space: Space, ohms: Array) -> Box:
    """A box of any resistances, shape (4, n), with the bands of the space, which are all alike here."""
    parts = {}
    for role, r in zip(ROLES, ohms, strict=True):
        band, low, high = (np.full(r.size, x[0]) for x in (space.lists[role].band, space.lists[role].tcr_low,
                                                           space.lists[role].tcr_high))  # fmt: skip
        parts[role] = Parts(nominal=r, band=band, tcr_low=low, tcr_high=high)
    return Box(
        network=space.network, transistor=space.transistor, rails=space.rails, temperature=space.temperature, parts=parts
    )


def judged(space: Space, goal: Goal, ohms: Array, *, thorough: bool = True) -> tuple[Array, Array]:
    """Drift and the worst margin of n candidates, a candidate that saturates among them [-]; by vertices alone if not thorough."""
    box = box_of(space, ohms)
    known: dict[tuple[Sequence[str], int], tuple[Array, Values]] = {}

    def worst(names: Sequence[str], side: int) -> tuple[Array, Values]:
        if (names, side) not in known:
            found = box.extreme(names, side, thorough=thorough)
            known[names, side] = found.value, found.at
        return known[names, side]

    drift = drift_of({(name, side): worst((name,), side)[0] for name, side in wanted(goal)}, goal)[1]
    margins = [judge(box, need, worst).margin for need in space.requirements]
    return drift, np.min(margins, axis=0)


def supply_of(space: Space, ohms: Array) -> float:
    """Nominal supply current of one candidate [A]."""
    box = box_of(space, ohms[:, None])
    values = box.nominal()
    return float(np.max(list(box.branches(values, box.solve(values)).rail.values())))


def result(space: Space, goal: Goal, ohms: Sequence[float], seconds: float) -> Result:
    """Drift of one candidate, infinite where it fails a limit."""
    r = np.array(ohms)
    drift, margin = judged(space, goal, r[:, None])
    passes = bool(margin[0] >= -1e-12)
    return Result(drift=float(drift[0]) if passes else np.inf, supply=supply_of(space, r), seconds=seconds)


def optimize(space: Space, goal: Goal, seed: int, generations: int) -> tuple[float, ...]:
    """Differential evolution over logarithms of resistances, then the best of the sixteen ways to round.

    A second reading of "followed by rounding" than the nearest values alone, and the better one for the rival.
    """
    from scipy.optimize import differential_evolution

    lists = [space.lists[role].nominal for role in ROLES]

    def cost(logs: Array) -> Array:
        ohms = np.exp(logs.reshape(len(ROLES), -1))
        # Vertices decide nearly all that the whole box does, in a third of the time.
        drift, margin = judged(space, goal, ohms, thorough=False)
        return np.where(margin >= 0.0, drift, PENALTY + np.minimum(-margin, PENALTY))

    ends = [(float(np.log(values[0])), float(np.log(values[-1]))) for values in lists]
    found = differential_evolution(
        cost, ends, popsize=POPULATION, maxiter=generations, seed=seed, vectorized=True, updating="deferred", polish=False
    )
    around = []
    for values, ohm in zip(lists, np.exp(found.x), strict=True):
        at = int(np.searchsorted(values, ohm))
        around.append([float(values[k]) for k in (at - 1, at) if 0 <= k < values.size])
    every = np.array(list(itertools.product(*around))).T
    drift, margin = judged(space, goal, every)
    winner = int(np.where(margin >= 0.0, drift, PENALTY - margin).argmin())
    return tuple(float(x) for x in every[:, winner])


def equal_limits(stage: Stage, space: Space, ohms: Sequence[float]) -> Stage:
    """The stage with its default limits widened to what a network needs."""
    box = box_of(space, np.array(ohms)[:, None])
    values = box.nominal()
    q = box.solve(values)
    r1, r2, rc, re = ohms
    most = max(stage.limits["bleeder_current"].high, float(box.measure(("i_r2",), values, q)[0]))
    return stage.replace(
        bleeder_current=f"<= {most * (1.0 + 1e-9):.12g} A",
        collector_share=f">= {min(stage.limits['collector_share'].low, rc / (rc + re)) * (1.0 - 1e-9):.12g}",
        base_resistance=f">= {min(stage.limits['base_resistance'].low, r1 * r2 / (r1 + r2)) * (1.0 - 1e-9):.12g} ohm",
    )


def exact_search(stage: Stage) -> Result:
    """The exact search, for one candidate."""
    start = time.process_time()
    (space,), goal = spaces_of(stage), goal_of(stage)
    outcome = search([space], goal, top=1)
    seconds = time.process_time() - start
    if not outcome.found:
        return Result(drift=np.inf, supply=np.nan, seconds=seconds)
    ohms = [space.lists[role].nominal[k] for role, k in zip(space.roles, outcome.found[0].index, strict=True)]
    assert outcome.complete
    return Result(drift=outcome.found[0].drift, supply=supply_of(space, np.array(ohms)), seconds=seconds)


def duel(number: int, generations: int | None = None) -> Duel:
    """One random stage, biased every way."""
    generations = GENERATIONS if generations is None else generations
    plain = Stage(**random_stage(number))  # type: ignore[arg-type]
    start = time.process_time()
    by_hand = textbook(plain)
    took = time.process_time() - start
    ohms = [by_hand[role] for role in ROLES]
    stage = equal_limits(plain, spaces_of(plain)[0], ohms)
    (space,), goal = spaces_of(stage), goal_of(stage)
    start = time.process_time()
    optimum = optimize(space, goal, number, generations)
    optimizing = time.process_time() - start
    return Duel(
        textbook=result(space, goal, ohms, took),
        optimizer=result(space, goal, optimum, optimizing),
        exact=exact_search(stage),
        exact_same_re=exact_search(stage.replace(resistors_re_values=[by_hand["re"]])),
    )


def summary(duels: Sequence[Duel]) -> str:
    """Medians and counts as text."""
    rows = [("way", "median drift", "fails", "worse than exact", "exact better by", "supply", "seconds")]
    ways = {"textbook": "exact", "optimizer": "exact", "exact": "exact", "exact_same_re": "exact_same_re"}
    titles = {"textbook": "textbook procedure", "optimizer": "optimizer, then rounding", "exact": "exact search",
              "exact_same_re": "exact, the textbook's re"}  # fmt: skip
    column = {way: [getattr(d, way) for d in duels] for way in ways}
    hand = np.array([r.supply for r in column["textbook"]])
    for way, against in ways.items():
        drift = np.array([r.drift for r in column[way]])
        best = np.array([r.drift for r in column[against]])
        both = np.isfinite(drift) & np.isfinite(best)
        beaten = int(np.sum(drift < best * (1.0 - 1e-9)))
        rows.append(
            (
                titles[way],
                f"{100.0 * np.median(drift):.1f} %",
                str(int(np.sum(~np.isfinite(drift)))),
                "–" if way == against else f"{int(np.sum(drift > best * (1.0 + 1e-9)))} of {len(duels)}",
                "–" if way == against else f"{100.0 * np.median(1.0 - best[both] / drift[both]):.1f} %, never worse"
                if not beaten
                else f"WORSE ON {beaten}",
                f"x {np.nanmedian(np.array([r.supply for r in column[way]]) / hand):.3f}",
                f"{np.median([r.seconds for r in column[way]]):.4f}",
            )
        )
    at_drop = np.array([d.exact_same_re.drift for d in duels]) / np.array([d.textbook.drift for d in duels])
    widths = [max(len(row[j]) for row in rows) for j in range(len(rows[0]))]
    lines = ["  ".join(cell.ljust(w) for cell, w in zip(row, widths, strict=True)).rstrip() for row in rows]
    kept = at_drop[np.isfinite(at_drop)]
    lines.append(
        f"at equal emitter drop the exact search cuts the textbook's drift by {100.0 * (1.0 - np.median(kept)):.1f} % (median), "
        f"worse on {int(np.sum(kept > 1.0 + 1e-9))} of {kept.size}"
    )
    return "\n".join(lines)


def main(arguments: Sequence[str] = ()) -> int:
    """Print the comparison on so many random stages."""
    number = int(arguments[0]) if arguments else STAGES
    print(f"{number} random divider stages (invented), equal limits; drift over the whole box")
    print(summary([duel(k) for k in range(number)]))
    return 0
