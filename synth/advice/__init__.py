"""Advice: what conflicts when nothing qualifies, and what would make a good answer better; searches again."""

from __future__ import annotations

from synth.advice.conflict import why_nothing_qualifies
from synth.advice.outlook import outlook

__all__ = ["outlook", "why_nothing_qualifies"]
