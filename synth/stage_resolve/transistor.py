"""The transistor: what a type brings, what is given in its place, what is assumed; its ratings under a policy."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from typing import Any, Literal

from synth import catalogue
from synth.catalogue import Derating, TransistorRow
from synth.quantities import Interval, RestpointError, Spread, Target, format_exact, format_quantity, parse
from synth.stage_keys import KEYS, nearest
from synth.stage_resolve.gain import from_table, read_early, read_gain, read_saturation
from synth.stage_resolve.request import Assumption, Request, StageWarning
from synth.stress import TransistorRatings, transistor_ratings
from synth.transistor import GAP_VOLTAGE, T0, Transistor

JUNCTION_ROOM = 10.0
"""Least ratio of the collector current to the saturation current at which the junction law holds [-]."""

_GERMANIUM = {"vbe": "0.15 V ± 50 mV", "vbe_ic": "1 mA", "vce_sat": "0.1 V"}
_RATINGS = ("vceo", "vebo", "ic_max", "ptot", "tj_max", "rth_ja")


def read_transistor(request: Request, ic: Target) -> Transistor:
    """The transistor of a stage with its target current [A]."""
    current = ic.nominal or 0.0
    kind = request.value("transistor.type")
    row = None if kind is None else catalogue.transistor(kind)
    material = _word(request, "material", row)
    polarity = _word(request, "polarity", row)
    usual = _GERMANIUM if material == "germanium" else {}
    hfe, hfe_rows = read_gain(request, row, current)
    va, va_vce = read_early(request, row)
    vbe, vbe_ic = _base_emitter(request, row, usual)
    model: Literal["junction", "fixed"] = request.take("transistor.vbe_model")
    icbo: Spread = _figure(request, "icbo", row and row.icbo_spread, row, "icbo_max_a")
    vce_sat = read_saturation(request, row, ic, usual.get("vce_sat", ""))
    if model == "junction" and vbe.high >= GAP_VOLTAGE[material]:
        gap = format_exact(GAP_VOLTAGE[material], "voltage")
        reason = f"which reaches the {gap} of the gap of {material}, where the junction law ends"
        raise request.refusal("transistor.vbe", reason, f"less than {gap}, or transistor.vbe_model 'fixed'")
    return Transistor(
        polarity=polarity,
        material=material,
        hfe=hfe,
        vbe=vbe,
        vbe_ic=vbe_ic,
        vbe_model=model,
        icbo=icbo,
        icbo_hot=_hot_limit(request, row, icbo),
        vce_sat=vce_sat,
        type="" if row is None else row.type,
        hfe_rows=hfe_rows,
        va=va,
        va_vce=va_vce,
    )


def check_junction(request: Request, transistor: Transistor, current: float, hottest: float) -> None:
    """Refuse a current [A] too near the saturation current at the hottest [K]."""
    saturation = float(transistor.saturation_current(hottest))
    if transistor.vbe_model == "junction" and current <= JUNCTION_ROOM * saturation:
        at = format_quantity(hottest, "temperature")
        least = format_quantity(JUNCTION_ROOM * saturation, "current")
        raise request.refusal(
            "target.ic",
            f"which is within {JUNCTION_ROOM:g} times of the saturation current,"
            f" {format_quantity(saturation, 'current')} at {at}: the junction law does not hold",
            f"more than {least}, or an ambient.temperature that stays below {at}",
        )


def _word(request: Request, leaf: str, row: TransistorRow | None) -> Any:
    """Polarity or material, which a type fixes."""
    path = f"transistor.{leaf}"
    if row is None:
        return request.take(path)
    fixed = getattr(row, leaf)
    if request.value(path) not in (None, fixed):
        raise request.refusal(path, f"but {row.type} is {fixed}", f"{fixed}, or another type", fixed)
    return request.take(path, fixed, from_table(row, leaf))


def _figure(request: Request, leaf: str, printed: Any, row: TransistorRow | None, *fields: str, text: str = "") -> Any:
    """A figure of the transistor: as given, else as the table prints it, else of a text."""
    path = f"transistor.{leaf}"
    if row is None:
        return request.take(path, text)
    if printed is None:
        return request.take(path, text, f"not given, and the table of transistors sets none for {row.type}")
    return request.take(path, KEYS[path].write(printed), from_table(row, *fields))


def _base_emitter(request: Request, row: TransistorRow | None, usual: Mapping[str, str]) -> tuple[Spread, float]:
    """VBE and the current at which it holds."""
    printed = row and row.vbe_spread
    given = ["transistor.vbe" in request.given, "transistor.vbe_ic" in request.given]
    if row is not None and printed is not None and given == [False, True]:
        at = format_exact(row.vbe_ic_a, "current")
        reason = f"but VBE comes from the table of transistors, at {at}"
        raise request.refusal("transistor.vbe_ic", reason, "this key together with transistor.vbe", at)
    vbe = _figure(request, "vbe", printed, row, "vbe_min_v", "vbe_max_v", text=usual.get("vbe", ""))
    at_current = None if row is None or printed is None else row.vbe_ic_a
    vbe_ic = _figure(request, "vbe_ic", at_current, row, "vbe_ic_a", text=usual.get("vbe_ic", ""))
    return vbe, vbe_ic


def _hot_limit(request: Request, row: TransistorRow | None, icbo: Spread) -> tuple[float, float] | None:
    """Printed hot limit of the leakage, unless the leakage given is above it."""
    if row is None or row.icbo_hot is None:
        return None
    limit, temperature = row.icbo_hot
    text = f"{format_exact(limit, 'current')} at {format_exact(temperature, 'temperature')}"
    if icbo.high > limit:
        text = f"the leakage given exceeds the hot limit of {row.type}, {text}, so it is taken to double per 10 K"
        request.warnings.append(StageWarning(name="hot_leakage", text=text))
        return None
    source = from_table(row, "icbo_hot_max_a", "icbo_hot_k")
    note = Assumption(key="transistor.icbo", value=text, why=f"hot limit {source.why}", evidence=source.evidence)
    request.notes.append(note)
    return row.icbo_hot


def read_ratings(request: Request) -> TransistorRatings:
    """What is known of the transistor's ratings: the type's, with the keys given in their place."""
    kind = request.value("transistor.type")
    given = {leaf: request.value(f"transistor.{leaf}") for leaf in _RATINGS if f"transistor.{leaf}" in request.given}
    for leaf, figure in given.items():
        if figure <= 0.0:
            example = KEYS[f"transistor.{leaf}"].example
            raise request.refusal(f"transistor.{leaf}", "which is no rating", "a rating above 0", example)
    found = TransistorRatings()
    if kind is not None:
        row = catalogue.transistor(kind)
        found = transistor_ratings(row, given.get("rth_ja"))
        _note_ratings(request, row, found)
    if "ptot" in given:
        given["ptot_ambient"] = T0
    if (hottest := given.get("tj_max", found.tj_max)) is not None and hottest <= T0:
        raise request.refusal("transistor.tj_max", "which is no more than 25 °C", "a temperature above that", "150 °C")
    return dataclasses.replace(found, **given)


def read_replacement(request: Request) -> dict[str, Any]:
    """What is given of the transistor that is to take its place, by key; a refit gives it meaning."""
    found: dict[str, Any] = {}
    for path, text in request.given.items():
        if KEYS[path].table == "replacement":
            least = text.strip().replace("≥", ">=").removeprefix(">=")
            is_open = KEYS[path].leaf == "hfe" and least != text.strip()
            found[KEYS[path].leaf] = Interval(parse(least, "gain", path), math.inf) if is_open else request.value(path)
    return found


def _note_ratings(request: Request, row: TransistorRow, found: TransistorRatings) -> None:
    """List the ratings that a type brings."""
    fields = {"vceo": "vceo_v", "ic_max": "ic_max_a", "ptot": "ptot_w", "tj_max": "tj_max_k", "rth_ja": "rth_ja_k_w"}
    for leaf, field in fields.items():
        key, figure = KEYS[f"transistor.{leaf}"], getattr(found, leaf)
        if figure is None or key.path in request.given:
            continue
        source = from_table(row, field)
        held = ", held at the case" if leaf == "ptot" and found.ptot_ambient is None else ""
        note = Assumption(key=key.path, value=key.write(figure), why=f"rating {source.why}{held}", evidence=source.evidence)
        request.notes.append(note)


def read_policy(request: Request, is_needed: bool) -> Derating:
    """The derating policy; assumed only where a rating asks for one."""
    key = KEYS["derating"]
    name: str = request.take("derating") if is_needed else request.value("derating") or key.default
    try:
        return catalogue.derating(name)
    except RestpointError:
        near = nearest(name, catalogue.deratings())
        accepted = f"one of {', '.join(catalogue.deratings())}"
        raise request.refusal("derating", "which is unknown", accepted, *near) from None
