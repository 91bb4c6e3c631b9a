"""Filters known from files: Touchstone two-ports and tables of rejection, and what is wrong with them in exact words.

Wordings are regression: our own. Expected S-parameters are closed forms written out here, or scikit-rf's.
"""

import pickle
import tomllib
from pathlib import Path

import numpy as np
import pytest
from scenario_documents import given_filter
from test_scenario_schema import schema_faults

from harmonic_planner.applying import moved
from harmonic_planner.model import MeasuredFilter
from harmonic_planner.scenario import ScenarioError, json_schema, loads

ROW = "0 0 1 0 1 0 0 0"
_SKRF_DB = 1e-6
"""scikit-rf keeps singular matrices at bay by moving them a little: 1.4e-8 dB was seen."""


def read(folder: Path, keys: str, **files: str | bytes) -> MeasuredFilter:
    for name, content in files.items():
        path = folder / name.replace("__", ".")
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
    found = loads(given_filter(keys), path=folder / "chain.toml").stages[0].filter
    assert isinstance(found, MeasuredFilter)
    return found


def problem(folder: Path, keys: str, **files: str | bytes) -> str:
    with pytest.raises(ScenarioError) as caught:
        read(folder, keys, **files)
    assert len(caught.value.problems) == 1
    return caught.value.problems[0]


def two_port(frequency_hz, s, *, head="# Hz S RI R 50") -> str:
    """Text of a version 1 file; its two-ports are in the order S11, S21, S12, S22 (published: IBIS, version 1.1)."""
    rows = [head]
    for f, m in zip(frequency_hz, s, strict=True):
        numbers = (m[0][0], m[1][0], m[0][1], m[1][1])
        rows.append(" ".join([f"{f:.17g}", *(f"{x.real:.17g} {x.imag:.17g}" for x in map(complex, numbers))]))
    return "\n".join(rows) + "\n"


def series_resistor(ohm, z0):
    """S of a series resistor (published: Pozar, Microwave Engineering, table 4.1 by ABCD): independent of frequency."""
    reflected, through = ohm / (ohm + 2 * z0), 2 * z0 / (ohm + 2 * z0)
    return [[reflected, through], [through, reflected]]


def test_decibels_are_read_as_they_stand(tmp_path):
    text = "! bench\n# MHz S DB R 50\n100 -20 0 -3 10 -40 10 -9 0\n200 -0.5 0 -42.5 10 -40 10 -9 0\n"
    found = read(tmp_path, 'touchstone = "x.s2p"', x__s2p=text)
    assert (found.source, found.file, found.beyond_sweep) == ("touchstone", "x.s2p", "refuse")
    assert found.frequency_hz == pytest.approx((100e6, 200e6))
    assert found.attenuation_db == pytest.approx((3.0, 42.5))  # S21, not S12
    assert found.return_loss_db == pytest.approx((20.0, 0.5))  # S11, not S22
    assert found.impedance_ohm == (50.0, 50.0)


def test_a_transmission_of_zero_is_very_deep_and_not_infinite(tmp_path):
    found = read(tmp_path, 'touchstone = "x.s2p"', x__s2p=two_port([1e6, 2e6], [np.zeros((2, 2))] * 2))
    assert found.attenuation_db == (300.0, 300.0)


@pytest.mark.published
@pytest.mark.parametrize("z0", [50.0, 75.0])
def test_a_two_port_measured_between_other_impedances_is_recalculated(tmp_path, z0):
    """A series resistor of 100 ohm in 50 ohm, measured in 75 ohm: 20 log10(1 + R/(2 Z0)) in the stage's impedance."""
    text = two_port([1e6, 2e6], [series_resistor(100.0, z0)] * 2, head=f"# Hz S RI R {z0:g}")
    found = read(tmp_path, 'touchstone = "x.s2p"', x__s2p=text)
    assert found.attenuation_db == pytest.approx([20 * np.log10(2.0)] * 2, abs=_SKRF_DB)
    assert found.return_loss_db == pytest.approx([20 * np.log10(2.0)] * 2, abs=_SKRF_DB)
    assert found.impedance_ohm == (z0, z0)


@pytest.mark.published
def test_unequal_port_impedances_of_version_2_are_honoured(tmp_path):
    """A through between 50 and 200 ohm reflects 0.6 and passes 0.8 (4 Z1 Z2/(Z1+Z2)²); in 50 ohm it is a through."""
    s = [[0.6, 0.8], [0.8, -0.6]]
    head = "[Version] 2.0\n# Hz S RI R 50\n[Number of Ports] 2\n[Two-Port Data Order] 21_12\n"
    head += "[Number of Frequencies] 2\n[Reference] 50 200\n[Network Data]"
    text = two_port([1e6, 2e6], [s, s], head=head) + "[End]\n"
    found = read(tmp_path, 'touchstone = "x.ts"', x__ts=text)
    assert found.attenuation_db == pytest.approx([0.0, 0.0], abs=_SKRF_DB)
    assert found.impedance_ohm == (50.0, 200.0)


