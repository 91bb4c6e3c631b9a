"""Kernel: every trial is what the plain recursion gives for a circuit of those values, whatever the blocks."""

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from built_circuits import around, kits, random_ladders, without_losses, without_strays
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters import topologies
from harmonic_planner.filters.built_response import nodal_built, sweep_built
from harmonic_planner.filters.circuit import Circuit, CircuitError, Element
from harmonic_planner.filters.kernel import LadderKernel
from harmonic_planner.filters.response import sweep
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Kit, load_kit
from harmonic_planner.physics.prototypes import Prototype

KIT = load_kit("chip-0603", Path())
CIRCUIT = topologies.design(
    "ladder-shunt", Prototype("butterworth", 5), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
)


def values_of(circuit: Circuit) -> np.ndarray:
    return np.array([element.value for element in circuit.elements])


def with_values(circuit: Circuit, values: np.ndarray) -> Circuit:
    return replace(
        circuit, elements=tuple(replace(e, value=float(v)) for e, v in zip(circuit.elements, values, strict=True))
    )


def trials(circuit: Circuit, count: int, seed: int = 1) -> np.ndarray:
    spread = np.random.default_rng(seed).uniform(0.8, 1.25, (count, len(circuit.elements)))
    return values_of(circuit) * spread


@settings(deadline=None)
@given(random_ladders(), kits, st.integers(1, 5))
def test_each_trial_is_the_sweep_of_its_own_circuit(circuit: Circuit, kit: Kit, block: int):
    values, frequency = trials(circuit, 4), around(circuit)
    found = LadderKernel(circuit, frequency, kit=kit, block=block).attenuation_db(values)
    for row, attenuation in zip(values, found, strict=True):
        assert attenuation == pytest.approx(
            sweep_built(with_values(circuit, row), frequency, kit=kit).attenuation_db, abs=1e-8
        )


@settings(deadline=None)
@given(random_ladders())
def test_without_a_kit_parts_are_ideal(circuit: Circuit):
    values, frequency = trials(circuit, 3), around(circuit)
    found = LadderKernel(circuit, frequency, kit=None).attenuation_db(values)
    for row, attenuation in zip(values, found, strict=True):
        assert attenuation == pytest.approx(sweep(with_values(circuit, row), frequency).attenuation_db, abs=1e-8)


def test_it_agrees_with_the_nodal_solution():
    frequency, values = around(CIRCUIT), trials(CIRCUIT, 3)
    found = LadderKernel(CIRCUIT, frequency, kit=KIT).attenuation_db(values)
    for row, attenuation in zip(values, found, strict=True):
        assert attenuation == pytest.approx(
            nodal_built(with_values(CIRCUIT, row), frequency, kit=KIT).attenuation_db, abs=1e-6
        )


@pytest.mark.parametrize("kit", [KIT, None, without_strays(KIT), without_losses(KIT)])
@pytest.mark.parametrize("name", list(topologies.REGISTRY))
def test_blocks_do_not_change_a_bit_of_accuracy(name: str, kit: Kit | None):
    circuit = topologies.design(name, Prototype("butterworth", 4), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0)
    values, frequency = trials(circuit, 300), around(circuit, 31)
    whole = LadderKernel(circuit, frequency, kit=kit, block=300).attenuation_db(values)
    for block in (1, 7, 64, 256, 1000):
        parted = LadderKernel(circuit, frequency, kit=kit, block=block).attenuation_db(values)
        assert np.abs(parted - whole).max() < 1e-9


def test_many_parts_do_not_run_out_of_the_range_of_floats():
    # the products of all denominators: 25 resonators far off their frequency
    circuit = topologies.design(
        "ladder-shunt", Prototype("butterworth", 25), centre_hz=240e6, bandwidth=0.6, impedance_ohm=50.0
    )
    frequency = np.array([1e6, 240e6, 10e9])
    found = LadderKernel(circuit, frequency, kit=KIT).attenuation_db(values_of(circuit)[np.newaxis])[0]
    assert found == pytest.approx(sweep_built(circuit, frequency, kit=KIT).attenuation_db, abs=1e-6)


def test_out_takes_the_result_and_keeps_its_neighbours():
    frequency, values = around(CIRCUIT, 11), trials(CIRCUIT, 70)
    kernel = LadderKernel(CIRCUIT, frequency, kit=KIT)
    table = np.full((72, 11), -1.0)
    returned = kernel.attenuation_db(values, out=table[1:71])
    assert returned.base is table
    assert np.array_equal(table[1:71], kernel.attenuation_db(values))
    assert np.all(table[[0, 71]] == -1.0)


def test_no_trials_give_an_empty_table():
    assert LadderKernel(CIRCUIT, [1e9], kit=KIT).attenuation_db(np.empty((0, 10))).shape == (0, 1)


def test_faults_are_named():
    kernel = LadderKernel(CIRCUIT, [1e8, 2e8], kit=KIT)
    with pytest.raises(PlannerError, match=r"shape \(trial, 10\), not \(10,\)"):
        kernel.attenuation_db(values_of(CIRCUIT))
    with pytest.raises(PlannerError, match=r"shape \(trial, 10\), not \(1, 9\)"):
        kernel.attenuation_db(values_of(CIRCUIT)[np.newaxis, 1:])
    for wrong in (0.0, -1e-9, math.nan, math.inf):
        values = values_of(CIRCUIT)[np.newaxis].copy()
        values[0, 3] = wrong
        with pytest.raises(PlannerError, match="above zero"):
            kernel.attenuation_db(values)
    good = values_of(CIRCUIT)[np.newaxis]
    for out in (np.empty((1, 3)), np.empty((2, 2)), np.empty((1, 2), dtype=np.float32)):
        with pytest.raises(PlannerError, match="out must be float64"):
            kernel.attenuation_db(good, out=out)
    with pytest.raises(PlannerError, match="block"):
        LadderKernel(CIRCUIT, [1e8], kit=KIT, block=0)
    with pytest.raises(PlannerError, match="frequency_hz"):
        LadderKernel(CIRCUIT, [0.0], kit=KIT)
    bridged = (
        Element("C1", "C", ("in", "out"), 1e-12),
        Element("L1", "L", ("in", "mid"), 1e-9),
        Element("L2", "L", ("mid", "out"), 1e-9),
    )
    with pytest.raises(CircuitError, match="not a ladder"):
        LadderKernel(Circuit("bridged", bridged, 1e9, 50.0, 50.0), [1e9], kit=KIT)
