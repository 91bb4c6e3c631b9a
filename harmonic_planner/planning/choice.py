"""One stage's filter: from the rejections it must give to a circuit that gives them.

The least order with a window that a circuit confirms is taken, at the widest bandwidth that the circuit confirms:
the wide end of a window is the one that can be built and loses least.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.leakage import skirt_needed_db
from harmonic_planner.filters import flags
from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.topologies import TopologyError, design, expand
from harmonic_planner.filters.windows import Task, WindowResult, centres, scan
from harmonic_planner.model import VERDICT_RANK, ElementReport, ElementVerdict, Window
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.candidates import task_for
from harmonic_planner.planning.jobs import Action, Array, Job, act, circuit_attenuation

_STEPS = 12


@dataclass(frozen=True)
class Built:
    """A filter as a circuit, with what it does and what its parts are.

    `bandwidth` is a fraction of the centre; `short_db` is the least of rejection minus requirement, over the lines
    that need any.
    """

    prototype: Prototype
    topology: str
    centre_hz: float
    bandwidth: float
    circuit: Circuit
    action: Action
    midband_db: float
    elements: tuple[ElementReport, ...]
    short_db: float

    @property
    def verdict(self) -> ElementVerdict:
        """The worst verdict among the parts."""
        return max((e.verdict for e in self.elements), key=VERDICT_RANK.__getitem__, default="ok")

    @property
    def strain(self) -> tuple[int, int]:
        """How many parts are swamped, and how many marginal: less is better."""
        verdicts = [e.verdict for e in self.elements]
        return verdicts.count("swamped"), verdicts.count("marginal")


@dataclass(frozen=True)
class Choice:
    """The chosen filter, or why there is none, and every window that was looked at."""

    built: Built | None
    reason: str
    task: Task
    results: tuple[WindowResult, ...]
    windows: tuple[Window, ...]


def realises(topology: str, prototype: Prototype) -> bool:
    """Tell whether a topology can realise a prototype between equal impedances."""
    try:
        design(topology, prototype, centre_hz=1e9, bandwidth=0.1, impedance_ohm=50.0)
    except TopologyError:
        return False
    return True


def buildable_prototypes(job: Job) -> Iterator[Prototype]:
    """Yield every prototype that one of the stage's topologies can realise between equal impedances."""
    for family in job.design.families:
        for order in range(1, job.design.max_order + 1):
            prototype = Prototype(family, order, job.design.ripple_db)
            if any(realises(name, prototype) for name in expand(job.design.topology)):
                yield prototype


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
        `built` is None where no order has a window, with the reason in words.
    """
    task, results, windows = look(job, required_db, carrier_db=carrier_db)
    for order in range(1, job.design.max_order + 1):
        options = [
            built
            for result in results
            if result.feasible and result.prototype.order == order
            for name in expand(job.design.topology)
            if (built := widest(job, result, name, task, required_db)) is not None
        ]
        if options:
            best = min(options, key=lambda b: (*b.strain, -b.bandwidth))
            return Choice(best, _why(best, options, order), task, results, windows)
    return Choice(None, _why_not(job, results, required_db, carrier_db), task, results, windows)


def look(
    job: Job, required_db: Array, *, carrier_db: float
) -> tuple[Task, tuple[WindowResult, ...], tuple[Window, ...]]:
    """Return the solver's task, its answers for every family and order, and the windows to report."""
    skirts = np.where(
        required_db > 0, skirt_needed_db(required_db, carrier_db, job.leak_db, exponent=job.exponent), 0.0
    )
    reachable = np.isfinite(skirts)
    task = task_for(job, np.where(reachable, skirts, 0.0))
    results = scan(task, families=job.design.families, ripple_db=job.design.ripple_db, max_order=job.design.max_order)
    leak_reason = "" if reachable.all() else _leak_reason(job, required_db, ~reachable)
    return task, results, tuple(_window(r, leak_reason, buildable=_realisable(job, r)) for r in results)


