"""The answer as frozen values: candidates, verdicts, budgets; no printing, no computing."""

from __future__ import annotations

import html
import json
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Literal

from synth.faults import Fault
from synth.quantities import format_quantity, format_resistance
from synth.stage import Assumption
from synth.statistics import MonteCarlo, Rss, Sensitivity, Stability

if TYPE_CHECKING:
    import pandas

SCHEMA_VERSION = 1
Pass = Literal["pass", "fail"]


class NoCandidate(LookupError):
    """A rank was asked for that the answer does not have."""


@dataclass(frozen=True, kw_only=True)
class Caution:
    """A named warning with its physical reason."""

    name: str
    text: str


@dataclass(frozen=True, kw_only=True)
class Nominal:
    """Nominal Q-point: currents [A], voltages [V] as magnitudes; node voltages against 0 V with their sign.

    `vc` is the collector voltage from the end of re, or from 0 V of two supplies, and `ve` the drop of re, magnitudes;
    `forced_gain` is IC/IB of a saturated transistor [-], None of any other.
    """

    ic: float
    vce: float
    ib: float
    vbe: float
    vc: float
    ve: float
    region: str
    nodes: Mapping[str, float]
    rails: Mapping[str, float]
    forced_gain: float | None


@dataclass(frozen=True, kw_only=True)
class Drift:
    """Largest relative excursion from target of IC, of VCE, VC or VE (None without a target) and of the Q-point [-]."""

    ic: float
    vce: float | None = None
    vc: float | None = None
    ve: float | None = None
    q_point: float

    def of(self) -> dict[str, float]:
        """Drift of every quantity that has a target.

        Returns
        -------
        dict of str to float
            Quantity to drift [-], IC first.
        """
        every = {"ic": self.ic, "vce": self.vce, "vc": self.vc, "ve": self.ve}
        return {quantity: drift for quantity, drift in every.items() if drift is not None}

    @property
    def decides(self) -> str:
        """The quantity that drifts most and so decides the rank; IC where two are equal."""
        drifts = self.of()
        return max(drifts, key=drifts.__getitem__)


@dataclass(frozen=True, kw_only=True)
class Share:
    """Part of a drift that one cause brings [-]; the shares of a budget add up to the drift."""

    cause: str
    share: float


@dataclass(frozen=True, kw_only=True)
class Pair:
    """Two parts in place of one: how they are joined, ``series`` or ``parallel``, and their resistances [ohm].

    The first carries more: the larger one in series, the smaller one in parallel.
    """

    join: str
    ohms: tuple[float, float]


@dataclass(frozen=True, kw_only=True)
class Neighbour:
    """One preferred step up or down in one role: its value [ohm], drift [-] (None once it saturates) and verdict.

    `pair` is what makes up the value, None for a single part.
    """

    role: str
    step: int
    value: float
    drift: float | None
    verdict: Pass
    fails: tuple[str, ...]
    pair: Pair | None = None


@dataclass(frozen=True, kw_only=True)
class OtherClass:
    """What a resistor of another tolerance [-] would do: drift [-], None once the transistor saturates, and verdict."""

    tolerance: float
    drift: float | None
    verdict: Pass
    fails: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class Rationale:
    """Why a resistor is what it is: worst power [W], smallest style, other tolerance classes, and the whole in words.

    `replaceable` are the ends of the values, the others as they are, with which every verdict still passes [ohm]; None where
    a verdict fails already.
    """

    power: float
    smallest: str | None
    classes: tuple[OtherClass, ...]
    replaceable: tuple[float, float] | None
    text: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class Duty:
    """What a resistor does at the nominal Q-point: drop [V], current [A], and the two places it hangs between.

    `record` is the rationale of a resistor of the first candidate, None of any other.
    """

    drop: float
    current: float
    meaning: str
    between: tuple[str, str]
    record: Rationale | None = None


@dataclass(frozen=True, kw_only=True)
class Stress:
    """Worst power [W] and voltage [V] of a resistor against what its style may carry at the hot ambient.

    What is allowed is None without a style; `smallest` is the smallest style that does, None if none of the table; `string`
    is how many of its own style do in series, None where one does or not even ten.
    """

    power: float
    voltage: float
    style: str | None
    power_allowed: float | None
    voltage_allowed: float | None
    smallest: str | None
    string: int | None

    @property
    def power_used(self) -> float | None:
        """Share of the allowed power [-], None without a style."""
        return _share(self.power, self.power_allowed)

    @property
    def voltage_used(self) -> float | None:
        """Share of the allowed voltage [-], None without a style."""
        return _share(self.voltage, self.voltage_allowed)


