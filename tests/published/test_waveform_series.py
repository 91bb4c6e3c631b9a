"""Waveform series and limits printed in textbooks and papers."""

import math

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from harmonic_planner.model import Device
from harmonic_planner.physics.conversion import check_device
from harmonic_planner.physics.waveforms import clipped_spectrum, limiter_spectrum, spectrum

pytestmark = pytest.mark.published


def class_c(n, half_angle_rad):
    """I_n/I_max of a clipped cosine from the package."""
    return 2 * clipped_spectrum(half_angle_rad, n).F[n] / (1 - math.cos(half_angle_rad))


@pytest.mark.parametrize("n", range(2, 9))
@pytest.mark.parametrize("angle_deg", [15.0, 40.0, 60.0, 75.0, 100.0])
def test_class_c_coefficients(n, angle_deg):
    """published: Clarke & Hess, Communication Circuits, clipped cosine: one-sided I_n/I_max in closed form (memory)."""
    a = math.radians(angle_deg)
    closed = (
        2
        * (math.sin(n * a) * math.cos(a) - n * math.cos(n * a) * math.sin(a))
        / (math.pi * n * (n**2 - 1) * (1 - math.cos(a)))
    )
    assert class_c(n, a) == pytest.approx(closed, abs=1e-13)


@pytest.mark.parametrize("n, angle_deg, share", [(2, 60.0, 0.2757), (3, 39.9, 0.1845)])
def test_class_c_optima_at_fixed_peak_current(n, angle_deg, share):
    """published: Clarke & Hess: the best angle and I_n/I_max there, half a unit in the last digit."""
    best = minimize_scalar(lambda a: -class_c(n, a), bounds=(0.1, 1.6), method="bounded", options={"xatol": 1e-9})
    assert math.degrees(best.x) == pytest.approx(angle_deg, abs=0.05)
    assert -best.fun == pytest.approx(share, abs=0.5e-4)


def test_class_b_first_lines():
    """published: half-wave rectified cosine, 1/π + cos φ/2 + (2/π) Σ (−1)^(k+1) cos 2kφ/(4k² − 1) (handbook series)."""
    f = clipped_spectrum(math.pi / 2, 12).F
    assert f[0] == pytest.approx(1 / math.pi)
    assert 2 * f[1] == pytest.approx(1 / 2)
    k = np.arange(1, 7)
    assert 2 * f[2::2] == pytest.approx(2 / math.pi * (-1.0) ** (k + 1) / (4 * k**2 - 1), abs=1e-15)
    assert f[3::2] == pytest.approx(0, abs=1e-15)


def test_full_wave_series():
    """published: |cos φ| = 2/π + (4/π) Σ (−1)^(k+1) cos 2kφ/(4k² − 1) (handbook series)."""
    device = Device("push-push", -10.0, half_angle_rad=math.pi / 2, balance_db=math.inf)
    f = spectrum(device, 2, 20).F
    k = np.arange(1, 11)
    assert f[0] == pytest.approx(2 / math.pi)
    assert 2 * np.abs(f[2::2]) == pytest.approx(4 / math.pi / (4 * k**2 - 1), abs=1e-14)


def test_square_wave_series():
    """published: a square wave has 4/(πk) on odd k. A limiter comes near it as 1/g², so the limit is extrapolated."""
    k = np.arange(1, 16, 2)
    square = 4 / (math.pi * k) * (-1.0) ** ((k - 1) // 2)
    coarse, fine = (2 * limiter_spectrum(steepness=g, bias=0.0, m_max=15).F[1::2] for g in (500.0, 1000.0))
    assert (coarse - square) / (fine - square) == pytest.approx(4, abs=0.02)
    assert (4 * fine - coarse) / 3 == pytest.approx(square, abs=1e-8)


@pytest.mark.parametrize("times, limit_db", [(2, -6.02), (3, -9.54), (4, -12.04), (5, -13.98)])
def test_page_limit_is_where_the_warning_starts(times, limit_db):
    """published: C. H. Page, J. Res. NBS 56, 1956, RP 2664: at most 1/N² from a positive nonlinear resistance."""
    angle = math.radians(120 / times)
    below = Device("single-ended", limit_db - 0.01, half_angle_rad=angle)
    above = Device("single-ended", limit_db + 0.01, half_angle_rad=angle)
    assert check_device(below, times) == []
    (warning,) = check_device(above, times)
    assert "Page 1956" in warning
    assert f"{limit_db:.2f} dB" in warning
    for better in ("active", "reactive"):
        assert check_device(Device("single-ended", 0.0, half_angle_rad=angle, device_class=better), times) == []


def test_page_limit_holds_for_every_clipped_resistance():
    """independent: sample v = cos φ + w·cos(Nφ + ψ), i = f(v) of rising f; power out at N over power in at 1 ≤ 1/N²."""
    rng = np.random.default_rng(7)
    phase = 2 * np.pi * np.arange(4096) / 4096
    best = 0.0
    for _ in range(300):
        times, corner = int(rng.integers(2, 6)), rng.uniform(-0.9, 0.9)
        load, angle = rng.uniform(0, 1.5), rng.uniform(0, 2 * np.pi)
        harmonic = load * np.cos(times * phase + angle)
        current = np.maximum(np.cos(phase) + harmonic - corner, 0.0)
        taken = np.mean(current * np.cos(phase))
        given_back = -np.mean(current * harmonic)
        assert times**2 * given_back <= taken + 1e-9
        if taken > 0.01:
            best = max(best, times**2 * given_back / taken)
    assert best > 0.2  # the samples do reach into the region that the limit bounds
