"""The gain of the transistor, how it goes with IC and VCE, and VCE(sat) against IC: given, from the table, or assumed."""

from __future__ import annotations

import math
from typing import NamedTuple

from synth import catalogue
from synth.catalogue import HfePoint, TransistorRow
from synth.quantities import Spread, Target, format_exact, format_quantity, format_spread, parse, parse_spread
from synth.stage_keys import KEYS
from synth.stage_resolve.request import Assumption, Request, Source, StageWarning
from synth.transistor import T0, GainRows

OPEN_GAIN = 5.0
"""Greatest over least gain where only the least is known [-]: common practice for one type without gain bins."""

FAR_CURRENT = 10.0
"""Ratio of currents from which a printed gain says little about the gain at the stage's own current [-]."""

HFE, ROWS = "transistor.hfe", "transistor.hfe_rows"
SAT, SAT_ROWS = "transistor.vce_sat", "transistor.vce_sat_rows"


class _Row(NamedTuple):
    """One row of hFE against IC [A]; `high` is None where no maximum is stated [-]."""

    current: float
    low: float
    high: float | None


def from_table(row: TransistorRow, *fields: str) -> Source:
    """Why a figure was taken that the table of transistors brings, with its evidence."""
    evidence = "memory" if "memory" in map(row.evidence_of, fields) else "seen"
    return Source(f"from the table of transistors (evidence: {evidence})", evidence)


def read_gain(request: Request, row: TransistorRow | None, current: float) -> tuple[Spread, GainRows | None]:
    """Gain at the target current [A], and how it goes with IC."""
    text = request.given.get(HFE, "").strip().replace("≥", ">=")
    if text and ROWS in request.given:
        raise request.refusal(ROWS, "but transistor.hfe is given too", "one of the two")
    if ROWS in request.given:
        rows = [_parsed(request, item) for item in request.value(ROWS)]
        return _from_rows(request, rows, current, None, "of transistor.hfe_rows")
    hfe: Spread
    if text.startswith(">="):
        hfe = _open_gain(request, parse(text[2:], "gain", HFE), "no maximum given")
    elif text:
        hfe = request.value(HFE)
    elif row is None:
        accepted = f"a gain such as {KEYS[HFE].example!r}, or a transistor.type such as 'BC847B'"
        raise request.refusal(HFE, "which is not given and has no default", accepted)
    else:
        points = _printed(row)
        if len(points) > 1:
            return _from_table_rows(request, row, points, current)
        _warn_of_far_gain(request, row, current)
        greatest: float | None = row.hfe_max
        if greatest is None:
            hfe = _open_gain(request, row.hfe_min, f"no maximum printed for {row.type}")
        else:
            hfe = request.take(HFE, format_spread(row.hfe_spread, "gain"), from_table(row, "hfe_min", "hfe_max"))
    if hfe.low <= 0.0:
        raise request.refusal(HFE, f"whose least gain is {hfe.low:g}", "a least gain above 0", KEYS[HFE].example)
    return hfe, None


def read_early(request: Request, row: TransistorRow | None) -> tuple[Spread | None, float]:
    """Early voltage, and the collector-emitter voltage at which the gain was tested [V]."""
    va: Spread | None = request.value("transistor.va")
    key = KEYS["transistor.va_vce"]
    if va is None:
        return None, float(parse(key.default, key.kind, key.path))
    if row is None:
        return va, request.take(key.path)
    return va, request.take(key.path, key.write(row.hfe_vce_v), from_table(row, "hfe_vce_v"))


def read_saturation(request: Request, row: TransistorRow | None, ic: Target, usual: str) -> float:
    """VCE(sat) [V] for the greatest current that a window allows, else for the target [A]."""
    most = ic.high if math.isfinite(ic.high) else ic.nominal or 0.0
    vce_sat: float
    if SAT_ROWS in request.given:
        if SAT in request.given:
            raise request.refusal(SAT_ROWS, "but transistor.vce_sat is given too", "one of the two")
        rows = sorted(_saturation_row(request, item) for item in request.value(SAT_ROWS))
        covered = [(current, volts) for current, volts in rows if current >= most] or rows[-1:]
        at, _ = covered[0]
        # What is printed for less current holds here too: the greatest of all up to this row is on the safe side.
        vce_sat = max(volts for current, volts in rows if current <= at)
        at_words = format_quantity(at, "current")
        request.notes.append(Assumption(key=SAT, value=KEYS[SAT].write(vce_sat), why=f"of vce_sat_rows up to {at_words}"))
        _warn_of_saturation(request, at, most)
    else:
        if row is None:
            vce_sat = request.take(SAT, usual)
        else:
            vce_sat = request.take(SAT, KEYS[SAT].write(row.vce_sat_max_v), from_table(row, "vce_sat_max_v"))
            if SAT not in request.given:
                _warn_of_saturation(request, row.vce_sat_ic_a, most)
    if vce_sat < 0.0:
        raise request.refusal(SAT, "which is negative", "a magnitude of 0 V or more")
    return vce_sat


def _warn_of_saturation(request: Request, tested: float, most: float) -> None:
    if most > tested:
        at, own = format_quantity(tested, "current"), format_quantity(most, "current")
        text = f"VCE(sat) is known up to {at} and IC may reach {own}, where it is more: give transistor.vce_sat at that current"
        request.warnings.append(StageWarning(name="vce_sat_test_current", text=text))


