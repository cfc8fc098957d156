"""Settings of every test run."""

import pytest
from hypothesis import settings

# Derandomised: a run that failed fails again; no deadline: the machine's load is not the subject.
settings.register_profile("restpoint", derandomize=True, deadline=None, database=None)
settings.load_profile("restpoint")


def pytest_configure(config: pytest.Config) -> None:
    """Every warning is an error, whatever configuration file pytest was started with."""
    config.addinivalue_line("filterwarnings", "error")
