"""Series resonators coupled by shunt capacitors, their inductance free.

Source, C01 to ground, L1 and C1 in series, C12 to ground, L2 and C2 in series, …, load. All inductors are alike. It is
the dual of the inductive form: every series inductance L turns into a shunt capacitance L/Z0², every shunt resonator
into a series one. `design` meets the prototype's band at any width (`tuning`); `textbook` is the narrow-band form.

References
----------
.. [1] S. B. Cohn, "Direct-coupled-resonator filters", Proc. IRE 45, 1957, pp. 187-196.
.. [2] G. L. Matthaei, L. Young, E. M. T. Jones, "Microwave Filters, Impedance-Matching Networks, and Coupling
   Structures", 1964, §8.02 (duals; K-inverters, fig. 8.03-1) and §8.11.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.circuit import GROUND, INPUT, OUTPUT, Circuit, Element
from harmonic_planner.filters.topologies.base import Topology
from harmonic_planner.filters.topologies.coupled import Form, Method, feasible, solve
from harmonic_planner.physics.prototypes import Prototype

NAME = "series-capacitive"


def _slope(inductance_h: float, omega: float, impedance_ohm: float) -> float:
    """Return the reactance slope parameter over the ports' resistance, ω0·L/Z0; it is b of the dual."""
    return omega * inductance_h / impedance_ohm


def _inductance(slope: float, omega: float, impedance_ohm: float) -> float:
    """Return L [H] of a slope parameter."""
    return slope * impedance_ohm / omega


FORM = Form(
    name=NAME,
    coupling="C",
    part="C",
    free="L",
    wire="zero",
    slope=_slope,
    resonator=_inductance,
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
    Exact at the centre; off it as `capacitive.textbook`, at f0²/f.
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
        +20(n+1) log10(f/f0) [dB]: less below the centre, more above.

    Notes
    -----
    Each of the n + 1 shunt capacitors is an inverter whose K falls with frequency; as near as `inductive.skew_db`.
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
    unit_f = 1.0 / (omega * impedance_ohm)
    inductance_h = _inductance(network.slope, omega, impedance_ohm)
    order, node = prototype.order, INPUT
    elements = [Element(FORM.coupling_ref(0, order), "C", (INPUT, GROUND), unit_f / network.couplings[0])]
    for number, series in enumerate(network.shunts, start=1):
        inner, after = f"n{number}", OUTPUT if number == order else f"a{number}"
        coupling = unit_f / network.couplings[number]
        elements.append(Element(f"L{number}", "L", (node, inner), inductance_h))
        elements.append(Element(f"C{number}", "C", (inner, after), unit_f / series))
        elements.append(Element(FORM.coupling_ref(number, order), "C", (after, GROUND), coupling))
        node = after
    return Circuit(NAME, tuple(elements), centre_hz=centre_hz, source_ohm=impedance_ohm, load_ohm=impedance_ohm)


TOPOLOGY = Topology(
    name=NAME,
    title="series resonators, coupled by shunt capacitors",
    source="Cohn, Proc. IRE 45, 1957; Matthaei, Young & Jones 1964, §8.11",
    design=design,
    free="L",
    skew_db=skew_db,
    feasible_resonator=feasible_resonator,
)
