"""What a stage is wanted to do, and where: supply, networks, targets, temperature."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from synth.networks import NETWORKS
from synth.quantities import Spread, Target, format_exact, format_quantity, format_spread
from synth.stage_keys import KEYS, ROLES, StageError
from synth.stage_resolve.request import Request, StageWarning
from synth.stage_resolve.resistors import needing, no_role

HOTTEST = 473.15
"""End of the temperatures at which the laws of the transistor are taken to hold, 200 °C [K]."""

VOLTAGES = ("vce", "vc", "ve")
"""Targets of which a stage has one besides IC."""

_RAILS = ("vcc", "vee", "vbb", "vload")


def read_rails(request: Request) -> dict[str, Spread]:
    """Rails by name, magnitudes [V]."""
    if "supply.vcc" not in request.given:
        raise request.refusal("supply.vcc", "which is not given", KEYS["supply.vcc"].accepted)
    rails: dict[str, Spread] = {rail: request.value(f"supply.{rail}") for rail in _RAILS if f"supply.{rail}" in request.given}
    for rail, spread in rails.items():
        if spread.low <= 0.0:
            reason = f"which goes down to {format_exact(spread.low, 'voltage')}"
            raise request.refusal(f"supply.{rail}", reason, "a magnitude above 0 V")
    return rails


def read_networks(request: Request, rails: Mapping[str, Spread]) -> tuple[tuple[str, ...], bool]:
    """Networks that are asked for, and whether that was any."""
    path = "network"
    named: tuple[str, ...] = request.take(path)
    fits = {name: [rail for rail in NETWORKS[name].rails if rail not in rails] for name in NETWORKS}
    has_voltage = any(f"target.{quantity}" in request.given for quantity in VOLTAGES)
    unused = [role for role in ROLES if request.value(f"resistors.{role}.use") == "no"]
    if "any" not in named:
        found = named
    elif len(named) > 1:
        raise request.refusal(path, "which names others beside any", "any alone, or a list without it", "any")
    else:
        found = tuple(name for name, missing in fits.items() if not missing)
        found = tuple(name for name in found if not any(needing(role, [name], request.has_reference) for role in unused))
        # A sink leaves VCE to its load: it meets a request for IC alone, and no other network does.
        found = tuple(name for name in found if NETWORKS[name].sinks != has_voltage)
        if "target.vc" in request.given:
            found = tuple(name for name in found if "c" not in NETWORKS[name].tied)
        found = tuple(name for name in found if request.has_reference or NETWORKS[name].reference != "needed")
    for name in found:
        for rail in fits[name]:
            needed = KEYS[f"supply.{rail}"]
            raise StageError(needed.path, None, f"is not given, but network {name} needs it", needed.accepted)
        if NETWORKS[name].reference == "needed" and not request.has_reference:
            accepted = '[reference] and below it kind = "diode", or another network'
            raise StageError("reference.kind", None, f"is not given, but network {name} needs it", accepted)
    if request.has_reference and not any(NETWORKS[name].reference != "no" for name in found):
        text = f"[reference] is given, but {' or '.join(found)} does not use it."
        request.warnings.append(StageWarning(name="unused_reference", text=text))
    for role in unused:
        if (needed_by := needing(role, found or tuple(NETWORKS), request.has_reference)) or not found:
            reason = f"without which {' or '.join(needed_by)} cannot do"
            raise request.refusal(f"resistors.{role}.use", reason, "yes, or a network that can do without it", "yes")
    for rail in rails:
        if not any(rail in (*NETWORKS[name].rails, *NETWORKS[name].optional_rails) for name in found):
            text = f"supply.{rail} is given, but {' or '.join(found)} does not use it"
            request.warnings.append(StageWarning(name="unused_rail", text=text))
    _check_roles(request, tuple(NETWORKS) if "any" in named else found)
    return found, "any" in named


def _check_roles(request: Request, networks: Sequence[str]) -> None:
    """Refuse keys for roles that none of the networks has."""
    known = {role for name in networks for role in NETWORKS[name].role_names}
    for path in request.given:
        key = KEYS[path]
        role = key.leaf if key.table in ("values", "measured") else key.table.removeprefix("resistors.")
        if role in ROLES and role not in known:
            raise no_role(path, role, networks)


def read_targets(request: Request, networks: Sequence[str], rails: Mapping[str, Spread]) -> tuple[Target, dict[str, Target]]:
    """Target of IC, and the one voltage target if there is one."""
    if "target.ic" not in request.given:
        raise request.refusal("target.ic", "which is not given", KEYS["target.ic"].accepted)
    voltages = {quantity: request.value(f"target.{quantity}") for quantity in VOLTAGES if f"target.{quantity}" in request.given}
    ic = request.value("target.ic")
    sinks = [name for name in networks if NETWORKS[name].sinks]
    if len(voltages) > 1:
        first, second = list(voltages)[:2]
        raise request.refusal(f"target.{second}", f"but target.{first} is given too", "one of vce, vc and ve")
    tied = [name for name in networks if "c" in NETWORKS[name].tied]
    if "vc" in voltages and tied:
        raise request.refusal("target.vc", f"but the collector of {tied[0]} sits on its rail", "target.vce or target.ve")
    if sinks and len(sinks) < len(networks):
        accepted = "a sink alone, or networks without one"
        raise request.refusal("network", f"of which {' and '.join(sinks)} leaves VCE to its load", accepted)
    if sinks and "vce" in voltages:
        accepted = "target.ic alone or with target.ve, and limits.compliance for what the load may take"
        raise request.refusal("target.vce", f"which means nothing for {sinks[0]}: the load decides it", accepted)
    if not voltages and not sinks:
        raise request.refusal("target.vce", "which is not given", KEYS["target.vce"].accepted)
    if ic.nominal is None:
        raise request.refusal("target.ic", "which is a window without a target", "a target such as '2 mA' or '2 mA ± 15 %'")
    for path, target in {"target.ic": ic, **{f"target.{quantity}": t for quantity, t in voltages.items()}}.items():
        kind = KEYS[path].kind
        least = target.high if target.nominal is None else target.nominal
        if least <= 0.0 or -math.inf < target.low < 0.0:
            worst = min(value for value in (target.low, least) if value > -math.inf)
            reason = f"which goes down to {format_exact(worst, kind)}"
            accepted = f"a magnitude above 0 {'A' if kind == 'current' else 'V'}, for an npn and a pnp alike"
            raise request.refusal(path, reason, accepted)
    span = max(sum(rails[rail].nominal for rail in NETWORKS[name].rails) for name in networks)
    for quantity, target in voltages.items():
        wanted = target.low if target.nominal is None else target.nominal
        if wanted >= span:
            reason = f"which is not below the {format_quantity(span, 'voltage')} between the rails"
            accepted = f"less than {format_quantity(span, 'voltage')}, or a higher supply"
            raise request.refusal(f"target.{quantity}", reason, accepted)
    return ic, voltages


def read_temperature(request: Request) -> Spread:
    """Temperature around the stage [K]."""
    path = "ambient.temperature"
    spread: Spread = request.take(path)
    if spread.low <= 0.0 or spread.high > HOTTEST:
        inside = Spread(*(min(max(value, 218.15), HOTTEST) for value in (spread.low, spread.nominal, spread.high)))
        reason = "which goes beyond the temperatures at which the laws hold"
        raise request.refusal(path, reason, "above -273.15 °C and up to 200 °C", format_spread(inside, "temperature"))
    return spread
