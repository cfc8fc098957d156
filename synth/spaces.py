"""What a search runs over: the networks with their value lists, and the exact assessment of single candidates."""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import partial

import numpy as np
from numpy.typing import NDArray

from synth.answer import Pair
from synth.box import Box, Extreme, Meter, Values
from synth.catalogue import Derating, ResistorStyle, derating, resistor_style
from synth.choices import choices, fitted_in, list_of, made_up, prices_of, split_pairs
from synth.limits import Requirement, Surroundings, judge, requirements
from synth.measures import POWER_OF_TRANSISTOR, is_figure
from synth.networks import NETWORKS
from synth.networks.form import Array, Network
from synth.parts import Parts
from synth.preferred import JOINS
from synth.preferred.pairs import SERIES, SINGLE
from synth.quantities import Interval, Spread
from synth.reference import Reference
from synth.rss import root_sum_square
from synth.signal import Signal
from synth.stage import RoleSetting, Stage, StageError
from synth.transistor import Transistor

MOST_VBE = 2.0
"""What VBE never reaches [V]: beyond the gap the junction law ends."""

Index = NDArray[np.int32]


@dataclass(frozen=True, kw_only=True, eq=False)
class Space:
    """Everything that one network may be built from.

    Parameters
    ----------
    network : Network
        The network.
    lists : mapping of str to Parts
        Every value that a role may have, ascending.
    transistor : Transistor
        The transistor.
    rails : mapping of str to Spread
        Rails [V].
    temperature : Spread
        Ambient [K].
    requirements : tuple of Requirement
        What every candidate has to satisfy.
    reference : Reference, optional
        The reference element of the base voltage, where the network has one.
    signal : Signal
        What the signal meets.
    styles : mapping of str to ResistorStyle
        Style of each role that has one.
    derating : Derating
        Policy that ratings are judged by.
    ground : {"negative", "positive", "middle", "common"}
        What is 0 V, see `synth.explain.nominal_points`.
    prices : mapping of str to ndarray
        Price of each value of a role, where every role has a list with prices [-].
    """

    network: Network
    lists: Mapping[str, Parts]
    transistor: Transistor
    rails: Mapping[str, Spread]
    temperature: Spread
    requirements: tuple[Requirement, ...]
    reference: Reference | None = None
    signal: Signal = field(default_factory=Signal)
    styles: Mapping[str, ResistorStyle] = field(default_factory=dict)
    derating: Derating = field(default_factory=partial(derating, "none"))
    ground: str = "negative"
    prices: Mapping[str, Array] = field(default_factory=dict)

    @property
    def roles(self) -> tuple[str, ...]:
        """Roles used, in the network's order."""
        return tuple(role for role in self.network.role_names if role in self.lists)

    @property
    def combinations(self) -> int:
        """Number of candidates."""
        return math.prod(self.lists[role].nominal.size for role in self.roles)

    def base_feed(self, box: Box) -> Array:
        """Resistance of the base feed: the parallel connection of the base-side roles.

        Parameters
        ----------
        box : Box
            n candidates of this space.

        Returns
        -------
        ndarray, shape (n,)
            At nominal values [ohm].
        """
        feeds = (box.parts[role].nominal for role in self.network.base_side if role in box.parts)
        return 1.0 / sum((1.0 / r for r in feeds), np.zeros(box.size))

    def thinned(self, positions: Mapping[str, Index]) -> Space:
        """The same space with some of its values.

        Parameters
        ----------
        positions : mapping of str to ndarray of int
            List positions to keep, by role, ascending.

        Returns
        -------
        Space
            Whose lists are that short.
        """
        lists = {role: self.lists[role].take(at) for role, at in positions.items()}
        prices = {role: row[positions[role]] for role, row in self.prices.items()}
        return replace(self, lists=lists, prices=prices)

    def fitted(self, index: Index) -> list[dict[str, float]]:
        """Resistors of candidates.

        Parameters
        ----------
        index : ndarray of int, shape (n, roles)
            List positions.

        Returns
        -------
        list of dict
            Role to nominal resistance [ohm].
        """
        return [
            {role: float(self.lists[role].nominal[i]) for role, i in zip(self.roles, row, strict=True)} for row in index
        ]

    def box(self, index: Index, meter: Meter) -> Box:
        """The box of some candidates.

        Parameters
        ----------
        index : ndarray of int, shape (n, roles)
            List positions.
        meter : Meter
            Where solves are counted.

        Returns
        -------
        Box
            Of n candidates.
        """
        return Box(
            network=self.network,
            transistor=self.transistor,
            rails=self.rails,
            temperature=self.temperature,
            parts={role: self.lists[role].take(index[:, j]) for j, role in enumerate(self.roles)},
            reference=self.reference,
            signal=self.signal,
            meter=meter,
        )


