"""What the resistor of each role may be: the values of a stage with their bands, pairs of them, and what is fitted today."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from synth.networks.form import Array
from synth.parts import Pairs, Parts
from synth.preferred import JOINS, ValueList, pair_up
from synth.preferred.pairs import SERIES, SINGLE
from synth.quantities import Spread
from synth.stage import RoleSetting, Stage
from synth.stage_resolve.signal import upper_range


def fitted_in(stage: Stage, role: str) -> Parts:
    """The resistor or the pair of resistors fitted in a role.

    Parameters
    ----------
    stage : Stage
        The request.
    role : str
        A role of one of its networks.

    Returns
    -------
    Parts
        Of one element [ohm].
    """
    join, ohms = stage.fitted_pairs.get(role, (SINGLE, (stage.values[role],)))
    return made_up(stage, role, join, ohms)


def made_up(stage: Stage, role: str, join: int, ohms: Sequence[float]) -> Parts:
    """A resistor or a pair of them in a role.

    Parameters
    ----------
    stage : Stage
        The request.
    role : str
        A role of one of its networks.
    join : int
        Code of `synth.preferred.pairs.JOINS` [-].
    ohms : sequence of float
        Its parts [ohm].

    Returns
    -------
    Parts
        Of one element [ohm].
    """
    base = single_values(stage, role, ohms)
    # What was measured is the role as a whole.
    if join == SINGLE or role in stage.measured:
        return base
    first, second = (np.array([base.position(ohm)], dtype=np.int32) for ohm in ohms)
    return Parts.of_pairs(Pairs(base=base, join=np.array([join], dtype=np.int8), first=first, second=second))


def values_of(stage: Stage, role: str) -> Parts:
    """Everything that a role may be, pairs included where the stage allows any.

    Parameters
    ----------
    stage : Stage
        The request.
    role : str
        A role of one of its networks.

    Returns
    -------
    Parts
        Ascending, each with its band.
    """
    return list_of(stage, role, {})


def list_of(stage: Stage, role: str, known: dict[RoleSetting, Parts]) -> Parts:
    """Everything that a role may be; roles that may be the same share one list.

    Parameters
    ----------
    stage : Stage
        The request.
    role : str
        A role of one of its networks.
    known : dict of RoleSetting to Parts
        Lists made so far; gets this one.

    Returns
    -------
    Parts
        Ascending [ohm].
    """
    setting = replace(stage.role(role), use="yes")
    if setting not in known:
        known[setting] = choices(stage, role)
    return known[setting]


def choices(stage: Stage, role: str) -> Parts:
    """Single values of a role, and pairs of them where the stage allows any.

    Parameters
    ----------
    stage : Stage
        The request.
    role : str
        A role of one of its networks.

    Returns
    -------
    Parts
        Ascending [ohm].
    """
    setting, single = stage.role(role), single_values(stage, role)
    if setting.pairs == "no" or role in stage.measured:
        return single
    joins = frozenset(JOINS[1:]) if setting.pairs == "yes" else frozenset({setting.pairs})
    # The range binds the totals as it does the parts, but not values named one by one.
    low, high = (0.0, math.inf) if setting.values else (setting.range.low, setting.range.high)
    rated = setting.style is not None
    return Parts.of_list(pair_up(stage.value_list(role), joins, low, high, rated=rated, on_board=stage.on_board), single)


def prices_of(stage: Stage, lists: Mapping[str, Parts]) -> dict[str, Array]:
    """Price of each value of every role, if the stock lists give them all.

    Parameters
    ----------
    stage : Stage
        The request.
    lists : mapping of str to Parts
        What each role may be [ohm].

    Returns
    -------
    dict of str to ndarray
        In the currency of the lists [-]; empty where a price is missing.
    """
    found = {}
    for role, part in lists.items():
        each = stage.value_list(role).prices if stage.role(role).stock is not None else None
        if each is None or None in each:
            return {}
        row = np.array(each, dtype=float)
        if part.pairs is not None:
            row = row[part.pairs.first] + np.where(part.pairs.join == SINGLE, 0.0, row[part.pairs.second])
        if row.size != part.nominal.size:
            # Values fitted by the user need not lie in the drawer.
            return {}
        found[role] = row
    return found


def single_values(stage: Stage, role: str, values: Sequence[float] = ()) -> Parts:
    """Single values of a role with their bands.

    Parameters
    ----------
    stage : Stage
        The request.
    role : str
        A role of one of its networks.
    values : sequence of float
        Values to take in place of those that the stage allows [ohm].

    Returns
    -------
    Parts
        Ascending [ohm].
    """
    measured = stage.measured.get(role)
    setting, found = stage.role(role), stage.value_list(role, values if measured is None else (measured.nominal,))
    # A stock list states a symmetric coefficient for each row; a setting may be one-sided.
    own = setting.stock is not None
    return Parts(
        nominal=found.values,
        band=_tolerance(found, measured) + found.life,
        tcr_low=-found.tcr if own else np.full(len(found), setting.tcr.low),
        tcr_high=found.tcr if own else np.full(len(found), setting.tcr.high),
    )


def _tolerance(found: ValueList, measured: Spread | None) -> Array:
    """Tolerance of each value, or the uncertainty of a measured one [-]; the larger side counts for both."""
    if measured is None:
        return np.maximum(found.tolerance_low, found.tolerance_high)
    return np.full(len(found), max(measured.high / measured.nominal - 1.0, 1.0 - measured.low / measured.nominal))


def split_pairs(stage: Stage) -> list[tuple[float, Parts]]:
    """What a re in two parts may be, of which the upper one carries the signal.

    Parameters
    ----------
    stage : Stage
        The request, with a limit on gain.

    Returns
    -------
    list of (float, Parts)
        Every upper part [ohm] with the totals that it makes up with each lower one.
    """
    base, setting = single_values(stage, "re"), stage.role("re")
    least, most = upper_range(stage.ic.nominal or math.nan, stage.rails, stage.limits["gain"].low)
    found = []
    for k in np.flatnonzero((base.nominal >= least) & (base.nominal <= most)):
        every = base.nominal[k] + base.nominal
        inside = (every >= setting.range.low) & (every <= setting.range.high)
        # The range does not bind values named one by one.
        second = np.flatnonzero(inside | bool(setting.values)).astype(np.int32)
        if second.size:
            join, first = np.full(second.size, SERIES, dtype=np.int8), np.full(second.size, k, dtype=np.int32)
            pairs = Pairs(base=base, join=join, first=first, second=second)
            found.append((float(base.nominal[k]), Parts.of_pairs(pairs)))
    return found
