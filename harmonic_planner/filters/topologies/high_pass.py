"""High-pass ladder, for lines on one side only; design equations in `one_sided`.

Series first, C1 L2 C3 …, is the default: fewer inductors at odd orders (memory).
"""

from __future__ import annotations

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.filters.topologies.one_sided import one_sided_ladder
from harmonic_planner.model import Placement
from harmonic_planner.physics.prototypes import Prototype

NAME = "high-pass"


def design(
    prototype: Prototype,
    *,
    centre_hz: float,
    bandwidth: float = 1.0,
    impedance_ohm: float,
    resonator: float | None = None,
    first: Placement = "series",
) -> Circuit:
    """Design the ladder.

    Parameters
    ----------
    prototype : Prototype
        Low-pass prototype.
    centre_hz : float
        The cut-off [Hz]: 3 dB down for Butterworth, end of the ripple for Chebyshev. A high-pass has no centre.
    bandwidth : float
        Not looked at; there so that every topology is called alike.
    impedance_ohm : float
        Source and load [ohm].
    resonator : float, optional
        Refused: every value follows from the prototype.
    first : {"shunt", "series"}
        The element next to the source.

    Returns
    -------
    Circuit
        C1, L2, C3, … or L1, C2, L3, … from source to load.

    Raises
    ------
    UnequalTerminationError
        For a Chebyshev of even order.
    TopologyError
        For a cut-off or impedance that is not above zero, and for a resonator value.
    """
    del bandwidth
    return one_sided_ladder(
        NAME,
        prototype,
        passes="high",
        first=first,
        cutoff_hz=centre_hz,
        impedance_ohm=impedance_ohm,
        resonator=resonator,
    )


TOPOLOGY = Topology(
    name=NAME,
    title="high-pass ladder",
    source="Matthaei, Young & Jones 1964, §4.05 and §7.07; Pozar, Microwave Engineering, §8.4",
    design=design,
    passes="high",
)
