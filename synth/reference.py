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
from synth.transistor import T0

Array = NDArray[np.float64]
Kind = Literal["diode", "led", "zener"]


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
    """

    kind: Kind
    voltage: Spread
    current: float
    tc: Spread
    slope: Spread

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
