"""Text with units to SI and back; expected values are independent (definitions of SI prefixes) unless labelled."""

import math
import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.quantities import (
    ANGLE,
    CAPACITANCE,
    FREQUENCY,
    INDUCTANCE,
    LEVEL_DBM,
    LINE_DBC,
    NOISE_DBC_HZ,
    OFFSET,
    PERCENT,
    RATIO_DB,
    REACTANCE,
    RESISTANCE,
    Either,
    Pair,
    Reactance,
    Width,
    WidthRule,
)
from harmonic_planner.rules import Choice, Flag, Names, Number, RefusedError, Several, Text, nearest

KINDS = [FREQUENCY, OFFSET, RESISTANCE, LEVEL_DBM, LINE_DBC, RATIO_DB, NOISE_DBC_HZ, PERCENT, ANGLE]
KINDS += [INDUCTANCE, CAPACITANCE]
FEWER = settings(max_examples=25)  # of each kind
kinds = pytest.mark.parametrize("kind", KINDS, ids=lambda kind: kind.unit + " " + kind.noun)

READ = [
    (FREQUENCY, "600 MHz", 600e6),
    (FREQUENCY, "5GHz", 5e9),
    (FREQUENCY, " 612.5  MHz ", 612.5e6),
    (FREQUENCY, "600.1 MHz", 600.1e6),
    (FREQUENCY, "1e9 Hz", 1e9),
    (FREQUENCY, "1 THz", 1e12),
    (FREQUENCY, "1e3 MHz", 1e9),
    (FREQUENCY, "1.5E-3GHz", 1.5e6),
    (FREQUENCY, "1 kHz", 1e3),
    (OFFSET, "10 Hz", 10.0),
    (RESISTANCE, "50 ohm", 50.0),
    (RESISTANCE, "50 Ω", 50.0),  # Greek letter
    (RESISTANCE, "50 \u2126", 50.0),  # ohm sign
    (RESISTANCE, "0.6 kohm", 600.0),
    (RESISTANCE, "6e-1 kohm", 600.0),
    (LEVEL_DBM, "10 dBm", 10.0),
    (LEVEL_DBM, "+.5 dBm", 0.5),
    (LINE_DBC, "-60 dBc", -60.0),
    (LINE_DBC, "−60 dBc", -60.0),  # the minus sign of typeset text
    (NOISE_DBC_HZ, "-150 dBc/Hz", -150.0),
    (RATIO_DB, "0 dB", 0.0),
    (PERCENT, "1.5 %", 0.015),
    (PERCENT, "7%", 0.07),
    (ANGLE, "180 deg", math.pi),
    (ANGLE, "60°", math.pi / 3),
    (INDUCTANCE, "8 nH", 8e-9),
    (INDUCTANCE, "560pH", 560e-12),
    (INDUCTANCE, "1.2 uH", 1.2e-6),
    (INDUCTANCE, "1.2 \u00b5H", 1.2e-6),  # micro sign
    (INDUCTANCE, "1.2 \u03bcH", 1.2e-6),  # Greek letter
    (INDUCTANCE, "2 mH", 2e-3),
    (INDUCTANCE, "1e-8 H", 1e-8),
    (INDUCTANCE, "12e-1 \u00b5H", 1.2e-6),
    (CAPACITANCE, "6 pF", 6e-12),
    (CAPACITANCE, "120 fF", 0.12e-12),
    (CAPACITANCE, "4.7 nF", 4.7e-9),
    (CAPACITANCE, "1 uF", 1e-6),
]


@pytest.mark.parametrize("kind, text, value", READ)
def test_reads_text_with_its_unit_as_SI(kind, text, value):
    assert kind.parse(text) == pytest.approx(value, rel=1e-15, abs=0)


