"""Fourier coefficients of every device against quadrature, identities and limits."""

import math

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from numpy.polynomial import chebyshev
from scipy.integrate import quad
from scipy.special import ive

from harmonic_planner.model import Device, PlannerError
from harmonic_planner.physics.limiter import ConvergenceError, limiter_bias, limiter_coefficients
from harmonic_planner.physics.waveforms import (
    bias_of,
    clipped_spectrum,
    limiter_spectrum,
    power_law_spectrum,
    second_half,
    spectrum,
    waveform,
)

ANGLES_DEG = [1.0, 10.0, 24.0, 39.9, 60.0, 90.0, 110.0, 150.0, 179.0]


def device(kind, **options):
    return Device(kind, -10.0, **options)


def by_quadrature(f, m, corners=()):
    """Two-sided coefficient of the even function f(cos φ), independent of every closed form."""
    value, _ = quad(
        lambda phi: f(math.cos(phi)) * math.cos(m * phi),
        0,
        math.pi,
        points=sorted(corners) or None,
        epsabs=1e-13,
        epsrel=1e-13,
        limit=400,
    )
    return value / math.pi


@pytest.mark.parametrize("angle_deg", ANGLES_DEG)
def test_clipped_coefficients_equal_quadrature(angle_deg):
    """independent: numerical integration, broken at the corner."""
    theta = math.radians(angle_deg)
    corner = math.cos(theta)
    s = clipped_spectrum(theta, 12)
    for m in range(13):
        assert s.F[m] == pytest.approx(by_quadrature(lambda x: max(x - corner, 0.0), m, [theta]), abs=1e-12)
        assert s.G[m] == pytest.approx(by_quadrature(lambda x: float(x > corner), m, [theta]), abs=1e-12)


@pytest.mark.parametrize("angle_deg", ANGLES_DEG[1:-1])
def test_clipped_curvature_is_the_change_of_slope_with_a_shift(angle_deg):
    """independent: f″ = df′(x + s)/ds, by central difference of quadratures of f′."""
    theta, step = math.radians(angle_deg), 1e-4
    s = clipped_spectrum(theta, 8)
    for m in range(9):
        slopes = []
        for shift in (-step, step):
            corner = math.cos(theta) - shift
            slopes.append(by_quadrature(lambda x, c=corner: float(x > c), m, [math.acos(corner)]))
        assert s.H[m] == pytest.approx((slopes[1] - slopes[0]) / (2 * step), rel=1e-4, abs=1e-4)


@pytest.mark.parametrize("kind, sign", [("push-push", 1), ("push-pull", -1)])
@pytest.mark.parametrize("angle_deg", [35.0, 90.0, 120.0])
def test_balanced_coefficients_equal_quadrature(kind, sign, angle_deg):
    """independent: quadrature of h(x) ± σ·h(−x) and of its slope, written out here."""
    theta = math.radians(angle_deg)
    corner, sigma = math.cos(theta), (1 - 10 ** (-20 / 20)) / (1 + 10 ** (-20 / 20))
    s = spectrum(device(kind, half_angle_rad=theta, balance_db=20.0), 2, 9)
    for m in range(10):
        f = by_quadrature(
            lambda x: max(x - corner, 0) + sign * sigma * max(-x - corner, 0), m, [theta, math.pi - theta]
        )
        g = by_quadrature(lambda x: (x > corner) - sign * sigma * (-x > corner), m, [theta, math.pi - theta])
        assert s.F[m] == pytest.approx(f, abs=1e-12)
        assert s.G[m] == pytest.approx(g, abs=1e-12)


@pytest.mark.parametrize("steepness, bias", [(0.3, 0.0), (2.0, 0.7), (10.0, 0.0), (10.0, 4.0), (60.0, -20.0)])
def test_limiter_coefficients_equal_quadrature(steepness, bias):
    """independent: Gauss–Legendre quadrature in 500 panels."""
    s = limiter_spectrum(steepness=steepness, bias=bias, m_max=7)
    nodes, weights = np.polynomial.legendre.leggauss(20)
    edges = np.linspace(0, np.pi, 501)
    phase = (edges[:-1, np.newaxis] + np.pi / 500 * (nodes + 1) / 2).ravel()
    weight = np.tile(weights / 1000, 500)
    u = steepness * np.cos(phase) + bias
    shapes = {
        "F": np.tanh(u),
        "G": steepness / np.cosh(u) ** 2,
        "H": -2 * steepness**2 * np.tanh(u) / np.cosh(u) ** 2,
    }
    for name, shape in shapes.items():
        expected = [np.sum(weight * shape * np.cos(m * phase)) for m in range(8)]
        assert getattr(s, name) == pytest.approx(expected, abs=1e-12 * np.sum(weight * np.abs(shape)))


