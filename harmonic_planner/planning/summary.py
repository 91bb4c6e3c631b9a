"""Everything that was found, as the frozen plan that people and files read."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.levels import CarrierLevels
from harmonic_planner.filters.stress import cautions, stress
from harmonic_planner.model import (
    AllocationPlan,
    ElementReport,
    FilterPlan,
    LineLevel,
    MeasuredFilter,
    OutputLine,
    OutputPlan,
    PhaseNoisePoint,
    Plan,
    Requirement,
    Scenario,
    StagePlan,
)
from harmonic_planner.physics.noise import phase_noise
from harmonic_planner.planning.built import Built, response
from harmonic_planner.planning.evaluate import FAINTEST_DBC, Run, output_lines, worst_db
from harmonic_planner.planning.jobs import Job, act
from harmonic_planner.planning.measured import measured_plan
from harmonic_planner.planning.notes import assumptions_for, cautions_for, warnings_for
from harmonic_planner.planning.proposals import Advice
from harmonic_planner.planning.selfcheck import Check
from harmonic_planner.planning.settle import Settled
from harmonic_planner.planning.stage_filter import StageFilter
from harmonic_planner.planning.verdict import limits_met, sentence

SCHEMA = "harmonic-planner/plan/1"
_RESPONSE_POINTS = 241
_EDGE_POINTS = 41


@dataclass(frozen=True)
class Findings:
    """What the steps of the plan found.

    Attributes
    ----------
    transmissions : sequence of (points, lines) float
        Of every filter over span and drift.
    run, other : Run
        Under the plan's phase rule, and under the other one.
    assumed : sequence of str
        What was taken for granted beside what the scenario says.
    """

    scenario: Scenario
    chain: ChainArrays
    jobs: Sequence[Job]
    settled: Settled
    transmissions: Sequence[Array]
    run: Run
    other: Run
    levels: Sequence[CarrierLevels]
    advice: Sequence[Advice]
    checks: Sequence[Check]
    assumed: Sequence[str] = ()


def summarise(f: Findings) -> Plan:
    """Gather `f` into the plan."""
    last = f.levels[-1].output_dbm
    carrier = f.chain.stages[-1].carrier
    output = OutputPlan(
        carrier_dbm=(float(last.min()), float(last.max())),
        frequency_hz=(float(f.chain.low_hz[carrier]), float(f.chain.high_hz[carrier])),
        lines=output_lines(f.scenario, f.chain, f.transmissions, f.run, f.other.margin_db[-1]),
        phase_noise=_phase_noise(f),
    )
    stages = tuple(_stage(f, i) for i in range(len(f.jobs)))
    met = limits_met(f.scenario, f.run, f.settled)
    buildable = all(e.verdict != "swamped" for s in stages if s.filter.source == "planned" for e in s.filter.elements)
    buildable = buildable and all(x.built is not None for x in f.settled.filters if x.source == "planned")
    checked = all(c.passed for c in f.checks)
    return Plan(
        schema=SCHEMA,
        title=f.scenario.title,
        verdict="met" if met and buildable and checked else "not met",
        sentence=sentence(
            f.scenario, f.chain, f.run, f.jobs, f.settled, stages, met=met, buildable=buildable, checked=checked
        ),
        limits_met=met,
        buildable=buildable,
        self_check=checked,
        self_checks=tuple(("passed: " if c.passed else "FAILED: ") + c.text for c in f.checks),
        warnings=warnings_for(f.scenario, f.chain, f.jobs, f.levels, f.run.combs),
        assumptions=(*assumptions_for(f.scenario, f.chain, f.jobs), *f.assumed),
        cautions=(*cautions_for(f.levels), *_stress_cautions(f)),
        source_lines=_lines(f.chain, f.chain.source),
        output=output,
        stages=stages,
        allocation=_allocation(f),
    )


def _allocation(f: Findings) -> AllocationPlan:
    """Return the count of resonators as built against what the joint search proved for its candidates."""
    found = f.settled.allocation
    total = sum(x.built.resonators for x in f.settled.filters if x.source == "planned" and x.built is not None)
    proven = found.proven and found.met and total == found.total
    return AllocationPlan(total, found.lower_bound, proven, found.nodes)


def _stage(f: Findings, i: int) -> StagePlan:
    stage, arrays, comb, level = f.scenario.stages[i], f.chain.stages[i], f.run.combs[i], f.levels[i]
    return StagePlan(
        name=stage.name,
        times=stage.times,
        line=f.chain.grid.line(arrays.carrier),
        frequency_hz=f.jobs[i].carrier_hz,
        drive_dbm=float(np.median(level.drive_dbm)),
        output_dbm=float(np.median(level.output_dbm)),
        input_lines=_lines(f.chain, comb.entering),
        device_lines=_lines(f.chain, comb.device),
        output_lines=_lines(f.chain, comb.leaving),
        filter=_filter(f, i),
        limit_dbc=stage.limit_dbc,
        limited_lines=_limited_lines(f, i),
    )


def _limited_lines(f: Findings, i: int) -> tuple[OutputLine, ...]:
    """Return the lines that a stage's own limit or its tap's asks about."""
    stage = f.scenario.stages[i]
    if stage.limit_dbc is None and stage.tap is None:
        return ()
    lines = output_lines(f.scenario, f.chain, f.transmissions, f.run, f.other.margin_db[i], to=i)
    return tuple(line for line in lines if line.limit_dbc is not None)


def _lines(chain: ChainArrays, comb: Array) -> tuple[LineLevel, ...]:
    """Return every line that is not too faint, the worst over the span."""
    level_db = worst_db(chain, comb)
    return tuple(
        LineLevel(chain.grid.line(int(k)), float(level_db[k])) for k in np.flatnonzero(level_db > FAINTEST_DBC)
    )


def _filter(f: Findings, i: int) -> FilterPlan:
    job, chosen, advice = f.jobs[i], f.settled.filters[i], f.advice[i]
    built = chosen.built
    if isinstance(job.stage.filter, MeasuredFilter):
        return measured_plan(job, chosen, _requirement(f, i))
    if chosen.attenuation is None or chosen.prototype is None or chosen.centre_hz is None or chosen.bandwidth is None:
        return FilterPlan(source=chosen.source, reason=chosen.reason)
    highest = max(4 * chosen.centre_hz, 1.1 * _highest_needed(job, f.settled.needed.required_db[i]))
    grid_hz = np.geomspace(chosen.centre_hz / 8, highest, _RESPONSE_POINTS)
    response_hz = np.unique(np.concatenate([grid_hz, np.linspace(0.7, 1.4, _EDGE_POINTS) * chosen.centre_hz]))
    return FilterPlan(
        source=chosen.source,
        family=chosen.prototype.family,
        ripple_db=chosen.prototype.ripple_db,
        order=chosen.prototype.order,
        topology=None if built is None else built.topology,
        centre_hz=chosen.centre_hz,
        bandwidth_hz=chosen.bandwidth * chosen.centre_hz,
        loss_db=float(chosen.attenuation(np.array([chosen.centre_hz]))[0]),
        return_loss_db=_return_loss_db(job, chosen),
        unloaded_q=job.unloaded_q,
        kit=None if built is None else built.form.kit.name,
        impedance_ohm=job.design.impedance_ohm if built is None else built.form.impedance_ohm,
        resonator=None if built is None else built.form.resonator,
        reason=chosen.reason,
        requirement=_requirement(f, i),
        windows=chosen.choice.windows if chosen.choice is not None else (),
        elements=() if built is None else _elements(job, built, float(f.levels[i].filter_input_dbm.max())),
        proposals=advice.proposals,
        proposals_note=advice.note,
        response_hz=tuple(float(x) for x in response_hz),
        response_db=tuple(float(x) for x in chosen.attenuation(response_hz)),
    )


def _highest_needed(job: Job, required_db: Array) -> float:
    needing = required_db > 0
    return float(np.max(job.high_hz[needing], initial=0.0))


def _requirement(f: Findings, i: int) -> tuple[Requirement, ...]:
    """Return what is asked at every line that the device makes itself, and at every other that needs rejection."""
    job, chosen, arrays = f.jobs[i], f.settled.filters[i], f.chain.stages[i]
    required_db = f.settled.needed.required_db[i]
    if chosen.ideal is None:
        return ()
    ideal_db = act(job, chosen.ideal).skirt_db
    shown = np.flatnonzero((required_db > 0) | (arrays.own & (f.run.combs[i].device.max(axis=0) > 0)))
    return tuple(
        Requirement(
            line=f.chain.grid.line(int(k)),
            frequency_hz=(float(job.low_hz[k]), float(job.high_hz[k])),
            required_db=float(required_db[k]),
            ideal_db=float(ideal_db[k]),
            as_built_db=float(chosen.action.rejection_db[k]),
            margin_db=float(chosen.action.rejection_db[k] - required_db[k]),
        )
        for k in shown
    )


def _stress_cautions(f: Findings) -> tuple[str, ...]:
    """Return what must be said of parts over their rating, and of high voltage, stage by stage."""
    told = []
    for job, chosen, level in zip(f.jobs, f.settled.filters, f.levels, strict=True):
        if chosen.built is None:
            continue
        power_dbm = float(level.filter_input_dbm.max())
        borne = stress(
            chosen.built.circuit, chosen.built.form.kit, frequency_hz=job.carrier_hz, power_dbm=power_dbm, points=11
        )
        told += [f"{job.stage.name}: {text}" for text in cautions(borne, power_dbm=power_dbm)]
    return tuple(told)


def _elements(job: Job, built: Built, power_dbm: float) -> tuple[ElementReport, ...]:
    """Return every part with what is bought for it and what it bears at the stage's power."""
    borne = stress(built.circuit, built.form.kit, frequency_hz=job.carrier_hz, power_dbm=power_dbm, points=11)
    bought = {
        e.ref: parts
        for e, parts in zip(
            built.nominal.elements, built.parts or [(e.value,) for e in built.nominal.elements], strict=True
        )
    }
    reports = []
    for element in built.elements:
        of_element = [s for s in borne if s.ref in (element.ref, f"{element.ref}a", f"{element.ref}b")]
        reports.append(
            replace(
                element,
                bought=bought[element.ref],
                peak_v=max(s.worst_peak_voltage_v for s in of_element),
                rms_a=max(s.worst_rms_current_a for s in of_element),
                rated_v=of_element[0].voltage_rating_v,
                rated_a=of_element[0].current_rating_a,
            )
        )
    return tuple(reports)


