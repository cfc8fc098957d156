"""The lot of units that Monte Carlo draws: distributions by name or by measured values, number, seed."""

from __future__ import annotations

import csv
from collections.abc import Mapping, Sequence
from pathlib import Path

from synth.quantities import Spread, format_exact, parse
from synth.reference import Reference
from synth.stage_keys import nearest
from synth.stage_resolve.request import Request
from synth.stage_resolve.resistors import RoleSetting
from synth.statistics import SHAPES, SPREADS, Distribution, Lot
from synth.transistor import Transistor

MOST_UNITS = 10_000_000
"""Largest lot that is drawn [-]."""
LARGEST_FILE = 1_000_000
"""Size of a file of measured values above which it is refused [byte]."""
KIND_OF = {
    "vcc": "voltage", "vee": "voltage", "vbb": "voltage", "vload": "voltage", "hfe": "gain", "vbe": "voltage",
    "icbo": "current", "tolerance": "ratio", "life": "ratio", "tcr": "temperature_coefficient", "temperature": "temperature",
}  # fmt: skip
"""Kind of the measured values of each spread; a reference element takes names alone."""


def read_lot(
    request: Request,
    rails: Mapping[str, Spread],
    transistor: Transistor,
    reference: Reference | None,
    roles: Mapping[str, RoleSetting],
    temperature: Spread,
) -> Lot:
    """The lot of a stage."""
    usual = Lot()
    units = _whole(request, "distribution.units", usual.units, 1, MOST_UNITS)
    seed = _whole(request, "distribution.seed", usual.seed, 0, 2**53)
    tolerance = min((setting.tolerance for setting in roles.values()), default=0.0)
    life = min((setting.life for setting in roles.values()), default=0.0)
    tcr = [setting.tcr for setting in roles.values()]
    spreads = {
        **rails,
        "hfe": transistor.hfe,
        "vbe": transistor.vbe,
        "icbo": transistor.icbo,
        "tolerance": Spread(-tolerance, 0.0, tolerance),
        "life": Spread(-life, 0.0, life),
        "tcr": Spread(max(t.low for t in tcr), max(t.low for t in tcr), max(min(t.high for t in tcr), max(t.low for t in tcr))),
        "temperature": temperature,
    }
    laws = dict(usual.laws)
    for name in SPREADS:
        path = f"distribution.{name}"
        if path in request.given:
            laws[name] = _law(request, path, name, spreads.get(name))
    return Lot(units=units, seed=seed, points=request.value("distribution.points") or usual.points, laws=laws)


def _whole(request: Request, path: str, usual: int, least: int, most: int) -> int:
    value: float | None = request.value(path)
    if value is None:
        return usual
    if value != int(value) or not least <= value <= most:
        near = str(min(max(round(value), least), most))
        raise request.refusal(path, "which is no such number", f"a whole number from {least} to {most}", near)
    return int(value)


def _law(request: Request, path: str, name: str, spread: Spread | None) -> Distribution:
    """A distribution by its name, from a file, or from the values themselves."""
    words: tuple[str, ...] = request.value(path)
    shape = words[0].casefold().replace("-", "_").replace(" ", "_")
    if len(words) == 1 and shape in SHAPES:
        if shape == "log_uniform" and name != "reference" and (spread is None or spread.low <= 0.0):
            reason = "which needs a spread above 0"
            raise request.refusal(path, reason, "uniform, normal, nominal, or measured values", "uniform")
        if shape == "log_uniform" and name == "reference":
            raise request.refusal(path, "whose coefficient may be 0", "uniform, normal or nominal", "uniform")
        return Distribution(shape=shape)  # type: ignore[arg-type]
    kind = KIND_OF.get(name)
    if kind is None:
        raise request.refusal(path, "which is no distribution of a reference element", "uniform, normal or nominal", "uniform")
    is_file = len(words) == 1 and words[0].casefold().endswith(".csv")
    if not is_file and not any(c.isdigit() for c in words[0]):
        accepted = f"one of {', '.join(SHAPES)}, a file such as lot.csv, or measured values with commas between them"
        raise request.refusal(path, "which is unknown", accepted, *nearest(shape, SHAPES))
    texts = _column(request, path, request.folder / words[0]) if is_file else words
    values = tuple(parse(text, kind, path) for text in texts)
    _inside(request, path, values, kind, spread)
    return Distribution(shape="measured", values=values)


def _inside(request: Request, path: str, values: Sequence[float], kind: str, spread: Spread | None) -> None:
    """Refuse measured values that lie outside the spread, which the worst case would then not hold."""
    if spread is None:
        return
    # A text in per cent and a sum of two ends differ by their rounding.
    slack = 1e-12 * max(abs(spread.low), abs(spread.high))
    for value in values:
        if not spread.low - slack <= value <= spread.high + slack:
            ends = f"{format_exact(spread.low, kind)} : {format_exact(spread.high, kind)}"
            reason = f"of which {format_exact(value, kind)} lies outside the spread of {ends}"
            raise request.refusal(path, reason, "values inside it, or a wider spread")


def _column(request: Request, path: str, file: Path) -> list[str]:
    """Texts of the column ``value`` of a file."""
    try:
        with file.open(encoding="utf-8-sig", newline="") as stream:
            rows = list(csv.DictReader(stream.read(LARGEST_FILE).splitlines()))
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        why = getattr(error, "strerror", None) or "it is no text in UTF-8"
        raise request.refusal(path, f"which cannot be read ({why})", "a CSV file with a column value") from None
    texts = [text.strip() for row in rows if (text := row.get("value") or "").strip()]
    if not texts:
        raise request.refusal(path, "which has no value in a column named value", "a CSV file with a column value")
    return texts