REFUSED = [
    (FREQUENCY, "600 mhz", 'the unit "mhz" is not Hz or kHz or MHz or GHz or THz, upper and lower case count'),
    (FREQUENCY, "600 mHz", 'the unit "mHz" is not Hz or kHz or MHz or GHz or THz, upper and lower case count'),
    (FREQUENCY, "5 KHz", 'the unit "KHz" is not Hz or kHz or MHz or GHz or THz, upper and lower case count'),
    (FREQUENCY, "5 M", 'the unit "M" is not Hz or kHz or MHz or GHz or THz, upper and lower case count'),
    (FREQUENCY, "10", "the unit is missing"),
    (FREQUENCY, "NaN Hz", "not a number followed by a unit"),
    (FREQUENCY, "inf MHz", "not a number followed by a unit"),
    (FREQUENCY, "f = 10 MHz", "not a number followed by a unit"),
    (FREQUENCY, "", "not a number followed by a unit"),
    (FREQUENCY, "1,5 MHz", 'the unit ",5 MHz" is not Hz or kHz or MHz or GHz or THz, upper and lower case count'),
    (FREQUENCY, "1_0 MHz", 'the unit "_0 MHz" is not Hz or kHz or MHz or GHz or THz, upper and lower case count'),
    (FREQUENCY, "1e400 Hz", ""),
    (FREQUENCY, "0 Hz", ""),
    (FREQUENCY, "-600 MHz", ""),
    (FREQUENCY, "999 Hz", ""),
    (FREQUENCY, 600, "write it as text with its unit"),
    (FREQUENCY, math.nan, "write it as text with its unit"),
    (FREQUENCY, True, ""),
    (FREQUENCY, None, ""),
    (FREQUENCY, ["600 MHz"], ""),
    (RATIO_DB, "3 mdB", 'the unit "mdB" is not dB, upper and lower case count'),
    (RATIO_DB, "3 db", 'the unit "db" is not dB, upper and lower case count'),
    (RATIO_DB, "3 dBc", 'the unit "dBc" is not dB, upper and lower case count'),
    (LINE_DBC, "0 dBc", ""),
    (LINE_DBC, "-60 dB", 'the unit "dB" is not dBc, upper and lower case count'),
    (ANGLE, "0 deg", ""),
    (ANGLE, "180.0001 deg", ""),
    (ANGLE, "1 rad", 'the unit "rad" is not deg, upper and lower case count'),
    (PERCENT, "0.1", "the unit is missing"),
    (INDUCTANCE, "8 nh", 'the unit "nh" is not H or pH or nH or \u00b5H or mH, upper and lower case count'),
    (INDUCTANCE, "0 nH", ""),
    (INDUCTANCE, "1 H", ""),
    (CAPACITANCE, "6 PF", 'the unit "PF" is not F or fF or pF or nF or \u00b5F, upper and lower case count'),
    (CAPACITANCE, "1 mF", 'the unit "mF" is not F or fF or pF or nF or \u00b5F, upper and lower case count'),
    (CAPACITANCE, "-6 pF", ""),
]


@pytest.mark.parametrize("kind, value, reason", REFUSED)
def test_refuses_with_what_is_allowed_and_what_is_wrong(kind, value, reason):
    with pytest.raises(RefusedError) as caught:
        kind.parse(value)
    assert str(caught.value) == f"must be {kind.allowed}" + (f"; {reason}" if reason else "")


def test_words_of_what_is_allowed():  # regression: our own wording
    assert FREQUENCY.allowed == 'a frequency from 1 kHz to 1 THz, such as "600 MHz"'
    assert LINE_DBC.allowed == 'a level from -250 dBc to below 0 dBc, such as "-60 dBc"'
    assert ANGLE.allowed == 'an angle above 0 deg up to 180 deg, such as "70 deg"'
    assert Number(1, 12, whole=True).allowed == "a whole number from 1 to 12"


@kinds
@FEWER
@given(data=st.data())
def test_what_is_written_reads_back(kind, data):
    low, high = kind.low or (1e-6 if kind.prefixes else 0.0), kind.high
    number = data.draw(st.floats(low, high, exclude_min=kind.above, exclude_max=kind.below, allow_subnormal=False))
    number = float(f"{number:.11g}")  # what is written has twelve digits, so that the ends of the range stay inside
    if number in (kind.low, kind.high) and (kind.above or kind.below):
        return
    value = number / kind.divisor
    assert kind.parse(kind.write(value)) == pytest.approx(value, rel=1e-10, abs=0)


@FEWER
@given(exponent=st.floats(-11, -1), farad=st.booleans())
def test_a_reactance_reads_back_with_its_unit(exponent, farad):
    reactance = Reactance(float(f"{10**exponent:.12g}") * (1e-3 if farad else 1), "F" if farad else "H")
    text = REACTANCE.write(reactance)
    assert "e" not in text  # in the size people write it
    back = REACTANCE.parse(text)
    assert back.unit == reactance.unit
    assert back.value == pytest.approx(reactance.value, rel=1e-10)


@pytest.mark.parametrize(
    "value, unit",
    [("8", None), ("8 ohm", "H or pH"), ("6 pf", "F or fF"), ("8 nh", "H or pH"), ("6 p", "H or pH"), (8e-9, None)],
)
def test_a_refused_reactance_names_the_units_that_were_meant(value, unit):
    with pytest.raises(RefusedError) as caught:
        REACTANCE.parse(value)
    assert str(caught.value).startswith(f"must be {INDUCTANCE.allowed}, or {CAPACITANCE.allowed}; ")
    assert unit is None or f"is not {unit} or" in caught.value.reason


@kinds
@FEWER
@given(data=st.data())
def test_pattern_of_the_schema_and_reader_agree(kind, data):
    """Whatever the published pattern takes is read, or refused for its size alone."""
    text = data.draw(st.from_regex(kind.schema()["pattern"], fullmatch=True))
    refusal = ""
    try:
        kind.parse(text)
    except RefusedError as error:
        refusal = error.reason
    assert refusal == ""


@kinds
@FEWER
@given(text=st.text(max_size=12) | st.from_regex(r"[0-9]{1,3} ?[a-zA-Z%°]{0,5}", fullmatch=True))
def test_what_the_pattern_does_not_take_is_refused(kind, text):
    if re.search(kind.schema()["pattern"], text) is None:
        with pytest.raises(RefusedError):
            kind.parse(text)


