"""Response as built: two methods, scikit-rf, a circuit simulator, energy balance, reciprocity, closed forms."""

import functools
import math
import subprocess
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import skrf
from built_circuits import around, kits, random_ladders, without_losses, without_strays
from conftest import external_program
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq

from harmonic_planner.filters import topologies
from harmonic_planner.filters.built_response import nodal_built, rejection_built_db, sweep_built
from harmonic_planner.filters.circuit import Circuit, CircuitError, Element
from harmonic_planner.filters.response import Response, rejection_db, sweep
from harmonic_planner.filters.strays import primitives
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Kit, load_kit
from harmonic_planner.physics.prototypes import Prototype

KIT = load_kit("chip-0603", Path())


def bandpass(name: str, order: int, centre_hz: float = 240e6, bandwidth: float = 0.2) -> Circuit:
    return topologies.design(
        name, Prototype("butterworth", order), centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=50.0
    )


@settings(deadline=None)
@given(random_ladders(), kits, st.booleans())
def test_ladder_recursion_and_nodal_solution_agree(circuit: Circuit, kit: Kit, frozen: bool):
    at_hz = circuit.centre_hz if frozen else None
    ladder, nodal = (method(circuit, around(circuit), kit=kit, frozen_at_hz=at_hz) for method in ROADS)
    # relative accuracy of the nodal solution is lost beyond some 200 dB
    seen = ladder.attenuation_db < 200
    assert ladder.attenuation_db[seen] == pytest.approx(nodal.attenuation_db[seen], abs=1e-6)
    assert np.abs(ladder.s11 - nodal.s11).max() < 1e-8


ROADS = (sweep_built, nodal_built)


@pytest.mark.parametrize("frozen_at_hz", [None, 240e6])
@pytest.mark.parametrize("name", list(topologies.REGISTRY))
@settings(deadline=None, max_examples=10)
@given(order=st.sampled_from([1, 3, 5]), kit=kits, centre_hz=st.floats(50e6, 2e9))
def test_both_roads_agree_for_every_topology(name: str, frozen_at_hz, order: int, kit: Kit, centre_hz: float):
    circuit = bandpass(name, order, centre_hz)
    ladder, nodal = (method(circuit, around(circuit), kit=kit, frozen_at_hz=frozen_at_hz) for method in ROADS)
    seen = ladder.attenuation_db < 200
    assert ladder.attenuation_db[seen] == pytest.approx(nodal.attenuation_db[seen], abs=1e-6)
    assert np.abs(ladder.s11 - nodal.s11).max() < 1e-8


@settings(deadline=None)
@given(random_ladders(), kits)
def test_some_power_is_missing_everywhere(circuit: Circuit, kit: Kit):
    found = sweep_built(circuit, around(circuit), kit=kit)
    assert np.all(found.dissipation > 0)
    assert np.all(found.dissipation < 1)


@settings(deadline=None)
@given(random_ladders(), kits)
def test_without_loss_strays_reflect_or_transmit_all_power(circuit: Circuit, kit: Kit):
    found = sweep_built(circuit, around(circuit), kit=without_losses(kit))
    assert found.dissipation == pytest.approx(0.0, abs=1e-9)


@settings(deadline=None)
@given(random_ladders(), kits)
def test_transmission_is_the_same_both_ways(circuit: Circuit, kit: Kit):
    forward = sweep_built(circuit, around(circuit), kit=kit)
    backward = sweep_built(circuit.reversed(), around(circuit), kit=kit)
    assert np.abs(forward.s21 / backward.s21 - 1).max() < 1e-8


@settings(deadline=None)
@given(random_ladders(), kits)
def test_without_strays_it_is_the_response_of_the_elements(circuit: Circuit, kit: Kit):
    frequency = around(circuit)
    lossy, lossless = sweep_built(circuit, frequency, kit=without_strays(kit)), sweep(circuit, frequency)
    assert np.abs(lossy.s21 / sweep(circuit, frequency, kit=kit).s21 - 1).max() < 1e-9
    bare = sweep_built(circuit, frequency, kit=without_strays(without_losses(kit)))
    assert np.abs(bare.s21 / lossless.s21 - 1).max() < 1e-8


@settings(deadline=None)
@given(random_ladders(), kits)
def test_frozen_losses_are_exact_at_their_own_frequency(circuit: Circuit, kit: Kit):
    at_hz = circuit.centre_hz
    free, frozen = (sweep_built(circuit, at_hz, kit=kit, frozen_at_hz=at) for at in (None, at_hz))
    assert free.s21 == frozen.s21
    assert free.s11 == frozen.s11


