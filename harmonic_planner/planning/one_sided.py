"""Low-pass and high-pass filters for a stage that needs cleaning on one side only.

A low-pass counts one resonator for every pair of its parts: with an odd part left over it has no more parts than a
bandpass of so many resonators and its couplings. Its cut-off lies between the lowest that passes the carrier, over
span and drift, and the highest that rejects every line; the highest loses least and has the milder values.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from harmonic_planner.filters.topologies import REGISTRY, expand
from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.built import Built, Form, meets, sketch
from harmonic_planner.planning.forms import realises
from harmonic_planner.planning.jobs import Array, Job

_CUT_OFFS = 13


def one_sided_topologies(job: Job) -> tuple[Topology, ...]:
    """Return the low-pass and high-pass topologies the user allows at this stage."""
    return tuple(t for name in expand(job.design.topology) if (t := REGISTRY[name]).passes != "band")


def able_one_sided(job: Job, resonators: int) -> Iterator[tuple[Prototype, Topology]]:
    """Yield the prototypes that count as so many resonators, with the topologies that realise them."""
    for topology in one_sided_topologies(job):
        for family in job.design.families:
            for elements in (1, 2, 3) if resonators == 1 else (2 * resonators, 2 * resonators + 1):
                if elements <= job.design.max_order:
                    prototype = Prototype(family, elements, job.design.ripple_db)
                    if realises(topology.name, prototype):
                        yield prototype, topology


def nearest_cut_off_hz(job: Job, prototype: Prototype, topology: Topology) -> float:
    """Return the cut-off nearest the carrier that keeps its flatness over span and drift, losses left out [Hz]."""
    edge = float(prototype.inverse(job.design.flatness_db))
    if topology.passes == "low":
        return job.carrier_hz[1] / (1 - job.design.drift) / edge
    return job.carrier_hz[0] / (1 + job.design.drift) * edge


def omega(topology: Topology, frequency_hz: Array, cut_off_hz: float) -> Array:
    """Return the prototype's frequency at each frequency."""
    ratio = frequency_hz / cut_off_hz
    return ratio if topology.passes == "low" else 1 / ratio


def one_sided_drawings(job: Job, resonators: int, required_db: Array) -> Iterator[Built]:
    """Yield, for every prototype and kit, the filter with the farthest cut-off that gives every rejection."""
    needing = required_db > 0
    if not needing.any():
        return
    for prototype, topology in able_one_sided(job, resonators):
        low = topology.passes == "low"
        if low and float(job.low_hz[needing].min()) < job.carrier_hz[1]:
            continue
        if not low and float(job.high_hz[needing].max()) > job.carrier_hz[0]:
            continue
        near = nearest_cut_off_hz(job, prototype, topology)
        far = float(job.low_hz[needing].min() if low else job.high_hz[needing].max())
        if (far <= near) if low else (far >= near):
            continue
        for kit in job.kits:
            form = Form(topology.name, kit, job.design.impedance_ohm)
            for cut_off_hz in np.geomspace(far, near, _CUT_OFFS):
                drawn = sketch(
                    job, prototype, form, centre_hz=float(cut_off_hz), bandwidth=1.0, required_db=required_db
                )
                if drawn is not None and meets(job, drawn):
                    yield drawn
                    break
