"""A plan with what lies around it: changes to the chain, and resonators against bandwidth."""

from __future__ import annotations

from dataclasses import replace

from harmonic_planner.model import Scenario
from harmonic_planner.planning.joint import Offers
from harmonic_planner.planning.plan import WorkedOut
from harmonic_planner.planning.trade import bandwidth_trade
from harmonic_planner.planning.whatif import what_if


def explored(scenario: Scenario, worked: WorkedOut) -> WorkedOut:
    """Return the same plan with its what-if rows and its trade; this takes seconds.

    Parameters
    ----------
    scenario : Scenario
    worked : WorkedOut
        The plan of this scenario.

    Returns
    -------
    WorkedOut
    """
    offers, plan = Offers(), worked.plan
    rows = what_if(scenario, plan, offers)
    return replace(worked, plan=replace(plan, what_if=rows, trade=bandwidth_trade(scenario, plan, offers)))
