"""What would help a filter that cannot be built, each re-designed, built and run through the chain before it is shown.

A proposal may leave what the user fixed at the stage: family, order, topology, resonator, impedance, kit.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np

from harmonic_planner.filters import flags
from harmonic_planner.model import Design, Proposal
from harmonic_planner.parts.kits import Kit
from harmonic_planner.planning.built import Built, meets, realise, sketch, spare_db
from harmonic_planner.planning.choice import drawings, promise, settle_bandwidth
from harmonic_planner.planning.jobs import Array, Job

_WIDENING = (1.5, 1.25, 1.1)
_MOST = 6
_MORE_RESONATORS = 4
_KINDS_BUILT = 4
_IMPEDANCE_STEPS = (2.0, 0.5, 4.0)
_WIDER = "wider"
_ROUNDING_DB = 1e-6

ChainMargin = Callable[[int, Built], float]
"""(stage index, its new filter) -> least output margin beyond the design margin [dB]."""


@dataclass(frozen=True)
class Advice:
    """Proposals, best first, and a note where none of them can be built."""

    proposals: tuple[Proposal, ...]
    note: str


NO_ADVICE = Advice((), "")


def propose(
    job: Job, chosen: Built, required_db: Array, carrier_db: float, margin: ChainMargin, other_kits: tuple[Kit, ...]
) -> Advice:
    """Return verified changes that make the filter of one stage easier to build.

    Parameters
    ----------
    job : Job
    chosen : Built
        The filter as planned.
    required_db : (lines,) float
    carrier_db : float
        The carrier's loss that leakage is judged against [dB].
    margin : callable
        Runs the whole chain with a changed filter.
    other_kits : tuple of Kit
        Kits the stage does not use now.

    Returns
    -------
    Advice
        Only changes that give every rejection asked of the stage, leave no limit of the chain worse off than it is
        while it is missed, and have fewer or milder flags than `chosen`.
    """
    chosen = replace(chosen, short_db=spare_db(chosen, required_db))
    sound = meets(job, chosen)
    if chosen.verdict == "ok" and sound:
        return NO_ADVICE
    now_db = margin(job.index, chosen) + _ROUNDING_DB
    kept: dict[str, tuple[Built, float]] = {}
    tried: list[Built] = []
    for kind, built in _alternatives(job, chosen, required_db, carrier_db, other_kits, kept):
        tried.append(built)
        better = built.strain < chosen.strain or (not sound and built.strain[0] == 0)
        if not better or not meets(job, built) or (kind in kept and _price(built) >= _price(kept[kind][0])):
            continue
        beyond_db = margin(job.index, built)
        if beyond_db >= min(0.0, now_db):
            kept[kind] = (built, beyond_db)
    ranked = sorted(kept.values(), key=lambda found: _price(found[0]))
    proposals = tuple(_proposal(job, chosen, *found) for found in ranked[:_MOST])
    if any(p.buildable for p in proposals):
        return Advice(proposals, "")
    return Advice(proposals, _none_helps(job, [chosen, *tried], required_db))


def _alternatives(
    job: Job,
    chosen: Built,
    required_db: Array,
    carrier_db: float,
    other_kits: tuple[Kit, ...],
    kept: dict[str, tuple[Built, float]],
) -> Iterator[tuple[str, Built]]:
    """Yield changed filters as built with the kind of change; the dearer kinds only while nothing can be built."""
    order = chosen.prototype.order
    for factor in _WIDENING:
        drawn = sketch(
            job,
            chosen.prototype,
            chosen.form,
            centre_hz=chosen.centre_hz,
            bandwidth=chosen.bandwidth * factor,
            required_db=required_db,
        )
        if drawn is not None and drawn.strain < chosen.strain:
            yield _WIDER, realise(job, drawn, required_db)
            break
    free = _freed(job, kits=(chosen.form.kit,), impedance_ohm=chosen.form.impedance_ohm)
    highest = min(order + _MORE_RESONATORS, 9)
    for kind, found in _best_drawn(free, chosen, range(order, highest + 1), required_db, carrier_db):
        yield kind, settle_bandwidth(free, found, required_db)
    if chosen.verdict != "swamped" or _helped(kept):
        return
    for kit in other_kits:
        freed = _freed(job, kits=(kit,), impedance_ohm=chosen.form.impedance_ohm)
        for _, found in _best_drawn(freed, chosen, range(order, highest + 1), required_db, carrier_db):
            yield f"kit {kit.name}", settle_bandwidth(freed, found, required_db)
    if _helped(kept):
        return
    for step in _IMPEDANCE_STEPS:
        freed = _freed(job, kits=(chosen.form.kit,), impedance_ohm=chosen.form.impedance_ohm * step)
        for _, found in _best_drawn(freed, chosen, range(order, highest + 1), required_db, carrier_db):
            yield f"impedance {step:g}", settle_bandwidth(freed, found, required_db)


def _helped(kept: dict[str, tuple[Built, float]]) -> bool:
    return any(built.strain[0] == 0 for built, _ in kept.values())


def _freed(job: Job, *, kits: tuple[Kit, ...], impedance_ohm: float) -> Job:
    """Return the job without what the user fixed but could change, with these kits and this impedance."""
    design: Design = replace(
        job.design,
        topology=("auto",),
        families=("butterworth", "chebyshev"),
        order=None,
        max_order=9,
        bandwidth=None,
        resonator_h=None,
        resonator_f=None,
        impedance_ohm=impedance_ohm,
    )
    centre_hz = job.centre_hz
    kit = kits[0]
    floor = kit.bandwidth_floor(tuned=design.tuned or kit.tuned, drift=design.drift)
    return replace(
        job,
        stage=replace(job.stage, design=design),
        kits=kits,
        unloaded_q=design.unloaded_q or max(k.unloaded_q(centre_hz) for k in kits),
        floor=floor if design.min_bandwidth is None else design.min_bandwidth,
    )


def _best_drawn(
    job: Job, chosen: Built, orders: range, required_db: Array, carrier_db: float
) -> Iterator[tuple[str, Built]]:
    """Yield the most promising drawing of each kind of change, the most promising kinds first."""
    by_kind: dict[str, Built] = {}
    for order in orders:
        for drawn in drawings(job, order, required_db, carrier_db):
            if drawn.strain >= chosen.strain and chosen.short_db >= 0:
                continue
            kind = _kind(chosen, drawn)
            if kind not in by_kind or _hope(drawn) < _hope(by_kind[kind]):
                by_kind[kind] = drawn
        if sum(drawn.strain[0] == 0 for drawn in by_kind.values()) >= _KINDS_BUILT:
            break
    yield from sorted(by_kind.items(), key=lambda item: _hope(item[1]))[:_KINDS_BUILT]


def _hope(drawn: Built) -> tuple[float, ...]:
    """Return what drawings are ranked by before they are built: swamped parts, resonators, the rest as for a choice."""
    return drawn.strain[0], drawn.resonators, *promise(drawn)


def _kind(old: Built, new: Built) -> str:
    """Return the kind of change; one proposal of a kind is shown."""
    if new.topology != old.topology:
        return f"topology {new.topology}"
    if new.form.resonator != old.form.resonator:
        return "resonator"
    if new.prototype.order != old.prototype.order:
        return "order"
    return "family" if new.prototype.family != old.prototype.family else _WIDER


def _price(built: Built) -> tuple[float, ...]:
    """Return what a proposal is ranked by: swamped parts, resonators, marginal parts, loss."""
    swamped, marginal = built.strain
    return swamped, built.prototype.order, marginal, built.midband_db


def _change(old: Built, new: Built) -> str:
    """Name what differs."""
    words = []
    if new.bandwidth > 1.02 * old.bandwidth:
        words.append(_WIDER)
    if new.prototype.order != old.prototype.order:
        words.append(f"order {new.prototype.order} instead of {old.prototype.order}")
    if new.prototype.family != old.prototype.family:
        words.append(f"{new.prototype.family} instead of {old.prototype.family}")
    if new.topology != old.topology:
        words.append(f"{new.topology} instead of {old.topology}")
    if new.form.resonator is not None and new.form.resonator != old.form.resonator:
        words.append(f"resonators of {new.form.resonator_text}")
    if new.form.kit.name != old.form.kit.name:
        words.append(f"kit {new.form.kit.name} instead of {old.form.kit.name}")
    if new.form.impedance_ohm != old.form.impedance_ohm:
        words.append(f"{new.form.impedance_ohm:g} ohm inside instead of {old.form.impedance_ohm:g} ohm")
    return ", ".join(words) or "the same filter at another centre"


def _cost(job: Job, old: Built, new: Built) -> str:
    """Say what a change costs."""
    words = []
    more = new.prototype.order - old.prototype.order
    if more:
        words.append(f"{abs(more)} resonator{'s' * (abs(more) > 1)} {'more' if more > 0 else 'fewer'}")
    parts = new.part_count - old.part_count
    if parts:
        words.append(f"{abs(parts)} part{'s' * (abs(parts) > 1)} {'more' if parts > 0 else 'fewer'}")
    loss = new.midband_db - old.midband_db
    if abs(loss) >= 0.05:
        words.append(f"{abs(loss):.1f} dB {'more' if loss > 0 else 'less'} loss")
    if new.form.impedance_ohm != job.design.impedance_ohm:
        ratio = max(new.form.impedance_ohm, job.design.impedance_ohm) / min(
            new.form.impedance_ohm, job.design.impedance_ohm
        )
        words.append(f"a {ratio:g}:1 matching section at each end, about 0.3 dB each (memory), not in the loss above")
    if new.form.kit.tuned and not old.form.kit.tuned:
        words.append("every resonator adjusted on the bench")
    return ", ".join(words) or "nothing"


def _proposal(job: Job, old: Built, built: Built, beyond_db: float) -> Proposal:
    worst = flags.worst(built.elements)
    return Proposal(
        change=_change(old, built),
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
        kit=built.form.kit.name,
        impedance_ohm=built.form.impedance_ohm,
        resonator=built.form.resonator,
        price=_cost(job, old, built),
    )


def _none_helps(job: Job, tried: list[Built], required_db: Array) -> str:
    """Say what physics keeps everything that was tried from being built."""
    sound = [b for b in tried if meets(job, b)]
    best = min(sound or tried, key=lambda b: (*b.strain, -b.short_db))
    worst = flags.worst(best.elements)
    limit = f"{best.strain[0]} swamped parts ({worst.ref}: {worst.reason})"
    if not sound:
        missing = np.where(required_db > 0, required_db - best.action.rejection_db, -np.inf)
        line = int(np.argmax(missing))
        limit = best.problem or (
            f"{missing[line]:.1f} dB too little at {job.low_hz[line] / 1e6:.5g} MHz as built"
            if missing[line] > 0
            else f"{best.midband_db:.1f} dB of loss"
        )
    described = f"{best.topology} order {best.prototype.order} of {best.form.kit.name} at {best.bandwidth:.1%}"
    if sound and best.strain[0] == 0:
        return f"nothing milder was found; what is marginal can be built: {described}, {worst.ref}: {worst.reason}"
    return (
        f"nothing that keeps every limit can be built of lumped parts at {job.centre_hz / 1e6:.5g} MHz: the best "
        f"tried, {described}, has {limit}"
    )
