"""Lines of a BOM: which resistors share a part, what it has to stand, what else would do, and why each value was chosen."""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from synth.answer import Candidate
from synth.boards.candidates import Choice, Choices
from synth.boards.purchase import MICRO, Need, Part
from synth.box import Meter
from synth.catalogue import resistor_styles
from synth.explain import percent
from synth.quantities import format_quantity, format_resistance
from synth.spaces import Goal, assess_all

NOTHING = 5e-5
"""Drift that is not told [-]."""
NEIGHBOURS = 2
"""Values on either side that are tried as alternates."""


@dataclass(frozen=True, kw_only=True)
class Place:
    """One resistor of the board: its number, the stage and copy it belongs to (from 0), its role and its part."""

    designator: str
    stage: int
    copy: int
    role: str
    need: Need
    part: Part


@dataclass(frozen=True, kw_only=True)
class Line:
    """One line item.

    Parameters
    ----------
    item : int
        Number of the line, from 1 [-].
    quantity : int
        Pieces fitted [-].
    designators : tuple of str
        Numbers of the resistors.
    value : str
        Resistance in the letter code of IEC 60062.
    ohms, tolerance, tcr : float
        Resistance [ohm], tolerance [-] and largest temperature coefficient of either sign [1/K].
    power, voltage : float
        Most that one of its resistors has to stand over the whole box [W, V].
    power_rating, voltage_rating : float or None
        What the style is rated for, None without a known style [W, V].
    style, part : str or None
        Style and part number.
    new : bool
        Whether it is a new line item of the board.
    on_hand, buy : int or None
        Pieces on hand, None for as many as needed, and pieces to order [-].
    price, cost : float or None
        Price of one piece of the order and cost of the order, None where nothing is priced [currency of the list].
    alternates : tuple of str
        What could be fitted in every place of the line without failing a verdict.
    rationale : str
        Role, drop, dissipation and what decides the value.
    """

    item: int
    quantity: int
    designators: tuple[str, ...]
    value: str
    ohms: float
    tolerance: float
    tcr: float
    power: float
    voltage: float
    power_rating: float | None
    voltage_rating: float | None
    style: str | None
    part: str | None
    new: bool
    on_hand: int | None
    buy: int
    price: float | None
    cost: float | None
    alternates: tuple[str, ...]
    rationale: str


@dataclass(frozen=True, kw_only=True)
class Share:
    """What sharing a line costs one stage.

    `cost` is the drift it spends beyond what it would have with a line of its own in place of this one and everything else
    on the board as it is [-], None where no such candidate is within its allowance; `instead` are the values it would have
    then [ohm].
    """

    stage: str
    designators: tuple[str, ...]
    cost: float | None
    instead: Mapping[str, float]


@dataclass(frozen=True, kw_only=True)
class Merge:
    """A line that several stages share, what that costs each of them, and the same in words."""

    item: int
    value: str
    designators: tuple[str, ...]
    shares: tuple[Share, ...]
    text: str


def placed(
    chosen: Sequence[Choice], counts: Sequence[int], numbers: Sequence[Sequence[str]], fitted: Mapping[tuple[Need, Part], int]
) -> tuple[Place, ...]:
    """Every resistor of the board with its number and part.

    Parameters
    ----------
    chosen : sequence of Choice
        Candidate of each stage.
    counts : sequence of int
        How often each is built [-].
    numbers : sequence of sequence of str
        Numbers that the resistors of each stage may carry.
    fitted : mapping of (Need, Part) to int
        Pieces of each need that are each part [-].

    Returns
    -------
    tuple of Place
        Stage by stage, copy by copy, in the order of roles.
    """
    left: dict[Need, Iterator[Part]] = {need: iter(()) for need, _ in fitted}
    for (need, part), pieces in fitted.items():
        left[need] = itertools.chain(left[need], itertools.repeat(part, pieces))
    places = []
    for stage, (choice, count, own) in enumerate(zip(chosen, counts, numbers, strict=True)):
        number = iter(own)
        for copy in range(count):
            for role, need in choice.needs.items():
                part = next(left[need])
                places.append(Place(designator=next(number), stage=stage, copy=copy, role=role, need=need, part=part))
    return tuple(places)


