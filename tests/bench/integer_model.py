"""A second proof of small searches: a scaled integer model of the divider, solved by constraint programming (CP-SAT).

    python -m tests.bench integer

It shares no bound, no block and no formula with the search. Its laws are written out from section 4 of the design. What it
uses is one fact: at a fixed point of the box the collector current is at most Î exactly where the voltage that drives the
junction at Î does not exceed VBE(Î). Multiplied by r1 + r2 this is linear in r1, r2 and r1·r2 once re is chosen, and a limit on
VCE is a limit on IC once rc and re are chosen, since VCE = VCC − IC·(rc + re·(1 + 1/hFE)).

The model asks for a candidate whose drift is at most D. Each solution is measured in floating point over its whole box, D is
set below it by `STEP`, and the solver asked again, until it proves that there is none.

Scaling: resistances are whole ohms. The coefficients of an inequality are multiplied by the power of two that lets the sum of
its terms use `BITS` bits, then rounded, which errs by half a unit for each; the right side is relaxed by what that can come to,
half the sum of the largest products of resistances. So the integer model admits every candidate that the real one admits, and
its proof of emptiness holds for the real one; what it admits beyond is within `SLACK` of the terms, and is found out when the
solution is measured.
"""

from __future__ import annotations

import itertools
import math
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np

from synth.box import Meter
from synth.search import search
from synth.spaces import Goal, Space, assess, goal_of, spaces_of
from synth.stage import Stage
from synth.transistor import Transistor

K_OVER_Q = 1.380649e-23 / 1.602176634e-19
"""Both constants are exact in the SI of 2019 [V/K]."""
ROOM = 298.15
BITS = 58
"""Bits that the terms of an inequality take; CP-SAT adds in 64."""
SLACK = 2.0**-20
"""What rounding may admit, relative to the largest terms; asserted for every inequality."""
START = 4.0
"""Drift below which a candidate is asked for first [-]."""
STEP = 1e-6
"""How far below the best drift the next one has to lie, relative."""

Index = tuple[int, ...]
Measure = Callable[[Index], float | None]
"""Drift of a candidate over its whole box, None where it does not qualify."""


@dataclass(frozen=True, kw_only=True)
class Proof:
    """Best candidate, None if there is none; drift below which nothing is, proved; models solved; whether it came to an end."""

    index: Index | None
    drift: float
    bound: float
    models: int
    complete: bool


@dataclass(frozen=True)
class Point:
    """A point of the box: supply [V], temperature [K], VBE of this unit against the nominal [V], hFE at 25 °C, ends of r."""

    vcc: float
    t: float
    delta: float
    hfe: float
    ends: Mapping[str, int]


def gain(device: Transistor, point: Point) -> float:
    return float(point.hfe * (point.t / ROOM) ** (1.5 if point.t >= ROOM else 2.5))


def vbe(device: Transistor, point: Point, ic: float) -> float:
    """VBE at a current, by section 4 of the design [V]."""
    if device.vbe_model == "fixed":
        return device.vbe.nominal + point.delta
    gap, vt = {"silicon": 1.17, "germanium": 0.744}[device.material], K_OVER_Q * point.t
    ratio = point.t / ROOM
    return gap - (gap - device.vbe.nominal) * ratio - 3.0 * vt * math.log(ratio) + vt * math.log(ic / device.vbe_ic) + point.delta


def points(space: Space, quantity: str, side: int) -> Iterator[Point]:
    """Points of the box that a quantity is bounded at: of IC the one that decides, of VCE both ends where none is sure."""
    device, up = space.transistor, side > 0
    open_axes = quantity == "vce"
    rise = 1 if (quantity == "ic") == up else 0
    vbe_end = device.vbe.low if rise else device.vbe.high
    t, h, vcc = (
        [spread.low, spread.high] if open_axes else [spread.high if up else spread.low]
        for spread in (space.temperature, device.hfe, space.rails["vcc"])
    )
    for temperature, hfe, supply, re in itertools.product(t, h, vcc, (0, 1) if open_axes else (1 - rise,)):
        ends = {"r1": 1 - rise, "r2": rise, "rc": 1 - int(up), "re": re}
        yield Point(supply, temperature, vbe_end - device.vbe.nominal, hfe, ends)


