"""How the units of a lot are spread between the ends of a spread."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from scipy.special import ndtr, ndtri

from synth.networks.form import Array
from synth.quantities import RestpointError

Shape = Literal["uniform", "normal", "log_uniform", "nominal", "measured"]
Points = Literal["sobol", "random"]

SHAPES: dict[str, str] = {
    "uniform": "every value between the ends is equally likely",
    "normal": "normal around the nominal value, cut off at the ends, which stand for three sigma",
    "log_uniform": "every ratio between the ends is equally likely",
    "nominal": "every unit has the nominal value",
}
"""What each shape that a name stands for says."""
SIGMAS = 3.0
"""Standard deviations from the nominal value to the end of a spread: common practice for a data-sheet limit."""
SPREADS: dict[str, str] = {
    "vcc": "of the supply",
    "vee": "of the second supply",
    "vbb": "of the base supply",
    "vload": "of the load supply",
    "hfe": "of hFE from unit to unit",
    "vbe": "of VBE from unit to unit",
    "icbo": "of the leakage from unit to unit",
    "reference": "of the voltage, coefficient and slope of the reference element",
    "tolerance": "of each resistor inside its tolerance",
    "life": "of the change of each resistor over life",
    "tcr": "of the temperature coefficient of each resistor",
    "temperature": "of the ambient temperature",
}
"""Every spread that has a distribution, and what it is the distribution of."""


class DistributionError(RestpointError):
    """A distribution that cannot be drawn from."""


@dataclass(frozen=True, kw_only=True)
class Distribution:
    """How units are spread between the ends of a spread.

    Parameters
    ----------
    shape : {"uniform", "normal", "log_uniform", "nominal", "measured"}
        Which law.
    values : tuple of float
        Measured values, of which each is equally likely [SI unit of the spread]; only with "measured".

    Raises
    ------
    DistributionError
        If measured values are missing, or given to another shape.
    """

    shape: Shape = "uniform"
    values: tuple[float, ...] = ()

    def __post_init__(self) -> None:
        if (self.shape == "measured") != bool(self.values):
            accepted = "measured values with the shape measured, and none with another"
            raise DistributionError(f"distribution: read {self.shape} with {len(self.values)} values, accepted is {accepted}")

    def quantile(self, u: Array, low: Array | float, nominal: Array | float, high: Array | float) -> Array:
        """Value below which a share of the units lies.

        Parameters
        ----------
        u : ndarray
            The share, at least 0 and below 1 [-].
        low, nominal, high : array_like
            The spread, broadcast against `u` [SI unit of the spread].

        Returns
        -------
        ndarray
            Values between `low` and `high` [SI unit of the spread]; of measured values one of them.

        Raises
        ------
        DistributionError
            If a logarithmic law meets a spread that reaches zero.

        Notes
        -----
        The normal law has the nominal value as its mode and a sigma for each side, a third of the distance to that end; it is
        cut off at the ends. With an even spread that is the truncated normal distribution.
        """
        low, nominal, high = (np.asarray(x, dtype=float) for x in (low, nominal, high))
        if self.shape == "measured":
            ordered = np.sort(self.values)
            return np.asarray(ordered[np.minimum((u * ordered.size).astype(np.intp), ordered.size - 1)])
        if self.shape == "nominal":
            return np.asarray(np.broadcast_to(nominal, np.broadcast_shapes(u.shape, nominal.shape)))
        if self.shape == "log_uniform":
            if not np.all(low > 0.0):
                raise DistributionError(
                    f"distribution: read log_uniform for a spread that begins at {float(np.min(low)):g}, accepted is a spread"
                    " above 0, or uniform"
                )
            # The end itself must come out, not its rounding.
            return np.asarray(np.clip(low * (high / low) ** u, low, high))
        if self.shape == "normal":
            return _two_sided_normal(u, low, nominal, high)
        return np.asarray(low + (high - low) * u)

    @property
    def words(self) -> str:
        """The law in a few words."""
        if self.shape == "measured":
            return f"measured list of {len(self.values)}"
        return self.shape.replace("_", "-")


def _two_sided_normal(u: Array, low: Array, nominal: Array, high: Array) -> Array:
    width = high - low
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(width > 0.0, (nominal - low) / width, 0.5)
        tail = ndtr(-SIGMAS)
        left = u < share
        inner = np.where(left, u / share, (u - share) / (1.0 - share))
    chance = np.where(left, tail + inner * (0.5 - tail), 0.5 + inner * (0.5 - tail))
    sigma = np.where(left, nominal - low, high - nominal) / SIGMAS
    # A side of no width has no share of the units and no sigma.
    offset = np.where(sigma > 0.0, sigma * ndtri(np.where(sigma > 0.0, chance, 0.5)), 0.0)
    return np.asarray(np.clip(nominal + offset, low, high))


@dataclass(frozen=True, kw_only=True)
class Lot:
    """A lot of units to be drawn.

    Parameters
    ----------
    units : int
        How many [-].
    seed : int
        Seed of the draw; 0 is one like any other [-].
    points : {"sobol", "random"}
        Scrambled Sobol points, which fill the box evenly, or pseudo-random ones.
    laws : mapping of str to Distribution
        Distribution of each of `SPREADS` that is not uniform.
    """

    units: int = 65536
    seed: int = 1
    points: Points = "sobol"
    laws: Mapping[str, Distribution] = field(default_factory=lambda: {"hfe": Distribution(shape="log_uniform")})

    def law(self, spread: str) -> Distribution:
        """Distribution of a spread.

        Parameters
        ----------
        spread : str
            One of `SPREADS`.

        Returns
        -------
        Distribution
            Uniform unless another is given.
        """
        return self.laws.get(spread, Distribution())
