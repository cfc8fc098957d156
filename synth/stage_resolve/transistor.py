"""The transistor: what a type brings, what is given in its place, what is assumed; its ratings under a policy."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Mapping
from typing import Any, Literal

from synth import catalogue
from synth.catalogue import Derating, TransistorRow
from synth.quantities import Interval, RestpointError, Spread, format_exact, format_quantity, format_spread, parse
from synth.stage_keys import KEYS, nearest
from synth.stage_resolve.request import Assumption, Request, StageWarning
from synth.stress import TransistorRatings, transistor_ratings
from synth.transistor import GAP_VOLTAGE, T0, Transistor

OPEN_GAIN = 5.0
"""Greatest over least gain where only the least is known [-]: common practice for one type without gain bins."""

JUNCTION_ROOM = 10.0
"""Least ratio of the collector current to the saturation current at which the junction law holds [-]."""

FAR_CURRENT = 10.0
"""Ratio of currents from which a printed gain says little about the gain at the stage's own current [-]."""

_GERMANIUM = {"vbe": "0.15 V ± 50 mV", "vbe_ic": "1 mA", "vce_sat": "0.1 V"}
_RATINGS = ("vceo", "vebo", "ic_max", "ptot", "tj_max", "rth_ja")


def read_transistor(request: Request, current: float) -> Transistor:
    """The transistor of a stage whose target is a current [A]."""
    kind = request.value("transistor.type")
    row = None if kind is None else catalogue.transistor(kind)
    material = _word(request, "material", row)
    polarity = _word(request, "polarity", row)
    usual = _GERMANIUM if material == "germanium" else {}
    hfe = _gain(request, row, current)
    vbe, vbe_ic = _base_emitter(request, row, usual)
    model: Literal["junction", "fixed"] = request.take("transistor.vbe_model")
    icbo: Spread = _figure(request, "icbo", row and row.icbo_spread, row, "icbo_max_a")
    vce_sat: float = _figure(request, "vce_sat", row and row.vce_sat_max_v, row, "vce_sat_max_v", text=usual.get("vce_sat", ""))
    if vce_sat < 0.0:
        raise request.refusal("transistor.vce_sat", "which is negative", "a magnitude of 0 V or more")
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
    return request.take(path, fixed, _from_table(row, leaf))


def _figure(request: Request, leaf: str, printed: Any, row: TransistorRow | None, *fields: str, text: str = "") -> Any:
    """A figure of the transistor: as given, else as the table prints it, else of a text."""
    path = f"transistor.{leaf}"
    if row is None:
        return request.take(path, text)
    if printed is None:
        return request.take(path, text, f"not given, and the table of transistors sets none for {row.type}")
    return request.take(path, KEYS[path].write(printed), _from_table(row, *fields))


def _gain(request: Request, row: TransistorRow | None, current: float) -> Spread:
    path = "transistor.hfe"
    text = request.given.get(path, "").strip().replace("≥", ">=")
    hfe: Spread
    if text.startswith(">="):
        hfe = _open_gain(request, parse(text[2:], "gain", path), "no maximum given")
    elif text:
        hfe = request.value(path)
    elif row is None:
        accepted = f"a gain such as {KEYS[path].example!r}, or a transistor.type such as 'BC847B'"
        raise request.refusal(path, "which is not given and has no default", accepted)
    else:
        _warn_of_far_gain(request, row, current)
        greatest: float | None = row.hfe_max
        if greatest is None:
            hfe = _open_gain(request, row.hfe_min, f"no maximum printed for {row.type}")
        else:
            hfe = request.take(path, format_spread(row.hfe_spread, "gain"), _from_table(row, "hfe_min", "hfe_max"))
    if hfe.low <= 0.0:
        raise request.refusal(path, f"whose least gain is {hfe.low:g}", "a least gain above 0", KEYS[path].example)
    return hfe


def _open_gain(request: Request, least: float, why: str) -> Spread:
    key = KEYS["transistor.hfe"]
    hfe: Spread = key.read(" : ".join(format_exact(end, key.kind) for end in (least, least * OPEN_GAIN)))
    request.assume(key.path, hfe, f"{why}: up to {OPEN_GAIN:g} times the minimum")
    return hfe


def _warn_of_far_gain(request: Request, row: TransistorRow, current: float) -> None:
    printed = [row.hfe_ic_a, *(point.ic_a for point in catalogue.hfe_points(row.type))]
    close = min(printed, key=lambda tested: abs(math.log(tested / current)))
    if max(close / current, current / close) >= FAR_CURRENT:
        near, own = format_quantity(close, "current"), format_quantity(current, "current")
        text = f"the table prints hFE of {row.type} at {near}, far from {own}: give transistor.hfe at that current"
        request.warnings.append(StageWarning(name="gain_test_current", text=text))


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
    why = f"hot limit {_from_table(row, 'icbo_hot_max_a', 'icbo_hot_k')}"
    request.notes.append(Assumption(key="transistor.icbo", value=text, why=why))
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
        found = transistor_ratings(catalogue.transistor(kind), given.get("rth_ja"))
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


def _from_table(row: TransistorRow, *fields: str) -> str:
    evidence = "memory" if "memory" in map(row.evidence_of, fields) else "seen"
    return f"from the table of transistors (evidence: {evidence})"
