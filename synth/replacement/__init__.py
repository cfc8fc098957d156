"""Another transistor in a stage that exists: both side by side, the fewest changes, what among many types would do."""

from synth.replacement.answer import Compared, Cost, Device, Refit, Refitted, Single, Step
from synth.replacement.refitting import changes_words, refit
from synth.replacement.scanning import Scan, Tried, least_ratings, scan

__all__ = [
    "Compared",
    "Cost",
    "Device",
    "Refit",
    "Refitted",
    "Scan",
    "Single",
    "Step",
    "Tried",
    "changes_words",
    "least_ratings",
    "refit",
    "scan",
]
