"""The whole job: scenario → lines → budget → windows → circuit → flags → plan."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from harmonic_planner.chain.assemble import Array, ChainArrays, assemble, at_levels
from harmonic_planner.chain.levels import CarrierLevels
from harmonic_planner.model import Phases, Plan, Scenario
from harmonic_planner.parts.kits import Kit, kit_names, load_kit
from harmonic_planner.planning.built import Built
from harmonic_planner.planning.evaluate import Run, beyond_db, run
from harmonic_planner.planning.jobs import Job, make_jobs, sample
from harmonic_planner.planning.leveled import settle_at_levels
from harmonic_planner.planning.measured import notes_on_measured, refuse_beyond
from harmonic_planner.planning.notes import notes_on_limits
from harmonic_planner.planning.proposals import NO_ADVICE, Advice, propose
from harmonic_planner.planning.selfcheck import run_checks
from harmonic_planner.planning.settle import Settled
from harmonic_planner.planning.stage_filter import StageFilter, from_built
from harmonic_planner.planning.summary import Findings, summarise
from harmonic_planner.planning.why import why


@dataclass(frozen=True)
class WorkedOut:
    """A plan with the circuits behind it, one a stage, None where the stage has none."""

    plan: Plan
    circuits: tuple[Built | None, ...]


def make_plan(scenario: Scenario) -> Plan:
    """Plan the filters of a whole chain: `work_out` without the circuits."""
    return work_out(scenario).plan


def work_out(scenario: Scenario) -> WorkedOut:
    """Plan the filters of a whole chain.

    Parameters
    ----------
    scenario : Scenario

    Returns
    -------
    WorkedOut
        Also where limits cannot be met or parts cannot be built: the plan says so and why.

    Raises
    ------
    PlannerError
        Where a device, a kit or a given filter cannot be used.
    """
    phases = scenario.design.phases
    lossless = assemble(scenario, phases=phases)
    jobs = make_jobs(scenario, lossless)
    margins_db = [s.design.margin_db for s in scenario.stages]

    found = settle_at_levels(scenario, lossless, jobs, margins_db)

    chain, settled, transmissions = found.chain, found.settled, found.transmissions
    beyond_sweep = refuse_beyond(chain, jobs, transmissions)
    plan = summarise(
        Findings(
            scenario=scenario,
            chain=chain,
            jobs=jobs,
            settled=settled,
            transmissions=transmissions,
            run=run(chain, transmissions),
            other=_run_other_phases(scenario, settled.filters, found.levels),
            levels=found.levels,
            advice=_advise(scenario, chain, jobs, settled, transmissions, margins_db),
            checks=run_checks(scenario, chain, jobs, settled, margins_db),
            assumed=(*notes_on_limits(scenario, found.levels), *notes_on_measured(scenario), *beyond_sweep),
        )
    )
    plan = replace(plan, why=why(scenario, chain, settled, transmissions, margins_db))
    return WorkedOut(plan, tuple(f.built for f in settled.filters))


def _run_other_phases(scenario: Scenario, filters: Sequence[StageFilter], levels: Sequence[CarrierLevels]) -> Run:
    """Run the same filters under the other phase rule."""
    other: Phases = "average" if scenario.design.phases == "worst-case" else "worst-case"
    chain = at_levels(scenario, assemble(scenario, phases=other), levels)
    jobs = make_jobs(scenario, chain)
    return run(chain, [sample(job, f.attenuation).transmission for job, f in zip(jobs, filters, strict=True)])


def _advise(
    scenario: Scenario,
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
        built = stage_filter.built
        if stage_filter.source != "planned" or built is None:
            advice.append(NO_ADVICE)
            continue
        carrier_db = stage_filter.action.carrier_most_db
        advice.append(propose(job, built, required_db, carrier_db, beyond, _other_kits(scenario, job)))
    return tuple(advice)


def _other_kits(scenario: Scenario, job: Job) -> tuple[Kit, ...]:
    """Return the shipped kits that the stage does not use."""
    used = {kit.name for kit in job.kits}
    return tuple(load_kit(name, scenario.folder) for name in kit_names() if name not in used)
