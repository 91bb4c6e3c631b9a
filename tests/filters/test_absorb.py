"""Absorbing strays: hand arithmetic, scaling, and random filters judged by the scalar recursion."""

import dataclasses
import re

import numpy as np
import pytest
from absorb_designs import band_centre_hz, designs, lossless_return_loss_db, random_design
from built_circuits import KITS, kits, without_losses, without_strays
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from harmonic_planner.filters.absorb import CENTRE_LIMIT, RETURN_LOSS_LIMIT_DB, absorb
from harmonic_planner.filters.arms import arrangements, turned, turning_arms
from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.circuit import Circuit, CircuitError, Element
from harmonic_planner.filters.misfit import RETURN_LOSS_WORTH_DB
from harmonic_planner.filters.response import sweep
from harmonic_planner.filters.topologies import REGISTRY
from harmonic_planner.model import PlannerError
from harmonic_planner.physics.prototypes import Prototype

KIT = KITS["chip-0603"]
STRAYS = re.compile(r"\b([LC]\w+) .*(pads|mounting|via|across|in series)|(pads|mounting|via|across).* ([LC]\w+)")


def values(circuit: Circuit) -> dict[str, float]:
    return {element.ref: element.value for element in circuit.elements}


def a_ladder(order: int, name: str = "ladder-series", *, bandwidth: float = 0.2, centre_hz: float = 240e6) -> Circuit:
    prototype = Prototype("chebyshev", order, 0.1)
    return REGISTRY[name].design(prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=50.0)


def with_board(kit, **board):
    bare = without_strays(kit)
    return dataclasses.replace(bare, board=dataclasses.replace(bare.board, **board))


# ------------------------------------------------------------------------------------- by hand


def test_pads_on_a_shunt_resonator_come_off_its_capacitor():
    # independent: by hand, two parts on one node, 2 × 0.1 pF beside C
    ideal = a_ladder(1, "ladder-shunt")
    found = absorb(ideal, with_board(KIT, pad_f=0.1e-12), passband_hz=(230e6, 250e6))
    assert found.problem == ""
    assert values(found.circuit)["C1"] == pytest.approx(values(ideal)["C1"] - 0.2e-12, rel=1e-6)
    assert values(found.circuit)["L1"] == pytest.approx(values(ideal)["L1"], rel=1e-6)


def test_mounting_of_a_series_resonator_comes_off_its_inductor():
    # independent: by hand, 0.15 nH of mounting and 0.5 nH of the capacitor in series with L
    ideal = a_ladder(1, "ladder-series")
    bare = without_strays(KIT)
    kit = dataclasses.replace(
        bare,
        inductor=dataclasses.replace(bare.inductor, mounting_h=0.15e-9),
        capacitor=dataclasses.replace(bare.capacitor, inductance_h=0.5e-9),
    )
    found = absorb(ideal, kit, passband_hz=(230e6, 250e6))
    assert values(found.circuit)["L1"] == pytest.approx(values(ideal)["L1"] - 0.65e-9, rel=1e-6)
    assert values(found.circuit)["C1"] == pytest.approx(values(ideal)["C1"], rel=1e-6)


def test_a_value_below_zero_names_the_stray():
    # independent: by hand, 2 × 20 pF of pads on the node of a capacitor of a few pF
    ideal = a_ladder(1, "ladder-shunt", bandwidth=1.0)
    capacitance_f = values(ideal)["C1"]
    assert capacitance_f < 40e-12
    found = absorb(ideal, with_board(KIT, pad_f=20e-12), passband_hz=(230e6, 250e6))
    named = re.fullmatch(r"C1 would have to be -([\d.]+) pF: 40 pF of pads stand on its node", found.problem)
    assert named is not None, found.problem
    assert float(named[1]) == pytest.approx(40 - capacitance_f * 1e12, rel=0.005)
    assert values(found.circuit)["C1"] > 0


