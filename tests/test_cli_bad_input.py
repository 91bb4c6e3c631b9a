"""Input that cannot be used: status 2, one clear message each, no traceback, an existing output folder untouched."""

import os
from pathlib import Path

import pytest
from cli_helpers import GOOD, drop, refused, snapshot, swap, write_earlier

import harmonic_planner
from harmonic_planner import cli

KIT = 'kit = "mine.toml"'

# What is wrong: the scenario's text, and what the message must name: the key, and the value or what is allowed.
BAD_SCENARIOS = {
    "source frequency missing": (drop("frequency"), ["source.frequency"]),
    "limit missing": (drop("limit"), ["output"]),
    "times missing": (drop("times"), ["stage", "times"]),
    "device missing": (drop("device"), ["stage", "device"]),
    "conversion missing": (swap(', conversion = "-9 dB"', ""), ["stage", "device.conversion"]),
    "no stage": (GOOD[: GOOD.index("[[stage]]")], ["stage"]),
    "no source": (GOOD.replace(GOOD[GOOD.index("[source]") : GOOD.index("[output]")], ""), ["source"]),
    "wrong unit": (swap('"20 MHz"', '"20 dB"'), ["source.frequency", "20 dB"]),
    "unit in the wrong case": (swap('"20 MHz"', '"20 mhz"'), ["source.frequency", "20 mhz"]),
    "no unit": (swap('"20 MHz"', '"20"'), ["source.frequency", "20"]),
    "a bare number": (swap('"20 MHz"', "20e6"), ["source.frequency", "20"]),
    "negative frequency": (swap('"20 MHz"', '"-20 MHz"'), ["source.frequency", "-20 MHz"]),
    "frequency of zero": (swap('"20 MHz"', '"0 MHz"'), ["source.frequency", "0 MHz"]),
    "frequency not a number": (swap('"20 MHz"', '"nan MHz"'), ["source.frequency", "nan"]),
    "frequency a TOML nan": (swap('"20 MHz"', "nan"), ["source.frequency", "nan"]),
    "frequency infinite": (swap('"20 MHz"', '"inf MHz"'), ["source.frequency", "inf"]),
    "frequency a true": (swap('"20 MHz"', "true"), ["source.frequency", "true"]),
    "frequency a date": (swap('"20 MHz"', "2024-01-01"), ["source.frequency", "2024"]),
    "span backwards": (swap('"20 MHz"', '["21 MHz", "19 MHz"]'), ["source.frequency", "21 MHz"]),
    "span of three": (swap('"20 MHz"', '["19 MHz", "20 MHz", "21 MHz"]'), ["source.frequency"]),
    "times zero": (swap("times = 3", "times = 0"), ["stage", "times", "0"]),
    "times negative": (swap("times = 3", "times = -2"), ["stage", "times", "-2"]),
    "times broken": (swap("times = 3", "times = 2.5"), ["stage", "times", "2.5"]),
    "times a list": (swap("times = 3", "times = [3]"), ["stage", "times"]),
    "times text": (swap("times = 3", 'times = "3"'), ["stage", "times"]),
    "level a list": (swap('level = "10 dBm"', 'level = ["10 dBm"]'), ["source.level"]),
    "level in dBc": (swap('level = "10 dBm"', 'level = "10 dBc"'), ["source.level", "10 dBc"]),
    "limit above the carrier": (swap('limit = "-45 dBc"', 'limit = "5 dBc"'), ["output.limit", "5 dBc"]),
    "unknown device": (swap('"push-pull"', '"pull-push"'), ["device.type", "pull-push", "push-pull"]),
    "half-angle of 400 degrees": (swap('"50 deg"', '"400 deg"'), ["half_angle", "400 deg"]),
    "balance negative": (swap('balance = "25 dB"', 'balance = "-25 dB"'), ["balance", "-25 dB"]),
    "device that makes no such line": (swap('"50 deg"', '"90 deg"'), ["device.type", "push-pull", "90 deg"]),
    "line called two": (swap('"2" = "-40 dBc"', '"two" = "-40 dBc"'), ["source.lines", "two"]),
    "line zero": (swap('"2" = "-40 dBc"', '"0" = "-40 dBc"'), ["source.lines", "0"]),
    "line of a zeroth": (swap('"2" = "-40 dBc"', '"1/0" = "-40 dBc"'), ["source.lines", "1/0"]),
    "lines a list": (swap('{ "2" = "-40 dBc", "3" = "-45 dBc" }', '["-40 dBc"]'), ["source.lines"]),
    "unknown key, with the nearest": (swap("pad_after", "pad_aftr"), ["pad_aftr", "pad_after"]),
    "unknown table": (swap("[design]", "[desing]"), ["desing", "design"]),
    "unknown kit": (swap('"chip-1008"', '"chip-1009"'), ["kit", "chip-1009", "chip-1008"]),
    "kit file missing": (swap('kit = "chip-1008"', 'kit = "gone.toml"'), ["kit", "gone.toml"]),
    "kit file bad": (swap('kit = "chip-1008"', KIT), ["mine.toml", "inductor.smallest", "-3.3 nH"]),
    "unknown topology": (swap("[design]", '[design]\ntopology = "ladderr"'), ["design.topology", "ladderr"]),
    "unknown family": (swap("[design]", '[design]\nfamilies = ["bessel"]'), ["design.families", "bessel"]),
    "no family": (swap("[design]", "[design]\nfamilies = []"), ["design.families"]),
    "order of a hundred": (swap("[design]", "[design]\nmax_order = 100"), ["design.max_order", "100"]),
    "drift of two hundred per cent": (swap("[design]", '[design]\ndrift = "200 %"'), ["design.drift", "200 %"]),
    "ripple of zero": (swap("[design]", '[design]\nripple = "0 dB"'), ["design.ripple", "0 dB"]),
    "reflection of two": (swap("[design]", "[design]\nreflection = 2"), ["design.reflection", "2"]),
    "impedance negative": (swap("[design]", '[design]\nimpedance = "-50 ohm"'), ["design.impedance", "-50 ohm"]),
    "phases unknown": (swap("[design]", '[design]\nphases = "random"'), ["design.phases", "random"]),
    "pad negative": (swap('pad = "6 dB"', 'pad = "-6 dB"'), ["pad", "-6 dB"]),
    "filter unknown": (swap('pad = "6 dB"', 'filter = "planned"'), ["filter", "planned"]),
    "filter without centre": (
        swap('pad = "6 dB"', 'filter = { family = "butterworth", order = 3, bandwidth = "5 MHz" }'),
        ["filter.centre"],
    ),
    "mask backwards": (
        swap('limit = "-45 dBc"', 'limit = "-45 dBc"\nmask = [{ from = "2 MHz", to = "1 MHz", limit = "-50 dBc" }]'),
        ["output.mask"],
    ),
    "stage not a list": (GOOD[: GOOD.index("[[stage]]")] + "[stage]\ntimes = 2\n", ["stage"]),
    "key twice": (swap('level = "10 dBm"', 'level = "10 dBm"\nlevel = "9 dBm"'), ["line"]),
    "TOML broken": (swap("[output]", "[output"), ["line 6", "column"]),
    "TOML cut off": (GOOD[:-10], ["line", "column"]),
    "empty": ("", ["empty"]),
    "title a number": (swap('"20 MHz to 120 MHz"', "3"), ["title", "3"]),
    "not TOML at all": ('{"source": 1}', ["line 1"]),
}


