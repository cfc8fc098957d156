"""A candidate of a board as `check` judges it: each resistor in the class that it was chosen in."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from synth.answer import Candidate
from synth.boards.candidates import Choice
from synth.boards.purchase import Need
from synth.networks import NETWORKS
from synth.quantities import Spread
from synth.solve import check
from synth.stage import Stage


def judged(stage: Stage, choice: Choice) -> Candidate:
    """A candidate, judged over its whole box.

    Parameters
    ----------
    stage : Stage
        The request.
    choice : Choice
        One of its candidates.

    Returns
    -------
    Candidate
        With verdicts, stress, and its neighbours among the values that the board could take.
    """
    values = {role: tuple(dict.fromkeys(choice.space.lists[role].nominal.tolist())) for role in choice.needs}
    return judged_values(stage, choice.network, choice.resistors, choice.needs, values)


def judged_values(
    stage: Stage,
    network: str,
    resistors: Mapping[str, float],
    needs: Mapping[str, Need],
    values: Mapping[str, Sequence[float]],
) -> Candidate:
    """Resistors of a network, judged over its whole box.

    Parameters
    ----------
    stage : Stage
        The request.
    network : str
        One of its networks.
    resistors : mapping of str to float
        Value of every role [ohm].
    needs : mapping of str to Need
        Class of those that the board buys.
    values : mapping of str to sequence of float
        What each of these could be instead [ohm].

    Returns
    -------
    Candidate
        The verdict of `check`.
    """
    roles = NETWORKS[network].role_names
    tables = [key.split(".") for key in stage.given if key.startswith(("resistors.", "values."))]
    strange = {".".join(t) for t in tables if (len(t) == 3 and t[1] not in roles) or t[0] == "values"}
    keys: dict[str, Any] = dict.fromkeys(strange)
    keys["network"] = network
    for role, value in resistors.items():
        keys[f"values.{role}"] = value
        if role in needs:
            need = needs[role]
            keys[f"resistors.{role}.tolerance"] = need.tolerance
            keys[f"resistors.{role}.tcr"] = Spread(need.tcr_low, (need.tcr_low + need.tcr_high) / 2.0, need.tcr_high)
            keys[f"resistors.{role}.stock"] = None
            keys[f"resistors.{role}.values"] = values.get(role)
    if needs:
        keys["resistors.stock"] = None
    best = check(stage.with_keys(keys)).best
    assert best is not None
    return best
