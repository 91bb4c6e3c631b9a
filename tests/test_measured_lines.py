"""Lines read from a spectrum analyser: lines by number or frequency, levels in dBc or dBm; wordings are our own."""

from fractions import Fraction
from pathlib import Path

import pytest

from harmonic_planner.measured_lines import read_lines
from harmonic_planner.model import PlannerError

from builders import chain_of

CHAIN = chain_of(3, 2)  # 20 MHz to 120 MHz, line 6
TUNED = chain_of(3, 2, source_hz=(19e6, 21e6))
HALVES = chain_of(3, 2, lines={Fraction(1, 2): -70.0})


def read(folder: Path, text: str, scenario=CHAIN):
    path = folder / "lines.csv"
    path.write_text(text)
    return read_lines(path, scenario)


@pytest.mark.parametrize(
    "text",
    [
        "line,level\n5,-61.5 dBc\n7,-64 dBc\n",
        "line,level_dbc\n5,-61.5\n7,-64\n",
        "frequency,level\n100 MHz,-61.5 dBc\n140 MHz,-64 dBc\n",
        "frequency_mhz,level_dbc\n100.02,-61.5\n139.98,-64\n",
        "line,level_dbc\n5,-61.5\n6,0\n7,-64\n",
    ],
)
def test_levels_below_the_carrier(tmp_path, text):
    found = read(tmp_path, text)
    assert found.lines == (5, 7)
    assert found.levels == (-61.5, -64.0)
    assert (found.in_dbm, found.carrier_dbm, found.source_hz) == (False, None, 20e6)


def test_levels_in_dbm_with_and_without_the_carrier(tmp_path):
    found = read(tmp_path, "line,level\n5,-61.5 dBm\n6,8.5 dBm\n")
    assert (found.lines, found.levels, found.in_dbm, found.carrier_dbm) == ((5,), (-61.5,), True, 8.5)
    found = read(tmp_path, "line,level_dbm\n5,-61.5\n")
    assert (found.in_dbm, found.carrier_dbm) == (True, None)


def test_fractions_of_a_source_that_multiplies(tmp_path):
    found = read(tmp_path, "line,level_dbc\n11/2,-70\n13/2,-71\n", HALVES)
    assert found.lines == (Fraction(11, 2), Fraction(13, 2))
    assert read(tmp_path, "frequency_mhz,level_dbc\n110,-70\n", HALVES).lines == (Fraction(11, 2),)


def test_a_source_that_tunes_was_where_the_carrier_says(tmp_path):
    found = read(
        tmp_path, "frequency_mhz,level_dbm\n102.5,-50\n123,9\n143.5,-55\n121,-70\n".replace("121,-70\n", ""), TUNED
    )
    assert found.source_hz == pytest.approx(20.5e6)
    assert found.lines == (5, 7)
    assert read(tmp_path, "line,level_dbc\n5,-50\n", TUNED).source_hz == 20e6


REFUSED = {
    "nothing": (CHAIN, "", "it is empty"),
    "no level": (
        CHAIN,
        "line\n5\n",
        "its first line must name one of the columns level, level_dbc, level_dbm; it has none of them",
    ),
    "line and frequency": (
        CHAIN,
        "line,frequency,level\n5,100 MHz,-60 dBc\n",
        "its first line must name one of the columns line, frequency, frequency_hz, frequency_khz, frequency_mhz, "
        "frequency_ghz; it has line and frequency",
    ),
    "mixed units": (CHAIN, "line,level\n5,-60 dBc\n7,-60 dBm\n", "levels must be all in dBc or all in dBm"),
    "no unit": (
        CHAIN,
        "line,level\n5,-60\n",
        'line 2: level = "-60" must be a level from -250 dBc to 60 dBc, such as "-60 dBc"; the unit is missing',
    ),
    "no line's name": (CHAIN, "line,level_dbc\n5.5,-60\n", 'line 2: line = "5.5" must be a line such as 3 or 1/2'),
    "between lines": (
        CHAIN,
        "frequency_mhz,level_dbc\n110,-60\n",
        "110 MHz is no line of this chain, a multiple of 20 MHz",
    ),
    "beyond the grid": (
        CHAIN,
        "line,level_dbc\n25,-60\n",
        "line 25 is none this chain is computed for: they are multiples of 1/1 up to 24",
    ),
    "twice": (
        CHAIN,
        "frequency_mhz,level_dbc\n100,-60\n100.1,-61\n",
        "line 5 stands there twice (frequency_mhz 100.1 MHz)",
    ),
    "carrier not at 0 dBc": (
        CHAIN,
        "line,level_dbc\n5,-60\n6,-3\n",
        "line 6 is the carrier and must be at 0 dBc, not -3 dBc",
    ),
    "carrier alone": (CHAIN, "line,level_dbc\n6,0\n", "it holds no line beside the carrier"),
    "tuned, no carrier": (
        TUNED,
        "frequency_mhz,level_dbc\n100,-60\n",
        "the source tunes, and no line lies where the carrier can be, 114 to 126 MHz; put the carrier among them, or "
        "name lines by number",
    ),
}


@pytest.mark.parametrize("case", REFUSED)
def test_a_file_that_cannot_be_used(tmp_path, case):
    scenario, text, words = REFUSED[case]
    with pytest.raises(PlannerError) as caught:
        read(tmp_path, text, scenario)
    assert str(caught.value) == f"--measured {tmp_path / 'lines.csv'}: {words}"
