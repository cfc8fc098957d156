"""Parts that can be bought or lie in a drawer: which resistor each may be, and what a number of pieces costs."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from decimal import Decimal
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from synth.preferred import StockRow
from synth.quantities import format_exact, format_resistance

MICRO = 10**6
"""Prices are added up as whole millionths of the currency: a price has at most six decimals, so nothing is rounded."""


class Need(NamedTuple):
    """What one resistor has to be: value [ohm], largest tolerance [-], coefficient at least and at most [1/K], style if any."""

    value: float
    tolerance: float
    tcr_low: float
    tcr_high: float
    style: str | None


@dataclass(frozen=True, kw_only=True)
class Part:
    """One thing that can be fitted; each that is used is a line of the BOM.

    Parameters
    ----------
    value, tolerance, tcr_low, tcr_high : float
        Resistance [ohm], tolerance [-] and range of the temperature coefficient [1/K].
    style, number : str or None
        Style and part number.
    on_hand : int or None
        Pieces that cost nothing more [-]; None for as many as needed.
    prices : tuple of (int, int)
        Price breaks: from this number of pieces on, one costs so many millionths [-].
    minimum : int
        Least number of pieces of an order [-].
    new : bool
        Whether it is not on the board yet.
    """

    value: float
    tolerance: float
    tcr_low: float
    tcr_high: float
    style: str | None = None
    number: str | None = None
    on_hand: int | None = None
    prices: tuple[tuple[int, int], ...] = ()
    minimum: int = 1
    new: bool = True

    @classmethod
    def of_row(cls, row: StockRow) -> Part:
        """The part of a row of a stock list.

        Parameters
        ----------
        row : StockRow
            Any row.

        Returns
        -------
        Part
            A row with a price but no quantity has nothing on hand; one with neither is there in any number.
        """
        on_hand = 0 if row.quantity is None and row.prices else row.quantity
        return cls(
            value=row.value,
            tolerance=row.tolerance,
            tcr_low=-row.tcr,
            tcr_high=row.tcr,
            style=row.style,
            number=row.part,
            on_hand=on_hand,
            prices=tuple((pieces, int(Decimal(repr(price)) * MICRO)) for pieces, price in row.prices),
            minimum=row.minimum,
        )

    @property
    def free(self) -> bool:
        """Whether there are as many as needed at no cost."""
        return self.on_hand is None

    @property
    def there(self) -> bool:
        """Whether any piece can be had."""
        return self.on_hand is None or self.on_hand > 0 or bool(self.prices)

    @property
    def most(self) -> float:
        """Pieces that can be had [-]; infinite where more can be bought."""
        return float("inf") if self.on_hand is None or self.prices else float(self.on_hand)

    @property
    def text(self) -> str:
        """Value, tolerance and style in words."""
        return " ".join(filter(None, (format_resistance(self.value), format_exact(self.tolerance, "ratio"), self.style)))

    def serves(self, need: Need) -> bool:
        """Whether a resistor may be this part.

        Parameters
        ----------
        need : Need
            What the resistor has to be.

        Returns
        -------
        bool
            True for the same value, no wider a band and, where both name a style, the same one: the box of a candidate
            with a better part lies within the one that was judged, so drift and verdict hold.
        """
        return (
            self.value == need.value
            and self.tolerance <= need.tolerance
            and need.tcr_low <= self.tcr_low
            and self.tcr_high <= need.tcr_high
            and (need.style is None or self.style is None or self.style.casefold() == need.style.casefold())
        )

    def bought(self, pieces: int) -> tuple[int, int]:
        """The cheapest order that makes up a number of pieces.

        Parameters
        ----------
        pieces : int
            Pieces fitted [-].

        Returns
        -------
        bought, cost : int
            Pieces to order, more than needed where a price break makes that cheaper [-], and their cost [millionths].
        """
        missing = 0 if self.on_hand is None else max(0, pieces - self.on_hand)
        if missing == 0:
            return 0, 0
        orders = [max(missing, self.minimum, start) for start, _ in self.prices]
        return min(((n, n * self.price_at(n)) for n in orders), key=lambda order: (order[1], order[0]))

    def price_at(self, pieces: int) -> int:
        """Price of one of so many pieces.

        Parameters
        ----------
        pieces : int
            Pieces of one order, not fewer than the first price break [-].

        Returns
        -------
        int
            Of the last break reached [millionths].
        """
        return next(price for start, price in reversed(self.prices) if start <= pieces)

    def costs(self, pieces: int) -> NDArray[np.int64]:
        """Cost of 0, 1, 2 ... pieces, as `bought` gives it.

        Parameters
        ----------
        pieces : int
            Largest number [-].

        Returns
        -------
        ndarray, shape (pieces + 1,)
            Never falling [millionths]; only as far as pieces can be had.
        """
        reach = int(min(pieces, self.most))
        return np.array([self.bought(n)[1] for n in range(reach + 1)], dtype=np.int64)


def distinct(parts: Iterable[Part]) -> tuple[Part, ...]:
    """Parts in a fixed order, equal ones once.

    Parameters
    ----------
    parts : iterable of Part
        In any order.

    Returns
    -------
    tuple of Part
        Ascending in value, then tolerance, style and part number; of rows that differ only in pieces on hand these are added.
    """
    pooled: dict[tuple[object, ...], Part] = {}
    for part in parts:
        key = (part.value, part.tolerance, part.tcr_low, part.tcr_high, part.style, part.number, part.prices, part.minimum)
        known = pooled.get(key)
        if known is None:
            pooled[key] = part
        elif known.on_hand is not None:
            both = None if part.on_hand is None else known.on_hand + part.on_hand
            pooled[key] = Part(**{**vars(known), "on_hand": both})
    order = sorted(pooled.values(), key=lambda p: (p.value, p.tolerance, p.tcr_high, p.style or "", p.number or "", p.prices))
    return tuple(order)