class Model:
    """Is there a candidate of a divider whose drift is at most D?"""

    def __init__(self, space: Space, goal: Goal, drift: float, barred: list[Index]) -> None:
        from ortools.sat.python import cp_model

        assert space.network.name == "divider"
        assert space.transistor.icbo.high == 0.0
        assert goal.vce is not None
        self.space, self.device, self.model = space, space.transistor, cp_model.CpModel()
        self.values = {role: [round(x) for x in space.lists[role].nominal.tolist()] for role in space.roles}
        for role, whole in self.values.items():
            # Whole ohms, and each once: a value is its own name.
            assert whole == space.lists[role].nominal.tolist()
            assert sorted(set(whole)) == whole
        domain = cp_model.Domain.FromValues
        self.r = {role: self.model.NewIntVarFromDomain(domain(v), role) for role, v in self.values.items()}
        self.is_at = {
            role: [self.model.NewBoolVar(f"{role}_{x}") for x in whole] for role, whole in self.values.items()
        }
        for role, whole in self.values.items():
            self.model.AddExactlyOne(self.is_at[role])
            for flag, x in zip(self.is_at[role], whole, strict=True):
                self.model.Add(self.r[role] == x).OnlyEnforceIf(flag)
        top = max(self.values["r1"]) * max(self.values["r2"])
        self.product = self.model.NewIntVar(0, top, "r1r2")
        self.model.AddMultiplicationEquality(self.product, [self.r["r1"], self.r["r2"]])
        self.limits()
        for side in (1, -1):
            self.current(goal.ic * (1.0 + side * drift), side)
            self.voltage(goal.vce * (1.0 + side * drift), side)
        self.voltage(space.transistor.vce_sat, -1)
        for index in barred:
            self.model.AddBoolOr([self.is_at[role][k].Not() for role, k in zip(space.roles, index, strict=True)])

    def factor(self, role: str, k: int, point: Point) -> float:
        """Resistance over its nominal value at a point."""
        part, rise = self.space.lists[role], point.t - ROOM
        ends = (float(part.tcr_low[k]) * rise, float(part.tcr_high[k]) * rise)
        band = float(part.band[k])
        return 1.0 + band + max(ends) if point.ends[role] else 1.0 - band + min(ends)

    def at_most(self, terms: Mapping[str, float], constant: float, flags: list[Any]) -> None:
        """Σ coefficient·product + constant ≤ 0 where the flags hold, scaled, and relaxed by what rounding may err."""
        variables = {"r1": self.r["r1"], "r2": self.r["r2"], "r1r2": self.product}
        largest = {"r1": max(self.values["r1"]), "r2": max(self.values["r2"])}
        largest["r1r2"] = largest["r1"] * largest["r2"]
        reach = sum(abs(c) * largest[name] for name, c in terms.items()) + abs(constant)
        scale = 2.0 ** (BITS - 1 - math.floor(math.log2(reach)))
        room = math.ceil(0.5 * (sum(largest[name] for name in terms) + 1.0))
        assert room / (reach * scale) < SLACK
        total = sum(round(c * scale) * variables[name] for name, c in terms.items()) + round(constant * scale)
        constraint = self.model.Add(total <= room)
        if flags:
            constraint.OnlyEnforceIf(flags)

    def drive(self, side: int, point: Point, ic: float, ohms: float, flags: list[Any], f1: float, f2: float) -> None:
        """IC ≤ ic (side 1) or IC ≥ ic (side −1) at a point, with re = ohms there."""
        h = gain(self.device, point)
        below = ohms * (1.0 + 1.0 / h) * ic + vbe(self.device, point, ic)
        terms = {"r1": -f1 * below, "r2": f2 * (point.vcc - below), "r1r2": -f1 * f2 * ic / h}
        self.at_most({name: side * c for name, c in terms.items()}, 0.0, flags)

    def bands(self, point: Point) -> Iterator[tuple[float, float, list[Any]]]:
        """Factors of r1 and r2 with the flags under which they hold; none where the bands of a list are all alike."""
        each: list[list[tuple[float, list[Any]]]] = []
        for role in ("r1", "r2"):
            factors = [self.factor(role, k, point) for k in range(len(self.values[role]))]
            alike = len(set(factors)) == 1
            each.append([(factors[0], [])] if alike else [(f, [self.is_at[role][k]]) for k, f in enumerate(factors)])
        for (f1, one), (f2, two) in itertools.product(*each):
            yield f1, f2, [*one, *two]

    def current(self, limit: float, side: int) -> None:
        """IC of every point stays on its side of a limit."""
        for point in points(self.space, "ic", side):
            for k, ohms in enumerate(self.values["re"]):
                for f1, f2, flags in self.bands(point):
                    at = ohms * self.factor("re", k, point)
                    if limit > 0.0:
                        self.drive(side, point, limit, at, [self.is_at["re"][k], *flags], f1, f2)

    def voltage(self, limit: float, side: int) -> None:
        """VCE of every point stays on its side of a limit: at least (−1) or at most (1)."""
        for point in points(self.space, "vce", side):
            h = gain(self.device, point)
            for (j, rc), (k, re) in itertools.product(enumerate(self.values["rc"]), enumerate(self.values["re"])):
                load, ohms = rc * self.factor("rc", j, point), re * self.factor("re", k, point)
                ic = (point.vcc - limit) / (load + ohms * (1.0 + 1.0 / h))
                own = [self.is_at["rc"][j], self.is_at["re"][k]]
                if ic <= 0.0:
                    if side < 0:
                        self.model.AddBoolOr([flag.Not() for flag in own])
                    continue
                for f1, f2, flags in self.bands(point):
                    # Less VCE is more IC.
                    self.drive(-side, point, ic, ohms, [*own, *flags], f1, f2)

    def limits(self) -> None:
        """The default limits, which are judged at nominal values."""
        for need in self.space.requirements:
            low, high = need.interval.low, need.interval.high
            if need.name == "collector_share":
                for (j, rc), (k, re) in itertools.product(enumerate(self.values["rc"]), enumerate(self.values["re"])):
                    if rc < low * (rc + re) * (1.0 - 1e-12):
                        self.model.AddBoolOr([self.is_at["rc"][j].Not(), self.is_at["re"][k].Not()])
            elif need.name == "base_resistance":
                self.at_most({"r1": low, "r2": low, "r1r2": -1.0}, 0.0, [])
            elif need.name == "bleeder_current":
                self.bleeder(high)
            else:
                assert need.name == "vce", need.name

    def bleeder(self, most: float) -> None:
        """The current in r2 is at most a limit exactly where r1 cannot bring more than that and the base current there."""
        t, hfe = self.space.temperature.nominal, self.device.hfe.nominal
        point = Point(self.space.rails["vcc"].nominal, t, 0.0, hfe, {})
        h = gain(self.device, point)
        for (j, r2), (k, re) in itertools.product(enumerate(self.values["r2"]), enumerate(self.values["re"])):
            base = most * r2
            ic = self.settled(point, base, re * (1.0 + 1.0 / h))
            flags = [self.is_at["r2"][j], self.is_at["re"][k]]
            self.at_most({"r1": -(most + ic / h)}, point.vcc - base, flags)

    def settled(self, point: Point, base: float, ohms: float) -> float:
        """Current of a junction behind a resistance at a base voltage, by bisection of its logarithm [A]."""
        low, high = -70.0, math.log(max(base, 1e-3) / ohms) + 1.0
        for _ in range(200):
            middle = 0.5 * (low + high)
            ic = math.exp(middle)
            low, high = (middle, high) if vbe(self.device, point, ic) + ohms * ic < base else (low, middle)
        return math.exp(low)

    def solve(self, seconds: float) -> Index | bool | None:
        """A candidate, False where there is none, None where the time was up."""
        from ortools.sat.python import cp_model

        solver = cp_model.CpSolver()
        solver.parameters.max_time_in_seconds = seconds
        solver.parameters.num_workers = 1
        solver.parameters.random_seed = 1
        status = solver.Solve(self.model)
        if status in (cp_model.OPTIMAL, cp_model.FEASIBLE):
            return tuple(self.values[role].index(solver.Value(self.r[role])) for role in self.space.roles)
        return False if status == cp_model.INFEASIBLE else None