@dataclass(frozen=True, kw_only=True)
class Goal:
    """What drift is measured from: IC [A], and of VCE, VC and VE [V] the one that has a target, the others None.

    Candidates are ranked by their score: the largest drift over the box, each times its weight [-] where `weights` are given;
    with `rss` the largest root sum square of `synth.rss` in its place.
    """

    ic: float
    vce: float | None = None
    vc: float | None = None
    ve: float | None = None
    weights: Mapping[str, float] | None = None
    rss: bool = False

    @property
    def plain(self) -> bool:
        """Whether the largest drift itself ranks."""
        return self.weights is None and not self.rss

    def weight(self, quantity: str) -> float:
        """How much the drift of a quantity counts.

        Parameters
        ----------
        quantity : str
            One of `aims`.

        Returns
        -------
        float
            1 where no weights are given, 0 of a quantity that they do not name [-].
        """
        return 1.0 if self.weights is None else self.weights.get(quantity, 0.0)

    def score(self, drifts: Mapping[str, Array]) -> Array:
        """What candidates are ranked by.

        Parameters
        ----------
        drifts : mapping of str to ndarray
            Drift of each quantity that has a target [-].

        Returns
        -------
        ndarray
            The largest of them, each times its weight [-].
        """
        counted = [(self.weight(quantity), drift) for quantity, drift in drifts.items()]
        return np.asarray(np.maximum.reduce([w * drift for w, drift in counted if w > 0.0]))

    @property
    def aims(self) -> dict[str, float]:
        """Target of every quantity that has one, IC first [A, V]."""
        every = {"ic": self.ic, "vce": self.vce, "vc": self.vc, "ve": self.ve}
        return {quantity: aim for quantity, aim in every.items() if aim is not None}


@dataclass(frozen=True, kw_only=True)
class Found:
    """One qualifying candidate with its worst case.

    `index` are the list positions, `drifts` those of each quantity that has a target [-], `extremes` the deciding points,
    `score` is what it is ranked by [-].
    """

    space: Space
    index: tuple[int, ...]
    drifts: Mapping[str, float]
    extremes: Mapping[str, Extreme]
    score: float

    @property
    def drift(self) -> float:
        """Q-point drift [-]."""
        return max(self.drifts.values())


class Exact:
    """True extremes of the candidates of a box, each computed once, and their drift."""

    def __init__(self, box: Box, goal: Goal) -> None:
        self.box = box
        self.extremes = {key: box.extreme((key[0],), key[1]) for key in wanted(goal)}
        self.drifts, self.drift = drift_of({key: e.value for key, e in self.extremes.items()}, goal)
        self._cache: dict[tuple[tuple[str, ...], int], Extreme] = {
            ((quantity,), side): e for (quantity, side), e in self.extremes.items()
        }

    def worst(self, names: Sequence[str], side: int) -> tuple[Array, Values]:
        """Extreme of a sum of quantities and its point, as `synth.limits.judge` asks for it.

        Parameters
        ----------
        names : sequence of str
            Quantities, see `Box.measure`.
        side : {+1, -1}
            Maximum or minimum.

        Returns
        -------
        value : ndarray, shape (n,)
            The extreme [A or V].
        at : dict
            The point that decides.
        """
        key = (tuple(names), side)
        if key not in self._cache:
            self._cache[key] = self.box.extreme(names, side)
        return self._cache[key].value, self._cache[key].at


def goal_of(stage: Stage, weights: Mapping[str, float] | None = None, rss: bool = False) -> Goal:
    """What the drift of a stage is measured from.

    Parameters
    ----------
    stage : Stage
        The request.
    weights : mapping of str to float, optional
        How much the drift of each quantity counts in the ranking [-].
    rss : bool
        Whether the root sum square ranks.

    Returns
    -------
    Goal
        Its targets.
    """
    assert stage.ic.nominal is not None
    aims = {quantity: target.nominal for quantity, target in stage.voltages.items()}
    volts = (aims.get("vce"), aims.get("vc"), aims.get("ve"))
    return Goal(ic=stage.ic.nominal, vce=volts[0], vc=volts[1], ve=volts[2], weights=weights, rss=rss)


