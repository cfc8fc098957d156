"""What would make a good answer better or cheaper: other values, better parts, coarser parts; searches again."""

from __future__ import annotations

import math
from collections.abc import Collection, Iterator, Mapping
from dataclasses import replace

import numpy as np

from synth.advice.levers import REGULATION, finer_tolerance, lower_coefficient, narrowed, other_networks
from synth.advice.purse import Purse
from synth.answer import Alternate, Floor, Outlook
from synth.catalogue import series_tolerance
from synth.parts import Parts
from synth.preferred import series_values
from synth.quantities import RestpointError, format_exact, format_quantity
from synth.spaces import Space, spaces_of
from synth.stage import Stage

FINE = 768
"""Values a decade that stand for any value at all, 0.3 % apart: the drift moves by far less than a neighbour of E192 would."""
ANY = "any value"
COMPARED = ("E12", "E24", "E96", "E192")
"""Series whose best drift is compared with that."""
LOOSE = 0.05
"""Tolerance of the coarse class that a role may do with [-]."""
SMALL = 5e-4
"""Change of the drift that is not worth a line [-]."""


def outlook(stage: Stage, drift: float) -> Outlook:
    """What other values, better parts or cheaper parts would do to the best drift.

    Parameters
    ----------
    stage : Stage
        A request that something meets.
    drift : float
        Its best drift [-].

    Returns
    -------
    Outlook
        Every figure is the drift of a real candidate, found by a search of its own and within half a per cent of the best.
    """
    purse = Purse()
    floors = [Floor(values=name, drift=found) for name, found in _floors(stage, purse)]
    upgrades = [_tried(stage, name, change, drift, purse) for name, change in _upgrades(stage)]
    savings = [_tried(stage, name, change, drift, purse) for name, change in _savings(stage)]
    better = [u for u in upgrades if u is not None and u.drift is not None and u.drift < drift - SMALL]
    cheaper = [s for s in savings if s is not None]
    return Outlook(
        drift=drift,
        floors=tuple(floors),
        upgrades=tuple(sorted(better, key=lambda u: np.inf if u.drift is None else u.drift)),
        savings=tuple(sorted(cheaper, key=lambda s: np.inf if s.drift is None else s.drift)),
    )


def _tried(stage: Stage, name: str, change: Mapping[str, str], drift: float, purse: Purse) -> Alternate | None:
    """A change with the best drift after it; None where it is refused or was not settled."""
    try:
        changed = stage.with_keys(dict(change))
    except RestpointError:
        return None
    outcome = purse.search(changed)
    if outcome.found:
        return Alternate(name=name, change=change, drift=outcome.found[0].drift)
    return Alternate(name=name, change=change, drift=None) if outcome.status == "infeasible" else None


# --- Values ---------------------------------------------------------------------------------------------------------


def _floors(stage: Stage, purse: Purse) -> Iterator[tuple[str, float]]:
    """Best drift with the values of a series, or nearly any, in every role that is free; bands stay as they are."""
    free = {role for role, setting in stage.roles.items() if not setting.values and setting.stock is None}
    if not free:
        return
    for name in (*COMPARED, ANY):
        spaces = [space for own in spaces_of(stage) if (space := _with_values(own, stage, free, name)) is not None]
        outcome = purse.search(stage, spaces=spaces)
        if outcome.found:
            yield name, outcome.found[0].drift


def _with_values(space: Space, stage: Stage, free: Collection[str], name: str) -> Space | None:
    """A space with the values of a series, or nearly any; None where a range holds none of them."""
    lists = dict(space.lists)
    for role in lists:
        if role not in free:
            continue
        (low, high), own = (stage.role(role).range.low, stage.role(role).range.high), lists[role]
        count = 1 + math.floor(FINE * math.log10(high / low))
        inside = np.geomspace(low, high, count) if name == ANY else series_values(name, low, high)
        if not inside.size:
            return None
        lists[role] = Parts(
            nominal=inside,
            band=np.full(inside.size, own.band[0]),
            tcr_low=np.full(inside.size, own.tcr_low[0]),
            tcr_high=np.full(inside.size, own.tcr_high[0]),
        )
    return replace(space, lists=lists)


# --- Parts ----------------------------------------------------------------------------------------------------------


def _upgrades(stage: Stage) -> Iterator[tuple[str, Mapping[str, str]]]:
    """Single changes that cost something and may buy less drift."""
    for grade in finer_tolerance(stage)[:1]:
        yield f"resistors of {grade.change['resistors.tolerance']}", grade.change
    for grade in lower_coefficient(stage)[:1]:
        yield f"resistors of {grade.change['resistors.tcr']}", grade.change
    bins = narrowed("transistor.hfe", stage.transistor.hfe)
    if bins:
        change = bins[len(bins) // 2].change
        yield "a gain bin half as wide", change
    for rail, spread in stage.rails.items():
        if spread.width > 2.0 * 0.021 * spread.nominal:
            yield f"{rail} from a regulator", {f"supply.{rail}": f"{format_exact(spread.nominal, 'voltage')} ± {REGULATION}"}
    share = stage.limits.get("collector_share")
    if share is not None and share.low > 0.0:
        text = f">= {format_exact(float(f'{0.7 * share.low:.3g}'), 'ratio')}"
        yield "more of the voltage across re", {"limits.collector_share": text}
    bleeder = stage.limits.get("bleeder_current")
    if bleeder is not None:
        yield "twice the bleeder current", {"limits.bleeder_current": f"<= {format_quantity(2.0 * bleeder.high, 'current')}"}
    if stage.reference is None and "diode_divider" not in stage.networks:
        yield "a diode under the divider", {"network": "diode_divider", "reference.kind": "diode"}
    for network in (other for other in other_networks(stage) if other.reference != "needed"):
        yield f"network {network.name}", {"network": network.name}


def _savings(stage: Stage) -> Iterator[tuple[str, Mapping[str, str]]]:
    """Single changes that save something and may cost drift."""
    for role, setting in stage.roles.items():
        if setting.tolerance < LOOSE * (1.0 - 1e-9) and setting.stock is None:
            yield f"{role.upper()} of 5 %", {f"resistors.{role}.tolerance": "5 %"}
    series = {setting.series for setting in stage.roles.values()}
    if any(series_tolerance(name) < LOOSE for names in series for name in names):
        tolerance = format_exact(max(setting.tolerance for setting in stage.roles.values()), "ratio")
        yield "values of E24 alone", {"resistors.series": "E24", "resistors.tolerance": tolerance}
    coefficient = max(max(abs(s.tcr.low), abs(s.tcr.high)) for s in stage.roles.values())
    if coefficient < 200e-6:
        yield "resistors of 200 ppm/K", {"resistors.tcr": "200 ppm/K"}
