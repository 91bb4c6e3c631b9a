"""What all coupled-resonator topologies share: the band is met at any width, refusals, feasible resonators."""

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.response import nodal_sweep, sweep
from harmonic_planner.filters.topologies import TopologyError, capacitive, coupled, inductive, series_capacitive
from harmonic_planner.filters.topologies.network import NetworkError, band_edges, characteristic, textbook
from harmonic_planner.filters.topologies.tuning import slope_limits, tune
from harmonic_planner.physics.prototypes import Prototype

MODULES = (capacitive, inductive, series_capacitive)


def prototypes(least_order: int = 3, most_order: int = 7) -> st.SearchStrategy[Prototype]:
    return st.builds(
        Prototype,
        st.sampled_from(["butterworth", "chebyshev"]),
        st.integers(least_order, most_order),
        st.floats(0.01, 0.5),
    )


def between(ends: tuple[float, float], share: float) -> float:
    return ends[0] * (ends[1] / ends[0]) ** share


def band(circuit: Circuit, bandwidth: float, points: int = 401) -> np.ndarray:
    return circuit.centre_hz * np.geomspace(*band_edges(bandwidth), points)


specs = st.fixed_dictionaries({"centre_hz": st.floats(3e7, 3e9), "impedance_ohm": st.floats(10.0, 200.0)})


@settings(deadline=None, max_examples=60)
@given(st.sampled_from(MODULES), prototypes(), specs, st.floats(0.02, 0.3), st.floats(0.15, 0.7))
def test_return_loss_and_band_edges_are_the_prototypes_at_any_width(module, prototype, spec, bandwidth, share):
    # independent: the ladder recursion against the prototype's definition, ripple or 3 dB at both edges. |S11/S21| is
    # promised to 1 % of the ripple factor.
    spec |= {"bandwidth": bandwidth}
    circuit = module.design(prototype, **spec, resonator=between(module.feasible_resonator(prototype, **spec), share))
    response = sweep(circuit, band(circuit, bandwidth))
    loss, ratio = response.attenuation_db, np.abs(response.s11 / response.s21) / prototype.epsilon
    assert ratio[[0, -1]] == pytest.approx([1.0, 1.0], abs=0.0101)
    assert ratio.max() <= 1.0101
    if prototype.family == "chebyshev":
        assert (np.diff(np.sign(np.diff(loss))) != 0).sum() == 2 * prototype.order - 1
    else:  # one trough, down from the lower edge and up to the upper one
        assert (np.diff(np.sign(np.diff(loss[ratio > 0.02]))) != 0).sum() <= 1


@settings(deadline=None, max_examples=60)
@given(st.sampled_from(MODULES), prototypes(1, 9), specs, st.floats(0.01, 0.3), st.floats(0.0, 1.0))
def test_every_resonator_in_the_feasible_range_designs(module, prototype, spec, bandwidth, share):
    spec |= {"bandwidth": bandwidth}
    try:
        ends = module.feasible_resonator(prototype, **spec)
    except TopologyError:
        assume(False)
    circuit = module.design(prototype, **spec, resonator=between(ends, share))
    # Where no network has the prototype's response the nearest is taken, at most 1 dB worse in return loss.
    reflection = np.abs(sweep(circuit, band(circuit, bandwidth, 101)).s11).max()
    worst = prototype.epsilon * 10 ** (1.0 / 20)
    assert reflection <= worst / math.hypot(1.0, worst) * (1 + 1e-9)


@settings(deadline=None, max_examples=40)
@given(st.sampled_from(MODULES), prototypes(1, 9), specs, st.floats(0.01, 0.2))
def test_energy_and_reciprocity_and_the_nodal_solution(module, prototype, spec, bandwidth):
    try:
        circuit = module.design(prototype, **spec, bandwidth=bandwidth)
    except TopologyError:
        assume(False)
    frequency = circuit.centre_hz * np.geomspace(0.6, 1.7, 15)
    one, two, back = sweep(circuit, frequency), nodal_sweep(circuit, frequency), sweep(circuit.reversed(), frequency)
    assert np.abs(one.s11) ** 2 + np.abs(one.s21) ** 2 == pytest.approx(1.0, abs=1e-9)
    assert np.abs(one.s21 / two.s21 - 1).max() < 1e-6
    assert np.abs(one.s21 - back.s21).max() < 1e-6
    assert np.abs(one.s11 - back.s11).max() < 1e-5  # symmetric


