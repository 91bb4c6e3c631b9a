"""A measured filter in its place: read between its points, moved by drift, and what lies outside them."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.chain.assemble import assemble
from harmonic_planner.model import GivenFilter, MeasuredFilter, PlannerError, Scenario
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.hardware import budget
from harmonic_planner.planning.jobs import act, make_jobs, prototype_attenuation
from harmonic_planner.planning.measured import interpolated, measured
from harmonic_planner.planning.plan import make_plan

from builders import DESIGN, chain_of

CENTRE_HZ, BANDWIDTH = 40e6, 0.2
IDEAL = prototype_attenuation(Prototype("butterworth", 3), centre_hz=CENTRE_HZ, bandwidth=BANDWIDTH)
GIVEN = GivenFilter("butterworth", 3, CENTRE_HZ, BANDWIDTH * CENTRE_HZ)


def sampled(low_hz: float = 4e6, high_hz: float = 400e6, points: int = 2001, **keys: object) -> MeasuredFilter:
    frequency_hz = np.geomspace(low_hz, high_hz, points)
    found = MeasuredFilter("touchstone", "x.s2p", tuple(frequency_hz), tuple(IDEAL(frequency_hz)))
    return replace(found, **keys)  # type: ignore[arg-type]


def doubler(description: MeasuredFilter | GivenFilter, **keys: object) -> Scenario:
    return chain_of(2, limit_dbc=-40, filter=description, **keys)  # type: ignore[arg-type]


def job_of(scenario: Scenario):
    return make_jobs(scenario, assemble(scenario, phases="worst-case"))[0]


def test_it_does_what_the_filter_it_was_sampled_from_does() -> None:
    """Independent: the prototype's closed form, at every line and with drift."""
    job = job_of(doubler(GIVEN))
    wanted, found = act(job, IDEAL), measured(job, sampled())
    assert found.action.skirt_db == pytest.approx(wanted.skirt_db, abs=0.02)
    assert found.action.carrier_most_db == pytest.approx(wanted.carrier_most_db, abs=1e-3)
    as_given, as_measured = make_plan(doubler(GIVEN)), make_plan(doubler(sampled()))
    for a, b in zip(as_given.output.lines, as_measured.output.lines, strict=True):
        assert (a.line, a.limit_dbc) == (b.line, b.limit_dbc)
        assert b.margin_db == pytest.approx(a.margin_db, abs=0.03)
    filter_plan = as_measured.stages[0].filter
    assert (filter_plan.source, filter_plan.touchstone) == ("touchstone", "x.s2p")
    for need in filter_plan.requirement:  # without isolation there is no leak
        assert need.ideal_db == pytest.approx(need.as_built_db, abs=1e-9)


def test_leakage_is_no_part_of_what_was_measured() -> None:
    leaky = doubler(sampled(), design=replace(DESIGN, isolation=replace(DESIGN.isolation, level_db=40.0, flat=True)))
    need = next(r for r in make_plan(leaky).stages[0].filter.requirement if r.line == 6)
    assert need.ideal_db > 60
    assert need.as_built_db < 40


def test_the_band_is_where_it_is_three_decibels_down() -> None:
    """Independent: a Butterworth filter's bandwidth is its 3 dB one, edges f0·(√(1 + Δ²/4) ± Δ/2); 3.01 dB exactly."""
    found = measured(job_of(doubler(GIVEN)), sampled())
    assert found.centre_hz == pytest.approx(CENTRE_HZ, rel=1e-4)
    assert found.bandwidth == pytest.approx(BANDWIDTH, rel=2e-3)


@settings(max_examples=60)
@given(
    values=st.lists(st.floats(0, 200), min_size=3, max_size=12),
    at=st.lists(st.floats(0.001, 0.999), min_size=1, max_size=8),
)
def test_between_points_it_never_leaves_what_is_there(values: list[float], at: list[float]) -> None:
    """Property: interpolation stays between neighbours, and outside it is what the carrier has at its best."""
    frequency_hz = 1e6 * 2.0 ** np.arange(len(values))
    description = MeasuredFilter("table", "x.csv", tuple(frequency_hz), tuple(values))
    carrier_hz = (frequency_hz[0] * 1.1, frequency_hz[-1] * 0.9)
    attenuation = interpolated(description, carrier_hz)
    for i in range(len(values) - 1):
        inside = attenuation(frequency_hz[i] * 2.0 ** np.array(at))
        assert (inside >= min(values[i : i + 2]) - 1e-9).all()
        assert (inside <= max(values[i : i + 2]) + 1e-9).all()
    best = min(attenuation(np.geomspace(*carrier_hz, 4001)))
    outside = attenuation(np.array([frequency_hz[0] / 2, frequency_hz[-1] * 2]))
    assert outside == pytest.approx(best, abs=0.5)
    assert (outside <= best + 1e-9).all()


