"""``python -m tests.scenarios`` prints verdict and deciding point of each shared scenario."""

from tests.scenarios.scenarios import FILES, outcome

for file in FILES:
    print("\n".join(outcome(file).lines()))
