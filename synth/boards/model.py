"""The choice for a whole board as an integer program: a candidate for each stage, a part for each resistor.

Minimised in this order, each with the ones before it fixed at their least values: line items that are new on the board, cost,
total drift of the stages. The solver sees integers: prices in millionths of the currency, which is exact (see
`synth.boards.purchase`), and drift in units of `DRIFT_STEP`, each rounded up, so a sum over n stages is at most n steps above
the true one.

Where the candidates of a stage had to end below its allowance, a second program lets that stage take nothing at all at the
drift where the list ends. Whatever was left out needs no fewer lines and no less cost than nothing and drifts no less, so the
optimum of this program is a lower bound for the whole problem; where it equals what was found, that is proved all the same.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from synth.boards.candidates import Choice, Choices
from synth.boards.purchase import MICRO, Need, Part

if TYPE_CHECKING:
    from ortools.sat.python import cp_model

DRIFT_STEP = 1e-9
"""Unit of drift in the integer program [-]."""
OBJECTIVES = ("new_lines", "cost", "drift")
"""What is minimised, in this order: [-], [currency of the list], [-]."""
ROUNDING = 1e-6
"""What a whole number may be off in the solver's floating point [-]."""
SCALES = {"new_lines": 1.0, "cost": 1.0 / MICRO, "drift": DRIFT_STEP}


@dataclass(frozen=True, kw_only=True)
class Demand:
    """One stage of the board: its candidates and how often it is built [-]."""

    choices: Choices
    count: int


@dataclass(frozen=True, kw_only=True)
class Bound:
    """One objective: what was reached and its proved lower bound [-, currency, -]; the bound counts candidates left out."""

    name: str
    value: float
    bound: float

    @property
    def gap(self) -> float:
        """Relative distance of the bound [-]."""
        return (self.value - self.bound) / self.value if self.value > self.bound else 0.0


@dataclass(frozen=True, kw_only=True)
class Selection:
    """What was chosen.

    Parameters
    ----------
    status : {"optimal", "feasible", "infeasible", "unknown"}
        "optimal" and "infeasible" are proved.
    chosen : tuple of Choice
        One for each stage; empty where there is none.
    fitted : mapping of (Need, Part) to int
        Pieces of each need that are each part [-].
    bounds : tuple of Bound
        In the order of `OBJECTIVES`.
    """

    status: str
    chosen: tuple[Choice, ...]
    fitted: Mapping[tuple[Need, Part], int]
    bounds: tuple[Bound, ...]


def choose(
    demands: Sequence[Demand],
    parts: Sequence[Part],
    *,
    most_new: int | None = None,
    seconds: float = 60.0,
    workers: int = 1,
    progress: Callable[[str], None] | None = None,
) -> Selection:
    """The best choice for a board, and the proof of it.

    Parameters
    ----------
    demands : sequence of Demand
        The stages.
    parts : sequence of Part
        What can be fitted.
    most_new : int, optional
        Largest number of new line items [-].
    seconds : float
        Time for each objective [s].
    workers : int
        Threads of the solver [-].
    progress : callable, optional
        Is told what is being minimised.

    Returns
    -------
    Selection
        Equal to trying every choice of a candidate for each stage and a part for each resistor.
    """
    if any(not d.choices.kept for d in demands):
        return Selection(status="infeasible", chosen=(), fitted={}, bounds=())
    program = _Program(demands, parts, most_new, jokers=False)
    leading = leaders(demands)
    if len(leading) < len(demands):
        program.begin_with(_Program([demands[k] for k in leading], parts, None, jokers=False), seconds, workers)
    status, values, bounds = program.minimise(seconds, workers, progress)
    capped = any(d.choices.reached is not None for d in demands)
    if capped:
        lower_status, bounds = _Program(demands, parts, most_new, jokers=True).bound(seconds, workers, progress)
        if status == "infeasible" and lower_status != "infeasible":
            status = "unknown"
    if not values:
        return Selection(status=status, chosen=(), fitted={}, bounds=())
    for k, (value, bound) in enumerate(zip(values, bounds, strict=True)):
        if bound < value:
            # What follows an objective that is not settled may still be had for as little as it can be alone.
            least = sum(math.floor(d.choices.best / DRIFT_STEP) for d in demands)
            bounds, status = [*bounds[: k + 1], *[0, 0, least][k + 1 :]], "feasible"
            break
    return Selection(
        status=status,
        chosen=program.chosen(),
        fitted=program.fitted(),
        bounds=tuple(
            Bound(name=name, value=value * SCALES[name], bound=min(bound, value) * SCALES[name])
            for name, value, bound in zip(OBJECTIVES, values, bounds, strict=True)
        ),
    )


