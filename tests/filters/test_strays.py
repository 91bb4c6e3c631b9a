"""Strays: each against hand arithmetic on a kit of round numbers, and the list of primitives as a whole."""

import math
from pathlib import Path

import numpy as np
import pytest
from built_circuits import around, kits, random_ladders, without_losses, without_strays
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters import topologies
from harmonic_planner.filters.circuit import GROUND, Circuit, CircuitError, Element
from harmonic_planner.filters.strays import (
    across_f,
    impedance_ohm,
    pad_count,
    primitives,
    resistance_ohm,
    series_inductance_h,
    stations,
)
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.physics.prototypes import Prototype

# 0.15 nH mounting, 0.5 nH capacitor, 0.20 nH via, 20 pH shared, 0.10 pF a pad
KIT = load_kit("chip-0603", Path())


def circuit_of(*elements: Element, centre_hz: float = 500e6) -> Circuit:
    return Circuit("test", elements, centre_hz=centre_hz, source_ohm=50.0, load_ohm=50.0)


# independent: by hand from the kit file
@pytest.mark.parametrize(
    "element, inductance_h",
    [
        (Element("L1", "L", ("in", "out"), 10e-9), 0.15e-9),
        (Element("L1", "L", ("in", "0"), 10e-9), 0.35e-9),
        (Element("C1", "C", ("in", "out"), 1e-12), 0.5e-9),
        (Element("C1", "C", ("0", "in"), 1e-12), 0.7e-9),
    ],
)
def test_series_inductance_is_mounting_and_via(element, inductance_h):
    assert series_inductance_h(element, KIT) == pytest.approx(inductance_h)


@pytest.mark.parametrize("placement", ["out", "0"])
def test_an_inductor_is_open_at_its_self_resonance_and_a_capacitor_short_at_its_own(placement: str):
    # independent: without loss, pole and zero of the impedance lie where the kit's self-resonance says
    kit = without_losses(KIT)
    inductor, capacitor = Element("L1", "L", ("in", placement), 47e-9), Element("C1", "C", ("in", placement), 22e-12)
    pole = np.array([kit.inductor.self_resonance_hz(47e-9)])
    via_h = kit.board.via_h if placement == "0" else 0.0
    zero = np.array([kit.capacitor.self_resonance_hz(22e-12, via_h)])
    assert np.abs(impedance_ohm(inductor, kit, pole)) > 1e12
    assert np.abs(impedance_ohm(capacitor, kit, zero)) < 1e-9
    assert across_f(capacitor, kit) == 0


def test_far_below_resonance_a_part_is_its_value_and_its_q():
    frequency = np.array([10e6])
    inductor, capacitor = Element("L1", "L", ("in", "out"), 10e-9), Element("C1", "C", ("in", "out"), 10e-12)
    z = impedance_ohm(inductor, KIT, frequency)[0]
    # independent: by hand, 10 nH and 0.15 nH at 10 MHz; the self-resonance at 4.8 GHz changes 4 parts in a million
    assert z.imag == pytest.approx(2 * math.pi * 10e6 * 10.15e-9, rel=1e-5)
    assert z.real == pytest.approx(2 * math.pi * 10e6 * 10e-9 / (40 * math.sqrt(10 / 250)), rel=1e-4)
    z = impedance_ohm(capacitor, KIT, frequency)[0]
    assert z.imag == pytest.approx(-1 / (2 * math.pi * 10e6 * 10e-12), rel=1e-4)
    assert z.real == pytest.approx(0.0003 / (2 * math.pi * 10e6 * 10e-12) + 0.1 * math.sqrt(10 / 500), rel=1e-12)


def test_frozen_losses_are_those_of_one_frequency_everywhere():
    element, frequency = Element("L1", "L", ("in", "out"), 10e-9), np.array([100e6, 400e6, 1.6e9])
    kit = without_strays(KIT)
    frozen = impedance_ohm(element, kit, frequency, frozen_at_hz=400e6)
    assert frozen.real == pytest.approx(float(resistance_ohm(element, kit, 400e6)), rel=1e-9)
    free = impedance_ohm(element, kit, frequency)
    assert free.real == pytest.approx(resistance_ohm(element, kit, frequency), rel=1e-9)
    assert free[1] == frozen[1]


def test_every_end_of_a_part_on_a_live_node_has_a_pad():
    circuit = topologies.design(
        "ladder-shunt", Prototype("butterworth", 3), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
    )
    # by hand: L1 C1 and L2 on the input; L2 C2 between; C2, L3, C3 on the output
    assert [pad_count(circuit, node) for node in circuit.nodes] == [3, 2, 3]
    pads = {part.nodes: part.value for part in primitives(circuit, KIT, at_hz=240e6) if part.role == "pads"}
    assert pads == {
        ("in", "0"): pytest.approx(0.3e-12),
        ("n2", "0"): pytest.approx(0.2e-12),
        ("out", "0"): pytest.approx(0.3e-12),
    }


