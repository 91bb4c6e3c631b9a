"""What the filters of each order could do at one stage, before any is chosen.

At a fixed order and centre the narrowest allowed bandwidth is best on every line, so a stage offers, for each order
and family, the narrowest band that passes the carrier, keeps the loss limit and respects the floor, at a few centres.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.budget import LEAST_USEFUL_DB
from harmonic_planner.chain.leakage import with_leakage
from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.filters.windows import Task, centres, solve
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega
from harmonic_planner.planning.built import as_built, design_ideal
from harmonic_planner.planning.forms import forms
from harmonic_planner.planning.jobs import Array, Job, is_far
from harmonic_planner.planning.one_sided import able_one_sided, nearest_cut_off_hz, omega

_CENTRES = 5
_SHADE_DB = 0.1
_STRAY_SHADE_DB = 6.0


def task_for(job: Job, required_db: Array) -> Task:
    """Return the window solver's task for lines that need rejection; `required_db` is of the skirts alone."""
    needing = required_db > 0
    design = job.design
    return Task(
        passband_hz=job.carrier_hz,
        line_low_hz=job.low_hz[needing],
        line_high_hz=job.high_hz[needing],
        rejection_db=required_db[needing],
        flatness_db=design.flatness_db,
        loss_db=design.loss_db,
        drift=design.drift,
        unloaded_q=job.unloaded_q,
        floor=job.floor,
    )


@dataclass(frozen=True)
class Candidate:
    """One filter an order could offer, with its carrier loss by the rule midband plus flatness [dB]."""

    prototype: Prototype
    topology: Topology
    centre_hz: float
    bandwidth: float
    carrier_db: float


@dataclass(frozen=True)
class Offer:
    """What one stage could do.

    Attributes
    ----------
    rejections_db : mapping of int to (candidates, lines) float
        Order -> rejections, leakage included, and no more at far lines than strays allow.
    ideal_db : mapping of int to (candidates, lines) float
        The same without strays.
    filters : mapping of int to tuple of Candidate
        The same candidates as filters.
    """

    rejections_db: Mapping[int, Array]
    ideal_db: Mapping[int, Array]
    filters: Mapping[int, tuple[Candidate, ...]]


def offer(job: Job, able: Iterable[tuple[Prototype, Topology]]) -> Offer:
    """Return what each order can reject at every line of the grid.

    Parameters
    ----------
    job : Job
    able : iterable of (Prototype, Topology)
        Prototypes with topologies that can realise them at this stage; of topologies with the same skew one suffices.

    Returns
    -------
    Offer
        Empty where no order passes the carrier within the loss limit.
    """
    task = task_for(job, np.zeros(job.low_hz.size))
    rows: dict[int, list[Array]] = {}
    ideal: dict[int, list[Array]] = {}
    filters: dict[int, list[Candidate]] = {}
    ceilings: dict[tuple[int, str], Array] = {}
    for prototype, topology in able:
        answer = solve(prototype, task)
        if not answer.feasible:
            continue
        bandwidth = answer.bandwidth_min if job.design.bandwidth is None else job.design.bandwidth
        interval = centres(prototype, task, bandwidth)
        if interval is None:
            continue
        carrier_db = float(prototype.midband_loss_db(1 / (bandwidth * job.unloaded_q))) + job.design.flatness_db
        key = prototype.order, topology.name
        if key not in ceilings:
            middle = Candidate(prototype, topology, math.sqrt(interval[0] * interval[1]), bandwidth, carrier_db)
            ceilings[key] = far_ceiling_db(job, middle)
        for centre_hz in np.unique(np.geomspace(*interval, _CENTRES)):
            candidate = Candidate(prototype, topology, float(centre_hz), bandwidth, carrier_db)
            filters.setdefault(prototype.order, []).append(candidate)
            ideal.setdefault(prototype.order, []).append(_rejection(job, candidate))
            rows.setdefault(prototype.order, []).append(np.minimum(ideal[prototype.order][-1], ceilings[key]))
    for resonators in range(1, job.design.max_order + 1):
        for candidate in _one_sided(job, resonators):
            filters.setdefault(resonators, []).append(candidate)
            ideal.setdefault(resonators, []).append(_rejection(job, candidate))
            rows.setdefault(resonators, []).append(np.minimum(ideal[resonators][-1], far_ceiling_db(job, candidate)))
    orders = sorted(rows)
    return Offer(
        {n: np.array(rows[n]) for n in orders},
        {n: np.array(ideal[n]) for n in orders},
        {n: tuple(filters[n]) for n in orders},
    )


def far_ceiling_db(job: Job, candidate: Candidate) -> Array:
    """Return what strays let a candidate reject far from its passband, (lines,); infinite near it.

    The ideal values are swept with the strays of the preferred kit: absorbing them moves the passband back, far from it
    they act as they are.
    """
    ceiling_db = np.full(job.low_hz.size, np.inf)
    far = is_far(job)
    form = next(
        forms(
            job,
            candidate.topology,
            candidate.prototype,
            centre_hz=candidate.centre_hz,
            bandwidth=candidate.bandwidth,
        ),
        None,
    )
    if form is None or not far.any():
        return ceiling_db
    drawn = design_ideal(candidate.prototype, form, centre_hz=candidate.centre_hz, bandwidth=candidate.bandwidth)
    if drawn is None:
        return ceiling_db
    frequency_hz = np.stack([job.low_hz[far], job.high_hz[far]])
    attenuation_db = as_built(job, drawn, form)(frequency_hz.ravel()).reshape(2, -1).min(axis=0)
    ceiling_db[far] = np.maximum(attenuation_db - candidate.carrier_db - _STRAY_SHADE_DB, 0.0)
    return ceiling_db


def _one_sided(job: Job, resonators: int) -> Iterator[Candidate]:
    """Yield low-pass and high-pass filters at the cut-off nearest the carrier."""
    if job.design.order is not None:
        return
    for prototype, topology in able_one_sided(job, resonators):
        cut_off_hz = nearest_cut_off_hz(job, prototype, topology)
        loss_db = float(prototype.midband_loss_db(1 / job.unloaded_q))
        if loss_db <= job.design.loss_db:
            yield Candidate(prototype, topology, cut_off_hz, 1.0, loss_db + job.design.flatness_db)


def _rejection(job: Job, candidate: Candidate) -> Array:
    """Return A(line, least over span and drift) − midband − flatness, skew and leak counted, [dB], shape (lines,)."""
    prototype, topology, centre_hz = candidate.prototype, candidate.topology, candidate.centre_hz
    sigma = 1 / (candidate.bandwidth * job.unloaded_q)
    low, high = job.low_hz / (1 + job.design.drift), job.high_hz / (1 - job.design.drift)
    ends = np.stack([low, high])
    if topology.passes == "band":
        edges = bandpass_omega(ends, centre_hz=centre_hz, bandwidth=candidate.bandwidth)
        omegas = np.where((low < centre_hz) & (high > centre_hz), 0.0, edges.min(axis=0))
    else:
        omegas = omega(topology, ends, centre_hz).min(axis=0)
    skew = topology.skew_db(prototype.order, ends / centre_hz).min(axis=0)
    skirt = prototype.attenuation_db(omegas, sigma) + skew - candidate.carrier_db
    rejection = with_leakage(skirt, candidate.carrier_db, job.leak_db, exponent=job.exponent) - _SHADE_DB
    rejection[rejection < LEAST_USEFUL_DB] = 0.0
    rejection[job.carrier] = 0.0
    return rejection