def _share(worst: float, allowed: float | None) -> float | None:
    if allowed is None:
        return None
    return worst / allowed if allowed > 0.0 else math.inf


@dataclass(frozen=True, kw_only=True)
class Readings:
    """What a meter reads: least, nominal and greatest voltage over the box [V].

    `nodes` against 0 V with their sign, `drops` across each resistor.
    """

    nodes: Mapping[str, tuple[float, float, float]]
    drops: Mapping[str, tuple[float, float, float]]


@dataclass(frozen=True, kw_only=True)
class Bench:
    """What a meter should read at given conditions, least, nominal and greatest over every unit [V].

    `conditions` are the rails [V] and ``temperature`` [K] as (low, nominal, high).
    """

    conditions: Mapping[str, tuple[float, float, float]]
    nodes: Mapping[str, tuple[float, float, float]]
    drops: Mapping[str, tuple[float, float, float]]


@dataclass(frozen=True, kw_only=True)
class Comparison:
    """A node voltage that was measured beside what was expected, each as (low, nominal, high) [V]; `off` is their gap [V]."""

    reading: str
    expected: tuple[float, float, float]
    measured: tuple[float, float, float]
    off: float
    verdict: Literal["agrees", "differs"]


@dataclass(frozen=True, kw_only=True)
class Statistics:
    """Root-sum-square of each quantity of the Q-point, and the lot of units that Monte Carlo drew."""

    rss: tuple[Rss, ...]
    monte_carlo: MonteCarlo


@dataclass(frozen=True, kw_only=True)
class LoadLine:
    """The nominal static load line: VCE with no current [V] and IC with no VCE [A]; and VCE(sat) [V]."""

    vce: float
    ic: float
    vce_sat: float


@dataclass(frozen=True, kw_only=True)
class Load:
    """What the transistor carries at worst: power [W], the rail across it once cut off [V], IC [A], reverse VEB [V].

    `allowed` holds what the ratings and the policy allow of ``power vceo veb ic`` at the hot ambient, as far as they are known;
    `junction` is where the junction settles at the point of most power, heating itself [K], and `loop_gain` what a kelvin
    of its temperature gives back [-], with a thermal resistance [K/W]; both None where that is not known, or where it does
    not settle, which `state` says. `heating` is how far self-heating moves the nominal IC [-], None where not known;
    `too_hot` tells that the power alone, without a loop, takes it beyond its limit;
    `worst` holds least and greatest IC [A] and VCE [V] over the box with self-heating, empty where it was not looked for.
    """

    power: float
    vceo: float
    ic: float
    allowed: Mapping[str, float]
    thermal_resistance: float | None
    junction: float | None
    loop_gain: float | None = None
    state: str | None = None
    heating: float | None = None
    worst: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    too_hot: bool = False
    veb: float = 0.0

    @property
    def used(self) -> dict[str, float]:
        """Share used of each rating that is known [-]."""
        return {name: getattr(self, name) / limit if limit > 0.0 else math.inf for name, limit in self.allowed.items()}


@dataclass(frozen=True, kw_only=True)
class Verdict:
    """Pass or fail of a window or limit, with margin [-] and the point of the box that decides (SI)."""

    name: str
    kind: str
    sense: str
    limit: float | tuple[float, float]
    worst: float
    margin: float
    at: Mapping[str, float]
    verdict: Pass


@dataclass(frozen=True, kw_only=True)
class Worst(Mapping[str, tuple[float, float]]):
    """Extremes over the box: of IC [A], of VCE and, where it has the target, VC or VE [V], each as (least, greatest)."""

    ic: tuple[float, float]
    vce: tuple[float, float]
    vc: tuple[float, float] | None = None
    ve: tuple[float, float] | None = None

    @property
    def _known(self) -> dict[str, tuple[float, float]]:
        every = {"ic": self.ic, "vce": self.vce, "vc": self.vc, "ve": self.ve}
        return {name: ends for name, ends in every.items() if ends is not None}

    def __getitem__(self, name: str) -> tuple[float, float]:
        return self._known[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self._known)

    def __len__(self) -> int:
        return len(self._known)