class OutsideModel:
    """The stray model written down anew with scikit-rf's lumped parts; numbers of the 0603 kit typed in."""

    def __init__(self, frequency_hz: np.ndarray) -> None:
        frequency = skrf.Frequency.from_f(frequency_hz, unit="Hz")
        self.media = skrf.media.DefinedGammaZ0(frequency, z0=50.0)
        self.hz = frequency_hz

    def part(self, element: Element) -> skrf.Network:
        """Two-port of a part as mounted."""
        media, value = self.media, element.value
        if element.kind == "C":
            resistance = 0.0003 / (2 * np.pi * self.hz * value) + 0.10 * np.sqrt(self.hz / 500e6)
            return media.capacitor(value) ** media.resistor(resistance) ** media.inductor(0.5e-9)
        q = np.minimum(40 * np.sqrt(self.hz / 250e6), 75)
        resonance = 1.4e9 * (value / 100e-9) ** -0.535
        winding = media.inductor(value) ** media.resistor(2 * np.pi * self.hz * value / q)
        across = media.capacitor(1 / ((2 * np.pi * resonance) ** 2 * value))
        both = winding.copy()
        both.y = winding.y + across.y
        return both ** media.inductor(0.15e-9)

    def to_ground(self, elements: list[Element]) -> skrf.Network:
        """Two-port of the parts from a node to ground, all behind their vias, two or more behind 20 pH in common."""
        media = self.media
        branches = [self.part(e) ** media.inductor(0.20e-9) ** media.short() for e in elements]
        group = functools.reduce(lambda one, other: media.shunt(one) ** other, branches)
        return media.shunt(media.inductor(20e-12) ** group if len(branches) > 1 else group)

    def pads(self, count: int) -> skrf.Network:
        return self.media.shunt_capacitor(count * 0.10e-12)


def test_strays_composed_of_lumped_parts_in_scikit_rf():
    # independent: scikit-rf joins and cascades the parts; shunt ladder of order 3 with series arms of L and C
    circuit = bandpass("ladder-shunt", 3)
    frequency = around(circuit, 61)
    l1, c1, l2, c2, l3, c3 = circuit.elements
    outside = OutsideModel(frequency)
    chain = [
        outside.pads(3), outside.to_ground([l1, c1]), outside.part(l2),
        outside.pads(2), outside.part(c2),
        outside.pads(3), outside.to_ground([l3, c3]),
    ]  # fmt: skip
    network = functools.reduce(lambda left, right: left**right, chain)
    found = sweep_built(circuit, frequency, kit=KIT)
    assert np.abs(found.s21 / network.s[:, 1, 0] - 1).max() < 1e-7
    assert np.abs(found.s11 - network.s[:, 0, 0]).max() < 1e-9


def test_coupled_shunt_resonators_composed_of_lumped_parts_in_scikit_rf():
    circuit = Circuit(
        "coupled",
        (
            Element("C01", "C", ("in", "n1"), 3e-12),
            Element("L1", "L", ("n1", "0"), 8.2e-9),
            Element("C1", "C", ("n1", "0"), 4e-12),
            Element("C12", "C", ("n1", "n2"), 0.8e-12),
            Element("L2", "L", ("n2", "0"), 8.2e-9),
            Element("C2", "C", ("n2", "0"), 4e-12),
            Element("C23", "C", ("n2", "out"), 3e-12),
        ),
        centre_hz=600e6,
        source_ohm=50.0,
        load_ohm=50.0,
    )
    frequency = around(circuit, 61)
    outside = OutsideModel(frequency)
    c01, l1, c1, c12, l2, c2, c23 = circuit.elements
    chain = [
        outside.pads(1), outside.part(c01),
        outside.pads(4), outside.to_ground([l1, c1]), outside.part(c12),
        outside.pads(4), outside.to_ground([l2, c2]), outside.part(c23), outside.pads(1),
    ]  # fmt: skip
    network = functools.reduce(lambda left, right: left**right, chain)
    found = sweep_built(circuit, frequency, kit=KIT)
    assert np.abs(found.s21 / network.s[:, 1, 0] - 1).max() < 1e-7
    assert np.abs(found.s11 - network.s[:, 0, 0]).max() < 1e-9


