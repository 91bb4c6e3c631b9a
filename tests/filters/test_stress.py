"""Stress: power lost in the parts is the power missing between the ports; one part by hand; ratings and words."""

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from built_circuits import KITS, kits, random_ladders, without_losses, without_strays
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters import topologies
from harmonic_planner.filters.built_response import nodal_voltages, sweep_built
from harmonic_planner.filters.circuit import Circuit, Element
from harmonic_planner.filters.strays import primitives, resistance_ohm
from harmonic_planner.filters.stress import cautions, stress
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Kit, load_kit
from harmonic_planner.physics.prototypes import Prototype

KIT = load_kit("chip-0603", Path())
BARE = without_strays(without_losses(KIT))


@settings(deadline=None)
@given(random_ladders(), kits, st.floats(-20, 40), st.floats(0.5, 3.0))
def test_the_parts_lose_what_is_missing_between_the_ports(circuit: Circuit, kit: Kit, power_dbm: float, ratio: float):
    frequency_hz = circuit.centre_hz * ratio
    found = stress(circuit, kit, frequency_hz=(frequency_hz, frequency_hz), power_dbm=power_dbm)
    lost_w = sum(
        part.rms_current_a**2 * float(resistance_ohm(element, kit, frequency_hz))
        for part, element in zip(found, circuit.elements, strict=True)
    )
    available_w = 10 ** ((power_dbm - 30) / 10)
    share = float(sweep_built(circuit, frequency_hz, kit=kit).dissipation[0])
    assert lost_w == pytest.approx(available_w * share, rel=1e-6, abs=1e-9 * available_w)


@settings(deadline=None)
@given(random_ladders(), kits)
def test_voltages_are_those_of_the_nodal_solution(circuit: Circuit, kit: Kit):
    frequency_hz = circuit.centre_hz
    index, voltage = nodal_voltages(circuit, frequency_hz, kit=kit)
    at = {node: voltage[0, place] for node, place in index.items()} | {"0": 0.0}
    emf = math.sqrt(8 * circuit.source_ohm * 1e-3)
    across = {
        p.element: abs(at[p.nodes[0]] - at[p.nodes[1]]) * emf
        for p in primitives(circuit, kit, at_hz=frequency_hz)
        if p.role == ("across" if p.kind == "C" and p.name.startswith("C_") else "part")
    }
    for part in stress(circuit, kit, frequency_hz=(frequency_hz, frequency_hz), power_dbm=0.0):
        assert part.peak_voltage_v == pytest.approx(across[part.ref], rel=1e-6, abs=1e-9)


def test_a_series_capacitor_by_hand():
    # independent: 1 W into 50 ohm is 20 V peak open-circuit; 50 + 50 ohm with 50 ohm of reactance
    capacitance = 1 / (2 * math.pi * 1e8 * 50)
    circuit = Circuit("c", (Element("C1", "C", ("in", "out"), capacitance),), 1e8, 50.0, 50.0)
    (part,) = stress(circuit, BARE, frequency_hz=(1e8, 1e8), power_dbm=30.0)
    current = 20 / abs(100 - 50j)
    assert part.rms_current_a == pytest.approx(current / math.sqrt(2), rel=1e-9)
    assert part.peak_voltage_v == pytest.approx(50 * current, rel=1e-9)
    assert (part.voltage_rating_v, part.current_rating_a) == (50.0, None)
    assert part.share == pytest.approx(part.worst_peak_voltage_v / 50)


def test_a_narrow_resonator_multiplies_the_voltage_by_its_loaded_q():
    # independent: series L–C between 50 and 50 ohm at resonance carries 20 V/100 ohm, and X = g Z0/Δ = 2·50/0.05
    circuit = topologies.design(
        "ladder-series", Prototype("butterworth", 1), centre_hz=100e6, bandwidth=0.05, impedance_ohm=50.0
    )
    found = stress(circuit, BARE, frequency_hz=(100e6, 100e6), power_dbm=30.0)
    assert [part.peak_voltage_v for part in found] == pytest.approx([0.2 * 2000, 0.2 * 2000], rel=1e-6)
    assert [part.rms_current_a for part in found] == pytest.approx([0.2 / math.sqrt(2)] * 2, rel=1e-6)


