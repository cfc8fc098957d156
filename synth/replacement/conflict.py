"""Why no change of any number of resistors will do, and which change of the request would."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import replace

from synth.advice import why_nothing_qualifies
from synth.answer import Infeasible, Relaxation
from synth.search import Outcome, search
from synth.spaces import Goal, Space
from synth.stage import Stage
from synth.stage_keys import Given

ACTIVE = "vce"
"""The limit that keeps the transistor active: physics, not a request."""
EFFORT = 3e6
"""Q-point solves that one search may take; what it leaves open is not claimed."""
ABOUT_THE_REQUEST = ("limits", "target", "supply", "ambient", "transistor")
"""Tables whose keys can change while resistors, network and board stay."""


def why_no_change_will_do(stage: Stage, whole: Space, keep: Collection[str], goal: Goal) -> Infeasible:
    """Find the limits that conflict, and changes of the request that would do.

    Parameters
    ----------
    stage : Stage
        The request with the new transistor.
    whole : Space
        Every combination of the refit.
    keep : collection of str
        Roles that must not change.
    goal : Goal
        What drift is measured from.

    Returns
    -------
    Infeasible
        `binding` is a smallest conflicting set; every change of `relaxations` is verified by a search of its own.

    Notes
    -----
    Deletion filter: each limit in turn is dropped for good if the rest still conflict.
    """

    def without(names: Collection[str], first: bool) -> Outcome:
        space = replace(whole, requirements=tuple(need for need in whole.requirements if need.limit not in names))
        return search([space], goal, top=1, first=first, most=EFFORT)

    given = {need.limit for need in whole.requirements if need.limit.startswith("target.")} | stage.limits_given
    names = [name for name in dict.fromkeys(need.limit for need in whole.requirements) if name != ACTIVE or name in given]
    # What nobody asked for is given up first.
    names.sort(key=lambda name: name in given)
    dropped: set[str] = set()
    for name in names:
        if without(dropped | {name}, True).status == "infeasible":
            dropped.add(name)
    binding = tuple(name for name in names if name not in dropped) or (ACTIVE,)
    best: dict[str, float | None] = {}
    unsettled = []
    for name in binding:
        outcome = without({name}, False)
        best[name] = outcome.found[0].drift if outcome.found else None
        unsettled += [name] if outcome.status == "unknown" else []
    advice = why_nothing_qualifies(_as_request(stage, whole, keep))
    return Infeasible(
        binding=binding,
        best_without=best,
        relaxations=tuple(_renamed(r) for r in advice.relaxations if _keeps_the_board(r)),
        unsettled=tuple(unsettled),
    )


def _as_request(stage: Stage, whole: Space, keep: Collection[str]) -> Stage:
    """A request for new values that leaves alone what the refit leaves alone."""
    keys: dict[str, Given] = {"network": whole.network.name}
    for role in keep:
        keys[f"resistors.{role}.values"] = float(whole.lists[role].nominal[0])
    for part in whole.network.roles:
        if whole.network.optional(part, stage.reference is not None) and part.name not in keep:
            keys[f"resistors.{part.name}.use"] = "yes" if part.name in whole.roles else "no"
    return stage.with_keys(keys)


def _keeps_the_board(relaxation: Relaxation) -> bool:
    return all(key.partition(".")[0] in ABOUT_THE_REQUEST for key in relaxation.change)


def _renamed(relaxation: Relaxation) -> Relaxation:
    """What is advised of the transistor is advised of the one that is put in."""
    own = {key.replace("transistor.", "replacement.", 1): text for key, text in relaxation.change.items()}
    return replace(relaxation, change=own)
