"""Touchstone files, read back by scikit-rf and by hand."""

import io
from pathlib import Path

import numpy as np
import pytest
import skrf
from hypothesis import given, settings
from hypothesis import strategies as st
from random_filters import random_filter

from harmonic_planner.export.touchstone import frequencies_hz, touchstone
from harmonic_planner.filters import topologies
from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.response import Response
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.physics.prototypes import Prototype

KIT = load_kit("chip-0603", Path())
CIRCUIT = topologies.design(
    "ladder-shunt", Prototype("butterworth", 2), centre_hz=240e6, bandwidth=0.2, impedance_ohm=75.0
)
FREQUENCY_HZ = np.geomspace(24e6, 2.4e9, 57)
FORWARD, BACKWARD = (sweep_built(circuit, FREQUENCY_HZ, kit=KIT) for circuit in (CIRCUIT, CIRCUIT.reversed()))


def read_back(text: str) -> skrf.Network:
    file = io.StringIO(text)
    file.name = "filter.s2p"
    return skrf.Network(file)


def rows(text: str) -> np.ndarray:
    return np.array([[float(cell) for cell in line.split()] for line in text.splitlines() if line[0] not in "!#"])


@pytest.mark.parametrize("seed", range(14))
def test_scikit_rf_reads_back_what_was_computed(seed: int):
    rng = np.random.default_rng([6, seed])
    _, _, circuit, kit = random_filter(rng, list(topologies.REGISTRY)[seed % len(topologies.REGISTRY)])
    frequency = circuit.centre_hz * np.geomspace(0.2, 5.0, 41)
    forward, backward = (sweep_built(c, frequency, kit=kit) for c in (circuit, circuit.reversed()))
    found = read_back(touchstone(forward, backward, circuit.source_ohm))
    assert found.f == pytest.approx(frequency, rel=1e-12)
    assert np.abs(found.s[:, 0, 0] - forward.s11).max() < 1e-9
    assert np.abs(found.s[:, 1, 1] - backward.s11).max() < 1e-9
    # what was computed backward and is not in the file
    for transmission in (found.s[:, 1, 0], found.s[:, 0, 1]):
        assert transmission == pytest.approx(forward.s21, rel=1e-9, abs=0)
        assert transmission == pytest.approx(backward.s21, rel=1e-6, abs=0)
    assert np.all(found.z0 == circuit.source_ohm)
    assert found.is_passive()
    assert found.is_reciprocal()


def test_columns_are_those_of_the_specification():
    # published: Touchstone file format specification 1.1: "# Hz S RI R n"; two-port rows are f S11 S21 S12 S22
    text = touchstone(FORWARD, BACKWARD, 75.0)
    assert [line for line in text.splitlines() if line.startswith("#")] == ["# Hz S RI R 75.0 "]
    table = rows(text)
    assert table.shape == (57, 9)
    s = table[:, 1::2] + 1j * table[:, 2::2]
    wanted = (FORWARD.s11, FORWARD.s21, FORWARD.s21, BACKWARD.s11)
    assert np.abs(s - np.transpose(wanted)).max() < 1e-15
    assert np.abs(FORWARD.s11 - BACKWARD.s11).max() > 0.1


def test_the_same_responses_give_the_same_bytes():
    text = touchstone(FORWARD, BACKWARD, 75.0, comments=(("Filter", "first"),))
    assert text == touchstone(FORWARD, BACKWARD, 75.0, comments=(("Filter", "first"),))
    assert [line for line in text.splitlines() if line.startswith("!")] == [
        "! Filter: first",
        "!freq ReS11 ImS11 ReS21 ImS21 ReS12 ImS12 ReS22 ImS22",
    ]


NASTY = (
    "x\n# GHz S DB R 50",
    "x\r1 2 3 4 5 6 7 8 9",
    "x ! Port [1] = a ! Port [2] = b",
    "Port[1] = a\n! Port[2] = b",
    "! Gamma ! 0 0 0 0",
    "a::b c::d",
    "[Version] 2.0",
    "Modal data exported",
    "x\x0b1\x0c2\x853\u2028# GHz",
)


@settings(deadline=None)
@given(st.text(max_size=200) | st.sampled_from(NASTY))
def test_text_of_the_user_is_a_comment_and_nothing_else(title: str):
    text = touchstone(FORWARD, BACKWARD, 75.0, comments=((f"Kit {title}", title),))
    first, *rest = text.splitlines(keepends=True)
    assert first.startswith("! Kit")
    assert first.isascii()
    assert "!" not in first[1:]
    assert "".join(rest) == touchstone(FORWARD, BACKWARD, 75.0)


@pytest.mark.parametrize("title", NASTY)
def test_a_reader_sees_no_more_than_a_comment(title: str):
    found = read_back(touchstone(FORWARD, BACKWARD, 75.0, comments=(("Filter", title),)))
    assert found.port_names is None
    assert np.all(found.z0 == 75.0)
    assert np.abs(found.s[:, 1, 0] - FORWARD.s21).max() < 1e-15


def test_span_edges_and_unwanted_lines_have_rows_of_their_own():
    lines = [(119e6, 121e6), (357e6, 363e6), (480e6, 480e6)]
    found = frequencies_hz((236e6, 244e6), lines, passband_hz=(216e6, 264e6), sweep_hz=(60e6, 960e6), points=101)
    assert {236e6, 240e6, 244e6, 119e6, 120e6, 121e6, 357e6, 360e6, 363e6, 480e6} <= set(found.tolist())
    assert np.diff(np.log(found)).min() > 1e-9
    assert np.sum((found >= 215.9e6) & (found <= 264.1e6)) >= 81
    assert found[[0, -1]] == pytest.approx([60e6, 960e6], rel=1e-12)


@given(st.floats(1e6, 5e9), st.floats(0, 0.05), st.integers(2, 9), st.floats(0.01, 0.8))
def test_frequencies_ascend_whatever_the_spans(source_hz: float, half: float, times: int, bandwidth: float):
    spans = [(k * source_hz * (1 - half), k * source_hz * (1 + half)) for k in range(1, 2 * times)]
    carrier = spans[times - 1]
    passband = (times * source_hz * (1 - bandwidth / 2), times * source_hz * (1 + bandwidth / 2))
    found = frequencies_hz(carrier, spans, passband_hz=passband, sweep_hz=(source_hz / 2, source_hz * 20), points=31)
    assert np.all(np.diff(found) > 0)
    assert {edge for span in spans for edge in span} <= set(found.tolist())


def test_faults_are_named():
    other = Response(FREQUENCY_HZ * 2, BACKWARD.s21, BACKWARD.s11)
    falling = Response(FREQUENCY_HZ[::-1], FORWARD.s21, FORWARD.s11)
    for forward, backward in ((FORWARD, other), (falling, falling)):
        with pytest.raises(PlannerError, match="ascending"):
            touchstone(forward, backward, 75.0)
    for impedance in (0.0, -50.0, np.nan, np.inf):
        with pytest.raises(PlannerError, match="impedance"):
            touchstone(FORWARD, BACKWARD, impedance)
