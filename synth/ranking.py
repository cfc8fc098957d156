"""The order of candidates, what they are ranked by, and which are worth a look for another reason."""

from __future__ import annotations

import difflib
import math
from collections.abc import Collection, Sequence

from synth.answer import Alternative, Candidate
from synth.networks import NETWORKS
from synth.quantities import format_quantity
from synth.search import AXES, Axis
from synth.spaces import Goal, Space, goal_of
from synth.stage import Stage, StageError

WORTH = 0.02
"""Relative gain from which another candidate is worth a look [-]."""
DIGITS = 12
"""Significant digits of drift that order candidates; beyond them arithmetic noise would."""


def order_key(candidate: Candidate, roles: Sequence[str], on_board: Collection[float] = ()) -> tuple[object, ...]:
    """Key that sorts candidates from best to worst.

    Parameters
    ----------
    candidate : Candidate
        Any rank.
    roles : sequence of str
        Role order of its network.
    on_board : collection of float
        Values that the board has already [ohm].

    Returns
    -------
    tuple
        Score, or else drift, rounded to 12 significant digits, number of distinct values that the board does not have,
        centring, supply current, number of resistors, number of distinct values, network name, resistor values in role
        order, values of the parts.
    """
    values = [candidate.resistors[role] for role in roles if role in candidate.resistors]
    pieces = candidate.pieces.values()
    return (
        float(f"{candidate.drift.q_point if candidate.score is None else candidate.score:.{DIGITS - 1}e}"),
        len(set(pieces) - set(on_board)) if on_board else 0,
        candidate.centring,
        candidate.supply_current,
        len(pieces),
        len(set(pieces)),
        candidate.network,
        tuple(values),
        tuple(pieces),
    )


def read_goal(stage: Stage, metric: str) -> Goal:
    """What candidates are ranked by.

    Parameters
    ----------
    stage : Stage
        The request.
    metric : str
        ``corners``: the largest drift over the box; ``ic``, or the voltage that has a target: that drift alone; ``rss``: the
        largest root sum square; or weights such as ``ic=1, vce=0.5``: the largest drift, each times its weight.

    Returns
    -------
    Goal
        Targets and weights.

    Raises
    ------
    StageError
        If the text is none of these.
    """
    aims = tuple(goal_of(stage).aims)
    accepted = f"corners, rss, {', '.join(aims)}, or weights such as 'ic=1, {aims[-1]}=0.5'"
    word = metric.strip().lower()
    if word in ("corners", "rss"):
        return goal_of(stage, rss=word == "rss")
    if word in aims:
        return goal_of(stage, {word: 1.0})
    if "=" not in word:
        near = _near(word, ("corners", "rss", *aims))
        raise StageError("metric", metric, "which is no measure of this stage", accepted, near)
    weights: dict[str, float] = {}
    for entry in word.split(","):
        name, _, number = (part.strip() for part in entry.partition("="))
        if name not in aims or name in weights:
            why = "which is weighed twice" if name in weights else "which has no target"
            raise StageError("metric", name, why, f"weights of {', '.join(aims)}", _near(name, aims))
        weights[name] = _weight(name, number)
    if not any(weights.values()):
        raise StageError("metric", metric, "where nothing counts", "at least one weight above 0", ("ic=1",))
    return goal_of(stage, weights)


def _weight(name: str, text: str) -> float:
    try:
        weight = float(text)
    except ValueError:
        weight = math.nan
    if not 0.0 <= weight < math.inf:
        raise StageError("metric", f"{name}={text}", "whose weight is no number", "a number of 0 or more", (f"{name}=1",))
    return weight


def _near(word: str, words: Collection[str]) -> list[str]:
    return difflib.get_close_matches(word, words, n=1)


def read_axes(text: str, spaces: Sequence[Space]) -> tuple[Axis, ...]:
    """Further axes of a frontier.

    Parameters
    ----------
    text : str
        Names of `synth.search.AXES`, separated by commas.
    spaces : sequence of Space
        What is searched.

    Returns
    -------
    tuple of Axis
        In that order.

    Raises
    ------
    StageError
        If a name is unknown, stands twice, or means nothing for these networks and lists.
    """
    names = [name.strip().lower().replace("-", "_") for name in text.split(",")]
    for k, name in enumerate(names):
        if name not in AXES:
            accepted = f"some of {', '.join(AXES)}, separated by commas"
            raise StageError("frontier", name, "which is no axis of a frontier", accepted, _near(name, AXES))
        if name in names[:k]:
            raise StageError("frontier", text, f"where {name} stands twice", "each axis once")
        if name == "price" and not all(space.prices for space in spaces):
            reason = "but not every role has a stock list with a price on every value"
            raise StageError("frontier", name, reason, "resistors.stock with a column price")
        if AXES[name].of_signal and not any(space.network.takes_signal for space in spaces):
            networks = " or ".join(dict.fromkeys(space.network.name for space in spaces))
            raise StageError("frontier", name, f"which means nothing for {networks}", "another axis", ("supply_current",))
    return tuple(AXES[name] for name in names)


def alternatives(candidates: Sequence[Candidate]) -> tuple[Alternative, ...]:
    """Listed candidates that beat the first one in something else.

    Parameters
    ----------
    candidates : sequence of Candidate
        Ranked, best first.

    Returns
    -------
    tuple of Alternative
        Least supply current, stiffest-fed signal path (highest resistance of the base feed), fewest distinct values; only
        where another candidate than the first is better in it.
    """
    if len(candidates) < 2:
        return ()
    best = candidates[0]
    found = []
    thrifty = min(candidates, key=lambda c: (c.supply_current, c.rank))
    if thrifty.supply_current < best.supply_current * (1.0 - WORTH):
        text = f"{format_quantity(thrifty.supply_current, 'current')} from the supply at nominal, instead of "
        text += format_quantity(best.supply_current, "current")
        found.append(Alternative(reason="least current", rank=thrifty.rank, text=text))
    light = max(candidates, key=lambda c: (c.base_feed, -c.rank))
    takes_signal = all(NETWORKS[c.network].takes_signal for c in (best, light))
    if takes_signal and light.base_feed > best.base_feed * (1.0 + WORTH):
        text = f"base feed of {format_quantity(light.base_feed, 'resistance')} loads the signal less than "
        text += format_quantity(best.base_feed, "resistance")
        found.append(Alternative(reason="highest base-feed resistance", rank=light.rank, text=text))
    plain = min(candidates, key=lambda c: (len(set(c.pieces.values())), c.rank))
    count, first = len(set(plain.pieces.values())), len(set(best.pieces.values()))
    if count < first:
        text = f"{count} different value{'s' if count > 1 else ''} to stock instead of {first}"
        found.append(Alternative(reason="fewest distinct values", rank=plain.rank, text=text))
    return tuple(found)