@pytest.fixture
def place(tmp_path, monkeypatch) -> Path:
    """An empty current folder."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def earlier(place) -> Path:
    """A result folder from an earlier run."""
    return write_earlier(place / "out")


@pytest.mark.usefixtures("earlier")
@pytest.mark.parametrize("case", BAD_SCENARIOS)
def test_a_bad_scenario_is_refused_with_one_message(case, place, capsys):
    text, names = BAD_SCENARIOS[case]
    (place / "bad.toml").write_text(text, encoding="utf-8")
    shipped_kit = (Path(harmonic_planner.__path__[0]) / "parts" / "data" / "chip-1008.toml").read_text(encoding="utf-8")
    (place / "mine.toml").write_text(shipped_kit.replace('"3.3 nH"', '"-3.3 nH"', 1), encoding="utf-8")
    before = snapshot(place)
    message = refused(capsys, ["plan", "bad.toml", "--out", "out"])
    assert [name for name in ["bad.toml: ", *names] if name not in message] == []
    assert snapshot(place) == before


def test_the_table_of_bad_scenarios_starts_from_one_that_is_good(place):
    from harmonic_planner.scenario import load

    (place / "good.toml").write_text(GOOD, encoding="utf-8")
    assert [stage.times for stage in load(place / "good.toml").stages] == [3, 2]


def make_folder(path: Path) -> None:
    path.mkdir()


def make_latin(path: Path) -> None:
    path.write_bytes(GOOD.replace("20 MHz to", "20 MHz °").encode("latin-1"))


def make_utf16(path: Path) -> None:
    path.write_bytes(GOOD.encode("utf-16"))


def make_zeros(path: Path) -> None:
    path.write_bytes(bytes(1000))


def make_huge(path: Path) -> None:
    path.write_bytes(b"#" * 3_000_000)


def make_loop(path: Path) -> None:
    path.symlink_to(path.name)


def make_nothing(path: Path) -> None:
    """Leave the file missing."""


@pytest.mark.parametrize(
    "make",
    [make_folder, make_latin, make_utf16, make_zeros, make_huge, make_loop, make_nothing],
    ids=lambda f: f.__name__,
)
@pytest.mark.parametrize("command", ["plan", "lines"])
def test_a_file_that_cannot_be_read_as_a_scenario_is_refused(make, command, place, earlier, capsys):
    make(place / "bad.toml")
    before = snapshot(earlier)
    arguments = [command, "bad.toml"] + (["--out", "out"] if command == "plan" else [])
    assert "bad.toml" in refused(capsys, arguments)
    assert snapshot(earlier) == before


def test_an_unreadable_file_is_refused(place, monkeypatch, capsys):
    (place / "secret.toml").write_text(GOOD)

    def deny(self, *_args, **_settings):
        raise PermissionError(13, "Permission denied", str(self))

    for name in (
        "open",
        "read_bytes",
        "read_text",
    ):  # root may read anything, so the system's answer is put in its mouth
        monkeypatch.setattr(Path, name, deny)
    message = refused(capsys, ["plan", "secret.toml"])
    assert "secret.toml" in message
    assert "Permission denied" in message


@pytest.mark.parametrize(
    ("arguments", "names"),
    [
        (["plan", "--nonsense"], ["--nonsense"]),
        (["plan", "a.toml", "--out"], ["--out"]),
        (["plan", "a.toml", "b.toml"], ["b.toml"]),
        (["lines"], ["SCENARIO"]),
        (["lines", "a.toml", "--out", "x"], ["--out"]),
        (["new"], ["FILE"]),
        (["schema", "extra"], ["extra"]),
        (["plot"], ["plot"]),
        (["--frobnicate"], ["--frobnicate"]),
    ],
)
def test_a_bad_command_line_is_refused_with_one_message(arguments, names, place, capsys):
    message = refused(capsys, arguments)
    assert [name for name in names if name not in message] == []
    assert "--help" in message
    assert os.listdir(place) == []


def test_all_problems_of_a_file_are_told_together_a_line_each(place, capsys):
    text = swap('"20 MHz"', '"20 dB"').replace("times = 3", "times = 0")
    (place / "bad.toml").write_text(text)
    assert cli.main(["plan", "bad.toml"]) == 2
    messages = capsys.readouterr().err.splitlines()
    assert len(messages) == 2
    assert all(message.startswith("error: ") for message in messages)


def test_a_message_cannot_steer_the_terminal(place, capsys):
    (place / "bad.toml").write_text(swap('"push-pull"', '"\\u001b[2Jpull"'))
    assert "\x1b" not in refused(capsys, ["plan", "bad.toml"])
