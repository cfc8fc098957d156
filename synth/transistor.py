"""The laws of one bipolar transistor: base-emitter voltage, current gain and leakage over temperature.

All formulas take NPN signs; a PNP is its mirror image, so its magnitudes obey the same formulas.

Gain may depend on the Q-point itself: on IC by rows of a data sheet (`GainRows`), on VCE by the Early effect. Both leave
the Q-point single and most proofs of monotonicity standing, see `synth.q_point` and `synth.measures`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
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


STEEPEST_GAIN = 0.95
"""Steepest rise of ln hFE against ln IC [-]: IC/hFE, which sets the base current, has to rise with IC by a margin."""
LEAST_EARLY = 1.0
"""Least Early voltage [V]; real ones are tens of volts, and the proofs need far more than VT."""


@dataclass(frozen=True, kw_only=True)
class GainRows:
    """How hFE goes with IC, as rows of a data sheet have it.

    Parameters
    ----------
    at : float
        Current at which the transistor's `hfe` holds [A].
    current : tuple of float
        Currents of the rows, ascending [A].
    low, high : tuple of float
        Least and greatest hFE at each of them [-].

    Raises
    ------
    TransistorError
        If currents do not ascend, a gain is not above 0, or a curve rises too steeply.

    Notes
    -----
    ln hFE is linear in ln IC between rows and constant beyond them. A unit keeps its place between the least and the greatest
    curve, in ln hFE, at every current: it is high everywhere or low everywhere, and every curve between the two is reached.
    """

    at: float
    current: tuple[float, ...]
    low: tuple[float, ...]
    high: tuple[float, ...]

    def __post_init__(self) -> None:
        field = "transistor.hfe_rows"
        for one, two in zip(self.current, self.current[1:], strict=False):
            if two <= one:
                raise TransistorError(f"{field}: read {two:g} A after {one:g} A, accepted are currents that ascend")
        for low, high in zip(self.low, self.high, strict=True):
            if not 0.0 < low <= high:
                raise TransistorError(f"{field}: read hFE {low:g} : {high:g}, accepted is least : greatest above 0")
        if self.steepest > STEEPEST_GAIN:
            raise TransistorError(
                f"{field}: read rows in which hFE rises as IC to the {self.steepest:.2f}, accepted is a power of at most"
                f" {STEEPEST_GAIN:g}: beyond, more collector current would need less base current"
            )
        low, high = self.ends
        if low == high and self.low != self.high:
            raise TransistorError(
                f"{field}: read rows without a spread at {self.at:g} A and with one elsewhere, accepted is a spread in each"
            )

    @cached_property
    def _logs(self) -> tuple[Array, Array, Array, float, float]:
        x, low, high = (np.log(np.array(column)) for column in (self.current, self.low, self.high))
        own = np.log(self.at)
        return x, low, high, float(np.interp(own, x, low)), float(np.interp(own, x, high))

    @property
    def ends(self) -> tuple[float, float]:
        """Least and greatest hFE at `at` [-]."""
        return float(np.exp(self._logs[3])), float(np.exp(self._logs[4]))

    @cached_property
    def steepest(self) -> float:
        """Steepest rise of ln hFE against ln IC, 0 where it only falls [-]."""
        x, low, high, _, _ = self._logs
        slopes = [np.diff(curve) / np.diff(x) for curve in (low, high)]
        return float(max(0.0, *(part.max(initial=0.0) for part in slopes)))

    def place(self, unit: Array | float) -> Array:
        """Place of a unit between the least and the greatest curve.

        Parameters
        ----------
        unit : array_like
            Its hFE at `at` and 25 °C [-], broadcast.

        Returns
        -------
        ndarray
            0 on the least curve, 1 on the greatest [-].
        """
        _, _, _, low, high = self._logs
        own = np.log(np.asarray(unit, dtype=float))
        # A measured unit may lie outside of both: it then follows the nearer one.
        return np.asarray(np.clip((own - low) / (high - low), 0.0, 1.0) if high > low else 0.0 * own)

    def lift(self, unit: Array | float, ic: Array | float) -> Array:
        """Ln of hFE at a current relative to that at `at`.

        Parameters
        ----------
        unit : array_like
            hFE of the unit at `at` and 25 °C [-], broadcast.
        ic : array_like
            Collector current [A], broadcast.

        Returns
        -------
        ndarray
            Logarithm of the factor [-].
        """
        x, low, high, own_low, own_high = self._logs
        with np.errstate(divide="ignore"):
            u = np.log(np.maximum(np.asarray(ic, dtype=float), 0.0))
        y = self.place(unit)
        return np.asarray((1.0 - y) * (np.interp(u, x, low) - own_low) + y * (np.interp(u, x, high) - own_high))

    def reach(self, unit: Array | float, least: Array | float, most: Array | float) -> tuple[Array, Array]:
        """Ends of `lift` over a range of currents.

        Parameters
        ----------
        unit : array_like
            As in `lift` [-], broadcast.
        least, most : array_like
            Ends of the range [A], broadcast.

        Returns
        -------
        low, high : ndarray
            Least and greatest of the logarithm [-].
        """
        ends = [self.lift(unit, least), self.lift(unit, most)]
        low, high = np.minimum(*ends), np.maximum(*ends)
        for knot in self.current:
            inside = (np.asarray(least) < knot) & (np.asarray(most) > knot)
            value = self.lift(unit, knot)
            low = np.where(inside, np.minimum(low, value), low)
            high = np.where(inside, np.maximum(high, value), high)
        return np.asarray(low), np.asarray(high)


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
        DC current gain at 25 °C [-]; at `hfe_rows.at` and `va_vce` where gain goes with IC or VCE.
    hfe_rows : GainRows, optional
        How the gain goes with IC; constant when not given.
    va : Spread, optional
        Early voltage [V]: hFE goes as (VA + VCE)/(VA + `va_vce`); without it VCE has no say.
    va_vce : float
        Collector-emitter voltage at which `hfe` was tested [V].
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
    hfe_rows: GainRows | None = None
    va: Spread | None = None
    va_vce: float = 5.0

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

        if self.va is not None and not self.va.low >= LEAST_EARLY:
            raise TransistorError(f"transistor.va: read {self.va.low:g} V at least, accepted is {LEAST_EARLY:g} V or more")
        if self.va_vce < 0.0:
            raise TransistorError(f"transistor.va_vce: read {self.va_vce:g} V, accepted is a magnitude of 0 V or more")

    @property
    def gain_moves(self) -> bool:
        """Whether the gain depends on the Q-point."""
        return self.hfe_rows is not None or self.va is not None

    def early_factor(self, va: Array | float, vce: Array | float) -> Array:
        """Gain at a collector-emitter voltage relative to that at `va_vce`.

        Parameters
        ----------
        va : array_like
            Early voltage [V], broadcast.
        vce : array_like
            Collector-emitter voltage [V], broadcast; below 0 V, where the active law is only continued, 0 V counts.

        Returns
        -------
        ndarray
            (VA + VCE)/(VA + VCE of the test) [-].

        References
        ----------
        J. M. Early, Effects of space-charge layer widening in junction transistors, Proceedings of the IRE 40, 1952.
        """
        return np.asarray((np.asarray(va) + np.maximum(vce, 0.0)) / (np.asarray(va) + self.va_vce))

    def gain_range(self, most: float) -> tuple[float, float]:
        """Between what factors rows and Early voltage may move the gain of any unit.

        Parameters
        ----------
        most : float
            Greatest collector-emitter voltage [V].

        Returns
        -------
        low, high : float
            Factors on `hfe` [-].
        """
        low = high = 1.0
        if self.hfe_rows is not None:
            ends = [self.hfe_rows.reach(unit, 0.0, np.inf) for unit in (self.hfe.low, self.hfe.high)]
            low, high = float(np.exp(min(e[0] for e in ends))), float(np.exp(max(e[1] for e in ends)))
        if self.va is not None:
            low *= float(self.early_factor(self.va.low, 0.0))
            high *= float(max(self.early_factor(va, most) for va in (self.va.low, self.va.high)))
        return low, high

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
