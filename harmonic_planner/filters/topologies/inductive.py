"""Shunt resonators coupled by series inductors, their capacitance free.

Source, L01, L1 ∥ C1 to ground, L12, L2 ∥ C2 to ground, …, load. All capacitors are alike. It is the capacitive form at
f0²/f: there every capacitor turns into an inductor of the same susceptance at f0, with the sign changed, and the other
way round. `design` meets the prototype's band at any width (`tuning`); `textbook` is the narrow-band form.

References
----------
.. [1] S. B. Cohn, "Direct-coupled-resonator filters", Proc. IRE 45, 1957, pp. 187-196.
.. [2] G. L. Matthaei, L. Young, E. M. T. Jones, "Microwave Filters, Impedance-Matching Networks, and Coupling
   Structures", 1964, §8.11 (fig. 8.11-1 for capacitors; inductive inverters, fig. 8.03-1).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.circuit import GROUND, INPUT, OUTPUT, Circuit, Element
from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.filters.topologies.coupled import Form, Method, feasible, solve
from harmonic_planner.physics.prototypes import Prototype

NAME = "inductive"


def _slope(capacitance_f: float, omega: float, impedance_ohm: float) -> float:
    """Return b = ω0·C·Z0."""
    return omega * capacitance_f * impedance_ohm


def _capacitance(slope: float, omega: float, impedance_ohm: float) -> float:
    """Return C [F] of a b."""
    return slope / (omega * impedance_ohm)


FORM = Form(
    name=NAME,
    coupling="L",
    part="L",
    free="C",
    wire="zero",
    slope=_slope,
    resonator=_capacitance,
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
        Capacitance of every resonator [F]; without it the geometric middle of the possible ones.

    Returns
    -------
    Circuit
        L01, L1, C1, L12, L2, C2, … from source to load.

    Raises
    ------
    TopologyError
        Where a value would have to be infinite or negative, saying which, and which capacitance would work.
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
    Exact at the centre; off it as `capacitive.textbook`, at f0²/f.
    """
    return _circuit(prototype, centre_hz, bandwidth, impedance_ohm, resonator, "textbook")


def feasible_resonator(
    prototype: Prototype, *, centre_hz: float, bandwidth: float, impedance_ohm: float
) -> tuple[float, float]:
    """Return the least and largest capacitance [F] to design with; parameters and errors as for `coupled.feasible`."""
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
        +20(n+1) log10(f/f0) [dB]: less below the centre, more above.

    Notes
    -----
    Each of the n + 1 series inductors is an inverter whose J falls with frequency. For Δ up to 10 %, 0.5-1.5 f0 and
    where the prototype has 20 dB or more, the circuit is within 2.3 dB of the rule for orders 1 and 3-6 with the middle
    capacitance; 2.9 dB at order 2, and 2.7, 3.1 and 3.5 dB at orders 7, 8 and 9. Towards the largest capacitance a
    reflection zero comes near and the rule fails by more.
    """
    return 20.0 * (order + 1) * np.log10(np.asarray(ratio, dtype=np.float64))


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
    omega = 2.0 * math.pi * centre_hz
    unit_h = impedance_ohm / omega
    capacitance_f = _capacitance(network.slope, omega, impedance_ohm)
    order, node = prototype.order, INPUT
    elements: list[Element] = []
    for number, shunt in enumerate(network.shunts, start=1):
        here = f"r{number}"
        coupling = unit_h / network.couplings[number - 1]
        elements.append(Element(FORM.coupling_ref(number - 1, order), "L", (node, here), coupling))
        elements.append(Element(f"L{number}", "L", (here, GROUND), unit_h / shunt))
        elements.append(Element(f"C{number}", "C", (here, GROUND), capacitance_f))
        node = here
    elements.append(Element(FORM.coupling_ref(order, order), "L", (node, OUTPUT), unit_h / network.couplings[-1]))
    return Circuit(NAME, tuple(elements), centre_hz=centre_hz, source_ohm=impedance_ohm, load_ohm=impedance_ohm)


TOPOLOGY = Topology(
    name=NAME,
    title="shunt resonators, coupled by inductors",
    source="Cohn, Proc. IRE 45, 1957; Matthaei, Young & Jones 1964, §8.11",
    design=design,
    free="C",
    skew_db=skew_db,
    feasible_resonator=feasible_resonator,
)
