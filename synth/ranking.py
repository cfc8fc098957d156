"""The order of candidates, and which of them are worth a look for another reason."""

from __future__ import annotations

from collections.abc import Collection, Sequence

from synth.answer import Alternative, Candidate
from synth.networks import NETWORKS
from synth.quantities import format_quantity

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
        Drift rounded to 12 significant digits, number of distinct values that the board does not have, centring, supply
        current, number of resistors, number of distinct values, network name, resistor values in role order, values of
        the parts.
    """
    values = [candidate.resistors[role] for role in roles if role in candidate.resistors]
    pieces = candidate.pieces.values()
    return (
        float(f"{candidate.drift.q_point:.{DIGITS - 1}e}"),
        len(set(pieces) - set(on_board)) if on_board else 0,
        candidate.centring,
        candidate.supply_current,
        len(pieces),
        len(set(pieces)),
        candidate.network,
        tuple(values),
        tuple(pieces),
    )


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
