"""Subcircuits and bench decks as text; what a simulator makes of them is in the checks against ngspice."""

import re
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from random_filters import random_filter

from harmonic_planner.export.comments import LONGEST, comment_text
from harmonic_planner.export.names import stage_stem
from harmonic_planner.export.netlist import THROUGH_OHM, bench_deck, number, subcircuit
from harmonic_planner.filters import topologies
from harmonic_planner.filters.circuit import Circuit, Element
from harmonic_planner.filters.strays import primitives
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.physics.prototypes import Prototype

KIT = load_kit("chip-0603", Path())
CIRCUIT = topologies.design(
    "ladder-shunt", Prototype("butterworth", 3), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
)
PART = re.compile(r"([RLC])(\w+) (\w+) (\w+) (\d\.\d{11}e[-+]\d\d)")
LINES = {Fraction(1, 2): (59e6, 61e6), Fraction(3): (354e6, 366e6)}


def deck(circuit: Circuit = CIRCUIT, *, name: str = "01_x", title: str = "x", **changed: object) -> str:
    keys = {"carrier_hz": (236e6, 244e6), "lines_hz": LINES, "sweep_hz": (30e6, 3e9)} | changed
    return bench_deck(name, title, circuit, **keys)  # type: ignore[arg-type]


def statements(text: str) -> list[str]:
    return [line for line in text.splitlines() if not line.startswith("* ")]


@pytest.mark.parametrize("seed", range(14))
def test_every_part_stands_in_one_line(seed: int):
    rng = np.random.default_rng([5, seed])
    _, _, circuit, kit = random_filter(rng, list(topologies.REGISTRY)[seed % len(topologies.REGISTRY)])
    text = subcircuit("03_third_one", "any", circuit, kit, at_hz=circuit.centre_hz)
    first, *parts, last = statements(text)
    assert first == ".subckt f03_third_one in out"
    assert last == ".ends f03_third_one"
    found = [PART.fullmatch(line).groups() for line in parts]  # type: ignore[union-attr]
    wanted = [
        (part.name[0], part.name[1:], *part.nodes, pytest.approx(part.value, rel=5e-12))
        for part in primitives(circuit, kit, at_hz=circuit.centre_hz)
    ]
    if circuit.output == "in":
        wanted.append(("R", "_through", "in", "out", THROUGH_OHM))
    assert [(*rest, float(value)) for *rest, value in found] == wanted
    # simulators do not tell capitals from small letters
    assert len({(kind + ref).lower() for kind, ref, *_ in found}) == len(found)


def test_losses_are_those_at_the_carrier_and_the_comment_says_so():
    # independent: 0603 inductors have Q = 40 sqrt(f / 250 MHz), typed in from the kit's file
    text = subcircuit("01_x", "x", CIRCUIT, KIT, at_hz=200e6)
    values = {match[1] + match[2]: float(match[5]) for match in PART.finditer(text)}
    assert values["R_L1"] == pytest.approx(2 * np.pi * 200e6 * values["L1"] / (40 * np.sqrt(0.8)), rel=1e-10)
    assert "2.00000000000e+08 Hz" in text
    assert "50 ohm" in text


def test_a_number_has_twelve_digits():
    assert [number(value) for value in (127e-9, 1 / 3, 1e12)] == [
        "1.27000000000e-07",
        "3.33333333333e-01",
        "1.00000000000e+12",
    ]


@settings(deadline=None)
@given(st.text(max_size=300), st.text(max_size=50))
def test_text_of_the_user_is_a_comment_and_nothing_else(title: str, kit_name: str):
    plain = subcircuit("01_x", "x", CIRCUIT, KIT, at_hz=240e6)
    text = subcircuit("01_x", title, CIRCUIT, replace(KIT, name=kit_name, title=title), at_hz=240e6)
    assert statements(text) == statements(plain)
    assert statements(deck(title=title)) == statements(deck())
    for line in (text + deck(title=title)).splitlines():
        assert line.isascii()
        assert line.isprintable()
        assert not line.endswith("\\")


@given(st.text(max_size=400))
def test_comment_text_is_short_plain_and_its_own_result(text: str):
    shown = comment_text(text)
    assert re.fullmatch(r"[A-Za-z0-9 .,:()/%+=_&@?-]*", shown)
    assert len(shown) <= LONGEST
    assert comment_text(shown) == shown


