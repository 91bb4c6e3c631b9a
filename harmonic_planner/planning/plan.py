"""The whole job: scenario → lines → budget → windows → circuit → flags → plan."""

from __future__ import annotations

from collections.abc import Sequence

from harmonic_planner.chain.assemble import Array, ChainArrays, assemble
from harmonic_planner.chain.levels import carrier_levels
from harmonic_planner.model import Phases, Plan, Scenario
from harmonic_planner.planning.choice import Built
from harmonic_planner.planning.evaluate import Run, beyond_db, run
from harmonic_planner.planning.jobs import Job, make_jobs, sample
from harmonic_planner.planning.proposals import NO_ADVICE, Advice, propose
from harmonic_planner.planning.selfcheck import run_checks
from harmonic_planner.planning.settle import Settled, settle
from harmonic_planner.planning.stage_filter import StageFilter, from_built
from harmonic_planner.planning.summary import Findings, summarise


def make_plan(scenario: Scenario) -> Plan:
    """Plan the filters of a whole chain.

    Parameters
    ----------
    scenario : Scenario

    Returns
    -------
    Plan
        Also where limits cannot be met or parts cannot be built: it says so and why.

    Raises
    ------
    PlannerError
        Where a device, a kit or a given filter cannot be used.
    """
    phases = scenario.design.phases
    chain = assemble(scenario, phases=phases)
    jobs = make_jobs(scenario, chain)
    margins_db = [s.design.margin_db for s in scenario.stages]

    settled = settle(chain, jobs, margins_db)

    samples = [sample(job, f.attenuation) for job, f in zip(jobs, settled.filters, strict=True)]
    transmissions = [s.transmission for s in samples]
    return summarise(
        Findings(
            scenario=scenario,
            chain=chain,
            jobs=jobs,
            settled=settled,
            transmissions=transmissions,
            run=run(chain, transmissions),
            other=_run_other_phases(scenario, settled.filters),
            levels=carrier_levels(scenario, [s.carrier_db for s in samples]),
            advice=_advise(chain, jobs, settled, transmissions, margins_db),
            checks=run_checks(scenario, chain, jobs, settled, margins_db),
        )
    )


def _run_other_phases(scenario: Scenario, filters: Sequence[StageFilter]) -> Run:
    """Run the same filters under the other phase rule."""
    other: Phases = "average" if scenario.design.phases == "worst-case" else "worst-case"
    chain = assemble(scenario, phases=other)
    jobs = make_jobs(scenario, chain)
    return run(chain, [sample(job, f.attenuation).transmission for job, f in zip(jobs, filters, strict=True)])


def _advise(
    chain: ChainArrays,
    jobs: Sequence[Job],
    settled: Settled,
    transmissions: Sequence[Array],
    margins_db: Sequence[float],
) -> tuple[Advice, ...]:
    """Propose changes for every planned filter that is not ok, each run through the whole chain."""

    def beyond(index: int, built: Built) -> float:
        changed = list(transmissions)
        changed[index] = sample(jobs[index], from_built(jobs[index], built).attenuation).transmission
        return beyond_db(chain, changed, margins_db)

    advice = []
    for job, stage_filter, required_db in zip(jobs, settled.filters, settled.needed.required_db, strict=True):
        built, choice = stage_filter.built, stage_filter.choice
        if stage_filter.source != "planned" or built is None or choice is None:
            advice.append(NO_ADVICE)
        else:
            advice.append(propose(job, built, choice, required_db, beyond))
    return tuple(advice)
