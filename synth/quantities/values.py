"""The values that texts become, and the errors of those that do not."""

from __future__ import annotations

import math
from contextlib import suppress
from dataclasses import dataclass
from numbers import Real

LONGEST_TEXT = 200


class RestpointError(ValueError):
    """Base of every error that wrong input causes."""


class QuantityError(RestpointError):
    """A text or number that is not the quantity its field needs.

    Parameters
    ----------
    field : str
        Name of the field, as the user knows it.
    read : object
        What was read.
    reason : str
        Why it is refused, as a clause that follows "read ...,".
    accepted : str
        What the field accepts.
    nearest : tuple of str
        Nearest texts that are accepted; may be empty.
    """

    def __init__(
        self, field: str, read: object, reason: str, accepted: str, nearest: tuple[str, ...] = ()
    ) -> None:
        # All arguments go to the base, so that the error survives the way home from a worker process.
        super().__init__(field, read, reason, accepted, nearest)
        self.field, self.read = field, read
        self.reason, self.accepted, self.nearest = reason, accepted, nearest

    def __str__(self) -> str:
        read = repr(self.read)
        read = read if len(read) <= LONGEST_TEXT else f"{read[:40]}…"
        nearest = f", nearest is {' or '.join(map(repr, self.nearest))}" if self.nearest else ""
        return f"{self.field}: read {read}, {self.reason}, accepted is {self.accepted}{nearest}"


def plain(given: object) -> float:
    """Turn a number into a plain float, zero without a sign; NaN for what is none or is too large for one."""
    if isinstance(given, Real) and not isinstance(given, bool):
        with suppress(OverflowError):
            return float(given) + 0.0
    return math.nan


def _settle(value: object, *names: str, finite: bool) -> None:
    """Turn what was given into plain floats."""
    for name in names:
        given = getattr(value, name)
        number = plain(given)
        if math.isnan(number) or (finite and math.isinf(number)):
            accepted = "a finite number" if finite else "a number, infinite where the side is open"
            owner = f"{type(value).__name__.lower()}.{name}"
            raise QuantityError(owner, given, f"which is not {accepted}", accepted)
        object.__setattr__(value, name, number)


class _Range:
    """What everything with two ends can tell."""

    __slots__ = ()
    low: float
    high: float

    def contains(self, value: float) -> bool:
        """Tell whether a value lies inside, ends included.

        Parameters
        ----------
        value : float
            Value to judge [SI unit of the quantity].

        Returns
        -------
        bool
            True if ``low <= value <= high``.
        """
        return self.low <= value <= self.high


@dataclass(frozen=True, slots=True)
class Spread(_Range):
    """An uncertain quantity.

    Attributes
    ----------
    low, nominal, high : float
        Least, expected and greatest value [SI unit of the quantity], finite and in rising order, else a
        QuantityError is raised.
    """

    low: float
    nominal: float
    high: float

    def __post_init__(self) -> None:
        _settle(self, "low", "nominal", "high", finite=True)
        if not self.low <= self.nominal <= self.high:
            values = (self.low, self.nominal, self.high)
            nearest = " : ".join(map(str, sorted(values)))
            raise QuantityError("spread", values, "which does not rise", "low <= nominal <= high", (nearest,))

    @classmethod
    def exact(cls, value: float) -> Spread:
        """Return the spread of no width.

        Parameters
        ----------
        value : float
            The only value [SI unit of the quantity].

        Returns
        -------
        Spread
            `value` as low, nominal and high.
        """
        return cls(value, value, value)

    @property
    def width(self) -> float:
        """Distance from low to high [SI unit of the quantity]."""
        return self.high - self.low


@dataclass(frozen=True, slots=True)
class Interval(_Range):
    """An allowed range: a limit, or a window of the Q-point.

    Attributes
    ----------
    low, high : float
        Least and greatest allowed value [SI unit of the quantity]; -inf and inf where the side is open. A
        range that holds no finite number raises a QuantityError.
    """

    low: float
    high: float

    def __post_init__(self) -> None:
        _settle(self, "low", "high", finite=False)
        if not self.low <= self.high or self.low == math.inf or self.high == -math.inf:
            values = (self.low, self.high)
            nearest = " : ".join(map(str, sorted(values)))
            raise QuantityError("interval", values, "which holds no number", "low <= high", (nearest,))


@dataclass(frozen=True, slots=True)
class Target:
    """A wanted value, the window around it, or both.

    Only what a text can say is allowed, else a QuantityError is raised: a target with a closed window around
    it, a target alone, or one bound alone.

    Attributes
    ----------
    nominal : float or None
        Wanted value [SI unit of the quantity]; None for a window without a target.
    low, high : float
        Ends of the window [SI unit of the quantity], -inf and inf where open.
    """

    nominal: float | None
    low: float
    high: float

    def __post_init__(self) -> None:
        _settle(self, "low", "high", finite=False)
        ends = math.isfinite(self.low) + math.isfinite(self.high)
        if self.nominal is None:
            is_sayable = ends == 1 and self.low < self.high
        else:
            _settle(self, "nominal", finite=True)
            is_sayable = ends != 1 and self.low <= self.nominal <= self.high
        if not is_sayable:
            values = (self.nominal, self.low, self.high)
            accepted = "a target inside a closed window, a target alone, or one bound alone"
            raise QuantityError("target", values, "which no text can say", accepted)

    @property
    def window(self) -> Interval:
        """The window, open where there is none."""
        return Interval(self.low, self.high)
