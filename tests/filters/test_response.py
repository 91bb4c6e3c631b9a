"""Response: two methods, scikit-rf, energy balance, reciprocity, closed forms."""

import functools
import math
from pathlib import Path

import numpy as np
import pytest
import skrf
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters import topologies
from harmonic_planner.filters.circuit import Circuit, CircuitError, Element
from harmonic_planner.filters.response import attenuation_db, nodal_sweep, rejection_db, sweep
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.physics.prototypes import Prototype

KIT = load_kit("chip-0603", Path())
LOSSES = ({}, {"kit": KIT}, {"unloaded_q": 60.0})


@st.composite
def ladders(draw) -> Circuit:
    """Ladders as designed, element values then off by up to a factor of two, unequal terminations."""
    family = draw(st.sampled_from(["butterworth", "chebyshev"]))
    order = draw(st.integers(1, 9)) if family == "butterworth" else draw(st.sampled_from([1, 3, 5, 7, 9]))
    circuit = topologies.design(
        draw(st.sampled_from(["ladder-series", "ladder-shunt"])),
        Prototype(family, order, 0.1),
        centre_hz=10 ** draw(st.floats(7.5, 9.5)),
        bandwidth=draw(st.floats(0.03, 0.6)),
        impedance_ohm=draw(st.floats(10.0, 300.0)),
    )
    factors = draw(st.lists(st.floats(0.5, 2.0), min_size=2 * order, max_size=2 * order))
    elements = tuple(
        Element(e.ref, e.kind, e.nodes, e.value * factor) for e, factor in zip(circuit.elements, factors, strict=True)
    )
    load = circuit.load_ohm * draw(st.floats(0.3, 3.0))
    return Circuit(circuit.topology, elements, circuit.centre_hz, circuit.source_ohm, load, circuit.output)


def around(circuit: Circuit, points: int = 61) -> np.ndarray:
    return circuit.centre_hz * np.geomspace(0.3, 3.3, points)


@settings(deadline=None)
@given(ladders(), st.sampled_from(LOSSES))
def test_ladder_recursion_and_nodal_solution_agree(circuit: Circuit, losses):
    ladder, nodal = (method(circuit, around(circuit), **losses) for method in (sweep, nodal_sweep))
    assert ladder.attenuation_db == pytest.approx(nodal.attenuation_db, abs=1e-6)
    assert np.abs(ladder.s11 - nodal.s11).max() < 1e-8


@settings(deadline=None)
@given(ladders())
def test_without_loss_all_power_is_reflected_or_transmitted(circuit: Circuit):
    found = sweep(circuit, around(circuit))
    assert np.abs(found.s11) ** 2 + np.abs(found.s21) ** 2 == pytest.approx(1.0, abs=1e-9)


@settings(deadline=None)
@given(ladders(), st.sampled_from(LOSSES[1:]))
def test_with_loss_some_power_is_missing_everywhere(circuit: Circuit, losses):
    found = sweep(circuit, around(circuit), **losses)
    assert np.all(np.abs(found.s11) ** 2 + np.abs(found.s21) ** 2 < 1.0)


@settings(deadline=None)
@given(ladders(), st.sampled_from(LOSSES))
def test_transmission_is_the_same_both_ways(circuit: Circuit, losses):
    forward = sweep(circuit, around(circuit), **losses)
    backward = sweep(circuit.reversed(), around(circuit), **losses)
    assert np.abs(forward.s21 / backward.s21 - 1).max() < 1e-9


def lossy_impedance(element: Element, frequency: np.ndarray, loss: str) -> np.ndarray:
    """Element impedance written down anew: the kit's law with its numbers typed in, or none."""
    omega = 2 * np.pi * frequency
    if element.kind == "L":
        q = np.minimum(40 * np.sqrt(frequency / 250e6), 75) if loss == "kit" else np.inf
        return 1j * omega * element.value + omega * element.value / q
    resistance = 0.0003 / (omega * element.value) + 0.10 * np.sqrt(frequency / 500e6) if loss == "kit" else 0.0
    return 1 / (1j * omega * element.value) + resistance