def spaces_of(stage: Stage, without: Collection[str] = ()) -> list[Space]:
    """Every network of a stage with every set of roles, ready to search.

    Parameters
    ----------
    stage : Stage
        The request.
    without : collection of str
        Names of requirements to leave out.

    Returns
    -------
    list of Space
        In the order of the stage's networks.
    """
    known: dict[RoleSetting, Parts] = {}
    whole = [
        _space(stage, network, roles, {role: list_of(stage, role, known) for role in roles}, without)
        for network in stage.networks
        for roles in stage.roles_used(network)
    ]
    return [space for every in whole for space in _split(stage, every)]


def fitted(stage: Stage) -> Space:
    """The resistors fitted in a stage, as a space of one candidate.

    Parameters
    ----------
    stage : Stage
        With ``[values]``.

    Returns
    -------
    Space
        Of the network whose roles the values make up.

    Raises
    ------
    StageError
        If the values make up none of the stage's networks, or more than one.
    """
    names = set(stage.values)
    matching = []
    for network in stage.networks:
        form = NETWORKS[network]
        optional = {role.name for role in form.roles if form.optional(role, stage.reference is not None)}
        every = set(NETWORKS[network].role_names)
        if every - optional <= names <= every:
            matching.append(network)
    if len(matching) != 1:
        wanted_roles = "; or ".join(
            f"{network}: {' '.join(NETWORKS[network].role_names)}" for network in (matching or stage.networks)
        )
        raise StageError(
            "values",
            " ".join(sorted(names)) or None,
            "which fits several networks, so name one" if matching else "which is not the resistors of one network",
            f"a value for each role of {wanted_roles}",
        )
    roles = tuple(role for role in NETWORKS[matching[0]].role_names if role in names)
    space = _space(stage, matching[0], roles, {role: fitted_in(stage, role) for role in roles}, ())
    if not stage.signal.split or "re" not in roles or "c" in space.network.tied:
        return space
    pairs = space.lists["re"].pairs
    if pairs is None or pairs.join[0] != SERIES:
        accepted = "its two parts, the upper one first, such as '100 ohm + 1k5', or signal.unbypassed"
        reason = "which is one part, but signal.bypass is part"
        raise StageError("values.re", stage.given.get("values.re"), reason, accepted)
    return replace(space, signal=replace(stage.signal, unbypassed=float(pairs.halves[0].nominal[0])))


def space_of(stage: Stage, network: str, resistors: Mapping[str, float], pairs: Mapping[str, Pair]) -> Space:
    """One candidate of a stage as a space of its own.

    Parameters
    ----------
    stage : Stage
        The request that it answers.
    network : str
        Its network.
    resistors : mapping of str to float
        Role to nominal resistance [ohm].
    pairs : mapping of str to Pair
        Roles that two parts make up.

    Returns
    -------
    Space
        Of one candidate, with the bands that its values have in the stage.
    """
    lists = {}
    for role in (role for role in NETWORKS[network].role_names if role in resistors):
        pair = pairs.get(role)
        join, ohms = (SINGLE, (resistors[role],)) if pair is None else (JOINS.index(pair.join), pair.ohms)
        lists[role] = made_up(stage, role, join, ohms)
    return _space(stage, network, tuple(lists), lists, ())


def among_values(stage: Stage, space: Space) -> tuple[Space, Index]:
    """The resistors fitted, placed among the values that the stage allows, so that they have neighbours.

    Parameters
    ----------
    stage : Stage
        The request.
    space : Space
        Of `fitted`.

    Returns
    -------
    space : Space
        With every value of each role, the fitted one among them.
    index : ndarray of int, shape (1, roles)
        Where the fitted values are.
    """
    lists, index = {}, []
    for role in space.roles:
        own = space.lists[role]
        # The lower part of a re in two parts has no neighbours of its own.
        both = own if space.signal.split and role == "re" else own.joined(choices(stage, role))
        # Of equal values the fitted one comes first and stays.
        _, first = np.unique(both.nominal, return_index=True)
        lists[role] = both.take(first)
        index.append(int(np.flatnonzero(first == 0)[0]))
    return replace(space, lists=lists), np.array([index], dtype=np.int32)


def _split(stage: Stage, space: Space) -> list[Space]:
    """A space for each upper part of a re in two parts, of which it carries the signal."""
    if not stage.signal.split:
        return [space]
    if "re" not in space.roles or "c" in space.network.tied:
        return [replace(space, signal=replace(stage.signal, bypass="full", split=False))]
    return [
        replace(space, lists={**space.lists, "re": re}, signal=replace(stage.signal, unbypassed=upper))
        for upper, re in split_pairs(stage)
    ]


