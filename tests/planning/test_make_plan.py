"""The whole plan: what changes when the scenario does, and that its numbers hold together."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from harmonic_planner.chain.assemble import assemble
from harmonic_planner.chain.propagate import propagate
from harmonic_planner.export.plan_json import plan_json
from harmonic_planner.model import (
    Amplifier,
    GivenFilter,
    Isolation,
    MaskBand,
    Output,
    Plan,
    PlannerError,
    Requirement,
    Scenario,
    StagePlan,
)
from harmonic_planner.physics.conversion import device_lines
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega
from harmonic_planner.planning.plan import make_plan

from builders import DESIGN, chain_of, stage, with_amplifier

SOURCE = {Fraction(2): -40.0, Fraction(3): -45.0}
CHAIN = chain_of(3, 2, lines=SOURCE)


@pytest.fixture(scope="module")
def plan() -> Plan:
    return make_plan(CHAIN)


def orders(plan: Plan) -> list[int]:
    return [s.filter.order or 0 for s in plan.stages]


def required(plan: Plan, index: int) -> dict[Fraction, float]:
    return {r.line: r.required_db for r in plan.stages[index].filter.requirement}


def test_a_plan_that_is_met_says_so_and_holds_every_margin(plan: Plan) -> None:
    assert plan.verdict == "met"
    assert plan.exit_status == 0
    assert plan.sentence.startswith("Met: ")
    assert all(r.margin_db >= 0 for s in plan.stages for r in s.filter.requirement)
    assert all(x.margin_db >= DESIGN.margin_db for x in plan.output.lines if x.margin_db is not None)


def test_margins_are_limit_less_level_less_allowance(plan: Plan) -> None:
    for x in plan.output.lines:
        assert x.margin_db is not None
        assert x.limit_dbc is not None
        assert x.margin_db == pytest.approx(x.limit_dbc - x.level_dbc - x.allowance_db, abs=1e-9)


def test_shares_of_a_line_add_up_to_one(plan: Plan) -> None:
    for x in plan.output.lines:
        assert sum(o.share for o in x.origins) == pytest.approx(1.0, abs=0.05)
        assert sum(o.share for o in x.origins) <= 1 + 1e-9


def test_levels_lie_below_a_forward_run_with_the_rejections_as_built(plan: Plan) -> None:
    """The plan's levels see line and carrier at the same point of the span; corner rejections bound them."""
    chain = assemble(CHAIN, phases="worst-case")
    filters = []
    for s in plan.stages:
        t = np.ones(chain.grid.count)
        for r in s.filter.requirement:
            t[chain.grid.index(r.line)] = 10 ** (-r.as_built_db / 20)
        filters.append(t)
    bound = 20 * np.log10(propagate(chain, filters)[-1].leaving + 1e-300)
    for x in plan.output.lines:
        assert x.level_dbc <= bound[chain.grid.index(x.line)] + 0.6  # unlisted lines at a passband's edge: ripple


def test_the_plan_is_the_same_twice(plan: Plan) -> None:
    assert plan_json(make_plan(CHAIN)) == plan_json(plan)


def test_device_lines_are_the_device_s_own_where_nothing_else_arrives() -> None:
    scenario = chain_of(2)
    lines = {x.line: x.level_dbc for x in make_plan(scenario).stages[0].device_lines}
    device = scenario.stages[0].device
    assert device is not None
    own = device_lines(device, 2, 4)
    assert lines[Fraction(1)] == pytest.approx(20 * math.log10(own[1]))
    assert lines[Fraction(4)] == pytest.approx(20 * math.log10(own[4]))


def test_a_limit_20_db_lower_raises_orders(plan: Plan) -> None:
    tighter = make_plan(replace(CHAIN, output=Output(limit_dbc=-70.0)))
    assert sum(orders(tighter)) > sum(orders(plan))
    assert all(t >= p for t, p in zip(orders(tighter), orders(plan), strict=True))


def test_doubling_the_span_narrows_windows() -> None:
    """One stage, so that the requirement is the same; only the span differs."""
    narrow = make_plan(chain_of(2, source_hz=(19.8e6, 20.2e6)))
    wide = make_plan(chain_of(2, source_hz=(19.6e6, 20.4e6)))
    assert required(narrow, 0) == pytest.approx(required(wide, 0), abs=1e-6)
    for a, b in zip(narrow.stages[0].filter.windows, wide.stages[0].filter.windows, strict=True):
        if b.feasible:
            assert a.feasible
            assert b.bandwidth_max_hz / b.centre_hz < a.bandwidth_max_hz / a.centre_hz
            assert b.bandwidth_min_hz / b.centre_hz >= a.bandwidth_min_hz / a.centre_hz - 1e-9


