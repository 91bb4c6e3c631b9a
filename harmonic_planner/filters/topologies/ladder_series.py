"""Bandpass ladder whose first arm from the source is a series resonator; design equations in `ladder`."""

from __future__ import annotations

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.topologies.base import Topology, refuse_resonator
from harmonic_planner.filters.topologies.ladder import ladder
from harmonic_planner.physics.prototypes import Prototype

NAME = "ladder-series"


def design(
    prototype: Prototype,
    *,
    centre_hz: float,
    bandwidth: float,
    impedance_ohm: float,
    resonator: float | None = None,
) -> Circuit:
    """Design the ladder; parameters, result and errors as for `ladder.ladder`; a resonator value is refused."""
    refuse_resonator(NAME, resonator)
    return ladder(
        NAME, prototype, first="series", centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=impedance_ohm
    )


TOPOLOGY = Topology(
    name=NAME,
    title="ladder, series resonator first",
    source="Matthaei, Young & Jones 1964, §4.05 and §8.02; Pozar, Microwave Engineering, §8.4",
    design=design,
)
