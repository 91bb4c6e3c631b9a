"""One stage's filter as the chain sees it: planned, given by the user, or none."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from harmonic_planner.filters.topologies import expand
from harmonic_planner.model import FilterSource, GivenFilter, PlannerError
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.built import Built, Form, as_built, lossless, passes_carrier, realise, sketch
from harmonic_planner.planning.candidates import Candidate
from harmonic_planner.planning.choice import Choice, choose, report_windows, why
from harmonic_planner.planning.forms import forms
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


def planned(job: Job, required_db: Array, picked: Candidate) -> StageFilter:
    """Choose the filter that gives `required_db`; where there is none, the nearest one and why it falls short.

    Parameters
    ----------
    job : Job
    required_db : (lines,) float
    picked : Candidate
        What the joint choice relied on; its carrier loss is what leakage is judged against, and it is built where
        nothing else can be.
    """
    choice = choose(job, required_db, carrier_db=picked.carrier_db)
    if choice.built is not None:
        return replace(from_built(job, choice.built), choice=choice, reason=choice.reason)
    best = choice.best or _as_picked(job, picked, required_db)
    if best is not None:
        return replace(from_built(job, best), choice=choice, meets=False, reason=choice.reason)
    return replace(unfiltered(job, wanted=True, reason=choice.reason), choice=choice)


def accepted(job: Job, stage_filter: StageFilter) -> StageFilter:
    """Return a filter that fell short of its own share as one that meets, where the chain as a whole meets its limits.

    Loss and flatness must hold all the same.
    """
    built = stage_filter.built
    if stage_filter.meets or built is None or not passes_carrier(job, built):
        return stage_filter
    return replace(stage_filter, meets=True, reason=why(built, ()))


def _as_picked(job: Job, picked: Candidate, required_db: Array) -> Built | None:
    """Return the joint choice's own candidate as built, in the first form that can be designed."""
    centre_hz, bandwidth = picked.centre_hz, picked.bandwidth
    for form in forms(job, picked.topology, picked.prototype, centre_hz=centre_hz, bandwidth=bandwidth):
        drawn = sketch(job, picked.prototype, form, centre_hz=centre_hz, bandwidth=bandwidth, required_db=required_db)
        if drawn is not None:
            return realise(job, drawn, required_db)
    return None


def held_to(job: Job, stage_filter: StageFilter, required_db: Array) -> StageFilter:
    """Return the filter with the windows that the final requirement gives."""
    if stage_filter.choice is None:
        return stage_filter
    windows = report_windows(job, required_db, carrier_db=stage_filter.action.carrier_most_db)
    reason, built = stage_filter.reason, stage_filter.built
    below = [w.order for w in windows if w.feasible and built is not None and w.order < built.resonators]
    if stage_filter.meets and below:
        reason += f"; by its prototype order {min(below)} has a window too, but no circuit of it as built does all"
    return replace(stage_filter, reason=reason, choice=replace(stage_filter.choice, windows=windows))
