"""The resistors of one role: their bands over temperature, series and parallel pairs, and what each part of a pair carries.

A pair of parts a and b with relative factors f_a and f_b has the total (a·f_a + b·f_b) in series, 1/(1/(a·f_a) + 1/(b·f_b)) in
parallel. Both rise in either factor, so the ends of the total are those of the parts taken together: with equal bands the pair
has that same band. Each part varies on its own, so at a given total one part carries most when it is as large as its band and
the least of the other allow (in parallel: as small).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from synth.preferred.pairs import PARALLEL, SERIES, SINGLE, PairList, resistance
from synth.transistor import T0

Array = NDArray[np.float64]
Index = NDArray[np.int32]

HALVES = ("a", "b")
"""Designators of the parts of a pair, after the role: the one that carries more comes first."""


@dataclass(frozen=True, kw_only=True, eq=False)
class Pairs:
    """How each element of `Parts` is made up of one or two resistors.

    Parameters
    ----------
    base : Parts
        The single resistors.
    join : ndarray of int, shape (n,)
        Code of `synth.preferred.pairs.JOINS`.
    first, second : ndarray of int, shape (n,)
        Positions in `base`; equal where there is only one.
    """

    base: Parts
    join: NDArray[np.int8]
    first: Index
    second: Index

    def take(self, index: NDArray[np.integer]) -> Pairs:
        """The pairs of some elements.

        Parameters
        ----------
        index : ndarray of int
            Which elements.

        Returns
        -------
        Pairs
            Theirs, in that order.
        """
        return Pairs(base=self.base, join=self.join[index], first=self.first[index], second=self.second[index])

    @cached_property
    def halves(self) -> tuple[Parts, Parts]:
        """The single resistors of each element, first and second."""
        return self.base.take(self.first), self.base.take(self.second)

    @cached_property
    def bent(self) -> NDArray[np.bool_]:
        """Parallel pairs of unlike bands, whose ends are no straight line over temperature."""
        one, two = self.halves
        alike = (one.band == two.band) & (one.tcr_low == two.tcr_low) & (one.tcr_high == two.tcr_high)
        return np.asarray((self.join == PARALLEL) & ~alike)


@dataclass(frozen=True, kw_only=True, eq=False)
class Parts:
    """The resistors of one role, one element for each candidate.

    Parameters
    ----------
    nominal : ndarray, shape (n,)
        Nominal resistance [ohm].
    band : ndarray, shape (n,)
        Tolerance plus change over life [-].
    tcr_low, tcr_high : ndarray, shape (n,)
        Ends of the temperature coefficient [1/K].
    pairs : Pairs, optional
        How the elements are made up, where some are pairs; band and coefficients are then those of the total at 25 °C.
    """

    nominal: Array
    band: Array
    tcr_low: Array
    tcr_high: Array
    pairs: Pairs | None = None

    @classmethod
    def of_pairs(cls, pairs: Pairs) -> Parts:
        """The totals of pairs.

        Parameters
        ----------
        pairs : Pairs
            Single resistors and pairs.

        Returns
        -------
        Parts
            One element each.
        """
        one, two = pairs.halves
        whole = one.nominal + two.nominal
        # How much of a relative change of the first the total follows.
        weight = np.where(pairs.join == SERIES, one.nominal / whole, two.nominal / whole)
        weight = np.where(pairs.join == SINGLE, 1.0, weight)

        def mixed(a: Array, b: Array) -> Array:
            return np.where(a == b, a, weight * a + (1.0 - weight) * b)

        low = 1.0 / (weight / (1.0 - one.band) + (1.0 - weight) / (1.0 - two.band))
        return cls(
            nominal=resistance(pairs.join, one.nominal, two.nominal),
            band=np.where(pairs.bent, 1.0 - low, mixed(one.band, two.band)),
            tcr_low=mixed(one.tcr_low, two.tcr_low),
            tcr_high=mixed(one.tcr_high, two.tcr_high),
            pairs=pairs,
        )

    @classmethod
    def of_list(cls, found: PairList, base: Parts) -> Parts:
        """The entries of a list of pairs.

        Parameters
        ----------
        found : PairList
            The list.
        base : Parts
            The single resistors it was made from, in the order of its values.

        Returns
        -------
        Parts
            One element each.
        """
        return cls.of_pairs(Pairs(base=base, join=found.join, first=found.first, second=found.second))

    @property
    def paired(self) -> bool:
        """Whether any element is a pair."""
        return self.pairs is not None and bool(np.any(self.pairs.join != SINGLE))

    def ends(self, temperature: Array | float) -> tuple[Array, Array]:
        """Least and greatest resistance at a temperature.

        Parameters
        ----------
        temperature : array_like
            Ambient temperature [K], broadcast against (n,).

        Returns
        -------
        low, high : ndarray
            R·(1 ∓ band + TCR·(T − 25 °C)) with the TCR at its worse end [ohm]; of a pair what its parts make up at theirs.
        """
        rise = np.asarray(temperature) - T0
        one, two = self.tcr_low * rise, self.tcr_high * rise
        low = np.asarray(self.nominal * (1.0 - self.band + np.minimum(one, two)))
        high = np.asarray(self.nominal * (1.0 + self.band + np.maximum(one, two)))
        if self.pairs is None or not self.pairs.bent.any():
            return low, high
        (a, c), (b, d) = (half.ends(temperature) for half in self.pairs.halves)
        return np.where(self.pairs.bent, a * b / (a + b), low), np.where(self.pairs.bent, c * d / (c + d), high)

    def shares(self, half: int, ohms: Array, temperature: Array) -> tuple[Array, Array]:
        """Greatest share that one part can have of the power and of the voltage of its role, at a given total.

        Parameters
        ----------
        half : {0, 1}
            Which part of a pair.
        ohms : ndarray
            Resistance of the role, within its ends [ohm], broadcast against (n,).
        temperature : ndarray
            Ambient temperature [K], broadcast.

        Returns
        -------
        power, voltage : ndarray
            Shares [-]; 1 of a single resistor, 0 of the second one that it does not have.
        """
        if self.pairs is None:
            whole = np.full(np.shape(ohms), 1.0 - half)
            return whole, whole
        one, two = (self.pairs.halves[k].ends(temperature) for k in (half, 1 - half))
        in_series = np.minimum(one[1], ohms - two[0]) / ohms
        in_parallel = np.minimum(1.0 / one[0], 1.0 / ohms - 1.0 / two[1]) * ohms
        join, alone = self.pairs.join, 1.0 - half
        power = np.where(join == SINGLE, alone, np.where(join == SERIES, in_series, in_parallel))
        return power, np.where(join == SINGLE, alone, np.where(join == SERIES, in_series, 1.0))

    def upper(self, ohms: Array, temperature: Array) -> tuple[Array, Array]:
        """Least and greatest first part of a series pair at a given total.

        Parameters
        ----------
        ohms : ndarray
            Resistance of the role, within its ends [ohm], broadcast against (n,).
        temperature : ndarray
            Ambient temperature [K], broadcast.

        Returns
        -------
        low, high : ndarray
            What its own band allows, less what the other part cannot make up [ohm].
        """
        assert self.pairs is not None
        one, two = (half.ends(temperature) for half in self.pairs.halves)
        return np.maximum(one[0], ohms - two[1]), np.minimum(one[1], ohms - two[0])

    def take(self, index: NDArray[np.integer] | Sequence[int]) -> Parts:
        """The parts of some candidates.

        Parameters
        ----------
        index : array_like of int
            Which candidates.

        Returns
        -------
        Parts
            Theirs, in that order.
        """
        i = np.asarray(index)
        return Parts(
            nominal=self.nominal[i],
            band=self.band[i],
            tcr_low=self.tcr_low[i],
            tcr_high=self.tcr_high[i],
            pairs=None if self.pairs is None else self.pairs.take(i),
        )

    def joined(self, other: Parts) -> Parts:
        """These parts followed by others.

        Parameters
        ----------
        other : Parts
            Of the same role.

        Returns
        -------
        Parts
            All of them.
        """
        if self.pairs is None and other.pairs is None:
            return Parts(
                nominal=np.concatenate([self.nominal, other.nominal]),
                band=np.concatenate([self.band, other.band]),
                tcr_low=np.concatenate([self.tcr_low, other.tcr_low]),
                tcr_high=np.concatenate([self.tcr_high, other.tcr_high]),
            )
        one, two = (part._made_up() for part in (self, other))
        shift = np.int32(one.base.nominal.size)
        return Parts.of_pairs(
            Pairs(
                base=one.base.joined(two.base),
                join=np.concatenate([one.join, two.join]),
                first=np.concatenate([one.first, two.first + shift]),
                second=np.concatenate([one.second, two.second + shift]),
            )
        )

    def _made_up(self) -> Pairs:
        if self.pairs is not None:
            return self.pairs
        every = np.arange(self.nominal.size, dtype=np.int32)
        return Pairs(base=self, join=np.zeros(self.nominal.size, dtype=np.int8), first=every, second=every)

    def position(self, ohms: float, pieces: Sequence[float] = ()) -> int:
        """Where a resistance is.

        Parameters
        ----------
        ohms : float
            Resistance [ohm].
        pieces : sequence of float
            Nominal resistances of its parts, if it is a pair [ohm].

        Returns
        -------
        int
            Position of the nearest resistance, among equal ones of the one with these parts [-].
        """
        off = np.abs(self.nominal - ohms)
        nearest = np.flatnonzero(off == off.min())
        same = (int(k) for k in nearest if not pieces or self.pieces(int(k))[1] == tuple(pieces))
        return next(same, int(nearest[0]))

    def pieces(self, k: int) -> tuple[int, tuple[float, ...]]:
        """What one element is made up of.

        Parameters
        ----------
        k : int
            Which element.

        Returns
        -------
        join : int
            Code of `synth.preferred.pairs.JOINS` [-].
        ohms : tuple of float
            Nominal resistance of each of its parts [ohm].
        """
        if self.pairs is None or self.pairs.join[k] == SINGLE:
            return SINGLE, (float(self.nominal[k]),)
        base = self.pairs.base.nominal
        return int(self.pairs.join[k]), (float(base[self.pairs.first[k]]), float(base[self.pairs.second[k]]))
