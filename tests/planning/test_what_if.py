"""Changes to a chain, each compared with a search of the changed chain from the start."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction

import pytest

from harmonic_planner.chain.allocate import allocate, allocate_within
from harmonic_planner.chain.budget import with_margin
from harmonic_planner.model import Amplifier, GivenFilter, Isolation, Plan, Scenario, WhatIf
from harmonic_planner.physics.conversion import device_lines
from harmonic_planner.planning.explore import explored
from harmonic_planner.planning.joint import Offers, Searched, losses_of, search
from harmonic_planner.planning.plan import WorkedOut, work_out
from harmonic_planner.planning.whatif import changes, what_if

from builders import DESIGN, chain_of

LADDERS = replace(DESIGN, topology=("ladder",), isolation=Isolation(80.0, flat=True))
GAIN = Amplifier(20.0)
SOURCE = {Fraction(2): -35.0, Fraction(3): -45.0}
CHAIN = chain_of(3, 2, limit_dbc=-55.0, lines=SOURCE, design=LADDERS, amplifier=GAIN)


@pytest.fixture(scope="module")
def worked() -> WorkedOut:
    return work_out(CHAIN)


@pytest.fixture(scope="module")
def rows(worked: WorkedOut) -> Mapping[str, WhatIf]:
    return {row.change: row for row in what_if(CHAIN, worked.plan)}


def from_the_start(scenario: Scenario, plan: Plan, stages_before: int = 0) -> Searched:
    return search(scenario, [0.0] * stages_before + losses_of(plan), Offers())


def test_every_kind_of_change_has_its_row(rows: Mapping[str, WhatIf]) -> None:
    for stage in ("stage 1", "stage 2"):
        assert f"3 dB more pad before the filter of {stage}" in rows
        assert f"3 dB more pad behind the filter of {stage}" in rows
        assert f"10 dB better balance of {stage}, 35 dB" in rows
        assert f"20 dB more isolation at {stage}" in rows
    assert "a filter for the source, counted, 3 dB of pad behind it" in rows
    assert {"one resonator more", "one resonator fewer", 'phases = "average"'} < set(rows)


def test_each_row_is_a_search_of_the_changed_chain_from_the_start(
    worked: WorkedOut, rows: Mapping[str, WhatIf]
) -> None:
    """Offers that are kept from one row to the next must be those the changed chain would make."""
    now = from_the_start(CHAIN, worked.plan)
    for change in changes(CHAIN):
        then, row = from_the_start(change.scenario, worked.plan, change.stages_before), rows[change.change]
        assert (row.total, row.met) == (then.allocation.total, then.allocation.met)
        assert row.margin_db == pytest.approx(then.margin_db, abs=1e-9)
        assert (row.total_now, row.met_now, row.margin_now_db) == (now.allocation.total, True, now.margin_db)


def test_a_change_is_the_chain_with_that_one_difference() -> None:
    by_name = {change.change: change.scenario for change in changes(CHAIN)}
    padded = by_name["3 dB more pad before the filter of stage 2"]
    assert [s.pad_db for s in padded.stages] == [6.0, 9.0]
    assert replace(padded.stages[1], pad_db=6.0) == CHAIN.stages[1]
    shielded = by_name["20 dB more isolation at stage 1"].stages[0].design
    assert shielded.isolation == Isolation(100.0, flat=True)
    cleaned = by_name["a filter for the source, counted, 3 dB of pad behind it"]
    assert [s.times for s in cleaned.stages] == [1, 3, 2]
    assert cleaned.stages[1:] == CHAIN.stages
    better = by_name["10 dB better balance of stage 1, 35 dB"].stages[0].device
    now = CHAIN.stages[0].device
    assert better is not None
    assert now is not None
    lower = device_lines(better, 3, 4)[2] / device_lines(now, 3, 4)[2]
    assert lower == pytest.approx(10**-0.5, rel=0.05)  # even lines of a push-pull pair fall with its unbalance


def test_average_phases_need_no_more_and_have_no_price_but_the_worst_case(rows: Mapping[str, WhatIf]) -> None:
    row = rows['phases = "average"']
    assert row.met
    assert row.total <= row.total_now


def test_a_better_pair_or_shield_never_costs_a_resonator(rows: Mapping[str, WhatIf]) -> None:
    for name, row in rows.items():
        if "balance" in name or "isolation" in name:
            assert row.met
            assert row.total <= row.total_now


def test_a_resonator_fewer_misses_by_what_the_row_says(worked: WorkedOut, rows: Mapping[str, WhatIf]) -> None:
    now = from_the_start(CHAIN, worked.plan)
    row = rows["one resonator fewer"]
    short_db = LADDERS.margin_db - row.margin_db
    assert not row.met
    assert short_db > 0
    enough, less = (with_margin(now.target, [-x] * 2) for x in (short_db + 0.01, short_db - 0.2))
    assert allocate(enough, now.rows).total == row.total == row.total_now - 1
    assert allocate_within(less, now.rows, total=row.total) is None


def test_a_resonator_more_buys_margin(rows: Mapping[str, WhatIf]) -> None:
    row = rows["one resonator more"]
    assert row.total == row.total_now + 1
    assert row.margin_db >= row.margin_now_db


def test_a_shield_mends_what_isolation_spoils() -> None:
    leaky = replace(LADDERS, isolation=Isolation(50.0, flat=True))
    scenario = chain_of(2, limit_dbc=-60.0, design=leaky, amplifier=GAIN)
    rows = {row.change: row for row in what_if(scenario, work_out(scenario).plan)}
    row = rows["20 dB more isolation at stage 1"]
    assert not row.met_now
    assert row.met
    assert "one resonator fewer" not in rows  # without a count that is enough there is none to take from


def test_where_nothing_is_to_be_planned_there_is_nothing_to_change() -> None:
    scenario = chain_of(2, limit_dbc=-20.0, filter=GivenFilter("butterworth", 3, 40e6, 8e6))
    worked = explored(scenario, work_out(scenario))
    assert worked.plan.what_if == ()
    assert worked.plan.trade == ()


def test_exploring_leaves_the_plan_alone_and_is_the_same_twice(worked: WorkedOut, rows: Mapping[str, WhatIf]) -> None:
    around = explored(CHAIN, worked)
    assert replace(around.plan, what_if=(), trade=()) == worked.plan
    assert around.plan.what_if == tuple(rows.values())
    assert around.plan.trade