def test_removing_the_pads_raises_the_requirement_by_the_mismatch_formula() -> None:
    """One stage into a matched load: −20 log10(1 − 0.7·10^(−A/10)), and the termination by pad held fixed."""
    design = replace(DESIGN, termination_db=1.0, loss_db=12.0)
    padded = make_plan(chain_of(2, design=design))
    bare = make_plan(chain_of(2, design=design, pad_db=0.0))
    expected = 20 * math.log10((1 - 0.7 * 10**-0.6) / (1 - 0.7))
    for line, needed in required(padded, 0).items():
        if needed > 0:
            assert required(bare, 0)[line] == pytest.approx(needed + expected, abs=1e-6)


def test_removing_the_pad_behind_counts_the_next_multiplier() -> None:
    """A line that the last filter must take out: both multipliers' reflections are in the first stage's lines."""
    design = replace(DESIGN, termination_db=1.0)
    padded, bare = (make_plan(chain_of(2, 2, design=design, pad_after_db=a)) for a in (6.0, 0.0))
    raised = [required(bare, 0)[k] - r for k, r in required(padded, 0).items() if r > 3]
    expected = 20 * math.log10((1 - 0.7 * 10**-0.6) / (1 - 0.7))
    assert max(raised) > expected / 2
    assert np.mean(raised) == pytest.approx(expected, abs=expected / 2)


def _direct(design_drift: float, s: StagePlan, r: Requirement) -> float:
    """Return the ideal filter's rejection at one line, worked out at the corners of span and drift."""
    f = s.filter
    assert f.family is not None
    assert f.order is not None
    assert f.centre_hz is not None
    assert f.bandwidth_hz is not None
    prototype = Prototype(f.family, f.order, f.ripple_db or 0.1)

    def attenuation(hz: np.ndarray) -> np.ndarray:
        omega = bandpass_omega(hz, centre_hz=f.centre_hz or 0, bandwidth=(f.bandwidth_hz or 0) / (f.centre_hz or 1))
        return prototype.attenuation_db(omega)

    def moved(span: tuple[float, float]) -> np.ndarray:
        return np.linspace(span[0] / (1 + design_drift), span[1] / (1 - design_drift), 2001)

    return float(attenuation(moved(r.frequency_hz)).min() - attenuation(moved(s.frequency_hz)).max())


def test_ideal_rejections_are_those_of_the_filter_that_the_plan_names() -> None:
    scenario = chain_of(3, 2, lines=SOURCE, source_hz=(19.9e6, 20.1e6))
    for s in make_plan(scenario).stages:
        for r in s.filter.requirement:
            assert r.ideal_db == pytest.approx(_direct(DESIGN.drift, s, r), abs=0.02)


def test_the_chosen_order_is_the_least_with_a_window_or_the_plan_says_what_is_wrong_with_less(plan: Plan) -> None:
    for s in plan.stages:
        able = [w.order for w in s.filter.windows if w.feasible and not w.reason]
        assert s.filter.order is not None
        assert s.filter.order >= min(able)
        assert (s.filter.order > min(able)) == ("no circuit of it as built" in s.filter.reason)


def test_isolation_is_a_floor_under_every_rejection() -> None:
    scenario = chain_of(2, design=replace(DESIGN, isolation=Isolation(60.0, flat=True)))
    held = make_plan(with_amplifier(scenario, 0, Amplifier(25.0)))  # else the source leaks too much to a faint output
    rejections = [r.as_built_db for r in held.stages[0].filter.requirement]
    assert max(rejections) < 60
    assert held.verdict == "met"


def test_isolation_that_cannot_be_enough_asks_for_a_shield_and_not_for_resonators() -> None:
    plan = make_plan(chain_of(2, 2, limit_dbc=-75, design=replace(DESIGN, isolation=Isolation(50.0, flat=True))))
    assert plan.exit_status == 3
    assert "shield" in plan.sentence


