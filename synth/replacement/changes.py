"""How few resistors have to change: an exact search for each number of changes, over every set of roles of that size.

A kept role has a list of one value, the one fitted; a changed role has every value that it may have but that one. All sets
of the same size compete in one search, so that the best of each size is proved, and no size can be skipped by bad luck.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import reduce
from itertools import combinations

import numpy as np

from synth.parts import Parts
from synth.search import Outcome, search
from synth.spaces import Found, Goal, Space

Progress = Callable[[float, float, int], bool]

SAME_VALUE = 1e-9
"""Relative difference below which a value is the one fitted: far below any tolerance, far above rounding."""


@dataclass(frozen=True, kw_only=True)
class Level:
    """What one number of changed resistors can do: how many change, the sets of roles tried, what the search found."""

    changes: int
    sets: tuple[tuple[str, ...], ...]
    outcome: Outcome


def other_values(values: Parts, fitted: float) -> Parts | None:
    """The values of a list that would be a change.

    Parameters
    ----------
    values : Parts
        Every value that a role may have.
    fitted : float
        The value fitted today [ohm].

    Returns
    -------
    Parts or None
        Without the value fitted; None if nothing is left.
    """
    other = np.flatnonzero(np.abs(values.nominal / fitted - 1.0) > SAME_VALUE)
    return values.take(other) if other.size else None


def joined(lists: Sequence[Parts]) -> Parts:
    """One list of several.

    Parameters
    ----------
    lists : sequence of Parts
        Of equal values the one of the earliest list stays.

    Returns
    -------
    Parts
        Ascending.
    """
    if len(lists) == 1:
        return lists[0]
    every = reduce(Parts.joined, lists)
    _, first = np.unique(every.nominal, return_index=True)
    return every.take(first)


def levels(
    fitted: Space, lists: Mapping[str, Parts], goal: Goal, *, top: int = 1, progress: Progress | None = None
) -> list[Level]:
    """The best candidates for each number of changed resistors.

    Parameters
    ----------
    fitted : Space
        The resistors fitted, as a space of one candidate.
    lists : mapping of str to Parts
        Every value of each role that may change.
    goal : Goal
        What drift is measured from.
    top : int
        How many candidates of each number of changes to prove [-].
    progress : callable, optional
        See `synth.search.search`.

    Returns
    -------
    list of Level
        By ascending number of changes, from none. Equal to sorting every combination by the number of roles whose value is
        not the one fitted, then by drift.
    """
    others = {}
    for role in fitted.roles:
        if role in lists:
            found = other_values(lists[role], float(fitted.lists[role].nominal[0]))
            if found is not None:
                others[role] = found
    result = []
    for changes in range(len(others) + 1):
        sets = tuple(combinations(others, changes))
        spaces = [replace(fitted, lists={**fitted.lists, **{role: others[role] for role in chosen}}) for chosen in sets]
        outcome = search(spaces, goal, top=top, progress=progress)
        result.append(Level(changes=changes, sets=sets, outcome=outcome))
        if outcome.status in ("feasible", "unknown"):
            break
    return result


def single_changes(fitted: Space, lists: Mapping[str, Parts], goal: Goal) -> dict[str, Found | None]:
    """The best change of each role alone.

    Parameters
    ----------
    fitted : Space
        The resistors fitted, as a space of one candidate.
    lists : mapping of str to Parts
        Every value of each role that may change.
    goal : Goal
        What drift is measured from.

    Returns
    -------
    dict of str to Found or None
        By role; None where no value of it qualifies while the others stay.
    """
    found: dict[str, Found | None] = {}
    for role in fitted.roles:
        other = other_values(lists[role], float(fitted.lists[role].nominal[0])) if role in lists else None
        if other is not None:
            outcome = search([replace(fitted, lists={**fitted.lists, role: other})], goal, top=1)
            found[role] = outcome.found[0] if outcome.found else None
    return found


def whole_space(fitted: Space, lists: Mapping[str, Parts]) -> Space:
    """Every combination of a refit in one space, whatever the number of changes.

    Parameters
    ----------
    fitted : Space
        The resistors fitted, as a space of one candidate.
    lists : mapping of str to Parts
        Every value of each role that may change.

    Returns
    -------
    Space
        Kept roles with one value, the others with all of theirs and the one fitted.
    """
    both = {role: joined([fitted.lists[role], lists[role]]) for role in fitted.roles if role in lists}
    return replace(fitted, lists={**fitted.lists, **both})
