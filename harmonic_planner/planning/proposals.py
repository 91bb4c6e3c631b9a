"""What would help a filter that cannot be built, each re-designed and run through the chain before it is shown."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from harmonic_planner.filters.topologies import expand
from harmonic_planner.filters.windows import WindowResult
from harmonic_planner.model import VERDICT_RANK, ElementReport, Proposal
from harmonic_planner.planning.choice import Built, Choice, build, widest
from harmonic_planner.planning.jobs import Array, Job

_WIDENING = np.geomspace(1.05, 2.5, 12)
_MOST = 5
_WIDER = "wider"

ChainMargin = Callable[[int, Built], float]
"""(stage index, its new filter) -> least output margin beyond the design margin [dB]."""


@dataclass(frozen=True)
class Advice:
    """Proposals, best first, and a note where none of them can be built."""

    proposals: tuple[Proposal, ...]
    note: str


NO_ADVICE = Advice((), "")


def propose(job: Job, chosen: Built, choice: Choice, required_db: Array, margin: ChainMargin) -> Advice:
    """Return verified changes that make the filter of one stage easier to build.

    Parameters
    ----------
    job : Job
    chosen : Built
        The filter as planned.
    choice : Choice
        With the windows of every family and order.
    required_db : (lines,) float
    margin : callable
        Runs the whole chain with a changed filter.

    Returns
    -------
    Advice
        Only changes that keep every limit and have fewer or milder flags than `chosen`.
    """
    if chosen.verdict == "ok":
        return NO_ADVICE
    kept: dict[tuple[bool, bool, bool], tuple[Built, float]] = {}
    for built in _alternatives(job, chosen, choice, required_db):
        if built.strain >= chosen.strain:
            continue
        beyond_db = margin(job.index, built)
        if beyond_db < 0:
            continue
        kind = _kind(chosen, built)
        if kind not in kept or _price(built) < _price(kept[kind][0]):
            kept[kind] = (built, beyond_db)
    ranked = sorted(kept.values(), key=lambda found: _price(found[0]))
    proposals = tuple(_proposal(job, _change(chosen, found[0]), *found) for found in ranked[:_MOST])
    if any(p.buildable for p in proposals):
        return Advice(proposals, "")
    return Advice(proposals, _none_helps(job, chosen, [b for b, _ in kept.values()]))


def _alternatives(job: Job, chosen: Built, choice: Choice, required_db: Array) -> Iterator[Built]:
    """Yield every other filter worth trying, widest first within each kind."""
    for factor in _WIDENING[::-1]:
        bandwidth = chosen.bandwidth * float(factor)
        if bandwidth <= choice.task.cap:
            built = build(
                job,
                chosen.prototype,
                chosen.topology,
                centre_hz=chosen.centre_hz,
                bandwidth=bandwidth,
                required_db=required_db,
            )
            if built is not None:
                yield built
    for result in _worth_trying(choice, chosen):
        for topology in expand(job.design.topology):
            found = widest(job, result, topology, choice.task, required_db)
            if found is not None:
                yield found


def _worth_trying(choice: Choice, chosen: Built) -> Iterator[WindowResult]:
    for result in choice.results:
        if result.feasible and result.prototype.order >= chosen.prototype.order:
            yield result


def _kind(old: Built, new: Built) -> tuple[bool, bool, bool]:
    """Return what differs: order, family, topology; one proposal of a kind is shown."""
    return (
        new.prototype.order != old.prototype.order,
        new.prototype.family != old.prototype.family,
        new.topology != old.topology,
    )


def _price(built: Built) -> tuple[float, ...]:
    """Return what a proposal is ranked by: swamped parts, resonators, marginal parts, loss."""
    swamped, marginal = built.strain
    return swamped, built.prototype.order, marginal, built.midband_db


def _change(old: Built, new: Built) -> str:
    """Name what differs."""
    words = []
    if new.prototype.order != old.prototype.order:
        words.append(f"order {new.prototype.order} instead of {old.prototype.order}")
    if new.prototype.family != old.prototype.family:
        words.append(f"{new.prototype.family} instead of {old.prototype.family}")
    if new.topology != old.topology:
        words.append(f"{new.topology} instead of {old.topology}")
    if new.bandwidth > 1.02 * old.bandwidth:
        words.insert(0, _WIDER)
    return ", ".join(words) or "the same filter at another centre"


def _worst(elements: tuple[ElementReport, ...]) -> ElementReport:
    return max(elements, key=lambda e: (VERDICT_RANK[e.verdict], e.stray_share))


def _proposal(job: Job, change: str, built: Built, beyond_db: float) -> Proposal:
    worst = _worst(built.elements)
    return Proposal(
        change=change,
        family=built.prototype.family,
        ripple_db=built.prototype.ripple_db,
        order=built.prototype.order,
        topology=built.topology,
        bandwidth_hz=built.bandwidth * built.centre_hz,
        centre_hz=built.centre_hz,
        worst_verdict=built.verdict,
        worst_element=f"{worst.ref}: {worst.reason}",
        worst_margin_db=beyond_db + job.design.margin_db,
        loss_db=built.midband_db,
        buildable=built.verdict != "swamped",
    )


def _none_helps(job: Job, chosen: Built, improved: list[Built]) -> str:
    """Say why nothing that can be built was found."""
    best = min([chosen, *improved], key=lambda b: b.strain)
    worst = _worst(best.elements)
    return (
        f"no ladder that keeps every limit can be built from {job.kit.name} at {job.centre_hz / 1e6:.5g} MHz; "
        f"the best, order {best.prototype.order} at {best.bandwidth:.1%}, still has {best.strain[0]} swamped parts "
        f"({worst.ref}: {worst.reason})"
    )