def prove(space: Space, goal: Goal, measure: Measure, *, start: float = START, seconds: float = 60.0) -> Proof:
    """The candidate of least drift below `start`, by asking for a better one until there is none."""
    best: tuple[float, Index | None] = (start, None)
    barred: list[Index] = []
    wanted, models = start, 0
    while True:
        found = Model(space, goal, wanted, barred).solve(seconds)
        models += 1
        if found is None or found is False:
            return Proof(index=best[1], drift=best[0], bound=wanted, models=models, complete=found is False)
        assert isinstance(found, tuple)
        drift = measure(found)
        if drift is not None and drift < best[0]:
            best = (drift, found)
            wanted = drift * (1.0 - STEP)
        else:
            # Admitted by rounding, or decided at a point that the model does not look at.
            barred.append(found)



# --- Beside the search --------------------------------------------------------------------------------------------

SIZES = {"E3": ("10k : 100k", "1k : 4k7"), "E6": ("10k : 100k", "1k : 4k7"), "E12": ("10k : 100k", "1k : 4k7")}  # fmt: skip
"""Series with the range of r1 and r2, and of rc and re."""


@dataclass(frozen=True, kw_only=True)
class Row:
    """The same space proved both ways."""

    series: str
    combinations: int
    proof: Proof
    seconds: float
    search_seconds: float
    search_drift: float | None


