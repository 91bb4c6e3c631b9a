"""The lossless ladder of many trials against the scalar recursion, and what the misfit says of known differences."""

import dataclasses

import numpy as np
import pytest
from built_circuits import KITS, around, kits, random_ladders, without_losses, without_strays
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.circuit import Circuit, Element
from harmonic_planner.filters.lossless import LosslessLadder
from harmonic_planner.filters.misfit import Misfit
from harmonic_planner.filters.response import sweep
from harmonic_planner.filters.topologies import REGISTRY
from harmonic_planner.model import PlannerError
from harmonic_planner.physics.prototypes import Prototype

KIT = KITS["chip-0603"]


def element_values(circuit: Circuit) -> np.ndarray:
    return np.array([element.value for element in circuit.elements])


def a_filter(name: str = "ladder-series", *, centre_hz: float = 240e6, bandwidth: float = 0.2) -> Circuit:
    prototype = Prototype("chebyshev", 3, 0.1)
    return REGISTRY[name].design(prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=50.0)


# independent: the complex recursion of the same model, its losses taken out
@settings(deadline=None, max_examples=50)
@given(random_ladders(), kits)
def test_s_parameters_are_those_of_the_scalar_recursion(circuit: Circuit, kit):
    frequency = around(circuit)
    response = sweep_built(circuit, frequency, kit=without_losses(kit))
    k = LosslessLadder(circuit, kit).characteristic(element_values(circuit), frequency)[0]
    # the scalar recursion ends near 1e-7 where nothing is left of |S21|, ours does not
    seen = np.abs(response.s21) > 1e-5
    assert 1 / (1 + np.abs(k[seen]) ** 2) == pytest.approx(np.abs(response.s21[seen]) ** 2, rel=1e-6)
    assert (k * response.s21)[seen] == pytest.approx(response.s11[seen], rel=1e-6, abs=1e-6)


@settings(deadline=None, max_examples=25)
@given(random_ladders(), kits)
def test_strays_grown_to_nothing_leave_the_ideal_circuit(circuit: Circuit, kit):
    frequency = around(circuit)
    k = LosslessLadder(circuit, kit).characteristic(element_values(circuit), frequency, strays=0.0)[0]
    ideal = sweep(circuit, frequency)
    seen = np.abs(ideal.s21) > 1e-5
    assert 1 / (1 + np.abs(k[seen]) ** 2) == pytest.approx(np.abs(ideal.s21[seen]) ** 2, rel=1e-6)


@settings(deadline=None, max_examples=25)
@given(random_ladders(), kits, st.data())
def test_a_second_part_is_one_more_element(circuit: Circuit, kit, data):
    capacitors = [i for i, element in enumerate(circuit.elements) if element.kind == "C"]
    if not capacitors:
        return
    at = data.draw(st.sampled_from(capacitors))
    twice = Element("Ctwo", "C", circuit.elements[at].nodes, circuit.elements[at].value * 0.7)
    both = dataclasses.replace(circuit, elements=(*circuit.elements[: at + 1], twice, *circuit.elements[at + 1 :]))
    second = np.zeros(len(circuit.elements))
    second[at] = twice.value
    frequency = around(circuit)
    pair = LosslessLadder(circuit, kit).characteristic(element_values(circuit), frequency, second=second)
    assert pair == pytest.approx(LosslessLadder(both, kit).characteristic(element_values(both), frequency), rel=1e-9)


def test_many_trials_are_each_their_own():
    circuit = a_filter()
    ladder, frequency = LosslessLadder(circuit, KIT), around(circuit)
    values = element_values(circuit) * np.linspace(0.8, 1.2, 5)[:, np.newaxis]
    strays = np.linspace(0, 1, 5)
    together = ladder.characteristic(values, frequency, strays=strays)
    for row, value, stray in zip(together, values, strays, strict=True):
        assert row == pytest.approx(ladder.characteristic(value, frequency, strays=stray)[0], rel=1e-12)


def test_values_of_another_shape_are_refused():
    with pytest.raises(PlannerError, match=r"\(trial, 6\)"):
        LosslessLadder(a_filter(), KIT).characteristic([1e-9, 2e-9], [1e8])


# ------------------------------------------------------------------------------------- what is measured


@pytest.mark.parametrize("name", ["ladder-series", "ladder-shunt"])
def test_the_ideal_values_without_strays_are_no_misfit(name):
    misfit = Misfit(a_filter(name), without_strays(KIT), (220e6, 260e6))
    assert misfit.cost_db(misfit.ideal_values)[0] == pytest.approx(0, abs=1e-9)
    assert misfit.centre_error(misfit.ideal_values) == pytest.approx(0, abs=1e-7)
    assert misfit.return_loss_change_db(misfit.ideal_values) == pytest.approx(0, abs=1e-9)
    # published: 0.1 dB of ripple leave 16.43 dB of return loss (10 log10 of 1 − 10^−0.01)
    ripple = Misfit(a_filter(name), without_strays(KIT), (240e6 / 1.1049875, 240e6 * 1.1049875))
    assert ripple.ideal_return_loss_db == pytest.approx(16.43, abs=0.01)


@settings(deadline=None, max_examples=20)
@given(st.floats(-0.02, 0.02), st.sampled_from(["ladder-series", "ladder-shunt", "capacitive", "inductive"]))
def test_all_values_larger_shift_the_centre_down(shift: float, name: str):
    # independent: L and C times s are the same circuit at f/s; the best point of the band is one of 61, so that the
    # level of its edges is known to about 1e-4 dB
    circuit = a_filter(name)
    misfit = Misfit(circuit, without_strays(KIT), (222e6, 260e6))
    assert misfit.centre_error(misfit.ideal_values * (1 + shift)) == pytest.approx(1 / (1 + shift) - 1, abs=2e-6)


@pytest.mark.parametrize("name, side", [("low-pass", "high_hz"), ("high-pass", "low_hz")])
def test_a_filter_of_one_edge_is_measured_by_it(name, side):
    cutoff_hz = 300e6
    passband_hz = (150e6, 290e6) if name == "low-pass" else (310e6, 600e6)
    misfit = Misfit(a_filter(name, centre_hz=cutoff_hz), without_strays(KIT), passband_hz)
    # published: 6 dB of a 0.1 dB Chebyshev of order 3, cosh(acosh(sqrt((10^0.6 − 1)/(10^0.01 − 1)))/3) = 1.573
    ratio = np.cosh(np.arccosh(np.sqrt((10**0.6 - 1) / (10**0.01 - 1))) / 3)
    edge = cutoff_hz * ratio if name == "low-pass" else cutoff_hz / ratio
    assert getattr(misfit.ideal_band, side) == pytest.approx(edge, rel=1e-6)
    assert misfit.ideal_band.centre_hz == pytest.approx(edge, rel=1e-6)
    assert misfit.centre_error(misfit.ideal_values * 1.01) == pytest.approx(1 / 1.01 - 1, abs=1e-6)


def test_an_edge_that_is_gone_leaves_no_centre():
    circuit = Circuit("through", (Element("C1", "C", ("in", "out"), 1e-12),), 100e6, 50.0, 50.0)
    misfit = Misfit(circuit, without_strays(KIT), (2e9, 3e9))
    assert misfit.ideal_band.low_hz is not None
    assert np.isnan(misfit.centre_error(np.array([1e-6])))
