"""Tables of transistors: registered types, their gain bins and further gain points."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from math import sqrt
from pathlib import Path
from types import MappingProxyType
from typing import Any, Literal

from synth.catalogue import reading
from synth.catalogue.reading import CatalogueError, cell, celsius, choice, maybe, number, remark, text
from synth.quantities import Spread

_VOLTAGE = number("0.01", "5000")
_CURRENT = number("1e-6", "100")
_LEAKAGE = number("1e-12", "0.1")
_POWER = number("0.01", "500")
_THERMAL_RESISTANCE = number("0.1", "1000")
_GAIN = number("1", "10000")
_TEMPERATURE = celsius("0", "150")


def _names(value: str) -> tuple[str, ...]:
    return tuple(name for name in value.split(";") if name)


@dataclass(frozen=True, kw_only=True)
class TransistorRow:
    """One registered transistor type, or the whole range of a family's gain bins.

    Parameters
    ----------
    type : str
        Registered type number.
    polarity : {"npn", "pnp"}
        Conductivity type; the figures of a PNP are magnitudes.
    material : {"silicon", "germanium"}
        Semiconductor.
    package : str
        Outline.
    vceo_v : float
        Largest collector-emitter voltage with the base open [V].
    ic_max_a : float
        Largest collector current [A].
    ptot_w, ptot2_w : float, float or None
        Total power at `ptot_ref_k` and `ptot2_ref_k` [W].
    ptot_ref, ptot2_ref : str, str or None
        What is held at that temperature: ambient, case or mounting base.
    ptot_ref_k, ptot2_ref_k : float, float or None
        Reference temperature of the total power [K].
    rth_ja_k_w, rth_jc_k_w : float or None
        Thermal resistance from junction to ambient and to case [K/W].
    tj_max_k : float
        Largest junction temperature [K].
    hfe_min, hfe_typ, hfe_max : float, float or None, float
        DC current gain at `hfe_ic_a`, `hfe_vce_v` and 25 °C [-].
    hfe_ic_a, hfe_vce_v : float
        Test current [A] and voltage [V] of the gain.
    vce_sat_max_v : float
        Largest saturation voltage at `vce_sat_ic_a` and `vce_sat_ib_a` [V].
    vce_sat_ic_a, vce_sat_ib_a : float
        Collector and base current of the saturation voltage [A].
    vbe_min_v, vbe_typ_v, vbe_max_v : float or None
        Base-emitter voltage at `vbe_ic_a`, under `vbe_condition` [V].
    vbe_ic_a : float
        Collector current of the base-emitter voltage [A].
    vbe_condition : str
        "on ..." in the active region, "saturated ..." otherwise.
    icbo_max_a, icbo_vcb_v : float
        Limit of the collector-base leakage at 25 °C [A] and its voltage [V].
    icbo_hot_max_a, icbo_hot_k : float or None
        The same limit hot [A] and its temperature [K]; both or neither.
    ft_hz : float or None
        Transition frequency [Hz].
    ft_basis : str
        Whether the transition frequency is a minimum or typical.
    evidence : {"seen", "mixed", "memory"}
        How the row is known.
    where_seen : str
        In how many sheets, and of what kind.
    fields_from_memory : tuple of str
        Fields of this class that are from memory.
    note : str
        Test conditions, deviations between makers.
    """

    type: str = cell(text)
    polarity: Literal["npn", "pnp"] = cell(choice(NPN="npn", PNP="pnp"))
    material: Literal["silicon", "germanium"] = cell(choice(Si="silicon", Ge="germanium"))
    package: str = cell(text)
    vceo_v: float = cell(_VOLTAGE)
    ic_max_a: float = cell(_CURRENT)
    ptot_w: float = cell(_POWER)
    ptot_ref: str = cell(text)
    ptot_ref_k: float = cell(_TEMPERATURE, column="ptot_ref_c")
    ptot2_w: float | None = cell(maybe(_POWER))
    ptot2_ref: str | None = cell(maybe(text))
    ptot2_ref_k: float | None = cell(maybe(_TEMPERATURE), column="ptot2_ref_c")
    rth_ja_k_w: float | None = cell(maybe(_THERMAL_RESISTANCE))
    rth_jc_k_w: float | None = cell(maybe(_THERMAL_RESISTANCE))
    tj_max_k: float = cell(celsius("50", "250"), column="tj_max_c")
    hfe_min: float = cell(_GAIN)
    hfe_typ: float | None = cell(maybe(_GAIN))
    hfe_max: float = cell(_GAIN)
    hfe_ic_a: float = cell(_CURRENT)
    hfe_vce_v: float = cell(_VOLTAGE)
    vce_sat_max_v: float = cell(_VOLTAGE)
    vce_sat_ic_a: float = cell(_CURRENT)
    vce_sat_ib_a: float = cell(_CURRENT)
    vbe_min_v: float | None = cell(maybe(_VOLTAGE))
    vbe_typ_v: float | None = cell(maybe(_VOLTAGE))
    vbe_max_v: float | None = cell(maybe(_VOLTAGE))
    vbe_ic_a: float = cell(_CURRENT)
    vbe_condition: str = cell(text)
    icbo_max_a: float = cell(_LEAKAGE)
    icbo_vcb_v: float = cell(_VOLTAGE)
    icbo_hot_max_a: float | None = cell(maybe(_LEAKAGE))
    icbo_hot_k: float | None = cell(maybe(celsius("26", "250")), column="icbo_hot_c")
    ft_hz: float | None = cell(maybe(number("0.01", "100000", scale="1e6")), column="ft_mhz")
    ft_basis: str = cell(remark)
    evidence: str = cell(reading.evidence)
    where_seen: str = cell(remark)
    fields_from_memory: tuple[str, ...] = cell(_names)
    note: str = cell(remark)

    @property
    def hfe_spread(self) -> Spread:
        """Gain at 25 °C and the test current [-]; nominal is the typical, else the geometric mean."""
        nominal = sqrt(self.hfe_min * self.hfe_max) if self.hfe_typ is None else self.hfe_typ
        return Spread(self.hfe_min, nominal, self.hfe_max)

    @property
    def vbe_spread(self) -> Spread | None:
        """VBE at 25 °C and `vbe_ic_a` [V], or None where the sheet sets no spread.

        A saturated figure is a rating of a switch and a one-sided figure only a limit: neither says where the
        units of an amplifier lie, so only an active-region figure with both minimum and maximum counts.
        Nominal is the typical figure, else the mean.
        """
        if not self.vbe_condition.startswith("on ") or self.vbe_min_v is None or self.vbe_max_v is None:
            return None
        nominal = (self.vbe_min_v + self.vbe_max_v) / 2 if self.vbe_typ_v is None else self.vbe_typ_v
        return Spread(self.vbe_min_v, nominal, self.vbe_max_v)

    @property
    def icbo_spread(self) -> Spread:
        """Leakage at 25 °C [A], none to the printed limit; nominally none, since a limit is not a mean."""
        return Spread(0.0, 0.0, self.icbo_max_a)

    @property
    def icbo_hot(self) -> tuple[float, float] | None:
        """Printed hot limit of the leakage [A] and its temperature [K], or None."""
        if self.icbo_hot_max_a is None or self.icbo_hot_k is None:
            return None
        return self.icbo_hot_max_a, self.icbo_hot_k

    def evidence_of(self, field: str) -> str:
        """How one field of this row is known.

        Parameters
        ----------
        field : str
            Name of a field of this class.

        Returns
        -------
        str
            "memory" where the field or the whole row is from memory, else "seen".
        """
        return "memory" if self.evidence == "memory" or field in self.fields_from_memory else "seen"


@dataclass(frozen=True, kw_only=True)
class HfePoint:
    """Gain limits of a type at one further test point.

    Parameters
    ----------
    type : str
        Registered type number.
    ic_a, vce_v : float
        Collector current [A] and collector-emitter voltage [V].
    temperature_k : float
        Temperature [K].
    hfe_min, hfe_max : float, float or None
        Least and greatest DC current gain [-]; None where no maximum is printed.
    evidence : {"seen", "mixed", "memory"}
        How the point is known.
    """

    type: str = cell(text)
    ic_a: float = cell(_CURRENT)
    vce_v: float = cell(_VOLTAGE)
    temperature_k: float = cell(celsius("-65", "200"), column="temp_c")
    hfe_min: float = cell(_GAIN)
    hfe_max: float | None = cell(maybe(_GAIN))
    evidence: str = cell(reading.evidence)

    @property
    def place(self) -> tuple[float, float, float]:
        """Current [A], voltage [V] and temperature [K] of the test."""
        return self.ic_a, self.vce_v, self.temperature_k


@dataclass(frozen=True, kw_only=True)
class _GainBin:
    family: str = cell(text)
    type: str = cell(text)
    evidence: str = cell(reading.evidence)


_LEAST_IS_SAFE = ("vceo_v", "ic_max_a", "ptot_w", "ptot2_w", "tj_max_k", "hfe_min", "vbe_min_v", "ft_hz")
_GREATEST_IS_SAFE = (
    "rth_ja_k_w",
    "rth_jc_k_w",
    "hfe_max",
    "vce_sat_max_v",
    "vbe_max_v",
    "icbo_max_a",
    "icbo_hot_max_a",
)
_CONDITIONS = (
    "polarity",
    "material",
    "package",
    "ptot_ref",
    "ptot_ref_k",
    "ptot2_ref",
    "ptot2_ref_k",
    "hfe_ic_a",
    "hfe_vce_v",
    "vce_sat_ic_a",
    "vce_sat_ib_a",
    "vbe_ic_a",
    "vbe_condition",
    "icbo_vcb_v",
    "icbo_hot_k",
)
"""What all bins of a family must share, or the more cautious of two figures would mean nothing."""


def transistors() -> Mapping[str, TransistorRow]:
    """The registered transistor types.

    Returns
    -------
    Mapping
        Type to row, in the order of the table; without the bare families, which `transistor` makes up from
        their bins.

    Raises
    ------
    CatalogueError
        If the table breaks its rules.
    """
    return _transistors(reading.directory())


def gain_bins() -> Mapping[str, tuple[str, ...]]:
    """The gain bins in which a family of types is sold.

    Returns
    -------
    Mapping
        Bare name of the family to its types; a type need not be among `transistors`.

    Raises
    ------
    CatalogueError
        If the table breaks its rules.
    """
    return _gain_bins(reading.directory())


def transistor(name: str) -> TransistorRow:
    """One transistor type, or the whole range of a family that is named without its gain bin.

    Parameters
    ----------
    name : str
        Registered type in either case, as in "BC847B"; or a family all of whose bins are in the table, as in
        "BC847".

    Returns
    -------
    TransistorRow
        The row; of a family, the least and greatest gain of its bins, no typical gain, and the more cautious
        of each rating.

    Raises
    ------
    CatalogueError
        If the type is not in the table, or a bin of the family is missing from it.
    """
    rows = transistors()
    families = {family: bins for family, bins in gain_bins().items() if not rows.keys().isdisjoint(bins)}
    by_key = {type_.casefold(): type_ for type_ in (*rows, *families)}
    type_ = by_key.get(name.strip().casefold())
    if type_ is None:
        complete = [family for family, bins in families.items() if rows.keys() >= set(bins)]
        raise CatalogueError(
            f"transistor.type: read {reading.quoted(name)}, accepted is a row of transistors.csv,"
            f" nearest is {reading.nearest(name, [*rows, *complete])}"
        )
    return rows[type_] if type_ in rows else _whole_family(type_, families[type_], rows)


def _whole_family(family: str, bins: Sequence[str], rows: Mapping[str, TransistorRow]) -> TransistorRow:
    missing = [type_ for type_ in bins if type_ not in rows]
    if missing:
        present = [type_ for type_ in bins if type_ in rows]
        raise CatalogueError(
            f"transistor.type: read '{family}' without a gain bin, accepted is"
            f" {reading.alternatives(present)}; the whole range of {family} is not known, since"
            f" {' and '.join(missing)} is not in the table"
        )
    members = [rows[type_] for type_ in bins]

    def cautious(field: str, pick: Callable[[Iterable[float]], float]) -> float | None:
        figures = [getattr(row, field) for row in members]
        return None if None in figures else pick(figures)

    changes: dict[str, Any] = {field: cautious(field, min) for field in _LEAST_IS_SAFE}
    changes |= {field: cautious(field, max) for field in _GREATEST_IS_SAFE}
    typical = {row.vbe_typ_v for row in members}
    remembered = dict.fromkeys(field for row in members for field in row.fields_from_memory)
    notes = [row.note for row in members]
    return dataclasses.replace(
        members[0],
        **changes,
        type=family,
        hfe_typ=None,
        vbe_typ_v=typical.pop() if len(typical) == 1 else None,
        ft_basis=_joined(row.ft_basis for row in members),
        evidence=_weakest(row.evidence for row in members),
        where_seen=_joined(row.where_seen for row in members),
        fields_from_memory=tuple(remembered),
        note=_joined([f"no bin given: the whole range of its bins {', '.join(bins)}", *notes]),
    )


def _joined(texts: Iterable[str]) -> str:
    return "; ".join(dict.fromkeys(filter(None, texts)))


def _weakest(labels: Iterable[str]) -> str:
    return max(labels, key=reading.EVIDENCE.index)


@cache
def _transistors(folder: Path) -> Mapping[str, TransistorRow]:
    source = folder / "transistors.csv"
    field_of = reading.columns(TransistorRow)
    keyed: list[tuple[int, str, TransistorRow]] = []
    for line, row in reading.read_table(source, TransistorRow):
        for name in row.fields_from_memory:
            if name not in field_of:
                raise CatalogueError(
                    f"{source.name}, line {line}, column fields_from_memory: read '{name}', accepted is a"
                    f" column, nearest is {reading.nearest(name, field_of)}"
                )
        _check(source.name, line, row)
        remembered = tuple(field_of[name] for name in row.fields_from_memory)
        keyed.append((line, row.type, dataclasses.replace(row, fields_from_memory=remembered)))
    return reading.unique(source.name, "type", keyed)


def _check(file: str, line: int, row: TransistorRow) -> None:
    for fields in (
        ("hfe_min", "hfe_typ", "hfe_max"),
        ("vbe_min_v", "vbe_typ_v", "vbe_max_v"),
        ("rth_jc_k_w", "rth_ja_k_w"),
        ("vce_sat_ib_a", "vce_sat_ic_a", "ic_max_a"),
        ("icbo_max_a", "icbo_hot_max_a"),
    ):
        reading.check_ascending(file, line, row, *fields)
    for fields in (("hfe_min", "hfe_max"), ("ptot_ref_k", "tj_max_k"), ("ptot2_ref_k", "tj_max_k")):
        reading.check_ascending(file, line, row, *fields, strict=True)
    reading.check_together(file, line, row, "icbo_hot_max_a", "icbo_hot_k")
    reading.check_together(file, line, row, "ptot2_w", "ptot2_ref", "ptot2_ref_k")
    if not row.vbe_condition.startswith(("on ", "saturated ")):
        raise CatalogueError(
            f"{file}, line {line}, column vbe_condition: read '{row.vbe_condition}',"
            " accepted is 'on ...' or 'saturated ...'"
        )


@cache
def _gain_bins(folder: Path) -> Mapping[str, tuple[str, ...]]:
    source = folder / "gain_bins.csv"
    rows = reading.read_table(source, _GainBin)
    reading.unique(source.name, "type", ((line, row.type, row) for line, row in rows))
    types = _transistors(folder)
    families: dict[str, tuple[str, ...]] = {}
    for line, row in rows:
        if row.family in types:
            raise CatalogueError(
                f"{source.name}, line {line}, column family: read '{row.family}', which is a row of"
                " transistors.csv, accepted is a name without its bin"
            )
        families[row.family] = (*families.get(row.family, ()), row.type)
        present = [types[type_] for type_ in families[row.family] if type_ in types]
        for field in _CONDITIONS:
            if len({getattr(member, field) for member in present}) > 1:
                raise CatalogueError(
                    f"{source.name}, line {line}, column type: read '{row.type}', which differs in {field}"
                    f" from another bin of {row.family}, accepted are bins that share it"
                )
    return MappingProxyType(families)


def hfe_points(name: str) -> tuple[HfePoint, ...]:
    """Gain limits of a type at further currents and temperatures.

    Parameters
    ----------
    name : str
        Type or family, as `transistor` takes it.

    Returns
    -------
    tuple of HfePoint
        In the order of the table; of a family, the points that all its bins share, with least and greatest
        gain. Empty where the table has none.

    Raises
    ------
    CatalogueError
        If the type is not in the table.
    """
    type_ = transistor(name).type
    points = _hfe_points(reading.directory())
    by_bin = [
        {point.place: point for point in points.get(bin_, ())} for bin_ in gain_bins().get(type_, (type_,))
    ]
    shared = [place for place in by_bin[0] if all(place in of_bin for of_bin in by_bin)]
    return tuple(_whole_range(type_, [of_bin[place] for of_bin in by_bin]) for place in shared)


def _whole_range(type_: str, points: Sequence[HfePoint]) -> HfePoint:
    highs = [point.hfe_max for point in points if point.hfe_max is not None]
    return dataclasses.replace(
        points[0],
        type=type_,
        hfe_min=min(point.hfe_min for point in points),
        hfe_max=max(highs) if len(highs) == len(points) else None,
        evidence=_weakest(point.evidence for point in points),
    )


@cache
def _hfe_points(folder: Path) -> Mapping[str, tuple[HfePoint, ...]]:
    source = folder / "transistor_hfe_points.csv"
    types = _transistors(folder)
    points: dict[str, tuple[HfePoint, ...]] = {}
    for line, point in reading.read_table(source, HfePoint):
        if point.type not in types:
            raise CatalogueError(
                f"{source.name}, line {line}, column type: read '{point.type}', accepted is a row of"
                f" transistors.csv, nearest is {reading.nearest(point.type, types)}"
            )
        reading.check_ascending(source.name, line, point, "hfe_min", "hfe_max", strict=True)
        earlier = points.get(point.type, ())
        if point.place in {other.place for other in earlier}:
            raise CatalogueError(
                f"{source.name}, line {line}, column ic_a: read {point.ic_a:g} A again for {point.type} at"
                f" {point.vce_v:g} V and {point.temperature_k:g} K, accepted is one row for each test point"
            )
        points[point.type] = (*earlier, point)
    return MappingProxyType(points)
