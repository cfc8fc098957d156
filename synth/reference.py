"""The reference element of a base voltage: junctions, a light-emitting diode or a Zener diode, as a straight line.

    V(I, T) = voltage + tc·(T − 25 °C) + slope·(I − current),

voltage and slope as the data sheet prints them at its test current. The line holds around that current; far below it the
knee begins, so a stage has to keep a least current in it.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from synth.quantities import Spread
from synth.transistor import GAP_VOLTAGE, T0, Transistor, thermal_voltage

Array = NDArray[np.float64]
Kind = Literal["diode", "led", "zener"]

TEST_CURRENT = {"led": "2 mA", "zener": "5 mA"}
"""Usual test currents: common practice. A diode in a divider carries what the divider does."""
SLOPE = {"led": "0 : 30 ohm", "zener": "0 : 60 ohm"}
"""Usual slope resistances at these currents: common practice."""
LED_TC = "-3 : -2 : -1 mV/K"
"""Common practice."""
ZENER_TURN = 5.2
"""Zener voltage without a temperature coefficient, from memory [V]: tunnelling below, avalanche above."""
ZENER_TC = (0.9e-3, -2.5e-3, 1.5e-3)
"""Its coefficient per volt above that [1/K], the least [V/K], and how far units stray [V/K]; from memory."""


@dataclass(frozen=True, kw_only=True)
class Reference:
    """A reference element with its spreads.

    Parameters
    ----------
    kind : {"diode", "led", "zener"}
        What it is.
    voltage : Spread
        Voltage of the whole element at `current` and 25 °C [V].
    current : float
        Current at which `voltage` and `slope` hold [A].
    tc : Spread
        Temperature coefficient of the voltage [V/K].
    slope : Spread
        Slope resistance dV/dI [ohm].
    number : int
        Equal elements in series, which `voltage`, `tc` and `slope` count together [-].
    """

    kind: Kind
    voltage: Spread
    current: float
    tc: Spread
    slope: Spread
    number: int = 1

    def nominal(self, temperature: Array | float) -> Array:
        """Nominal voltage at the test current.

        Parameters
        ----------
        temperature : array_like
            Ambient temperature [K], broadcast.

        Returns
        -------
        ndarray
            Voltage [V].
        """
        return np.asarray(self.voltage.nominal + self.tc.nominal * (np.asarray(temperature) - T0))

    def deviation(self, temperature: Array | float) -> tuple[Array, Array]:
        """How far a unit may lie from the nominal voltage at a temperature.

        Parameters
        ----------
        temperature : array_like
            Ambient temperature [K], broadcast.

        Returns
        -------
        low, high : ndarray
            Ends of the deviation [V]; the spread of the coefficient widens it away from 25 °C.
        """
        rise = np.asarray(temperature) - T0
        one, two = ((end - self.tc.nominal) * rise for end in (self.tc.low, self.tc.high))
        return (
            np.asarray(self.voltage.low - self.voltage.nominal + np.minimum(one, two)),
            np.asarray(self.voltage.high - self.voltage.nominal + np.maximum(one, two)),
        )

    def line(self, deviation: Array | float, slope: Array | float, temperature: Array | float) -> dict[str, Array]:
        """The element as a network sees it.

        Parameters
        ----------
        deviation : array_like
            Distance of this unit from the nominal voltage [V], broadcast.
        slope : array_like
            Its slope resistance [ohm], broadcast.
        temperature : array_like
            Ambient temperature [K], broadcast.

        Returns
        -------
        dict
            ``vref``, where the line meets no current [V], and ``r_ref``, its slope [ohm].
        """
        return {
            "vref": np.asarray(self.nominal(temperature) + deviation - slope * np.asarray(self.current)),
            "r_ref": np.asarray(slope),
        }


def usual_figures(
    kind: Kind, transistor: Transistor, current: float, voltage: Spread | None
) -> dict[Literal["voltage", "tc", "slope"], tuple[str, str]]:
    """What is taken for the figures of one element that are not given, as texts of a stage file.

    Parameters
    ----------
    kind : {"diode", "led", "zener"}
        What it is.
    transistor : Transistor
        The transistor; a diode is taken for a junction like its own, which is what makes it follow.
    current : float
        Test current [A].
    voltage : Spread or None
        Voltage given [V]; a Zener diode's coefficient goes by it.

    Returns
    -------
    dict
        ``voltage``, ``tc`` and ``slope``: text and why. There is no usual voltage of an LED or a Zener diode.
    """
    if kind == "diode":
        vt = float(thermal_voltage(T0))
        volts = float(transistor.vbe_at(current, T0))
        tc = (volts - GAP_VOLTAGE[transistor.material] - 3.0 * vt) / T0
        law = "that of the base-emitter law"
        moves = transistor.vbe_model == "junction"
        return {
            "voltage": (f"{volts:.4g} V ± 50 mV", law),
            "tc": (f"{1e3 * tc:.4g} mV/K", law) if moves else ("0 V/K", "VBE is fixed, and so is the diode's voltage"),
            "slope": (f"{vt / current:.4g} ohm", "VT over its test current"),
        }
    found: dict[Literal["voltage", "tc", "slope"], tuple[str, str]] = {
        "voltage": ("", ""),
        "tc": (LED_TC, "usual for LEDs"),
        "slope": (SLOPE[kind], "usual at its test current"),
    }
    if kind == "zener" and voltage is not None:
        per_volt, least, stray = ZENER_TC
        middle = max(per_volt * (voltage.nominal - ZENER_TURN), least)
        ends = (middle - stray, middle, middle + stray)
        found["tc"] = (" : ".join(f"{1e3 * end:.3g} mV/K" for end in ends), "usual for this voltage")
    return found
