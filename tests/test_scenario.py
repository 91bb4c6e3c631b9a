"""Scenario files: what is read, in SI, and which defaults are filled in.

Expected numbers of conversions are independent (definitions of the units); wordings are regression: our own.
"""

import math
import sys
from dataclasses import fields
from fractions import Fraction
from pathlib import Path

import pytest
from scenario_documents import DEVICE, FULL, amplifier, device, document, given_filter, read

from harmonic_planner.model import (
    Amplifier,
    Design,
    Device,
    GivenFilter,
    Isolation,
    Limits,
    MaskBand,
    OffsetBand,
    Output,
)
from harmonic_planner.parts.kits import kit_names
from harmonic_planner.scenario import ScenarioError, load
from harmonic_planner.scenario_tables import DesignTable, StageTable

# ------------------------------------------------------------------------------------------------- files themselves


def file_problem(path):
    with pytest.raises(ScenarioError) as caught:
        load(path)
    assert str(caught.value) == "\n".join(f"{path}: {problem}" for problem in caught.value.problems)
    return caught.value.problems


def test_a_file_that_is_not_there(tmp_path):
    assert file_problem(tmp_path / "none.toml") == ("there is no such file",)


def test_a_folder(tmp_path):
    assert file_problem(tmp_path) == ("is a folder; name a scenario file in TOML",)


def test_a_path_no_system_takes():
    assert file_problem(Path("a\0b")) == ("cannot be read: embedded null byte",)


def test_a_file_that_is_not_utf_8(tmp_path):
    path = tmp_path / "latin.toml"
    path.write_bytes("[source]\n# 50 \xb5H\n".encode("latin-1"))
    assert file_problem(path) == ("is not UTF-8 text: byte 0xb5 in line 2; save it as UTF-8",)


def test_an_empty_file(tmp_path):
    path = tmp_path / "empty.toml"
    path.touch()
    assert file_problem(path) == ("is empty; `harmonic-planner new FILE` writes a scenario to start from",)


def test_a_file_far_too_long(tmp_path):
    path = tmp_path / "long.toml"
    path.write_text("#" * 1_000_001)
    assert file_problem(path) == ("is longer than 1000000 bytes, which no scenario is",)


def test_byte_order_mark_and_carriage_returns_are_taken(tmp_path):
    path = tmp_path / "windows.toml"
    path.write_bytes(b"\xef\xbb\xbf" + document().replace("\n", "\r\n").encode())
    scenario = load(path)
    assert scenario.folder == tmp_path
    assert scenario.title == "windows"


def test_a_kit_file_is_looked_up_beside_the_scenario(tmp_path):
    path = tmp_path / "chain.toml"
    path.write_text(document(design='kit = "own.toml"'))
    kits = ", ".join(f'"{name}"' for name in kit_names())
    first = 'design.kit = "own.toml"'
    allowed = f"{first}: must be {kits} or the path of a kit file; "
    assert file_problem(path) == (allowed + "not found",)
    (tmp_path / "own.toml").write_text("")
    assert all(problem.startswith(allowed) for problem in file_problem(path))
    shipped = Path(sys.modules["harmonic_planner"].__file__).parent / "parts" / "data" / "chip-1008.toml"
    (tmp_path / "own.toml").write_bytes(shipped.read_bytes())
    assert load(path).design.kits == ("own.toml",)
    path.write_text(document(design='kit = ["chip-0805", "own.toml", "gone.toml"]'))
    assert file_problem(path) == ('design.kit[3] = "gone.toml"' + allowed.removeprefix(first) + "not found",)


# ------------------------------------------------------------------------------------------------------ conversion