@pytest.mark.parametrize("times", range(1, 9))
def test_power_law_equals_polynomial_derivatives(times):
    """independent: numpy's Chebyshev derivatives, sampled; exact for a polynomial."""
    s = power_law_spectrum(times, 12)
    x = np.cos(2 * np.pi * np.arange(64) / 64)
    series = np.eye(times + 1)[times]
    for order, mine in enumerate((s.F, s.G, s.H)):
        samples = chebyshev.chebval(x, chebyshev.chebder(series, order))
        assert mine == pytest.approx(np.fft.rfft(samples).real[:13] / 64, abs=1e-11)


ANY_DEVICE = st.one_of(
    st.builds(
        lambda kind, angle, balance: device(kind, half_angle_rad=math.radians(angle), balance_db=balance),
        st.sampled_from(["single-ended", "push-push", "push-pull"]),
        st.floats(0.5, 179.5),
        st.one_of(st.floats(0, 80), st.just(math.inf)),
    ),
    st.just(device("power-law")),
)


def assert_identities(s, times):
    """By parts: G_(m−1) − G_(m+1) = 2·m·F_m and H_(m−1) − H_(m+1) = 2·m·G_m, to 1e-9 of the largest G and H."""
    assert s.G[times - 1] - s.G[times + 1] == pytest.approx(2 * times * s.F[times], abs=1e-9 * np.max(np.abs(s.G)))
    assert s.H[times - 1] - s.H[times + 1] == pytest.approx(2 * times * s.G[times], abs=1e-9 * np.max(np.abs(s.H)))


@given(any_device=ANY_DEVICE, times=st.integers(1, 12))
def test_slope_lines_differ_by_the_wanted_line(any_device, times):
    """independent: integration by parts, for every device, angle, balance and N."""
    assert_identities(spectrum(any_device, times, times + 1), times)


@given(steepness=st.floats(0.05, 100), bias_share=st.floats(-1, 1), times=st.integers(1, 12))
@example(steepness=1000.0, bias_share=0.4, times=5)
@example(steepness=1000.0, bias_share=-1.0, times=2)
def test_slope_lines_differ_by_the_wanted_line_in_a_limiter(steepness, bias_share, times):
    """independent: integration by parts, for every steepness and bias."""
    assert_identities(limiter_spectrum(steepness=steepness, bias=bias_share * (steepness + 3), m_max=times + 1), times)


@given(any_device=ANY_DEVICE, times=st.integers(1, 6), phase=st.floats(0, math.pi))
def test_series_adds_up_to_the_waveform(any_device, times, phase):
    """independent: the Fourier sum at one phase; the rest of a clipped series is below 2/(π·m_max)·(1 + σ)."""
    m_max = 4000
    s = spectrum(any_device, times, m_max)
    total = s.F[0] + 2 * np.sum(s.F[1:] * np.cos(np.arange(1, m_max + 1) * phase))
    assert total == pytest.approx(float(waveform(any_device, times)(np.cos(phase))), abs=4 / (math.pi * m_max))


@pytest.mark.parametrize("kind", ["single-ended", "push-push", "push-pull", "limiter", "power-law"])
def test_coefficients_up_to_any_line_agree(kind):
    """independent: a longer series begins with the shorter one."""
    short, long = spectrum(device(kind), 3, 5), spectrum(device(kind), 3, 900)
    for name in ("F", "G", "H"):
        assert getattr(short, name).shape == (6,)
        assert getattr(long, name)[:6] == pytest.approx(getattr(short, name), abs=1e-11)
    assert spectrum(device(kind), 3, 0).F.shape == (1,)


def test_perfect_balance_leaves_one_parity():
    """independent: symmetry."""
    m = np.arange(20)
    even = spectrum(device("push-push", half_angle_rad=1.1, balance_db=math.inf), 2, 19)
    odd = spectrum(device("push-pull", half_angle_rad=1.1, balance_db=math.inf), 3, 19)
    assert even.F[m % 2 == 1] == pytest.approx(0, abs=1e-15)
    assert even.G[m % 2 == 0] == pytest.approx(0, abs=1e-15)
    assert odd.F[m % 2 == 0] == pytest.approx(0, abs=1e-15)
    assert odd.G[m % 2 == 1] == pytest.approx(0, abs=1e-15)


def test_no_balance_is_a_single_ended_device():
    """independent: B = 0 dB means σ = 0."""
    assert second_half(0.0) == 0
    assert second_half(math.inf) == 1
    alone = spectrum(device("single-ended", half_angle_rad=1.0), 2, 9)
    unbalanced = spectrum(device("push-pull", half_angle_rad=1.0, balance_db=0.0), 2, 9).F
    assert unbalanced == pytest.approx(alone.F)


