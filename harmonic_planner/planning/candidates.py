"""What the filters of each order could do at one stage, before any is chosen.

At a fixed order and centre the narrowest allowed bandwidth is best on every line, so a stage offers, for each order
and family, the narrowest band that passes the carrier, keeps the loss limit and respects the floor, at a few centres.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.budget import LEAST_USEFUL_DB
from harmonic_planner.chain.leakage import with_leakage
from harmonic_planner.filters.windows import Task, centres, solve
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega
from harmonic_planner.planning.jobs import Array, Job

_CENTRES = 5
_SHADE_DB = 0.1


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
    centre_hz: float
    bandwidth: float
    carrier_db: float


@dataclass(frozen=True)
class Offer:
    """What one stage could do.

    Attributes
    ----------
    rejections_db : mapping of int to (candidates, lines) float
        Order -> rejections, leakage included.
    filters : mapping of int to tuple of Candidate
        The same candidates as filters.
    """

    rejections_db: Mapping[int, Array]
    filters: Mapping[int, tuple[Candidate, ...]]


def offer(job: Job, prototypes: Iterable[Prototype]) -> Offer:
    """Return what each order can reject at every line of the grid.

    Parameters
    ----------
    job : Job
    prototypes : iterable of Prototype
        Those that can be built at this stage.

    Returns
    -------
    Offer
        Empty where no order passes the carrier within the loss limit.
    """
    task = task_for(job, np.zeros(job.low_hz.size))
    rows: dict[int, list[Array]] = {}
    filters: dict[int, list[Candidate]] = {}
    for prototype in prototypes:
        answer = solve(prototype, task)
        if not answer.feasible:
            continue
        bandwidth = answer.bandwidth_min
        interval = centres(prototype, task, bandwidth)
        if interval is None:
            continue
        carrier_db = float(prototype.midband_loss_db(1 / (bandwidth * job.unloaded_q))) + job.design.flatness_db
        for centre_hz in np.unique(np.geomspace(*interval, _CENTRES)):
            candidate = Candidate(prototype, float(centre_hz), bandwidth, carrier_db)
            filters.setdefault(prototype.order, []).append(candidate)
            rows.setdefault(prototype.order, []).append(_rejection(job, candidate))
    orders = sorted(rows)
    return Offer({n: np.array(rows[n]) for n in orders}, {n: tuple(filters[n]) for n in orders})


def _rejection(job: Job, candidate: Candidate) -> Array:
    """Return A(line, least over span and drift) − midband − flatness with the leak, [dB], shape (lines,)."""
    sigma = 1 / (candidate.bandwidth * job.unloaded_q)
    low, high = job.low_hz / (1 + job.design.drift), job.high_hz / (1 - job.design.drift)
    edges = bandpass_omega(np.stack([low, high]), centre_hz=candidate.centre_hz, bandwidth=candidate.bandwidth)
    omega = np.where((low < candidate.centre_hz) & (high > candidate.centre_hz), 0.0, edges.min(axis=0))
    skirt = candidate.prototype.attenuation_db(omega, sigma) - candidate.carrier_db
    rejection = with_leakage(skirt, candidate.carrier_db, job.leak_db, exponent=job.exponent) - _SHADE_DB
    rejection[rejection < LEAST_USEFUL_DB] = 0.0
    rejection[job.carrier] = 0.0
    return rejection
