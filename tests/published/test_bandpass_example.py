"""The textbook's bandpass ladder, element by element.

D. M. Pozar, "Microwave Engineering", §8.4, example of a bandpass filter: 0.5 dB equal ripple, N = 3, 1 GHz, 10 %, 50 Ω.
"""

import math

import pytest

from harmonic_planner.filters import topologies
from harmonic_planner.filters.response import sweep
from harmonic_planner.physics.prototypes import Prototype

# published: (value, half a unit in the last printed place)
PRINTED = {
    "L1": (127.0e-9, 0.05e-9),
    "C1": (0.199e-12, 0.0005e-12),
    "L2": (0.726e-9, 0.0005e-9),
    "C2": (34.91e-12, 0.005e-12),
    "L3": (127.0e-9, 0.05e-9),
    "C3": (0.199e-12, 0.0005e-12),
}


@pytest.fixture(scope="module")
def circuit():
    prototype = Prototype("chebyshev", 3, 0.5)
    return topologies.design("ladder-series", prototype, centre_hz=1e9, bandwidth=0.1, impedance_ohm=50.0)


@pytest.mark.published
def test_low_pass_prototype_of_the_example():
    # published: the book's table of g-values, 0.5 dB, N = 3
    g = Prototype("chebyshev", 3, 0.5).g_values()
    assert g[1:] == pytest.approx([1.5963, 1.0967, 1.5963, 1.0], abs=0.5e-4)


@pytest.mark.published
@pytest.mark.parametrize("ref", list(PRINTED))
def test_each_element_at_the_printed_digits(circuit, ref: str):
    value, half_unit = PRINTED[ref]
    element = next(element for element in circuit.elements if element.ref == ref)
    assert abs(element.value - value) <= half_unit


@pytest.mark.published
def test_order_and_placement_as_drawn(circuit):
    assert [(e.ref, e.placement) for e in circuit.elements] == [
        ("L1", "series"), ("C1", "series"), ("L2", "shunt"), ("C2", "shunt"), ("L3", "series"), ("C3", "series"),
    ]  # fmt: skip


@pytest.mark.published
def test_ripple_at_the_band_edges(circuit):
    # published: the ripple itself is the attenuation at the edges f0 (sqrt(1 + Δ²/4) ± Δ/2)
    edges = [1e9 * (math.sqrt(1 + 0.05**2) + sign * 0.05) for sign in (-1, 1)]
    assert sweep(circuit, edges).attenuation_db == pytest.approx([0.5, 0.5], abs=1e-9)