@pytest.mark.parametrize("balance_db", [6.0, 25.0, 40.0])
def test_balance_is_the_ratio_of_unlike_to_like_halves(balance_db):
    """independent: (1 − σ)/(1 + σ) = 10^(−B/20)."""
    sigma = second_half(balance_db)
    assert 20 * math.log10((1 + sigma) / (1 - sigma)) == pytest.approx(balance_db)


@pytest.mark.parametrize("times", [1, 3, 5])
@pytest.mark.parametrize("level_dbc", [-60.0, -25.0, -10.0, -4.0])
@pytest.mark.parametrize("steepness", [3.0, 10.0, 80.0])
def test_limiter_bias_puts_line_2_where_it_was_given(times, level_dbc, steepness):
    """independent: the biased waveform sampled and transformed here."""
    limiter = device("limiter", steepness=steepness, lines_dbc={2: level_dbc})
    phase = 2 * np.pi * np.arange(8192) / 8192
    lines = np.abs(np.fft.rfft(waveform(limiter, times)(np.cos(phase))))
    assert 20 * np.log10(lines[2] / lines[times]) == pytest.approx(level_dbc, abs=1e-6)
    assert bias_of(limiter, times) > 0


def test_limiter_bias_grows_with_line_2():
    """independent: monotone on the first branch."""
    biases = [
        limiter_bias(steepness=10.0, line_2_dbc=level, times=3, weakest_db=40.0)
        for level in np.arange(-80.0, 20.0, 2.0)
    ]
    assert np.all(np.diff(biases) > 0)


def test_limiter_without_line_2_or_with_even_factor_has_no_bias():
    assert bias_of(device("limiter"), 3) == 0
    assert bias_of(device("limiter", lines_dbc={3: -10.0}), 1) == 0
    assert bias_of(device("limiter", lines_dbc={2: -10.0}), 4) == 0
    assert limiter_bias(steepness=10.0, line_2_dbc=-400.0, times=3, weakest_db=40.0) == pytest.approx(0, abs=1e-15)


@pytest.mark.parametrize("level_dbc, times, allowed", [(0.0, 1, "up to -0.67 dBc"), (60.0, 3, "up to 27.14 dBc")])
def test_unreachable_line_2_is_refused(level_dbc, times, allowed):
    """regression, unconfirmed: the highest level; published nowhere, but see the next test for its limit at N = 1."""
    with pytest.raises(PlannerError, match=rf"device\.lines: line 2 = {level_dbc:g} dBc .*limiter ×{times}.*{allowed}"):
        spectrum(device("limiter", lines_dbc={2: level_dbc}), times, 8)


def test_highest_line_2_of_a_limiter_without_multiplication_is_that_of_a_pulse():
    """independent: for b far beyond g the limiter is exponential, 1 − 2·e^(−2(gx + b)): F_2/F_1 = I_2(2g)/I_1(2g)."""
    limit_dbc = 20 * math.log10(ive(2, 20.0) / ive(1, 20.0))
    assert limiter_bias(steepness=10.0, line_2_dbc=limit_dbc - 0.05, times=1, weakest_db=40.0) > 9
    with pytest.raises(PlannerError):
        limiter_bias(steepness=10.0, line_2_dbc=limit_dbc, times=1, weakest_db=40.0)


@pytest.mark.parametrize(
    "kind, options, message",
    [
        ("single-ended", {"half_angle_rad": 0.0}, r"device\.half_angle = 0 deg: allowed is above 0 and below 180 deg"),
        ("push-push", {"half_angle_rad": math.pi}, r"device\.half_angle = 180 deg"),
        ("push-pull", {"half_angle_rad": math.nan}, r"device\.half_angle = nan deg"),
        ("push-pull", {"balance_db": -1.0}, r"device\.balance = -1 dB: allowed is 0 dB or more"),
        ("push-push", {"balance_db": math.nan}, r"device\.balance = nan dB"),
        ("limiter", {"steepness": 0.0}, r"device\.steepness = 0: allowed is above 0 and up to 1000"),
        ("limiter", {"steepness": 1001.0}, r"device\.steepness = 1001"),
    ],
)
def test_values_out_of_range_are_refused(kind, options, message):
    for function in (lambda d: spectrum(d, 2, 5), lambda d: waveform(d, 2)):
        with pytest.raises(PlannerError, match=message):
            function(device(kind, **options))


def test_factor_below_one_is_refused():
    with pytest.raises(PlannerError, match="times = 0: allowed is a whole number from 1"):
        spectrum(device("power-law"), 0, 5)


def test_transform_that_does_not_stand_still_says_so():
    with pytest.raises(ConvergenceError, match=r"device\.steepness = 100000.*allowed is up to 1000") as caught:
        limiter_coefficients(steepness=1e5, bias=0.0, m_max=5)
    assert caught.value.points == 2**20
    assert caught.value.change > 1e-9
