"""Parts to buy: on the grid, what is reported is their response, and better than rounding each by itself."""

import dataclasses
import math

import numpy as np
import pytest
from absorb_designs import Design, designs, lossless_return_loss_db
from built_circuits import KITS, without_losses, without_strays

from harmonic_planner.filters.absorb import Absorbed, absorb
from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.choices import shelf
from harmonic_planner.filters.circuit import Circuit, CircuitError, Element
from harmonic_planner.filters.misfit import RETURN_LOSS_WORTH_DB, Misfit
from harmonic_planner.filters.snap import PAIR_PRICE_DB, snap
from harmonic_planner.filters.strays import pad_count
from harmonic_planner.filters.topologies import REGISTRY
from harmonic_planner.parts.preferred import nearest
from harmonic_planner.physics.prototypes import Prototype

KIT = KITS["chip-0603"]


def absorbed(count: int, seed: int) -> list[tuple[Design, Absorbed]]:
    pairs = [(d, absorb(d.ideal, d.kit, passband_hz=d.passband_hz)) for d in designs(count, seed=seed)]
    return [(design, found) for design, found in pairs if not found.problem]


SAMPLE = absorbed(14, seed=7)


def a_filter(name: str = "capacitive", kit=KIT, *, bandwidth: float = 0.12, centre_hz: float = 240e6):
    prototype, passband_hz = Prototype("chebyshev", 3, 0.1), (0.97 * centre_hz, 1.03 * centre_hz)
    ideal = REGISTRY[name].design(prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=50.0)
    return ideal, absorb(ideal, kit, passband_hz=passband_hz).circuit, passband_hz


def test_every_part_is_sold_and_parts_make_up_the_circuit():
    for design, found in SAMPLE:
        kit = design.kit
        snapped = snap(found.circuit, kit, ideal=design.ideal, passband_hz=design.passband_hz)
        assert [e.ref for e in snapped.circuit.elements] == [e.ref for e in found.circuit.elements]
        for element, parts in zip(snapped.circuit.elements, snapped.parts, strict=True):
            assert element.value == pytest.approx(sum(parts), rel=1e-12)
            if element.kind == "L":
                assert len(parts) == 1
                assert parts[0] in kit.inductor.values_h()
            elif kit.capacitor.continuous:
                assert len(parts) == 1
                assert kit.capacitor.smallest_f <= parts[0] <= kit.capacitor.largest_f
            else:
                assert len(parts) in ((1, 2) if kit.capacitor.parallel else (1,))
                assert all(part in kit.capacitor.values_f() for part in parts)


def test_what_is_reported_is_the_response_of_the_parts():
    # independent: the scalar recursion of the circuit with one element for each part
    for design, found in SAMPLE:
        snapped = snap(found.circuit, design.kit, ideal=design.ideal, passband_hz=design.passband_hz)
        bought = [part for parts in snapped.parts for part in parts]
        assert [element.value for element in snapped.soldered.elements] == bought
        built_db = lossless_return_loss_db(snapped.soldered, design.kit, design.passband_hz)
        ideal_db = lossless_return_loss_db(design.ideal, None, design.passband_hz)
        change_db = min(built_db, RETURN_LOSS_WORTH_DB) - min(ideal_db, RETURN_LOSS_WORTH_DB)
        assert snapped.return_loss_change_db == pytest.approx(change_db, abs=1e-6)


def test_parts_chosen_together_beat_rounding_each_by_itself():
    # regression, unconfirmed: by how much
    gains = []
    for design, found in SAMPLE:
        if design.kit.capacitor.continuous:
            continue
        snapped = snap(found.circuit, design.kit, ideal=design.ideal, passband_hz=design.passband_hz)
        ideal_value = {element.ref: element.value for element in design.ideal.elements}
        arranged = tuple(dataclasses.replace(e, value=ideal_value[e.ref]) for e in found.circuit.elements)
        misfit = Misfit(dataclasses.replace(found.circuit, elements=arranged), design.kit, design.passband_hz)
        grids = {"L": design.kit.inductor.values_h(), "C": design.kit.capacitor.values_f()}
        apart = [nearest(element.value, grids[element.kind]) for element in found.circuit.elements]
        gains.append(misfit.cost_db(apart)[0] / snapped.cost)
    assert min(gains) > 1
    assert math.exp(np.mean(np.log(gains))) > 3


def test_a_grid_that_has_the_nominal_values_gives_them_back():
    ideal, nominal, passband_hz = a_filter()
    by_kind = {k: sorted({e.value for e in nominal.elements if e.kind == k}) for k in "LC"}
    crowded = {k: tuple(sorted([*values, *(v * 1.2 for v in values)])) for k, values in by_kind.items()}
    kit = dataclasses.replace(
        KIT,
        inductor=dataclasses.replace(KIT.inductor, grid=crowded["L"]),
        capacitor=dataclasses.replace(KIT.capacitor, grid=crowded["C"], parallel=False),
    )
    snapped = snap(nominal, kit, ideal=ideal, passband_hz=passband_hz)
    assert snapped.soldered == snapped.circuit
    # values that are alike by symmetry, to about 1e-3, may change places
    expected = [element.value for element in nominal.elements]
    assert [element.value for element in snapped.circuit.elements] == pytest.approx(expected, rel=2e-3)


