"""Grids: values in a range, and the nearest one."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.model import PlannerError
from harmonic_planner.parts.preferred import SERIES, grid_values, nearest

ranges = st.tuples(st.floats(1e-13, 1e-5), st.floats(1.01, 1e4)).map(lambda pair: (pair[0], pair[0] * pair[1]))


@given(st.sampled_from(list(SERIES)), ranges)
def test_every_value_lies_in_the_range_and_none_is_left_out(series: str, span: tuple[float, float]):
    smallest, largest = span
    values = grid_values(series, smallest=smallest, largest=largest)
    assert all(smallest <= value <= largest for value in values)
    assert list(values) == sorted(set(values))
    decades = math.log10(largest / smallest)
    assert abs(len(values) - decades * int(series[1:])) <= 2 + 0.2 * int(series[1:]) ** 0.5


def test_values_are_the_floats_nearest_to_the_printed_ones():
    assert grid_values("E24", smallest=4.6e-9, largest=5.2e-9) == (4.7e-9, 5.1e-9)


def test_both_ends_belong_to_the_range():
    assert grid_values("E3", smallest=1e-12, largest=1e-11) == (1e-12, 2.2e-12, 4.7e-12, 1e-11)


@given(st.floats(1e-10, 1e-6))
def test_nearest_is_as_near_by_ratio_as_any(value: float):
    grid = grid_values("E12", smallest=1e-9, largest=1e-7)
    found = nearest(value, grid)
    assert abs(math.log(found / value)) == min(abs(math.log(candidate / value)) for candidate in grid)


def test_unknown_series_and_empty_range_are_refused_with_what_is_allowed():
    with pytest.raises(PlannerError, match=r"E10.*allowed: E3, E6, E12, E24, E48, E96"):
        grid_values("E10", smallest=1.0, largest=2.0)
    with pytest.raises(PlannerError, match="above zero"):
        grid_values("E12", smallest=2.0, largest=1.0)