@dataclass(frozen=True, kw_only=True)
class Candidate:
    """A network with a value in every role, judged and explained.

    Resistances of `resistors` and `base_feed` [ohm]; `parts` holds the roles that two parts make up; `worst` holds the
    extremes of IC [A] and VCE [V]; `centring` [-]; `score` is what it is ranked by where that is not its drift [-];
    `supply_current` of the most loaded rail at nominal values [A]; `regions` are those of the deciding points; `rival` is
    the next best network, for the winner among several; `signal` holds least, nominal and greatest value of each
    small-signal figure [S, ohm, - or V] of the first candidate, empty where there is none. `stability` has the
    factors with VBE held and with VBE following IC, `statistics` is None unless it was asked for; `corners` has
    the point of the box of each extreme, as in ``ic low``; these and what follows `load_line` are of the first alone.
    """

    rank: int
    network: str
    resistors: Mapping[str, float]
    parts: Mapping[str, Pair] = field(default_factory=dict)
    nominal: Nominal
    worst: Worst
    regions: tuple[str, ...]
    drift: Drift
    centring: float
    supply_current: float
    base_feed: float
    budget: Mapping[str, tuple[Share, ...]]
    neighbours: tuple[Neighbour, ...]
    roles: Mapping[str, Duty]
    limits: tuple[Verdict, ...]
    verdict: Pass
    explanation: tuple[str, ...]
    score: float | None = None
    rival: NetworkResult | None = None
    stress: Mapping[str, Stress] = field(default_factory=dict)
    transistor: Load | None = None
    signal: Mapping[str, tuple[float, float, float]] = field(default_factory=dict)
    readings: Readings | None = None
    load_line: LoadLine | None = None
    stability: Mapping[str, Stability] = field(default_factory=dict)
    sensitivities: tuple[Sensitivity, ...] = ()
    faults: tuple[Fault, ...] = ()
    bench: Bench | None = None
    comparisons: tuple[Comparison, ...] = ()
    statistics: Statistics | None = None
    corners: Mapping[str, Mapping[str, float]] = field(default_factory=dict)

    @property
    def designators(self) -> dict[str, str]:
        """Designator of every resistor to its role: the role itself, or with ``a`` and ``b`` behind it the parts of a pair."""
        halves = {role: (f"{role}a", f"{role}b") if role in self.parts else (role,) for role in self.resistors}
        return {who: role for role, every in halves.items() for who in every}

    @property
    def pieces(self) -> dict[str, float]:
        """Resistance of every resistor by its designator [ohm]."""
        each = (self.parts[role].ohms if role in self.parts else (whole,) for role, whole in self.resistors.items())
        return dict(zip(self.designators, (ohms for every in each for ohms in every), strict=True))


@dataclass(frozen=True, kw_only=True)
class Search:
    """What was searched and what is proved.

    `bound` is the least drift of anything not listed [-], None if none is left; by another `metric` than ``corners`` it is
    the least of that.
    """

    status: str
    bound: float | None
    combinations: int
    evaluated: int
    complete: bool
    seconds: float
    metric: str = "corners"


@dataclass(frozen=True, kw_only=True)
class Compared:
    """The cause that costs a network most more drift than the winner: its share there and here [-]."""

    cause: str
    there: float
    here: float


@dataclass(frozen=True, kw_only=True)
class NetworkResult:
    """Best drift of one network [-] (None if none qualifies), why it stands where it does, and what costs it the rank."""

    network: str
    best: float | None
    why: str
    against: Compared | None = None


@dataclass(frozen=True, kw_only=True)
class Relaxation:
    """One change of the request, in stage-file keys and texts, under which a candidate qualifies, and its drift [-]."""

    change: Mapping[str, str]
    drift: float


@dataclass(frozen=True, kw_only=True)
class Infeasible:
    """Why nothing qualifies: the limits that bind together, the best drift without each [-], single changes that would do.

    `notes` says of a limit with several parts which ones the best candidate without it breaks; of the limits in `unsettled`
    the search for advice was stopped before it could tell.
    """

    binding: tuple[str, ...]
    best_without: Mapping[str, float | None]
    relaxations: tuple[Relaxation, ...]
    notes: Mapping[str, str] = field(default_factory=dict)
    unsettled: tuple[str, ...] = ()


@dataclass(frozen=True, kw_only=True)
class Floor:
    """Best drift with the values of a series in every free role, or with any value, the bands as they are [-]."""

    values: str
    drift: float


