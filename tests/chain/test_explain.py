"""Ranking explanations: the right amount, honest ties, and a stray line that decides nothing."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from harmonic_planner.chain.explain import APART, Readings, Suspect, explain, telling_line

LINES = 6
AMOUNTS = np.arange(-10.0, 10.5, 0.5)
SHAPES = {
    "all alike": np.ones(LINES),
    "the upper ones": np.array([0.0, 0, 0, 1, 1, 1]),
    "a slope": np.linspace(-1, 1, LINES),
}
SUSPECTS = [Suspect(AMOUNTS, AMOUNTS[:, None] * shape) for shape in SHAPES.values()]


def readings(level_db, *, draws_db=None, deviation_db=1.0, where=None) -> Readings:
    level_db = np.asarray(level_db, dtype=float)
    where = np.arange(LINES) if where is None else np.asarray(where)
    draws = np.zeros((1, level_db.size)) if draws_db is None else np.asarray(draws_db, dtype=float)
    return Readings(where, level_db, draws, np.full(level_db.size, deviation_db))


@settings(max_examples=60)
@given(which=st.integers(0, 2), amount=st.sampled_from([a for a in AMOUNTS if abs(a) >= 4]))
def test_what_was_changed_is_found_with_its_amount(which: int, amount: float) -> None:
    fits = explain(readings(amount * list(SHAPES.values())[which]), SUSPECTS)
    assert (fits[0].suspect, fits[0].amount) == (which, amount)
    assert fits[1].misfit - fits[0].misfit > APART


def test_the_misfit_is_minus_twice_a_log_likelihood() -> None:
    """Independent: scipy's normal density; a hundredth of the probability is spread over 100 dB for strays."""
    draws = np.array([[0.0, 1.0], [2.0, -1.0], [4.0, 0.0]])
    found = Readings(np.array([0, 1]), np.array([1.5, 0.2]), draws, np.array([1.0, 2.0])).misfit(np.zeros((1, 2)))
    likelihood = 1.0
    for k, deviation in enumerate((1.0, 2.0)):
        usual = np.mean(stats.norm.pdf(found_level := (1.5, 0.2)[k], draws[:, k], deviation))
        assert found_level is not None
        likelihood *= (0.99 * usual + 0.01 / 100) * deviation * np.sqrt(2 * np.pi)
    assert found[0] == pytest.approx(-2 * np.log(likelihood), rel=1e-12)


def test_two_that_shift_the_measured_lines_alike_cannot_be_told_apart() -> None:
    """Only lines 3 to 5 were measured: there the first two suspects are one."""
    fits = explain(readings([5.0, 5.0, 5.0], where=[3, 4, 5]), SUSPECTS)
    assert [f.suspect for f in fits[:2]] == [0, 1]
    assert fits[0].misfit == pytest.approx(fits[1].misfit)
    one, other = (f.shift_db for f in fits[:2])
    assert telling_line(one - 60, other - 60, np.array([True] * 3 + [False] * 3), faintest_db=-100) in (0, 1, 2)
    assert telling_line(one - 160, other - 160, np.ones(LINES, dtype=bool), faintest_db=-100) is None


def test_nothing_changed_is_explained_by_the_smallest_change() -> None:
    fits = explain(readings(np.zeros(LINES)), SUSPECTS)
    assert all(f.amount == 0.0 for f in fits)


def test_one_stray_line_does_not_decide() -> None:
    """A line 60 dB off costs no more than its small probability, so the others' verdict stands."""
    level = 6.0 * SHAPES["all alike"]
    level[0] += 60.0
    fits = explain(readings(level), SUSPECTS)
    assert (fits[0].suspect, fits[0].amount) == (0, 6.0)
    found = readings(level)
    assert list(found.unexplained(fits[0].shift_db)) == [0]


def test_a_line_whose_phases_spread_says_little() -> None:
    """The same 8 dB on one line convict where its level is certain and do not where phases alone may do it."""
    level = np.array([8.0, 0, 0, 0, 0, 0])
    certain = readings(level)
    spread = np.zeros((400, LINES))
    spread[:, 0] = np.random.default_rng(1).normal(0, 8, 400)
    loose = readings(level, draws_db=spread)
    lone = [Suspect(AMOUNTS, AMOUNTS[:, None] * (np.arange(LINES) == 0))]
    unchanged = np.zeros((1, LINES))
    gained = [float(r.misfit(unchanged)[0]) - explain(r, lone)[0].misfit for r in (certain, loose)]
    assert gained[0] > APART
    assert gained[1] < APART / 2
    assert not len(loose.unexplained(unchanged[0]))