def lines(
    places: Sequence[Place],
    candidates: Sequence[Candidate],
    names: Sequence[str],
    *,
    priced: bool,
    alternates: Callable[[Sequence[Place]], tuple[str, ...]],
) -> tuple[Line, ...]:
    """Lines of the BOM.

    Parameters
    ----------
    places : sequence of Place
        Every resistor.
    candidates : sequence of Candidate
        Each stage as judged.
    names : sequence of str
        Name of each stage.
    priced : bool
        Whether pieces and prices are known.
    alternates : callable
        What could be fitted in some places instead.

    Returns
    -------
    tuple of Line
        Ascending in value, then tolerance, style and part number.
    """
    groups: dict[Part, list[Place]] = {}
    for place in places:
        groups.setdefault(place.part, []).append(place)
    order = sorted(groups, key=lambda p: (p.value, p.tolerance, p.style or "", p.number or ""))
    found = []
    for item, part in enumerate(order, 1):
        group = groups[part]
        stresses = [candidates[place.stage].stress[place.role] for place in group]
        buy, cost = part.bought(len(group))
        rating = resistor_styles().get(part.style or "")
        found.append(
            Line(
                item=item,
                quantity=len(group),
                designators=tuple(place.designator for place in group),
                value=format_resistance(part.value),
                ohms=part.value,
                tolerance=part.tolerance,
                tcr=max(abs(part.tcr_low), abs(part.tcr_high)),
                power=max(s.power for s in stresses),
                voltage=max(s.voltage for s in stresses),
                power_rating=None if rating is None else rating.power_w_conservative,
                voltage_rating=None if rating is None else rating.max_working_voltage_v,
                style=part.style,
                part=part.number,
                new=part.new,
                on_hand=part.on_hand if priced else None,
                buy=buy if priced else len(group),
                price=part.price_at(buy) / MICRO if buy else None,
                cost=cost / MICRO if priced and (buy or part.prices) else None,
                alternates=alternates(group),
                rationale=_rationale(group, candidates, names),
            )
        )
    return tuple(found)


def _rationale(group: Sequence[Place], candidates: Sequence[Candidate], names: Sequence[str]) -> str:
    """Role, drop, dissipation and what decides the value, for each stage and role of a line."""
    texts = []
    for stage, role in dict.fromkeys((place.stage, place.role) for place in group):
        c = candidates[stage]
        duty, stress = c.roles[role], c.stress[role]
        text = f"{role} of {names[stage]}: {duty.meaning}; drops {format_quantity(duty.drop, 'voltage')}, at most "
        text += f"{format_quantity(stress.power, 'power')}; {_decides(c, role)}"
        texts.append(text)
    return " | ".join(texts)


def _decides(candidate: Candidate, role: str) -> str:
    """What one value down or up would do."""
    effects = []
    for near in sorted((n for n in candidate.neighbours if n.role == role), key=lambda n: n.step):
        text = format_resistance(near.value)
        if near.drift is None:
            effects.append(f"{text} saturates")
        elif near.fails:
            effects.append(f"{text} fails {' and '.join(near.fails)}")
        else:
            change = near.drift - candidate.drift.q_point
            points, word = percent(abs(change)).removesuffix(" %"), "more" if change > 0 else "less"
            words = "would drift as much" if abs(change) < NOTHING else f"drifts {points} points {word}"
            effects.append(f"{text} {words}")
    return ", ".join(effects) if effects else "the only value allowed"