@pytest.mark.parametrize("loss", ["none", "kit"])
@pytest.mark.parametrize("name", ["ladder-series", "ladder-shunt"])
@pytest.mark.parametrize("order", [1, 2, 5])
def test_chain_matrices_converted_by_scikit_rf(name: str, order: int, loss: str):
    # independent: scikit-rf turns the product of ABCD matrices into S parameters
    circuit = topologies.design(
        name, Prototype("butterworth", order), centre_hz=600e6, bandwidth=0.2, impedance_ohm=50.0
    )
    frequency = around(circuit)
    total = np.tile(np.eye(2, dtype=complex), (frequency.size, 1, 1))
    for element in circuit.elements:
        z = lossy_impedance(element, frequency, loss)
        step = np.tile(np.eye(2, dtype=complex), (frequency.size, 1, 1))
        if element.placement == "series":
            step[:, 0, 1] = z
        else:
            step[:, 1, 0] = 1 / z
        total = total @ step
    s = skrf.network.a2s(total, z0=50.0)
    found = sweep(circuit, frequency, kit=KIT if loss == "kit" else None)
    assert np.abs(found.s21 / s[:, 1, 0] - 1).max() < 1e-9
    assert np.abs(found.s11 - s[:, 0, 0]).max() < 1e-9


def test_cascade_of_lumped_elements_in_scikit_rf():
    # independent: scikit-rf's own lumped elements, cascaded
    circuit = topologies.design(
        "ladder-series", Prototype("chebyshev", 3, 0.1), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
    )
    frequency = skrf.Frequency.from_f(around(circuit), unit="Hz")
    media = skrf.media.DefinedGammaZ0(frequency, z0=50.0)
    build = {
        ("L", "series"): media.inductor,
        ("C", "series"): media.capacitor,
        ("L", "shunt"): media.shunt_inductor,
        ("C", "shunt"): media.shunt_capacitor,
    }
    parts = [build[element.kind, element.placement](element.value) for element in circuit.elements]
    network = functools.reduce(lambda left, right: left**right, parts)
    found = sweep(circuit, frequency.f)
    assert np.abs(found.s21 - network.s[:, 1, 0]).max() < 1e-9
    assert np.abs(found.s11 - network.s[:, 0, 0]).max() < 1e-9


def test_a_bridged_circuit_has_a_nodal_solution_only():
    # independent: a bridged T of a capacitor across two equal inductors with a grounded tap, by its even and odd halves
    # (Bartlett's theorem): S21 = (Γ_even − Γ_odd)/2
    inductance, bridge, tap = 8e-9, 2e-12, 5e-12
    circuit = Circuit(
        "bridged",
        (
            Element("C1", "C", ("in", "out"), bridge),
            Element("L1", "L", ("in", "mid"), inductance),
            Element("L2", "L", ("mid", "out"), inductance),
            Element("C2", "C", ("mid", "0"), tap),
        ),
        centre_hz=1e9,
        source_ohm=50.0,
        load_ohm=50.0,
    )
    frequency = np.linspace(1e8, 5e9, 41)
    omega = 2 * np.pi * frequency
    even = 1j * omega * inductance + 2 / (1j * omega * tap)
    odd = 1 / (1 / (1j * omega * inductance) + 2j * omega * bridge)
    expected = ((even - 50) / (even + 50) - (odd - 50) / (odd + 50)) / 2
    assert np.abs(nodal_sweep(circuit, frequency).s21 - expected).max() < 1e-12
    with pytest.raises(CircuitError, match="node in leads to mid, out"):
        sweep(circuit, frequency)