@kinds
@FEWER
@given(value=st.floats() | st.integers() | st.booleans() | st.none() | st.lists(st.text(max_size=5), max_size=2))
def test_only_text_is_a_quantity(kind, value):
    with pytest.raises(RefusedError):
        kind.parse(value)


SPAN = Pair(FREQUENCY, ("99 MHz", "101 MHz"), single=True, equal=True)
WINDOW = Pair(LEVEL_DBM, ("7 dBm", "13 dBm"))


def test_a_span_is_one_frequency_or_two():
    assert SPAN.parse("100 MHz") == (100e6, 100e6)
    assert SPAN.parse(["99 MHz", "101 MHz"]) == (99e6, 101e6)
    assert SPAN.parse(["99 MHz", "99 MHz"]) == (99e6, 99e6)
    assert WINDOW.parse(["7 dBm", "13 dBm"]) == (7.0, 13.0)


@pytest.mark.parametrize(
    "rule, value, reason",
    [
        (SPAN, ["101 MHz", "99 MHz"], "the first is above the second"),
        (SPAN, ["99 MHz"], ""),
        (SPAN, ["99 MHz", "100 MHz", "101 MHz"], ""),
        (SPAN, [], ""),
        (SPAN, ["99 MHz", "101"], "the unit is missing"),
        (SPAN, "101", "the unit is missing"),
        (WINDOW, ["7 dBm", "7 dBm"], "both are the same"),
        (WINDOW, "7 dBm", ""),
    ],
)
def test_refused_pairs(rule, value, reason):
    with pytest.raises(RefusedError) as caught:
        rule.parse(value)
    assert caught.value.reason == reason


def test_a_word_or_a_quantity():
    rule = Either("none", math.inf, RATIO_DB)
    assert rule.parse("none") == math.inf
    assert rule.parse("6 dB") == 6.0
    with pytest.raises(RefusedError, match='must be "none" or a ratio'):
        rule.parse("None")


def test_a_bandwidth_is_a_frequency_or_a_share_of_the_centre():
    rule = WidthRule(FREQUENCY, PERCENT)
    assert rule.parse("60 MHz") == Width(60e6, relative=False)
    assert rule.parse("10 %").hz(600e6) == pytest.approx(60e6, rel=1e-15)
    assert rule.parse("60 MHz").hz(600e6) == 60e6
    for value in ("10", "120 %", "60 mhz", 0.1):
        with pytest.raises(RefusedError):
            rule.parse(value)


@given(
    value=st.floats(allow_nan=True, allow_infinity=True) | st.integers(),
    low=st.integers(-5, 5),
    width=st.integers(0, 9),
    whole=st.booleans(),
)
def test_a_number_is_taken_exactly_inside_its_range(value, low, width, whole):
    rule = Number(low, low + width, whole=whole)
    if low <= value <= low + width and (isinstance(value, int) or not whole):
        assert rule.parse(value) == value
    else:
        with pytest.raises(RefusedError):
            rule.parse(value)


@pytest.mark.parametrize(
    "rule, value",
    [
        (Number(0, 1), True),
        (Number(0, 1), "0.5"),
        (Number(0, 1, below=True), 1),
        (Number(0, 1, above=True), 0),
        (Number(1, 12, whole=True), 2.0),
        (Number(1, 12, whole=True), 10**400),
        (Flag(), 1),
        (Flag(), "true"),
        (Text("a name", 5), ""),
        (Text("a name", 5), "  "),
        (Text("a name", 5), "123456"),
        (Text("a name", 5), "a\nb"),
        (Text("a name", 5), 3),
        (Choice(("a", "b")), "c"),
        (Choice(("a", "b")), ["a"]),
        (Several(Choice(("a", "b"))), "a"),
        (Several(Choice(("a", "b"))), []),
        (Several(Choice(("a", "b"))), ["a", "a"]),
        (Several(Choice(("a", "b"))), [{}]),
        (Names(Text("a name", 5)), []),
        (Names(Text("a name", 5)), ["a", " a "]),
        (Names(Text("a name", 5)), ["a", 3]),
        (Names(Text("a name", 5)), [["a"]]),
        (Names(Text("a name", 5)), {"a": 1}),
        (Names(Text("a name", 5)), ""),
    ],
)
def test_refused_plain_values(rule, value):
    with pytest.raises(RefusedError, match=r"^must be "):
        rule.parse(value)


def test_plain_values():
    assert Flag().parse(True) is True
    assert Text("a name", 5).parse(" ab ") == "ab"
    assert Several(Choice(("a", "b"))).parse(["b", "a"]) == ("b", "a")
    assert Number(0, 1).parse(1) == 1.0
    assert Names(Text("a name", 5)).parse("a") == ("a",)
    assert Names(Text("a name", 5)).parse(["b", " a"]) == ("b", "a")


def test_nearest_word():
    words = ("pad", "pad_after", "filter", "min_bandwidth")
    assert nearest("paddd", words) == "pad"
    assert nearest("Min-Bandwidth", words) == "min_bandwidth"
    assert nearest("spurs", words) is None