@given(st.integers(1, 99), st.text())
def test_every_stem_is_a_name(position: int, name: str):
    stem = stage_stem(position, name)
    text = subcircuit(stem, name, CIRCUIT, KIT, at_hz=240e6)
    assert f".subckt f{stem} in out" in text.splitlines()
    assert f".include {stem}.cir" in deck(name=stem).splitlines()


@pytest.mark.parametrize("name", ["", "01 x", "01_X", "../x", "x\n.end", "é", "x.cir"])
def test_any_other_name_is_refused(name: str):
    with pytest.raises(PlannerError, match="name = "):
        subcircuit(name, "x", CIRCUIT, KIT, at_hz=240e6)
    with pytest.raises(PlannerError, match="name = "):
        deck(name=name)


@pytest.mark.parametrize(("ref", "node"), [("L1 in 0 1\n.control", "out"), ("L1", "o ut"), ("L$", "out"), ("L1", "é")])
def test_a_part_or_node_with_any_other_name_is_refused(ref: str, node: str):
    circuit = Circuit("hand", (Element(ref, "L", ("in", node), 1e-9),), 1e9, 50.0, 50.0, output=node)
    with pytest.raises(PlannerError, match="letters, digits and _"):
        subcircuit("01_x", "x", circuit, KIT, at_hz=1e9)


def test_two_ports_even_where_no_part_stands_between_them():
    circuit = Circuit("hand", (Element("L1", "L", ("in", "0"), 1e-9),), 1e9, 50.0, 50.0, output="in")
    assert f"R_through in out {number(THROUGH_OHM)}" in subcircuit("01_x", "x", circuit, KIT, at_hz=1e9).splitlines()
    elements = (*CIRCUIT.elements, Element("C9", "C", ("in", "out"), 1e-12))
    with pytest.raises(PlannerError, match="'out' is not the output"):
        subcircuit("01_x", "x", replace(CIRCUIT, elements=elements, output="in"), KIT, at_hz=1e9)


@pytest.mark.parametrize("at_hz", [0.0, -1.0, np.nan, np.inf])
def test_a_carrier_is_above_zero(at_hz: float):
    with pytest.raises(PlannerError, match="at_hz"):
        subcircuit("01_x", "x", CIRCUIT, KIT, at_hz=at_hz)


def test_the_deck_has_source_load_sweep_and_every_line():
    # independent: 2 sqrt(20/80) = 1
    text = deck(replace(CIRCUIT, source_ohm=20.0, load_ohm=80.0), points=201)
    found = text.splitlines()
    assert found[0].startswith("* ")
    assert found[-1] == ".end"
    assert "Vs emf 0 dc 0 ac 1.00000000000e+00" in found
    assert "Rs emf in 2.00000000000e+01" in found
    assert "Rl out 0 8.00000000000e+01" in found
    assert "X1 in out f01_x" in found
    assert ".ac dec 100 3.00000000000e+07 3.00000000000e+09" in found
    measured = [line.split('"')[1].split(":")[0] for line in found if line.startswith("echo")]
    assert measured == ["carrier", "line 1/2", "line 3"]
    assert "ac lin 41 3.54000000000e+08 3.66000000000e+08" in found


def test_a_line_of_one_frequency_is_looked_at_once():
    assert "ac lin 1 7.20000000000e+08 7.20000000000e+08" in deck(lines_hz={Fraction(3): (720e6, 720e6)}).splitlines()


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"carrier_hz": (0.0, 1e9)}, "carrier"),
        ({"carrier_hz": (2e9, 1e9)}, "carrier"),
        ({"lines_hz": {Fraction(1, 2): (1e9, np.inf)}}, "line 1/2"),
        ({"sweep_hz": (np.nan, 1e9)}, "sweep"),
        ({"sweep_hz": (1e9, 1e9)}, "sweep"),
        ({"points": 1}, "sweep"),
    ],
)
def test_frequencies_that_cannot_be_swept_are_named(changed: dict[str, object], message: str):
    with pytest.raises(PlannerError, match=message):
        deck(**changed)
