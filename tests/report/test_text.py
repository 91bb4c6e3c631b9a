"""How numbers and names are written."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.report.text import (
    band_words,
    circuit_words,
    decibels,
    filter_name,
    is_one_sided,
    printable,
    span,
)


@pytest.mark.parametrize(
    ("pair", "expected"),
    [((59.4e6, 60.6e6), "59.4–60.6 MHz"), ((6e7, 6e7), "60 MHz"), ((0.99e9, 1.01e9), "0.99–1.01 GHz")],
)
def test_span(pair, expected):
    assert span(pair) == expected


@pytest.mark.parametrize(
    ("value", "signed", "expected"),
    [(3.24, True, "+3.2"), (-0.04, False, "0.0"), (-0.04, True, "+0.0"), (None, True, "–"), (math.inf, False, "inf")],
)
def test_decibels(value, signed, expected):
    assert decibels(value, signed=signed) == expected


def test_filter_name():
    assert (filter_name("chebyshev", 5), filter_name(None, None)) == ("Cheb 5", "none")


@given(st.text())
def test_printable_text_is_one_printable_line_as_long_as_before(text):
    shown = printable(text)
    assert shown.isprintable()
    assert len(shown) == len(text)


def test_printable_takes_the_escape_from_an_escape_sequence():
    assert printable("a\x1b[2Jb\nc") == "a?[2Jb c"


def test_a_filter_is_named_with_the_value_that_its_topology_leaves_free_and_no_other():
    assert circuit_words("chebyshev", 4, "capacitive", 27e-9) == "Cheb 4 capacitive with 27 nH"
    assert circuit_words("butterworth", 3, "inductive", 6e-12) == "Butter 3 inductive with 6 pF"
    assert circuit_words("butterworth", 3, "ladder-series", 27e-9) == "Butter 3 ladder-series"
    assert circuit_words("butterworth", 3, None, None) == "Butter 3 prototype"


def test_a_band_is_a_share_of_its_centre_and_a_low_pass_has_a_cut_off():
    assert band_words("capacitive", bandwidth_hz=20e6, centre_hz=200e6) == "10.0 % at 200 MHz"
    assert band_words("low-pass", bandwidth_hz=260e6, centre_hz=260e6) == "cut-off 260 MHz"
    assert [is_one_sided(name) for name in ("low-pass", "high-pass", "ladder-shunt", "no such", None)] == [
        True,
        True,
        False,
        False,
        False,
    ]
