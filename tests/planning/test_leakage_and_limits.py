"""What a plan makes of leakage from earlier carriers and of every kind of limit; expected values worked by hand."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from fractions import Fraction

import pytest

from harmonic_planner.export.nodes import origins_text
from harmonic_planner.model import (
    Amplifier,
    GivenFilter,
    Isolation,
    Limits,
    MaskBand,
    OffsetBand,
    Output,
    Plan,
    Scenario,
)
from harmonic_planner.planning import leveled
from harmonic_planner.planning.hardware import budget
from harmonic_planner.planning.plan import make_plan
from harmonic_planner.planning.settle import Settled, settle

from builders import DESIGN, chain_of, stage

AMPLIFIER = Amplifier(24.0, saturation_dbm=14.0)
NEEDED = re.compile(r"(\d+) dB of isolation between ([^;]+?) at ([\d.]+) MHz, where (\d+) dB is counted")


def _isolated(level_db: float, *factors: int, limit_dbc: float = -50.0, order: int = 5) -> Scenario:
    """Return a chain with an amplifier behind each stage, this isolation, and filters 20 % wide that are there."""
    design = replace(DESIGN, isolation=Isolation(level_db, flat=True))
    base = chain_of(*factors, design=design, amplifier=AMPLIFIER, limit_dbc=limit_dbc)
    filters = [
        GivenFilter("butterworth", order, hz, 0.2 * hz, unloaded_q=60.0)
        for hz in (20e6 * float(base.carrier(i)) for i in range(len(factors)))
    ]
    return replace(base, stages=tuple(replace(s, filter=f) for s, f in zip(base.stages, filters, strict=True)))


def _at(scenario: Scenario, isolation_db: float) -> Scenario:
    design = replace(DESIGN, isolation=Isolation(isolation_db, flat=True))
    return replace(scenario, design=design, stages=tuple(replace(s, design=design) for s in scenario.stages))


def _margin(plan: Plan, line: int) -> float:
    found = next(x.margin_db for x in plan.output.lines if x.line == line)
    assert found is not None
    return found


@pytest.fixture(scope="module")
def plan() -> Plan:
    return budget(_isolated(62.0, 2, 2)).plan


def test_a_leak_is_an_origin_at_the_level_that_the_plan_s_own_carrier_gives_it(plan: Plan) -> None:
    """Source 10 dBm, 62 dB: at the output that is −52 dBm, and the carrier there is the plan's."""
    line = next(x for x in plan.output.lines if x.line == 1)
    leak = next(o for o in line.origins if o.stage == "leak of source into the output")
    assert leak.line == 1
    lowest_dbm = plan.output.carrier_dbm[0]
    assert leak.share * 10 ** (line.level_dbc / 20) == pytest.approx(10 ** ((-52 - lowest_dbm) / 20), rel=1e-6)
    assert f"line 1, leak of source into the output ({100 * leak.share:.0f} %)" in origins_text(line.origins)


def test_a_leak_into_a_later_input_stands_among_the_lines_there(plan: Plan) -> None:
    """Line 3 is made by the leak of the source into the second doubler, own side of line 1: 1 + 2."""
    entering = {x.line: x.level_dbc for x in plan.stages[1].input_lines}
    assert entering[Fraction(1)] > 10 - 62 - plan.stages[0].output_dbm - 0.1
    line = next(x for x in plan.output.lines if x.line == 3)
    assert any(o.stage == "leak of source into stage 2" and o.line == 1 for o in line.origins)


def test_where_a_carrier_leaks_too_much_the_isolation_named_is_what_it_takes() -> None:
    scenario = _isolated(62.0, 2, 2, limit_dbc=-65.0, order=7)
    result = budget(scenario).plan
    assert result.exit_status == 3
    assert "leakage is the reason, and a shield is needed, not a resonator" in result.sentence
    found = NEEDED.findall(result.sentence)
    assert {counted for *_, counted in found} == {"62"}
    assert ("the carrier of stage 1 and the output", "40") in {(pair, mhz) for _, pair, mhz, _ in found}
    needed_db = max(float(x[0]) for x in found)
    named = re.search(r"line (\d+) at the output", result.sentence)
    assert named is not None
    assert _margin(budget(_at(scenario, needed_db)).plan, int(named[1])) >= -1e-9
    assert _margin(budget(_at(scenario, needed_db - 2)).plan, int(named[1])) < 0


def test_where_a_filter_is_bypassed_its_own_two_ends_are_named() -> None:
    """The doubler's own line 1 goes past the filter; the source, −20 dBm, leaks little into an output of 14 dBm."""
    scenario = _isolated(55.0, 2, limit_dbc=-68.0, order=7)
    scenario = replace(scenario, source=replace(scenario.source, level_dbm=-20.0))
    scenario = replace(scenario, stages=(replace(scenario.stages[0], amplifier=Amplifier(54.0)),))
    result = budget(scenario).plan
    assert result.exit_status == 3
    (needed_db, pair, _, counted) = NEEDED.findall(result.sentence)[0]
    assert (pair, counted) == ("input and output of the filter of stage 1", "55")
    named = re.search(r"line (\d+) at the output", result.sentence)
    assert named is not None
    assert _margin(budget(_at(scenario, float(needed_db))).plan, int(named[1])) >= -1e-9


def test_a_filter_too_weak_is_not_blamed_on_leakage() -> None:
    result = budget(_isolated(90.0, 2, 2, limit_dbc=-80.0, order=1)).plan
    assert result.exit_status == 3
    assert "shield" not in result.sentence