def test_every_key_arrives_in_SI():
    scenario = read(FULL)
    assert scenario.title == "everything"
    assert scenario.total == 6
    assert scenario.source.frequency_hz == (99e6, 101e6)
    assert scenario.source.level_dbm == 7.0
    assert scenario.source.lines_dbc == {Fraction(2): -40.0, Fraction(1, 2): -70.0}
    assert scenario.source.phase_noise == ((1e3, -150.0), (1e5, -165.0))
    assert scenario.output.level_dbm == 3.0
    assert scenario.output.limit_dbc == -70.0
    assert scenario.output.mask == (MaskBand(2.3e9, 2.5e9, -75.0),)
    assert scenario.output.offset_mask == (OffsetBand(0.0, 10e6, -80.0),)
    assert (scenario.output.limit_dbm, scenario.output.sm329_category_a) == (-50.0, False)
    design = Design(
        impedance_ohm=75.0,
        kits=("chip-1008", "air-wound"),
        families=("chebyshev",),
        ripple_db=0.2,
        max_order=5,
        flatness_db=0.5,
        loss_db=4.0,
        drift=0.02,
        margin_db=6.0,
        phases="average",
        isolation=Isolation(90.0, flat=True),
        reflection=0.5,
        termination_db=1.5,
        unloaded_q=100.0,
        min_bandwidth=0.1,
        topology=("ladder-shunt",),
        tuned=True,
        order=4,
        bandwidth=0.125,
    )
    assert scenario.design == design
    first, second, third = scenario.stages
    assert first.tap == Limits(mask=(MaskBand(1e9, 2e9, -20.0),), limit_dbm=-40.0, sm329_category_a=True)
    assert second.tap is None
    assert first.device == Device(
        type="push-push",
        conversion_db=-9.0,
        half_angle_rad=pytest.approx(75 * math.pi / 180, rel=1e-15),
        balance_db=30.0,
        device_class="active",
        drive_dbm=(7.0, 13.0),
        lines_dbc={1: -25.0, 4: 5.0},
        reflection=0.6,
    )
    assert first.amplifier == Amplifier(
        gain_db=20.0, saturation_dbm=13.0, noise_figure_db=4.0, lines_dbc={2: -30.0}, reflection=0.2
    )
    assert first.filter == GivenFilter("chebyshev", 3, 200e6, 20e6, 0.2, "ladder-series", 80.0)
    assert (first.name, first.times, first.pad_db, first.pad_after_db, first.limit_dbc) == ("first", 2, 3.0, 2.0, -30.0)
    assert (second.name, second.times, second.device, second.filter) == ("stage 2", 1, None, "none")
    assert third.device == Device("limiter", -10.0, half_angle_rad=math.radians(50), steepness=4.0)


def test_a_stage_overrides_design_keys_for_itself_alone():
    scenario = read(FULL)
    first, second, _ = scenario.stages
    assert second.design == scenario.design
    changed = {f.name for f in fields(Design) if getattr(first.design, f.name) != getattr(scenario.design, f.name)}
    assert changed == {
        *("impedance_ohm", "isolation", "topology", "min_bandwidth"),
        *("kits", "order", "bandwidth", "resonator_f"),
    }
    assert first.design.isolation.level_db == math.inf
    assert first.design.topology == ("auto",)
    assert first.design.min_bandwidth is None
    assert first.design.kits == ("chip-0805",)
    assert (first.design.order, first.design.bandwidth) == (None, None)
    assert (first.design.resonator_h, first.design.resonator_f) == (None, pytest.approx(6e-12, rel=1e-15))


def test_every_design_key_may_stand_in_a_stage():
    assert DesignTable.model_fields.keys() < StageTable.model_fields.keys()
    keys = FULL.split("[design]\n")[1].split("[[stage]]")[0]
    scenario = read(document(stage=f"times = 2\n{DEVICE}\n{keys}"))
    assert scenario.design == Design()
    assert scenario.stages[0].design == read(FULL).design


@pytest.mark.parametrize("resonator, henry, farad", [("8 nH", 8e-9, None), ("6 pF", None, 6e-12), ("auto", None, None)])
def test_a_resonator_is_an_inductance_or_a_capacitance(resonator, henry, farad):
    """A stage's own replaces that of [design] whole, whichever of the two it is."""
    for fixed in ("1 uH", "1 nF"):
        stage = f'times = 2\n{DEVICE}\nresonator = "{resonator}"'
        design = read(document(design=f'resonator = "{fixed}"', stage=stage)).stages[0].design
        assert design.resonator_h == (henry and pytest.approx(henry, rel=1e-15))
        assert design.resonator_f == (farad and pytest.approx(farad, rel=1e-15))


@pytest.mark.parametrize("bandwidth, width_hz", [("10 %", 20e6), ("60 MHz", 60e6), ("100 %", 200e6)])
def test_bandwidth_of_a_given_filter(bandwidth, width_hz):
    text = given_filter(f'family = "butterworth", order = 3, centre = "200 MHz", bandwidth = "{bandwidth}"')
    chosen = read(text).stages[0].filter
    assert chosen.bandwidth_hz == pytest.approx(width_hz, rel=1e-15)
    assert (chosen.topology, chosen.unloaded_q) == (None, None)


BAND = '[{ from = "1 GHz", to = "2 GHz", limit = "-60 dBc" }]'


@pytest.mark.parametrize(
    "keys, expected",
    [
        (f"mask = {BAND}", Output(mask=(MaskBand(1e9, 2e9, -60.0),))),
        (f"offset_mask = {BAND}", Output(offset_mask=(OffsetBand(1e9, 2e9, -60.0),))),
        ('limit_dbm = "-30 dBm"', Output(limit_dbm=-30.0)),
        ('limit = "SM.329 category A"', Output(sm329_category_a=True)),
    ],
)
def test_any_kind_of_limit_can_stand_alone(keys, expected):
    assert read(document(output=keys)).output == expected
    tap = read(document(stage=f"times = 2\n{DEVICE}\ntap = {{ {keys} }}")).stages[0].tap
    assert tap == Limits(expected.limit_dbc, expected.mask, expected.offset_mask, expected.limit_dbm, "SM" in keys)


