"""Every stage's filter together: what each must reject, and which filter does it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.allocate import allocate
from harmonic_planner.chain.allocation import Allocation
from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.budget import Rejections, requirement, with_margin
from harmonic_planner.chain.screening import Candidates
from harmonic_planner.model import GivenFilter, MeasuredFilter
from harmonic_planner.planning.candidates import Candidate, Offer, offer
from harmonic_planner.planning.choice import able, report_windows
from harmonic_planner.planning.evaluate import beyond_db
from harmonic_planner.planning.jobs import Job, is_far, sample
from harmonic_planner.planning.measured import measured
from harmonic_planner.planning.stage_filter import StageFilter, accepted, given, held_to, planned, unfiltered

_ROUNDS = 4
_HEADROOM_DB = 0.02
_MOST_LEARNED_DB = 4.0


@dataclass(frozen=True)
class Settled:
    """The filters, the rejections they are held to, and the joint choice of orders behind them, with its candidates."""

    filters: tuple[StageFilter, ...]
    needed: Rejections
    allocation: Allocation
    rows: tuple[Candidates, ...]


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
    options = [options_of(job, chain.grid.count) for job in jobs]
    learned = [_Learned(np.full(chain.grid.count, np.inf), 0.0) for _ in jobs]
    drawn_in_db = 0.0
    best: _Round | None = None
    for _ in range(_ROUNDS):
        tight = with_margin(target, [drawn_in_db] * len(jobs))
        rows = [_within(o.rows, known) for o, known in zip(options, learned, strict=True)]
        chosen = allocate(tight, rows)
        if not chosen.met:  # where strays are the obstacle, ask for what ideal filters would share
            ideal_rows = [o.ideal for o in options]
            ideal = allocate(tight, ideal_rows)
            if ideal.met or not _same_obstacle(ideal, chosen):
                rows, chosen = ideal_rows, ideal
        spec = requirement(tight, chosen.rejections(rows), filtered)
        picked = [o.candidate(n, p) for o, n, p in zip(options, chosen.orders, chosen.picks, strict=True)]
        filters = [
            o.fixed or (unfiltered(job) if c is None else planned(job, r, c))
            for job, o, r, c in zip(jobs, options, spec.required_db, picked, strict=True)
        ]
        filters = _eased(tight, jobs, filters, picked, chosen.rejections(rows), filtered)
        beyond = _beyond_db(chain, jobs, filters, margins_db)
        if beyond >= 0:
            filters = [accepted(job, f) for job, f in zip(jobs, filters, strict=True)]
        this = _Round(tuple(filters), tuple(picked), beyond, chosen, tuple(rows))
        if best is not None and this.rank >= best.rank:
            break
        best = this
        if this.failing and not spec.out_of_reach.any():
            for i in this.failing:
                learned[i] = _learn(jobs[i], learned[i], filters[i], spec.required_db[i])
            continue
        if beyond >= 0 or this.failing or spec.out_of_reach.any():
            break
        drawn_in_db += _HEADROOM_DB - beyond
    assert best is not None
    filters, needed = _lowered(chain, target, jobs, best, margins_db)
    held = (held_to(job, f, r) for job, f, r in zip(jobs, filters, needed.required_db, strict=True))
    return Settled(tuple(held), needed, best.chosen, best.rows)


@dataclass(frozen=True)
class _Round:
    """One try at all stages: the filters, the candidates they stand for, and the margin beyond what is asked."""

    filters: tuple[StageFilter, ...]
    picked: tuple[Candidate | None, ...]
    beyond_db: float
    chosen: Allocation
    rows: tuple[Candidates, ...]

    @property
    def failing(self) -> list[int]:
        """Stages whose filter does not do, as built, what it was chosen for."""
        return [i for i, f in enumerate(self.filters) if not f.meets]

    @property
    def rank(self) -> tuple[int, float]:
        """Fewer failing stages are better, then more margin."""
        return len(self.failing), -self.beyond_db


@dataclass(frozen=True)
class _Learned:
    """What circuits as built taught of a stage: a ceiling at far lines, and how much every skirt falls short [dB]."""

    ceiling_db: Array
    short_db: float


def _within(rows: Candidates, known: _Learned) -> Candidates:
    """Return the rejections as circuits were seen to give them."""
    return {n: np.minimum(np.maximum(r - known.short_db, 0.0), known.ceiling_db) for n, r in rows.items()}


def _learn(job: Job, known: _Learned, stage_filter: StageFilter, required_db: Array) -> _Learned:
    """Take from a filter that fell short what holds for its neighbours too.

    At far lines strays are the limit, whatever the order: the ceiling comes down to what was seen. Near the passband
    parts on a grid and absorbed strays cost skirt: every candidate is taken to lose as much.
    """
    achieved = stage_filter.action.rejection_db
    short_db = np.where(required_db > 0, required_db - achieved, 0.0)
    far = is_far(job) & (short_db > 0)
    ceiling_db = np.where(far, np.minimum(known.ceiling_db, np.maximum(achieved, 0.0)), known.ceiling_db)
    near_db = float(np.max(short_db[~is_far(job)], initial=0.0))
    return _Learned(
        ceiling_db, known.short_db + (min(near_db, _MOST_LEARNED_DB) + _HEADROOM_DB if near_db > 0 else 0.0)
    )


def _eased(
    tight: ChainArrays,
    jobs: Sequence[Job],
    filters: Sequence[StageFilter],
    picked: Sequence[Candidate | None],
    relied_db: Sequence[Array],
    filtered: Sequence[bool],
) -> list[StageFilter]:
    """Choose again where a filter fell short of its share, for what is left to it beside the others as built."""
    current = list(filters)
    for i, candidate in enumerate(picked):
        if current[i].meets or candidate is None:
            continue
        achieved_db = [f.action.rejection_db for f in current]
        achieved_db[i] = relied_db[i]
        alone = [j == i for j in range(len(jobs))]
        left = requirement(tight, achieved_db, filtered, movable=alone)
        trial = planned(jobs[i], left.required_db[i], candidate)
        if trial.meets:
            current[i] = trial
    return current


def _lowered(
    chain: ChainArrays,
    target: ChainArrays,
    jobs: Sequence[Job],
    start: _Round,
    margins_db: Sequence[float],
) -> tuple[list[StageFilter], Rejections]:
    """Take a lower order wherever what the circuits now do leaves a window for it, and the chain confirms it."""
    filtered = [job.stage.filter != "none" for job in jobs]
    current = list(start.filters)
    needed = requirement(target, [f.action.rejection_db for f in current], filtered)
    if not all(f.meets for f in current):
        return current, needed
    improved = True
    while improved:
        improved = False
        for i, (job, candidate) in enumerate(zip(jobs, start.picked, strict=True)):
            if candidate is None or not _window_below(job, current[i], needed.required_db[i], candidate.carrier_db):
                continue
            trial = planned(job, needed.required_db[i], candidate)
            if not trial.meets or _order(trial) >= _order(current[i]) or _strain(trial) > _strain(current[i]):
                continue
            changed = [*current[:i], trial, *current[i + 1 :]]
            if _beyond_db(chain, jobs, changed, margins_db) >= 0 or needed.out_of_reach.any():
                current, improved = changed, True
                needed = requirement(target, [f.action.rejection_db for f in current], filtered)
    return current, needed


def _window_below(job: Job, stage_filter: StageFilter, required_db: Array, carrier_db: float) -> bool:
    """Tell whether a lower order has a window, by its prototype, for what is now required."""
    windows = report_windows(job, required_db, carrier_db=carrier_db)
    return any(w.feasible and w.order < _order(stage_filter) for w in windows)


def _strain(stage_filter: StageFilter) -> int:
    return 0 if stage_filter.built is None else stage_filter.built.strain[0]


def _order(stage_filter: StageFilter) -> int:
    return 0 if stage_filter.built is None else stage_filter.built.resonators


def _beyond_db(
    chain: ChainArrays, jobs: Sequence[Job], filters: Sequence[StageFilter], margins_db: Sequence[float]
) -> float:
    """Return the least margin beyond what is asked, from a forward run with these filters [dB]."""
    transmissions = [sample(job, f.attenuation).transmission for job, f in zip(jobs, filters, strict=True)]
    return beyond_db(chain, transmissions, margins_db)


@dataclass(frozen=True)
class Options:
    """What one stage can be: fixed, or a choice of candidates; order -> rejections, with strays and without."""

    fixed: StageFilter | None
    offered: Offer
    rows: Candidates
    ideal: Candidates

    def candidate(self, order: int, pick: int) -> Candidate | None:
        """Return the filter behind a row, None where there was nothing to choose."""
        return self.offered.filters[order][pick] if order in self.offered.filters else None


def options_of(job: Job, count: int) -> Options:
    """Return a stage's options; one row of order 0 where there is no choice."""
    if isinstance(job.stage.filter, GivenFilter):
        fixed = given(job, job.stage.filter)
    elif isinstance(job.stage.filter, MeasuredFilter):
        fixed = measured(job, job.stage.filter)
    elif job.stage.filter == "none":
        fixed = unfiltered(job)
    else:
        offered = offer(job, able(job))
        if offered.filters:
            return Options(None, offered, offered.rejections_db, offered.ideal_db)
        nothing = {0: np.zeros((1, count))}
        return Options(unfiltered(job, wanted=True, reason=_no_carrier(job)), offered, nothing, nothing)
    only = {0: fixed.action.rejection_db[None, :]}
    return Options(fixed, Offer({}, {}, {}), only, only)


def _same_obstacle(one: Allocation, other: Allocation) -> bool:
    """Tell whether two allocations fail at the same limit."""
    a, b = one.obstacle, other.obstacle
    return a is not None and b is not None and (a.kind, a.to, a.line) == (b.kind, b.to, b.line)


def _no_carrier(job: Job) -> str:
    return (
        f"no filter from {job.floor:.1%} bandwidth up passes the carrier within {job.design.loss_db:g} dB loss and "
        f"{job.design.flatness_db:g} dB flatness"
    )
