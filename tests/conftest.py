"""What every test may use."""

import os

import pytest

LONG = "HARMONIC_PLANNER_LONG"


def is_long() -> bool:
    """Tell whether checks that are sampled by default run at their full size."""
    return bool(os.environ.get(LONG))


@pytest.fixture(scope="session")
def long_mode() -> bool:
    """True where checks that are sampled by default run at their full size."""
    return is_long()