# -------------------------------------------------------------------------------------------------------- defaults


def test_defaults_are_those_of_the_model():
    scenario = read(document())
    assert scenario.design == Design()
    assert scenario.stages[0].design == Design()
    assert scenario.stages[0].device == Device("push-push", -9.0, half_angle_rad=math.radians(70))
    assert read(amplifier('gain = "20 dB"')).stages[0].amplifier == Amplifier(20.0)
    assert read(device('type = "power-law"')).stages[0].device == Device(
        "power-law", 0.0, half_angle_rad=math.radians(70)
    )
    assert scenario.source.level_dbm == 10.0
    assert scenario.stages[0].filter == "plan"
    assert scenario.title == "chain"


@pytest.mark.parametrize("times, angle_deg", [(2, 70.0), (3, 50.0), (4, 30.0), (5, 24.0), (12, 10.0)])
def test_default_half_angle(times, angle_deg):  # common practice, no source (memory)
    scenario = read(document(stage=f'times = {times}\ndevice = {{ type = "single-ended", conversion = "-9 dB" }}'))
    assert scenario.stages[0].device.half_angle_rad == pytest.approx(math.radians(angle_deg), rel=1e-15)


def test_every_default_is_listed():
    assert read(document(more='[stage.amplifier]\ngain = "20 dB"')).defaults == (
        "source.level = 10 dBm",
        "source.lines: none given; a real source has harmonics",
        "source.phase_noise: none given, none reported",
        "output.level: none asked for",
        "design.impedance = 50 ohm",
        "design.kit = chip-0603",
        "design.families = butterworth and chebyshev",
        "design.ripple = 0.1 dB",
        "design.max_order = 9",
        "design.order = auto",
        "design.bandwidth = auto",
        "design.flatness = 1 dB",
        "design.loss = 6 dB",
        "design.drift = 1 %",
        "design.margin = 3 dB",
        "design.phases = worst-case",
        "design.isolation = 75 dB to 1 GHz, 20 dB a decade less above",
        "design.reflection: the neighbour's own",
        "design.termination: by pad, 3 dB without one, 1.5 dB with 3 dB, 1 dB with 6 dB",
        "design.unloaded_q: from kit and topology",
        "design.min_bandwidth = kit",
        "design.topology = auto",
        "design.resonator = auto",
        "design.tuned = false",
        "stage[1].device.half_angle = 70 deg",
        "stage[1].device.balance = 25 dB",
        "stage[1].device.class = resistive",
        "stage[1].device.drive: no window, none checked; the planned level is nominal",
        "stage[1].device.lines: those of the waveform",
        "stage[1].device.reflection = 0.7",
        "stage[1].pad: none",
        "stage[1].pad_after: none",
        "stage[1].limit: none",
        "stage[1].tap: none",
        "stage[1].filter = plan",
        "stage[1].amplifier.saturation: none, linear",
        "stage[1].amplifier.noise_figure: not counted",
        "stage[1].amplifier.lines: none given",
        "stage[1].amplifier.reflection = 0.3",
    )


def test_what_is_given_is_not_listed():
    assert read(FULL).defaults == (
        "stage[1].filter.ripple = 0.2 dB",
        "stage[2].pad: none",
        "stage[2].pad_after: none",
        "stage[2].limit: none",
        "stage[2].tap: none",
        "stage[2].amplifier: none",
        "stage[3].device.class = resistive",
        "stage[3].device.drive: no window, none checked; the planned level is nominal",
        "stage[3].device.lines: those of the waveform",
        "stage[3].pad: none",
        "stage[3].pad_after: none",
        "stage[3].limit: none",
        "stage[3].tap: none",
        "stage[3].amplifier: none",
        "stage[3].filter = plan",
    )


@pytest.mark.parametrize(
    "keys, text",
    [
        (f"mask = {BAND}", "output.limit: none outside the masks"),
        ('limit_dbm = "-30 dBm"', "output.limit: none"),
        ('limit = "SM.329 category A"', None),
    ],
)
def test_a_limit_that_is_left_out_is_listed(keys, text):
    listed = [x for x in read(document(output=keys)).defaults if x.startswith("output.limit")]
    assert listed == ([text] if text else [])


def test_a_default_that_every_stage_overrides_shaped_nothing():
    listed = read(document(stage=f'times = 2\n{DEVICE}\ndrift = "2 %"')).defaults
    assert not any(text.startswith("design.drift") for text in listed)
