"""The grid of lines, and what leaks past a filter."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.chain.leakage import isolation_db, skirt_needed_db, with_leakage
from harmonic_planner.chain.lines import LineGrid, grid_for
from harmonic_planner.model import Isolation

from builders import chain_of


def test_the_grid_reaches_four_times_the_factor_and_holds_fractions() -> None:
    grid = grid_for(chain_of(2, 3, lines={Fraction(1, 2): -60.0, Fraction(2, 3): -70.0}))
    assert grid.q == 6
    assert grid.line(grid.count - 1) == 24
    assert grid.line(grid.index(Fraction(3, 2))) == Fraction(3, 2)


def test_a_line_off_the_grid_is_an_error() -> None:
    with pytest.raises(ValueError, match="line 1/3 is not on the grid"):
        LineGrid(2, 8).index(Fraction(1, 3))


def test_default_isolation_falls_by_20_db_a_decade_above_1_ghz() -> None:
    f = np.array([1e8, 1e9, 1e10])
    assert isolation_db(Isolation(75.0), f) == pytest.approx([75, 75, 55])
    assert isolation_db(Isolation(75.0, flat=True), f) == pytest.approx([75, 75, 75])
    assert np.isinf(isolation_db(Isolation(math.inf), f)).all()


@given(st.floats(1, 100), st.floats(0, 10), st.floats(40, 120), st.sampled_from([1, 2]))
def test_the_skirt_that_is_needed_gives_the_rejection_with_the_leak(
    required: float, carrier: float, leak: float, exponent: int
) -> None:
    args = {"exponent": exponent}
    skirt = skirt_needed_db(np.array([required]), carrier, np.array([leak]), **args)
    if np.isinf(skirt[0]):
        assert required >= leak - carrier - 1e-9
    else:
        assert with_leakage(skirt, carrier, np.array([leak]), **args) == pytest.approx([required], abs=1e-6)
