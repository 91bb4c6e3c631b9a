"""The grid of lines and the limits on it."""

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.chain.leakage import isolation_db, skirt_needed_db, with_leakage
from harmonic_planner.chain.lines import LineGrid, grid_for, output_limits_dbc
from harmonic_planner.model import Isolation, MaskBand, Output

from builders import chain_of


def test_the_grid_reaches_four_times_the_factor_and_holds_fractions() -> None:
    grid = grid_for(chain_of(2, 3, lines={Fraction(1, 2): -60.0, Fraction(2, 3): -70.0}))
    assert grid.q == 6
    assert grid.line(grid.count - 1) == 24
    assert grid.line(grid.index(Fraction(3, 2))) == Fraction(3, 2)


def test_a_line_off_the_grid_is_an_error() -> None:
    with pytest.raises(ValueError, match="line 1/3 is not on the grid"):
        LineGrid(2, 8).index(Fraction(1, 3))


def _limits(output: Output, low: float, high: float) -> float:
    return float(output_limits_dbc(output, np.array([low]), np.array([high]))[0])


def test_a_mask_replaces_the_limit_inside_its_band_only() -> None:
    output = Output(limit_dbc=-60.0, mask=(MaskBand(100.0, 200.0, -40.0), MaskBand(200.0, 300.0, -80.0)))
    assert _limits(output, 150, 160) == -40  # looser inside a band
    assert _limits(output, 250, 260) == -80
    assert _limits(output, 190, 210) == -80  # the strictest of both bands, which cover the span
    assert _limits(output, 90, 110) == -60  # partly outside: the general limit counts too
    assert _limits(output, 400, 400) == -60


def test_a_mask_alone_asks_nothing_outside_its_bands() -> None:
    assert _limits(Output(mask=(MaskBand(100.0, 200.0, -40.0),)), 300, 300) == math.inf


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
