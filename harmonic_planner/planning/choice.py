"""One stage's filter: from the rejections it must give to parts that give them.

Orders are tried from the least. At each, every allowed topology, family, kit and resonator value is drawn with ideal
values at the widest bandwidth that gives every rejection, the topology's skew counted; the most promising drawings are
then built, strays absorbed, on the kit's grid, and the first that gives every rejection as built and can be built is
taken. So: meets every line as built and is buildable, then fewest resonators, loss, part count.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.filters.windows import Task, WindowResult, centres
from harmonic_planner.model import ElementReport, Window
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.built import Built, Form, as_built, meets, realise, sketch
from harmonic_planner.planning.forms import allowed_topologies, forms, realises
from harmonic_planner.planning.jobs import Array, Job, is_far
from harmonic_planner.planning.one_sided import one_sided_drawings
from harmonic_planner.planning.windows_of import (
    leak_reason,
    prototype_windows,
    skewed_window,
    skirts_db,
    to_report,
)

_HALVINGS = 3
_BUILT_PER_ORDER = 6
_BUILT_PER_TOPOLOGY = 2
_NARROWER = (1.0, 0.95, 0.85)
_ORDERS_BEYOND = 2
_HOPELESS_DB = 6.0


@dataclass(frozen=True)
class Choice:
    """The chosen filter, or why there is none, and every window that was looked at.

    `best` is the filter that comes nearest where none meets every line.
    """

    built: Built | None
    best: Built | None
    reason: str
    windows: tuple[Window, ...]


def able(job: Job) -> Iterator[tuple[Prototype, Topology]]:
    """Yield every prototype with the topologies that can realise it, one for each skew."""
    for prototype in _prototypes(job):
        skews = set()
        for topology in allowed_topologies(job):
            if topology.skew_db not in skews and realises(topology.name, prototype):
                skews.add(topology.skew_db)
                yield prototype, topology


def choose(job: Job, required_db: Array, *, carrier_db: float) -> Choice:
    """Choose the filter of one stage.

    Parameters
    ----------
    job : Job
    required_db : (lines,) float
        Rejection needed at every line, leakage included; 0 where none is needed.
    carrier_db : float
        The carrier's loss that leakage is judged against.

    Returns
    -------
    Choice
        `built` is None where no filter as built gives every rejection, with the reason in words.
    """
    windows = report_windows(job, required_db, carrier_db=carrier_db)
    strained: Built | None = None
    nearest: Built | None = None
    hopeless: list[tuple[float, Built]] = []
    seen: list[Built] = []
    first: int | None = None
    for order in _orders(job):
        if first is not None and order > first + _ORDERS_BEYOND:
            break
        drawn = sorted(drawings(job, order, required_db, carrier_db), key=promise)
        if drawn and first is None:
            first = order
        hopeful: list[Built] = []
        for candidate in drawn:
            short_db = far_short_db(job, candidate, required_db)
            if short_db > _HOPELESS_DB:
                hopeless.append((short_db, candidate))
            elif sum(b.topology == candidate.topology for b in hopeful) < _BUILT_PER_TOPOLOGY:
                hopeful.append(candidate)
        for candidate in hopeful[:_BUILT_PER_ORDER]:
            built = settle_bandwidth(job, candidate, required_db)
            seen.append(built)
            if not meets(job, built):
                nearest = max((b for b in (nearest, built) if b is not None), key=lambda b: b.short_db)
                continue
            if built.verdict != "swamped":
                return Choice(built, built, why(built, seen), windows)
            strained = min((b for b in (strained, built) if b is not None), key=lambda b: b.strain)
    if strained is not None:
        return Choice(strained, strained, why(strained, seen), windows)
    if nearest is None and hopeless:
        nearest = realise(job, min(hopeless, key=lambda found: found[0])[1], required_db)
    return Choice(None, nearest, _why_not(job, required_db, carrier_db, windows, nearest), windows)


def far_short_db(job: Job, drawn: Built, required_db: Array) -> float:
    """Return by how much strays let the worst far line through, ideal values kept [dB]; below zero where none.

    Absorbing strays moves the passband back; far from it they act as they are.
    """
    wanted = is_far(job) & (required_db > 0)
    if not wanted.any():
        return -math.inf
    frequency_hz = np.concatenate([job.low_hz[wanted], job.high_hz[wanted]])
    attenuation_db = as_built(job, drawn.ideal, drawn.form)(frequency_hz).reshape(2, -1).min(axis=0)
    return float(np.max(required_db[wanted] - (attenuation_db - drawn.action.carrier_most_db)))


def report_windows(job: Job, required_db: Array, *, carrier_db: float) -> tuple[Window, ...]:
    """Return the windows of every family and order for a requirement, as the plan shows them."""
    results = prototype_windows(job, required_db, carrier_db)
    topologies = allowed_topologies(job)
    return to_report(
        job, results, required_db, carrier_db, lambda prototype: any(realises(t.name, prototype) for t in topologies)
    )


def drawings(job: Job, order: int, required_db: Array, carrier_db: float) -> Iterator[Built]:
    """Yield, for one order, every form at the widest bandwidth at which its ideal values give every rejection.

    A low-pass or high-pass comes with the order that has as many resonators as it has pairs of parts.
    """
    if job.design.order is None:
        yield from one_sided_drawings(job, order, required_db)
    for prototype in _prototypes(job):
        if prototype.order != order:
            continue
        for topology in allowed_topologies(job):
            if not realises(topology.name, prototype):
                continue
            task, window = skewed_window(job, topology, prototype, required_db, carrier_db)
            if not window.feasible:
                continue
            middle = float(np.sqrt(window.bandwidth_min * window.bandwidth_max))
            for form in forms(job, topology, prototype, centre_hz=job.centre_hz, bandwidth=middle):
                found = widest(job, prototype, form, task, window, required_db)
                if found is not None:
                    yield found


def widest(
    job: Job, prototype: Prototype, form: Form, task: Task, window: WindowResult, required_db: Array
) -> Built | None:
    """Return the widest drawing in a window that gives every rejection, or None."""

    def at(bandwidth: float) -> Built | None:
        interval = centres(prototype, task, bandwidth)
        if interval is None:
            return None
        centre_hz = float(np.sqrt(interval[0] * interval[1]))
        return sketch(job, prototype, form, centre_hz=centre_hz, bandwidth=bandwidth, required_db=required_db)

    def sound(drawn: Built | None) -> Built | None:
        return drawn if drawn is not None and meets(job, drawn) else None

    wide, narrow = window.bandwidth_max, window.bandwidth_min
    if job.design.bandwidth is not None:
        return sound(at(job.design.bandwidth)) if narrow <= job.design.bandwidth <= wide else None
    widest_drawn = at(wide)
    if sound(widest_drawn) is not None:
        return widest_drawn
    if form.resonator is not None and widest_drawn is not None and widest_drawn.verdict == "swamped":
        return None  # a narrower band only strains the parts more, and there are other resonator values
    best = sound(at(narrow))
    if best is None:
        return None
    for _ in range(_HALVINGS):
        middle = float(np.sqrt(wide * narrow))
        drawn = sound(at(middle))
        if drawn is None:
            wide = middle
        else:
            best, narrow = drawn, middle
    return best


def settle_bandwidth(job: Job, drawn: Built, required_db: Array) -> Built:
    """Build a drawing, a little narrower where as built it falls short; the last try where none meets."""
    built = realise(job, drawn, required_db)
    best = built
    for share in _NARROWER[1:]:
        narrow = drawn.one_sided or drawn.bandwidth * share < job.floor or job.design.bandwidth is not None
        if meets(job, built) or narrow or not _short_nearby(job, built, required_db):
            break
        narrower = sketch(
            job,
            drawn.prototype,
            drawn.form,
            centre_hz=drawn.centre_hz,
            bandwidth=drawn.bandwidth * share,
            required_db=required_db,
        )
        if narrower is None or narrower.midband_db > job.design.loss_db:
            break
        built = realise(job, narrower, required_db)
        best = max(best, built, key=lambda b: (meets(job, b), b.short_db))
    return best


def _short_nearby(job: Job, built: Built, required_db: Array) -> bool:
    """Tell whether what is missing is near the passband, where a narrower band helps."""
    short = (required_db > 0) & (built.action.rejection_db < required_db)
    return not bool((short & is_far(job)).any())


def _orders(job: Job) -> range:
    fixed = job.design.order
    return range(1, job.design.max_order + 1) if fixed is None else range(fixed, fixed + 1)


def _prototypes(job: Job) -> Iterator[Prototype]:
    for family in job.design.families:
        for order in _orders(job):
            yield Prototype(family, order, job.design.ripple_db)


def promise(drawn: Built) -> tuple[float, ...]:
    """Return what drawings are ranked by: strained parts, loss, parts."""
    return *drawn.strain, round(drawn.midband_db, 1), drawn.part_count, -drawn.bandwidth


def why(chosen: Built, seen: Sequence[Built]) -> str:
    """Say in one sentence with numbers why this filter."""
    words = f"{_described(chosen)}: {_worst_words(chosen)}, {chosen.midband_db:.1f} dB loss"
    other = next((b for b in seen if b.topology != chosen.topology), None)
    return words if other is None else f"{_described(other)}: {_worst_words(other)}; {words}"


def _described(built: Built) -> str:
    form = built.form
    words = f"{form.topology} order {built.prototype.order}"
    words += f" at {built.centre_hz / 1e6:.4g} MHz" if built.one_sided else f" at {built.bandwidth:.0%}"
    return f"{words} with {form.resonator_text}" if form.resonator_text else words


def _worst_words(built: Built) -> str:
    """Return what is wrong with a filter's parts, or that nothing is."""
    if built.short_db < 0:
        return f"{-built.short_db:.1f} dB short as built"
    strained = [e for e in built.elements if e.verdict != "ok"]
    if not strained:
        return "all ok"
    worst: ElementReport = max(strained, key=lambda e: (e.verdict == "swamped", e.stray_share))
    return f"{worst.ref} {worst.reason.split(';')[0]}"


def _why_not(job: Job, required_db: Array, carrier_db: float, windows: Sequence[Window], nearest: Built | None) -> str:
    """Say in one sentence why there is no filter."""
    beyond = (required_db > 0) & ~np.isfinite(skirts_db(job, required_db, carrier_db))
    if beyond.any():
        return leak_reason(job, required_db, carrier_db, beyond)
    if nearest is not None:
        if nearest.problem:
            return f"{_described(nearest)}: {nearest.problem}"
        short = nearest.action.rejection_db - required_db
        line = int(np.argmin(np.where(required_db > 0, short, np.inf)))
        if nearest.short_db < 0:
            return (
                f"as built the nearest, {_described(nearest)}, gives {nearest.action.rejection_db[line]:.1f} dB at "
                f"{job.low_hz[line] / 1e6:.5g} MHz where {required_db[line]:.1f} dB is needed"
            )
        return f"as built {_described(nearest)} exceeds the loss or flatness limit: {nearest.midband_db:.1f} dB midband"
    if any(w.feasible for w in windows):
        return "windows exist, but no allowed topology gives the rejections in them as a circuit"
    reasons = [w.reason for w in windows if w.reason]
    return reasons[-1] if reasons else "no order has a window"
