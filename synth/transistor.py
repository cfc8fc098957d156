"""The laws of one bipolar transistor: base-emitter voltage, current gain and leakage over temperature.

All formulas take NPN signs; a PNP is its mirror image, so its magnitudes obey the same formulas.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.constants import Boltzmann, elementary_charge, zero_Celsius

from synth.quantities import RestpointError, Spread

Array = NDArray[np.float64]

T0 = 25.0 + zero_Celsius
"""Reference temperature of every data-sheet figure, 25 °C [K]."""

Material = Literal["silicon", "germanium"]
GAP_VOLTAGE: dict[Material, float] = {"silicon": 1.17, "germanium": 0.744}
"""Gap voltage extrapolated to zero kelvin, VG [V]."""

XTI = 3.0
"""Temperature exponent of the saturation current [-]."""

GAIN_EXPONENT_HOT = 1.5
GAIN_EXPONENT_COLD = 2.5
"""Exponent of hFE over temperature above and below 25 °C [-]; cold sheets imply more than the usual 1.5."""

LEAKAGE_DOUBLING = 10.0
"""Temperature rise that doubles the leakage where no hot limit is printed [K]."""

CUT_OFF_CURRENT = 1e-9
"""A stage below this current plus ICEO is cut off [A]."""


class TransistorError(RestpointError):
    """A transistor description that contradicts itself."""


def thermal_voltage(temperature: Array | float) -> Array:
    """Thermal voltage VT = kT/q.

    Parameters
    ----------
    temperature : array_like
        Junction temperature [K], broadcast.

    Returns
    -------
    ndarray
        VT [V].
    """
    return np.asarray(temperature) * (Boltzmann / elementary_charge)


@dataclass(frozen=True, kw_only=True)
class Transistor:
    """One transistor type as its data sheet and the stage describe it.

    Parameters
    ----------
    polarity : {"npn", "pnp"}
        Conductivity type.
    material : {"silicon", "germanium"}
        Sets the gap voltage of the base-emitter law.
    hfe : Spread
        DC current gain at 25 °C [-].
    vbe : Spread
        Base-emitter voltage at 25 °C and `vbe_ic` [V]; its distance from nominal stays constant over temperature.
    vbe_ic : float
        Collector current at which `vbe` holds [A].
    vbe_model : {"junction", "fixed"}
        "junction": VBE follows IC and temperature; "fixed": VBE is one constant, as in a hand calculation.
    icbo : Spread
        Collector-base leakage at 25 °C [A].
    icbo_hot : tuple of float, optional
        Printed hot limit of the leakage [A] and its temperature [K].
    vce_sat : float
        Collector-emitter voltage of the saturated transistor [V].
    type : str
        Registered type number, or "" for a transistor given by its figures.

    Raises
    ------
    TransistorError
        If a gain, a current or a voltage is out of its meaning.
    """

    polarity: Literal["npn", "pnp"] = "npn"
    material: Material = "silicon"
    hfe: Spread
    vbe: Spread
    vbe_ic: float
    vbe_model: Literal["junction", "fixed"] = "junction"
    icbo: Spread = field(default_factory=lambda: Spread(0.0, 0.0, 0.0))
    icbo_hot: tuple[float, float] | None = None
    vce_sat: float = 0.2
    type: str = ""

    def __post_init__(self) -> None:
        if not self.hfe.low > 0:
            raise TransistorError(f"transistor.hfe: read {self.hfe.low:g} as the least gain, accepted is a gain above 0")
        if not self.vbe.low > 0:
            raise TransistorError(f"transistor.vbe: read {self.vbe.low:g} V as the least VBE, accepted is more than 0 V")
        if not self.vbe_ic > 0:
            raise TransistorError(f"transistor.vbe_ic: read {self.vbe_ic:g} A, accepted is a current above 0 A")
        if self.icbo.low < 0:
            raise TransistorError(f"transistor.icbo: read {self.icbo.low:g} A as the least leakage, accepted is 0 A or more")
        if self.icbo_hot is not None and (self.icbo_hot[1] <= T0 or self.icbo_hot[0] < self.icbo.high):
            raise TransistorError(
                f"transistor.icbo: read a hot limit of {self.icbo_hot[0]:g} A at {self.icbo_hot[1] - zero_Celsius:g} °C,"
                f" accepted is at least the 25 °C limit of {self.icbo.high:g} A at a temperature above 25 °C"
            )

    def vbe_at_reference(self, temperature: Array | float) -> Array:
        """VBE of the nominal unit at IC = `vbe_ic`, over temperature.

        Parameters
        ----------
        temperature : array_like
            Junction temperature [K], broadcast.

        Returns
        -------
        ndarray
            VBE [V].

        Notes
        -----
        VG − (VG − VBE0)·T/T0 − XTI·VT·ln(T/T0): the bandgap law of a junction whose saturation current grows as
        T**XTI·exp(−VG/VT). A "fixed" VBE is the same at every temperature.
        """
        t = np.asarray(temperature, dtype=float)
        if self.vbe_model == "fixed":
            return np.full_like(t, self.vbe.nominal)
        vg = GAP_VOLTAGE[self.material]
        ratio = t / T0
        return np.asarray(vg - (vg - self.vbe.nominal) * ratio - XTI * thermal_voltage(t) * np.log(ratio))

    def vbe_at(self, current: Array | float, temperature: Array | float, delta: Array | float = 0.0) -> Array:
        """VBE of a unit at any collector current.

        Parameters
        ----------
        current : array_like
            Total collector current [A], above 0, broadcast.
        temperature : array_like
            Junction temperature [K], broadcast.
        delta : array_like
            Distance of this unit from the nominal VBE [V], broadcast.

        Returns
        -------
        ndarray
            VBE [V].
        """
        base = self.vbe_at_reference(temperature) + delta
        if self.vbe_model == "fixed":
            return base + 0.0 * np.asarray(current)
        return np.asarray(base + thermal_voltage(temperature) * np.log(np.asarray(current) / self.vbe_ic))

    def saturation_current(self, temperature: Array | float) -> Array:
        """Saturation current IS of the nominal unit: the current at which the junction law gives VBE = 0.

        Parameters
        ----------
        temperature : array_like
            Junction temperature [K], broadcast.

        Returns
        -------
        ndarray
            IS [A].
        """
        return np.asarray(self.vbe_ic * np.exp(-self.vbe_at_reference(temperature) / thermal_voltage(temperature)))

    def gain_factor(self, temperature: Array | float) -> Array:
        """HFE relative to its 25 °C figure.

        Parameters
        ----------
        temperature : array_like
            Junction temperature [K], broadcast.

        Returns
        -------
        ndarray
            hFE(T)/hFE(25 °C) [-].
        """
        t = np.asarray(temperature, dtype=float)
        return np.asarray((t / T0) ** np.where(t >= T0, GAIN_EXPONENT_HOT, GAIN_EXPONENT_COLD))

    def leakage_factor(self, temperature: Array | float) -> Array:
        """ICBO relative to its 25 °C figure.

        Parameters
        ----------
        temperature : array_like
            Junction temperature [K], broadcast.

        Returns
        -------
        ndarray
            ICBO(T)/ICBO(25 °C) [-].

        Notes
        -----
        Doubles every 10 K, or follows the exponential from the 25 °C limit through the printed hot limit.
        """
        t = np.asarray(temperature, dtype=float)
        if self.icbo_hot is None or self.icbo.high == 0.0:
            return np.asarray(2.0 ** ((t - T0) / LEAKAGE_DOUBLING))
        limit, hot = self.icbo_hot
        return np.asarray((limit / self.icbo.high) ** ((t - T0) / (hot - T0)))
