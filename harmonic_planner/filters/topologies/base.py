"""What a topology is to the registry."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.model import PlannerError
from harmonic_planner.physics.prototypes import Prototype


class TopologyError(PlannerError):
    """A prototype that a topology cannot realise; the message says why and what would help."""


class UnequalTerminationError(TopologyError):
    """The prototype ends in another impedance than it starts from; `load_ohm` is the load it needs."""

    def __init__(self, message: str, load_ohm: float) -> None:
        super().__init__(message)
        self.load_ohm = load_ohm


class Synthesis(Protocol):
    """Ideal element values of one topology, from a prototype."""

    def __call__(self, prototype: Prototype, *, centre_hz: float, bandwidth: float, impedance_ohm: float) -> Circuit:
        """Return the circuit; bandwidth as a fraction of the centre."""


@dataclass(frozen=True)
class Topology:
    """One way to build a filter."""

    name: str
    title: str
    """What a person reads."""
    source: str
    """The published source of its design equations."""
    design: Synthesis
