"""Random filters that can be built: every topology and shipped kit, elements in range and not swamped by strays."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from built_circuits import KITS, without_losses

from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.flags import judge, worst
from harmonic_planner.filters.response import sweep
from harmonic_planner.filters.topologies import REGISTRY, TopologyError
from harmonic_planner.parts.kits import Kit
from harmonic_planner.physics.prototypes import Prototype


@dataclass(frozen=True)
class Design:
    """One filter with the band it is for: the ripple band or to 0.5 dB, or the middle 30 % of it."""

    ideal: Circuit
    kit: Kit
    prototype: Prototype
    bandwidth: float
    passband_hz: tuple[float, float]


def designs(count: int, *, seed: int, topologies: tuple[str, ...] = tuple(REGISTRY)) -> list[Design]:
    """Feasible designs, the topologies taking turns."""
    rng = np.random.default_rng(seed)
    found: list[Design] = []
    while len(found) < count:
        design = random_design(rng, topologies[len(found) % len(topologies)])
        if design is not None and worst(judge(design.ideal, design.kit)).verdict != "swamped":
            found.append(design)
    return found


def random_design(rng: np.random.Generator, name: str) -> Design | None:
    """Any design of a topology, None where there is none."""
    topology, kit = REGISTRY[name], KITS[str(rng.choice(sorted(KITS)))]
    centre_hz, bandwidth = float(10 ** rng.uniform(7.5, 9.4)), float(10 ** rng.uniform(-1.4, -0.45))
    family = "butterworth" if rng.random() < 0.4 else "chebyshev"
    prototype = Prototype(family, int(rng.integers(2, 8)), float(rng.choice([0.01, 0.05, 0.1, 0.2])))  # type: ignore[arg-type]
    share = float(rng.choice([1.0, 0.3]))
    place = rng.uniform(0.05, 0.95)
    request = {"centre_hz": centre_hz, "bandwidth": bandwidth, "impedance_ohm": 50.0}
    try:
        resonator = None
        if topology.feasible_resonator is not None:
            low, high = topology.feasible_resonator(prototype, **request)
            resonator = float(low * (high / low) ** place)
        ideal = topology.design(prototype, **request, resonator=resonator)
    except TopologyError:
        return None
    edge = 1.0 if family == "chebyshev" else float(prototype.inverse(0.5))
    half = math.asinh(edge * share * bandwidth / 2)
    passband_hz = {
        "band": (centre_hz * math.exp(-half), centre_hz * math.exp(half)),
        "low": (0.5 * centre_hz, centre_hz * (1.0 if family == "chebyshev" else 0.7)),
        "high": (centre_hz / (1.0 if family == "chebyshev" else 0.7), 2.0 * centre_hz),
    }[topology.passes]
    return Design(ideal, kit, prototype, bandwidth, passband_hz)


def lossless_return_loss_db(circuit: Circuit, kit: Kit | None, passband_hz: tuple[float, float]) -> float:
    """Least return loss over a band by the scalar recursion; ideal parts without a kit."""
    frequency = np.geomspace(*passband_hz, 61)
    if kit is None:
        return float(sweep(circuit, frequency).return_loss_db.min())
    return float(sweep_built(circuit, frequency, kit=without_losses(kit)).return_loss_db.min())


def band_centre_hz(circuit: Circuit, kit: Kit | None, passband_hz: tuple[float, float]) -> float:
    """Geometric mean of the 6 dB points nearest to the best point of a band, from a dense sweep."""
    low, high = passband_hz
    inside = np.geomspace(low, high, 61)

    def attenuation_db(frequency):
        if kit is None:
            return sweep(circuit, frequency).attenuation_db
        return sweep_built(circuit, frequency, kit=without_losses(kit)).attenuation_db

    at = attenuation_db(inside)
    best_hz, limit = inside[at.argmin()], at.min() + 6.0
    edges = []
    for farthest in (low / 3.5, high * 3.5):
        frequency = np.geomspace(best_hz, farthest, 6001)
        curve = attenuation_db(frequency)
        over = np.flatnonzero(curve > limit)
        if over.size and not max(frequency[over[0]] / high, low / frequency[over[0]]) > 3.0:
            i = over[0]
            part = (limit - curve[i - 1]) / (curve[i] - curve[i - 1])
            edges.append(frequency[i - 1] * (frequency[i] / frequency[i - 1]) ** part)
    return float(np.prod(edges) ** (1 / len(edges)))