@dataclass(frozen=True, kw_only=True)
class Alternate:
    """A change of the request in words and in stage-file keys; best drift after it [-], None if nothing qualifies."""

    name: str
    change: Mapping[str, str]
    drift: float | None


@dataclass(frozen=True, kw_only=True)
class Outlook:
    """Levers on the best drift [-]: finer values, single upgrades, single savings, the most useful first."""

    drift: float
    floors: tuple[Floor, ...]
    upgrades: tuple[Alternate, ...]
    savings: tuple[Alternate, ...]


@dataclass(frozen=True, kw_only=True)
class Alternative:
    """A candidate worth a look for another reason than drift; of one on the frontier that is not listed the rank is None."""

    reason: str
    rank: int | None
    text: str


@dataclass(frozen=True, kw_only=True)
class Point:
    """A candidate that no other beats: resistors [ohm], what it is ranked by and its drift [-], its figures by axis (SI).

    `parts` holds the roles that two parts make up.
    """

    network: str
    resistors: Mapping[str, float]
    score: float
    drift: float
    figures: Mapping[str, float]
    parts: Mapping[str, Pair] = field(default_factory=dict)


@dataclass(frozen=True, kw_only=True)
class Tradeoff:
    """A frontier: its further axes, its points ascending in score, whether they are all.

    Below `bound` they are all there are [-], None if everywhere; `evaluated` and `seconds` [s] are what it took.
    """

    axes: tuple[str, ...]
    points: tuple[Point, ...]
    complete: bool
    bound: float | None
    evaluated: int
    seconds: float


