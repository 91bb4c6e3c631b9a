"""The command `apply`: a proposal of the plan becomes a new scenario; nothing is written over."""

import os
from dataclasses import replace
from pathlib import Path

import pytest
from cli_helpers import GOOD, refused, snapshot, swap

from harmonic_planner import cli
from harmonic_planner.planning.plan import WorkedOut
from harmonic_planner.scenario import load

from plan_fixture import doubler, example_plan

(PROPOSAL,) = doubler().filter.proposals
KITS = Path(cli.__file__).parent / "parts" / "data"


def planned(monkeypatch, *proposals) -> None:
    """Planning replaced by a plan whose second stage has these proposals."""
    import harmonic_planner.planning.plan as planning

    first, second, *_ = example_plan().stages
    second = replace(second, filter=replace(second.filter, proposals=proposals))
    worked = WorkedOut(replace(example_plan(), stages=(first, second)), (None, None))
    monkeypatch.setattr(planning, "work_out", lambda _scenario: worked)


@pytest.fixture
def place(tmp_path, monkeypatch) -> Path:
    """A current folder with a good scenario, the plan of which has two proposals for its second stage."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "good.toml").write_text(GOOD)
    planned(monkeypatch, PROPOSAL, replace(PROPOSAL, change="coupled", topology="capacitive", resonator=27e-9))
    return tmp_path


def test_the_proposal_is_taken_and_what_changed_is_said(place, capsys):
    assert cli.main(["apply", "good.toml", "1"]) == 0
    out, err = capsys.readouterr()
    assert err == ""
    assert out.splitlines() == [
        "Proposal 1, for stage 2, doubler: wider band, more resonators",
        '  families = ["chebyshev"] (was ["butterworth", "chebyshev"])',
        '  order = 5 (was "auto")',
        '  bandwidth = "20.168 %" (was "auto")',
        '  topology = "ladder-shunt" (was "auto")',
        "Wrote good-1.toml. Plan it with: harmonic-planner plan good-1.toml",
    ]
    tripler, second = load(place / "good-1.toml").stages
    assert tripler == load(place / "good.toml").stages[0]
    assert (second.design.order, second.design.families, second.design.topology) == (
        5,
        ("chebyshev",),
        ("ladder-shunt",),
    )
    assert (place / "good.toml").read_text() == GOOD


def test_another_number_and_another_file(place, capsys):
    (place / "sub").mkdir()
    assert cli.main(["apply", "good.toml", "2", "--out", "sub/coupled.toml"]) == 0
    assert "Plan it with: harmonic-planner plan sub" in capsys.readouterr().out
    design = load(place / "sub" / "coupled.toml").stages[1].design
    assert (design.topology, design.resonator_h) == (("capacitive",), 27e-9)
    assert sorted(os.listdir(place)) == ["good.toml", "sub"]


def test_the_file_is_written_in_the_current_folder_and_still_finds_its_kit(place, monkeypatch, capsys):
    (place / "chains").mkdir()
    (place / "chains" / "mine.toml").write_bytes((KITS / "chip-1008.toml").read_bytes())
    (place / "chains" / "a.toml").write_text(swap('"chip-1008"', '"mine.toml"'))
    planned(monkeypatch, replace(PROPOSAL, kit="mine.toml"))
    assert cli.main(["apply", "chains/a.toml", "1"]) == 0
    scenario = load(place / "a-1.toml")
    assert scenario.design.kits == scenario.stages[1].design.kits == ("chains/mine.toml",)
    assert "kit =" not in capsys.readouterr().out  # the same kit as before


@pytest.mark.parametrize("number", ["0", "3", "99999999999999999999"])
def test_a_number_that_no_proposal_has(number, place, capsys):
    before = snapshot(place)
    assert refused(capsys, ["apply", "good.toml", number]) == (
        f"error: N = {number}: must be the number of a proposal for good.toml, 1 to 2"
    )
    assert snapshot(place) == before


@pytest.mark.parametrize("number", ["one", "1.5", "-1", ""])
@pytest.mark.usefixtures("place")
def test_a_number_that_is_none(number, capsys):
    refused(capsys, ["apply", "good.toml", number])


def test_a_plan_without_proposals(place, monkeypatch, capsys):
    planned(monkeypatch)
    assert "good.toml has no proposal" in refused(capsys, ["apply", "good.toml", "1"])
    assert os.listdir(place) == ["good.toml"]


@pytest.mark.parametrize("out", [[], ["--out", "good.toml"], ["--out", "there.toml"]])
def test_a_file_that_exists_is_refused_before_anything_is_planned(out, place, monkeypatch, capsys):
    import harmonic_planner.planning.plan as planning

    monkeypatch.setattr(planning, "work_out", lambda _scenario: pytest.fail("planned"))
    for name in ("good-1.toml", "there.toml"):
        (place / name).write_text("mine")
    before = snapshot(place)
    name = out[-1] if out else "good-1.toml"
    assert refused(capsys, ["apply", "good.toml", "1", *out]).startswith(f"error: {name}: exists already")
    assert snapshot(place) == before


def test_a_scenario_with_problems(place, capsys):
    (place / "bad.toml").write_text(swap('"20 MHz"', '"20 mhz"'))
    assert "source.frequency" in refused(capsys, ["apply", "bad.toml", "1"])
    assert "no such file" in refused(capsys, ["apply", "none.toml", "1"])


def test_a_folder_that_is_not_there_is_status_1(place, capsys):
    assert "cannot be written" in refused(capsys, ["apply", "good.toml", "1", "--out", "missing/a.toml"], status=1)
    assert os.listdir(place) == ["good.toml"]


def test_a_result_that_would_not_be_a_scenario_is_not_written(place, monkeypatch, capsys):
    planned(monkeypatch, replace(PROPOSAL, kit="gone.toml"))
    assert "stage[2].kit" in refused(capsys, ["apply", "good.toml", "1"])
    assert os.listdir(place) == ["good.toml"]
