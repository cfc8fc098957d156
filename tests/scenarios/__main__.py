"""``python -m tests.scenarios [NAME ...]`` prints verdict and deciding point of each shared scenario, or of those named."""

import sys

from tests.scenarios.scenarios import FILES, outcome

for file in FILES:
    if not sys.argv[1:] or file.stem in sys.argv[1:]:
        print("\n".join(outcome(file).lines()))
