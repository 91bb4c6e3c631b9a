"""What every test may use."""

import os
import shutil

import pytest

LONG = "HARMONIC_PLANNER_LONG"
REQUIRE_EXTERNAL = "HARMONIC_PLANNER_REQUIRE_EXTERNAL"

# The matrices here are small: threads inside the linear algebra would only fight with pytest's own workers.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")


def is_long() -> bool:
    """Tell whether checks that are sampled by default run at their full size."""
    return bool(os.environ.get(LONG))


@pytest.fixture(scope="session")
def long_mode() -> bool:
    """True where checks that are sampled by default run at their full size."""
    return is_long()


def external_program(name: str) -> str:
    """Path of a program from outside Python; where it is missing the test is skipped, or fails if it is required."""
    found = shutil.which(name)
    if found is None and os.environ.get(REQUIRE_EXTERNAL):
        pytest.fail(f"{name} is required and not installed", pytrace=False)
    if found is None:
        pytest.skip(f"{name} is not installed")
    return found
