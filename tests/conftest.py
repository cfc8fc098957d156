"""Settings of every test run."""

from collections.abc import Iterator

import pytest
from hypothesis import settings

from synth.advice import conflict, purse

# Derandomised: a run that failed fails again; no deadline: the machine's load is not the subject.
settings.register_profile("restpoint", derandomize=True, deadline=None, database=None)
settings.load_profile("restpoint")


def pytest_configure(config: pytest.Config) -> None:
    """Every warning is an error, whatever configuration file pytest was started with."""
    config.addinivalue_line("filterwarnings", "error")


@pytest.fixture(scope="module")
def short_advice() -> Iterator[None]:
    """Advice that ends early: for tests of how answers look, to which it matters little how much of it there is."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(purse, "BUDGET", 2.5e6)
        patch.setattr(conflict, "KEPT", 8e5)
        yield