def alternates_of(
    group: Sequence[Place], chosen: Sequence[Choice], goals: Sequence[Goal], parts: Sequence[Part]
) -> tuple[str, ...]:
    """What could be fitted in every place of a line without failing a verdict.

    Parameters
    ----------
    group : sequence of Place
        Places of the line.
    chosen : sequence of Choice
        Candidate of each stage.
    goals : sequence of Goal
        What the drift of each stage is measured from.
    parts : sequence of Part
        What can be fitted at all.

    Returns
    -------
    tuple of str
        Other parts of the same value, and the nearest other values that pass everywhere when every place of the line
        takes them, each with the drift of the stage that then drifts most.
    """
    own = group[0].part
    needs = dict.fromkeys(place.need for place in group)
    others = [part for part in parts if part != own and part.there]
    same = [part for part in others if all(part.serves(need) for need in needs)]
    values = sorted({part.value for part in others if part.value != own.value})
    below = [v for v in values if v < own.value][-NEIGHBOURS:]
    above = [v for v in values if v > own.value][:NEIGHBOURS]
    found = [_named(part) for part in same]
    for value in (*reversed(below), *above):
        worst = _drift_with(group, chosen, goals, value)
        if worst is not None:
            found.append(f"{format_resistance(value)} (drift {percent(worst)})")
    return tuple(found)


def _named(part: Part) -> str:
    return part.text + (f", {part.number}" if part.number else "")


def _drift_with(group: Sequence[Place], chosen: Sequence[Choice], goals: Sequence[Goal], value: float) -> float | None:
    """Largest drift of the stages of a line with another value in all its places; None where one fails."""
    worst = 0.0
    for stage in dict.fromkeys(place.stage for place in group):
        choice, space = chosen[stage], chosen[stage].space
        roles = {place.role for place in group if place.stage == stage}
        index = []
        for role, i in zip(space.roles, choice.index, strict=True):
            at = np.flatnonzero(space.lists[role].nominal == value) if role in roles else np.array([i])
            if not at.size:
                return None
            index.append(int(at[0]))
        (judged,) = assess_all(space, np.array([index], dtype=np.int32), goals[stage], Meter())
        if judged.fails or judged.drift is None:
            return None
        worst = max(worst, judged.drift)
    return worst


def merges(
    bom: Sequence[Line], places: Sequence[Place], chosen: Sequence[Choice], sets: Sequence[Choices], names: Sequence[str]
) -> tuple[Merge, ...]:
    """What each shared line costs the stages that share it.

    Parameters
    ----------
    bom : sequence of Line
        The lines.
    places : sequence of Place
        Every resistor.
    chosen : sequence of Choice
        Candidate of each stage.
    sets : sequence of Choices
        Every candidate of each stage within its allowance, those that never help among them.
    names : sequence of str
        Name of each stage.

    Returns
    -------
    tuple of Merge
        One for each line that two stages or more share.
    """
    part_of = {place.designator: place.part for place in places}
    fitted = dict.fromkeys(place.part for place in places)
    found = []
    for line in bom:
        own = part_of[line.designators[0]]
        stages = dict.fromkeys(place.stage for place in places if place.part == own)
        if len(stages) < 2:
            continue
        shares = []
        for stage in stages:
            numbers = tuple(p.designator for p in places if p.stage == stage and p.part == own)
            other = _without(sets[stage].kept, [part for part in fitted if part != own], own)
            cost = None if other is None else max(0.0, chosen[stage].drift - other.drift)
            shares.append(
                Share(
                    stage=names[stage], designators=numbers, cost=cost, instead={} if other is None else other.resistors
                )
            )
        merge = Merge(item=line.item, value=line.value, designators=line.designators, shares=tuple(shares), text="")
        found.append(replace(merge, text=_merge_words(merge)))
    return tuple(found)


def _without(kept: Iterable[Choice], others: Sequence[Part], own: Part) -> Choice | None:
    """The candidate of least drift that does without a line and needs one line of its own at most."""
    for choice in kept:
        open_needs = [need for need in choice.pieces if not any(part.serves(need) for part in others)]
        if len(open_needs) <= 1 and not any(own.serves(need) for need in choice.pieces):
            return choice
    return None


def _merge_words(merge: Merge) -> str:
    which = " and ".join(", ".join(share.designators) for share in merge.shares)
    costs, free = [], []
    for share in merge.shares:
        if share.cost is None:
            costs.append(f"{share.stage} has nothing else within its allowance")
        elif share.cost < NOTHING:
            free.append(share.stage)
        else:
            costs.append(f"costs {share.stage} {percent(share.cost).removesuffix(' %')} points of drift")
    words = "; ".join(costs + ([f"costs {' and '.join(free)} nothing"] if free else []))
    return f"{merge.value} shared by {which}: {words}"
