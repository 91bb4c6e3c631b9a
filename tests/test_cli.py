"""The command line: exit statuses, messages, and that nothing is left half-written."""

import json
import os
import signal
import subprocess
import sys
import textwrap
import tomllib
from pathlib import Path

import pytest

import harmonic_planner
from harmonic_planner import cli
from harmonic_planner.model import PlannerError

from plan_fixture import example_plan

ROOT = Path(__file__).parents[1]

GOOD = """\
title = "20 MHz to 120 MHz"
[source]
frequency = "20 MHz"
level = "10 dBm"
lines = { "2" = "-40 dBc", "3" = "-45 dBc" }
[output]
limit = "-45 dBc"
[design]
kit = "chip-1008"
[[stage]]
name = "tripler"
times = 3
device = { type = "push-pull", half_angle = "50 deg", balance = "25 dB", conversion = "-9 dB" }
pad = "6 dB"
pad_after = "6 dB"
[[stage]]
name = "doubler"
times = 2
device = { type = "push-push", half_angle = "70 deg", balance = "25 dB", conversion = "-9 dB" }
pad = "6 dB"
pad_after = "6 dB"
"""


def swap(old: str, new: str) -> str:
    """The good scenario with one thing changed, once."""
    assert old in GOOD
    return GOOD.replace(old, new, 1)


def drop(key: str) -> str:
    """The good scenario without the first line of a key."""
    lines = GOOD.splitlines(keepends=True)
    at = next(i for i, line in enumerate(lines) if line.startswith(f"{key} ="))
    return "".join(lines[:at] + lines[at + 1 :])


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


def snapshot(top: Path) -> dict[str, tuple[int, bytes]]:
    """Inode and content of every file below a folder."""
    return {str(p): (p.stat().st_ino, p.read_bytes()) for p in sorted(top.rglob("*")) if p.is_file()}


