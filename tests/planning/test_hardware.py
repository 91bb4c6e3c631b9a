"""A chain that exists: the plan's own files give its margins back, and what is made worse fails at the right line."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import pytest

from harmonic_planner.model import GivenFilter, MeasuredFilter, Plan, PlannerError, Scenario
from harmonic_planner.planning.hardware import budget
from harmonic_planner.planning.plan import WorkedOut, work_out
from harmonic_planner.report.files import plan_files, with_file_names
from harmonic_planner.scenario import load

SCENARIO = """\
title = "20 MHz to 120 MHz"
[source]
frequency = ["19.95 MHz", "20.05 MHz"]
lines = { "2" = "-40 dBc", "3" = "-45 dBc" }
[output]
limit = "-45 dBc"
[design]
kit = "chip-1008"
drift = "0.5 %"
isolation = "90 dB"
[[stage]]
name = "tripler"
times = 3
device = { type = "push-pull", half_angle = "50 deg", conversion = "-9 dB" }
pad = "6 dB"
pad_after = "6 dB"
amplifier = { gain = "24 dB" }
#filter1
[[stage]]
name = "doubler"
times = 2
device = { type = "push-push", half_angle = "70 deg", conversion = "-9 dB" }
pad = "6 dB"
pad_after = "6 dB"
amplifier = { gain = "24 dB" }
#filter2
"""


@pytest.fixture(scope="module")
def planned(tmp_path_factory: pytest.TempPathFactory) -> tuple[WorkedOut, Scenario]:
    """A plan, and the scenario that names the Touchstone files it wrote."""
    folder = tmp_path_factory.mktemp("hardware")
    (folder / "chain.toml").write_text(SCENARIO)
    worked = work_out(load(folder / "chain.toml"))
    for name, content in plan_files(worked).items():
        if name.endswith(".s2p"):
            (folder / name).parent.mkdir(exist_ok=True)
            (folder / name).write_text(str(content))
    text = SCENARIO
    for i, stage in enumerate(with_file_names(worked).stages, start=1):
        text = text.replace(f"#filter{i}", f'filter = {{ touchstone = "{stage.filter.touchstone}" }}')
    (folder / "there.toml").write_text(text)
    return worked, load(folder / "there.toml")


def margins(plan: Plan) -> dict[Fraction, float]:
    return {x.line: x.margin_db for x in plan.output.lines if x.margin_db is not None}


def test_a_plans_own_files_give_its_margins_back_within_a_twentieth_of_a_decibel(planned) -> None:
    worked, scenario = planned
    assert all(isinstance(s.filter, MeasuredFilter) for s in scenario.stages)
    there = budget(scenario).plan
    wanted, found = margins(worked.plan), margins(there)
    assert found.keys() == wanted.keys()
    assert max(abs(found[k] - wanted[k]) for k in wanted) < 0.05
    for a, b in zip(worked.plan.stages, there.stages, strict=True):
        built = {r.line: r.as_built_db for r in a.filter.requirement if r.required_db > 0}
        measured = {r.line: r.as_built_db for r in b.filter.requirement}
        shown = built.keys() & measured.keys()  # without a margin to keep, some lines need no rejection
        assert len(shown) >= 5
        assert max(abs(measured[k] - built[k]) for k in shown) < 0.05
        assert b.drive_dbm == pytest.approx(a.drive_dbm, abs=0.01)
        assert b.output_dbm == pytest.approx(a.output_dbm, abs=0.01)
        assert b.filter.return_loss_db == pytest.approx(a.filter.return_loss_db, abs=0.1)
        assert (b.filter.source, b.filter.family, b.filter.proposals) == ("touchstone", None, ())


def test_a_budget_asks_for_no_margin_and_says_so(planned) -> None:
    _, scenario = planned
    there = budget(scenario).plan
    assert there.exit_status == 0
    assert there.allocation is None
    assert there.sentence.startswith("Met: every line is within its limit; ")
    assert there.sentence.endswith("with the filters that are there.")
    said = [text for text in there.assumptions if "margin" in text]
    assert said == ["margin: limits are asked to hold with 0 dB; design.margin is for plans and left aside"]
    least = min(margins(there).values())
    for spare_db, status in ((0.2, 0), (-0.2, 3)):
        limit_dbc = -45.0 - least + spare_db
        changed = replace(scenario, output=replace(scenario.output, limit_dbc=limit_dbc))
        result = budget(changed).plan
        assert min(margins(result).values()) == pytest.approx(spare_db, abs=1e-6)
        assert result.exit_status == status


def with_bandwidth(scenario: Scenario, bandwidth: float) -> Scenario:
    """The first filter given as a prototype of some bandwidth, the second as it was measured."""
    wide = GivenFilter("chebyshev", 4, 60e6, 60e6 * bandwidth, 0.1)
    return replace(scenario, stages=(replace(scenario.stages[0], filter=wide), scenario.stages[1]))


def test_widening_a_given_filter_flips_the_verdict_at_the_line_that_fails(planned) -> None:
    """Independent of the verdict: the first line whose margin, from the list of lines, falls below 0 dB."""
    _, scenario = planned
    narrow, wide = 0.15, 1.0
    assert budget(with_bandwidth(scenario, narrow)).plan.exit_status == 0
    assert budget(with_bandwidth(scenario, wide)).plan.exit_status == 3
    for _ in range(12):
        middle = (narrow * wide) ** 0.5
        if budget(with_bandwidth(scenario, middle)).plan.exit_status == 0:
            narrow = middle
        else:
            wide = middle
    before, after = (budget(with_bandwidth(scenario, b)).plan for b in (narrow, wide))
    failing = min(margins(after), key=margins(after).__getitem__)
    assert min(margins(before).values()) >= 0 > margins(after)[failing]
    assert sum(m < 0 for m in margins(after).values()) <= 2  # a pair of sidebands at most
    assert (before.exit_status, after.exit_status) == (0, 3)
    assert after.sentence.startswith(f"Not met: line {failing} at the output has a margin of -0.0 dB")
    cause = next(x for x in after.output.lines if x.line == failing).origins[0]
    assert cause.stage in ("tripler", "source")
    unmet = [r.line for r in after.stages[0].filter.requirement if r.margin_db < 0]
    assert cause.line in unmet or cause.stage == "source"


def test_stages_still_to_be_planned_are_all_named(planned) -> None:
    _, scenario = planned
    unplanned = replace(scenario, stages=tuple(replace(s, filter="plan") for s in scenario.stages))
    with pytest.raises(PlannerError) as caught:
        budget(unplanned)
    assert str(caught.value).startswith(
        'stage[1].filter (stage "tripler"), stage[2].filter (stage "doubler") = "plan": a budget plans nothing; '
    )


def test_files_are_found_beside_the_scenario_wherever_it_is_read_from(planned, monkeypatch, tmp_path: Path) -> None:
    _, scenario = planned
    monkeypatch.chdir(tmp_path)
    again = load(scenario.folder / "there.toml")
    assert again.stages == scenario.stages
