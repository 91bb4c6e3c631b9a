"""Low-pass and high-pass ladders from g-values, shared by both.

References
----------
.. [1] G. L. Matthaei, L. Young, E. M. T. Jones, "Microwave Filters, Impedance-Matching Networks, and Coupling
   Structures", 1964, §4.04 and §4.05 (g-values), §7.07 (high-pass from low-pass).
.. [2] D. M. Pozar, "Microwave Engineering", §8.4 (impedance and frequency scaling).
"""

from __future__ import annotations

import math
from typing import Literal

from harmonic_planner.filters.circuit import GROUND, INPUT, OUTPUT, Circuit, Element
from harmonic_planner.filters.topologies.base import (
    UnequalTerminationError,
    check_specification,
    refuse_resonator,
)
from harmonic_planner.filters.topologies.ladder import EQUAL_TERMINATION
from harmonic_planner.model import Kind, Placement
from harmonic_planner.physics.prototypes import Prototype


def one_sided_ladder(
    name: str,
    prototype: Prototype,
    *,
    passes: Literal["low", "high"],
    first: Placement,
    cutoff_hz: float,
    impedance_ohm: float,
    resonator: float | None,
) -> Circuit:
    """Design a low-pass or high-pass ladder with ideal elements.

    Parameters
    ----------
    name : str
        The topology's name.
    prototype : Prototype
        Low-pass prototype.
    passes : {"low", "high"}
        Side that is passed.
    first : {"series", "shunt"}
        The element next to the source.
    cutoff_hz : float
        Where a Butterworth is 3 dB down and a Chebyshev ends its ripple [Hz].
    impedance_ohm : float
        Source and load [ohm].
    resonator : float or None
        Refused unless None.

    Returns
    -------
    Circuit
        One element per order, numbered from the source; `centre_hz` is the cut-off.

    Raises
    ------
    UnequalTerminationError
        For a prototype that ends in another impedance (Chebyshev of even order).
    TopologyError
        For a cut-off or impedance that is not above zero, and for a resonator value.

    Notes
    -----
    Low-pass: a series g becomes L = g·Z0/ωc, a shunt one C = g/(ωc·Z0). High-pass, Ω = −ωc/ω: a series g becomes
    C = 1/(ωc·g·Z0), a shunt one L = Z0/(ωc·g). The attenuation is the prototype's at f/fc, or at fc/f, exactly.
    """
    check_specification(name, centre=cutoff_hz, impedance=impedance_ohm)
    refuse_resonator(name, resonator)
    g = [float(value) for value in prototype.g_values()]
    order = prototype.order
    second: Placement = "shunt" if first == "series" else "series"
    placements = [first if i % 2 == 0 else second for i in range(order)]
    load_ohm = impedance_ohm * (g[-1] if placements[-1] == "shunt" else 1 / g[-1])
    if abs(load_ohm / impedance_ohm - 1) > EQUAL_TERMINATION:
        raise UnequalTerminationError(
            f"{name}: a {prototype.family} of even order {order} does not end in equal impedances; it needs a load of "
            f"{load_ohm:.4g} ohm behind a source of {impedance_ohm:.4g} ohm; use an odd order",
            load_ohm,
        )
    omega = 2 * math.pi * cutoff_hz
    series_kind: Kind = "L" if passes == "low" else "C"
    shunt_kind: Kind = "C" if passes == "low" else "L"
    elements: list[Element] = []
    node = INPUT
    for i, placement in enumerate(placements):
        number, last_series = i + 1, i >= order - 2
        normal = g[number] * (impedance_ohm if placement == "series" else 1 / impedance_ohm)
        value = normal / omega if passes == "low" else 1 / (omega * normal)
        if placement == "shunt":
            elements.append(Element(f"{shunt_kind}{number}", shunt_kind, (node, GROUND), value))
        else:
            after = OUTPUT if last_series else f"a{number}"
            elements.append(Element(f"{series_kind}{number}", series_kind, (node, after), value))
            node = after
    return Circuit(
        name, tuple(elements), centre_hz=cutoff_hz, source_ohm=impedance_ohm, load_ohm=impedance_ohm, output=node
    )
