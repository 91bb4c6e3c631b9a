"""Amplifier levels and lines."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.model import Amplifier, PlannerError
from harmonic_planner.physics.amplifiers import amplifier_lines, output_dbm


def test_gain_holds_below_saturation():
    """independent: by hand."""
    amplifier = Amplifier(gain_db=20.0, saturation_dbm=13.0)
    assert output_dbm(amplifier, -10.0) == 10.0
    assert output_dbm(amplifier, -7.0) == 13.0
    assert output_dbm(amplifier, 0.0) == 13.0


def test_linear_without_a_saturation():
    assert output_dbm(Amplifier(gain_db=20.0), 30.0) == 50.0


def test_arrays_keep_their_shape():
    level = np.array([[-30.0, -7.0], [0.0, 5.0]])
    out = output_dbm(Amplifier(gain_db=20.0, saturation_dbm=13.0), level)
    assert out.tolist() == [[-10.0, 13.0], [13.0, 13.0]]
    assert isinstance(output_dbm(Amplifier(gain_db=20.0, saturation_dbm=13.0), -3.0), float)


@given(low=st.floats(-100, 50), step=st.floats(0, 50), gain=st.floats(-10, 40), saturation=st.floats(-20, 40))
def test_output_never_falls_with_drive_nor_passes_saturation(low, step, gain, saturation):
    """independent: invariants of a limiter."""
    amplifier = Amplifier(gain_db=gain, saturation_dbm=saturation)
    first, second = output_dbm(amplifier, low), output_dbm(amplifier, low + step)
    assert first <= second <= saturation
    assert first <= low + gain


def test_own_lines_stand_at_harmonics_of_the_amplified_carrier():
    """independent: carrier at 6; −30 dBc at 12, −40 dBc at 18, line 5 beyond the comb."""
    lines = amplifier_lines(
        Amplifier(gain_db=20.0, lines_dbc={2: -30.0, 3: -40.0, 5: -10.0}), carrier_index=6, count=20
    )
    assert lines.shape == (20,)
    assert np.nonzero(lines)[0].tolist() == [11, 17]
    assert lines[11] == pytest.approx(10 ** (-30 / 20))
    assert lines[17] == pytest.approx(0.01)


def test_amplifier_without_lines_adds_none():
    assert not amplifier_lines(Amplifier(gain_db=3.0), carrier_index=2, count=9).any()


@pytest.mark.parametrize("line", [-1, 0, 1])
def test_lines_that_are_no_harmonics_are_refused(line):
    with pytest.raises(PlannerError, match=rf"amplifier\.lines: line {line}: allowed are harmonics .* from 2"):
        amplifier_lines(Amplifier(gain_db=3.0, lines_dbc={line: -20.0}), carrier_index=2, count=9)
