"""Choosing from lists: the search against trying every combination."""

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters.rounding import RIDGE, Triangle, best_combinations


def problem(rng: np.random.Generator, count: int):
    residual, slopes = rng.normal(size=12), rng.normal(size=(12, count)) * rng.uniform(0.1, 10, count)
    steps = [np.sort(rng.normal(size=rng.integers(1, 4))) for _ in range(count)]
    return residual, slopes, steps


# independent: every combination
@settings(deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(1, 5))
def test_with_all_kept_the_best_combination_is_found(seed: int, count: int):
    residual, slopes, steps = problem(np.random.default_rng(seed), count)
    places = best_combinations(Triangle.of(residual, slopes), steps, kept=10_000)

    def square(choice) -> float:
        step = np.array([steps[i][place] for i, place in enumerate(choice)])
        return float(np.square(residual + slopes @ step).sum() + RIDGE**2 * step @ step)

    every = sorted(itertools.product(*(range(len(choices)) for choices in steps)), key=square)
    assert len(places) == len(every)
    assert square(places[0]) == pytest.approx(square(every[0]), rel=1e-9)
    found = [square(choice) for choice in places]
    assert found == sorted(found) or np.all(np.diff(found) > -1e-9 * max(found))


# independent: a least-squares solution over the first unknowns for each set of last ones
@settings(deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(2, 6))
def test_the_last_unknowns_alone_are_judged_with_the_first_at_their_best(seed: int, count: int):
    rng = np.random.default_rng(seed)
    residual, slopes, _ = problem(rng, count)
    split = int(rng.integers(1, count))
    last = Triangle.of(residual, slopes).last(count - split)
    tall = np.concatenate([slopes, RIDGE * np.eye(count)])
    target = np.concatenate([residual, np.zeros(count)])

    def least(given_last) -> float:
        offset = target + tall[:, split:] @ given_last
        best = np.linalg.lstsq(tall[:, :split], -offset, rcond=None)[0]
        return float(np.square(offset + tall[:, :split] @ best).sum())

    one, two = rng.normal(size=(2, count - split))
    difference = np.square(last.factor @ one + last.offset).sum() - np.square(last.factor @ two + last.offset).sum()
    assert difference == pytest.approx(least(one) - least(two), rel=1e-6, abs=1e-6)


def test_a_narrow_search_beats_rounding_each_by_itself_where_two_make_up_for_each_other():
    # by hand: only the sum counts, 0.4 + 0.4 wanted; apart each goes to 0, together one goes to 1
    triangle = Triangle.of(np.array([-0.8]), np.array([[1.0, 1.0]]))
    places = best_combinations(triangle, [np.array([0.0, 1.0]), np.array([0.0, 1.0])], kept=2)
    assert sorted(places[0]) == [0, 1]
