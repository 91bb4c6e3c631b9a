"""High-pass ladder: the prototype at fc/f, names, refusals, mirror of the low-pass."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters.response import sweep
from harmonic_planner.filters.topologies import TopologyError, UnequalTerminationError, low_pass
from harmonic_planner.filters.topologies.high_pass import TOPOLOGY, design
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
def test_response_is_the_prototype_at_the_reciprocal(prototype, first, cutoff_hz, impedance_ohm):
    circuit = design(prototype, centre_hz=cutoff_hz, impedance_ohm=impedance_ohm, first=first)
    ratio = np.geomspace(0.1, 10.0, 41)
    found = sweep(circuit, cutoff_hz * ratio).attenuation_db
    assert found == pytest.approx(prototype.attenuation_db(1 / ratio), abs=1e-8, rel=1e-9)


def test_names_and_placement():
    fifth = Prototype("butterworth", 5)
    shunt, series = (design(fifth, centre_hz=1e9, impedance_ohm=50.0, first=f) for f in ("shunt", "series"))
    assert [e.ref for e in series.elements] == ["C1", "L2", "C3", "L4", "C5"]
    assert [e.ref for e in shunt.elements] == ["L1", "C2", "L3", "C4", "L5"]
    assert design(fifth, centre_hz=1e9, bandwidth=0.3, impedance_ohm=50.0) == series


def test_each_element_resonates_at_the_cutoff_with_its_low_pass_counterpart():
    # independent: low-pass to high-pass replaces every L by C = 1/(ωc²·L) and every C by L = 1/(ωc²·C)
    prototype = Prototype("chebyshev", 5, 0.2)
    high = design(prototype, centre_hz=700e6, impedance_ohm=50.0, first="series")
    low = low_pass.design(prototype, centre_hz=700e6, impedance_ohm=50.0, first="series")
    for one, two in zip(high.elements, low.elements, strict=True):
        assert {one.kind, two.kind} == {"L", "C"}
        assert one.nodes == two.nodes
        assert 1 / (2 * math.pi * math.sqrt(one.value * two.value)) == pytest.approx(700e6, rel=1e-12)


def test_refusals():
    with pytest.raises(TopologyError, match=r"high-pass: impedance = nan"):
        design(Prototype("butterworth", 3), centre_hz=1e9, impedance_ohm=math.nan)
    with pytest.raises(TopologyError, match=r"high-pass: resonator"):
        design(Prototype("butterworth", 3), centre_hz=1e9, impedance_ohm=50.0, resonator=1e-9)
    with pytest.raises(UnequalTerminationError, match="needs a load of"):
        design(Prototype("chebyshev", 2, 0.5), centre_hz=1e9, impedance_ohm=50.0)


def test_topology_entry():
    assert (TOPOLOGY.name, TOPOLOGY.passes, TOPOLOGY.free) == ("high-pass", "high", None)
