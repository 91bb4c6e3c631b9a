"""Kits: the shipped ones are complete and self-consistent; Q, self-resonance and floor follow their laws."""

import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.parts.kit_files import KitTable
from harmonic_planner.parts.kits import Kit, kit_names, load_kit

KITS = {name: load_kit(name, Path()) for name in kit_names()}
kits = st.sampled_from(list(KITS.values()))


def test_shipped_kits():
    assert kit_names() == ("air-wound", "chip-0402", "chip-0603", "chip-0805", "chip-1008", "chip-trimmer")
    assert [kit.name for kit in KITS.values()] == list(kit_names())


@pytest.mark.parametrize("kit", KITS.values(), ids=lambda kit: kit.name)
def test_every_value_of_a_shipped_kit_carries_its_basis(kit: Kit):
    keys = {
        f"{table}.{key}"
        for table, field in KitTable.model_fields.items()
        if isinstance(field.annotation, type) and hasattr(field.annotation, "model_fields")
        for key in field.annotation.model_fields
    }
    assert set(kit.basis) == keys | ({"tuned"} if kit.tuned else set())
    assert all(text.startswith("(memory) ") and len(text) > 15 for text in kit.basis.values())


# common practice, no source (memory): what parts of these sizes show on data sheets
@pytest.mark.parametrize(
    "name, inductance_h, low_hz, high_hz",
    [
        ("chip-0603", 166e-9, 1.0e9, 1.3e9),
        ("chip-0603", 10e-9, 4e9, 5e9),
        ("chip-0603", 390e-9, 0.6e9, 1.0e9),
        ("chip-0402", 10e-9, 4.5e9, 6e9),
        ("chip-0402", 1e-9, 12e9, 25e9),
        ("chip-0402", 100e-9, 1.2e9, 1.8e9),
        ("chip-0805", 10e-9, 3.5e9, 5e9),
        ("chip-0805", 470e-9, 0.38e9, 0.65e9),
        ("chip-trimmer", 100e-9, 1.0e9, 1.4e9),
        ("air-wound", 12e-9, 2.5e9, 3.5e9),
        ("air-wound", 500e-9, 0.4e9, 0.55e9),
        ("chip-1008", 10e-9, 3.5e9, 4.5e9),
        ("chip-1008", 1e-6, 0.2e9, 0.32e9),
        ("chip-1008", 4.7e-6, 0.08e9, 0.15e9),
    ],
)
def test_self_resonance_is_where_such_parts_have_it(name, inductance_h, low_hz, high_hz):
    assert low_hz <= KITS[name].inductor.self_resonance_hz(inductance_h) <= high_hz


# common practice, no source (memory)
@pytest.mark.parametrize(
    "name, frequency_hz, low, high",
    [
        ("chip-0603", 250e6, 35, 45),
        ("chip-0603", 1e9, 70, 80),
        ("chip-0402", 250e6, 20, 30),
        ("chip-0402", 900e6, 40, 60),
        ("chip-0402", 3e9, 60, 70),
        ("chip-0805", 250e6, 45, 60),
        ("air-wound", 150e6, 100, 145),
        ("air-wound", 1e9, 200, 250),
        ("chip-1008", 250e6, 50, 60),
        ("chip-1008", 60e6, 25, 40),
    ],
)
def test_inductor_q_is_what_such_parts_show(name, frequency_hz, low, high):
    assert low <= KITS[name].inductor.q(frequency_hz) <= high


def test_a_larger_part_resonates_lower_and_reaches_higher_values():
    small, large = KITS["chip-0603"].inductor, KITS["chip-1008"].inductor
    assert large.largest_h == pytest.approx(4.7e-6)
    for inductance_h in (10e-9, 100e-9, 390e-9):
        assert large.self_resonance_hz(inductance_h) < small.self_resonance_hz(inductance_h)


def test_a_mounted_capacitor_of_100_pf_resonates_near_0p7_ghz():
    # common practice, no source (memory)
    assert KITS["chip-0603"].capacitor.self_resonance_hz(100e-12) == pytest.approx(0.7e9, rel=0.05)


@given(kits, st.floats(1e-9, 4e-6))
def test_parallel_capacitance_gives_the_self_resonance_back(kit: Kit, inductance_h: float):
    capacitance_f = kit.inductor.parallel_capacitance_f(inductance_h)
    resonance_hz = 1 / (2 * math.pi * math.sqrt(inductance_h * capacitance_f))
    assert resonance_hz == pytest.approx(kit.inductor.self_resonance_hz(inductance_h), rel=1e-12)
    assert 0.03e-12 < capacitance_f < 1e-12


@given(kits, st.floats(1e7, 3e9), st.floats(1e-12, 1e-9))
def test_capacitor_q_is_reactance_over_resistance(kit: Kit, frequency_hz: float, capacitance_f: float):
    reactance = 1 / (2 * math.pi * frequency_hz * capacitance_f)
    q = float(kit.capacitor.q(capacitance_f, frequency_hz))
    assert q == pytest.approx(reactance / float(kit.capacitor.resistance_ohm(capacitance_f, frequency_hz)), rel=1e-12)
    assert q < 1 / kit.capacitor.dissipation