def test_a_mask_replaces_the_limit_in_its_band() -> None:
    base = chain_of(2)
    masked = replace(base, output=Output(limit_dbc=-50.0, mask=(MaskBand(70e6, 90e6, -70.0),)))
    before, after = required(make_plan(base), 0), required(make_plan(masked), 0)
    assert after[Fraction(4)] == pytest.approx(before[Fraction(4)] + 20, abs=1e-6)
    assert after[Fraction(1)] == pytest.approx(before[Fraction(1)], abs=1e-6)


def test_a_stage_s_own_limit_is_met_at_its_output() -> None:
    plan = make_plan(chain_of(2, 3, limit_dbc=-20, pad_db=6.0))
    limited = replace(chain_of(2, 3, limit_dbc=-20).stages[0], limit_dbc=-60.0)
    tight = make_plan(replace(chain_of(2, 3, limit_dbc=-20), stages=(limited, chain_of(2, 3).stages[1])))
    worst = max(x.level_dbc for x in tight.stages[0].output_lines)
    assert worst <= -63
    assert max(x.level_dbc for x in plan.stages[0].output_lines) > worst


def test_average_phases_need_no_more_than_the_worst_case(plan: Plan) -> None:
    average = make_plan(replace(CHAIN, design=replace(DESIGN, phases="average")))
    assert average.verdict == "met"
    assert sum(orders(average)) <= sum(orders(plan))
    for x in plan.output.lines:
        assert x.margin_other_phases_db is not None
        assert x.margin_db is not None
        assert x.margin_other_phases_db >= x.margin_db - 1e-9


def test_a_given_filter_is_taken_as_it_is_and_judged() -> None:
    given = GivenFilter("butterworth", 3, 40e6, 8e6)
    plan = make_plan(chain_of(2, filter=given))
    f = plan.stages[0].filter
    assert (f.source, f.order, f.loss_db) == ("given", 3, pytest.approx(0.0, abs=1e-9))
    assert f.windows == ()
    omega = (40 / 80 - 80 / 40) / 0.2
    line = next(r for r in f.requirement if r.line == 4)
    # independent: 10 log10(1 + Ω⁶) at twice the centre, drift of 0.5 % towards it
    drifted = (0.5 * 1.005 - 2 / 1.005) / 0.2
    assert 10 * math.log10(1 + drifted**6) - 0.1 < line.ideal_db < 10 * math.log10(1 + omega**6)


def test_a_given_filter_that_is_too_wide_fails_at_the_right_line() -> None:
    plan = make_plan(chain_of(2, limit_dbc=-60, filter=GivenFilter("butterworth", 2, 40e6, 30e6)))
    assert plan.exit_status == 3
    worst = min((x for x in plan.output.lines if x.margin_db is not None), key=lambda x: x.margin_db or 0)
    assert f"line {worst.line} " in plan.sentence


def test_a_given_topology_has_parts_in_the_kit() -> None:
    given = GivenFilter("chebyshev", 3, 40e6, 10e6, topology="ladder-shunt")
    f = make_plan(chain_of(2, filter=given)).stages[0].filter
    assert [e.ref for e in f.elements] == ["L1", "C1", "L2", "C2", "L3", "C3"]
    assert f.loss_db > 0.5


def test_a_given_topology_that_cannot_be_is_refused_by_its_key() -> None:
    given = GivenFilter("chebyshev", 4, 40e6, 10e6, topology="ladder-shunt")
    with pytest.raises(PlannerError, match=r"stage\[1\]\.filter\.topology = 'ladder-shunt'"):
        make_plan(chain_of(2, filter=given))


def test_no_filter_leaves_everything_and_the_next_stage_is_asked() -> None:
    stages = (stage(2, name="bare", filter="none"), stage(2, name="filtered"))
    plan = make_plan(replace(chain_of(2, 2), stages=stages))
    assert plan.stages[0].filter.source == "none"
    beside = required(plan, 1)[Fraction(3)]  # line 1 of the bare stage comes back beside the carrier, line 4
    assert beside > required(make_plan(chain_of(2, 2)), 1).get(Fraction(3), 0.0) + 10