def test_the_span_brings_the_worst_and_its_middle_the_nominal():
    circuit = topologies.design(
        "ladder-shunt", Prototype("butterworth", 3), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
    )
    found = stress(circuit, KIT, frequency_hz=(225e6, 255e6), power_dbm=20.0)
    middle = stress(circuit, KIT, frequency_hz=(240e6, 240e6), power_dbm=20.0)
    ends = [stress(circuit, KIT, frequency_hz=(f, f), power_dbm=20.0) for f in (225e6, 240e6, 255e6)]
    for i, part in enumerate(found):
        assert part.peak_voltage_v == middle[i].peak_voltage_v
        assert part.rms_current_a == middle[i].rms_current_a
        assert part.worst_peak_voltage_v >= max(end[i].peak_voltage_v for end in ends)
        assert part.worst_rms_current_a >= max(end[i].rms_current_a for end in ends)


@settings(deadline=None)
@given(random_ladders(), st.floats(-30, 30))
def test_voltage_and_current_go_with_the_root_of_power(circuit: Circuit, power_dbm: float):
    span = (circuit.centre_hz, circuit.centre_hz * 1.01)
    low, high = (stress(circuit, KIT, frequency_hz=span, power_dbm=p, points=5) for p in (power_dbm, power_dbm + 20))
    for less, more in zip(low, high, strict=True):
        assert more.worst_peak_voltage_v == pytest.approx(10 * less.worst_peak_voltage_v, rel=1e-9)
        assert more.worst_rms_current_a == pytest.approx(10 * less.worst_rms_current_a, rel=1e-9)


def test_words_name_the_part_its_rating_and_the_danger():
    circuit = topologies.design(
        "ladder-series", Prototype("butterworth", 1), centre_hz=100e6, bandwidth=0.05, impedance_ohm=50.0
    )
    kit = replace(BARE, inductor=replace(BARE.inductor, current_a=0.1))
    found = stress(circuit, kit, frequency_hz=(100e6, 100e6), power_dbm=31.0)
    told = cautions(found, power_dbm=31.0)
    assert told[0] == "L1 carries 0.159 A r.m.s., above its rating of 0.1 A"
    assert told[1] == "C1 bears 449 V peak, above its rating of 50 V"
    assert told[2].startswith("31 dBm at the filter and 449 V peak at ")
    assert "exposure" in told[2]
    assert "licence" in told[2]
    quiet = stress(circuit, BARE, frequency_hz=(100e6, 100e6), power_dbm=0.0)
    assert cautions(quiet, power_dbm=0.0) == ()
    assert cautions((), power_dbm=30.0) == ()


def test_a_kit_that_states_no_ratings_gives_no_share():
    bare = replace(BARE, inductor=replace(BARE.inductor, current_a=None))
    circuit = Circuit("l", (Element("L1", "L", ("in", "out"), 1e-8),), 1e8, 50.0, 50.0)
    (part,) = stress(circuit, bare, frequency_hz=(1e8, 1e8), power_dbm=50.0)
    assert part.share is None
    assert not any("rating" in text for text in cautions([part], power_dbm=50.0))


@pytest.mark.parametrize("span", [(0.0, 1e9), (2e9, 1e9), (1e9, math.inf), (math.nan, 1e9)])
def test_a_span_must_ascend(span):
    circuit = Circuit("l", (Element("L1", "L", ("in", "out"), 1e-8),), 1e8, 50.0, 50.0)
    with pytest.raises(PlannerError, match="frequency_hz"):
        stress(circuit, KIT, frequency_hz=span, power_dbm=0.0)
    with pytest.raises(PlannerError, match="power_dbm"):
        stress(circuit, KIT, frequency_hz=(1e9, 1e9), power_dbm=math.nan)


@pytest.mark.parametrize("kit", KITS.values(), ids=lambda kit: kit.name)
def test_ten_milliwatts_are_no_strain_for_a_usual_filter(kit: Kit):
    # common practice, no source (memory)
    circuit = topologies.design(
        "ladder-shunt", Prototype("chebyshev", 3, 0.1), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
    )
    shares = [part.share for part in stress(circuit, kit, frequency_hz=(237e6, 243e6), power_dbm=10.0)]
    assert np.all(np.array(shares, dtype=float) < 0.5)
