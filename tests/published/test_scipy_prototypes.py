"""Ideal responses and least orders against scipy.signal (independent).

Sources: scipy.signal.buttap, cheb1ap, lp2bp_zpk, freqs_zpk (analog prototypes, the bandpass transformation and its
evaluation), and buttord, cheb1ord (least order of a symmetrical specification).
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import signal

from harmonic_planner.filters.windows import Task, least_order, scan, solve
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega

CASES = [Prototype("butterworth", n) for n in range(1, 10)] + [
    Prototype("chebyshev", n, ripple) for n in range(1, 10) for ripple in (0.01, 0.1, 0.5)
]


def scipy_prototype(prototype: Prototype):
    if prototype.family == "butterworth":
        return signal.buttap(prototype.order)
    return signal.cheb1ap(prototype.order, prototype.ripple_db)


@pytest.mark.parametrize("prototype", CASES, ids=lambda p: p.name)
def test_low_pass_response(prototype):
    omega = np.linspace(0.0, 12.0, 241)
    _, h = signal.freqs_zpk(*scipy_prototype(prototype), worN=omega)
    assert prototype.attenuation_db(omega) == pytest.approx(-20.0 * np.log10(np.abs(h)), abs=1e-9)


@pytest.mark.parametrize("prototype", CASES, ids=lambda p: p.name)
@pytest.mark.parametrize("sigma", [0.01, 0.3])
def test_dissipated_low_pass_response(prototype, sigma):
    """A shift of s by σ is a shift of every pole by −σ."""
    omega = np.linspace(0.0, 12.0, 241)
    zeros, poles, gain = scipy_prototype(prototype)
    _, h = signal.freqs_zpk(zeros, poles - sigma, gain, worN=omega)
    assert prototype.attenuation_db(omega, sigma) == pytest.approx(-20.0 * np.log10(np.abs(h)), abs=1e-9)


@pytest.mark.parametrize("prototype", CASES, ids=lambda p: p.name)
@pytest.mark.parametrize("bandwidth", [0.05, 0.2, 0.6])
def test_bandpass_response(prototype, bandwidth):
    """Frequencies in units of the centre; lp2bp takes the bandwidth in rad/s."""
    frequency = np.geomspace(0.2, 5.0, 160)
    zeros, poles, gain = signal.lp2bp_zpk(*scipy_prototype(prototype), wo=1.0, bw=bandwidth)
    _, h = signal.freqs_zpk(zeros, poles, gain, worN=frequency)
    ours = prototype.attenuation_db(bandpass_omega(frequency * 600e6, centre_hz=600e6, bandwidth=bandwidth))
    expected = -20.0 * np.log10(np.abs(h))
    assert ours == pytest.approx(expected, abs=1e-9, rel=1e-9)


def symmetrical(*, half_band: float, half_stop: float, rejection_db: float, flatness_db: float) -> Task:
    """A passband and a line on either side, symmetrical in ln f about 1 GHz; no loss, no drift, no floor."""
    pass_ratio, stop_ratio = math.exp(half_band), math.exp(half_stop)
    lines = 1e9 * np.array([1.0 / stop_ratio, stop_ratio])
    return Task(
        passband_hz=(1e9 / pass_ratio, 1e9 * pass_ratio),
        line_low_hz=lines,
        line_high_hz=lines,
        rejection_db=np.full(2, rejection_db),
        flatness_db=flatness_db,
        loss_db=6.0,
        drift=0.0,
        unloaded_q=math.inf,
        floor=0.0,
    )


@settings(max_examples=60, deadline=None)
@given(
    half_band=st.floats(0.005, 0.05),
    selectivity=st.floats(1.5, 20.0),
    rejection_db=st.floats(10.0, 90.0),
    flatness_db=st.floats(0.05, 1.0),
)
def test_least_butterworth_order(half_band, selectivity, rejection_db, flatness_db):
    """The carrier lies at most `flatness` down at its edge, so that A at the line is rejection + flatness."""
    half_stop = math.asinh(selectivity * math.sinh(half_band))
    order, _ = signal.buttord(1.0, selectivity, flatness_db, rejection_db + flatness_db, analog=True)
    task = symmetrical(half_band=half_band, half_stop=half_stop, rejection_db=rejection_db, flatness_db=flatness_db)
    best = least_order(scan(task, families=("butterworth",), ripple_db=0.1, max_order=12))
    assert (best.prototype.order if best else None) == (order if order <= 12 else None)


@settings(max_examples=60, deadline=None)
@given(
    order=st.integers(1, 9),
    half_band=st.floats(0.005, 0.05),
    selectivity=st.floats(1.2, 15.0),
    rejection_db=st.floats(10.0, 90.0),
    ripple_db=st.floats(0.01, 0.5),
)
def test_chebyshev_orders(order, half_band, selectivity, rejection_db, ripple_db):
    """Flatness = ripple; the centre of an even order lies at its ripple, which its carrier loss contains."""
    half_stop = math.asinh(selectivity * math.sinh(half_band))
    task = symmetrical(half_band=half_band, half_stop=half_stop, rejection_db=rejection_db, flatness_db=ripple_db)
    stop_db = rejection_db + ripple_db * (2 if order % 2 == 0 else 1)
    least, _ = signal.cheb1ord(1.0, selectivity, ripple_db, stop_db, analog=True)
    assert solve(Prototype("chebyshev", order, ripple_db), task).feasible == (order >= least)
