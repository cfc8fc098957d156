"""Limits: as given, with the default of each that has one."""

from __future__ import annotations

import math

from synth.limits import RULES
from synth.quantities import Interval, Spread, format_quantity
from synth.reference import Reference
from synth.stage_keys import KEYS
from synth.stage_resolve.request import Request
from synth.stress import TransistorRatings
from synth.transistor import T0, Transistor, thermal_voltage


def read_limits(
    request: Request,
    current: float,
    transistor: Transistor,
    reference: Reference | None,
    load_rail: Spread | None,
    has_styles: bool,
    ratings: TransistorRatings,
) -> dict[str, Interval]:
    """Limits by name, in units of what they limit; those that are switched off are left out."""
    least_base = transistor.hfe.low * float(thermal_voltage(T0)) / current
    usual = {
        "bleeder_current": (Interval(-math.inf, current / 10.0), "a tenth of the target IC"),
        "collector_share": (Interval(0.5, math.inf), "half the voltage of rc and re"),
        "base_resistance": (Interval(least_base, math.inf), "hFE min times VT over the target IC"),
    }
    if load_rail is not None:
        usual["compliance"] = (Interval(load_rail.nominal / 3.0, math.inf), "a third of the load's rail")
    if reference is not None:
        most = 2.0 if reference.kind == "diode" else 5.0
        line = Interval(reference.current / 2.0, reference.current * most)
        usual["reference_current"] = (line, f"half to {most:g} times its test current, where its straight line holds")
    whole = Interval(-math.inf, 1.0)
    if has_styles:
        usual["resistor_stress"] = (whole, "all that the derating policy allows")
    if ratings != TransistorRatings():
        usual["transistor_stress"] = (whole, "all that the derating policy allows")
    limits: dict[str, Interval] = {}
    for name in RULES:
        path = f"limits.{name}"
        limit: Interval | None = request.value(path)
        if path not in request.given and name in usual:
            value, why = usual[name]
            limit = request.take(path, _rounded(value, KEYS[path].kind), f"not given: {why}") and value
        if limit is not None:
            limits[name] = limit
    return limits


def _rounded(limit: Interval, kind: str) -> str:
    if math.isfinite(limit.low) and math.isfinite(limit.high):
        return " : ".join(format_quantity(end, kind) for end in (limit.low, limit.high))
    is_least = math.isinf(limit.high)
    return f"{'>=' if is_least else '<='} {format_quantity(limit.low if is_least else limit.high, kind)}"
