"""The single resistors that a role is made up of, each of which varies on its own."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from synth.networks.form import Array
from synth.parts import HALVES, Parts
from synth.preferred.pairs import resistance


def pieces_of(part: Parts) -> tuple[tuple[str, Parts], ...]:
    """The single resistors of one element.

    Parameters
    ----------
    part : Parts
        Of one candidate.

    Returns
    -------
    tuple of (str, Parts)
        Ending of the designator and the resistor; "" for one alone.
    """
    if part.pairs is None or not part.paired:
        return (("", part),)
    return tuple(zip(HALVES, part.pairs.halves, strict=True))


def whole_of(part: Parts, ohms: Sequence[Array]) -> Array:
    """Resistance of one element from those of its single resistors.

    Parameters
    ----------
    part : Parts
        Of one candidate.
    ohms : sequence of ndarray
        Resistance of each, in the order of `pieces_of` [ohm].

    Returns
    -------
    ndarray
        Of the broadcast shape [ohm].
    """
    if len(ohms) == 1 or part.pairs is None:
        return np.asarray(ohms[0])
    one, two = np.broadcast_arrays(*ohms)
    return np.asarray(resistance(np.full(one.shape, part.pairs.join[0]), one, two))