@settings(deadline=None, max_examples=40)
@given(prototypes(), st.floats(0.02, 0.2), st.floats(0.2, 0.8))
def test_the_three_forms_are_one_network_mirrored_and_dual(prototype, bandwidth, share):
    # independent: f -> f0²/f turns C into L; the dual transmits alike and reflects the opposite between equal ends
    centre, ohm = 1e9, 50.0
    spec = {"centre_hz": centre, "bandwidth": bandwidth, "impedance_ohm": ohm}
    inductance = between(capacitive.feasible_resonator(prototype, **spec), share)
    one = capacitive.design(prototype, **spec, resonator=inductance)
    two = inductive.design(prototype, **spec, resonator=1 / ((2 * math.pi * centre) ** 2 * inductance))
    three = series_capacitive.design(prototype, **spec, resonator=two.elements[2].value * ohm**2)
    ratio = np.geomspace(0.5, 2.0, 31)
    direct, mirrored, dual = (sweep(c, centre * x) for c, x in ((one, ratio), (two, 1 / ratio), (three, 1 / ratio)))
    assert direct.attenuation_db == pytest.approx(mirrored.attenuation_db, rel=1e-6, abs=1e-7)
    assert np.abs(mirrored.s21 - dual.s21).max() < 1e-6
    assert np.abs(mirrored.s11 + dual.s11).max() < 1e-6


@settings(deadline=None)
@given(
    st.integers(1, 9),
    st.floats(0.2, 5.0),
    st.lists(st.floats(0.05, 3.0), min_size=10, max_size=10),
    st.lists(st.floats(0.05, 3.0), min_size=9, max_size=9),
)
def test_real_chains_give_the_ratio_of_reflection_to_transmission(order, slope, couplings, shunts):
    # independent: chain matrices in complex numbers; S11/S21 = (B - C)/2 for a symmetric network between 1 ohm
    half = [couplings[min(k, order - k)] for k in range(order + 1)]
    inside = [shunts[min(k, order - 1 - k)] for k in range(order)]
    x = np.array([0.7, 1.0, 1.3])
    for place, value in enumerate(characteristic(np.array(half), np.array(inside), slope, x)):
        chain = np.eye(2, dtype=complex)
        for k in range(order + 1):
            chain = chain @ np.array([[1, 1 / (1j * x[place] * half[k])], [0, 1]])
            if k < order:
                chain = chain @ np.array([[1, 0], [1j * (x[place] * inside[k] - slope / x[place]), 1]])
        expected = (chain[0, 1] - chain[1, 0]) / 2
        scale = np.abs(chain).max()
        assert abs(1j * value - expected) < 1e-9 * scale


def test_slope_limits_are_where_a_part_vanishes():
    prototype = Prototype("butterworth", 3)
    low, high = slope_limits(prototype, bandwidth=0.1)
    with pytest.raises(NetworkError) as least:
        tune(prototype, bandwidth=0.1, slope=low * 0.9)
    with pytest.raises(NetworkError) as most:
        tune(prototype, bandwidth=0.1, slope=high * 1.01)
    assert (least.value.part, least.value.index, least.value.reason) == ("shunt", 1, "negative")
    assert (most.value.part, most.value.index, most.value.reason) == ("coupling", 0, "infinite")
    with pytest.raises(NetworkError):
        textbook(prototype, bandwidth=0.1, slope=low * 0.9)