@pytest.fixture
def place(tmp_path, monkeypatch) -> Path:
    """An empty current folder."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def quick(monkeypatch) -> None:
    """Planning replaced by a plan written by hand: for tests of what happens around it."""
    import harmonic_planner.planning.plan as planning

    monkeypatch.setattr(planning, "make_plan", lambda _scenario: example_plan())


@pytest.fixture
def earlier(place) -> Path:
    """A result folder from an earlier run."""
    from harmonic_planner.export import folder
    from harmonic_planner.export.plan_json import plan_json

    out = place / "out"
    folder.write(out, {"plan.json": plan_json(example_plan(), ["plan.json", "lines.csv"]), "lines.csv": "a\n"})
    return out


def refused(capsys, arguments: list[str], status: int = 2) -> str:
    """Run, expect the status and one message on standard error, and return it."""
    assert cli.main(arguments) == status
    out, err = capsys.readouterr()
    assert out == ""
    assert "Traceback" not in err
    messages = err.splitlines()
    assert len(messages) == 1, err
    assert messages[0].startswith("error: ")
    return messages[0]


# ------------------------------------------------------------------------------------------------ bad input


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


# --------------------------------------------------------------------------------------------- output folder


def make_file(out: Path) -> None:
    out.write_text("mine")


def make_foreign(out: Path) -> None:
    out.mkdir()
    (out / "mine.txt").write_text("mine")


def make_dangling(out: Path) -> None:
    out.symlink_to("nowhere")


@pytest.mark.parametrize("make", [make_file, make_foreign, make_dangling])
@pytest.mark.usefixtures("quick")
def test_an_out_that_is_not_ours_is_refused_and_left_alone(make, place, capsys):
    (place / "good.toml").write_text(GOOD)
    make(place / "mine")
    before = snapshot(place)
    assert "--out mine" in refused(capsys, ["plan", "good.toml", "--out", "mine"])
    assert snapshot(place) == before


@pytest.mark.usefixtures("quick", "earlier")
def test_a_folder_that_cannot_be_written_is_status_1(place, monkeypatch, capsys):
    (place / "good.toml").write_text(GOOD)
    before = snapshot(place)

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Path, "write_bytes", full)
    message = refused(capsys, ["plan", "good.toml", "--out", "out"], status=1)
    assert "No space left on device" in message
    assert snapshot(place) == before


@pytest.mark.usefixtures("quick")
def test_without_out_the_folder_is_named_after_the_scenario(place, capsys):
    (place / "good.toml").write_text(GOOD)
    assert cli.main(["plan", "good.toml"]) == 3
    assert json.loads((place / "good-plan" / "plan.json").read_text())["verdict"] == "not met"
    assert "good-plan" in capsys.readouterr().out


@pytest.mark.usefixtures("quick")
def test_plan_writes_what_plan_json_lists_and_the_same_bytes_again(place):
    (place / "good.toml").write_text(GOOD)
    contents = []
    for _ in range(2):
        assert cli.main(["plan", "good.toml", "--out", "out"]) == 3
        contents.append({path.name: path.read_bytes() for path in (place / "out").iterdir()})
    assert contents[0] == contents[1]
    assert sorted(contents[0]) == json.loads(contents[0]["plan.json"])["files"]
    assert {"lines.csv", "requirements.csv", "elements.csv"} < set(contents[0])


# ------------------------------------------------------------------------------------ stopped and broken runs


@pytest.mark.parametrize(("number", "status"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
@pytest.mark.parametrize("moment", ["planning", "swapping"])
@pytest.mark.usefixtures("earlier")
def test_a_signal_stops_the_run_and_restores_the_folder(number, status, moment, place, monkeypatch, capsys):
    import harmonic_planner.planning.plan as planning

    (place / "good.toml").write_text(GOOD)
    before = snapshot(place)
    rename = Path.rename

    def stopped_plan(_scenario):
        if moment == "planning":
            os.kill(os.getpid(), number)
        return example_plan()

    def stopped_rename(self, target):
        moved = rename(self, target)
        if moment == "swapping" and self.name == "out":
            os.kill(os.getpid(), number)
        return moved

    monkeypatch.setattr(planning, "make_plan", stopped_plan)
    monkeypatch.setattr(Path, "rename", stopped_rename)
    handlers = [signal.getsignal(each) for each in (signal.SIGINT, signal.SIGTERM)]
    message = refused(capsys, ["plan", "good.toml", "--out", "out"], status=status)
    assert signal.Signals(number).name in message
    assert snapshot(place) == before
    assert [signal.getsignal(each) for each in (signal.SIGINT, signal.SIGTERM)] == handlers


@pytest.mark.parametrize(("number", "status"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_the_process_itself_ends_with_the_status_of_its_signal(number, status, place):
    (place / "good.toml").write_text(GOOD)
    program = textwrap.dedent("""
        import sys, time
        import harmonic_planner.planning.plan as planning
        from harmonic_planner.cli import main
        def slow(_scenario):
            print("planning", flush=True)
            time.sleep(600)
        planning.make_plan = slow
        sys.exit(main(["plan", "good.toml"]))
    """)
    process = subprocess.Popen(
        [sys.executable, "-c", program], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, env=environment()
    )
    assert process.stdout is not None
    assert process.stdout.readline() == "planning\n"
    process.send_signal(number)
    _, err = process.communicate()
    assert process.returncode == status
    assert err == f"error: stopped by {signal.Signals(number).name}\n"
    assert os.listdir(place) == ["good.toml"]


def environment(**extra: str) -> dict[str, str]:
    """The environment, in which a process started elsewhere finds the package."""
    return {**os.environ, "PYTHONPATH": str(ROOT), **extra}


def break_planning(monkeypatch, fault: BaseException) -> None:
    import harmonic_planner.planning.plan as planning

    def broken(_scenario):
        raise fault

    monkeypatch.setattr(planning, "make_plan", broken)


def test_an_unexpected_fault_is_status_1_in_one_line_that_names_it(place, monkeypatch, capsys):
    (place / "good.toml").write_text(GOOD)
    monkeypatch.delenv(cli.DEBUG, raising=False)
    break_planning(monkeypatch, ZeroDivisionError("division by zero"))
    message = refused(capsys, ["plan", "good.toml"], status=1)
    assert "ZeroDivisionError: division by zero" in message
    assert cli.DEBUG in message


def test_details_of_an_unexpected_fault_come_when_asked_for(place, monkeypatch, capsys):
    (place / "good.toml").write_text(GOOD)
    monkeypatch.setenv(cli.DEBUG, "1")
    break_planning(monkeypatch, ZeroDivisionError("division by zero"))
    assert cli.main(["plan", "good.toml"]) == 1
    assert "Traceback" in capsys.readouterr().err


def test_a_fault_of_the_user_found_while_planning_is_status_2(place, monkeypatch, capsys):
    (place / "good.toml").write_text(GOOD)
    break_planning(monkeypatch, PlannerError("stage.tripler.device: makes no third line"))
    assert refused(capsys, ["plan", "good.toml"]).endswith("stage.tripler.device: makes no third line")


def test_a_reader_that_goes_away_ends_the_run_quietly(place):
    (place / "good.toml").write_text(GOOD)
    read, write = os.pipe()
    os.close(read)
    program = "import sys; from harmonic_planner.cli import main; sys.exit(main(['schema']))"
    process = subprocess.run(
        [sys.executable, "-c", program], stdout=write, stderr=subprocess.PIPE, text=True, env=environment(), check=False
    )
    os.close(write)
    assert (process.returncode, process.stderr) == (1, "")


# ------------------------------------------------------------------------------------------ commands that work


@pytest.fixture(scope="module")
def planned(tmp_path_factory) -> tuple[int, dict, str]:
    """The real thing, once: status, plan.json and the terminal of the good scenario."""
    top = tmp_path_factory.mktemp("planned")
    (top / "good.toml").write_text(GOOD)
    process = subprocess.run(
        [sys.executable, "-m", "harmonic_planner", "plan", "good.toml", "--out", "out"],
        cwd=top,
        capture_output=True,
        text=True,
        env=environment(),
        check=False,
    )
    assert process.stderr == ""
    return process.returncode, json.loads((top / "out" / "plan.json").read_text()), process.stdout


def test_the_status_says_what_the_plan_says(planned):
    status, plan, _ = planned
    assert status == (0 if plan["limits_met"] and plan["buildable"] and plan["self_check"] else 3)


def test_the_terminal_starts_with_the_verdict_and_stays_within_eighty_plain_columns(planned):
    _, plan, text = planned
    assert " ".join(text.split()).startswith(" ".join(plan["sentence"].split()))
    assert "\x1b" not in text
    assert max(len(line) for line in text.splitlines()) <= 80


def test_lines_shows_every_node_of_the_real_plan(place, capsys):
    (place / "good.toml").write_text(GOOD)
    assert cli.main(["lines", "good.toml"]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    for words in ("Source: line 1, 20 MHz", "Stage 1, tripler: ×3 to line 3, 60 MHz", "Stage 2, doubler: ×2 to line 6"):
        assert words in out
    assert os.listdir(place) == ["good.toml"]


def test_schema_prints_a_json_schema_that_knows_the_tables(capsys):
    assert cli.main(["schema"]) == 0
    content = json.loads(capsys.readouterr().out)
    assert {"source", "output", "design", "stage"} <= set(content["properties"])


def test_new_writes_a_scenario_that_loads(place, capsys):
    from harmonic_planner.scenario import load

    assert cli.main(["new", "chain.toml"]) == 0
    assert "chain.toml" in capsys.readouterr().out
    assert load(place / "chain.toml").stages


def test_new_never_overwrites(place, capsys):
    (place / "chain.toml").write_text("mine")
    assert "chain.toml" in refused(capsys, ["new", "chain.toml"])
    assert (place / "chain.toml").read_text() == "mine"


@pytest.mark.usefixtures("place")
def test_new_says_where_it_cannot_write(capsys):
    assert "cannot be written" in refused(capsys, ["new", "missing/chain.toml"], status=1)


def test_new_leaves_nothing_when_it_fails(place, monkeypatch, capsys):
    import harmonic_planner.scenario as scenario

    monkeypatch.setattr(scenario, "TEMPLATE", 3)
    refused(capsys, ["new", "chain.toml"], status=1)
    assert os.listdir(place) == []


def test_the_shipped_scenario_is_found_and_loads():
    from harmonic_planner.scenario import load

    path = cli.shipped_scenario()
    assert path.name == cli.SHIPPED
    assert load(path).stages


@pytest.mark.usefixtures("quick")
def test_the_shipped_scenario_is_planned_when_none_is_named(place, capsys):
    assert cli.main(["plan"]) == 3
    assert cli.SHIPPED in capsys.readouterr().out
    assert os.listdir(place) == [f"{Path(cli.SHIPPED).stem}-plan"]


def test_the_package_carries_the_scenarios_folder():
    settings = tomllib.loads((ROOT / "pyproject.toml").read_text())
    carried = settings["tool"]["hatch"]["build"]["targets"]["wheel"]["force-include"]
    assert carried == {"scenarios": "harmonic_planner/scenarios"}
    assert settings["project"]["version"] == harmonic_planner.__version__


# ------------------------------------------------------------------------------------------------------- help


@pytest.mark.parametrize("command", ["", "plan", "lines", "schema", "new"])
def test_help_shows_an_example_of_that_command(command, capsys):
    assert cli.main([*command.split(), "--help"]) == 0
    text = capsys.readouterr().out
    assert f"{cli.PROGRAM} {command}".rstrip() in text[text.index("Example:") :]


def test_no_command_shows_the_help_and_is_a_wrong_command_line(capsys):
    assert cli.main([]) == 2
    assert "Example:" in capsys.readouterr().out


def test_version(capsys):
    assert cli.main(["--version"]) == 0
    assert capsys.readouterr().out == f"harmonic-planner {harmonic_planner.__version__}\n"


def test_importing_the_commands_imports_nothing_heavy():
    # typer itself may bring pydantic in once a command runs; what counts is that this package does not.
    program = (
        "import sys; import harmonic_planner.cli; "
        "heavy = {'numpy', 'scipy', 'pandas', 'matplotlib', 'pydantic', 'quantiphy', 'rich'} & set(sys.modules); "
        "harmonic_planner.cli.main(['plan', '--help']); "
        "heavy |= {'numpy', 'scipy', 'pandas', 'matplotlib', 'quantiphy'} & set(sys.modules); "
        "sys.exit(' '.join(sorted(heavy)) or 0)"
    )
    process = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, env=environment(), check=False
    )
    assert (process.returncode, process.stderr) == (0, "")