def _space(
    stage: Stage, name: str, roles: tuple[str, ...], lists: Mapping[str, Parts], without: Collection[str]
) -> Space:
    network = NETWORKS[name]
    rails = {rail: s for rail, s in stage.rails.items() if rail in (*network.rails, *network.optional_rails)}
    windows = {q: (Interval(t.low, t.high), t.nominal) for q, t in {"ic": stage.ic, **stage.voltages}.items()}
    reference = stage.reference if network.reference != "no" else None
    named = {role: stage.role(role).style for role in roles}
    styles = {role: resistor_style(style) for role, style in named.items() if style}
    around = Surroundings(
        rails=rails,
        roles=roles,
        reference=reference,
        vce_sat=stage.transistor.vce_sat,
        hot=stage.temperature.high,
        styles=styles,
        paired={role for role in roles if lists[role].paired or (role == "re" and stage.signal.split)},
        ratings=stage.ratings,
        derating=stage.derating,
        signal=stage.signal,
    )
    needs = requirements(network, around, stage.limits, stage.limits_given, windows)
    return Space(
        network=network,
        lists=lists,
        transistor=stage.transistor,
        rails=rails,
        temperature=stage.temperature,
        reference=reference,
        signal=stage.signal,
        styles=styles,
        derating=stage.derating,
        requirements=tuple(need for need in needs if need.limit not in without),
        prices=prices_of(stage, lists),
        ground="common" if "vee" in stage.rails and stage.ground == "middle" else stage.ground,
    )


def assess(
    space: Space, index: Index, goal: Goal, meter: Meter, limit: Array | float = np.inf
) -> tuple[list[Found], float]:
    """Worst case of some candidates, and which of them qualify.

    Parameters
    ----------
    space : Space
        Where they come from.
    index : ndarray of int, shape (n, roles)
        List positions.
    goal : Goal
        What drift is measured from.
    meter : Meter
        Where solves are counted.
    limit : array_like
        Score above which a candidate is of no interest [-], broadcast against (n,).

    Returns
    -------
    found : list of Found
        Those that satisfy every requirement and stay within `limit`.
    beyond : float
        Least score, or lower bound of it, among those dropped for `limit` [-]; infinite if none.
    """
    found: list[Found] = []
    beyond = np.inf
    if not len(index):
        return found, beyond
    most = np.broadcast_to(limit, len(index))
    box = space.box(index, meter)
    squares = root_sum_square(box, goal.aims) if goal.rss else None
    rough = {key: box.extreme((key[0],), key[1], thorough=False).value for key in wanted(goal)}
    score = goal.score(drift_of(rough, goal)[0] if squares is None else squares)
    over = score > most
    if over.any():
        beyond = float(score[over].min())
    alive: NDArray[np.bool_] = ~over
    for need in space.requirements:
        for names in need.sums:
            for side in need.sides:
                if need.judged == "box" and len(names) == 1 and (names[0], side) in rough:
                    alive &= need.side(side).passes(rough[names[0], side])
    keep = np.flatnonzero(alive)
    if not keep.size:
        return found, beyond
    box, most = box.take(keep), most[keep]
    exact = Exact(box, goal)
    score = goal.score(exact.drifts) if squares is None else score[keep]
    passed = np.ones(box.size, dtype=bool)
    late = [need for need in space.requirements if is_dear(need)]
    for need in space.requirements:
        if need not in late:
            passed &= judge(box, need, exact.worst).passed
    far = passed & (score > most)
    # What is dear to judge is judged last, and of a candidate beyond the limit a bound is all that counts.
    for need in late:
        asked = np.flatnonzero(passed & ~far)
        passed[asked] = passes(exact, need, asked)
    if far.any():
        beyond = min(beyond, float(score[far].min()))
    for k in np.flatnonzero(passed & ~far):
        found.append(
            Found(
                space=space,
                index=tuple(int(i) for i in index[keep[k]]),
                drifts={quantity: float(x[k]) for quantity, x in exact.drifts.items()},
                extremes={f"{q} {'max' if side > 0 else 'min'}": e.take(int(k)) for (q, side), e in exact.extremes.items()},
                score=float(score[k]),
            )
        )
    return found, beyond


def is_dear(need: Requirement) -> bool:
    """Whether a requirement takes long to judge: its quantity has no proved signs to go by.

    Parameters
    ----------
    need : Requirement
        Any requirement; no unit matters.

    Returns
    -------
    bool
        True for the power of the transistor and small-signal figures.
    """
    return any(name == POWER_OF_TRANSISTOR or is_figure(name) for names in need.sums for name in names)