def test_a_trap_in_series_is_one_arm():
    circuit = Circuit(
        "trap",
        (Element("L1", "L", ("in", "out"), 5e-9), Element("C1", "C", ("in", "out"), 4e-12)),
        centre_hz=1e9,
        source_ohm=50.0,
        load_ohm=50.0,
    )
    frequency = np.linspace(1e8, 3e9, 30)
    z = 1 / (1 / (2j * np.pi * frequency * 5e-9) + 2j * np.pi * frequency * 4e-12)
    assert np.abs(sweep(circuit, frequency).s21 - 100 / (100 + z)).max() < 1e-12
    assert np.abs(nodal_sweep(circuit, frequency).s21 - 100 / (100 + z)).max() < 1e-12


def test_an_open_path_transmits_nothing():
    circuit = Circuit("open", (Element("C1", "C", ("in", "0"), 1e-12),), centre_hz=1e9, source_ohm=50.0, load_ohm=50.0)
    assert nodal_sweep(circuit, [1e9]).attenuation_db[0] == math.inf


def test_a_floating_part_is_named_as_such():
    floating = (Element("C1", "C", ("in", "out"), 1e-12), Element("C2", "C", ("x", "0"), 1e-12))
    circuit = Circuit("floating", floating, centre_hz=1e9, source_ohm=50.0, load_ohm=50.0)
    with pytest.raises(CircuitError, match="node x has no path to the input or output"):
        nodal_sweep(circuit, [1e9])


@pytest.mark.parametrize("frequency", [0.0, -1e9, math.nan, math.inf, [1e9, 0.0], [[1e9]]])
def test_frequencies_must_be_above_zero(frequency):
    circuit = Circuit("c", (Element("C1", "C", ("in", "out"), 1e-12),), centre_hz=1e9, source_ohm=50.0, load_ohm=50.0)
    for method in (sweep, nodal_sweep):
        with pytest.raises(PlannerError, match="frequency_hz"):
            method(circuit, frequency)


@pytest.mark.parametrize("q", [0.0, -5.0, math.nan])
def test_a_q_must_be_above_zero(q: float):
    circuit = Circuit("c", (Element("C1", "C", ("in", "out"), 1e-12),), centre_hz=1e9, source_ohm=50.0, load_ohm=50.0)
    with pytest.raises(PlannerError, match="unloaded_q"):
        sweep(circuit, 1e9, unloaded_q=q)


def test_one_q_given_replaces_the_kits_losses_and_an_infinite_one_has_none():
    circuit = topologies.design(
        "ladder-shunt", Prototype("butterworth", 3), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
    )
    frequency = around(circuit)
    both = sweep(circuit, frequency, kit=KIT, unloaded_q=80.0)
    assert np.array_equal(both.s21, sweep(circuit, frequency, unloaded_q=80.0).s21)
    assert np.abs(sweep(circuit, frequency, unloaded_q=math.inf).s21 / sweep(circuit, frequency).s21 - 1).max() < 1e-12


def test_attenuation_of_known_ratios():
    assert attenuation_db([1.0, 0.1j, -0.5, 0.0]) == pytest.approx([0.0, 20.0, 20 * math.log10(2), math.inf])


def test_rejection_is_the_prototypes_at_the_worst_corner():
    # independent: for a lossless ladder the definition in terms of the prototype's closed form
    prototype, centre, bandwidth, drift = Prototype("butterworth", 4), 240e6, 0.25, 0.01
    circuit = topologies.design("ladder-series", prototype, centre_hz=centre, bandwidth=bandwidth, impedance_ohm=50.0)

    def loss(frequency: float) -> float:
        return float(prototype.attenuation_db(abs(frequency / centre - centre / frequency) / bandwidth))

    carrier = max(loss(237.6e6 / 1.01), loss(242.4e6 / 0.99))
    expected = [loss(121.2e6 / 0.99) - carrier, loss(356.4e6 / 1.01) - carrier]
    found = rejection_db(
        circuit,
        passband_hz=(237.6e6, 242.4e6),
        line_low_hz=[118.8e6, 356.4e6],
        line_high_hz=[121.2e6, 363.6e6],
        drift=drift,
    )
    assert found == pytest.approx(expected, abs=1e-9)
