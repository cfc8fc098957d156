"""One registry of the keys of a stage: what each is called, how it is written, what it means.

The reader of stage files, the arguments of `Stage`, the options of the command line, the file that ``--save`` writes
and the empty stage file all read `KEYS`; a key that is not there does not exist.
"""

from __future__ import annotations

from synth.stage_keys.form import NONE, Given, Key, StageError, nearest
from synth.stage_keys.registry import KEYS, NAMES, ROLES, TABLES

__all__ = ["KEYS", "NAMES", "NONE", "ROLES", "TABLES", "Given", "Key", "StageError", "nearest"]
