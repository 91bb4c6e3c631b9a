"""What every test may use."""

import os

import pytest

LONG = "HARMONIC_PLANNER_LONG"

# The matrices here are small: threads inside the linear algebra would only fight with pytest's own workers.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")


def is_long() -> bool:
    """Tell whether checks that are sampled by default run at their full size."""
    return bool(os.environ.get(LONG))


@pytest.fixture(scope="session")
def long_mode() -> bool:
    """True where checks that are sampled by default run at their full size."""
    return is_long()
