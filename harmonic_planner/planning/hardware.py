"""A chain whose filters are all there: nothing is planned, the same forward run says what they do."""

from __future__ import annotations

from dataclasses import replace

from harmonic_planner.model import PlannerError, Scenario, Stage
from harmonic_planner.planning.plan import WorkedOut, work_out

ASKED_DB = 0.0
"""Margin asked of what exists: it only has to keep its limits."""
_MARGIN = ".margin"


def budget(scenario: Scenario) -> WorkedOut:
    """Work out margins, causes and drive of a chain as it is.

    Parameters
    ----------
    scenario : Scenario
        Every stage with a filter of its own, measured or described, or none.

    Returns
    -------
    WorkedOut
        As of a plan, but met where every margin is at least 0 dB; no windows, proposals or allocation.

    Raises
    ------
    PlannerError
        Where a stage's filter is still to be planned, or something cannot be used.
    """
    refuse_unplanned(scenario)
    worked = work_out(asking_nothing(scenario))
    said = tuple(text for text in worked.plan.assumptions if not text.split(" ")[0].endswith(_MARGIN))
    asked = f"margin: limits are asked to hold with {ASKED_DB:g} dB; design.margin is for plans and left aside"
    return replace(worked, plan=replace(worked.plan, assumptions=(*said, asked), allocation=None))


def refuse_unplanned(scenario: Scenario) -> None:
    """Raise PlannerError, naming the stages, where a filter is still to be planned."""
    unplanned = [
        f'stage[{i}].filter (stage "{s.name}")' for i, s in enumerate(scenario.stages, 1) if s.filter == "plan"
    ]
    if unplanned:
        raise PlannerError(
            f'{", ".join(unplanned)} = "plan": a budget plans nothing; name the filter that is there, as '
            '{ touchstone = "x.s2p" }, { table = "x.csv" } or { family, order, centre, bandwidth }, or "none"'
        )


def asking_nothing(scenario: Scenario) -> Scenario:
    """Return the scenario with no margin to its limits."""

    def bare(stage: Stage) -> Stage:
        return replace(stage, design=replace(stage.design, margin_db=ASKED_DB))

    design = replace(scenario.design, margin_db=ASKED_DB)
    return replace(scenario, design=design, stages=tuple(bare(stage) for stage in scenario.stages))