def leaders(demands: Sequence[Demand]) -> tuple[int, ...]:
    """Stages without those that never need a line which another stage does not need.

    Parameters
    ----------
    demands : sequence of Demand
        The stages.

    Returns
    -------
    tuple of int
        Positions of the rest. A stage follows another one if it has, for every candidate of that one, a candidate that needs
        nothing else: what serves the leader serves it too.
    """
    sets = [frozenset(frozenset(c.pieces) for c in d.choices.kept) for d in demands]
    found: list[int] = []
    for k, own in enumerate(sets):
        if not any(_follows(own, sets[leader]) for leader in found):
            found = [leader for leader in found if not _follows(sets[leader], own)] + [k]
    return tuple(found)


def _follows(own: frozenset[frozenset[Need]], leading: frozenset[frozenset[Need]]) -> bool:
    if leading <= own:
        return True
    return all(needed in own or any(mine <= needed for mine in own) for needed in leading)


class _Program:
    """The integer program and its solution so far."""

    def __init__(
        self, demands: Sequence[Demand], parts: Sequence[Part], most_new: int | None, *, jokers: bool
    ) -> None:
        from ortools.sat.python import cp_model

        self.demands = demands
        self.model = cp_model.CpModel()
        self.values: list[int] = []
        needs = dict.fromkeys(need for d in demands for c in d.choices.kept for need in c.pieces)
        by_value: dict[float, list[Part]] = {}
        for part in parts:
            by_value.setdefault(part.value, []).append(part)
        self.serving = {n: [p for p in by_value.get(n.value, ()) if p.there and p.serves(n)] for n in needs}
        self.used = {p: self.model.new_bool_var("") for p in dict.fromkeys(p for s in self.serving.values() for p in s)}
        self.taken = [[self.model.new_bool_var("") for _ in d.choices.kept] for d in demands]
        self.jokers = [
            self.model.new_bool_var("") if jokers and d.choices.reached is not None else None for d in demands
        ]
        for row, joker in zip(self.taken, self.jokers, strict=True):
            self.model.add_exactly_one([*row, *([joker] if joker is not None else [])])
        self._cover()
        self.pieces: dict[tuple[Need, Part], Any] = {}
        self.objectives = {"new_lines": self._lines(most_new), "cost": self._cost(), "drift": self._drift()}

    def _cover(self) -> None:
        """A stage uses a need only if a part that serves it is used: summed over its candidates, since it takes one."""
        for d, row in zip(self.demands, self.taken, strict=True):
            users: dict[Need, list[Any]] = {}
            for choice, taken in zip(d.choices.kept, row, strict=True):
                for need in choice.pieces:
                    users.setdefault(need, []).append(taken)
            for need, takers in users.items():
                self.model.add(sum(takers) <= sum(self.used[p] for p in self.serving[need]))

    def _lines(self, most_new: int | None) -> Any:
        new = sum(used for part, used in self.used.items() if part.new)
        if most_new is not None:
            self.model.add(new <= most_new)
        return new

    def _cost(self) -> Any:
        """Cost of all orders; pieces are counted only where they are limited or cost something."""
        demand: dict[Need, list[tuple[int, Any]]] = {}
        for d, row in zip(self.demands, self.taken, strict=True):
            for choice, taken in zip(d.choices.kept, row, strict=True):
                for need, pieces in choice.pieces.items():
                    demand.setdefault(need, []).append((d.count * pieces, taken))
        most = {
            need: sum(
                d.count * max((c.pieces.get(need, 0) for c in d.choices.kept), default=0) for d in self.demands
            )
            for need, serving in self.serving.items()
            if not all(part.free for part in serving)
        }
        for need, number in most.items():
            serving = self.serving[need]
            for part in serving:
                self.pieces[need, part] = self.model.new_int_var(0, number, "")
                self.model.add(self.pieces[need, part] <= number * self.used[part])
            self.model.add(
                sum(self.pieces[need, part] for part in serving) == sum(n * taken for n, taken in demand[need])
            )
        total = []
        for part in self.used:
            if not part.free:
                own = [pieces for (_, other), pieces in self.pieces.items() if other is part]
                reach = sum(number for need, number in most.items() if part in self.serving[need])
                total.append(self._order(part, sum(own), reach))
        return sum(total)

    def _order(self, part: Part, pieces: Any, reach: int) -> Any:
        """Cost of the pieces of a part that are not on hand: one order within one price break."""
        ends = [*(start for start, _ in part.prices[1:]), max(reach, part.minimum, *(s for s, _ in part.prices), 1) + 1]
        orders, flags, cost = [], [], []
        for (start, price), end in zip(part.prices, ends, strict=bool(part.prices)):
            low = max(start, part.minimum)
            if low < end:
                flag, order = self.model.new_bool_var(""), self.model.new_int_var(0, end - 1, "")
                self.model.add(order >= low * flag)
                self.model.add(order <= (end - 1) * flag)
                orders.append(order)
                flags.append(flag)
                cost.append(price * order)
        if flags:
            self.model.add_at_most_one(flags)
        self.model.add(pieces <= (part.on_hand or 0) + sum(orders))
        return sum(cost)

    def _drift(self) -> Any:
        total = []
        for d, row, joker in zip(self.demands, self.taken, self.jokers, strict=True):
            total += [steps(c.drift) * taken for c, taken in zip(d.choices.kept, row, strict=True)]
            if joker is not None and d.choices.reached is not None:
                total.append(math.floor(d.choices.reached / DRIFT_STEP) * joker)
        return sum(total)

    def begin_with(self, smaller: _Program, seconds: float, workers: int) -> None:
        """Take over what a program of some of the stages proves of the lines, and where it found them.

        With fewer stages no more lines are needed, so its bound is one of the whole; pieces and their cost are not its matter.
        """
        from ortools.sat.python import cp_model

        goal = smaller.objectives["new_lines"]
        if isinstance(goal, int):
            return
        smaller.model.minimize(goal)
        solver = _solver(seconds, workers)
        if solver.solve(smaller.model) not in (cp_model.OPTIMAL, cp_model.FEASIBLE):
            return
        self.model.add(self.objectives["new_lines"] >= math.ceil(solver.best_objective_bound - ROUNDING))
        used = {part for part, variable in smaller.used.items() if solver.value(variable)}
        for part, variable in self.used.items():
            self.model.add_hint(variable, part in used)
        for d, row in zip(self.demands, self.taken, strict=True):
            served = [all(used & set(self.serving[need]) for need in c.pieces) for c in d.choices.kept]
            first = served.index(True) if True in served else -1
            for k, variable in enumerate(row):
                self.model.add_hint(variable, k == first)

    def minimise(
        self, seconds: float, workers: int, progress: Callable[[str], None] | None
    ) -> tuple[str, list[int], list[int]]:
        """Minimise one objective after the other; status, values and lower bounds."""
        from ortools.sat.python import cp_model

        bounds: list[int] = []
        status, proved = "optimal", True
        for name in OBJECTIVES:
            goal = self.objectives[name]
            if isinstance(goal, int):
                bounds.append(goal)
                continue
            if progress is not None:
                progress(f"least {name.replace('_', ' ')}")
            self.model.minimize(goal)
            solver = _solver(seconds, workers)
            code = solver.solve(self.model)
            found = code in (cp_model.OPTIMAL, cp_model.FEASIBLE)
            if not found and not self.values:
                return ("infeasible" if code == cp_model.INFEASIBLE else "unknown"), [], []
            # After an objective that was not settled, a bound of the next holds only beside what was found of that one.
            bounds.append(math.ceil(solver.best_objective_bound - ROUNDING) if proved else 0)
            if found:
                self.values = [solver.value(variable) for variable in self._variables()]
                self.model.add(goal <= round(solver.objective_value))
                self.model.clear_hints()  # type: ignore[no-untyped-call]
                for variable, value in zip(self._variables(), self.values, strict=True):
                    self.model.add_hint(variable, value)
            if code != cp_model.OPTIMAL:
                status, proved = "feasible", False
        return status, [] if any(joker is not None for joker in self.jokers) else self._reached(), bounds

    def bound(
        self, seconds: float, workers: int, progress: Callable[[str], None] | None
    ) -> tuple[str, list[int]]:
        """Status and lower bounds alone, of a program in which some stages may take nothing."""
        status, _, bounds = self.minimise(seconds, workers, progress)
        return status, bounds

    def _variables(self) -> list[Any]:
        return [self.model.get_int_var_from_proto_index(k) for k in range(len(self.model.proto.variables))]

    def _reached(self) -> list[int]:
        """Every objective of the choice, counted anew."""
        pieces: dict[Part, int] = {}
        for (_, part), number in self.fitted().items():
            pieces[part] = pieces.get(part, 0) + number
        lines = sum(part.new for part in pieces)
        cost = sum(part.bought(number)[1] for part, number in pieces.items())
        return [lines, cost, sum(steps(choice.drift) for choice in self.chosen())]

    def chosen(self) -> tuple[Choice, ...]:
        """The candidate of each stage."""
        return tuple(
            next(c for c, taken in zip(d.choices.kept, row, strict=True) if self.values[taken.index])
            for d, row in zip(self.demands, self.taken, strict=True)
        )

    def fitted(self) -> dict[tuple[Need, Part], int]:
        """Pieces of each need that are each part."""
        wanted: dict[Need, int] = {}
        for choice, d in zip(self.chosen(), self.demands, strict=True):
            for need, pieces in choice.pieces.items():
                wanted[need] = wanted.get(need, 0) + d.count * pieces
        found: dict[tuple[Need, Part], int] = {}
        for need, number in wanted.items():
            for part in self.serving[need]:
                counted = self.pieces.get((need, part))
                if counted is None:
                    if self.values[self.used[part].index]:
                        found[need, part] = number
                        break
                elif self.values[counted.index]:
                    found[need, part] = self.values[counted.index]
        return found


def steps(drift: float) -> int:
    """Drift in the units of the integer program, rounded up.

    Parameters
    ----------
    drift : float
        Any drift of a candidate [-].

    Returns
    -------
    int
        Steps of `DRIFT_STEP`.
    """
    return math.ceil(drift / DRIFT_STEP)


def _solver(seconds: float, workers: int) -> cp_model.CpSolver:
    from ortools.sat.python import cp_model

    solver = cp_model.CpSolver()
    solver.parameters.max_time_in_seconds = seconds
    solver.parameters.num_workers = workers
    # Threads that take turns in a fixed order give the same answer in every run.
    solver.parameters.interleave_search = workers > 1
    solver.parameters.random_seed = 1
    solver.parameters.linearization_level = 2
    return solver