def build(
    job: Job, prototype: Prototype, topology: str, *, centre_hz: float, bandwidth: float, required_db: Array
) -> Built | None:
    """Design one circuit and measure what it does; None where the topology cannot be designed so."""
    try:
        circuit = design(
            topology, prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=job.design.impedance_ohm
        )
    except TopologyError:
        return None
    attenuation = circuit_attenuation(job, circuit, unloaded_q=job.design.unloaded_q)
    action = act(job, attenuation)
    needing = required_db > 0
    rejected = job.low_hz[needing]
    highest_hz = float(rejected.max()) if rejected.size else centre_hz
    return Built(
        prototype=prototype,
        topology=topology,
        centre_hz=centre_hz,
        bandwidth=bandwidth,
        circuit=circuit,
        action=action,
        midband_db=float(attenuation(np.array([centre_hz]))[0]),
        elements=flags.judge(circuit, job.kit, centre_hz=centre_hz, highest_line_hz=highest_hz),
        short_db=float(np.min((action.rejection_db - required_db)[needing], initial=np.inf)),
    )


def widest(job: Job, result: WindowResult, topology: str, task: Task, required_db: Array) -> Built | None:
    """Return the widest circuit of this window that gives every rejection and keeps the loss limit, or None."""
    if not realises(topology, result.prototype):
        return None

    def at(bandwidth: float) -> Built | None:
        interval = centres(result.prototype, task, bandwidth)
        if interval is None:
            return None
        centre_hz = float(np.sqrt(interval[0] * interval[1]))
        built = build(
            job, result.prototype, topology, centre_hz=centre_hz, bandwidth=bandwidth, required_db=required_db
        )
        return built if built is not None and meets(job, built) else None

    wide, narrow = result.bandwidth_max, result.bandwidth_min
    best = at(wide)
    if best is not None:
        return best
    best = at(narrow)
    if best is None:
        return None
    for _ in range(_STEPS):
        middle = float(np.sqrt(wide * narrow))
        built = at(middle)
        if built is None:
            wide = middle
        else:
            best, narrow = built, middle
    return best


def meets(job: Job, built: Built) -> bool:
    """Tell whether the circuit gives every rejection within the loss and flatness limits."""
    flat = built.action.carrier_most_db - built.midband_db <= job.design.flatness_db + 1e-9
    return built.short_db >= 0 and built.midband_db <= job.design.loss_db and flat


def _realisable(job: Job, result: WindowResult) -> bool:
    return any(realises(name, result.prototype) for name in expand(job.design.topology))


def _window(result: WindowResult, leak_reason: str, *, buildable: bool) -> Window:
    """Turn a solver's answer into what the plan shows."""
    reason = leak_reason or result.reason
    if result.feasible and not buildable:
        reason = "an even-order Chebyshev ladder does not end in equal impedances"
    narrow_hz, wide_hz = (math.sqrt(c[0] * c[1]) for c in (result.centres_min_hz, result.centres_max_hz))
    return Window(
        family=result.prototype.family,
        ripple_db=result.prototype.ripple_db,
        order=result.prototype.order,
        bandwidth_min_hz=result.bandwidth_min * narrow_hz,
        bandwidth_max_hz=result.bandwidth_max * wide_hz,
        centre_hz=wide_hz,
        feasible=result.feasible and not leak_reason,
        reason=reason,
    )


def _leak_reason(job: Job, required_db: Array, beyond: NDArray[np.bool_]) -> str:
    worst = int(np.argmax(np.where(beyond, required_db - job.leak_db, -np.inf)))
    return (
        f"the line at {job.low_hz[worst] / 1e6:.5g} MHz needs {required_db[worst]:.1f} dB, and the isolation of "
        f"{job.leak_db[worst]:.0f} dB is counted from the filter's input: a shield is needed, not a resonator"
    )


def _why(best: Built, options: Sequence[Built], order: int) -> str:
    """Say in one sentence why this filter."""
    words = f"order {order} is the least with a window; {best.topology} at {best.bandwidth:.1%}"
    other = next((b for b in options if b.strain > best.strain), None)
    if other is not None:
        words += f" strains {sum(best.strain)} parts, {other.prototype.family} {other.topology} {sum(other.strain)}"
    return words


def _why_not(job: Job, results: Sequence[WindowResult], required_db: Array, carrier_db: float) -> str:
    """Say in one sentence why there is no filter."""
    skirts = skirt_needed_db(required_db, carrier_db, job.leak_db, exponent=job.exponent)
    beyond = (required_db > 0) & ~np.isfinite(skirts)
    if beyond.any():
        return _leak_reason(job, required_db, beyond)
    feasible = [r for r in results if r.feasible]
    if feasible:
        return "windows exist, but no allowed topology gives the rejections in them as a circuit"
    reasons = [r.reason for r in results if r.reason]
    return reasons[-1] if reasons else "no order has a window"
