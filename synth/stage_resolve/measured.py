"""Parts that were measured, in place of their nominal values, and the readings of a meter on the bench."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping

from synth.quantities import Spread, format_exact
from synth.stage_keys import ROLES
from synth.stage_resolve.request import Request, StageWarning
from synth.transistor import Transistor

PARTS = ("hfe", "vbe")
"""Figures of the transistor that can be measured."""
RAILS = ("vcc", "vee", "vbb", "vload")
READINGS = ("vb", "ve", "vc")
"""Node voltages that a meter reads against 0 V."""


def read_measured(request: Request) -> dict[str, Spread]:
    """What was measured: roles [ohm], hfe [-], vbe and rails [V], temperature [K], and the readings vb ve vc [V]."""
    names = (*ROLES, *PARTS, *RAILS, "temperature", *READINGS)
    found: dict[str, Spread] = {n: request.value(f"measured.{n}") for n in names if f"measured.{n}" in request.given}
    for name, spread in found.items():
        if name not in (*READINGS, "temperature") and spread.low <= 0.0:
            raise request.refusal(f"measured.{name}", "which with its uncertainty goes down to 0", "a magnitude above 0")
    return found


def as_measured(request: Request, transistor: Transistor, measured: Mapping[str, Spread]) -> Transistor:
    """The transistor with its measured figures; warns of one outside what was expected."""
    for name in PARTS:
        if name not in measured:
            continue
        own, expected = measured[name], getattr(transistor, name)
        kind = {"hfe": "gain", "vbe": "voltage"}[name]
        if own.high < expected.low or own.low > expected.high:
            ends = f"{format_exact(expected.low, kind)} to {format_exact(expected.high, kind)}"
            text = f"measured {name} of {format_exact(own.nominal, kind)} lies outside the {ends} of the type or the stage."
            request.warnings.append(StageWarning(name="measured_outside", text=text))
        transistor = dataclasses.replace(transistor, **{name: own})  # type: ignore[arg-type]
    return transistor