def test_stations_follow_the_ladder():
    circuit = topologies.design(
        "ladder-shunt", Prototype("butterworth", 3), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
    )
    assert [(s.node, s.shunt, s.onward, s.pads) for s in stations(circuit)] == [
        ("in", (0, 1), (2,), 3),
        ("n2", (), (3,), 2),
        ("out", (4, 5), (), 3),
    ]
    bridged = circuit_of(
        Element("C1", "C", ("in", "out"), 1e-12),
        Element("L1", "L", ("in", "mid"), 1e-9),
        Element("L2", "L", ("mid", "out"), 1e-9),
    )
    with pytest.raises(CircuitError, match="not a ladder"):
        stations(bridged)


def test_primitives_of_one_resonator_and_a_series_part():
    # independent: written down by hand from the kit file
    circuit = circuit_of(
        Element("L1", "L", ("in", "0"), 10e-9),
        Element("C1", "C", ("0", "in"), 10e-12),
        Element("C12", "C", ("in", "out"), 1e-12),
    )
    found = primitives(circuit, KIT, at_hz=500e6)
    omega, q = 2 * math.pi * 500e6, 40 * math.sqrt(2)
    across = 1 / ((2 * math.pi * KIT.inductor.self_resonance_hz(10e-9)) ** 2 * 10e-9)
    expected = [
        ("L1", "L", ("in", "l1_1"), 10e-9),
        ("R_L1", "R", ("l1_1", "l1_2"), omega * 10e-9 / q),
        ("C_L1", "C", ("in", "l1_2"), across),
        ("L_L1", "L", ("l1_2", "in_via"), 0.35e-9),
        ("C1", "C", ("in", "c1_1"), 10e-12),
        ("R_C1", "R", ("c1_1", "c1_2"), 0.0003 / (omega * 10e-12) + 0.1),
        ("L_C1", "L", ("c1_2", "in_via"), 0.7e-9),
        ("C12", "C", ("in", "c12_1"), 1e-12),
        ("R_C12", "R", ("c12_1", "c12_2"), 0.0003 / (omega * 1e-12) + 0.1),
        ("L_C12", "L", ("c12_2", "out"), 0.5e-9),
        ("L_in_via", "L", ("in_via", "0"), 20e-12),
        ("C_in_pads", "C", ("in", "0"), 0.3e-12),
        ("C_out_pads", "C", ("out", "0"), 0.1e-12),
    ]
    assert [(p.name, p.kind, p.nodes) for p in found] == [row[:3] for row in expected]
    assert [p.value for p in found] == pytest.approx([row[3] for row in expected], rel=1e-12)


def test_a_lone_shunt_part_shares_no_via():
    circuit = circuit_of(Element("C1", "C", ("in", "0"), 1e-12), Element("L2", "L", ("in", "out"), 1e-9))
    found = primitives(circuit, KIT, at_hz=500e6)
    assert "shared via" not in {part.role for part in found}
    assert ("c1_2", GROUND) in {part.nodes for part in found}


def test_a_kit_without_losses_and_strays_leaves_the_parts_alone():
    kit = without_strays(without_losses(KIT))
    circuit = circuit_of(Element("C1", "C", ("in", "0"), 1e-12), Element("C2", "C", ("in", "out"), 1e-12))
    assert [(p.name, p.kind, p.nodes, p.value) for p in primitives(circuit, kit, at_hz=500e6)] == [
        ("C1", "C", ("in", "0"), 1e-12),
        ("C2", "C", ("in", "out"), 1e-12),
    ]


def test_names_that_a_circuit_has_already_are_avoided_whatever_their_case():
    circuit = circuit_of(
        Element("X", "L", ("in", "L1_1"), 1e-9),
        Element("L1", "L", ("L1_1", "out"), 1e-9),
        Element("R_L1", "C", ("out", "0"), 1e-12),
    )
    found = primitives(circuit, KIT, at_hz=500e6)
    names = [part.name.lower() for part in found]
    assert len(set(names)) == len(names)
    assert all(part.name.upper().startswith(part.kind) for part in found)
    (part,) = (part for part in found if part.element == "L1" and part.role == "part")
    assert part.nodes == ("L1_1", "l1_1x")


@settings(deadline=None)
@given(random_ladders(), kits, st.floats(1e7, 5e9))
def test_primitives_form_one_circuit_on_the_circuits_nodes(circuit: Circuit, kit, at_hz: float):
    found = primitives(circuit, kit, at_hz=at_hz)
    assert all(0 < part.value < math.inf for part in found)
    nodes = [node for part in found for node in part.nodes]
    assert all(nodes.count(node) >= 2 for node in nodes)
    assert set(circuit.nodes) <= set(nodes)
    assert [p.value for p in found if p.role == "part"] == [element.value for element in circuit.elements]


@settings(deadline=None)
@given(random_ladders(), kits)
def test_a_mounted_part_is_passive_and_loses_power(circuit: Circuit, kit):
    for element in circuit.elements:
        assert np.all(impedance_ohm(element, kit, around(circuit)).real > 0)


@pytest.mark.parametrize("at_hz", [0.0, -1.0, math.nan, math.inf])
def test_losses_are_taken_at_a_frequency_above_zero(at_hz: float):
    with pytest.raises(PlannerError, match="at_hz"):
        primitives(circuit_of(Element("C1", "C", ("in", "out"), 1e-12)), KIT, at_hz=at_hz)
