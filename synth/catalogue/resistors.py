"""Tables of resistors: preferred numbers, tolerance and temperature codes, styles."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from itertools import groupby, pairwise
from pathlib import Path
from types import MappingProxyType

from synth.catalogue import reading
from synth.catalogue.reading import (
    CatalogueError,
    cell,
    celsius,
    choice,
    maybe,
    number,
    per_cent,
    remark,
    text,
)

_USUAL_TECHNOLOGY = {"chip": "thick film", "axial": "metal film"}
_POWER = number("0.01", "500")
_LONGEST_NUMBER = 9
_TCR = number("0.1", "5000", scale="1e-6")


def _three_figures(value: str) -> int:
    if not (value.isascii() and value.isdigit() and len(value) == 3 and value >= "100"):
        raise ValueError("a whole number from 100 to 999")
    return int(value)


@dataclass(frozen=True, kw_only=True)
class _PreferredLine:
    series: str = cell(text)
    significand: int = cell(_three_figures)


@dataclass(frozen=True, kw_only=True)
class _ToleranceLine:
    kind: str = cell(choice(letter="letter", series="series"))
    code: str = cell(text)
    both: float | None = cell(maybe(per_cent("0.001", "50")), column="tolerance_percent")
    high: float = cell(per_cent("0.001", "100"), column="tolerance_plus_percent")
    low: float = cell(per_cent("0.001", "50"), column="tolerance_minus_percent")
    colour: str | None = cell(maybe(text))
    applies_to: str = cell(
        choice(resistors="resistors", capacitors="capacitors", both="both", series="series")
    )
    evidence: str = cell(reading.evidence)
    note: str = cell(remark)


@dataclass(frozen=True, kw_only=True)
class ToleranceCode:
    """One tolerance letter of IEC 60062.

    Parameters
    ----------
    letter : str
        The code.
    low, high : float
        Largest deviation downwards and upwards, both as positive fractions [-].
    colour : str or None
        Colour of the band; "none" where no band is printed, None where the class has no colour.
    applies_to : {"resistors", "capacitors", "both"}
        What it is used on.
    evidence : {"seen", "mixed", "memory"}
        How the code is known.
    note : str
        Remarks.
    """

    letter: str
    low: float
    high: float
    colour: str | None
    applies_to: str
    evidence: str
    note: str


@dataclass(frozen=True, kw_only=True)
class TcrCode:
    """One class of temperature coefficient of IEC 60062.

    Parameters
    ----------
    colour : str
        Colour of the band; unique, unlike the letter.
    letter : str
        The letter code.
    tcr_per_k : float
        Temperature coefficient, plus and minus [1/K].
    evidence_colour, evidence_letter : {"seen", "mixed", "memory"}
        How colour and letter are known.
    note : str
        Remarks.
    """

    colour: str = cell(text)
    letter: str = cell(text)
    tcr_per_k: float = cell(_TCR, column="tcr_ppm_per_k")
    evidence_colour: str = cell(reading.evidence)
    evidence_letter: str = cell(reading.evidence)
    note: str = cell(remark)


@dataclass(frozen=True, kw_only=True)
class ResistorStyle:
    """Ratings of one style of film resistor.

    Parameters
    ----------
    style : {"chip", "axial"}
        Way of mounting.
    size_code : str
        Size; for axial parts with the power that distinguishes them.
    technology : str
        Resistive film.
    power_w_conservative, power_w_common : float
        Least and usual rated power among makers, at `rated_temperature_k` [W].
    rated_temperature_k, zero_power_temperature_k : float
        Start and end of the linear power derating [K].
    max_working_voltage_v : float
        Largest working voltage [V].
    r_min_ohm, r_max_ohm : float
        Range of resistance that is made [ohm].
    usual_tolerance : float
        Usual tolerance, plus and minus [-].
    usual_tcr_per_k : float
        Usual temperature coefficient, plus and minus [1/K].
    load_life_drift : float
        Drift over load life, plus and minus [-].
    evidence : {"seen", "mixed", "memory"}
        How the row is known.
    source_note : str
        What was read where.
    """

    style: str = cell(choice(chip="chip", axial="axial"))
    size_code: str = cell(text)
    technology: str = cell(text)
    power_w_conservative: float = cell(_POWER)
    power_w_common: float = cell(_POWER)
    rated_temperature_k: float = cell(celsius("25", "200"), column="rated_temp_c")
    zero_power_temperature_k: float = cell(celsius("25", "400"), column="zero_power_temp_c")
    max_working_voltage_v: float = cell(number("1", "5000"))
    r_min_ohm: float = cell(number("0.001", "1e6"))
    r_max_ohm: float = cell(number("1", "1e12"))
    usual_tolerance: float = cell(per_cent("0.001", "50"), column="usual_tolerance_percent")
    usual_tcr_per_k: float = cell(_TCR, column="usual_tcr_ppm_k")
    load_life_drift: float = cell(per_cent("0", "50"), column="load_life_drift_percent")
    evidence: str = cell(reading.evidence)
    source_note: str = cell(remark)

    @property
    def full_name(self) -> str:
        """Size code and technology, as in "0805 thick film"."""
        return f"{self.size_code} {self.technology}"

    @property
    def name(self) -> str:
        """Size code alone for the usual technology (thick film chip, metal film axial), else both."""
        return self.size_code if self.technology == _USUAL_TECHNOLOGY[self.style] else self.full_name


def preferred_numbers() -> Mapping[str, tuple[int, ...]]:
    """The E series of IEC 60063.

    Returns
    -------
    Mapping
        Series name to its significands [-], three figures, ascending; in the order E3 to E192.

    Raises
    ------
    CatalogueError
        If a series of the table is not ascending or not as long as its name says.
    """
    return _preferred_numbers(reading.directory())


@cache
def _preferred_numbers(folder: Path) -> Mapping[str, tuple[int, ...]]:
    source = folder / "preferred_numbers.csv"
    series: dict[str, tuple[int, ...]] = {}
    for name, group in groupby(reading.read_table(source, _PreferredLine), key=lambda item: item[1].series):
        rows = list(group)
        for (_, before), (line, row) in pairwise(rows):
            if row.significand <= before.significand:
                raise CatalogueError(
                    f"{source.name}, line {line}, column significand: read {row.significand} after"
                    f" {before.significand}, accepted is an ascending series"
                )
        if name in series or name != f"E{len(rows)}":
            raise CatalogueError(
                f"{source.name}, line {rows[0][0]}, column series: read {len(rows)} values of {name} in one"
                " run, accepted is one run of as many values as its name says"
            )
        series[name] = tuple(row.significand for _, row in rows)
    return MappingProxyType(series)


def series_name(text: str) -> str:
    """The name of a series as the tables write it.

    Parameters
    ----------
    text : str
        Name of a series, E3 to E192; case and blanks do not matter.

    Returns
    -------
    str
        The name, as in "E96".

    Raises
    ------
    CatalogueError
        If there is no such series; names the one whose number is nearest in ratio.
    """
    known = preferred_numbers()
    name = "".join(text.split()).upper()
    if name in known:
        return name
    digits = "".join(character for character in name[:_LONGEST_NUMBER] if character in "0123456789")
    wanted = math.log(max(1, int(digits or "1")))
    nearest = min(known, key=lambda series: abs(math.log(len(known[series])) - wanted))
    raise CatalogueError(
        f"resistors.series: read {reading.quoted(text)}, accepted is {reading.alternatives(known)},"
        f" nearest is {nearest}"
    )


def tolerance_codes() -> Mapping[str, ToleranceCode]:
    """The tolerance letters of IEC 60062, those of capacitors included.

    Returns
    -------
    Mapping
        Letter to code.

    Raises
    ------
    CatalogueError
        If the table breaks its rules.
    """
    return _tolerances(reading.directory())[0]


def series_tolerance(series: str) -> float:
    """The tolerance that usually goes with a series.

    Parameters
    ----------
    series : str
        Name of a series, E3 to E192, in either case.

    Returns
    -------
    float
        Tolerance [-], as in 0.01 for E96.

    Raises
    ------
    CatalogueError
        If there is no such series.
    """
    return _tolerances(reading.directory())[1][series_name(series)]


def tolerance_series(tolerance: float) -> str:
    """The series that usually goes with a tolerance.

    Parameters
    ----------
    tolerance : float
        Tolerance [-], 0 or more and below 1.

    Returns
    -------
    str
        The finest series whose usual tolerance is not tighter than the given one: 3 %, between E48 (2 %) and
        E24 (5 %), gives E24, whose neighbours such parts still tell apart; 0.5 % and tighter give E192, more
        than 20 % gives E3.

    Raises
    ------
    CatalogueError
        If the tolerance is outside its range.
    """
    if not 0 <= tolerance < 1:
        raise CatalogueError(
            f"resistors.tolerance: read {tolerance:g}, accepted is a fraction from 0 to below 1"
        )
    usual = _tolerances(reading.directory())[1]
    # A percentage times 0.01 can lie a rounding error above its class; no two classes are that near.
    covering = [name for name in usual if usual[name] * (1 + 1e-9) >= tolerance]
    # The usual class of E3 is "over 20 %", without an upper end.
    return min(covering, key=usual.__getitem__, default=max(usual, key=usual.__getitem__))


@cache
def _tolerances(folder: Path) -> tuple[Mapping[str, ToleranceCode], Mapping[str, float]]:
    """Codes by letter, and usual tolerance by series."""
    source = folder / "tolerance_codes.csv"
    known = _preferred_numbers(folder)
    letters: list[tuple[int, str, ToleranceCode]] = []
    series: list[tuple[int, str, float]] = []
    for line, row in reading.read_table(source, _ToleranceLine):
        where = f"{source.name}, line {line}, column"
        if row.both != (row.low if row.low == row.high else None):
            raise CatalogueError(
                f"{where} tolerance_percent: read {'an empty cell' if row.both is None else row.both} for"
                f" {row.code}, accepted is the plus and minus figure where equal, else an empty cell"
            )
        if row.kind == "letter":
            code = ToleranceCode(
                letter=row.code,
                low=row.low,
                high=row.high,
                colour=row.colour,
                applies_to=row.applies_to,
                evidence=row.evidence,
                note=row.note,
            )
            letters.append((line, row.code, code))
        elif row.code in known:
            series.append((line, row.code, row.high))
        else:
            raise CatalogueError(
                f"{where} code: read {reading.quoted(row.code)}, accepted is a series,"
                f" nearest is {reading.nearest(row.code, known)}"
            )
    return reading.unique(source.name, "code", letters), reading.unique(source.name, "code", series)


def tcr_codes() -> Mapping[str, TcrCode]:
    """The classes of temperature coefficient of IEC 60062.

    Returns
    -------
    Mapping
        Colour to code; the letter Z stands for two classes and so cannot be the key.

    Raises
    ------
    CatalogueError
        If the table breaks its rules.
    """
    return _tcr_codes(reading.directory())


@cache
def _tcr_codes(folder: Path) -> Mapping[str, TcrCode]:
    source = folder / "tcr_codes.csv"
    rows = reading.read_table(source, TcrCode)
    return reading.unique(source.name, "colour", ((line, row.colour, row) for line, row in rows))


def resistor_styles() -> Mapping[str, ResistorStyle]:
    """The resistor styles.

    Returns
    -------
    Mapping
        `ResistorStyle.name` to style, in the order of the table.

    Raises
    ------
    CatalogueError
        If the table breaks its rules.
    """
    return _resistor_styles(reading.directory())


def resistor_style(name: str) -> ResistorStyle:
    """One resistor style by name.

    Parameters
    ----------
    name : str
        Size code for the usual technology, as in "0805" (thick film, 1 %) or "0207 (0.25 W)" (metal film);
        size code and technology for any row, as in "0805 thin film". Case and repeated blanks do not matter.

    Returns
    -------
    ResistorStyle
        The style.

    Raises
    ------
    CatalogueError
        If no row has that name.
    """
    styles = resistor_styles()
    wanted = " ".join(name.split()).casefold()
    for style in styles.values():
        if wanted in (style.name.casefold(), style.full_name.casefold()):
            return style
    raise CatalogueError(
        f"resistors.style: read {reading.quoted(name)}, accepted is a row of resistor_styles.csv,"
        f" nearest is {reading.nearest(name, styles)}"
    )


@cache
def _resistor_styles(folder: Path) -> Mapping[str, ResistorStyle]:
    source = folder / "resistor_styles.csv"
    rows = reading.read_table(source, ResistorStyle)
    for line, style in rows:
        check = (source.name, line, style)
        reading.check_ascending(*check, "power_w_conservative", "power_w_common")
        reading.check_ascending(*check, "r_min_ohm", "r_max_ohm", strict=True)
        reading.check_ascending(*check, "rated_temperature_k", "zero_power_temperature_k", strict=True)
    return reading.unique(source.name, "size_code", ((line, style.name, style) for line, style in rows))
