"""From the texts of a stage to its resolved values: defaults, tables, refusals, and what had to be assumed."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

from synth.networks import NETWORKS
from synth.quantities import Spread, format_quantity
from synth.stage_keys import KEYS, ROLES, StageError
from synth.stage_resolve.distribution import read_lot
from synth.stage_resolve.limits import read_limits
from synth.stage_resolve.measured import as_measured, read_measured
from synth.stage_resolve.reference import read_reference
from synth.stage_resolve.request import Assumption, Request, StageWarning
from synth.stage_resolve.resistors import (
    RoleSetting,
    band,
    check_drops,
    needing,
    no_role,
    read_fitted,
    read_fitted_pairs,
    read_on_board,
    read_roles,
    read_stock,
    rival,
)
from synth.stage_resolve.signal import note_upper, read_corner, read_signal
from synth.stage_resolve.transistor import check_junction, read_policy, read_ratings, read_replacement, read_transistor
from synth.stage_resolve.wanted import read_networks, read_rails, read_targets, read_temperature
from synth.stress import TransistorRatings
from synth.transistor import Transistor

__all__ = ["Assumption", "RoleSetting", "StageWarning", "band", "needing", "no_role", "resolve", "rival"]

FORCED_GAIN = 10.0
"""IC/IB of a saturated switch [-]: common practice, and the test condition of most data sheets."""


def resolve(given: Mapping[str, str], folder: Path) -> dict[str, Any]:
    """The content of a stage.

    Parameters
    ----------
    given : mapping of str to str
        Text of every key given, by dotted path.
    folder : Path
        Where the paths in it start.

    Returns
    -------
    dict
        Every attribute of `synth.stage.Stage` by name, SI.

    Raises
    ------
    StageError
        If the stage contradicts itself.
    """
    request = Request(given, folder)
    rails = read_rails(request)
    networks, any_network = read_networks(request, rails)
    ic, voltages = read_targets(request, networks, rails)
    # Never 0: `targets` refuses a stage without a target for IC.
    current = ic.nominal or 0.0
    temperature = read_temperature(request)
    measured = read_measured(request)
    transistor = as_measured(request, read_transistor(request, ic), measured)
    check_junction(request, transistor, current, temperature.high)
    vce = voltages.get("vce")
    if vce is not None and vce.nominal is not None and vce.nominal <= transistor.vce_sat:
        raise _switch(request, rails, transistor, current)
    reference = read_reference(request, networks, transistor, current, rails)
    load_rail = rails.get("vload", rails["vcc"]) if any(NETWORKS[name].sinks for name in networks) else None
    roles = read_roles(request, networks, any_network, temperature)
    check_drops(request, networks, ic, voltages, rails, roles)
    ratings = read_ratings(request)
    signal = read_signal(request)
    if signal.split:
        note_upper(request, current, rails)
    has_styles = any(setting.style for setting in roles.values())
    return {
        "name": request.value("name") or "stage",
        "networks": networks,
        "any_network": any_network,
        "rails": MappingProxyType(rails),
        "ground": request.take("supply.ground", "middle" if "vee" in rails else "negative"),
        "ic": ic,
        "voltages": MappingProxyType(voltages),
        "transistor": transistor,
        "reference": reference,
        "ratings": ratings,
        "derating": read_policy(request, has_styles or ratings != TransistorRatings()),
        "signal": signal,
        "corner": read_corner(request),
        "temperature": temperature,
        "limits": MappingProxyType(read_limits(request, current, transistor, reference, load_rail, has_styles, ratings)),
        "values": MappingProxyType(read_fitted(request) | {r: s.nominal for r, s in measured.items() if r in ROLES}),
        "fitted_pairs": MappingProxyType(read_fitted_pairs(request, signal.split)),
        "lot": read_lot(request, rails, transistor, reference, roles, temperature),
        "measured": MappingProxyType(measured),
        "replacement": MappingProxyType(read_replacement(request)),
        "roles": MappingProxyType(roles),
        "on_board": read_on_board(request),
        "assumed": (*(request.assumed[path] for path in KEYS if path in request.assumed), *request.notes),
        "warnings": tuple(request.warnings),
        "given": MappingProxyType({path: request.given[path] for path in KEYS if path in request.given}),
        "folder": request.folder,
        "_stock": MappingProxyType(read_stock(request, roles)),
    }


def _switch(request: Request, rails: Mapping[str, Spread], transistor: Transistor, current: float) -> StageError:
    """The refusal of a saturated switch, with the request that would be meant."""
    least = format_quantity(transistor.vce_sat, "voltage")
    base = current / FORCED_GAIN
    feed = rails.get("vbb", rails["vcc"]).low
    drive = f"IB = {format_quantity(base, 'current')}"
    if feed > transistor.vbe.high:
        ohms = (feed - transistor.vbe.high) / base
        drive += f", about {format_quantity(ohms, 'resistance')} from {format_quantity(feed, 'voltage')} to the base"
    reason = (
        f"which is no more than VCE(sat) = {least}: a saturated switch is set by forced gain, not by a Q-point;"
        f" with IC/IB = {FORCED_GAIN:g} that is {drive}"
    )
    return request.refusal("target.vce", reason, f"more than {least}, the Q-point of an amplifier")