def test_20_ph_in_common_are_a_floor_of_38_db_at_2p4_ghz():
    # independent: two short circuits behind 20 pH, S21 = 2Z/(50 + 2Z) with Z = j 0.3016 ohm
    kit = without_strays(without_losses(KIT))
    kit = replace(kit, board=replace(kit.board, shared_via_h=20e-12))
    huge = tuple(Element(ref, "C", ("in", "0"), 1e-6) for ref in ("C1", "C2"))
    circuit = Circuit("floor", huge, centre_hz=2.4e9, source_ohm=50.0, load_ohm=50.0, output="in")
    z = 2j * math.pi * 2.4e9 * 20e-12
    expected = -20 * math.log10(abs(2 * z / (50 + 2 * z)))
    assert expected == pytest.approx(38.4, abs=0.05)
    assert sweep_built(circuit, 2.4e9, kit=kit).attenuation_db[0] == pytest.approx(expected, abs=0.01)
    assert nodal_built(circuit, 2.4e9, kit=kit).attenuation_db[0] == pytest.approx(expected, abs=0.01)


def test_a_chip_inductor_blocks_at_its_self_resonance_and_passes_above():
    # common practice, no source: what the ideal ladder does not know
    circuit = Circuit("choke", (Element("L1", "L", ("in", "out"), 100e-9),), 240e6, 50.0, 50.0)
    frequency = np.geomspace(0.2e9, 12e9, 400)
    built, ideal = sweep_built(circuit, frequency, kit=KIT), sweep(circuit, frequency)
    assert frequency[np.argmax(built.attenuation_db)] == pytest.approx(1.4e9, rel=0.02)
    assert built.attenuation_db[-1] < ideal.attenuation_db[-1] - 20


def test_strays_pull_a_resonator_down():
    # independent: susceptances of the two mounted branches and the pads, written out by hand, cancel at 228 MHz
    circuit, kit = bandpass("ladder-shunt", 1), without_losses(KIT)
    inductance, capacitance = (element.value for element in circuit.elements)
    across = kit.inductor.parallel_capacitance_f(inductance)

    def susceptance(frequency_hz: float) -> float:
        omega = 2 * math.pi * frequency_hz
        winding = omega * inductance / (1 - omega**2 * inductance * across)
        mounted = omega * 0.7e-9 - 1 / (omega * capacitance)
        return 2 * omega * 0.1e-12 - 1 / (winding + omega * 0.35e-9) - 1 / mounted

    resonance = float(brentq(susceptance, 200e6, 260e6))
    frequency = np.linspace(resonance - 1e6, resonance + 1e6, 2001)
    found = frequency[np.argmin(sweep_built(circuit, frequency, kit=kit).attenuation_db)]
    assert found == pytest.approx(resonance, rel=2e-5)
    assert resonance < 0.97 * 240e6


def test_a_trap_to_ground_has_a_nodal_solution_only():
    # independent: series L and C to ground as built, two shunt branches put together by hand
    circuit = Circuit(
        "trap",
        (Element("L1", "L", ("in", "mid"), 10e-9), Element("C1", "C", ("mid", "0"), 4e-12)),
        centre_hz=800e6,
        source_ohm=50.0,
        load_ohm=50.0,
        output="in",
    )
    frequency = np.geomspace(1e8, 4e9, 31)
    s = 2j * np.pi * frequency
    q = np.minimum(40 * np.sqrt(frequency / 250e6), 75)
    winding = s * 10e-9 * (1 - 1j / q)
    across = 1 / ((2 * np.pi * 1.4e9 * 0.1**-0.535) ** 2 * 10e-9)
    inductor = 1 / (1 / winding + s * across) + s * 0.15e-9
    resistance = 0.0003 / (2 * np.pi * frequency * 4e-12) + 0.1 * np.sqrt(frequency / 500e6)
    capacitor = 1 / (s * 4e-12) + resistance + s * 0.7e-9
    branch = inductor + 1 / (1 / capacitor + s * 0.2e-12)
    total = 1 / (1 / branch + s * 0.1e-12)
    assert np.abs(nodal_built(circuit, frequency, kit=KIT).s21 - 2 * total / (50 + 2 * total)).max() < 1e-12


