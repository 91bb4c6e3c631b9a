"""A doubler that is cleaned on one side only: a low-pass, until the line below the carrier counts too."""

from __future__ import annotations

import math

import numpy as np
import pytest

from harmonic_planner.filters.topologies import REGISTRY
from harmonic_planner.model import Device, Plan, Scenario
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.one_sided import able_one_sided
from harmonic_planner.planning.plan import make_plan

from builders import chain_of

LOOSE_DBC = -30.0


def doubler(limit_dbc: float) -> Scenario:
    """×2 of 45 dB balance; its data sheet puts line 8 at −60 dBc."""
    device = Device("push-push", -8.0, half_angle_rad=math.radians(70), balance_db=45.0, lines_dbc={8: -60.0})
    return chain_of(2, limit_dbc=limit_dbc, device=device)


def asked(plan: Plan) -> set[str]:
    return {str(r.line) for r in plan.stages[0].filter.requirement if r.required_db > 0}


@pytest.fixture(scope="module")
def loose() -> Plan:
    return make_plan(doubler(LOOSE_DBC))


def test_a_low_pass_is_built_where_only_lines_4_and_6_need_rejection(loose: Plan) -> None:
    made = loose.stages[0].filter
    assert asked(loose) == {"4", "6"}
    assert made.topology == "low-pass"
    assert loose.verdict == "met"
    assert loose.self_check
    assert loose.allocation is not None
    assert loose.allocation.total == 1
    assert all(r.as_built_db >= r.required_db for r in made.requirement if r.required_db > 0)


def test_a_limit_10_db_tighter_brings_the_bandpass_back() -> None:
    tight = make_plan(doubler(LOOSE_DBC - 10))
    assert asked(tight) == {"1", "4", "6"}
    topology = tight.stages[0].filter.topology
    assert topology is not None
    assert REGISTRY[topology].passes == "band"
    assert tight.verdict == "met"


def test_its_ideal_rejection_is_that_of_the_low_pass_prototype(loose: Plan) -> None:
    """Worked out here from the closed form at Ω = f/fc, the cut-off moved by the drift towards the line."""
    made = loose.stages[0].filter
    assert made.family is not None
    assert made.order is not None
    assert made.centre_hz is not None
    prototype = Prototype(made.family, made.order, made.ripple_db or 0.1)
    drift = doubler(LOOSE_DBC).stages[0].design.drift
    carrier_hz = np.linspace(40e6 / (1 + drift), 40e6 / (1 - drift), 1001)
    for r in made.requirement:
        line_hz = r.frequency_hz[0] / (1 + drift)
        expected = prototype.attenuation_db(np.array([line_hz / made.centre_hz]))[0]
        expected -= prototype.attenuation_db(carrier_hz / made.centre_hz).max()
        assert r.ideal_db == pytest.approx(expected, abs=0.01)


@pytest.mark.parametrize(("resonators", "parts"), [(1, {1, 2, 3}), (2, {4, 5}), (3, {6, 7}), (4, {8, 9})])
def test_every_pair_of_parts_counts_as_a_resonator(resonators: int, parts: set[int]) -> None:
    from harmonic_planner.chain.assemble import assemble
    from harmonic_planner.planning.jobs import make_jobs

    scenario = doubler(LOOSE_DBC)
    (job,) = make_jobs(scenario, assemble(scenario, phases="worst-case"))
    assert {prototype.order for prototype, _ in able_one_sided(job, resonators)} == parts
