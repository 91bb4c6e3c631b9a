"""The scenario that an installed program carries."""

import importlib.resources
from pathlib import Path

from harmonic_planner.model import PlannerError

SHIPPED = "glacier-sounder.toml"


def shipped_scenario() -> Path:
    """Find the scenario that is planned when none is named.

    Returns
    -------
    Path
        Inside an installed package, or in the folder ``scenarios`` beside the package in a checkout.

    Raises
    ------
    PlannerError
        Where the installation lacks it.
    """
    package = importlib.resources.files("harmonic_planner")
    installed = Path(str(package / "scenarios" / SHIPPED))
    checkout = Path(str(package)).parent / "scenarios" / SHIPPED
    for path in (installed, checkout):
        if path.is_file():
            return path
    raise PlannerError(f"the shipped scenario {SHIPPED} is missing from this installation; name a scenario file")