def test_pads_inside_a_series_arm_transform_by_one_less_bx():
    # independent: by hand, the product of the four matrices in the module's text at resonance
    arm = (Element("L1", "L", ("in", "n1"), 60e-9), Element("C1", "C", ("n1", "out"), 1 / (4e18 * 60e-9)))
    circuit = Circuit("arm", arm, centre_hz=2e9 / (2 * np.pi), source_ohm=50.0, load_ohm=50.0)
    kit = without_losses(with_board(KIT, pad_f=0.2e-12))
    reactance, inner, port = 2e9 * 60e-9, 2e9 * 0.4e-12, 2e9 * 0.2e-12
    pad = np.array([[1, 0], [1j * port, 1]])
    bx = inner * reactance
    inside = np.array([[1 - bx, 1j * inner * reactance**2], [1j * inner, 1 + bx]])
    (a, b), (c, d) = pad @ inside @ pad
    expected = 2 / (a + b / 50 + c * 50 + d)
    assert sweep_built(circuit, circuit.centre_hz, kit=kit).s21[0] == pytest.approx(expected, rel=1e-9)
    backwards = turned(circuit, 0)
    assert backwards.elements[0] == Element("C1", "C", ("in", "n1"), arm[1].value)
    assert backwards.elements[1] == Element("L1", "L", ("n1", "out"), arm[0].value)


def test_series_arms_are_made_to_alternate():
    ideal = a_ladder(5)
    ways = arrangements(ideal)
    firsts = [[way.elements[place].ref for place in turning_arms(ideal)] for way in ways]
    assert firsts == [["L1", "C3", "L5"], ["C1", "L3", "C5"]]
    frequency = ideal.centre_hz * np.linspace(0.5, 2, 21)
    for way in ways:
        assert values(way) == values(ideal)
        assert sweep(way, frequency).s21 == pytest.approx(sweep(ideal, frequency).s21, rel=1e-9)
        assert {way.elements[place].ref for place in turning_arms(way)} <= set(values(ideal))


def test_arms_that_capacitors_couple_stay():
    prototype = Prototype("chebyshev", 3, 0.1)
    series = REGISTRY["series-capacitive"].design(prototype, centre_hz=240e6, bandwidth=0.1, impedance_ohm=50.0)
    assert len(turning_arms(series)) == 3
    assert arrangements(series) == (series,)


# ------------------------------------------------------------------------------------- properties


@settings(deadline=None, max_examples=25)
@given(st.integers(0, 2**32 - 1), st.sampled_from(sorted(REGISTRY)))
def test_without_strays_nominal_is_ideal(seed: int, name: str):
    design = random_design(np.random.default_rng(seed), name)
    assume(design is not None)
    found = absorb(design.ideal, without_strays(design.kit), passband_hz=design.passband_hz)
    assert found.problem == ""
    assert values(found.circuit) == pytest.approx(values(design.ideal), rel=1e-6)
    assert found.centre_error == pytest.approx(0.0, abs=1e-6)


@settings(deadline=None, max_examples=10)
@given(st.floats(0.2, 5.0), st.sampled_from(["ladder-series", "capacitive", "inductive", "low-pass"]))
def test_frequency_and_strays_scaled_together_scale_the_values(factor: float, name: str):
    def absorbed(scale: float):
        inductor = dataclasses.replace(
            KIT.inductor,
            mounting_h=KIT.inductor.mounting_h / scale,
            self_resonance_reference_hz=KIT.inductor.self_resonance_reference_hz * scale,
            self_resonance_reference_h=KIT.inductor.self_resonance_reference_h / scale,
        )
        capacitor = dataclasses.replace(KIT.capacitor, inductance_h=KIT.capacitor.inductance_h / scale)
        board = type(KIT.board)(
            via_h=KIT.board.via_h / scale,
            pad_f=KIT.board.pad_f / scale,
            shared_via_h=KIT.board.shared_via_h / scale,
        )
        kit = dataclasses.replace(KIT, inductor=inductor, capacitor=capacitor, board=board)
        ideal = a_ladder(3, name, centre_hz=240e6 * scale, bandwidth=0.15)
        return absorb(ideal, kit, passband_hz=(225e6 * scale, 255e6 * scale))

    plain, scaled = absorbed(1.0), absorbed(factor)
    expected = {ref: value / factor for ref, value in values(plain.circuit).items()}
    # what the response leaves free, the inductors of coupled resonators, rests on rounding; the response does not
    if name in ("ladder-series", "low-pass"):
        assert values(scaled.circuit) == pytest.approx(expected, rel=1e-4)
    assert scaled.centre_error == pytest.approx(plain.centre_error, abs=1e-5)
    assert scaled.return_loss_change_db == pytest.approx(plain.return_loss_change_db, abs=0.01)
    assert scaled.problem == plain.problem == ""


