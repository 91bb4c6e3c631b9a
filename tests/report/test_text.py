"""How numbers and names are written."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.report.text import decibels, filter_name, number_text, printable, quantity, span


@pytest.mark.parametrize(
    ("value", "unit", "digits", "expected"),
    [
        (2.4e9, "Hz", 4, "2.4 GHz"),
        (612e6, "Hz", 4, "612 MHz"),
        (0.5, "Hz", 4, "0.5 Hz"),
        (127.0e-9, "H", 4, "127 nH"),
        (0.199e-12, "F", 3, "0.199 pF"),
        (4.7e-6, "H", 3, "4.7 µH"),
        (0.0, "F", 3, "0 F"),
        (math.inf, "Hz", 4, "–"),
    ],
)
def test_quantity(value, unit, digits, expected):
    assert quantity(value, unit, digits) == expected


@given(st.floats(min_value=1e-3, max_value=1e12))
def test_number_text_is_right_to_its_digits_and_has_no_exponent(value):
    text = number_text(value, 4)
    assert float(text) == pytest.approx(value, rel=0.51e-3)
    assert "e" not in text


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
