"""Targets to ranked candidates, and the verdict on a network that is already there."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace
from functools import partial

import numpy as np

from synth import __version__
from synth.advice import outlook, why_nothing_qualifies
from synth.answer import Answer, Candidate, Caution, Drift, Load, NetworkResult, Pass, Search, Verdict, Worst
from synth.box import Box, Extreme, Meter, Values
from synth.cautions import cautions, request_cautions
from synth.explain import (
    budgets,
    cause_words,
    compared_words,
    comparison,
    duties,
    neighbours,
    nominal_points,
    pair_of,
    percent,
    sentences,
)
from synth.facts import heated, loads, signals, stresses
from synth.limits import Judgement, Requirement, judge
from synth.networks.form import Array
from synth.q_point import REGIONS
from synth.ranking import alternatives, order_key, read_axes, read_goal
from synth.readings import load_lines, readings
from synth.review import reviewed, statistics_of
from synth.search import Outcome, Progress, Stop, certificate, refuse, search
from synth.search import frontier as find_frontier
from synth.spaces import Exact, Goal, Index, Space, among_values, fitted, goal_of, spaces_of
from synth.stage import Assumption, Stage, StageError
from synth.straddle import extreme_in_any_region
from synth.stress import junction_limit
from synth.tradeoff import along_frontier, tradeoff

HEAT_TO_LOOK = 0.005
"""Shift of the nominal IC by self-heating from which its worst case is looked for unasked [-]."""
EQUALS = 4
"""How many figures of the order of candidates stand before a preference: drift, new pieces, centring, supply current [-]."""
SHORT = 3e4
"""Q-point solves of a search that only asks whether a limit stands in the way of a network."""


def find(
    stage: Stage,
    *,
    top: int = 10,
    metric: str = "corners",
    frontier: str = "",
    records: bool = False,
    statistics: bool = False,
    advise: bool = False,
    progress: Progress | None = None,
    stop: Stop | None = None,
    jobs: int = 1,
    keep: Callable[[Iterable[str]], object] | None = None,
    command: str = "",
) -> Answer:
    """Find the networks whose Q-point drifts least, proved, ranked and explained.

    Parameters
    ----------
    stage : Stage
        The request.
    top : int
        How many candidates to list and prove [-].
    metric : str
        What ranks, see `synth.ranking.read_goal`.
    frontier : str
        Further axes of a frontier, see `synth.ranking.read_axes`; "" looks for none.
    records : bool
        Whether what a report tells of the first candidate is wanted: stability factors, single faults, readings on the
        bench, a record for each resistor.
    statistics : bool
        Whether root-sum-square and Monte Carlo of the first candidate are wanted.
    advise : bool
        Whether to search for what would make the best answer better or cheaper, which takes some seconds.
    progress, stop : callable, optional
        See `synth.search.search`.
    jobs : int
        Threads that search; the answer is the same whatever their number [-].
    keep : callable, optional
        Takes the lines of a certificate, once the search is complete; see `synth.search.certificate`.
    command : str
        The command that asked, for the record.

    Returns
    -------
    Answer
        With `infeasible` filled when nothing qualifies.

    Raises
    ------
    StageError
        If `top` is no whole number above 0, or metric or frontier name nothing that this stage has.
    NoCertificate
        If none can be made for this request.
    """
    if isinstance(top, bool) or not isinstance(top, int) or top < 1:
        raise StageError("top", top, "which is no number of candidates", "a whole number of 1 or more", ("10",))
    goal = read_goal(stage, metric)
    spaces = spaces_of(stage)
    axes = read_axes(frontier, spaces) if frontier else ()
    if keep is not None:
        refuse(spaces, goal)
    outcome = search(spaces, goal, top=top, progress=progress, stop=stop, jobs=jobs)
    if keep is not None and outcome.complete:
        keep(certificate(spaces, goal, outcome, top))
    candidates = candidates_of(outcome, goal, top, stage)
    best_of = _best_of_each(spaces, goal, candidates, outcome, progress, stop)
    front = tradeoff(find_frontier(spaces, goal, axes, progress=progress, stop=stop, jobs=jobs), axes) if axes else None
    rivals = [n for n in best_of if candidates and n.best is not None and n.network != candidates[0].network]
    if rivals:
        candidates = (_before_rival(candidates[0], rivals[0]), *candidates[1:])
    # By another metric the first candidate is not the one that the levers start from.
    proved = bool(candidates) and outcome.complete and goal.plain
    infeasible = why_nothing_qualifies(stage, stop) if outcome.status == "infeasible" else None
    warnings = request_cautions(stage)
    if candidates:
        space = next(s for s in spaces if _is_of(candidates[0], s))
        box = space.box(_index(space, candidates[0]), Meter())
        first = _with_heat(candidates[0], box, stage)
        if records:
            first = reviewed(first, space, stage, goal)
        if statistics:
            first = replace(first, statistics=statistics_of(first, space, stage))
        candidates = (first, *candidates[1:])
        warnings += cautions(first, box, space, stage)
    return Answer(
        kind="find",
        version=__version__,
        command=command,
        stage=stage.as_dict(),
        assumed=assumed_of(stage, spaces),
        warnings=warnings + not_applicable(stage, spaces),
        search=record_of(outcome, metric),
        networks=best_of,
        candidates=candidates,
        alternatives=alternatives(candidates) if front is None else along_frontier(front),
        infeasible=infeasible,
        outlook=outlook(stage, candidates[0].drift.q_point) if advise and proved else None,
        frontier=front,
    )


def check(stage: Stage, *, statistics: bool = False, command: str = "", **resistors: str | float) -> Answer:
    """Judge the resistors that are fitted.

    Parameters
    ----------
    stage : Stage
        The request; its ``[values]`` are the resistors fitted.
    statistics : bool
        Whether root-sum-square and Monte Carlo are wanted.
    command : str
        The command that asked, for the record.
    **resistors : str or float
        Values by role, in place of those of the stage [ohm].

    Returns
    -------
    Answer
        With one candidate; it passes only if every verdict does.

    Raises
    ------
    StageError
        If the values do not make up exactly one of the stage's networks.
    """
    if resistors:
        stage = stage.replace(**resistors)
    goal = goal_of(stage)
    space = fitted(stage)
    index = np.zeros((1, len(space.roles)), dtype=np.int32)
    (candidate,) = _build(space, index, goal, any_region=True)
    network = space.network
    (around,) = neighbours(*among_values(stage, space), goal)
    (candidate,) = _reviewed([replace(candidate, rank=1, neighbours=around)], space, stage)
    candidate = replace(candidate, explanation=sentences(candidate, network))
    warnings = request_cautions(stage)
    box = space.box(index, Meter())
    candidate = reviewed(_with_heat(candidate, box, stage), space, stage, goal)
    if statistics:
        candidate = replace(candidate, statistics=statistics_of(candidate, space, stage))
    warnings += cautions(candidate, box, space, stage)
    failed = [v.name for v in candidate.limits if v.verdict == "fail"]
    why = f"fails {', '.join(failed)}" if failed else "passes every verdict"
    return Answer(
        kind="check",
        version=__version__,
        command=command,
        stage=stage.as_dict(),
        assumed=assumed_of(stage, [space]),
        warnings=warnings + not_applicable(stage, [space]),
        networks=(NetworkResult(network=network.name, best=candidate.drift.q_point, why=why),),
        candidates=(candidate,),
    )


def assumed_of(stage: Stage, spaces: Sequence[Space]) -> tuple[Assumption, ...]:
    """What was assumed, without the limits that mean nothing for these networks.

    Parameters
    ----------
    stage : Stage
        The request.
    spaces : sequence of Space
        Its networks.

    Returns
    -------
    tuple of Assumption
        In the order of the stage file.
    """
    used = {f"limits.{need.limit}" for space in spaces for need in space.requirements}
    return tuple(a for a in stage.assumed if not a.key.startswith("limits.") or a.key in used)


def not_applicable(stage: Stage, spaces: Sequence[Space]) -> tuple[Caution, ...]:
    """Warnings of limits given that mean nothing for these networks.

    Parameters
    ----------
    stage : Stage
        The request.
    spaces : sequence of Space
        Its networks.

    Returns
    -------
    tuple of Caution
        One for each such limit.
    """
    used = {need.limit for space in spaces for need in space.requirements}
    networks = " or ".join(dict.fromkeys(space.network.name for space in spaces))
    return tuple(
        Caution(name="limit_not_applicable", text=f"limits.{name} means nothing for {networks} and was not judged.")
        for name in stage.limits
        if name in stage.limits_given and name not in used
    )


def record_of(outcome: Outcome, metric: str) -> Search:
    """What an answer says of a search.

    Parameters
    ----------
    outcome : Outcome
        What it found.
    metric : str
        What it ranked by.

    Returns
    -------
    Search
        Its record, without the candidates.
    """
    return Search(
        status=outcome.status,
        bound=float(outcome.bound) if np.isfinite(outcome.bound) else None,
        combinations=outcome.combinations,
        evaluated=outcome.evaluated,
        complete=outcome.complete,
        seconds=outcome.seconds,
        metric=metric,
    )


def _is_of(candidate: Candidate, space: Space) -> bool:
    if candidate.network != space.network.name or set(candidate.resistors) != set(space.roles):
        return False
    # Of a re in two parts every upper part has a space of its own.
    return not space.signal.split or candidate.parts["re"].ohms[0] == space.signal.unbypassed


def _index(space: Space, candidate: Candidate) -> Index:
    made = {role: pair.ohms for role, pair in candidate.parts.items()}
    position = [space.lists[role].position(candidate.resistors[role], made.get(role, ())) for role in space.roles]
    return np.array([position], dtype=np.int32)


def _reviewed(candidates: Sequence[Candidate], space: Space, stage: Stage) -> list[Candidate]:
    """Candidates of one space with the stress of their parts, the first of all with its small-signal figures."""
    index = np.concatenate([_index(space, candidate) for candidate in candidates])
    box = space.box(index, Meter())
    active = all(candidate.regions == ("active",) for candidate in candidates)
    law = box.extreme if active else partial(extreme_in_any_region, box)
    stress, load = stresses(box, space.styles, space.derating, law), loads(box, stage.ratings, space.derating, law)
    read, lines = readings(box, space.ground, law), load_lines(box)
    found = []
    for k, candidate in enumerate(candidates):
        limits = (*candidate.limits, *_junction_verdict(load[k], stage))
        # Figures over the box take longest; a list is compared by its limits on them.
        figures = signals(box.take([k]), stage.corner)[0] if active and candidate.rank == 1 else {}
        verdict: Pass = "pass" if all(v.verdict == "pass" for v in limits) else "fail"
        found.append(
            replace(
                candidate,
                stress=stress[k],
                transistor=load[k],
                signal=figures,
                limits=limits,
                verdict=verdict,
                readings=read[k],
                load_line=lines[k],
            )
        )
    return found


def _junction_verdict(load: Load, stage: Stage) -> tuple[Verdict, ...]:
    """Whether the junction, heating itself, settles below its limit at the point of most power."""
    limit = junction_limit(stage.ratings, stage.derating)
    if "transistor_stress" not in stage.limits or limit is None or load.thermal_resistance is None:
        return ()
    worst = np.nan if load.junction is None else load.junction
    return (
        Verdict(
            name="transistor_stress.junction",
            kind="temperature",
            sense="<=",
            limit=limit,
            worst=worst,
            margin=(limit - worst) / limit,
            at={},
            verdict="pass" if worst <= limit else "fail",
        ),
    )


def _with_heat(candidate: Candidate, box: Box, stage: Stage) -> Candidate:
    """A candidate with its worst case under self-heating, where that is asked for or matters."""
    load = candidate.transistor
    matters = load is not None and load.heating is not None and abs(load.heating) > HEAT_TO_LOOK
    if load is None or not (matters or "transistor.rth_ja" in stage.given) or candidate.regions != ("active",):
        return candidate
    return replace(candidate, transistor=heated(box, load, stage.ratings))


def candidates_of(
    outcome: Outcome, goal: Goal, top: int, stage: Stage, prefer: Callable[[Candidate], float] | None = None
) -> tuple[Candidate, ...]:
    """The best of a search, judged whole, ranked and explained.

    Parameters
    ----------
    outcome : Outcome
        What a search found.
    goal : Goal
        What drift is measured from.
    top : int
        How many at most [-].
    stage : Stage
        The request.
    prefer : callable, optional
        Decides between candidates of equal drift, centring and supply current; the least comes first.

    Returns
    -------
    tuple of Candidate
        In the order of candidates, ranks from 1.
    """
    built: list[tuple[Candidate, Space]] = []
    for space in dict.fromkeys(f.space for f in outcome.found):
        own = [f for f in outcome.found if f.space is space]
        index = np.array([f.index for f in own], dtype=np.int32)
        for f, c in zip(own, _build(space, index, goal, any_region=False), strict=True):
            # The largest drift of all ranks by itself; any other score is carried along.
            built.append((c if goal.plain else replace(c, score=f.score), space))

    def place(pair: tuple[Candidate, Space]) -> tuple[object, ...]:
        key = order_key(pair[0], pair[1].roles, stage.on_board)
        return key if prefer is None else (*key[:EQUALS], prefer(pair[0]), *key[EQUALS:])

    built.sort(key=place)
    listed = built[:top]
    final: dict[int, Candidate] = {}
    for space in dict.fromkeys(s for _, s in listed):
        ranks = [k for k, (_, s) in enumerate(listed) if s is space]
        index = np.concatenate([_index(space, listed[k][0]) for k in ranks])
        around = neighbours(space, index, goal)
        ranked = [replace(listed[k][0], rank=k + 1, neighbours=near) for k, near in zip(ranks, around, strict=True)]
        for k, full in zip(ranks, _reviewed(ranked, space, stage), strict=True):
            final[k] = replace(full, explanation=sentences(full, space.network))
    return tuple(final[k] for k in sorted(final))


def _best_of_each(
    spaces: Sequence[Space],
    goal: Goal,
    candidates: Sequence[Candidate],
    outcome: Outcome,
    progress: Progress | None,
    stop: Stop | None,
) -> tuple[NetworkResult, ...]:
    """Best drift of each network, by a search of its own where the list does not show it."""
    results = []
    for name in dict.fromkeys(space.network.name for space in spaces):
        best = next((c for c in candidates if c.network == name), None)
        alone = outcome
        own = [s for s in spaces if s.network.name == name]
        if best is None and candidates and outcome.complete:
            alone = search(own, goal, top=1, progress=progress, stop=stop)
            if alone.found:
                index = np.array([alone.found[0].index], dtype=np.int32)
                (best,) = _build(alone.found[0].space, index, goal, any_region=False)
        if best is not None:
            results.append(_standing(best, candidates))
        elif not alone.complete:
            results.append(NetworkResult(network=name, best=None, why="not settled: the search was stopped"))
        else:
            culprits = _obstacles(own, goal, stop) if candidates else []
            some = f"; without {' or without '.join(culprits)} some would" if culprits else ""
            results.append(NetworkResult(network=name, best=None, why=f"no combination meets every limit{some}"))
    order = sorted(results, key=lambda r: np.inf if r.best is None else r.best)
    return tuple(order)


def _standing(candidate: Candidate, candidates: Sequence[Candidate]) -> NetworkResult:
    """Why the best candidate of a network stands where it does."""
    against = comparison(candidates[0], candidate) if candidate.rank != 1 else None
    notes = ["least drift: " * (candidate.rank == 1 and candidate.score is None) + _drifts(candidate)]
    notes += [compared_words(against)] if against else []
    notes += [f"rank {candidate.rank}"] if candidate.rank > 1 else []
    return NetworkResult(network=candidate.network, best=candidate.drift.q_point, why="; ".join(notes), against=against)


def _obstacles(spaces: Sequence[Space], goal: Goal, stop: Stop | None) -> list[str]:
    """Limits and windows without which a network would have a candidate, as far as a short search tells."""
    names = dict.fromkeys(need.limit for space in spaces for need in space.requirements if need.limit != "vce")
    found = []
    for name in names:
        freed = [replace(s, requirements=tuple(need for need in s.requirements if need.limit != name)) for s in spaces]
        if search(freed, goal, top=1, first=True, most=SHORT, stop=stop).found:
            found.append(name)
    return found


def _before_rival(winner: Candidate, rival: NetworkResult) -> Candidate:
    """The winner among several networks, with why it suits the stage better than the next."""
    least = "drifts least," if winner.score is None else "ranks first by the metric asked for, with a drift of"
    text = f"Of all networks that meet every limit this one {least} {percent(winner.drift.q_point)}"
    text += f"; next is {rival.network} with {percent(rival.best or 0.0)}"
    text += f", where {compared_words(rival.against)}." if rival.against else "."
    title, *rest = winner.explanation
    return replace(winner, rival=rival, explanation=(title, text, *rest))


def _drifts(candidate: Candidate) -> str:
    """What drifts most, and its largest cause."""
    quantity = candidate.drift.decides
    shares = candidate.budget[quantity]
    cause = f", largest cause {cause_words(shares[0].cause)} with {percent(shares[0].share)}" if shares else ""
    return f"{quantity.upper()} drifts {percent(candidate.drift.q_point)}{cause}"


def _build(
    space: Space, index: Index, goal: Goal, *, any_region: bool
) -> list[Candidate]:
    """Candidates with everything but rank, neighbours and explanation."""
    box = space.box(index, Meter())
    exact = Exact(box, goal)
    saturates = any_region and bool(np.any(exact.extremes["vce", -1].value < space.transistor.vce_sat))
    law = partial(extreme_in_any_region, box) if saturates else box.extreme
    extremes: dict[tuple[tuple[str, ...], int], Extreme] = {}

    def worst(names: Sequence[str], side: int) -> Extreme:
        key = (tuple(names), side)
        if key not in extremes:
            known = exact.extremes.get((key[0][0], side)) if len(key[0]) == 1 and not saturates else None
            extremes[key] = known if known is not None else law(names, side)
        return extremes[key]

    goals = goal.aims
    ends = {(q, side): worst((q,), side) for q in dict.fromkeys(("ic", "vce", *goals)) for side in (1, -1)}
    drifts, shares = {}, {}
    for quantity, aim in goals.items():
        up = ends[quantity, 1].value / aim - 1.0
        down = 1.0 - ends[quantity, -1].value / aim
        drifts[quantity] = np.maximum(up, down)
        both = {
            1: budgets(box, ends[quantity, 1].at, quantity, 1, aim, active_law=not saturates),
            -1: budgets(box, ends[quantity, -1].at, quantity, -1, aim, active_law=not saturates),
        }
        shares[quantity] = [both[1][k] if up[k] >= down[k] else both[-1][k] for k in range(box.size)]
    points, work = nominal_points(box, space.ground), duties(box, space.ground)
    judged = [
        # Staying active is judged by the active law: it alone tells how far a saturated transistor is from it.
        judge(box, need, exact.worst if need.name == "vce" else lambda names, side: _pair(worst(names, side)))
        for need in space.requirements
    ]
    feed, names = space.base_feed(box), space.fitted(index)
    made = [{role: pair_of(part, k) for role, part in box.parts.items()} for k in range(box.size)]
    found = []
    for k in range(box.size):
        point = points[k]
        verdicts = tuple(_verdict(j, k, space.transistor.vce_sat) for j in judged)
        centring = max(
            abs(getattr(point, quantity) / aim - 1.0) for quantity, aim in goals.items()
        )
        drift = Drift(
            **{quantity: float(d[k]) for quantity, d in drifts.items()},
            q_point=float(max(d[k] for d in drifts.values())),
        )
        found.append(
            Candidate(
                rank=0,
                network=space.network.name,
                resistors=names[k],
                parts={role: pair for role, pair in made[k].items() if pair is not None},
                nominal=point,
                worst=Worst(
                    **{q: (float(ends[q, -1].value[k]), float(ends[q, 1].value[k])) for q in dict.fromkeys(q for q, _ in ends)},
                ),
                regions=_regions(box, [e.at for e in ends.values()], k),
                drift=drift,
                centring=centring,
                supply_current=max(point.rails.values()),
                base_feed=float(feed[k]),
                budget={quantity: rows[k] for quantity, rows in shares.items()},
                neighbours=(),
                roles=work[k],
                limits=verdicts,
                verdict="pass" if all(v.verdict == "pass" for v in verdicts) else "fail",
                explanation=(),
            )
        )
    return found


def _pair(extreme: Extreme) -> tuple[Array, Values]:
    return extreme.value, extreme.at


def _regions(box: Box, points: Sequence[Mapping[str, Array]], k: int) -> tuple[str, ...]:
    """Regions met at the deciding points of one candidate."""
    seen = set()
    one = box.take([k])
    for at in points:
        q = one.solve({name: v[[k]] for name, v in at.items()})
        seen.add(int(q.region[0]))
    return tuple(REGIONS[code] for code in sorted(seen))


def _verdict(judged: Judgement, k: int, vce_sat: float) -> Verdict:
    need: Requirement = judged.requirement
    low, high = need.interval.low, need.interval.high
    limit: float | tuple[float, float] = (low, high)
    sense = "within"
    if np.isinf(low):
        sense, limit = "<=", high
    elif np.isinf(high):
        sense, limit = ">=", low
    # A saturated transistor holds VCE(sat); the margin keeps saying how much VCE is missing to be active.
    worst = max(float(judged.worst[k]), vce_sat) if need.name == "vce" else float(judged.worst[k])
    return Verdict(
        name=need.name,
        kind=need.kind,
        sense=sense,
        limit=limit,
        worst=worst,
        margin=float(judged.margin[k]),
        at={name: float(v[k]) for name, v in judged.at.items()},
        verdict="pass" if judged.passed[k] else "fail",
    )

