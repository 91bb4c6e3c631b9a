"""Bandpass ladder from g-values, shared by its two orientations: series arms of series L–C, shunt arms of parallel L–C.

References
----------
.. [1] G. L. Matthaei, L. Young, E. M. T. Jones, "Microwave Filters, Impedance-Matching Networks, and Coupling
   Structures", 1964, §4.04 (meaning of g_(n+1)) and §8.02 (bandpass mapping).
.. [2] D. M. Pozar, "Microwave Engineering", §8.4 (bandpass transformation, table of resonator elements).
"""

from __future__ import annotations

import math

from harmonic_planner.filters.circuit import GROUND, INPUT, OUTPUT, Circuit, Element
from harmonic_planner.filters.topologies.base import TopologyError, UnequalTerminationError
from harmonic_planner.model import Placement
from harmonic_planner.physics.prototypes import Prototype

EQUAL_TERMINATION = 1e-6
"""Largest relative difference of load and source that still counts as equal."""


def ladder(
    name: str,
    prototype: Prototype,
    *,
    first: Placement,
    centre_hz: float,
    bandwidth: float,
    impedance_ohm: float,
) -> Circuit:
    """Design a bandpass ladder with ideal elements.

    Parameters
    ----------
    name : str
        The topology's name.
    prototype : Prototype
        Low-pass prototype, g-values normalised to a source of 1 and Ω = 1 at the band edge.
    first : {"series", "shunt"}
        The arm next to the source.
    centre_hz : float
        Geometric centre of the band edges [Hz].
    bandwidth : float
        Bandwidth as a fraction of the centre.
    impedance_ohm : float
        Source and load [ohm].

    Returns
    -------
    Circuit
        L1, C1, L2, C2, … from source to load; both parts of a resonator carry its number.

    Raises
    ------
    UnequalTerminationError
        For a prototype that ends in another impedance (Chebyshev of even order).
    TopologyError
        For a centre, bandwidth or impedance that is not above zero.

    Notes
    -----
    With Ω = (f/f0 − f0/f)/Δ a series g becomes L = g Z0/(Δ ω0) in series with C = Δ/(ω0 g Z0); a shunt g becomes
    C = g/(Δ ω0 Z0) in parallel with L = Δ Z0/(ω0 g). g_(n+1) is the load's resistance behind a shunt arm and its
    conductance behind a series arm.
    """
    for key, value in (("centre", centre_hz), ("bandwidth", bandwidth), ("impedance", impedance_ohm)):
        if not 0 < value < math.inf:
            raise TopologyError(f"{name}: {key} = {value!r} must be a finite number above zero")
    g = [float(value) for value in prototype.g_values()]
    order = len(g) - 2
    placements: list[Placement] = [first if i % 2 == 0 else _other(first) for i in range(order)]
    load_ohm = impedance_ohm * (g[-1] if placements[-1] == "shunt" else 1 / g[-1])
    if abs(load_ohm / impedance_ohm - 1) > EQUAL_TERMINATION:
        raise UnequalTerminationError(
            f"{name}: a {prototype.family} of even order {order} does not end in equal impedances; it needs a load of "
            f"{load_ohm:.4g} ohm behind a source of {impedance_ohm:.4g} ohm; use an odd order",
            load_ohm,
        )
    omega = 2 * math.pi * centre_hz
    elements: list[Element] = []
    node = INPUT
    for i, placement in enumerate(placements):
        number = i + 1
        if placement == "shunt":
            susceptance = g[number] / (bandwidth * impedance_ohm)
            elements.append(Element(f"L{number}", "L", (node, GROUND), 1 / (omega * susceptance)))
            elements.append(Element(f"C{number}", "C", (node, GROUND), susceptance / omega))
        else:
            reactance = g[number] * impedance_ohm / bandwidth
            inner, after = f"n{number}", OUTPUT if i >= order - 2 else f"a{number}"
            elements.append(Element(f"L{number}", "L", (node, inner), reactance / omega))
            elements.append(Element(f"C{number}", "C", (inner, after), 1 / (omega * reactance)))
            node = after
    return Circuit(
        name, tuple(elements), centre_hz=centre_hz, source_ohm=impedance_ohm, load_ohm=impedance_ohm, output=node
    )


def _other(placement: Placement) -> Placement:
    return "series" if placement == "shunt" else "shunt"
