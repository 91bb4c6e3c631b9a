"""The forms a stage's filter may take: topology × kit × free resonator value, within what the user fixed."""

from __future__ import annotations

from collections.abc import Iterator
from functools import cache

import numpy as np

from harmonic_planner.filters.topologies import REGISTRY, TopologyError, design, expand
from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.parts.kits import Kit
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.built import Form
from harmonic_planner.planning.jobs import Job

_RESONATORS = 3
_LEAST_OVER_STRAY = 4.0
_RESONANCE_ROOM = 3.0


def allowed_topologies(job: Job) -> tuple[Topology, ...]:
    """Return the bandpass topologies the user allows at this stage."""
    return tuple(t for name in expand(job.design.topology) if (t := REGISTRY[name]).passes == "band")


@cache
def realises(topology: str, prototype: Prototype) -> bool:
    """Tell whether a topology can realise a prototype between equal impedances, at some band."""
    try:
        design(topology, prototype, centre_hz=1e9, bandwidth=0.1, impedance_ohm=50.0)
    except TopologyError:
        return False
    return True


def forms(job: Job, topology: Topology, prototype: Prototype, *, centre_hz: float, bandwidth: float) -> Iterator[Form]:
    """Yield the forms of one topology: every kit, and resonator values that the kit has and strays leave alone.

    Parameters
    ----------
    job : Job
    topology : Topology
    prototype : Prototype
    centre_hz, bandwidth : float
        Where the filter is about to be designed.
    """
    for kit in job.kits:
        if topology.free is None:
            yield Form(topology.name, kit, job.design.impedance_ohm)
            continue
        fixed = job.design.resonator_h if topology.free == "L" else job.design.resonator_f
        values = [fixed] if fixed is not None else _values(job, topology, kit, prototype, centre_hz, bandwidth)
        for value in values:
            yield Form(topology.name, kit, job.design.impedance_ohm, value)


def _values(
    job: Job, topology: Topology, kit: Kit, prototype: Prototype, centre_hz: float, bandwidth: float
) -> list[float]:
    """Return resonator values between where strays matter and where the part resonates by itself, on the kit's grid."""
    if topology.feasible_resonator is None:
        return []
    try:
        low, high = topology.feasible_resonator(
            prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=job.design.impedance_ohm
        )
    except TopologyError:
        return []
    low, high = _usable(topology, kit, centre_hz, low, high)
    if not low < high:
        return []
    asked = np.geomspace(low, high, _RESONATORS + 2)[1:-1]
    if topology.free == "C" and kit.capacitor.continuous:
        return [float(v) for v in asked]
    grid = np.array(kit.inductor.values_h() if topology.free == "L" else kit.capacitor.values_f())
    return sorted({float(grid[np.argmin(np.abs(np.log(grid / v)))]) for v in asked})


def _usable(topology: Topology, kit: Kit, centre_hz: float, low: float, high: float) -> tuple[float, float]:
    """Narrow a range of resonator values to the kit's, to clear of strays, and to below self-resonance."""
    if topology.free == "L":
        strays = kit.inductor.mounting_h + kit.board.via_h
        values = np.array([v for v in kit.inductor.values_h() if v >= _LEAST_OVER_STRAY * strays])
        resonance = np.array([kit.inductor.self_resonance_hz(float(v)) for v in values])
        clear = values[resonance >= _RESONANCE_ROOM * centre_hz / 2]
        if clear.size == 0:
            return low, low
        return max(low, float(clear.min())), min(high, float(clear.max()))
    least = max(kit.capacitor.smallest_f, _LEAST_OVER_STRAY * kit.board.pad_f)
    most = min(kit.capacitor.largest_f, (1 / (2 * np.pi * centre_hz)) ** 2 / max(kit.inductor.smallest_h, 1e-12))
    return max(low, least), min(high, most)