@pytest.mark.parametrize("method", ROADS)
def test_faults_are_named(method):
    circuit = bandpass("ladder-series", 1)
    for frequency in (0.0, -1e9, math.nan, [[1e9]]):
        with pytest.raises(PlannerError, match="frequency_hz"):
            method(circuit, frequency, kit=KIT)
    for at_hz in (0.0, math.nan, math.inf):
        with pytest.raises(PlannerError, match="frozen_at_hz"):
            method(circuit, 1e9, kit=KIT, frozen_at_hz=at_hz)
    floating = replace(circuit, elements=(*circuit.elements, Element("C9", "C", ("x", "0"), 1e-12)))
    with pytest.raises(CircuitError):
        method(floating, 1e9, kit=KIT)


def test_rejection_as_built_without_strays_is_the_elements_own():
    circuit, kit = bandpass("ladder-shunt", 3), without_strays(KIT)
    lines = {"line_low_hz": [118.8e6, 356.4e6], "line_high_hz": [121.2e6, 363.6e6]}
    built = rejection_built_db(circuit, kit=kit, passband_hz=(237.6e6, 242.4e6), drift=0.01, **lines)
    assert built == pytest.approx(
        rejection_db(circuit, kit=KIT, passband_hz=(237.6e6, 242.4e6), drift=0.01, **lines), abs=1e-9
    )
    strays = rejection_built_db(circuit, kit=KIT, passband_hz=(237.6e6, 242.4e6), drift=0.01, **lines)
    assert np.abs(strays - built).max() > 0.3


@pytest.mark.parametrize("order", [1, 2, 3, 5])
def test_group_delay_at_midband_is_the_prototypes(order: int):
    # independent: the phase of a Butterworth low-pass starts with slope Σ sin((2k−1)π/2n) = 1/sin(π/2n) per Ω, and
    # Ω has the slope 2/(Δ f0) at the centre
    circuit = bandpass("ladder-shunt", order)
    frequency = 240e6 * np.linspace(0.999, 1.001, 21)
    delay = sweep(circuit, frequency).group_delay_s
    expected = 2 / (0.2 * 2 * math.pi * 240e6) / math.sin(math.pi / (2 * order))
    assert delay[10] == pytest.approx(expected, rel=1e-4)


def test_group_delay_of_a_sampled_line_is_its_length_whatever_the_wraps():
    frequency = np.linspace(1e8, 2e9, 100)
    line = Response(frequency, np.exp(-2j * np.pi * frequency * 7e-9), np.zeros(100, dtype=complex))
    assert line.group_delay_s == pytest.approx(7e-9, rel=1e-9)
    assert line.dissipation == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize("frequency", [[1e9, 2e9], [1e9, 3e9, 2e9]])
def test_group_delay_needs_three_frequencies_in_order(frequency):
    values = np.ones(len(frequency), dtype=complex)
    with pytest.raises(PlannerError, match="three frequencies, ascending"):
        _ = Response(np.array(frequency), values, values).group_delay_s


@pytest.mark.external
@pytest.mark.parametrize(("name", "order", "kit_name"), [
    ("ladder-series", 3, "chip-1008"),
    ("ladder-shunt", 5, "chip-0603"),
])  # fmt: skip
def test_a_circuit_simulator_finds_the_same_response(tmp_path: Path, name: str, order: int, kit_name: str):
    # independent: ngspice's AC analysis of the primitives, losses frozen at the centre on both sides
    kit, circuit = load_kit(kit_name, Path()), bandpass(name, order)
    low, high, points = 24e6, 2.4e9, 101
    lines = [f"{p.name} {p.nodes[0]} {p.nodes[1]} {p.value:.17g}" for p in primitives(circuit, kit, at_hz=240e6)]
    deck = "\n".join(
        [
            "as built",
            "V0 emf 0 AC 1",
            "RS emf in 50",
            "RL out 0 50",
            *lines,
            ".control",
            "set numdgt=15",
            f"ac lin {points} {low:.17g} {high:.17g}",
            "wrdata found.txt v(out)",
            "quit",
            ".endc",
            ".end",
        ]
    )
    (tmp_path / "deck.cir").write_text(deck + "\n", encoding="utf-8")
    subprocess.run(
        [external_program("ngspice"), "-b", "deck.cir"], cwd=tmp_path, check=True, capture_output=True, timeout=60
    )
    table = np.loadtxt(tmp_path / "found.txt")
    s21 = 2 * (table[:, 1] + 1j * table[:, 2])
    found = sweep_built(circuit, np.linspace(low, high, points), kit=kit, frozen_at_hz=240e6)
    difference = np.abs(found.attenuation_db + 20 * np.log10(np.abs(s21)))
    assert difference[found.attenuation_db < 100].max() < 1e-6