def narrow(series: str, **changes: str) -> tuple[Space, Goal]:
    """The divider of the contract over a narrow range of a series, 5 %."""
    feed, load = SIZES[series]
    ranges = {f"resistors_{role}_range": feed if role in ("r1", "r2") else load for role in ("r1", "r2", "rc", "re")}
    keys = {"supply": "12 V", "ic": "2 mA", "vce": "5 V", "hfe": "110 : 450", "series": series, "tolerance": "5 %", **ranges, **changes}
    stage = Stage(**keys)  # type: ignore[arg-type]
    return spaces_of(stage)[0], goal_of(stage)


def measured(space: Space, goal: Goal, index: Index) -> float | None:
    """Drift of a candidate over its whole box, None where it does not qualify."""
    found, _ = assess(space, np.array([index], dtype=np.int32), goal, Meter())
    return found[0].drift if found else None


def compare(series: str, seconds: float = 60.0, **changes: str) -> Row:
    """Prove one space both ways and time it."""
    space, goal = narrow(series, **changes)
    start = time.process_time()
    proof = prove(space, goal, partial(measured, space, goal), seconds=seconds)
    took = time.process_time() - start
    start = time.process_time()
    outcome = search([space], goal, top=1)
    alone = time.process_time() - start
    return Row(
        series=series,
        combinations=space.combinations,
        proof=proof,
        seconds=took,
        search_seconds=alone,
        search_drift=outcome.found[0].drift if outcome.found else None,
    )


def table(rows: Sequence[Row]) -> str:
    """Rows as text."""
    lines = [f"{'series':<7}{'combinations':>13}{'models':>8}{'seconds':>10}{'over search':>13}{'best':>10}{'search':>10}  proved"]
    for row in rows:
        best, other = ("none" if d is None or d >= START else f"{d:.6f}" for d in (row.proof.drift, row.search_drift))
        lines.append(
            f"{row.series:<7}{row.combinations:>13}{row.proof.models:>8}{row.seconds:>10.2f}"
            f"{row.seconds / row.search_seconds:>12.0f}x{best:>10}{other:>10}  {'yes' if row.proof.complete else 'time was up'}"
        )
    return "\n".join(lines)


def main(arguments: Sequence[str] = ()) -> int:
    """Print the table of the series named, all by default."""
    print("CP-SAT on a scaled integer model beside the search: the divider of the contract over narrow ranges, 5 %")
    print(table([compare(series) for series in arguments or SIZES]))
    return 0
