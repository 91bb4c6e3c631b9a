"""Phase noise of a chain."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import constants

from harmonic_planner.model import Device
from harmonic_planner.physics.conversion import conversion_ratio
from harmonic_planner.physics.noise import amplifier_floor_dbc_hz, phase_noise, raised_db


def test_thermal_floor_is_half_of_kt():
    """independent: k·290 K/2 in dBm/Hz from the defined Boltzmann constant; −177 is rounded by 0.015 dB."""
    half_kt_dbm_hz = 10 * math.log10(constants.k * 290 / 2 / 1e-3)
    assert half_kt_dbm_hz == pytest.approx(-177.0, abs=0.02)
    assert float(amplifier_floor_dbc_hz(0.0, input_dbm=0.0)) == pytest.approx(half_kt_dbm_hz, abs=0.02)
    assert amplifier_floor_dbc_hz([4.0, 3.0], input_dbm=[-6.0, 10.0]).tolist() == [-167.0, -184.0]


@pytest.mark.parametrize("factor, rise_db", [(1, 0.0), (2, 6.02), (10, 20.0), (24, 27.6)])
def test_multiplication_raises_phase_noise_by_20_log_n(factor, rise_db):
    """published: Robins, Phase Noise in Signal Sources: 20 log10 N."""
    assert float(raised_db(factor)) == pytest.approx(rise_db, abs=0.005)
    assert phase_noise([-150.0, -165.0], factor=factor) == pytest.approx(
        np.array([-150.0, -165.0]) + rise_db, abs=0.005
    )


@pytest.mark.parametrize("times", [1, 3, 5])
def test_rise_agrees_with_the_conversion_of_phase_sidebands(times):
    """independent: on phase sidebands (two, opposite) own and image path add: (N + a)/2 + (N − a)/2 = N."""
    limiter = Device("limiter", -10.0, steepness=10.0)
    own, image = conversion_ratio(limiter, times, [times - 1, times + 1])
    assert 20 * math.log10(own + image) == pytest.approx(float(raised_db(times)))


def test_floors_add_as_powers_and_rise_with_what_follows():
    """independent: by hand. Floors −177 + 4 − (−6) = −167 and −177 + 3 − 0 = −174 dBc/Hz, raised by 6 and by 1."""
    total = phase_noise(
        [-170.0, -120.0], factor=12, noise_figure_db=[4.0, 3.0], input_dbm=[-6.0, 0.0], factor_after=[6, 1]
    )
    expected = [
        10 * math.log10(10 ** ((source + 21.58362) / 10) + 10 ** ((-167 + 15.56303) / 10) + 10 ** (-174 / 10))
        for source in (-170.0, -120.0)
    ]
    assert total == pytest.approx(expected, abs=1e-4)


@given(
    source=st.lists(st.floats(-190, -60), min_size=1, max_size=6),
    factor=st.integers(1, 100),
    amplifiers=st.lists(st.tuples(st.floats(0, 12), st.floats(-30, 20), st.integers(1, 50)), max_size=5),
)
def test_no_amplifier_makes_it_quieter(source, factor, amplifiers):
    """independent: every term is a power."""
    columns = [list(column) for column in zip(*amplifiers, strict=True)] or [[], [], []]
    total = phase_noise(
        source, factor=factor, noise_figure_db=columns[0], input_dbm=columns[1], factor_after=columns[2]
    )
    alone = phase_noise(source, factor=factor)
    assert total.shape == (len(source),)
    assert np.all(total >= alone - 1e-9)
    loudest = [-177 + nf - level + 20 * math.log10(after) for nf, level, after in amplifiers]
    assert np.all(total >= max(loudest, default=-math.inf) - 1e-9)
