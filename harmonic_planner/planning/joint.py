"""The joint search by itself, for a chain that is changed a little: nothing is built, offers are made once.

What a stage can offer depends on its lines, kits and design alone. A pad or a better device leaves that as it is, so
only the search is made again.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from harmonic_planner.chain.allocate import allocate
from harmonic_planner.chain.allocation import Allocation
from harmonic_planner.chain.assemble import Array, ChainArrays, assemble, at_levels
from harmonic_planner.chain.budget import with_margin, worst_excess
from harmonic_planner.chain.levels import carrier_levels
from harmonic_planner.chain.screening import Candidates
from harmonic_planner.model import Plan, Scenario
from harmonic_planner.planning.jobs import Job, make_jobs
from harmonic_planner.planning.settle import Options, options_of


@dataclass(frozen=True)
class Searched:
    """A chain with what its stages can offer and the allocation found.

    Attributes
    ----------
    chain, target : ChainArrays
        With the limits as the user gave them, and with the margins asked for.
    jobs : tuple of Job
    rows : tuple of mapping
        Rejections that the search chose among.
    ideal : bool
        Strays are left out of them: with strays the limits could not be met.
    margin_db : float
        Least over all limits, at the corners of span and drift [dB].
    """

    chain: ChainArrays
    target: ChainArrays
    jobs: tuple[Job, ...]
    rows: tuple[Candidates, ...]
    ideal: bool
    allocation: Allocation
    margin_db: float


@dataclass
class Offers:
    """Every stage's options, made once for equal jobs."""

    _known: list[tuple[Job, Options]] = field(default_factory=list)

    def of(self, job: Job) -> Options:
        """Return what the stage of `job` can be."""
        for known, found in self._known:
            if _alike(known, job):
                return found
        found = options_of(job, job.low_hz.size)
        self._known.append((job, found))
        return found


def losses_of(plan: Plan) -> list[float]:
    """Return each filter's midband loss in a plan [dB], from which carrier levels follow."""
    return [stage.filter.loss_db for stage in plan.stages]


def search(scenario: Scenario, losses_db: Sequence[float], offers: Offers) -> Searched:
    """Choose orders for every stage of a chain whose filters lose about `losses_db`.

    Parameters
    ----------
    scenario : Scenario
    losses_db : sequence of float
        One a stage [dB]; leakage and absolute limits are those at the levels that follow.
    offers : Offers
        Options already made; new ones are kept there.

    Returns
    -------
    Searched
        Where strays keep the limits from being met, with ideal filters if that meets them.

    Raises
    ------
    PlannerError
        Where a device or a kit cannot be used.
    """
    lossless = assemble(scenario, phases=scenario.design.phases)
    chain = at_levels(scenario, lossless, carrier_levels(scenario, [np.array([x]) for x in losses_db]))
    jobs = make_jobs(scenario, lossless)
    target = with_margin(chain, [s.design.margin_db for s in scenario.stages])
    options = [offers.of(job) for job in jobs]
    rows, ideal = tuple(o.rows for o in options), False
    found = allocate(target, rows)
    if not found.met:
        without_strays = tuple(o.ideal for o in options)
        other = allocate(target, without_strays)
        if other.met:
            rows, found, ideal = without_strays, other, True
    return Searched(chain, target, jobs, rows, ideal, found, margin_db(chain, found.rejections(rows)))


def margin_db(chain: ChainArrays, rejections_db: Sequence[Array]) -> float:
    """Return the least margin over all limits of `chain` [dB], allowances counted; infinite without a limit."""
    return -float(chain.to_db(worst_excess(chain, rejections_db).max()))


def _alike(one: Job, other: Job) -> bool:
    """Tell whether two jobs have the same offers."""
    return (
        one.carrier == other.carrier
        and one.exponent == other.exponent
        and one.unloaded_q == other.unloaded_q
        and one.floor == other.floor
        and one.stage.filter == other.stage.filter
        and one.design == other.design
        and np.array_equal(one.low_hz, other.low_hz)
        and np.array_equal(one.high_hz, other.high_hz)
        and np.array_equal(one.leak_db, other.leak_db)
    )