def test_a_line_outside_that_matters_is_refused_with_its_name() -> None:
    with pytest.raises(PlannerError) as caught:
        make_plan(doubler(sampled(low_hz=15e6, high_hz=70e6)))
    words = str(caught.value)
    assert words.startswith('stage[1].filter.touchstone = "x.s2p": line 4, 80 MHz, lies outside its frequencies, ')
    assert "15 to 70 MHz" in words
    assert 'measure further, or set beyond_sweep = "no-rejection"' in words
    assert words.endswith('(stage "stage 1")')


def test_a_line_outside_passes_where_the_user_allows_it_and_it_is_said() -> None:
    plan = make_plan(doubler(sampled(low_hz=15e6, high_hz=70e6, beyond_sweep="no-rejection")))
    reached = {r.line: r.as_built_db for r in plan.stages[0].filter.requirement}
    assert reached[Fraction(4)] == pytest.approx(0.0, abs=0.1)
    assert reached[Fraction(1)] > 40
    assert plan.exit_status == 3
    assert any("15 to 70 MHz" in text and "beyond_sweep allows it" in text for text in plan.assumptions)


def test_a_line_outside_that_cannot_matter_is_let_through_and_it_is_said() -> None:
    """Line 7 of this doubler lies some 80 dB under the limit by itself."""
    scenario = doubler(sampled(high_hz=135e6))
    quiet = replace(scenario.stages[0].device, lines_dbc={7: -100.0, 8: -110.0})  # type: ignore[type-var]
    plan = make_plan(replace(scenario, stages=(replace(scenario.stages[0], device=quiet),)))
    said = [text for text in plan.assumptions if "outside 4 to 135 MHz" in text]
    assert len(said) == 1
    assert "dB under every limit" in said[0]


def test_a_carrier_outside_is_refused_whatever_is_allowed() -> None:
    with pytest.raises(PlannerError, match=r"the carrier, .* lies outside its frequencies, 4 to 40 MHz"):
        make_plan(doubler(sampled(high_hz=40e6, beyond_sweep="no-rejection")))


def test_drift_moves_a_measured_filter_as_any_other() -> None:
    """Independent: the closed form at f/(1 ± 5 %)."""
    wide = replace(DESIGN, drift=0.05)
    job = job_of(doubler(sampled(), design=wide))
    carrier_most_db = max(IDEAL(np.linspace(40e6 / 1.05, 40e6 / 0.95, 2001)))
    assert measured(job, sampled()).action.skirt_db[0] == pytest.approx(
        IDEAL(np.array([20e6 / 0.95]))[0] - carrier_most_db, abs=0.02
    )


def test_other_stages_are_planned_around_a_measured_one() -> None:
    first = GivenFilter("butterworth", 3, 60e6, 12e6)
    scenario = chain_of(3, 2, limit_dbc=-45)
    frequency_hz = np.geomspace(10e6, 1e9, 3001)
    ideal = prototype_attenuation(Prototype("butterworth", 3), centre_hz=60e6, bandwidth=0.2)
    known = MeasuredFilter("table", "x.csv", tuple(frequency_hz), tuple(ideal(frequency_hz)))
    plans = [
        make_plan(replace(scenario, stages=(replace(scenario.stages[0], filter=f), scenario.stages[1])))
        for f in (first, known)
    ]
    assert [p.stages[0].filter.source for p in plans] == ["given", "table"]
    given_plan, table_plan = (p.stages[1].filter for p in plans)
    assert (given_plan.order, given_plan.family) == (table_plan.order, table_plan.family)
    with pytest.raises(PlannerError, match=r'stage\[2\]\.filter \(stage "stage 2"\) = "plan": a budget plans nothing'):
        budget(replace(scenario, stages=(replace(scenario.stages[0], filter=known), scenario.stages[1])))
