"""Circuits: checks, node order, reversal and the ladder form."""

import pytest

from harmonic_planner.filters.circuit import Arm, Circuit, CircuitError, Element


def circuit(*elements: Element, **changes) -> Circuit:
    fields = {"centre_hz": 1e9, "source_ohm": 50.0, "load_ohm": 75.0} | changes
    return Circuit("test", elements, **fields)


LADDER = (
    Element("L1", "L", ("in", "n1"), 10e-9),
    Element("C1", "C", ("n1", "a1"), 2e-12),
    Element("L2", "L", ("a1", "0"), 1e-9),
    Element("C2", "C", ("0", "a1"), 20e-12),
    Element("C3", "C", ("a1", "out"), 3e-12),
    Element("L3", "L", ("out", "a1"), 4e-9),
)


def test_nodes_come_from_input_to_output():
    assert circuit(*LADDER).nodes == ("in", "n1", "a1", "out")


def test_placement_follows_from_the_nodes():
    assert [e.placement for e in LADDER] == ["series", "series", "shunt", "shunt", "series", "series"]
    assert LADDER[3].live_nodes == ("a1",)


def test_arms_group_what_is_in_parallel():
    assert circuit(*LADDER).arms() == (
        Arm("series", (0,)),
        Arm("series", (1,)),
        Arm("shunt", (2, 3)),
        Arm("series", (4, 5)),
    )


def test_reversal_swaps_ports_and_terminations_and_undoes_itself():
    there = circuit(*LADDER)
    back = there.reversed()
    assert (back.source_ohm, back.load_ohm) == (75.0, 50.0)
    assert [e.ref for e in back.elements] == ["L3", "C3", "C2", "L2", "C1", "L1"]
    assert [arm.placement for arm in back.arms()] == ["series", "shunt", "series", "series"]
    assert back.reversed() == there


def test_a_single_shunt_resonator_has_its_load_on_the_input():
    single = circuit(Element("L1", "L", ("in", "0"), 1e-9), output="in")
    assert single.nodes == ("in",)
    assert single.arms() == (Arm("shunt", (0,)),)
    assert single.reversed() == Circuit("test", single.elements, 1e9, 75.0, 50.0, "in")


@pytest.mark.parametrize(
    "elements, words",
    [
        ((Element("C1", "C", ("in", "a"), 1e-12), Element("C2", "C", ("in", "b"), 1e-12)), "node in leads to a, b"),
        ((Element("C1", "C", ("in", "a"), 1e-12),), "does not meet node out"),
        ((Element("C1", "C", ("in", "out"), 1e-12), Element("C2", "C", ("x", "0"), 1e-12)), "does not meet C2"),
        ((), "does not meet node out"),
    ],
)
def test_what_is_not_a_ladder_is_named(elements, words):
    with pytest.raises(CircuitError, match=words):
        circuit(*elements).arms()


@pytest.mark.parametrize(
    "elements, changes, words",
    [
        ((Element("C1", "C", ("in", "out"), 0.0),), {}, r"C1 = 0\.0 must be a finite number above zero"),
        ((Element("C1", "C", ("in", "out"), float("nan")),), {}, "C1 = nan"),
        ((Element("C1", "C", ("in", "out"), -1e-12),), {}, "C1 = -1e-12"),
        ((Element("C1", "C", ("in", "in"), 1e-12),), {}, "C1 has both ends on node in"),
        ((LADDER[0], LADDER[0]), {}, "L1 is used for more than one"),
        (LADDER, {"centre_hz": 0.0}, "centre_hz = 0.0"),
        (LADDER, {"load_ohm": float("inf")}, "load_ohm = inf"),
        (LADDER, {"source_ohm": -50.0}, "source_ohm = -50.0"),
    ],
)
def test_impossible_circuits_are_refused(elements, changes, words):
    with pytest.raises(CircuitError, match=words):
        circuit(*elements, **changes)
