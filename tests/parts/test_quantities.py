"""Text with units, both ways."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.parts.quantities import quantity, readable


@pytest.mark.parametrize(
    "text, unit, value",
    [
        ("10 nH", "H", 10e-9),
        ("4.7 uH", "H", 4.7e-6),
        ("4.7 µH", "H", 4.7e-6),
        ("0.1 pF", "F", 0.1e-12),
        ("1e-9 H", "H", 1e-9),
        ("250 MHz", "Hz", 250e6),
        ("0.1 ohm", "ohm", 0.1),
        ("0.1 Ω", "ohm", 0.1),
        ("3.5 %", "%", 0.035),
        ("0 pF", "F", 0.0),
        ("600 mA", "A", 0.6),
        ("50 V", "V", 50.0),
        ("30 ppm/K", "ppm/K", 30e-6),
        ("-750ppm/K", "ppm/K", -750e-6),
    ],
)
def test_reads_a_value_with_its_unit(text, unit, value):
    assert quantity(text, unit) == pytest.approx(value, rel=1e-12)


@pytest.mark.parametrize(
    "text",
    ["600 mhz", "10", "10 n", "10 nH", "nan Hz", "inf Hz", "", "MHz", "f = 3 MHz", 5, 5.0, True, None, ["1 MHz"]],
)
def test_anything_but_a_frequency_is_refused_where_a_frequency_belongs(text):
    with pytest.raises(ValueError, match="Hz"):
        quantity(text, "Hz")


@pytest.mark.parametrize("text", ["30 ppm", "30", "30 K", "ppm/K", "nan ppm/K", "inf ppm/K", "x ppm/K", 30, None])
def test_anything_but_a_temperature_coefficient_is_refused_where_one_belongs(text):
    with pytest.raises(ValueError, match="30 ppm/K"):
        quantity(text, "ppm/K")


@given(st.floats(1e-10, 1e-4), st.sampled_from(["H", "F", "Hz"]))
def test_what_is_written_reads_back_to_the_digits_shown(value: float, unit):
    scaled = value * 1e10 if unit == "Hz" else value
    assert quantity(readable(scaled, unit, digits=6), unit) == pytest.approx(scaled, rel=1e-5)


@pytest.mark.parametrize(
    "value, unit, text",
    [
        (1.0e-9, "H", "1 nH"),
        (4.7e-6, "H", "4.7 µH"),
        (0.199e-12, "F", "0.199 pF"),
        (1e-9, "F", "1 nF"),
        (2.4e9, "Hz", "2.4 GHz"),
        (100e6, "Hz", "100 MHz"),
        (float("inf"), "Hz", "unlimited Hz"),
    ],
)
def test_writes_as_the_trade_does(value, unit, text):
    assert readable(value, unit) == text
