"""Another transistor in a stage that exists: both side by side, the fewest changes, what among many types would do."""

from synth.replacement.answer import Compared, Cost, Device, Refit, Refitted, Single, Step
from synth.replacement.refitting import changes_words, refit

__all__ = ["Compared", "Cost", "Device", "Refit", "Refitted", "Single", "Step", "changes_words", "refit"]
