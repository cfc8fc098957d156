"""Many stages, one BOM: board files, candidates within a drift allowance, the choice for all of them, its BOM."""

from synth.boards.answer import BoardAnswer, BoardSearch, StageResult
from synth.boards.bom import Line, Merge
from synth.boards.compare import Change
from synth.boards.file import Board, BoardStage
from synth.boards.solve import board

__all__ = ["Board", "BoardAnswer", "BoardSearch", "BoardStage", "Change", "Line", "Merge", "StageResult", "board"]
