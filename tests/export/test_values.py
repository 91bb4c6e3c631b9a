"""How values are written, and how near a part is to its ratings."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.export.values import frequency_scale, number_text, quantity, stress_share, to_buy

from plan_fixture import element


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


@pytest.mark.parametrize(("highest", "expected"), [(2.4e9, (1e9, "GHz")), (999e6, (1e6, "MHz")), (5.0, (1.0, "Hz"))])
def test_frequency_scale(highest, expected):
    assert frequency_scale(highest) == expected


def test_parts_to_buy():
    assert [to_buy(values, "F") for values in ((), (0.56e-12,), (8.2e-12, 5.1e-13))] == [
        "",
        "0.56 pF",
        "8.2 pF + 0.51 pF",
    ]


@given(st.lists(st.floats(1e-13, 1e-3), min_size=1, max_size=2))
def test_what_is_bought_reads_back_to_a_thousandth(values):
    scale = {"pF": 1e-12, "nF": 1e-9, "µF": 1e-6, "mF": 1e-3}
    read = [float(text.split()[0]) * scale[text.split()[1]] for text in to_buy(values, "F").split(" + ")]
    assert read == pytest.approx(values, rel=0.51e-3)


def test_a_stress_share_is_the_larger_of_voltage_and_current_and_none_without_a_rating():
    assert stress_share(element("L1", "shunt", 1e-9, 1e-9, peak_v=5.0, rms_a=0.1)) is None
    part = element("L1", "shunt", 1e-9, 1e-9, peak_v=5.0, rated_v=50.0, rms_a=0.3, rated_a=0.6)
    assert stress_share(part) == pytest.approx(0.5)