def surely(exact: Exact, need: Requirement) -> NDArray[np.bool_]:
    """Which candidates pass a requirement by a bound that is quick to have.

    Parameters
    ----------
    exact : Exact
        Their extremes.
    need : Requirement
        What is asked.

    Returns
    -------
    ndarray of bool, shape (n,)
        The transistor's power is at most ICmax·VCEmax + VBE·IBmax [W]; of anything else nothing is sure.
    """
    if need.sums != ((POWER_OF_TRANSISTOR,),) or need.sides != (1,):
        return np.zeros(exact.box.size, dtype=bool)
    ic, vce, ib = (exact.worst((name,), 1)[0] for name in ("ic", "vce", "ib"))
    return need.passes(ic * vce + MOST_VBE * np.maximum(ib, 0.0))


def passes(exact: Exact, need: Requirement, who: NDArray[np.integer]) -> NDArray[np.bool_]:
    """Which of some candidates pass a requirement.

    Parameters
    ----------
    exact : Exact
        Candidates with their extremes.
    need : Requirement
        What is asked.
    who : ndarray of int
        Which candidates.

    Returns
    -------
    ndarray of bool
        In the order of `who`; no unit.
    """
    if not is_dear(need):
        return np.asarray(judge(exact.box, need, exact.worst).passed[who])
    passed: NDArray[np.bool_] = surely(exact, need)[who]
    asked = np.flatnonzero(~passed)
    if asked.size:
        some = exact.box.take(who[asked])
        passed[asked] = judge(some, need, partial(extreme_of, some)).passed
    return passed


def extreme_of(box: Box, names: Sequence[str], side: int) -> tuple[Array, Values]:
    """Extreme of a sum of quantities and its point.

    Parameters
    ----------
    box : Box
        n candidates.
    names : sequence of str
        Quantities, see `synth.measures`.
    side : {+1, -1}
        Maximum or minimum.

    Returns
    -------
    value : ndarray, shape (n,)
        The extreme [A, V, W, ohm or -].
    at : dict
        The point that decides.
    """
    found = box.extreme(names, side)
    return found.value, found.at


def wanted(goal: Goal) -> tuple[tuple[str, int], ...]:
    """Extremes that a candidate is judged by.

    Parameters
    ----------
    goal : Goal
        What drift is measured from.

    Returns
    -------
    tuple of (str, int)
        Quantity and direction; the least VCE always counts, since it tells whether the transistor stays active.
    """
    return (*((quantity, side) for quantity in goal.aims for side in (1, -1) if (quantity, side) != ("vce", -1)), ("vce", -1))


def drift_of(worst: Mapping[tuple[str, int], Array], goal: Goal) -> tuple[dict[str, Array], Array]:
    """Drift from the worst values of the quantities that have a target.

    Parameters
    ----------
    worst : mapping of (str, int) to ndarray
        Extremes as `wanted` names them [A, V].
    goal : Goal
        What drift is measured from.

    Returns
    -------
    drifts : dict of str to ndarray
        Largest relative excursion of each quantity [-].
    q_point : ndarray
        The largest of them [-].
    """
    drifts = {q: np.maximum(worst[q, 1] / aim - 1.0, 1.0 - worst[q, -1] / aim) for q, aim in goal.aims.items()}
    return drifts, np.asarray(np.maximum.reduce(list(drifts.values())))


@dataclass(frozen=True, kw_only=True)
class Assessed:
    """Drift of a candidate over its box [-], None where it leaves the active region, and the requirements it fails."""

    drift: float | None
    fails: tuple[str, ...]


def assess_all(space: Space, index: Index, goal: Goal, meter: Meter) -> list[Assessed]:
    """Drift and verdict of candidates, whether they qualify or not.

    Parameters
    ----------
    space : Space
        Where they come from.
    index : ndarray of int, shape (n, roles)
        List positions.
    goal : Goal
        What drift is measured from.
    meter : Meter
        Where solves are counted.

    Returns
    -------
    list of Assessed
        In the same order.
    """
    exact = Exact(space.box(index, meter), goal)
    failed: list[list[str]] = [[] for _ in index]
    everyone = np.arange(len(index))
    for need in space.requirements:
        for k in np.flatnonzero(~passes(exact, need, everyone)):
            failed[k].append(need.name)
    active = exact.extremes["vce", -1].value >= space.transistor.vce_sat
    return [
        Assessed(drift=float(exact.drift[k]) if active[k] else None, fails=tuple(failed[k])) for k in range(len(index))
    ]