@given(kits, st.floats(1e7, 3e9), st.floats(5.0, 500.0))
def test_resonator_q_is_below_both_of_its_parts(kit: Kit, frequency_hz: float, reactance_ohm: float):
    capacitance_f = 1 / (2 * math.pi * frequency_hz * reactance_ohm)
    q_l, q_c = float(kit.inductor.q(frequency_hz)), float(kit.capacitor.q(capacitance_f, frequency_hz))
    q = kit.unloaded_q(frequency_hz, reactance_ohm)
    assert q < min(q_l, q_c)
    assert 1 / q == pytest.approx(1 / q_l + 1 / q_c, rel=1e-12)


@given(kits, st.floats(1e7, 3e9), st.floats(1.01, 3.0))
def test_inductor_q_grows_until_it_is_capped(kit: Kit, frequency_hz: float, step: float):
    low, high = kit.inductor.q(np.array([frequency_hz, frequency_hz * step]))
    assert low <= high <= kit.inductor.q_most


# common practice, no source (memory): 5 % inductors with 2 % capacitors make 3.5 %, five times that untuned
@pytest.mark.parametrize("kit", [kit for kit in KITS.values() if not kit.tuned], ids=lambda kit: kit.name)
def test_bandwidth_floor_from_tolerance_or_drift(kit: Kit):
    assert kit.resonator_tolerance == pytest.approx(0.035)
    assert kit.bandwidth_floor(tuned=False, drift=0.01) == pytest.approx(0.175)
    assert kit.bandwidth_floor(tuned=True, drift=0.01) == pytest.approx(0.03)


def test_a_kit_of_trimmers_is_always_tuned():
    kit = KITS["chip-trimmer"]
    assert [kit.name for kit in KITS.values() if kit.tuned] == ["chip-trimmer"]
    assert kit.bandwidth_floor(tuned=False, drift=0.01) == kit.bandwidth_floor(tuned=True, drift=0.01) == 0.03
    assert kit.capacitor.continuous


def test_smaller_parts_have_smaller_strays():
    # common practice, no source (memory)
    small, middle, large = (KITS[name] for name in ("chip-0402", "chip-0603", "chip-0805"))
    for less, more in ((small, middle), (middle, large)):
        assert less.inductor.mounting_h < more.inductor.mounting_h
        assert less.capacitor.inductance_h < more.capacitor.inductance_h
        assert less.board.pad_f < more.board.pad_f
        assert less.board.via_h < more.board.via_h
        assert less.board.shared_via_h <= more.board.shared_via_h
        assert float(less.inductor.q(100e6)) < float(more.inductor.q(100e6))


@pytest.mark.parametrize("frequency_hz", [50e6, 150e6, 500e6, 1e9])
def test_air_wound_resonators_lose_least_and_trimmers_most(frequency_hz: float):
    # common practice, no source (memory)
    found = {name: KITS[name].unloaded_q(frequency_hz) for name in ("chip-trimmer", "chip-0805", "air-wound")}
    assert found["chip-trimmer"] < found["chip-0805"] < found["air-wound"]


# published: H. Johnson, M. Graham, "High-Speed Digital Design", 1993, ch. 7: one via has 5.08 h (ln(4h/d) + 1) nH,
# h and d in inches; independent: two side by side are between a half and one of it
@pytest.mark.parametrize(
    "name, height_mm, diameter_mm",
    [("chip-0402", 0.3, 0.25), ("chip-0603", 0.5, 0.3), ("chip-0805", 0.8, 0.3), ("chip-1008", 0.8, 0.3)],
)
def test_via_inductance_is_that_of_two_vias(name: str, height_mm: float, diameter_mm: float):
    height, diameter = height_mm / 25.4, diameter_mm / 25.4
    one_h = 5.08e-9 * height * (math.log(4 * height / diameter) + 1)
    assert 0.5 * one_h < KITS[name].board.via_h < one_h


@pytest.mark.parametrize("kit", KITS.values(), ids=lambda kit: kit.name)
def test_ratings_drift_and_shared_vias_are_stated(kit: Kit):
    # common practice, no source (memory)
    assert 10e-6 < kit.inductor.temperature_per_k <= 150e-6
    assert 0 < kit.capacitor.temperature_per_k <= 500e-6
    assert 0.3 <= kit.inductor.current_a <= 5
    assert 50 <= kit.capacitor.voltage_v <= 500
    assert 10e-12 <= kit.board.shared_via_h <= 0.2 * kit.board.via_h
    assert not kit.inductor.parallel
    assert kit.capacitor.parallel is not kit.capacitor.continuous


def test_resonator_tolerance_is_the_worst_shift_of_the_resonance():
    # independent: f = 1/(2π sqrt(LC)) with both parts off by their tolerance, to first order
    kit = KITS["chip-0603"]
    shift = 1 - 1 / math.sqrt((1 + kit.inductor.tolerance) * (1 + kit.capacitor.tolerance))
    assert kit.resonator_tolerance == pytest.approx(shift, rel=0.06)


@pytest.mark.parametrize("kit", KITS.values(), ids=lambda kit: kit.name)
def test_grids_span_the_ranges(kit: Kit):
    rows = [(kit.inductor.values_h(), kit.inductor.smallest_h, kit.inductor.largest_h)]
    if not kit.capacitor.continuous:
        rows.append((kit.capacitor.values_f(), kit.capacitor.smallest_f, kit.capacitor.largest_f))
    for values, smallest, largest in rows:
        assert smallest <= values[0] < smallest * 1.25
        assert largest / 1.25 < values[-1] <= largest