def _return_loss_db(job: Job, chosen: StageFilter) -> float | None:
    """Return the least return loss over the carrier's span and drift, of the circuit."""
    if chosen.built is None:
        return None
    low, high = job.carrier_hz[0] / (1 + job.design.drift), job.carrier_hz[1] / (1 - job.design.drift)
    frequency_hz = np.linspace(low, high, _EDGE_POINTS)
    found = response(job, chosen.built.circuit, chosen.built.form, frequency_hz)
    return float(found.return_loss_db.min())


def _phase_noise(f: Findings) -> tuple[PhaseNoisePoint, ...]:
    """Return the phase noise at the output, with the floor of every amplifier that has a noise figure."""
    noise = f.scenario.source.phase_noise
    if not noise:
        return ()
    total = f.scenario.total
    counted = [
        (s.amplifier.noise_figure_db, float(np.min(level.amplifier_input_dbm)), total / float(f.scenario.carrier(i)))
        for i, (s, level) in enumerate(zip(f.scenario.stages, f.levels, strict=True))
        if s.amplifier is not None and s.amplifier.noise_figure_db is not None
    ]
    at_output = phase_noise(
        [level for _, level in noise],
        factor=total,
        noise_figure_db=[c[0] for c in counted],
        input_dbm=[c[1] for c in counted],
        factor_after=[c[2] for c in counted],
    )
    return tuple(PhaseNoisePoint(offset, float(x)) for (offset, _), x in zip(noise, at_output, strict=True))