def test_harmonics_of_the_last_amplifier_ask_for_a_clean_up_stage_and_get_one() -> None:
    scenario = with_amplifier(chain_of(2), 0, Amplifier(20.0, lines_dbc={2: -30.0}))
    plan = make_plan(scenario)
    assert plan.exit_status == 3
    assert "clean-up stage" in plan.sentence
    cleaned = replace(scenario, stages=(*scenario.stages, stage(1, name="clean-up")))
    assert make_plan(cleaned).exit_status == 0


def test_lines_that_overlap_the_carrier_are_named() -> None:
    plan = make_plan(chain_of(3, source_hz=(14e6, 26e6), limit_dbc=-40))
    assert plan.exit_status == 3
    assert "line 2 of stage 1 (28 to 52 MHz) overlaps the carrier (42 to 78 MHz)" in plan.sentence


def test_a_drive_outside_its_window_is_warned_with_what_mends_it() -> None:
    base = chain_of(2)
    device = replace(base.stages[0].device, drive_dbm=(13.0, 16.0))  # type: ignore[type-var]
    warnings = make_plan(replace(base, stages=(replace(base.stages[0], device=device),))).warnings
    assert any("3.0 dB more gain" in w for w in warnings)


def test_high_power_brings_the_caution() -> None:
    loud = replace(CHAIN, source=replace(CHAIN.source, level_dbm=60.0))
    assert any("exposure limits" in c for c in make_plan(loud).cautions)
    assert make_plan(CHAIN).cautions == ()


def test_phase_noise_rises_by_20_log_n(plan: Plan) -> None:
    noisy = replace(CHAIN, source=replace(CHAIN.source, phase_noise=((1e3, -140.0), (1e4, -150.0))))
    points = make_plan(noisy).output.phase_noise
    # common practice: 20 log10 6 = 15.56 dB; no amplifier has a noise figure here
    assert [p.dbc_hz for p in points] == pytest.approx([-124.437, -134.437], abs=1e-3)
    assert plan.output.phase_noise == ()


def test_unbuildable_parts_are_named_and_every_proposal_is_verified() -> None:
    design = replace(DESIGN, kits=("chip-0603",), min_bandwidth=0.1, topology=("ladder",))
    scenario = chain_of(2, 2, source_hz=(300e6, 300e6), design=design)
    plan = make_plan(scenario)
    assert plan.exit_status == 3
    assert not plan.buildable
    for s in plan.stages:
        if any(e.verdict == "swamped" for e in s.filter.elements):
            assert any(p.buildable for p in s.filter.proposals) or s.filter.proposals_note
        for p in s.filter.proposals:
            assert p.worst_margin_db >= DESIGN.margin_db


def test_a_proposal_taken_as_a_given_filter_keeps_the_margin_it_promised() -> None:
    design = replace(DESIGN, kits=("chip-0603",), min_bandwidth=0.08, topology=("ladder",))
    scenario = chain_of(2, source_hz=(150e6, 150e6), design=design)
    s = make_plan(scenario).stages[0]
    assert s.filter.proposals
    p = s.filter.proposals[0]
    given = GivenFilter(p.family, p.order, p.centre_hz, p.bandwidth_hz, p.ripple_db, p.topology)
    taken = make_plan(replace(scenario, stages=(replace(scenario.stages[0], filter=given),)))
    least = min(x.margin_db for x in taken.output.lines if x.margin_db is not None)
    assert least == pytest.approx(p.worst_margin_db, abs=1e-6)


@pytest.mark.parametrize("name", ["glacier-sounder.toml", "peat-moisture-radar.toml"])
def test_the_shipped_scenarios(name: str) -> None:
    from harmonic_planner.scenario import load

    scenario: Scenario = load(Path(__file__).parents[2] / "scenarios" / name)
    plan = make_plan(scenario)
    told = json.loads(plan_json(plan))
    assert plan.self_check
    assert all(r["margin_db"] >= 0 for s in told["stages"] for r in s["filter"]["requirement"])
    margins = [x["margin_db"] for x in told["output"]["lines"] if x["margin_db"] is not None]
    assert min(margins) >= scenario.design.margin_db
    if name == "glacier-sounder.toml":
        assert plan.exit_status == 0
    else:
        assert plan.exit_status == 3
        assert plan.sentence.count(".  ") == 0
        swamped = [s for s in plan.stages if any(e.verdict == "swamped" for e in s.filter.elements)]
        assert swamped
        for s in swamped:
            assert s.name in plan.sentence
            assert s.filter.proposals or s.filter.proposals_note
