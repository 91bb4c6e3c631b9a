"""Measured against computed: what was changed is named first where lines can tell, and where they cannot that is said."""

from __future__ import annotations

import math
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest

from harmonic_planner.chain.assemble import assemble, at_levels
from harmonic_planner.chain.exact import exact
from harmonic_planner.chain.levels import carrier_levels
from harmonic_planner.model import Amplifier, GivenFilter, PlannerError, Scenario
from harmonic_planner.planning.comparison import Comparison, MeasuredLines, compare
from harmonic_planner.planning.jobs import make_jobs, sample
from harmonic_planner.planning.stage_filter import given

from builders import chain_of, with_amplifier

NARROW = (
    GivenFilter("chebyshev", 3, 60e6, 4.2e6, unloaded_q=200),
    GivenFilter("chebyshev", 3, 120e6, 8.4e6, unloaded_q=200),
)
SOURCE = {Fraction(2): -30.0, Fraction(3): -35.0}


def chain(filters: tuple[GivenFilter, ...] = NARROW) -> Scenario:
    scenario = chain_of(3, 2, lines=SOURCE)
    return replace(
        scenario, stages=tuple(replace(s, filter=f) for s, f in zip(scenario.stages, filters, strict=True))
    )


def detuned(index: int, by: float) -> Scenario:
    moved = list(NARROW)
    f = NARROW[index]
    moved[index] = replace(f, centre_hz=f.centre_hz * (1 + by), bandwidth_hz=f.bandwidth_hz * (1 + by))
    return chain(tuple(moved))


def on_the_bench(scenario: Scenario, *, seed: int, faintest_dbc: float = -110.0) -> MeasuredLines:
    """Independent of the sums that the comparison shifts by: one draw of the whole chain, nothing taken as small."""
    arrays = assemble(scenario, phases="worst-case")
    jobs = make_jobs(scenario, arrays)
    filters = [given(job, s.filter) for job, s in zip(jobs, scenario.stages, strict=True)]  # type: ignore[arg-type]
    samples = [sample(job, f.attenuation) for job, f in zip(jobs, filters, strict=True)]
    levels = carrier_levels(scenario, [s.carrier_db[1:2] for s in samples])  # point 1: no drift
    found = exact(
        scenario,
        at_levels(scenario, arrays, levels),
        [s.transmission[1] for s in samples],
        draws=1,
        rng=np.random.default_rng(seed),
        levels=levels,
    ).max_dbc
    loud = [k for k in np.flatnonzero(found > faintest_dbc) if k != arrays.stages[-1].carrier]
    lines = tuple(arrays.grid.line(int(k)) for k in loud)
    return MeasuredLines(lines, tuple(float(found[k]) for k in loud), False, None, 20e6)


def first(found: Comparison) -> tuple[str | None, str]:
    return found.explanations[0].stage, found.explanations[0].part


@pytest.mark.parametrize("seed", [11, 12, 13])
@pytest.mark.parametrize("by", [-0.04, 0.04])
@pytest.mark.parametrize("index", [0, 1])
def test_a_filter_detuned_by_four_percent_is_named_first(index: int, by: float, seed: int) -> None:
    found = compare(chain(), on_the_bench(detuned(index, by), seed=seed))
    assert first(found) == (f"stage {index + 1}", "filter")
    assert found.explanations[0].gained > 6
    best = next(e for e in found.explanations if "has moved" in e.text and e.stage == f"stage {index + 1}")
    assert best.amount == pytest.approx(by, abs=0.01)


@pytest.mark.parametrize("seed", range(6))
def test_nothing_is_blamed_for_what_phases_do(seed: int) -> None:
    found = compare(chain(), on_the_bench(chain(), seed=seed))
    assert not found.told
    assert found.findings[0].startswith("nothing needs explaining: ")


def test_a_bad_balance_is_found() -> None:
    scenario = chain()
    device = replace(scenario.stages[0].device, balance_db=12.0)  # type: ignore[type-var]
    worse = replace(scenario, stages=(replace(scenario.stages[0], device=device), scenario.stages[1]))
    found = compare(scenario, on_the_bench(worse, seed=3, faintest_dbc=-140))
    texts = [e.text for e in found.explanations]
    assert any(t.startswith("the balance of stage 1's multiplier is") for t in texts)
    assert found.explanations[0].stage == "stage 1"
    assert found.explanations[0].part == "device"


def test_one_line_alone_cannot_tell_and_that_is_said() -> None:
    found = compare(chain(), MeasuredLines((Fraction(9),), (-40.0,), False, None, 20e6))
    assert not found.told
    assert found.findings[0].startswith("the measured line differs from the middle of what is computed by ")
    assert found.findings[1].startswith("but these lines cannot tell it from: ")
    assert any("would tell the first two apart" in text for text in found.findings)


def test_more_than_one_fault_is_not_pressed_into_one() -> None:
    """Every line far off, each its own way: no single change explains half of them."""
    good = on_the_bench(chain(), seed=5)
    off = [28.0 * (-1) ** i + 7.0 * (i % 3) for i in range(len(good.levels))]
    found = compare(chain(), replace(good, levels=tuple(a + b for a, b in zip(good.levels, off, strict=True))))
    assert not found.told
    assert found.findings[0].startswith("no one change explains it: ")


def test_dbm_are_relative_to_the_carrier_measured_or_computed() -> None:
    relative = on_the_bench(chain(), seed=1)
    absolute = replace(relative, levels=tuple(x + 7.5 for x in relative.levels), in_dbm=True, carrier_dbm=7.5)
    one, other = compare(chain(), relative), compare(chain(), absolute)
    assert [x.measured_dbc for x in other.lines] == pytest.approx([x.measured_dbc for x in one.lines])
    assert other.explanations == one.explanations
    assert any("the carrier was measured at 7.5 dBm" in note for note in other.notes)
    lacking = compare(chain(), replace(absolute, carrier_dbm=None))
    said = next(note for note in lacking.notes if "no carrier was measured" in note)
    computed_dbm = float(said.rsplit(" ", 2)[1])
    assert lacking.lines[0].measured_dbc == pytest.approx(absolute.levels[0] - computed_dbm, abs=0.05)


def test_a_saturated_amplifier_is_in_what_is_expected() -> None:
    """A saturated amplifier takes the amplitude part off a sideband beside its carrier, so the middle lies lower."""
    scenario = chain()
    saturated = with_amplifier(scenario, 1, Amplifier(gain_db=40.0, saturation_dbm=0.0))
    where = MeasuredLines((Fraction(5), Fraction(7)), (-60.0, -60.0), False, None, 20e6)
    linear, limited = compare(scenario, where), compare(saturated, where)
    assert all(b.computed_dbc < a.computed_dbc - 1 for a, b in zip(linear.lines, limited.lines, strict=True))


def test_the_same_input_gives_the_same_answer() -> None:
    bench = on_the_bench(detuned(0, 0.04), seed=11)
    assert compare(chain(), bench) == compare(chain(), bench)
    assert all(math.isfinite(x) for line in compare(chain(), bench).lines for x in line.phases_dbc)


def test_there_must_be_a_line_and_no_filter_to_plan() -> None:
    with pytest.raises(PlannerError, match="no line was measured"):
        compare(chain(), MeasuredLines((), (), False, None, 20e6))
    with pytest.raises(PlannerError, match="a budget plans nothing"):
        compare(chain_of(3, 2), MeasuredLines((Fraction(5),), (-60.0,), False, None, 20e6))
