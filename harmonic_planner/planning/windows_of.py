"""The windows of one stage, for the prototypes and, with a topology's skew taken off, for its circuits."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.leakage import skirt_needed_db
from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.filters.windows import Task, WindowResult, scan, solve
from harmonic_planner.model import Window
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.candidates import task_for
from harmonic_planner.planning.jobs import Array, Job


def skirts_db(job: Job, required_db: Array, carrier_db: float) -> Array:
    """Return what the skirts alone must give beside the leak [dB], (lines,); infinite where the leak is too much."""
    needed = skirt_needed_db(required_db, carrier_db, job.leak_db, exponent=job.exponent)
    return np.where(required_db > 0, needed, 0.0)


def prototype_windows(job: Job, required_db: Array, carrier_db: float) -> tuple[WindowResult, ...]:
    """Return the answers for every family and order; lines beyond the leak are left out of them."""
    skirts = skirts_db(job, required_db, carrier_db)
    task = task_for(job, np.where(np.isfinite(skirts), skirts, 0.0))
    return scan(task, families=job.design.families, ripple_db=job.design.ripple_db, max_order=job.design.max_order)


def skewed_task(job: Job, topology: Topology, order: int, required_db: Array, carrier_db: float) -> Task:
    """Return the task with the topology's skew at each line taken off what the prototype must give."""
    skirts = skirts_db(job, required_db, carrier_db)
    ratios = np.stack([job.low_hz, job.high_hz]) / job.centre_hz
    skew = topology.skew_db(order, ratios).min(axis=0)
    asked = np.where(np.isfinite(skirts) & (skirts > 0), np.maximum(skirts - skew, 0.1), 0.0)
    return task_for(job, asked)


def skewed_window(
    job: Job, topology: Topology, prototype: Prototype, required_db: Array, carrier_db: float
) -> tuple[Task, WindowResult]:
    """Return one prototype's window with the topology's skew, and the task it answers."""
    task = skewed_task(job, topology, prototype.order, required_db, carrier_db)
    return task, solve(prototype, task)


def to_report(
    job: Job,
    results: Sequence[WindowResult],
    required_db: Array,
    carrier_db: float,
    realisable: Callable[[Prototype], bool],
) -> tuple[Window, ...]:
    """Turn the solver's answers into what the plan shows."""
    beyond = ~np.isfinite(skirts_db(job, required_db, carrier_db))
    leak = leak_reason(job, required_db, carrier_db, beyond) if beyond.any() else ""
    return tuple(_window(r, leak, realisable=realisable(r.prototype)) for r in results)


def leak_reason(job: Job, required_db: Array, carrier_db: float, beyond: NDArray[np.bool_]) -> str:
    """Say that isolation and not a filter is what limits, with the worst line's numbers."""
    worst = int(np.argmax(np.where(beyond, required_db - job.leak_db, -np.inf)))
    return (
        f"the line at {job.low_hz[worst] / 1e6:.5g} MHz needs {required_db[worst]:.1f} dB below a carrier that loses "
        f"{carrier_db:.1f} dB, so more than {required_db[worst] + carrier_db:.1f} dB of isolation between the filter's "
        f"input and output, where {job.leak_db[worst]:.0f} dB is counted: a shield is needed, not a resonator"
    )


def _window(result: WindowResult, leak: str, *, realisable: bool) -> Window:
    reason = leak or result.reason
    if result.feasible and not realisable:
        reason = reason or "no allowed topology realises it between equal impedances"
    narrow_hz, wide_hz = (math.sqrt(c[0] * c[1]) for c in (result.centres_min_hz, result.centres_max_hz))
    return Window(
        family=result.prototype.family,
        ripple_db=result.prototype.ripple_db,
        order=result.prototype.order,
        bandwidth_min_hz=result.bandwidth_min * narrow_hz,
        bandwidth_max_hz=result.bandwidth_max * wide_hz,
        centre_hz=wide_hz,
        centre_min_hz=narrow_hz,
        feasible=result.feasible and not leak,
        reason=reason,
    )
