"""Resonators against bandwidth: each point and the step beyond it, by separate searches."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest

from harmonic_planner.chain.allocate import allocate
from harmonic_planner.model import Plan, Scenario, TradePoint
from harmonic_planner.planning.joint import Offers, losses_of, margin_db, search
from harmonic_planner.planning.plan import work_out
from harmonic_planner.planning.settle import options_of
from harmonic_planner.planning.trade import STEP, bandwidth_trade

from builders import DESIGN, chain_of

LADDERS = replace(DESIGN, topology=("ladder",))
CHAIN = chain_of(3, 2, limit_dbc=-55.0, lines={Fraction(2): -35.0, Fraction(3): -45.0}, design=LADDERS)


@pytest.fixture(scope="module")
def plan() -> Plan:
    return work_out(CHAIN).plan


@pytest.fixture(scope="module")
def points(plan: Plan) -> tuple[TradePoint, ...]:
    return bandwidth_trade(CHAIN, plan)


def total_at(scenario: Scenario, plan: Plan, factor: float) -> int | None:
    """The least total with every floor so many times as wide; None where limits are out of reach."""
    now = search(scenario, losses_of(plan), Offers())
    rows = [options_of(replace(job, floor=job.floor * factor), now.chain.grid.count).rows for job in now.jobs]
    found = allocate(now.target, rows, largest_margin=False)
    return found.total if found.met else None


def test_there_is_a_point_for_the_least_total_and_two_more(plan: Plan, points: tuple[TradePoint, ...]) -> None:
    least = search(CHAIN, losses_of(plan), Offers()).allocation.total
    assert [p.total for p in points] == [least, least + 1, least + 2]
    assert all(sum(p.resonators) <= p.total for p in points)


def test_more_resonators_never_narrow_the_band(points: tuple[TradePoint, ...]) -> None:
    factors = [p.factor for p in points]
    assert factors == sorted(factors)
    assert factors[0] >= 1
    assert factors[-1] > factors[0]


def test_the_bandwidth_is_the_kit_s_floor_times_the_factor(points: tuple[TradePoint, ...]) -> None:
    """5 × half the sum of ±5 % inductors and ±2 % capacitors: 17.5 % (common practice, no source)."""
    for p in points:
        assert p.bandwidth == pytest.approx(0.175 * p.factor)


def test_each_point_is_enough_and_the_next_step_is_not(plan: Plan, points: tuple[TradePoint, ...]) -> None:
    for p in points:
        here = total_at(CHAIN, plan, p.factor)
        assert here is not None
        assert here <= p.total
        if not p.widest_tried:
            beyond = total_at(CHAIN, plan, p.factor * STEP)
            assert beyond is None or beyond > p.total


def test_every_point_keeps_the_margin(points: tuple[TradePoint, ...]) -> None:
    assert all(p.margin_db >= LADDERS.margin_db - 1e-6 for p in points)


def test_a_loose_limit_is_met_at_the_widest_there_is() -> None:
    loose = chain_of(2, limit_dbc=0.0, design=LADDERS)
    (first, *_) = bandwidth_trade(loose, work_out(loose).plan)
    assert first.widest_tried
    assert first.bandwidth <= 1.0 < first.bandwidth * STEP


def test_limits_out_of_reach_have_no_trade() -> None:
    hopeless = chain_of(2, limit_dbc=-160.0, design=LADDERS)
    assert bandwidth_trade(hopeless, work_out(hopeless).plan) == ()


def test_the_margin_is_that_of_a_forward_run() -> None:
    """Without any rejection a doubler has the limit less its own strongest line, allowances switched off."""
    bare = chain_of(2, limit_dbc=-10.0, design=replace(LADDERS, reflection=0.0, termination_db=0.0))
    now = search(bare, [0.0], Offers())
    levels_db = 20 * np.log10(now.chain.stages[0].device[now.chain.stages[0].device > 0])
    assert margin_db(now.chain, [np.zeros(now.chain.grid.count)]) == pytest.approx(-10.0 - levels_db.max())
