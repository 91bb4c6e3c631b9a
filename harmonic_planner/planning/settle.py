"""Every stage's filter together: what each must reject, and which filter does it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.assemble import ChainArrays
from harmonic_planner.chain.assign import Candidates, assign
from harmonic_planner.chain.budget import Rejections, equal_shares, requirement, with_margin
from harmonic_planner.filters.windows import least_order
from harmonic_planner.model import GivenFilter
from harmonic_planner.planning.candidates import Offer, offer
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
    fixed = [_fixed(job) for job in jobs]
    offers = [offer(job, buildable_prototypes(job)) if f is None else None for job, f in zip(jobs, fixed, strict=True)]
    rows = [_rows(f, o, chain.grid.count) for f, o in zip(fixed, offers, strict=True)]
    start = _first_orders(target, jobs, filtered)
    filters: list[StageFilter] = []
    drawn_in_db = 0.0
    for _ in range(_ROUNDS):
        tight = with_margin(target, [drawn_in_db] * len(jobs))
        chosen = assign(tight, rows, start)
        spec = requirement(tight, chosen.rejections(rows), filtered)
        filters = []
        for job, ready, offered, order, pick, required_db in zip(
            jobs, fixed, offers, chosen.orders, chosen.picks, spec.required_db, strict=True
        ):
            if ready is not None or offered is None:
                filters.append(ready or unfiltered(job))
            elif not offered.filters:
                filters.append(unfiltered(job, wanted=True, reason=_no_carrier(job)))
            else:
                filters.append(planned(job, offered.filters[order][pick], required_db))
        transmissions = [sample(job, f.attenuation).transmission for job, f in zip(jobs, filters, strict=True)]
        short_db = -beyond_db(chain, transmissions, margins_db)
        if short_db <= 0 or not chosen.met or spec.out_of_reach.any() or not all(f.meets for f in filters):
            break
        drawn_in_db += short_db + _HEADROOM_DB
    needed = requirement(target, [f.action.rejection_db for f in filters], filtered)
    held = (held_to(job, f, r) for job, f, r in zip(jobs, filters, needed.required_db, strict=True))
    return Settled(tuple(held), needed)


def _fixed(job: Job) -> StageFilter | None:
    """Return the filter where there is nothing to choose."""
    if isinstance(job.stage.filter, GivenFilter):
        return given(job, job.stage.filter)
    return unfiltered(job) if job.stage.filter == "none" else None


def _rows(fixed: StageFilter | None, offered: Offer | None, count: int) -> Candidates:
    """Return the rejections a stage offers by order; order 0 where there is no choice."""
    if fixed is not None:
        return {0: fixed.action.rejection_db[None, :]}
    if offered is not None and offered.rejections_db:
        return offered.rejections_db
    return {0: np.zeros((1, count))}


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
