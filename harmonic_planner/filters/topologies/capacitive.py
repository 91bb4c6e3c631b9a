"""Shunt resonators coupled by series capacitors, their inductance free.

Source, C01, L1 ∥ C1 to ground, C12, L2 ∥ C2 to ground, …, load. All inductors are alike. `design` meets the prototype's
band at any width (`tuning`); `textbook` is the narrow-band form as printed.

References
----------
.. [1] S. B. Cohn, "Direct-coupled-resonator filters", Proc. IRE 45, 1957, pp. 187-196.
.. [2] G. L. Matthaei, L. Young, E. M. T. Jones, "Microwave Filters, Impedance-Matching Networks, and Coupling
   Structures", 1964, §8.11, fig. 8.11-1.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.circuit import GROUND, INPUT, OUTPUT, Circuit, Element
from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.filters.topologies.coupled import Form, Method, feasible, solve
from harmonic_planner.physics.prototypes import Prototype

NAME = "capacitive"


def _exchange(value: float, omega: float, impedance_ohm: float) -> float:
    """Return b of an inductance [H], or the inductance of a b: L = Z0/(ω0·b)."""
    return impedance_ohm / (omega * value)


FORM = Form(
    name=NAME,
    coupling="C",
    part="C",
    free="L",
    wire="infinite",
    slope=_exchange,
    resonator=_exchange,
)


def design(
    prototype: Prototype,
    *,
    centre_hz: float,
    bandwidth: float,
    impedance_ohm: float,
    resonator: float | None = None,
) -> Circuit:
    """Design the filter so that it meets the prototype's band edges and return loss at any bandwidth.

    Parameters
    ----------
    prototype : Prototype
        Low-pass prototype; a Chebyshev of even order too.
    centre_hz : float
        Geometric centre of the band edges [Hz].
    bandwidth : float
        Δ, 3 dB or ripple bandwidth over the centre.
    impedance_ohm : float
        Source and load [ohm].
    resonator : float, optional
        Inductance of every resonator [H]; without it the geometric middle of the possible ones.

    Returns
    -------
    Circuit
        C01, L1, C1, C12, L2, C2, … from source to load.

    Raises
    ------
    TopologyError
        Where a value would have to be infinite or negative, saying which, and which inductance would work.
    """
    return _circuit(prototype, centre_hz, bandwidth, impedance_ohm, resonator, "tuned")


def textbook(
    prototype: Prototype,
    *,
    centre_hz: float,
    bandwidth: float,
    impedance_ohm: float,
    resonator: float | None = None,
) -> Circuit:
    """Design the filter by the narrow-band equations; parameters, result and errors as for `design`.

    Notes
    -----
    Exact at the centre; off it band edges and return loss are off by an amount that grows with Δ and with the order.
    Worst return loss in the band of a 0.1 dB Chebyshev, 16.4 dB as it should be, with the geometric-middle inductance,
    in dB (regression, unconfirmed; `design` has 16.43 in every cell):

    =====  =======  =====  =====  =====  =====
    order  Δ = 2 %    5 %   10 %   20 %   30 %
    =====  =======  =====  =====  =====  =====
    3         16.2   15.8   15.0   13.0   10.7
    5         14.8   12.5    9.5    5.2    2.7
    7         12.9    9.1    4.9    1.3    0.4
    9         11.0    6.0    2.0    0.2    0.0
    =====  =======  =====  =====  =====  =====
    """
    return _circuit(prototype, centre_hz, bandwidth, impedance_ohm, resonator, "textbook")


def feasible_resonator(
    prototype: Prototype, *, centre_hz: float, bandwidth: float, impedance_ohm: float
) -> tuple[float, float]:
    """Return the least and largest inductance [H] to design with; parameters and errors as for `coupled.feasible`."""
    return feasible(FORM, prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=impedance_ohm)


def skew_db(order: int, ratio: ArrayLike) -> NDArray[np.float64]:
    """Return by how much attenuation exceeds the prototype's, as a rule.

    Parameters
    ----------
    order : int
        Number of resonators n.
    ratio : array_like
        f/f0, any shape.

    Returns
    -------
    float array
        −20(n+1) log10(f/f0) [dB]: more below the centre, less above.

    Notes
    -----
    Each of the n + 1 series capacitors is an inverter whose J runs with frequency. For Δ up to 10 %, 0.5-1.5 f0 and
    where the prototype has 20 dB or more, the circuit is within 2.3 dB of the rule for orders 1-6 with the middle
    inductance or a smaller one; within 2.7, 3.1 and 3.5 dB at orders 7, 8 and 9. Towards the largest inductance a
    reflection zero comes near and the rule fails by more.
    """
    return -20.0 * (order + 1) * np.log10(np.asarray(ratio, dtype=np.float64))


def _circuit(
    prototype: Prototype,
    centre_hz: float,
    bandwidth: float,
    impedance_ohm: float,
    resonator: float | None,
    method: Method,
) -> Circuit:
    network = solve(
        FORM,
        prototype,
        centre_hz=centre_hz,
        bandwidth=bandwidth,
        impedance_ohm=impedance_ohm,
        resonator=resonator,
        method=method,
    )
    unit_f = 1.0 / (2.0 * math.pi * centre_hz * impedance_ohm)
    inductance_h = _exchange(network.slope, 2.0 * math.pi * centre_hz, impedance_ohm)
    order, node = prototype.order, INPUT
    elements: list[Element] = []
    for number, shunt in enumerate(network.shunts, start=1):
        here = f"r{number}"
        coupling = network.couplings[number - 1] * unit_f
        elements.append(Element(FORM.coupling_ref(number - 1, order), "C", (node, here), coupling))
        elements.append(Element(f"L{number}", "L", (here, GROUND), inductance_h))
        elements.append(Element(f"C{number}", "C", (here, GROUND), shunt * unit_f))
        node = here
    elements.append(Element(FORM.coupling_ref(order, order), "C", (node, OUTPUT), network.couplings[-1] * unit_f))
    return Circuit(NAME, tuple(elements), centre_hz=centre_hz, source_ohm=impedance_ohm, load_ohm=impedance_ohm)


TOPOLOGY = Topology(
    name=NAME,
    title="shunt resonators, coupled by capacitors",
    source="Cohn, Proc. IRE 45, 1957; Matthaei, Young & Jones 1964, §8.11",
    design=design,
    free="L",
    skew_db=skew_db,
    feasible_resonator=feasible_resonator,
)