def test_a_choice_is_made_again_where_the_filters_loss_makes_leakage_too_much(monkeypatch: pytest.MonkeyPatch) -> None:
    """One doubler, 10 − 8 − 12 + 24 = 14 dBm without its filter's loss; its leak of −64 dBc then grows by that loss."""
    chosen = []

    def spy(*args: object) -> Settled:
        chosen.append(args[0])
        return settle(*args)  # type: ignore[arg-type]

    monkeypatch.setattr(leveled, "settle", spy)
    design = replace(DESIGN, isolation=Isolation(60.0, flat=True))
    result = make_plan(chain_of(2, design=design, amplifier=Amplifier(24.0), limit_dbc=-55.0))
    leaks = [c.stages[0].leaks[0].level_dbc for c in chosen]  # type: ignore[attr-defined]
    assert leaks[0] == pytest.approx(10 - 60 - 14)
    assert leaks[1] > leaks[0] + 2
    assert result.verdict == "met"
    assert result.self_check
    line = next(x for x in result.output.lines if x.line == 1)
    leak = next(o for o in line.origins if o.stage.startswith("leak of source"))
    lowest_dbm = result.output.carrier_dbm[0]
    assert line.level_dbc + 20 * math.log10(leak.share) == pytest.approx(10 - 60 - lowest_dbm, abs=1e-6)


def test_isolation_none_counts_no_leakage() -> None:
    plan = budget(replace(_at(_isolated(60.0, 2, 2), math.inf))).plan
    assert not any(o.stage.startswith("leak of") for x in plan.output.lines for o in x.origins)
    assert not any(text.startswith("leakage") for text in plan.assumptions)


def test_an_absolute_limit_is_held_at_the_carrier_that_comes_out() -> None:
    base = chain_of(2)
    scenario = replace(base, output=Output(limit_dbm=-75.0))
    plan = make_plan(scenario)
    highest_dbm = plan.output.carrier_dbm[1]
    assert all(x.limit_dbc == pytest.approx(-75.0 - highest_dbm) for x in plan.output.lines)
    assert plan.verdict == "met"
    text = f"output.limit_dbm = -75 dBm is {-75 - highest_dbm:.1f} dBc, the carrier being {highest_dbm:.1f} dBm"
    assert text in plan.assumptions
    # the same as that many dBc: no resonator is spent on a carrier that the filter's loss has taken away
    same = make_plan(replace(base, output=Output(limit_dbc=-75.0 - highest_dbm)))
    assert plan.stages[0].filter.order == same.stages[0].filter.order


def test_category_a_is_what_its_expression_says_of_the_carrier_and_says_where_it_holds() -> None:
    base = _isolated(90.0, 2)
    loud = replace(base.stages[0], amplifier=Amplifier(53.0))  # 10 − 8 − 12 + 53 = 43 dBm, 20 W, less the filter's loss
    result = budget(replace(base, stages=(loud,), output=Output(sm329_category_a=True))).plan
    watts_db = result.output.carrier_dbm[1] - 30
    assert 10 < watts_db < 13
    assert all(x.limit_dbc == pytest.approx(-(43 + watts_db)) for x in result.output.lines)
    text = next(x for x in result.assumptions if "SM.329" in x)
    assert "governs emission at an antenna, and local rules come first" in text
    assert f"is {-(43 + watts_db):.1f} dBc" in text


def test_an_offset_mask_asks_more_beside_the_carrier_than_far_from_it() -> None:
    output = Output(limit_dbc=-40.0, offset_mask=(OffsetBand(0.0, 30e6, -65.0),))
    result = budget(replace(_isolated(90.0, 2, 2), output=output)).plan
    limits = {x.line: x.limit_dbc for x in result.output.lines}
    assert limits[Fraction(3)] == limits[Fraction(5)] == -65  # 20 MHz off the carrier at 80 MHz
    assert limits[Fraction(2)] == limits[Fraction(6)] == -40


def test_a_tap_is_an_output_of_its_own() -> None:
    tap = Limits(limit_dbc=-30.0, mask=(MaskBand(70e6, 90e6, -62.0),))
    base = chain_of(2, 2, limit_dbc=-20.0)
    plan = make_plan(replace(base, stages=(replace(base.stages[0], tap=tap), base.stages[1])))
    assert plan.verdict == "met"
    first, last = plan.stages
    limits = {x.line: x.limit_dbc for x in first.limited_lines}
    assert limits[Fraction(4)] == -62  # 80 MHz
    assert {limit for line, limit in limits.items() if line != 4} == {-30}
    assert last.limited_lines == ()
    for x in first.limited_lines:
        assert x.margin_db is not None
        assert x.margin_db >= DESIGN.margin_db
        assert sum(o.share for o in x.origins) == pytest.approx(1.0, abs=0.05)
    without = make_plan(base).stages[0].filter
    need = {r.line: r.required_db for r in first.filter.requirement}
    assert need[Fraction(4)] > {r.line: r.required_db for r in without.requirement}.get(Fraction(4), 0.0) + 10


def test_a_tap_that_fails_is_named() -> None:
    bare = stage(2, name="bare", filter="none", tap=Limits(limit_dbc=-40.0))
    plan = make_plan(replace(chain_of(2, 2), stages=(bare, stage(2, name="filtered"))))
    assert plan.exit_status == 3
    assert "behind bare" in plan.sentence
    assert min(x.margin_db or 0.0 for x in plan.stages[0].limited_lines) < 0
