"""Random filters for tests: every topology and kit, each specification one that can be designed."""

from __future__ import annotations

import math
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.topologies import REGISTRY, Topology, TopologyError
from harmonic_planner.parts.kits import Kit, kit_names, load_kit
from harmonic_planner.physics.prototypes import Prototype, cohn_midband_loss_db

KITS = {name: load_kit(name, Path()) for name in kit_names()}
CENTRE_HZ = (50e6, 2.5e9)
BANDWIDTH = (0.03, 0.5)
IMPEDANCE_OHM = (25.0, 50.0, 75.0, 200.0)
RIPPLE_DB = (0.01, 0.1, 0.5)
ORDERS = range(1, 10)
STRETCH = 2.0
"""How far beyond the kit's range a part may lie, as a ratio: some filters that cannot be built belong to the tests."""
MOST_LOSS_DB = 20.0
"""Midband loss by Cohn's formula with the kit's unloaded Q, beyond which nobody would call it a filter."""
TRIES = 400


def random_filter(
    rng: np.random.Generator, topology: str | None = None, *, orders: Sequence[int] = ORDERS
) -> tuple[str, Prototype, Circuit, Kit]:
    """Draw a filter: topology, family, order, centre, bandwidth, impedance, free resonator value and kit.

    Parameters
    ----------
    rng : numpy.random.Generator
        Where the draw comes from: the same state gives the same filter.
    topology : str, optional
        A name in the registry; drawn too without it.
    orders : sequence of int
        Orders to draw from.

    Returns
    -------
    tuple
        The topology's name, the prototype, the circuit with ideal values, and the kit.

    Raises
    ------
    RuntimeError
        Where none of `TRIES` draws can be designed: then the topology is at fault, not the draw.
    """
    for _ in range(TRIES):
        name = topology or str(rng.choice(sorted(REGISTRY)))
        family = "butterworth" if rng.random() < 0.5 else "chebyshev"
        prototype = Prototype(family, int(rng.choice(orders)), float(rng.choice(RIPPLE_DB)))  # type: ignore[arg-type]
        kit = KITS[str(rng.choice(sorted(KITS)))]
        centre_hz, bandwidth = log_uniform(rng, *CENTRE_HZ), log_uniform(rng, *BANDWIDTH)
        impedance_ohm = float(rng.choice(IMPEDANCE_OHM))
        loss_db = cohn_midband_loss_db(prototype, bandwidth=bandwidth, unloaded_q=kit.unloaded_q(centre_hz))
        if REGISTRY[name].passes == "band" and loss_db > MOST_LOSS_DB:
            continue
        try:
            circuit = design(REGISTRY[name], prototype, rng, centre_hz, bandwidth, impedance_ohm)
        except TopologyError:
            continue
        if near_kit(circuit, kit):
            return name, prototype, circuit, kit
    raise RuntimeError(f"{topology or 'any topology'}: nothing that can be designed in {TRIES} draws")


def near_kit(circuit: Circuit, kit: Kit) -> bool:
    """Tell whether every value is in the kit's range or not far from it."""
    ranges = {
        "L": (kit.inductor.smallest_h, kit.inductor.largest_h),
        "C": (kit.capacitor.smallest_f, kit.capacitor.largest_f),
    }
    return all(
        ranges[part.kind][0] / STRETCH < part.value < ranges[part.kind][1] * STRETCH for part in circuit.elements
    )


def design(
    topology: Topology,
    prototype: Prototype,
    rng: np.random.Generator,
    centre_hz: float,
    bandwidth: float,
    impedance_ohm: float,
) -> Circuit:
    """Design one circuit, its free resonator value anywhere in the topology's own range."""
    given = {"centre_hz": centre_hz, "bandwidth": bandwidth, "impedance_ohm": impedance_ohm}
    if topology.feasible_resonator is None:
        return topology.design(prototype, **given)
    resonator = log_uniform(rng, *topology.feasible_resonator(prototype, **given))
    return topology.design(prototype, **given, resonator=resonator)


def log_uniform(rng: np.random.Generator, low: float, high: float) -> float:
    """Draw a number whose logarithm is uniform."""
    return float(math.exp(rng.uniform(math.log(low), math.log(high))))