def test_trimmers_are_set_and_inductors_bought():
    kit = KITS["chip-trimmer"]
    ideal, nominal, passband_hz = a_filter("series-capacitive", kit, centre_hz=300e6)
    snapped = snap(nominal, kit, ideal=ideal, passband_hz=passband_hz)
    changed = [e.value != n.value for e, n in zip(snapped.circuit.elements, nominal.elements, strict=True)]
    assert all(changed)
    assert all(e.value in kit.inductor.values_h() for e in snapped.circuit.elements if e.kind == "L")
    # the capacitors take up what the inductors are off
    assert abs(snapped.centre_error) < 0.001
    assert snapped.return_loss_change_db > -1


def test_two_in_parallel_only_where_the_kit_allows_it_and_where_they_pay():
    ideal, nominal, passband_hz = a_filter()
    single = dataclasses.replace(KIT, capacitor=dataclasses.replace(KIT.capacitor, parallel=False))
    alone = snap(nominal, single, ideal=ideal, passband_hz=passband_hz)
    paired = snap(nominal, KIT, ideal=ideal, passband_hz=passband_hz)
    assert all(len(parts) == 1 for parts in alone.parts)
    seconds = sum(len(parts) == 2 for parts in paired.parts)
    assert seconds > 0
    assert paired.cost < alone.cost
    misfit_db = paired.cost - PAIR_PRICE_DB * seconds
    assert 0 <= misfit_db < alone.cost - PAIR_PRICE_DB * seconds
    refs = [element.ref for element in paired.soldered.elements]
    assert sum(ref.endswith("b") for ref in refs) == seconds
    assert len(refs) == len(paired.parts) + seconds


def test_values_beyond_the_range_are_named_and_replaced_by_the_nearest():
    ideal, nominal, passband_hz = a_filter("ladder-series", bandwidth=0.2)
    short = dataclasses.replace(
        KIT,
        inductor=dataclasses.replace(KIT.inductor, smallest_h=10e-9, largest_h=100e-9),
        capacitor=dataclasses.replace(KIT.capacitor, largest_f=10e-12),
    )
    snapped = snap(nominal, short, ideal=ideal, passband_hz=passband_hz)
    by_ref = {element.ref: parts for element, parts in zip(snapped.circuit.elements, snapped.parts, strict=True)}
    assert by_ref["L2"] == (10e-9,)
    assert by_ref["L1"] == (100e-9,)
    assert "the kit's least, 10 nH, stands for it" in snapped.problem
    assert "the kit's largest, 100 nH, stands for it" in snapped.problem
    assert "C2 would be" in snapped.problem
    assert snap(nominal, KIT, ideal=ideal, passband_hz=passband_hz).problem == ""


def test_inductors_alone_go_to_the_nearest_where_only_one_counts():
    circuit = Circuit("one", (Element("L1", "L", ("in", "out"), 10.4e-9),), 100e6, 50.0, 50.0)
    snapped = snap(circuit, without_strays(KIT), ideal=circuit, passband_hz=(50e6, 100e6))
    assert snapped.parts == ((10e-9,),)


def test_an_ideal_circuit_of_other_elements_is_refused():
    ideal, nominal, passband_hz = a_filter()
    other = dataclasses.replace(ideal, elements=ideal.elements[:-1])
    with pytest.raises(CircuitError, match=r"C34 has no ideal value"):
        snap(nominal, KIT, ideal=other, passband_hz=passband_hz)


# ------------------------------------------------------------------------------------- what a kit has


@pytest.mark.parametrize("placement", ["shunt", "series"])
def test_a_pair_is_like_the_single_part_of_the_same_susceptance(placement):
    # independent: impedances of the scalar model, with the second part's pad on the node of a shunt part
    nodes = ("in", "0") if placement == "shunt" else ("in", "out")
    element = Element("C1", "C", nodes, 1e-12)
    circuit = Circuit("one", (element,), 500e6, 50.0, 50.0, output=nodes[1].replace("0", "in"))
    kit = without_losses(KIT)
    choices = shelf(circuit, element, kit, centre_hz=500e6)
    (place,) = choices.near(7.3e-12, singles=0, pairs=1)
    first, second = choices.parts[place]
    like = dataclasses.replace(circuit, elements=(dataclasses.replace(element, value=float(choices.equals[place])),))
    pair = dataclasses.replace(
        circuit,
        elements=(Element("Ca", "C", nodes, float(first)), Element("Cb", "C", nodes, float(second))),
    )
    board = dataclasses.replace(kit.board, shared_via_h=0.0, pad_f=kit.board.pad_f if placement == "shunt" else 0.0)
    kit = dataclasses.replace(kit, board=board)
    assert pad_count(pair, "in") == 2
    assert sweep_built(like, 500e6, kit=kit).s21[0] == pytest.approx(sweep_built(pair, 500e6, kit=kit).s21[0], rel=1e-9)


def test_the_nearest_of_either_kind_come_first():
    element = Element("C1", "C", ("in", "0"), 1e-12)
    choices = shelf(Circuit("one", (element,), 1e8, 50.0, 50.0), element, KIT, centre_hz=1e8)
    near = choices.near(4.5e-12, singles=3, pairs=5)
    away = np.abs(np.log(choices.equals / 4.5e-12))
    is_pair = choices.parts[:, 1] > 0
    assert (
        list(choices.parts[near[:3], 0]) == [4.3e-12, 4.7e-12, 5.1e-12]
        or list(away[near[:3]]) == sorted(away[~is_pair])[:3]
    )
    assert list(away[near[3:]]) == sorted(away[is_pair])[:5]
