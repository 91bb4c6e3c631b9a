"""The options of one filter: read by a scenario's rules, every problem at once, each naming its option."""

import math
from pathlib import Path

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from harmonic_planner.bench_options import OPTIONS, OptionError, line, read, span
from harmonic_planner.model import Design, Isolation
from harmonic_planner.planning.bench import Asked
from harmonic_planner.rules import RefusedError
from harmonic_planner.scenario_tables import DesignTable

KITS = Path(__file__).parents[1] / "harmonic_planner" / "parts" / "data"
CARRIER, LINE = "240 MHz", "120 MHz, 45 dB"


def problems(carrier=CARRIER, lines=(LINE,), folder=Path(), **design) -> list[str]:
    with pytest.raises(OptionError) as refused:
        read(carrier, lines, design, folder)
    return str(refused.value).splitlines()


def test_left_out_options_are_the_defaults_of_a_scenario():
    task = read(CARRIER, [LINE], dict.fromkeys(OPTIONS), Path())
    assert (task.carrier_hz, task.lines) == ((240e6, 240e6), (Asked(120e6, 120e6, 45.0),))
    assert task.design == Design()


def test_every_option_is_a_key_of_a_scenario_and_arrives_in_si():
    given = {
        "kit": ["air-wound", "chip-0805"],
        "topology": ["capacitive"],
        "families": ["chebyshev"],
        "order": 5,
        "flatness": "0.5 dB",
        "loss": "4 dB",
        "drift": "2 %",
        "min_bandwidth": "8 %",
        "impedance": "75 ohm",
        "isolation": "80 dB",
        "resonator": "8 nH",
    }
    assert set(given) == set(OPTIONS) <= set(DesignTable.model_fields)
    assert read(CARRIER, [LINE], given, Path()).design == Design(
        impedance_ohm=75.0,
        kits=("air-wound", "chip-0805"),
        families=("chebyshev",),
        flatness_db=0.5,
        loss_db=4.0,
        drift=0.02,
        isolation=Isolation(80.0, flat=True),
        min_bandwidth=0.08,
        topology=("capacitive",),
        order=5,
        resonator_h=8e-9,
    )


def test_a_capacitance_and_no_isolation():
    design = read(CARRIER, [LINE], {"resonator": "6 pF", "isolation": "none"}, Path()).design
    assert (design.resonator_h, design.resonator_f) == (None, 6e-12)
    assert design.isolation == Isolation(math.inf, flat=True)


def test_a_name_twice_counts_once():
    design = read(CARRIER, [LINE], {"kit": ["chip-0805"] * 2, "families": ["butterworth"] * 2}, Path()).design
    assert (design.kits, design.families) == (("chip-0805",), ("butterworth",))


def test_a_kit_file_is_found_from_the_folder(tmp_path):
    (tmp_path / "mine.toml").write_bytes((KITS / "chip-0805.toml").read_bytes())
    assert read(CARRIER, [LINE], {"kit": ["mine.toml"]}, tmp_path).design.kits == ("mine.toml",)
    assert '--kit "mine.toml": must be' in problems(kit=["mine.toml"])[0]


