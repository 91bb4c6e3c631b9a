"""One stage's filter as the chain sees it: planned, given by the user, or none."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from harmonic_planner.filters.topologies import expand
from harmonic_planner.model import FilterSource, GivenFilter, PlannerError
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.built import Built, Form, as_built, lossless, realise, sketch
from harmonic_planner.planning.choice import Choice, choose, report_windows
from harmonic_planner.planning.jobs import (
    Action,
    Array,
    Attenuation,
    Job,
    act,
    no_filter,
    prototype_attenuation,
)


@dataclass(frozen=True)
class StageFilter:
    """A filter in its place.

    Attributes
    ----------
    attenuation : callable or None
        As built; None for a through connection.
    ideal : callable or None
        Of the lossless circuit with its ideal elements, or of the lossless prototype without one.
    built : Built or None
        The circuit, where there is one.
    choice : Choice or None
        What was looked at, for a planned filter.
    meets : bool
        Whether it gives every rejection it was chosen for.
    """

    source: FilterSource
    action: Action
    attenuation: Attenuation | None = None
    ideal: Attenuation | None = None
    prototype: Prototype | None = None
    centre_hz: float | None = None
    bandwidth: float | None = None
    built: Built | None = None
    choice: Choice | None = None
    meets: bool = True
    reason: str = ""


def unfiltered(job: Job, *, wanted: bool = False, reason: str = "") -> StageFilter:
    """Return a through connection; `wanted` where a filter was asked for and there is none."""
    return StageFilter("planned" if wanted else "none", no_filter(job), meets=not wanted, reason=reason)


def from_built(job: Job, built: Built, *, source: FilterSource = "planned") -> StageFilter:
    """Return a circuit in its place."""
    return StageFilter(
        source,
        built.action,
        as_built(job, built.circuit, built.form),
        lossless(built.ideal),
        built.prototype,
        built.centre_hz,
        built.bandwidth,
        built,
    )


def given(job: Job, description: GivenFilter) -> StageFilter:
    """Return the filter a user describes: a lossless prototype, lossy with unloaded_q; a circuit with topology.

    Raises
    ------
    PlannerError
        Where the topology cannot realise the prototype.
    """
    prototype = Prototype(description.family, description.order, description.ripple_db)
    centre_hz, bandwidth = description.centre_hz, description.bandwidth_hz / description.centre_hz
    if description.topology is None:
        attenuation = prototype_attenuation(
            prototype, centre_hz=centre_hz, bandwidth=bandwidth, unloaded_q=description.unloaded_q or math.inf
        )
        ideal = prototype_attenuation(prototype, centre_hz=centre_hz, bandwidth=bandwidth)
        return StageFilter(
            "given", act(job, attenuation), attenuation, ideal, prototype, centre_hz, bandwidth, reason="given"
        )
    if description.unloaded_q is not None:
        job = replace(job, stage=replace(job.stage, design=replace(job.design, unloaded_q=description.unloaded_q)))
    nothing = np.zeros(job.low_hz.size)
    for name in expand([description.topology]):
        form = Form(name, job.kit, job.design.impedance_ohm, job.design.resonator_h or job.design.resonator_f)
        drawn = sketch(job, prototype, form, centre_hz=centre_hz, bandwidth=bandwidth, required_db=nothing)
        if drawn is not None:
            return replace(from_built(job, realise(job, drawn, nothing), source="given"), reason="given")
    raise PlannerError(
        f"stage[{job.index + 1}].filter.topology = {description.topology!r}: cannot realise {prototype.family} order "
        f"{prototype.order} between equal impedances; an odd order or butterworth can"
    )


def planned(job: Job, required_db: Array, *, carrier_db: float) -> StageFilter:
    """Choose the filter that gives `required_db`; where there is none, the nearest one and why it falls short.

    Parameters
    ----------
    job : Job
    required_db : (lines,) float
    carrier_db : float
        The carrier's loss that leakage is judged against [dB].
    """
    choice = choose(job, required_db, carrier_db=carrier_db)
    if choice.built is not None:
        return replace(from_built(job, choice.built), choice=choice, reason=choice.reason)
    if choice.best is not None:
        return replace(from_built(job, choice.best), choice=choice, meets=False, reason=choice.reason)
    return replace(unfiltered(job, wanted=True, reason=choice.reason), choice=choice)


def held_to(job: Job, stage_filter: StageFilter, required_db: Array) -> StageFilter:
    """Return the filter with the windows that the final requirement gives."""
    if stage_filter.choice is None:
        return stage_filter
    windows = report_windows(job, required_db, carrier_db=stage_filter.action.carrier_most_db)
    return replace(stage_filter, choice=replace(stage_filter.choice, windows=windows))
