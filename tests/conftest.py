"""What every test may use."""

import os
import shutil

import pytest
from hypothesis import HealthCheck, settings

LONG = "HARMONIC_PLANNER_LONG"
REQUIRE_EXTERNAL = "HARMONIC_PLANNER_REQUIRE_EXTERNAL"

# The matrices here are small: threads inside the linear algebra would only fight with pytest's own workers.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")


# The same examples in every run, and none judged by the time it takes; the long mode draws new ones.
settings.register_profile(
    "sampled",
    derandomize=True,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.filter_too_much],
)
settings.register_profile("long", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("long" if os.environ.get(LONG) else "sampled")


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
