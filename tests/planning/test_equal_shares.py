"""The joint choice against the rule of thumb: 20 log10 N and equal shares (common practice, no source).

The rule: what a device makes beside the wanted line has to fall to the limit with its margin, less 20 log10 of the
factor that follows, less an equal share for every stage. It knows nothing of the source's lines, of mismatch, or of
leaks; the joint choice counts all of these. Before the last stage the strictest limit holds, since sidebands lie close.
"""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from conftest import is_long

from harmonic_planner.chain.allocate import allocate
from harmonic_planner.chain.assemble import Array
from harmonic_planner.model import Isolation, Plan, Scenario
from harmonic_planner.planning.choice import choose
from harmonic_planner.planning.jobs import is_far
from harmonic_planner.planning.joint import Offers, Searched, search
from harmonic_planner.planning.plan import make_plan
from harmonic_planner.scenario import load

SHIPPED = Path(__file__).parents[2] / "scenarios"
GLACIER, PEAT = "glacier-sounder.toml", "peat-moisture-radar.toml"
CARRIER_DB = 3.0
"""Loss of the carrier in a filter, as it would be guessed."""


def equal_shares_db(scenario: Scenario, found: Searched) -> list[Array]:
    """Rejection the rule asks of every stage's filter, one (lines,) array a stage."""
    count = len(scenario.stages)
    needed = []
    for i, stage in enumerate(found.target.stages):
        after = math.prod(s.times for s in scenario.stages[i + 1 :])
        last = found.target.stages[-1].limit
        limit = last if i == count - 1 else np.full_like(last, last.min())
        made = (stage.device > 0) & np.isfinite(limit)
        asked = np.zeros(found.target.grid.count)
        asked[made] = np.maximum(20 * np.log10(stage.device[made] * after * count / limit[made]), 0.0)
        needed.append(asked)
    return needed


def equal_share_orders(scenario: Scenario, found: Searched, offers: Offers) -> list[int | None]:
    """Least order of every stage that gives what the rule asks, by ideal circuits; None where none does."""
    orders: list[int | None] = []
    for job, asked in zip(found.jobs, equal_shares_db(scenario, found), strict=True):
        ideal = offers.of(job).ideal
        orders.append(min((n for n, rows in ideal.items() if (rows >= asked).all(axis=1).any()), default=None))
    return orders


def equal_share_orders_as_built(scenario: Scenario, found: Searched) -> list[int | None]:
    """The same by circuits as built, with the lines left out that lie far from the carrier, where strays reign."""
    orders: list[int | None] = []
    for job, asked in zip(found.jobs, equal_shares_db(scenario, found), strict=True):
        built = choose(job, np.where(is_far(job), 0.0, asked), carrier_db=CARRIER_DB).built
        orders.append(None if built is None else built.resonators)
    return orders


def searched(scenario: Scenario, offers: Offers) -> Searched:
    return search(scenario, [CARRIER_DB] * len(scenario.stages), offers)


def without_leaks(scenario: Scenario) -> Scenario:
    tight = Isolation(math.inf)
    stages = tuple(replace(s, design=replace(s.design, isolation=tight)) for s in scenario.stages)
    return replace(scenario, stages=stages)


@pytest.mark.parametrize(
    ("name", "shares", "joint"), [(GLACIER, (5, 3, 3), 10), (PEAT, (4, 4, 3, 2), 11)], ids=["glacier", "peat"]
)
def test_with_ideal_circuits_the_joint_choice_takes_fewer(name: str, shares: tuple[int, ...], joint: int) -> None:
    """Regression, unconfirmed: 10 against 11, and 11 against 13; strays and leaks left out of both."""
    scenario = without_leaks(load(SHIPPED / name))
    offers = Offers()
    found = searched(scenario, offers)
    together = allocate(found.target, [offers.of(job).ideal for job in found.jobs])
    assert equal_share_orders(scenario, found, offers) == list(shares)
    assert together.met
    assert together.total == joint
    assert together.total <= sum(shares)


def test_with_leaks_no_order_gives_what_equal_shares_ask_of_the_first_tripler() -> None:
    """The rule asks 80.5 dB at 20 MHz, and past a carrier that loses 3 dB an isolation of 80 dB is not enough."""
    scenario = load(SHIPPED / GLACIER)
    offers = Offers()
    found = searched(scenario, offers)
    assert equal_shares_db(scenario, found)[0][0] == pytest.approx(80.5, abs=0.1)
    assert equal_share_orders(scenario, found, offers)[0] is None
    assert found.allocation.met


@pytest.fixture(scope="module", params=[GLACIER, PEAT] if is_long() else [GLACIER], ids=str)
def planned(request: pytest.FixtureRequest) -> tuple[Scenario, Plan]:
    scenario = load(SHIPPED / request.param)
    return scenario, make_plan(scenario)


def test_as_built_the_plan_takes_no_more_than_equal_shares_near_the_carrier(planned: tuple[Scenario, Plan]) -> None:
    """Regression, unconfirmed: 10 against 11, and 14 against 17 where the rule's far lines are forgiven."""
    scenario, plan = planned
    assert plan.limits_met
    assert plan.allocation is not None
    orders = equal_share_orders_as_built(scenario, searched(scenario, Offers()))
    assert None not in orders
    assert plan.allocation.total <= sum(n or 0 for n in orders)
