"""Every stage's filter together: what each must reject, and which filter does it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.assign import Candidates, assign
from harmonic_planner.chain.budget import Rejections, equal_shares, requirement, with_margin
from harmonic_planner.filters.windows import least_order
from harmonic_planner.model import GivenFilter
from harmonic_planner.planning.candidates import Candidate, Offer, offer
from harmonic_planner.planning.choice import buildable_prototypes, look
from harmonic_planner.planning.evaluate import beyond_db
from harmonic_planner.planning.jobs import Job, sample
from harmonic_planner.planning.stage_filter import StageFilter, given, held_to, planned, unfiltered

_ROUNDS = 4
_HEADROOM_DB = 0.02


@dataclass(frozen=True)
class Settled:
    """The filters, and the rejections they are held to."""

    filters: tuple[StageFilter, ...]
    needed: Rejections


def settle(chain: ChainArrays, jobs: Sequence[Job], margins_db: Sequence[float]) -> Settled:
    """Choose every stage's filter.

    Parameters
    ----------
    chain : ChainArrays
        With the limits as the user gave them.
    jobs : sequence of Job
    margins_db : sequence of float
        Margin asked for at each stage's output [dB].

    Returns
    -------
    Settled

    Notes
    -----
    A line at a passband's edge can pass a little better than the carrier, which a requirement of 0 dB does not see.
    Where that eats into the margin the limits are drawn in by as much and the choice is made again.
    """
    target = with_margin(chain, margins_db)
    filtered = [job.stage.filter != "none" for job in jobs]
    options = [_options(job, chain.grid.count) for job in jobs]
    start = _first_orders(target, jobs, filtered)
    drawn_in_db = 0.0
    filters: list[StageFilter] = []
    picked: list[Candidate | None] = []
    for _ in range(_ROUNDS):
        tight = with_margin(target, [drawn_in_db] * len(jobs))
        chosen = assign(tight, [o.rows for o in options], start)
        spec = requirement(tight, chosen.rejections([o.rows for o in options]), filtered)
        picked = [o.candidate(n, p) for o, n, p in zip(options, chosen.orders, chosen.picks, strict=True)]
        filters = [_filter(job, o, p, r) for job, o, p, r in zip(jobs, options, picked, spec.required_db, strict=True)]
        short_db = -_beyond_db(chain, jobs, filters, margins_db)
        if short_db <= 0 or not chosen.met or spec.out_of_reach.any() or not all(f.meets for f in filters):
            break
        drawn_in_db += short_db + _HEADROOM_DB
    filters, needed = _lowered(chain, target, jobs, filters, picked, margins_db)
    held = (held_to(job, f, r) for job, f, r in zip(jobs, filters, needed.required_db, strict=True))
    return Settled(tuple(held), needed)


def _lowered(
    chain: ChainArrays,
    target: ChainArrays,
    jobs: Sequence[Job],
    filters: Sequence[StageFilter],
    picked: Sequence[Candidate | None],
    margins_db: Sequence[float],
) -> tuple[list[StageFilter], Rejections]:
    """Take a lower order wherever what the circuits now do leaves a window for it, and the chain confirms it."""
    filtered = [job.stage.filter != "none" for job in jobs]
    current = list(filters)
    needed = requirement(target, [f.action.rejection_db for f in current], filtered)
    if not all(f.meets for f in current):
        return current, needed
    improved = True
    while improved:
        improved = False
        for i, (job, candidate) in enumerate(zip(jobs, picked, strict=True)):
            if candidate is None:
                continue
            trial = planned(job, candidate, needed.required_db[i])
            if not trial.meets or _order(trial) >= _order(current[i]):
                continue
            changed = [*current[:i], trial, *current[i + 1 :]]
            if _beyond_db(chain, jobs, changed, margins_db) >= 0 or needed.out_of_reach.any():
                current, improved = changed, True
                needed = requirement(target, [f.action.rejection_db for f in current], filtered)
    return current, needed


def _order(stage_filter: StageFilter) -> int:
    return 0 if stage_filter.prototype is None else stage_filter.prototype.order


def _beyond_db(
    chain: ChainArrays, jobs: Sequence[Job], filters: Sequence[StageFilter], margins_db: Sequence[float]
) -> float:
    """Return the least margin beyond what is asked, from a forward run with these filters [dB]."""
    transmissions = [sample(job, f.attenuation).transmission for job, f in zip(jobs, filters, strict=True)]
    return beyond_db(chain, transmissions, margins_db)


@dataclass(frozen=True)
class _Options:
    """What one stage can be: fixed, or a choice of candidates; `rows` is order -> rejections."""

    fixed: StageFilter | None
    offered: Offer
    rows: Candidates

    def candidate(self, order: int, pick: int) -> Candidate | None:
        """Return the filter behind a row, None where there was nothing to choose."""
        return self.offered.filters[order][pick] if order in self.offered.filters else None


def _options(job: Job, count: int) -> _Options:
    """Return a stage's options; one row of order 0 where there is no choice."""
    if isinstance(job.stage.filter, GivenFilter):
        fixed = given(job, job.stage.filter)
    elif job.stage.filter == "none":
        fixed = unfiltered(job)
    else:
        offered = offer(job, buildable_prototypes(job))
        if offered.filters:
            return _Options(None, offered, offered.rejections_db)
        return _Options(unfiltered(job, wanted=True, reason=_no_carrier(job)), offered, {0: np.zeros((1, count))})
    return _Options(fixed, Offer({}, {}), {0: fixed.action.rejection_db[None, :]})


def _filter(job: Job, options: _Options, candidate: Candidate | None, required_db: Array) -> StageFilter:
    """Return the stage's filter for this requirement."""
    if options.fixed is not None or candidate is None:
        return options.fixed or unfiltered(job)
    return planned(job, candidate, required_db)


def _first_orders(chain: ChainArrays, jobs: Sequence[Job], filtered: Sequence[bool]) -> list[int]:
    """Return the least order at each stage for equal shares, the most allowed where there is none."""
    orders = []
    for job, required_db in zip(jobs, equal_shares(chain, filtered), strict=True):
        if job.stage.filter != "plan":
            orders.append(0)
            continue
        _, results, _ = look(job, required_db, carrier_db=job.design.flatness_db)
        least = least_order(results)
        orders.append(job.design.max_order if least is None else least.prototype.order)
    return orders


def _no_carrier(job: Job) -> str:
    return (
        f"no filter from {job.floor:.1%} bandwidth up passes the carrier within {job.design.loss_db:g} dB loss and "
        f"{job.design.flatness_db:g} dB flatness"
    )
