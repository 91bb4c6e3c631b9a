"""Low-pass ladder: the prototype at f/fc, names, refusals, a textbook example."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters.response import sweep
from harmonic_planner.filters.topologies import TopologyError, UnequalTerminationError
from harmonic_planner.filters.topologies.low_pass import TOPOLOGY, design
from harmonic_planner.physics.prototypes import Prototype


@settings(deadline=None)
@given(
    st.sampled_from(
        [Prototype("butterworth", n) for n in range(1, 10)] + [Prototype("chebyshev", n, 0.1) for n in (1, 3, 5, 9)]
    ),
    st.sampled_from(["series", "shunt"]),
    st.floats(1e6, 5e9),
    st.floats(5.0, 500.0),
)
def test_response_is_the_prototype_scaled(prototype, first, cutoff_hz, impedance_ohm):
    circuit = design(prototype, centre_hz=cutoff_hz, impedance_ohm=impedance_ohm, first=first)
    ratio = np.geomspace(0.1, 10.0, 41)
    found = sweep(circuit, cutoff_hz * ratio).attenuation_db
    assert found == pytest.approx(prototype.attenuation_db(ratio), abs=1e-8, rel=1e-9)


def test_names_and_placement():
    fifth = Prototype("butterworth", 5)
    shunt, series = (design(fifth, centre_hz=1e9, impedance_ohm=50.0, first=f) for f in ("shunt", "series"))
    assert [e.ref for e in shunt.elements] == ["C1", "L2", "C3", "L4", "C5"]
    assert [e.ref for e in series.elements] == ["L1", "C2", "L3", "C4", "L5"]
    assert [e.placement for e in series.elements] == ["series", "shunt", "series", "shunt", "series"]
    assert design(fifth, centre_hz=1e9, bandwidth=0.3, impedance_ohm=50.0) == shunt


@pytest.mark.published
def test_textbook_example_of_a_maximally_flat_low_pass():
    # published: D. M. Pozar, "Microwave Engineering", §8.4, low-pass example: maximally flat, 2 GHz, 50 ohm, N = 5:
    # C1 0.984 pF, L2 6.438 nH, C3 3.183 pF, L4 6.438 nH, C5 0.984 pF (memory). The book rounds g to 0.618 and 1.618;
    # in full C1 is 0.9836 and L2 6.4379.
    circuit = design(Prototype("butterworth", 5), centre_hz=2e9, impedance_ohm=50.0)
    expected = [0.984e-12, 6.438e-9, 3.183e-12, 6.438e-9, 0.984e-12]
    half_unit = [0.0005e-12, 0.0005e-9, 0.0005e-12, 0.0005e-9, 0.0005e-12]
    for element, value, tolerance in zip(circuit.elements, expected, half_unit, strict=True):
        assert abs(element.value - value) <= tolerance


def test_refusals():
    third = Prototype("butterworth", 3)
    with pytest.raises(TopologyError, match=r"low-pass: centre = 0.0"):
        design(third, centre_hz=0.0, impedance_ohm=50.0)
    with pytest.raises(TopologyError, match=r"low-pass: resonator = 1e-09: every value follows"):
        design(third, centre_hz=1e9, impedance_ohm=50.0, resonator=1e-9)
    with pytest.raises(UnequalTerminationError) as caught:
        design(Prototype("chebyshev", 4, 0.5), centre_hz=1e9, impedance_ohm=50.0)
    # independent: g5 = coth²(β/4) of the even Chebyshev; a shunt-first ladder of even order ends in a series element
    assert caught.value.load_ohm == pytest.approx(50 / float(Prototype("chebyshev", 4, 0.5).g_values()[-1]))


def test_topology_entry():
    assert (TOPOLOGY.name, TOPOLOGY.passes, TOPOLOGY.free) == ("low-pass", "low", None)
    assert TOPOLOGY.skew_db(3, [0.5, 2.0]).tolist() == [0.0, 0.0]
