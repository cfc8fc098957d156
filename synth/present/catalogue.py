"""The built-in tables as text."""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

from scipy.constants import zero_Celsius

from synth.catalogue import (
    deratings,
    hfe_points,
    preferred_numbers,
    resistor_styles,
    series_tolerance,
    tcr_codes,
    tolerance_codes,
    transistors,
)
from synth.cautions import RULES
from synth.present.terminal import table
from synth.quantities import format_quantity


class _Table(NamedTuple):
    title: str
    source: str
    rows: Callable[[], list[list[str]]]
    right: tuple[int, ...] = ()


def _quantity(value: float | None, kind: str) -> str:
    return "–" if value is None else format_quantity(value, kind)


def _span(low: float | None, high: float | None) -> str:
    return f"{'–' if low is None else f'{low:g}'} : {'–' if high is None else f'{high:g}'}"


def _series() -> list[list[str]]:
    rows = [["series", "usual", "values of one decade"]]
    for name, values in preferred_numbers().items():
        rows.append([name, format_quantity(series_tolerance(name), "ratio"), " ".join(map(str, values))])
    return rows


def _tolerances() -> list[list[str]]:
    rows = [["letter", "tolerance", "for", "evidence"]]
    for code in tolerance_codes().values():
        low, high = format_quantity(code.low, "ratio"), format_quantity(code.high, "ratio")
        rows.append([code.letter, f"±{high}" if low == high else f"+{high} −{low}", code.applies_to, code.evidence])
    return rows


def _tcr() -> list[list[str]]:
    rows = [["letter", "colour", "coefficient", "note"]]
    for code in tcr_codes().values():
        rows.append(
            [code.letter, code.colour, format_quantity(code.tcr_per_k, "temperature_coefficient"), code.note or ""]
        )
    return rows


def _styles() -> list[list[str]]:
    rows = [["style", "technology", "power", "voltage", "range", "usual", "evidence"]]
    for style in resistor_styles().values():
        ends = (format_quantity(style.r_min_ohm, "resistance"), format_quantity(style.r_max_ohm, "resistance"))
        rows.append(
            [
                style.name,
                style.technology,
                format_quantity(style.power_w_conservative, "power"),
                format_quantity(style.max_working_voltage_v, "voltage"),
                f"{ends[0]} : {ends[1]}",
                format_quantity(style.usual_tolerance, "ratio"),
                style.evidence,
            ]
        )
    return rows


def _transistors() -> list[list[str]]:
    rows = [["type", "", "package", "VCEO", "IC max", "hFE", "at IC", "VBE", "TJ max", "evidence"]]
    for row in transistors().values():
        vbe = row.vbe_spread
        rows.append(
            [
                row.type,
                row.polarity if row.material == "silicon" else f"{row.polarity} Ge",
                row.package,
                _quantity(row.vceo_v, "voltage"),
                _quantity(row.ic_max_a, "current"),
                _span(row.hfe_min, row.hfe_max),
                _quantity(row.hfe_ic_a, "current"),
                "–" if vbe is None else f"{vbe.low:g} : {vbe.high:g} V",
                "–" if row.tj_max_k is None else f"{row.tj_max_k - zero_Celsius:.0f} °C",
                row.evidence,
            ]
        )
    return rows


def _gains() -> list[list[str]]:
    rows = [["type", "IC", "VCE", "temperature", "hFE", "evidence"]]
    for name in transistors():
        for point in hfe_points(name):
            rows.append(
                [
                    point.type,
                    format_quantity(point.ic_a, "current"),
                    format_quantity(point.vce_v, "voltage"),
                    format_quantity(point.temperature_k, "temperature"),
                    _span(point.hfe_min, point.hfe_max),
                    point.evidence,
                ]
            )
    return rows


def _deratings() -> list[list[str]]:
    rows = [["policy", "R power", "R voltage", "VCEO", "IC", "P", "junction", "evidence"]]
    for policy in deratings().values():
        shares = (
            policy.resistor_power,
            policy.resistor_voltage,
            policy.transistor_voltage,
            policy.transistor_current,
            policy.transistor_power,
        )
        below = f"TJ max - {policy.junction_below_max_k:g} K" if policy.junction_below_max_k else "TJ max"
        top = "" if policy.junction_max_k is None else f"{policy.junction_max_k - zero_Celsius:.0f} °C or "
        rows.append([policy.name, *(format_quantity(share, "ratio") for share in shares), f"{top}{below}", policy.evidence])
    return rows


def _warnings() -> list[list[str]]:
    rows = [["name", "given when, and why"]]
    for rule in RULES.values():
        rows.append([rule.name, f"{rule.threshold[0].upper()}{rule.threshold[1:]}. {rule.reason}"])
    return rows


TABLES: dict[str, _Table] = {
    "series": _Table("Preferred numbers", "IEC 60063, E3 to E192", _series),
    "tolerances": _Table("Tolerance letters", "IEC 60062", _tolerances),
    "tcr": _Table("Letters of the temperature coefficient", "IEC 60062", _tcr),
    "styles": _Table("Resistor styles", "conservative figures of several makers' sheets", _styles, (2, 3)),
    "transistors": _Table(
        "Transistors with their gain bins", "makers' sheets; always check the current data sheet", _transistors, (3, 4)
    ),
    "derating": _Table(
        "Derating policies: usable shares of each rating",
        "common practice, ECSS-Q-ST-30-11C, EEE-INST-002",
        _deratings,
        (1, 2, 3, 4, 5),
    ),
    "warnings": _Table("Named warnings", "common practice and the laws of the parts", _warnings),
    "gains": _Table("hFE at other currents", "makers' sheets; – where no limit is printed", _gains, (1, 2)),
}
"""The tables by name."""


def overview() -> str:
    """Names of the tables and what they hold.

    Returns
    -------
    str
        Lines of at most 100 columns.
    """
    rows = [["name", "what", "source"], *([name, t.title, t.source] for name, t in TABLES.items())]
    return f"{table(rows)}\n\nNext: restpoint tables NAME\n"


def show(name: str) -> str:
    """One table.

    Parameters
    ----------
    name : str
        A key of `TABLES`.

    Returns
    -------
    str
        Title, source, columns.
    """
    chosen = TABLES[name]
    return f"{chosen.title} ({chosen.source})\n{table(chosen.rows(), chosen.right)}\n"


