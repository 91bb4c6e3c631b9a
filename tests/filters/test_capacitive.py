"""Capacitive coupling: names and placement, the worked skirt, refusals, what the textbook form is off by."""

import numpy as np
import pytest

from harmonic_planner.filters.response import sweep
from harmonic_planner.filters.topologies import TopologyError
from harmonic_planner.filters.topologies.capacitive import design, feasible_resonator, skew_db, textbook
from harmonic_planner.filters.topologies.network import band_edges
from harmonic_planner.physics.prototypes import Prototype

SPEC = {"centre_hz": 600e6, "bandwidth": 0.1, "impedance_ohm": 50.0}
THIRD = Prototype("butterworth", 3)


def test_elements_from_source_to_load():
    circuit = design(THIRD, **SPEC, resonator=8e-9)
    assert [e.ref for e in circuit.elements] == ["C01", "L1", "C1", "C12", "L2", "C2", "C23", "L3", "C3", "C34"]
    assert [e.placement for e in circuit.elements] == ["series", "shunt", "shunt"] * 3 + ["series"]
    assert [e.value for e in circuit.elements if e.kind == "L"] == pytest.approx([8e-9] * 3, rel=1e-12)
    assert len(circuit.arms()) == 7


def test_without_a_choice_the_resonator_is_the_middle_of_the_possible_ones():
    low, high = feasible_resonator(THIRD, **SPEC)
    assert low < design(THIRD, **SPEC).elements[1].value < high
    assert design(THIRD, **SPEC).elements[1].value == pytest.approx((low * high) ** 0.5, rel=0.01)


@pytest.mark.parametrize("make", [design, textbook])
@pytest.mark.parametrize(
    "inductance, words",
    [
        (0.5e-9, "L = 0.5 nH .* C01 would have to be infinite; "),
        (900e-9, "L = 900 nH .* C1 would have to be negative; "),
    ],
)
def test_an_impossible_inductance_names_the_value_and_what_would_work(make, inductance: float, words: str):
    low, high = feasible_resonator(THIRD, **SPEC)
    with pytest.raises(TopologyError, match=f"{words}{low * 1e9:.3g} nH to {high * 1e9:.3g} nH works"):
        make(THIRD, **SPEC, resonator=inductance)
    for works in (low, high):
        make(THIRD, **SPEC, resonator=works)


def test_the_textbook_form_loses_return_loss_as_its_table_says():
    """Regression, unconfirmed: a few cells of the table in the docstring."""
    for order, bandwidth, decibel in ((3, 0.1, 15.0), (5, 0.1, 9.5), (9, 0.02, 11.0), (3, 0.3, 10.7)):
        spec = SPEC | {"bandwidth": bandwidth}
        prototype = Prototype("chebyshev", order, 0.1)
        frequency = 600e6 * np.geomspace(*band_edges(bandwidth), 801)
        assert sweep(textbook(prototype, **spec), frequency).return_loss_db.min() == pytest.approx(decibel, abs=0.06)
        assert sweep(design(prototype, **spec), frequency).return_loss_db.min() == pytest.approx(16.43, abs=0.01)


def test_the_solved_form_tends_to_the_textbook_in_narrow_bands():
    for bandwidth, share in ((1e-2, 2e-2), (1e-3, 2e-3)):
        one, two = (
            make(THIRD, centre_hz=600e6, bandwidth=bandwidth, impedance_ohm=50.0, resonator=8e-9)
            for make in (design, textbook)
        )
        ratio = [a.value / b.value - 1 for a, b in zip(one.elements, two.elements, strict=True)]
        assert np.abs(ratio).max() < share


def test_solved_skirt_of_the_worked_filter():
    """Regression, unconfirmed: against the textbook form the same lines gain 0.5-0.8 dB."""
    found = sweep(design(THIRD, **SPEC, resonator=8e-9), [200e6, 400e6, 800e6, 1200e6, 1800e6]).attenuation_db
    assert found == pytest.approx([122.84, 68.66, 36.97, 48.99, 52.73], abs=0.01)


def test_skew_is_a_table_of_one_line():
    assert skew_db(3, [0.5, 1.0, 2.0]) == pytest.approx([24.08, 0.0, -24.08], abs=0.01)
