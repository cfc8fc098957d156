"""Table of derating policies: how much of each rating a design may use."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from pathlib import Path

from synth.catalogue import reading
from synth.catalogue.reading import CatalogueError, cell, celsius, maybe, number, per_cent, remark, text
from synth.catalogue.resistors import ResistorStyle

_SHARE = per_cent("1", "100")
_RESISTOR_TEMPERATURE = maybe(celsius("25", "400"))


@dataclass(frozen=True, kw_only=True)
class Derating:
    """One derating policy.

    Parameters
    ----------
    name : str
        Name of the policy; a published one has that of its document.
    title : str
        What it is called in full.
    resistor_power, resistor_voltage : float
        Shares of a resistor's rated power and of its style's working voltage that may be used [-].
    axial_full_power_temperature_k, axial_zero_power_temperature_k : float or None
        Temperature up to which an axial film resistor may use its whole share of power, and where nothing is left [K];
        None where the style's own temperatures hold.
    chip_full_power_temperature_k, chip_zero_power_temperature_k : float or None
        The same for chips [K].
    transistor_voltage, transistor_current, transistor_power : float
        Shares of a transistor's rated voltages, collector current and total power that may be used [-].
    junction_max_k : float or None
        Highest junction temperature whatever the type [K]; None where the policy has none.
    junction_below_max_k : float
        How far the junction must stay below the type's own limit [K]; the lower of both counts.
    source : str
        Document or kind of source.
    evidence : {"seen", "mixed", "memory"}
        How the row is known.
    note : str
        Remarks.
    """

    name: str = cell(text)
    title: str = cell(text)
    resistor_power: float = cell(_SHARE, column="resistor_power_percent")
    resistor_voltage: float = cell(_SHARE, column="resistor_voltage_percent")
    axial_full_power_temperature_k: float | None = cell(_RESISTOR_TEMPERATURE, column="axial_full_power_temp_c")
    axial_zero_power_temperature_k: float | None = cell(_RESISTOR_TEMPERATURE, column="axial_zero_power_temp_c")
    chip_full_power_temperature_k: float | None = cell(_RESISTOR_TEMPERATURE, column="chip_full_power_temp_c")
    chip_zero_power_temperature_k: float | None = cell(_RESISTOR_TEMPERATURE, column="chip_zero_power_temp_c")
    transistor_voltage: float = cell(_SHARE, column="transistor_voltage_percent")
    transistor_current: float = cell(_SHARE, column="transistor_current_percent")
    transistor_power: float = cell(_SHARE, column="transistor_power_percent")
    junction_max_k: float | None = cell(maybe(celsius("50", "250")), column="junction_max_c")
    junction_below_max_k: float = cell(number("0", "150"))
    source: str = cell(text)
    evidence: str = cell(reading.evidence)
    note: str = cell(remark)

    def resistor_temperatures(self, style: ResistorStyle) -> tuple[float, float] | None:
        """The policy's own derating line for a style of resistor.

        Parameters
        ----------
        style : ResistorStyle
            The style; chips and axial parts may differ.

        Returns
        -------
        tuple of float, or None
            Temperatures up to which the whole share holds and where nothing is left [K]; None where the policy has no
            line of its own.
        """
        if style.style == "chip":
            full, zero = self.chip_full_power_temperature_k, self.chip_zero_power_temperature_k
        else:
            full, zero = self.axial_full_power_temperature_k, self.axial_zero_power_temperature_k
        return None if full is None or zero is None else (full, zero)


def deratings() -> Mapping[str, Derating]:
    """The derating policies.

    Returns
    -------
    Mapping
        Name to policy, in the order of the table.

    Raises
    ------
    CatalogueError
        If the table breaks its rules.
    """
    return _deratings(reading.directory())


def derating(name: str) -> Derating:
    """One derating policy by name.

    Parameters
    ----------
    name : str
        Name of a row, as in "half_power" or "EEE-INST-002"; case does not matter, a blank stands for an underscore.

    Returns
    -------
    Derating
        The policy.

    Raises
    ------
    CatalogueError
        If no row has that name.
    """
    policies = deratings()
    wanted = "_".join(name.split()).casefold()
    for policy in policies.values():
        if wanted == policy.name.casefold():
            return policy
    raise CatalogueError(
        f"derating: read {reading.quoted(name)}, accepted is {reading.alternatives(policies)},"
        f" nearest is {reading.nearest(name, policies)}"
    )


@cache
def _deratings(folder: Path) -> Mapping[str, Derating]:
    source = folder / "derating.csv"
    rows = reading.read_table(source, Derating)
    for line, policy in rows:
        for kind in ("axial", "chip"):
            ends = (f"{kind}_full_power_temperature_k", f"{kind}_zero_power_temperature_k")
            reading.check_together(source.name, line, policy, *ends)
            reading.check_ascending(source.name, line, policy, *ends, strict=True)
    return reading.unique(source.name, "name", ((line, policy.name, policy) for line, policy in rows))