def _halves(request: Request, path: str, item: str) -> tuple[float, str]:
    current, sign, rest = item.partition("=")
    if not sign or not rest.strip():
        raise request.refusal(path, f"of which {item!r} is no row", f"rows such as {KEYS[path].example!r}")
    at = parse(current, "current", path)
    if at <= 0.0:
        raise request.refusal(path, f"of which {item!r} has no current", "currents above 0 A", KEYS[path].example)
    return at, rest.strip()


def _parsed(request: Request, item: str) -> _Row:
    at, rest = _halves(request, ROWS, item.replace("≥", ">="))
    if rest.startswith(">="):
        return _Row(at, parse(rest[2:], "gain", ROWS), None)
    spread = parse_spread(rest, "gain", ROWS, "geometric")
    return _Row(at, spread.low, spread.high)


def _saturation_row(request: Request, item: str) -> tuple[float, float]:
    at, rest = _halves(request, SAT_ROWS, item)
    return at, parse(rest, "voltage", SAT_ROWS)


def _printed(row: TransistorRow) -> list[_Row]:
    """Rows of the table at 25 °C and the voltage of the type's main figures, which are among them."""

    def fits(point: HfePoint) -> bool:
        return point.vce_v == row.hfe_vce_v and abs(point.temperature_k - T0) < 0.5

    points = filter(fits, catalogue.hfe_points(row.type))
    found = {point.ic_a: _Row(point.ic_a, point.hfe_min, point.hfe_max) for point in points}
    found[row.hfe_ic_a] = _Row(row.hfe_ic_a, row.hfe_min, row.hfe_max)
    return [found[current] for current in sorted(found)]


def _from_table_rows(
    request: Request, row: TransistorRow, points: list[_Row], current: float
) -> tuple[Spread, GainRows | None]:
    evidence = {point.evidence for point in catalogue.hfe_points(row.type)} | {row.evidence_of("hfe_min")}
    label = "memory" if "memory" in evidence else "seen"
    closed = _closed(points)
    texts = ", ".join(_row_text(point) for point in closed)
    open_ends = any(point.high is None for point in points)
    why = f"from the table of transistors (evidence: {label}), at VCE {format_quantity(row.hfe_vce_v, 'voltage')}"
    if open_ends:
        why += f"; where no maximum is printed, {OPEN_GAIN:g} times the minimum or the greatest printed, if that is more"
    request.assumed[ROWS] = Assumption(key=ROWS, value=texts, why=why, evidence=label)
    typical = None if row.hfe_typ is None else (row.hfe_ic_a, row.hfe_typ)
    return _from_rows(request, closed, current, typical, f"of the rows of {row.type}", label)


def _closed(rows: list[_Row]) -> list[_Row]:
    """Rows with a maximum each: where none is stated the larger of a usual spread and the greatest stated anywhere."""
    greatest = max((row.high for row in rows if row.high is not None), default=0.0)
    return [row if row.high is not None else row._replace(high=max(OPEN_GAIN * row.low, greatest)) for row in rows]


def _row_text(row: _Row) -> str:
    ends = [format_exact(end, "gain") for end in (row.low, row.high or row.low)]
    return f"{format_exact(row.current, 'current')} = {ends[0] if ends[0] == ends[1] else ' : '.join(ends)}"


def _from_rows(
    request: Request, rows: list[_Row], current: float, typical: tuple[float, float] | None, source: str, evidence: str = ""
) -> tuple[Spread, GainRows | None]:
    """Gain at the target current and its rows; warns where the current lies beyond them."""
    own = _closed(rows)
    for row in rows:
        if row.low <= 0.0:
            raise request.refusal(ROWS, f"whose least gain is {row.low:g}", "gains above 0", KEYS[ROWS].example)
    shape = GainRows(
        at=current,
        current=tuple(row.current for row in own),
        low=tuple(row.low for row in own),
        high=tuple(row.high or row.low for row in own),
    )
    low, high = shape.ends
    place = 0.5
    if typical is not None:
        at = GainRows(at=typical[0], current=shape.current, low=shape.low, high=shape.high)
        place = min(max(float(at.place(typical[1])), 0.0), 1.0)
    hfe = Spread(low, low ** (1.0 - place) * high**place, high)
    words = " : ".join(format_quantity(end, "gain") for end in ((low, high) if low < high else (low,)))
    why = f"{source}, at {format_quantity(current, 'current')}"
    if ROWS in request.given and any(row.high is None for row in rows):
        why += f"; where no maximum is given, {OPEN_GAIN:g} times the minimum or the greatest given, if that is more"
    request.notes.append(Assumption(key=HFE, value=words, why=why, evidence=evidence))
    first, last = shape.current[0], shape.current[-1]
    if not first <= current <= last:
        end, own_current = (format_quantity(x, "current") for x in (first if current < first else last, current))
        text = f"the rows of hFE end at {end}, and {own_current} lies beyond: the last row holds there, which may be too much"
        request.warnings.append(StageWarning(name="gain_beyond_rows", text=text))
    return hfe, shape


def _open_gain(request: Request, least: float, why: str) -> Spread:
    key = KEYS[HFE]
    hfe: Spread = key.read(" : ".join(format_exact(end, key.kind) for end in (least, least * OPEN_GAIN)))
    request.assume(key.path, hfe, f"{why}: up to {OPEN_GAIN:g} times the minimum")
    return hfe


def _warn_of_far_gain(request: Request, row: TransistorRow, current: float) -> None:
    close = row.hfe_ic_a
    if max(close / current, current / close) >= FAR_CURRENT:
        near, own = format_quantity(close, "current"), format_quantity(current, "current")
        text = f"the table prints hFE of {row.type} at {near}, far from {own}: give transistor.hfe at that current"
        request.warnings.append(StageWarning(name="gain_test_current", text=text))
