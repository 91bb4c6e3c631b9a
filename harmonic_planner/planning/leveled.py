"""Filters and carrier levels together: leakage and absolute limits depend on levels, levels on the filters' losses.

The first choice is made as if filters lost nothing. Their losses then give the levels; where at these a limit fails
that held before, or an absolute limit turns out to be looser, the choice is made again.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays, at_levels
from harmonic_planner.chain.budget import requirement, with_margin
from harmonic_planner.chain.levels import CarrierLevels, carrier_levels
from harmonic_planner.model import Scenario
from harmonic_planner.planning.evaluate import beyond_db
from harmonic_planner.planning.jobs import Job, sample
from harmonic_planner.planning.settle import Settled, settle
from harmonic_planner.planning.stage_filter import held_to

_ROUNDS = 3
_LOOSER_DB = 0.5
"""A limit that is looser by less is not worth another choice."""


@dataclass(frozen=True)
class Leveled:
    """Filters, and the chain at the carrier levels they make.

    Attributes
    ----------
    chain : ChainArrays
        With the limits as the user gave them.
    transmissions : tuple of (points, lines) float
        Of each stage's filter over span and drift.
    levels : tuple of CarrierLevels
        At the same points.
    """

    chain: ChainArrays
    settled: Settled
    transmissions: tuple[Array, ...]
    levels: tuple[CarrierLevels, ...]


def settle_at_levels(
    scenario: Scenario, chain: ChainArrays, jobs: Sequence[Job], margins_db: Sequence[float]
) -> Leveled:
    """Choose every stage's filter, leakage and limits being those at the carrier levels that result.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
        As assembled, at the levels of filters without loss.
    jobs : sequence of Job
    margins_db : sequence of float
        Margin asked for at each stage's output [dB].

    Returns
    -------
    Leveled
    """
    best, best_db, exact = None, -np.inf, False
    for _ in range(_ROUNDS):
        found = _leveled(scenario, chain, jobs, settle(chain, jobs, margins_db))
        before_db = beyond_db(chain, found.transmissions, margins_db)
        after_db = beyond_db(found.chain, found.transmissions, margins_db)
        if best is None or after_db >= 0 or best_db < 0:
            best, best_db, exact = found, after_db, _is_same(chain, found.chain)
        if not before_db >= 0 > after_db and not _is_looser(chain, found.chain):
            break
        chain = found.chain
    assert best is not None
    return best if exact else replace(best, settled=_held(best, jobs, margins_db))


def _leveled(scenario: Scenario, chain: ChainArrays, jobs: Sequence[Job], settled: Settled) -> Leveled:
    """Return the chain at the levels that these filters make."""
    samples = [sample(job, f.attenuation) for job, f in zip(jobs, settled.filters, strict=True)]
    levels = carrier_levels(scenario, [s.carrier_db for s in samples])
    return Leveled(at_levels(scenario, chain, levels), settled, tuple(s.transmission for s in samples), levels)


def _is_looser(before: ChainArrays, after: ChainArrays) -> bool:
    """Tell whether a limit is looser than it was, by so much that fewer resonators may do."""
    factor = float(before.from_db(_LOOSER_DB))
    return any((b.limit > a.limit * factor).any() for a, b in zip(before.stages, after.stages, strict=True))


def _is_same(one: ChainArrays, other: ChainArrays) -> bool:
    return all(
        np.array_equal(a.limit, b.limit) and np.array_equal(a.leak, b.leak)
        for a, b in zip(one.stages, other.stages, strict=True)
    )


def _held(found: Leveled, jobs: Sequence[Job], margins_db: Sequence[float]) -> Settled:
    """Return the same filters, held to what is required of them at these levels."""
    achieved_db = [f.action.rejection_db for f in found.settled.filters]
    filtered = [job.stage.filter != "none" for job in jobs]
    needed = requirement(with_margin(found.chain, margins_db), achieved_db, filtered)
    filters = (held_to(j, f, r) for j, f, r in zip(jobs, found.settled.filters, needed.required_db, strict=True))
    return replace(found.settled, filters=tuple(filters), needed=needed)