# What is typed, and what the message must begin with and contain.
BAD_DESIGN = {
    "unit in the wrong case": ({"flatness": "1 db"}, '--flatness "1 db": must be a ratio from 0.01 dB to 6 dB', "dB"),
    "no unit": ({"loss": "6"}, '--loss "6": must be', "the unit is missing"),
    "another unit": ({"drift": "1 dB"}, '--drift "1 dB": must be a percentage from 0 % to 20 %', "not %"),
    "negative": ({"impedance": "-50 ohm"}, '--impedance "-50 ohm": must be a resistance from', "1 kohm"),
    "not a number": ({"min_bandwidth": "nan %"}, '--min-bandwidth "nan %": must be "kit" or a percentage', ""),
    "zero": ({"isolation": "0 dB"}, '--isolation "0 dB": must be "none" or a ratio above 0 dB', "200 dB"),
    "a reactance in ohm": ({"resonator": "8 ohm"}, '--resonator "8 ohm": must be "auto" or an inductance', "8 nH"),
    "an order of ten": ({"order": 10}, '--order 10: must be "auto" or a whole number from 1 to 9', ""),
    "an order of none": ({"order": 0}, "--order 0: must be", ""),
    "unknown family": ({"families": ["chebychev"]}, '--family "chebychev": must be one of', '"chebyshev"?'),
    "unknown topology": ({"topology": ["ladr"]}, '--topology "ladr": must be', 'mean "ladder"?'),
    "one of two topologies unknown": ({"topology": ["ladder", "x"]}, '--topology ["ladder", "x"]: must be', ""),
    "unknown kit": ({"kit": ["chip-0602"]}, '--kit "chip-0602": must be "air-wound"', 'mean "chip-0603"?'),
    "one of two kits unknown": ({"kit": ["chip-0603", "x"]}, '--kit "x": must be', "kit file"),
    "flatness under the ripple": ({"flatness": "0.05 dB"}, '--flatness "0.05 dB": must be at least the ripple', "0.1"),
    "a resonator that is not free": (
        {"resonator": "8 nH", "topology": ["ladder"]},
        '--resonator "8 nH": must be left out for ladder',
        "inductance",
    ),
}


@pytest.mark.parametrize("case", BAD_DESIGN)
def test_a_bad_design_option_is_refused_with_one_message(case):
    given, start, words = BAD_DESIGN[case]
    (problem,) = problems(**given)
    assert problem.startswith(start)
    assert words in problem


BAD_SPANS = (
    *("", "240", "240 mhz", "-240 MHz", "0 Hz", "2 THz", "nan MHz", "240 dB", "240 MHz-241 MHz"),
    *("240 MHz..", "..240 MHz", "241 MHz..240 MHz", "240..241 MHz", "240 MHz...241 MHz", "1 MHz..2 MHz..3 MHz"),
)


@pytest.mark.parametrize("text", BAD_SPANS)
def test_a_bad_carrier_and_a_bad_line_name_option_and_value(text):
    (problem,) = problems(carrier=text)
    assert problem.startswith(f'--carrier "{text}": must be a frequency from 1 kHz to 1 THz')
    assert '"239 MHz..241 MHz"' in problem
    (problem,) = problems(lines=[f"{text}, 45 dB"])
    assert problem.startswith(f'--line "{text}, 45 dB": must be a frequency or span and its rejection')


BAD_LINES = (
    *("120 MHz", "120 MHz 45 dB", "120 MHz, 45", "120 MHz, -45 dB", "120 MHz, 0 dB", "120 MHz, 201 dB"),
    *("120 MHz, 45 dBc", "120 MHz, inf dB", "45 dB, 120 MHz", ",", "120 MHz, 45 dB, 3"),
)


@pytest.mark.parametrize("text", BAD_LINES)
def test_a_bad_line_is_refused(text):
    (problem,) = problems(lines=[LINE, text])
    assert problem.startswith(f'--line "{text}": must be')
    assert '"359 MHz..361 MHz, 40 dB"' in problem


def test_all_problems_are_told_together_each_once():
    found = problems(carrier="240", lines=["x", "x", LINE], families=["a"], loss="6", drift="1")
    assert [problem.split()[0] for problem in found] == ["--carrier", "--line", "--family", "--loss", "--drift"]


def test_a_message_stays_on_its_line():
    assert len(problems(carrier="240\nMhz", lines=["\x1b[2J, 3 dB"])) == 2


@given(st.floats(1e3, 1e12), st.floats(1.0, 10.0), st.floats(0.1, 200.0))
def test_what_is_written_is_read(low, ratio, rejection):
    high = min(low * ratio, 1e12)
    text = f"{low!r} Hz..{high!r} Hz"
    assert span(text) == (low, high)
    assert span(f" {text} ") == (low, high)
    assert line(f"{text},{rejection!r} dB") == Asked(low, high, rejection)


@given(st.text())
def test_a_text_that_is_no_quantity_is_refused_with_what_is_allowed(text):
    assume(not any(character.isdigit() for character in text))
    for reader in (span, line):
        with pytest.raises(RefusedError, match=r"^must be a frequency"):
            reader(text)