def test_noise_data_behind_the_network_data_is_left_aside(tmp_path):
    """In version 1 a lower frequency starts noise data, of five columns (published: IBIS, version 1.1)."""
    text = "# GHz S MA R 50\n" + "2 .95 -26 .5 157 .04 76 .66 -14\n22 .60 -144 .1 40 .14 40 .56 -85\n"
    text += "4 .7 .64 69 .38\n18 2.7 .46 -33 .40\n"
    assert read(tmp_path, 'touchstone = "x.s2p"', x__s2p=text).frequency_hz == pytest.approx((2e9, 22e9))


TOUCHSTONE = 'stage[1].filter.touchstone = "{}": must be the path of a Touchstone file of two ports; {}'
BAD_TOUCHSTONE = {
    "missing": ("x.s2p", None, "there is no such file"),
    "one port": ("x.s1p", "# Hz S RI R 50\n1e6 0 0\n2e6 0 0\n", "it has 1 port; a filter has two"),
    "four ports": ("x.s4p", "", "it has 4 ports; a filter has two"),
    "one port of version 2": (
        "x.ts",
        "[Version] 2.0\n# Hz S RI R 50\n[Number of Ports] 1\n[Number of Frequencies] 1\n"
        "[Network Data]\n1e6 0 0\n[End]\n",
        "it has 1 port; a filter has two",
    ),
    "another name": ("x.txt", "1", "its name must end in .s2p, or in .ts for version 2"),
    "empty": ("x.s2p", " \n", "it is empty"),
    "no rows": ("x.s2p", "# Hz S RI R 50\n", "it has no row of numbers"),
    "one row": ("x.s2p", f"# Hz S RI R 50\n1e6 {ROW}\n", "it must hold at least two frequencies, ascending"),
    "descending": (
        "x.s2p",
        f"# Hz S RI R 50\n1e6 {ROW}\n3e6 {ROW}\n2e6 {ROW}\n",
        "its frequencies must ascend; one follows 3000000 Hz and is below it",
    ),
    "twice": (
        "x.s2p",
        f"# Hz S RI R 50\n1e6 {ROW}\n1e6 {ROW}\n",
        "its frequencies must ascend; 1000000 Hz follows 1000000 Hz",
    ),
    "not a number": (
        "x.s2p",
        f"# Hz S RI R 50\n1e6 {ROW}\n2e6 0 0 nan 0 1 0 0 0\n",
        "it holds numbers that are not finite",
    ),
    "no resistance": (
        "x.s2p",
        f"# Hz S RI R 0\n1e6 {ROW}\n2e6 {ROW}\n",
        "the impedance of its ports must be above 0 ohm",
    ),
    "words": (
        "x.s2p",
        "# Hz S RI R 50\n1e6 a b\n",
        "it is not a Touchstone file of two ports (could not convert string to float: 'a')",
    ),
}


def test_a_folder_is_no_file(tmp_path):
    (tmp_path / "x.s2p").mkdir()
    assert problem(tmp_path, 'touchstone = "x.s2p"') == TOUCHSTONE.format("x.s2p", "it is a folder")


@pytest.mark.parametrize("case", BAD_TOUCHSTONE)
def test_a_touchstone_file_that_cannot_be_used(tmp_path, case):
    name, content, words = BAD_TOUCHSTONE[case]
    files = {} if content is None else {name.replace(".", "__"): content}
    assert problem(tmp_path, f'touchstone = "{name}"', **files) == TOUCHSTONE.format(name, words)


class _Trap:
    """Something that leaves a file behind when it is unpickled."""

    def __init__(self, path: Path) -> None:
        self.path = path

    def __reduce__(self):
        return (Path.touch, (self.path,))


@pytest.mark.parametrize("protocol", [0, 4])
def test_a_file_that_is_a_pickle_is_not_run(tmp_path, protocol):
    trap = pickle.dumps(_Trap(tmp_path / "sprung"), protocol=protocol)
    assert "is not a Touchstone file" in problem(tmp_path, 'touchstone = "x.s2p"', x__s2p=trap)
    assert not (tmp_path / "sprung").exists()


