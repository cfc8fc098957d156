"""Text to SI numbers and back: single quantities, spreads, limits and targets.

One text form serves files, options and tables: a number with an optional SI prefix and a unit (``2 mA``,
``4,7 kΩ``, ``100 ppm/K``), or a letter code of IEC 60062 (``4K7``, ``R47``). Only pure numbers may be bare.

Text is read as a decimal number and turned into a float once, at the very end, so ``4.7k`` is exactly 4700.0
and ``2 mA ± 15 %`` begins at exactly 0.0017. The writers ``format_exact``, ``format_spread``,
``format_limit`` and ``format_target`` invert the readers without loss.

Every refusal is a :class:`QuantityError`, one sentence that names the field, what was read, what is accepted
and the nearest text that would be accepted.

References
----------
IEC 60062, Marking codes for resistors and capacitors.
"""

from synth.quantities.kinds import KINDS, Kind
from synth.quantities.ranges import parse_limit, parse_spread, parse_target
from synth.quantities.reading import parse
from synth.quantities.values import Interval, QuantityError, RestpointError, Spread, Target
from synth.quantities.writing import (
    format_exact,
    format_limit,
    format_quantity,
    format_resistance,
    format_spread,
    format_target,
)

__all__ = [
    "KINDS", "Interval", "Kind", "QuantityError", "RestpointError", "Spread", "Target", "format_exact",
    "format_limit", "format_quantity", "format_resistance", "format_spread", "format_target", "parse",
    "parse_limit", "parse_spread", "parse_target",
]  # fmt: skip
