"""Series resonators with shunt capacitors: names and placement, refusals; its response is checked as the dual."""

import pytest

from harmonic_planner.filters.topologies import TopologyError
from harmonic_planner.filters.topologies.series_capacitive import design, feasible_resonator, textbook
from harmonic_planner.physics.prototypes import Prototype

SPEC = {"centre_hz": 600e6, "bandwidth": 0.1, "impedance_ohm": 50.0}
THIRD = Prototype("butterworth", 3)


@pytest.mark.parametrize("make", [design, textbook])
def test_elements_from_source_to_load(make):
    circuit = make(THIRD, **SPEC, resonator=15e-9)
    assert [e.ref for e in circuit.elements] == ["C01", "L1", "C1", "C12", "L2", "C2", "C23", "L3", "C3", "C34"]
    assert [e.placement for e in circuit.elements] == ["shunt", "series", "series"] * 3 + ["shunt"]
    assert [e.value for e in circuit.elements if e.kind == "L"] == pytest.approx([15e-9] * 3, rel=1e-12)
    assert circuit.output == "out"


@pytest.mark.parametrize(
    "inductance, words",
    [(0.3e-9, "L = 0.3 nH .* C1 would have to be negative; "), (900e-9, "L = 900 nH .* C01 would have to be zero; ")],
)
def test_an_impossible_inductance_names_the_value_and_what_would_work(inductance: float, words: str):
    low, high = feasible_resonator(THIRD, **SPEC)
    with pytest.raises(TopologyError, match=f"{words}{low * 1e9:.3g} nH to {high * 1e9:.3g} nH works"):
        design(THIRD, **SPEC, resonator=inductance)
    for works in (low, high):
        design(THIRD, **SPEC, resonator=works)


def test_one_resonator():
    circuit = design(Prototype("butterworth", 1), **SPEC)
    assert [e.ref for e in circuit.elements] == ["C01", "L1", "C1", "C12"]