@pytest.mark.parametrize(
    "text",
    [
        "frequency,rejection\n50 MHz,45.5 dB\n0.1 GHz,0 dB\n200 MHz,60 dB\n",
        "frequency_hz,rejection_db\n50e6,45.5\n100e6,0\n200e6,60\n",
        "# vendor's sheet\n\nremark, Frequency_MHz , rejection_db\na,50,45.5\n,100,0\n#b,1,1\nc,200, 60\n",
        "\ufefffrequency_khz,rejection\n50000,45.5 dB\n100000,0 dB\n200000,60 dB",
        "frequency_ghz,rejection_db\r\n0.05,45.5\r\n0.1,0\r\n0.2,60\r\n",
    ],
)
def test_a_table_of_rejection(tmp_path, text):
    found = read(tmp_path, 'table = "x.csv", beyond_sweep = "no-rejection"', x__csv=text)
    assert (found.source, found.file, found.beyond_sweep) == ("table", "x.csv", "no-rejection")
    assert found.frequency_hz == pytest.approx((50e6, 100e6, 200e6))
    assert found.attenuation_db == (45.5, 0.0, 60.0)
    assert (found.return_loss_db, found.impedance_ohm) == ((), None)


TABLE = 'stage[1].filter.table = "x.csv": must be the path of a CSV file with frequency and rejection; {}'
BAD_TABLES = {
    "empty": ("\n# nothing\n", "it is empty"),
    "no rows": ("frequency_hz,rejection_db\n", "it has no row of numbers under its columns"),
    "no rejection": (
        "frequency_hz,attenuation\n1e6,3\n",
        "its first line must name one of the columns rejection, rejection_db; it has none of them",
    ),
    "two frequencies": (
        "frequency_hz,frequency_mhz,rejection_db\n1e6,1,3\n",
        "its first line must name one of the columns frequency, frequency_hz, frequency_khz, frequency_mhz, "
        "frequency_ghz; it has frequency_hz and frequency_mhz",
    ),
    "no unit": (
        "frequency,rejection_db\n50,45\n",
        'line 2: frequency = "50" must be a frequency from 1 kHz to 1 THz, such as "600 MHz"; the unit is missing',
    ),
    "a word": (
        "frequency_hz,rejection_db\n1e6,3\n2e6,lots\n",
        'line 3: rejection_db = "lots" must be a plain number from -20 to 300',
    ),
    "a short row": (
        "frequency_hz,rejection_db\n1e6,3\n2e6\n",
        'line 3: rejection_db = "" must be a plain number from -20 to 300',
    ),
    "one row": ("frequency_hz,rejection_db\n1e6,3\n", "it must hold at least two frequencies, ascending"),
    "descending": (
        "frequency_hz,rejection_db\n2e6,3\n1e6,3\n",
        "its frequencies must ascend; 1000000 Hz follows 2000000 Hz",
    ),
    "no text": (b"\xff\xfe\x00", "it is not UTF-8 text"),
}


@pytest.mark.parametrize("case", BAD_TABLES)
def test_a_table_that_cannot_be_used(tmp_path, case):
    content, words = BAD_TABLES[case]
    assert problem(tmp_path, 'table = "x.csv"', x__csv=content) == TABLE.format(words)


def test_the_problem_of_a_file_stands_among_the_others(tmp_path):
    text = given_filter('touchstone = "x.s2p"').replace('limit = "-60 dBc"', "limit = -60")
    with pytest.raises(ScenarioError) as caught:
        loads(text, path=tmp_path / "chain.toml")
    assert [p.split(" = ")[0] for p in caught.value.problems] == ["output.limit", "stage[1].filter.touchstone"]


@pytest.mark.parametrize("keys", ['touchstone = "x.s2p"', 'table = "x.csv", beyond_sweep = "no-rejection"'])
def test_the_schema_knows_measured_filters(keys):
    assert schema_faults(tomllib.loads(given_filter(keys)), json_schema(), json_schema()) == []
    wrong = tomllib.loads(given_filter(f"{keys}, order = 3"))
    assert schema_faults(wrong, json_schema(), json_schema()) != []


def test_a_scenario_that_moves_keeps_its_files(tmp_path):
    text = given_filter('touchstone = "parts/x.s2p"')
    there = moved(text, from_folder=tmp_path, to_folder=tmp_path / "new")
    assert there == text.replace('"parts/x.s2p"', '"../parts/x.s2p"')
    assert moved(text, from_folder=tmp_path, to_folder=tmp_path) == text


def test_the_default_is_listed(tmp_path):
    (tmp_path / "x.csv").write_text("frequency_hz,rejection_db\n1e6,3\n2e6,3\n")
    scenario = loads(given_filter('table = "x.csv"'), path=tmp_path / "chain.toml")
    assert "stage[1].filter.beyond_sweep = refuse" in scenario.defaults
