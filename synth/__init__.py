"""restpoint: bias networks of preferred-number resistors whose Q-point drifts least, proved.

>>> import synth
>>> stage = synth.Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450", tolerance="1 %", series="E24")
>>> answer = synth.find(stage)
>>> answer.search.status, answer.best.resistors["r1"]
('optimal', 43000.0)
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from synth.answer import Answer, Candidate
    from synth.batch import find_many
    from synth.boards import Board, BoardAnswer, BoardStage, board
    from synth.q_point import operating_point
    from synth.quantities import Interval, RestpointError, Spread, Target
    from synth.replacement import refit
    from synth.solve import check, find
    from synth.stage import Stage

__version__ = "0.1.0"

__all__ = [
    "Answer",
    "Board",
    "BoardAnswer",
    "BoardStage",
    "Candidate",
    "Interval",
    "RestpointError",
    "Spread",
    "Stage",
    "Target",
    "board",
    "check",
    "find",
    "find_many",
    "operating_point",
    "refit",
]

# Loaded when first asked for: the command line answers --help without numpy.
_HOMES = {
    "Answer": "answer",
    "Board": "boards",
    "BoardAnswer": "boards",
    "BoardStage": "boards",
    "Candidate": "answer",
    "Interval": "quantities",
    "RestpointError": "quantities",
    "Spread": "quantities",
    "Stage": "stage",
    "Target": "quantities",
    "board": "boards",
    "check": "solve",
    "find": "solve",
    "find_many": "batch",
    "operating_point": "q_point",
    "refit": "replacement",
}


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    value = getattr(import_module(f"synth.{_HOMES[name]}"), name)
    globals()[name] = value
    return value