def test_a_solved_network_says_so_and_an_impossible_one_comes_near():
    solved = tune(Prototype("chebyshev", 5, 0.1), bandwidth=0.15, slope=1.0)
    assert solved.converged
    assert abs(solved.reflection_db) < 1e-3
    # One resonator of 0.1 dB over 30 % has a loaded Q of 0.5: no such network; the nearest reflects less than asked.
    near = tune(Prototype("chebyshev", 1, 0.1), bandwidth=0.3, slope=1.0)
    assert not near.converged
    assert -9.0 < near.reflection_db < 0.0


@pytest.mark.parametrize("module", MODULES)
@pytest.mark.parametrize("key", ["centre_hz", "bandwidth", "impedance_ohm", "resonator"])
@pytest.mark.parametrize("value", [0.0, -1.0, math.nan, math.inf])
def test_impossible_specifications_are_refused(module, key: str, value: float):
    spec = {"centre_hz": 1e9, "bandwidth": 0.1, "impedance_ohm": 50.0} | {key: value}
    for design in (module.design, module.textbook):
        with pytest.raises(TopologyError, match=f"{module.NAME}: {key.split('_')[0]} = "):
            design(Prototype("butterworth", 3), **spec)


@pytest.mark.parametrize("module", MODULES)
def test_a_band_too_wide_for_any_resonator_is_refused_and_names_the_part(module):
    prototype = Prototype("butterworth", 9)
    spec = {"centre_hz": 1e9, "bandwidth": 0.6, "impedance_ohm": 50.0}
    # Butterworth 9: g3·g2 and g1·g2 are least at the ends, so resonator 2 runs out of shunt part first
    with pytest.raises(TopologyError, match=rf"{module.FORM.part}2 would have to be negative with every"):
        module.design(prototype, **spec)
    with pytest.raises(TopologyError, match="too wide"):
        module.feasible_resonator(prototype, **spec)


@pytest.mark.parametrize("module", MODULES)
def test_a_return_loss_that_no_couplings_reach_is_refused(module, monkeypatch):
    prototype = Prototype("chebyshev", 3, 0.1234)  # used nowhere else: what was found feasible is remembered
    monkeypatch.setattr(coupled, "WORST_REFLECTION_DB", -1.0)
    spec = {"centre_hz": 1e9, "bandwidth": 0.1, "impedance_ohm": 50.0}
    with pytest.raises(TopologyError, match=r"no values reach the return loss of Chebyshev 0\.1234 dB, order 3"):
        module.design(prototype, **spec)


@pytest.mark.parametrize("module", MODULES)
def test_more_than_nine_resonators_keep_names_apart(module):
    circuit = module.design(Prototype("chebyshev", 12, 0.1), centre_hz=1e9, bandwidth=0.05, impedance_ohm=50.0)
    refs = {element.ref for element in circuit.elements}
    assert {f"{module.FORM.coupling}1_2", f"{module.FORM.part}12", f"{module.FORM.coupling}12_13"} <= refs


@pytest.mark.parametrize("module", MODULES)
def test_topology_entry(module):
    topology = module.TOPOLOGY
    assert (topology.name, topology.free, topology.passes) == (module.NAME, module.FORM.free, "band")
    assert topology.feasible_resonator is module.feasible_resonator
    assert topology.skew_db(3, [1.0, 10.0]) == pytest.approx([0.0, -80.0 if module is capacitive else 80.0])


@pytest.mark.parametrize("module", MODULES)
@pytest.mark.parametrize("order", [2, 4, 6])
def test_even_chebyshev_between_equal_ends_has_its_ripple_at_the_centre_of_the_band(module, order: int):
    prototype = Prototype("chebyshev", order, 0.2)
    circuit = module.design(prototype, centre_hz=500e6, bandwidth=0.1, impedance_ohm=50.0)
    assert circuit.source_ohm == circuit.load_ohm == 50.0
    loss = sweep(circuit, band(circuit, 0.1)).attenuation_db
    assert loss.max() == pytest.approx(0.2, abs=1e-4)
    assert loss[180:221].max() == pytest.approx(0.2, abs=1e-3)