@settings(deadline=None, max_examples=25)
@given(st.integers(0, 2**32 - 1), st.sampled_from(sorted(REGISTRY)), kits, st.floats(1.0, 30.0))
def test_what_cannot_be_absorbed_names_element_and_stray(seed: int, name: str, kit, much: float):
    design = random_design(np.random.default_rng(seed), name)
    assume(design is not None)
    board = dataclasses.replace(kit.board, pad_f=kit.board.pad_f * much, via_h=kit.board.via_h * much)
    found = absorb(design.ideal, dataclasses.replace(kit, board=board), passband_hz=design.passband_hz)
    assert all(value > 0 for value in values(found.circuit).values())
    if found.problem:
        named = STRAYS.search(found.problem)
        assert named is not None, found.problem
        assert (named[1] or named[4]) in values(design.ideal)
    else:
        assert abs(found.centre_error) <= CENTRE_LIMIT
        assert found.return_loss_change_db >= -RETURN_LOSS_LIMIT_DB


# ------------------------------------------------------------------------------------- random filters


def test_random_filters_are_absorbed_or_say_why(long_mode: bool):
    # independent: return loss and centre by the scalar recursion; 0.3 % and 2 dB are what is asked for
    sample = designs(100, seed=20250101)[:: 1 if long_mode else 4]
    good = 0
    for design in sample:
        found = absorb(design.ideal, design.kit, passband_hz=design.passband_hz)
        ideal_db = lossless_return_loss_db(design.ideal, None, design.passband_hz)
        built_db = lossless_return_loss_db(found.circuit, design.kit, design.passband_hz)
        change_db = min(built_db, RETURN_LOSS_WORTH_DB) - min(ideal_db, RETURN_LOSS_WORTH_DB)
        assert found.return_loss_change_db == pytest.approx(change_db, abs=1e-6)
        if found.problem:
            assert STRAYS.search(found.problem)
            continue
        good += 1
        assert change_db >= -RETURN_LOSS_LIMIT_DB
        centre_hz = band_centre_hz(found.circuit, design.kit, design.passband_hz)
        error = centre_hz / band_centre_hz(design.ideal, None, design.passband_hz) - 1
        assert error == pytest.approx(found.centre_error, abs=1e-5)
        assert abs(error) <= CENTRE_LIMIT
    assert good >= 0.85 * len(sample)  # regression, unconfirmed


def test_alternating_arms_make_a_ladder_absorbable():
    # regression, unconfirmed: drawn alike, the five-resonator ladder loses more than 2 dB
    ideal = a_ladder(5, bandwidth=0.12)
    found = absorb(ideal, KIT, passband_hz=(228e6, 252e6))
    assert found.problem == ""
    assert [found.circuit.elements[place].kind for place in turning_arms(found.circuit)] in ([*"LCL"], [*"CLC"])


# ------------------------------------------------------------------------------------- refusals


def test_a_passband_must_ascend():
    with pytest.raises(PlannerError, match="passband_hz"):
        absorb(a_ladder(3), KIT, passband_hz=(250e6, 230e6))


def test_a_bridged_circuit_is_refused():
    bridged = Circuit(
        "bridged",
        (
            Element("L1", "L", ("in", "a"), 1e-8),
            Element("L2", "L", ("a", "out"), 1e-8),
            Element("C1", "C", ("in", "out"), 1e-12),
        ),
        centre_hz=240e6,
        source_ohm=50.0,
        load_ohm=50.0,
    )
    with pytest.raises(CircuitError, match="not a ladder"):
        absorb(bridged, KIT, passband_hz=(230e6, 250e6))
