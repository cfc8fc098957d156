"""What a search keeps of the qualifying candidates it meets: the best few, or a frontier."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray

from synth.networks.form import Array
from synth.search.blocks import Blocks
from synth.spaces import Found

TIE = 1e-10
"""Relative room for rounding between a bound and a drift; nothing within it of the K-th best is ever excluded."""
SAME = 1e-9
"""Relative difference along an axis of a frontier up to which two candidates are equal there [-]."""
PORTION = 1024
"""Blocks compared with a frontier at a time: the comparison is a table of blocks times members times axes."""


class Pool(Protocol):
    """Qualifying candidates, and from which score on a block holds nothing to keep."""

    beyond: float

    @property
    def count(self) -> int:
        """How many are kept."""

    def limit(self, axes: Array) -> Array | float:
        """Score above which nothing can be kept any more of blocks with these bounds in the further axes."""

    def threshold(self) -> float:
        """Score above which nothing can be kept of any block."""

    def full(self, least: float) -> bool:
        """Whether enough is kept, once nothing open scores less than `least`."""

    def add(self, room: int, fresh: Sequence[Found], axes: Array) -> None:
        """Take up assessed candidates of a room with their figures along the further axes."""


@dataclass
class Best:
    """The `top` candidates of least score found so far, and the least score of what was turned away."""

    top: int
    gap: float = 0.0
    found: dict[tuple[int, tuple[int, ...]], Found] = field(default_factory=dict)
    beyond: float = np.inf

    @property
    def count(self) -> int:
        """How many are kept."""
        return len(self.found)

    def limit(self, axes: Array) -> float:
        """The K-th best score; there are no further axes."""
        return self.threshold()

    def threshold(self) -> float:
        """Score above which nothing can be listed any more."""
        if len(self.found) < self.top:
            return np.inf
        scores = np.partition([f.score for f in self.found.values()], self.top - 1)
        return float(scores[self.top - 1]) * (1.0 - self.gap if self.gap else 1.0 + TIE)

    def full(self, least: float) -> bool:
        """Never: what is open decides."""
        return False

    def least(self) -> float:
        """Score of the worst candidate that is listed."""
        listed = sorted(f.score for f in self.found.values())[: self.top]
        return listed[-1] * (1.0 + TIE) if len(listed) == self.top else np.inf

    def add(self, room: int, fresh: Sequence[Found], axes: Array) -> None:
        """Take up candidates; whoever is no longer among the best goes."""
        self.found.update({(room, f.index): f for f in fresh})
        limit = max(self.threshold(), self.least())
        for key, f in list(self.found.items()):
            if f.score > limit:
                self.beyond = min(self.beyond, f.score)
                del self.found[key]


class Member(NamedTuple):
    """One candidate of a frontier, with its figures along the further axes.

    Parameters
    ----------
    found : Found
        The candidate.
    axes : tuple of float
        Figure along each axis, turned so that less is better, in the unit of the axis [-].
    """

    found: Found
    axes: tuple[float, ...]


@dataclass
class Front:
    """Candidates of which none is beaten: no other qualifies that is as good along every axis and better along one.

    Two figures within `SAME` of each other are equal; of candidates that are equal along every axis one stands for all.
    """

    most: int
    members: list[Member] = field(default_factory=list)
    beyond: float = np.inf

    def __post_init__(self) -> None:
        self._scores = np.zeros(0)
        self._axes: Array | None = None

    @property
    def count(self) -> int:
        """How many are kept."""
        return len(self.members)

    def limit(self, axes: Array) -> Array:
        """Least score of a member that is as good along every further axis; infinite where there is none."""
        found = np.full(len(axes), np.inf)
        if self._axes is None or not self.members:
            return found
        room = SAME * np.abs(axes)
        for start in range(0, len(axes), PORTION):
            part = slice(start, start + PORTION)
            # An axis without a bound is minus infinity, which no member reaches.
            with np.errstate(invalid="ignore"):
                as_good = np.all(self._axes[None] <= (axes + room)[part, None], axis=2)
            found[part] = np.where(as_good, self._scores[None], np.inf).min(axis=1)
        return np.asarray(found * (1.0 - SAME))

    def threshold(self) -> float:
        """Infinite: along another axis anything may still be better."""
        return np.inf

    def full(self, least: float) -> bool:
        """Whether as many members as are asked for score less than anything open, so that nothing beats them any more."""
        return len(self.members) >= self.most and int((self._scores < least).sum()) >= self.most

    def add(self, room: int, fresh: Sequence[Found], axes: Array) -> None:
        """Take up candidates that no member beats or equals; the members that they beat go."""
        for found, figures in zip(fresh, axes, strict=True):
            if found.score > float(self.limit(figures[None])[0]):
                continue
            if self._axes is not None and self.members:
                with np.errstate(invalid="ignore"):
                    worse = np.all(self._axes >= figures - SAME * np.abs(figures), axis=1)
                keep: NDArray[np.bool_] = ~(worse & (self._scores >= found.score * (1.0 - SAME)))
                self.members = [m for m, stays in zip(self.members, keep, strict=True) if stays]
            self.members.append(Member(found, tuple(float(x) for x in figures)))
            self._scores = np.array([m.found.score for m in self.members])
            self._axes = np.array([m.axes for m in self.members]).reshape(len(self.members), len(figures))


def sift(blocks: Blocks, limit: Array | float, pool: Pool) -> Blocks:
    """The blocks that may hold something to keep; notes the least bound of the others, unless nothing qualifies there."""
    held = np.isfinite(blocks.bound)
    near = held & (blocks.bound <= limit)
    far = held & ~near
    if far.any():
        pool.beyond = min(pool.beyond, float(blocks.bound[far].min()))
    return blocks if near.all() else blocks.take(near)
