"""Inductive coupling: names and placement, refusals, solved skirt."""

import pytest

from harmonic_planner.filters.response import sweep
from harmonic_planner.filters.topologies import TopologyError
from harmonic_planner.filters.topologies.inductive import design, feasible_resonator, skew_db
from harmonic_planner.physics.prototypes import Prototype

SPEC = {"centre_hz": 600e6, "bandwidth": 0.1, "impedance_ohm": 50.0}
THIRD = Prototype("butterworth", 3)


def test_elements_from_source_to_load():
    circuit = design(THIRD, **SPEC, resonator=6e-12)
    assert [e.ref for e in circuit.elements] == ["L01", "L1", "C1", "L12", "L2", "C2", "L23", "L3", "C3", "L34"]
    assert [e.placement for e in circuit.elements] == ["series", "shunt", "shunt"] * 3 + ["series"]
    assert [e.value for e in circuit.elements if e.kind == "C"] == pytest.approx([6e-12] * 3, rel=1e-12)


@pytest.mark.parametrize(
    "capacitance, words",
    [(0.1e-12, "C = 0.1 pF .* L1 would have to be negative; "), (90e-12, "C = 90 pF .* L01 would have to be zero; ")],
)
def test_an_impossible_capacitance_names_the_value_and_what_would_work(capacitance: float, words: str):
    low, high = feasible_resonator(THIRD, **SPEC)
    with pytest.raises(TopologyError, match=f"{words}{low * 1e12:.2g} pF to {high * 1e12:.3g} pF works"):
        design(THIRD, **SPEC, resonator=capacitance)
    for works in (low, high):
        design(THIRD, **SPEC, resonator=works)


def test_solved_skirt_of_the_worked_filter():
    """Regression, unconfirmed: against the textbook form the same lines gain 0.3-0.6 dB."""
    found = sweep(design(THIRD, **SPEC, resonator=6e-12), [200e6, 400e6, 800e6, 1200e6, 1800e6]).attenuation_db
    assert found == pytest.approx([50.94, 42.06, 55.47, 94.16, 123.20], abs=0.01)


def test_skew_is_a_table_of_one_line():
    assert skew_db(3, [0.5, 1.0, 2.0]) == pytest.approx([-24.08, 0.0, 24.08], abs=0.01)