@dataclass(frozen=True, kw_only=True)
class Answer:
    """Everything that a command found out.

    Parameters
    ----------
    kind : {"find", "check"}
        Which command answered.
    version, command : str
        Version of the program; the command that repeats the answer.
    stage : mapping
        The request, SI numbers.
    assumed, warnings : tuple
        What was not given; what deserves caution.
    search : Search or None
        None where nothing was searched.
    networks, candidates, alternatives : tuple
        Results, best first.
    infeasible : Infeasible or None
        Why nothing qualifies.
    outlook : Outlook or None
        What would make the best answer better or cheaper, where that was asked for.
    frontier : Tradeoff or None
        What nothing beats along several axes at once, where that was asked for.
    """

    kind: str
    version: str
    command: str
    stage: Mapping[str, Any]
    assumed: tuple[Assumption, ...] = ()
    warnings: tuple[Caution, ...] = ()
    search: Search | None = None
    networks: tuple[NetworkResult, ...] = ()
    candidates: tuple[Candidate, ...] = ()
    alternatives: tuple[Alternative, ...] = ()
    infeasible: Infeasible | None = None
    outlook: Outlook | None = None
    frontier: Tradeoff | None = None

    @property
    def best(self) -> Candidate | None:
        """The first candidate, or None when nothing qualifies."""
        return self.candidates[0] if self.candidates else None

    @property
    def worst(self) -> Worst:
        """Extremes over the box of the first candidate: of the network judged, after `check`."""
        return self.candidate(1).worst

    @property
    def passed(self) -> bool:
        """Whether there is a candidate and it passes every verdict."""
        return self.best is not None and self.best.verdict == "pass"

    @property
    def frame(self) -> pandas.DataFrame:
        """The candidates as a pandas table, one row each: rank, network, resistors [ohm], Q-point, drift."""
        import pandas

        rows = []
        for c in self.candidates:
            rows.append(
                {
                    "rank": c.rank,
                    "network": c.network,
                    **{f"{role}_ohm": value for role, value in c.resistors.items()},
                    "ic_a": c.nominal.ic,
                    "vce_v": c.nominal.vce,
                    **{f"{q}_{end}": c.worst[q][i] for q in c.worst for i, end in enumerate(("min", "max"))},
                    "drift_ic": c.drift.ic,
                    "drift_vce": c.drift.vce,
                    **{f"drift_{q}": x for q, x in c.drift.of().items() if q in ("vc", "ve")},
                    "drift": c.drift.q_point,
                    "centring": c.centring,
                    "supply_current_a": c.supply_current,
                    "verdict": c.verdict,
                }
            )
        return pandas.DataFrame(rows)

    def candidate(self, rank: int) -> Candidate:
        """Candidate of a rank.

        Parameters
        ----------
        rank : int
            1 is the best [-].

        Returns
        -------
        Candidate
            That one.

        Raises
        ------
        NoCandidate
            If no candidate has this rank.
        """
        for c in self.candidates:
            if c.rank == rank:
                return c
        raise NoCandidate(f"rank: read {rank}, accepted is 1 to {len(self.candidates)}")

    def explain(self, rank: int = 1) -> str:
        """Explanation of a candidate, a sentence a line.

        Parameters
        ----------
        rank : int
            1 is the best [-].

        Returns
        -------
        str
            The sentences.
        """
        return "\n".join(self.candidate(rank).explanation)

    def _repr_html_(self) -> str:
        """The candidates as an HTML table, as a notebook shows it; every text of the stage is escaped."""
        name = html.escape(str(self.stage.get("name") or "stage"))
        verdict = "PASS" if self.passed else "FAIL"
        if not self.candidates:
            binding = ", ".join(self.infeasible.binding) if self.infeasible else ""
            return f"<p><strong>{verdict}</strong> {name}: nothing qualifies; {html.escape(binding)} cannot be met.</p>"
        volts = list(self.candidates[0].worst)[-1]
        head = ["rank", "network", "resistors", "IC over the box", f"{volts.upper()} over the box", "drift", "verdict"]
        titles = "".join(f'<th scope="col">{html.escape(cell)}</th>' for cell in head)
        rows = []
        for c in self.candidates:
            fitted = ", ".join(f"{role.upper()} {format_resistance(value)}" for role, value in c.resistors.items())
            spans = (_span(c.worst.ic, "current"), _span(c.worst[volts], "voltage"))
            cells = [str(c.rank), c.network, fitted, *spans, format_quantity(c.drift.q_point, "ratio"), c.verdict]
            rows.append(f"<tr>{''.join(f'<td>{html.escape(cell)}</td>' for cell in cells)}</tr>")
        caption = f"<caption><strong>{verdict}</strong> {name}</caption>"
        return f"<table>{caption}<thead><tr>{titles}</tr></thead><tbody>{''.join(rows)}</tbody></table>"

    def as_dict(self) -> dict[str, Any]:
        """The answer as plain data in the layout of the JSON contract.

        Returns
        -------
        dict
            SI numbers; numbers that are not finite become None.
        """
        body: dict[str, Any] = {
            "schema": f"restpoint/{self.kind}/{SCHEMA_VERSION}",
            "version": self.version,
            "command": self.command,
            "stage": plain(self.stage),
            "assumed": [plain(vars(note)) for note in self.assumed],
            "warnings": [plain(vars(w)) for w in self.warnings],
            "search": None if self.search is None else _search(self.search),
            "networks": [_network(n) for n in self.networks],
            "candidates": [_candidate(c) for c in self.candidates],
            "alternatives": [plain(vars(a)) for a in self.alternatives],
            "infeasible": None,
        }
        if self.infeasible is not None:
            body["infeasible"] = {
                "binding": list(self.infeasible.binding),
                "best_without": plain(self.infeasible.best_without),
                "relaxations": [plain(vars(r)) for r in self.infeasible.relaxations],
                "notes": dict(self.infeasible.notes),
                "unsettled": list(self.infeasible.unsettled),
            }
        if self.outlook is not None:
            body["outlook"] = {
                "drift": plain(self.outlook.drift),
                "floors": [plain(vars(row)) for row in self.outlook.floors],
                "upgrades": [plain(vars(row)) for row in self.outlook.upgrades],
                "savings": [plain(vars(row)) for row in self.outlook.savings],
            }
        if self.frontier is not None:
            front = self.frontier
            rest = {name: value for name, value in vars(front).items() if name != "points"}
            body["frontier"] = {**plain(rest), "points": [_point(point) for point in front.points]}
        return body

    def to_json(self) -> str:
        """The answer as JSON text.

        Returns
        -------
        str
            Indented, one trailing newline; numbers with the digits that reproduce them.
        """
        return json.dumps(self.as_dict(), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def _point(point: Point) -> dict[str, Any]:
    made = {role: plain(vars(pair)) for role, pair in point.parts.items()}
    return {**plain({name: x for name, x in vars(point).items() if name != "parts"}), "parts": made}


def _span(ends: tuple[float, float], kind: str) -> str:
    return " to ".join(format_quantity(end, kind) for end in ends)


def _search(search: Search) -> dict[str, Any]:
    body: dict[str, Any] = plain(vars(search))
    # The usual metric goes without saying.
    return {key: value for key, value in body.items() if key != "metric" or value != "corners"}


def _network(n: NetworkResult) -> dict[str, Any]:
    return {**vars(n), "best": plain(n.best), "against": None if n.against is None else plain(vars(n.against))}


def _neighbour(n: Neighbour) -> dict[str, Any]:
    return {**plain({name: x for name, x in vars(n).items() if name != "pair"}), **_pair_of(n.pair)}


def _pair_of(pair: Pair | None) -> dict[str, Any]:
    return {} if pair is None else {"pair": plain(vars(pair))}


def _candidate(c: Candidate) -> dict[str, Any]:
    return {
        "rank": c.rank,
        "network": c.network,
        "resistors": plain(c.resistors),
        "parts": {role: plain(vars(pair)) for role, pair in c.parts.items()},
        "nominal": plain(vars(c.nominal)),
        "worst": plain(c.worst),
        "regions": list(c.regions),
        "drift": {k: x for k, x in plain(vars(c.drift)).items() if x is not None or k == "vce"},
        **({} if c.score is None else {"score": plain(c.score)}),
        "centring": plain(c.centring),
        "supply_current": plain(c.supply_current),
        "base_feed": plain(c.base_feed),
        "budget": {q: [plain(vars(s)) for s in shares] for q, shares in c.budget.items()},
        "neighbours": [_neighbour(n) for n in c.neighbours],
        "roles": {role: _duty(duty) for role, duty in c.roles.items()},
        "limits": [plain(vars(v)) for v in c.limits],
        "verdict": c.verdict,
        "explanation": list(c.explanation),
        **({} if c.rival is None else {"rival": _network(c.rival)}),
        "stress": {
            role: plain({**vars(s), "power_used": s.power_used, "voltage_used": s.voltage_used})
            for role, s in c.stress.items()
        },
        "transistor": None if c.transistor is None else plain({**vars(c.transistor), "used": c.transistor.used}),
        "signal": plain(c.signal),
        "readings": None if c.readings is None else plain(vars(c.readings)),
        "load_line": None if c.load_line is None else plain(vars(c.load_line)),
        "stability": {name: plain(vars(factors)) for name, factors in c.stability.items()},
        "sensitivities": [plain(vars(row)) for row in c.sensitivities],
        "faults": [plain(vars(fault)) for fault in c.faults],
        "bench": None if c.bench is None else plain(vars(c.bench)),
        "comparisons": [plain(vars(row)) for row in c.comparisons],
        "statistics": None if c.statistics is None else _statistics(c.statistics),
        "corners": plain(c.corners),
    }


def _duty(duty: Duty) -> dict[str, Any]:
    """A resistor's duty; what its record says stands beside it."""
    values = {name: plain(value) for name, value in vars(duty).items() if name != "record"}
    if duty.record is not None:
        values |= {name: plain(value) for name, value in vars(duty.record).items() if name not in ("classes", "text")}
        values["classes"] = [plain(vars(row)) for row in duty.record.classes]
        values["rationale"] = list(duty.record.text)
    return values


def _statistics(statistics: Statistics) -> dict[str, Any]:
    sums = []
    for row in statistics.rss:
        sides = {
            name: plain({**vars(side), "terms": None}) | {"terms": [plain(vars(term)) for term in side.terms]}
            for name, side in (("low", row.low), ("high", row.high))
        }
        sums.append(plain({"quantity": row.quantity, "nominal": row.nominal, "sigma": row.sigma}) | sides)
    lot = statistics.monte_carlo
    rows = {"samples": [plain(vars(s)) for s in lot.samples], "yields": [plain(vars(y)) for y in lot.yields]}
    return {"rss": sums, "monte_carlo": plain({k: v for k, v in vars(lot).items() if k not in rows}) | rows}


def plain(value: Any) -> Any:
    """A value as JSON has it.

    Parameters
    ----------
    value : Any
        Mapping, sequence, number, text, truth value or None.

    Returns
    -------
    dict, list, float, int, str, bool or None
        Numbers that are not finite become None.
    """
    if isinstance(value, Mapping):
        return {str(k): plain(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [plain(v) for v in value]
    if isinstance(value, bool | int | str) or value is None:
        return value
    number = float(value)
    return number if math.isfinite(number) else None
