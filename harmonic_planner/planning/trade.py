"""Resonators against bandwidth: how much wider every filter may be for a resonator more.

Wide filters have milder values and wider tolerances. Every stage's least bandwidth is raised by one common factor,
offers are made anew, and the largest factor at which the limits can still be met is found by bisection on a grid of
factors.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace

from harmonic_planner.chain.allocate import allocate_within
from harmonic_planner.chain.allocation import Allocation
from harmonic_planner.chain.screening import Candidates
from harmonic_planner.model import Plan, Scenario, TradePoint
from harmonic_planner.planning.joint import Offers, Searched, losses_of, margin_db, search

STEP = 1.04
"""Ratio of neighbouring factors."""
_WIDEST = 1.0
"""Bandwidths end there, as a fraction of the centre."""
_EXTRA = 2


@dataclass
class _Widened:
    """Offers with every least bandwidth raised by a factor, made once for each."""

    now: Searched
    ideal: bool
    _rows: dict[int, tuple[Candidates, ...]] = field(default_factory=dict)

    @property
    def most(self) -> int:
        """The widest step: where the widest floor reaches the widest bandwidth there is."""
        floors = [job.floor for job in self.now.jobs if job.stage.filter == "plan"]
        return max(int(math.log(_WIDEST / max(floors)) / math.log(STEP)), 0)

    def rows(self, step: int) -> tuple[Candidates, ...]:
        """Return every stage's rejections at `STEP` to the power of `step`."""
        if step == 0:
            return self.now.rows
        if step not in self._rows:
            offers = Offers()
            options = [offers.of(replace(job, floor=job.floor * STEP**step)) for job in self.now.jobs]
            self._rows[step] = tuple(o.ideal if self.ideal else o.rows for o in options)
        return self._rows[step]

    def allocation(self, step: int, total: int, *, largest_margin: bool = False) -> Allocation | None:
        """Return an allocation of at most `total`, None where there is none."""
        found = allocate_within(self.now.target, self.rows(step), total=total, largest_margin=largest_margin)
        return found if found is not None and found.met else None


def bandwidth_trade(scenario: Scenario, plan: Plan, offers: Offers | None = None) -> tuple[TradePoint, ...]:
    """Return the widest common bandwidth for the least total of resonators, and for one and two more.

    Parameters
    ----------
    scenario : Scenario
    plan : Plan
        Of this scenario; its filters' losses set the carrier levels.
    offers : Offers, optional
        Options already made for this scenario.

    Returns
    -------
    tuple of TradePoint
        Empty where nothing is to be planned, or limits cannot be met.
    """
    if not any(stage.filter == "plan" for stage in scenario.stages):
        return ()
    now = search(scenario, losses_of(plan), offers or Offers())
    if not now.allocation.met:
        return ()
    widened = _Widened(now, now.ideal)
    points, step = [], 0
    for total in range(now.allocation.total, now.allocation.total + _EXTRA + 1):
        step = _widest(widened, total, step)
        found = widened.allocation(step, total, largest_margin=True)
        if found is None:
            break
        factor = STEP**step
        floors = [job.floor for job in now.jobs if job.stage.filter == "plan"]
        points.append(
            TradePoint(
                total=total,
                factor=factor,
                bandwidth=factor * min(floors),
                widest_tried=step == widened.most,
                resonators=found.orders,
                margin_db=margin_db(now.chain, found.rejections(widened.rows(step))),
            )
        )
    return tuple(points)


def _widest(widened: _Widened, total: int, low: int) -> int:
    """Return the widest step at which `total` is enough: strides that double from `low`, which is, then bisection."""
    stride, high = 1, widened.most + 1
    while low + stride < high and widened.allocation(low + stride, total) is not None:
        low, stride = low + stride, 2 * stride
    high = min(low + stride, high)
    while high - low > 1:
        middle = (low + high) // 2
        if widened.allocation(middle, total) is not None:
            low = middle
        else:
            high = middle
    return low
