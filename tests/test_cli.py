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
from cli_helpers import GOOD, refused, snapshot, write_earlier

import harmonic_planner
from harmonic_planner import cli
from harmonic_planner.model import PlannerError

from plan_fixture import example_worked

ROOT = Path(__file__).parents[1]


@pytest.fixture
def place(tmp_path, monkeypatch) -> Path:
    """An empty current folder."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def quick(monkeypatch) -> None:
    """Planning replaced by a plan written by hand: for tests of what happens around it."""
    import harmonic_planner.planning.plan as planning

    monkeypatch.setattr(planning, "work_out", lambda _scenario: example_worked())


@pytest.fixture
def earlier(place) -> Path:
    """A result folder from an earlier run."""
    return write_earlier(place / "out")


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
        contents.append(contents_of(place / "out"))
    assert contents[0] == contents[1]
    content = json.loads(contents[0]["plan.json"])
    assert sorted(contents[0]) == content["files"]
    assert {"lines.csv", "requirements.csv", "elements.csv"} < set(contents[0])
    made = content["stages"][0]["filter"]
    assert (made["netlist"], made["touchstone"]) == ("filters/01_first_tripler.cir", "filters/01_first_tripler.s2p")
    assert {made["netlist"], made["touchstone"], "filters/01_first_tripler_bench.cir"} < set(contents[0])
    assert content["stages"][1]["filter"]["netlist"] is None


@pytest.mark.usefixtures("quick")
def test_a_file_of_the_users_among_the_filters_is_refused_and_left_alone(place, capsys):
    (place / "good.toml").write_text(GOOD)
    assert cli.main(["plan", "good.toml", "--out", "out"]) == 3
    capsys.readouterr()
    (place / "out" / "filters" / "measured.s2p").write_text("mine")
    before = snapshot(place)
    assert "holds filters/measured.s2p" in refused(capsys, ["plan", "good.toml", "--out", "out"])
    assert snapshot(place) == before


def contents_of(folder: Path) -> dict[str, bytes]:
    """Every file below a folder, by its name relative to it."""
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


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
        return example_worked()

    def stopped_rename(self, target):
        moved = rename(self, target)
        if moment == "swapping" and self.name == "out":
            os.kill(os.getpid(), number)
        return moved

    monkeypatch.setattr(planning, "work_out", stopped_plan)
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
        planning.work_out = slow
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

    monkeypatch.setattr(planning, "work_out", broken)


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


@pytest.mark.parametrize("command", ["", "plan", "lines", "window", "schema", "new", "apply"])
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
