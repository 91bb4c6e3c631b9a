"""A driven device against closed series, plain sampling on a fine grid written out again, and invariants."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.model import Device
from harmonic_planner.physics.one_period import driven, lines_of, period_points, sampled
from harmonic_planner.physics.waveforms import bias_of, spectrum

FOLDED = 1e-6
"""What folding of lines beyond those kept may leave, relative to the wanted line."""


def device(kind: str, angle_deg: float = 90.0, **options: object) -> Device:
    return Device(kind, -10.0, half_angle_rad=math.radians(angle_deg), **options)  # type: ignore[arg-type]


CASES = {
    "single-ended 60": (device("single-ended", 60.0), 2),
    "single-ended 40": (device("single-ended", 40.0), 3),
    "single-ended 20": (device("single-ended", 20.0), 3),
    "single-ended 120": (device("single-ended", 120.0), 2),
    "push-push 75": (device("push-push", 75.0), 2),
    "push-push 90, perfect": (device("push-push", balance_db=math.inf), 2),
    "push-push 70, 10 dB": (device("push-push", 70.0, balance_db=10.0), 2),
    "push-pull 50": (device("push-pull", 50.0), 3),
    "limiter 3": (device("limiter", steepness=3.0), 3),
    "limiter 10, biased": (device("limiter", lines_dbc={2: -10.0}), 3),
    "limiter 100": (device("limiter", steepness=100.0), 3),
    "power-law 2": (device("power-law"), 2),
    "power-law 9": (device("power-law"), 9),
}


def shape(any_device: Device, times: int, x: np.ndarray) -> np.ndarray:
    """Write the waveforms out again, from their definitions."""
    c = math.cos(any_device.half_angle_rad)
    unbalance = 10 ** (-any_device.balance_db / 20)
    sigma = (1 - unbalance) / (1 + unbalance)
    if any_device.type == "single-ended":
        return np.where(x > c, x - c, 0)
    if any_device.type == "push-push":
        return np.where(x > c, x - c, 0) + sigma * np.where(-x > c, -x - c, 0)
    if any_device.type == "push-pull":
        return np.where(x > c, x - c, 0) - sigma * np.where(-x > c, -x - c, 0)
    if any_device.type == "limiter":
        return np.tanh(any_device.steepness * x + bias_of(any_device, times))
    previous, current = np.ones_like(x), x
    for _ in range(times - 1):
        previous, current = current, 2 * x * current - previous
    return current


def comb(rng: np.random.Generator, count: int, carrier_index: int, level_db: float) -> np.ndarray:
    """Return a carrier of amplitude 1 and ten lines at random phases that sum to `level_db`, weaker to the far end."""
    lines = (rng.normal(size=count) + 1j * rng.normal(size=count)) / np.arange(1, count + 1)
    lines[rng.permutation(count)[10:]] = 0
    lines[carrier_index - 1] = 0
    lines *= 10 ** (level_db / 20) / np.abs(lines).sum()
    lines[carrier_index - 1] = 1
    return lines


@pytest.mark.parametrize("name", CASES)
@pytest.mark.parametrize("carrier_index", [1, 6, 48])
def test_the_carrier_alone_gives_the_closed_series(name: str, carrier_index: int) -> None:
    """independent: Fourier coefficients in closed form, or by a transform of one carrier period."""
    any_device, times = CASES[name]
    count = 8 * times * carrier_index
    lines = np.zeros(count, dtype=complex)
    lines[carrier_index - 1] = 1.0
    series = 2 * spectrum(any_device, times, count // carrier_index).F
    expected = np.zeros(count)
    expected[carrier_index - 1 :: carrier_index] = series[1:]
    off = np.abs(driven(any_device, times, lines, carrier_index=carrier_index) - expected)
    assert off.max() < FOLDED * abs(series[times])


@pytest.mark.parametrize("name", CASES)
@pytest.mark.parametrize("level_db", [-60.0, -30.0, -15.0])
def test_a_whole_comb_against_fine_sampling(name: str, level_db: float) -> None:
    """independent: 2^18 samples of one period; their own folding is below 1e-7 of the wanted line here."""
    any_device, times = CASES[name]
    rng = np.random.default_rng(5)
    carrier_index, count, fine = 8, 8 * times * 4, 2**18
    lines = comb(rng, count, carrier_index, level_db)
    t = 2 * np.pi * np.arange(fine) / fine
    x = np.zeros(fine)
    for j in np.flatnonzero(lines):
        x += np.abs(lines[j]) * np.cos((j + 1) * t + np.angle(lines[j]))
    expected = np.fft.rfft(shape(any_device, times, x))[1 : count + 1] * 2 / fine
    got = driven(any_device, times, lines, carrier_index=carrier_index)
    assert np.abs(got - expected).max() < FOLDED * np.abs(expected[carrier_index * times - 1])


@pytest.mark.parametrize("name", CASES)
def test_more_samples_change_nothing(name: str) -> None:
    any_device, times = CASES[name]
    carrier_index, count = 24, 24 * times * 4
    lines = comb(np.random.default_rng(6), count, carrier_index, -20.0)
    n = period_points(any_device, times, carrier_index=carrier_index, count=count)
    once = driven(any_device, times, lines, carrier_index=carrier_index)
    twice = driven(any_device, times, lines, carrier_index=carrier_index, points=2 * n)
    assert np.abs(once - twice).max() < FOLDED * np.abs(twice[carrier_index * times - 1])


@pytest.mark.parametrize("name", ["single-ended 60", "push-push 75", "push-pull 50"])
def test_plain_samples_of_a_corner_would_not_do(name: str) -> None:
    """independent: on the same grid, sampled corners fold back some 1e-4 and more of the wanted line."""
    any_device, times = CASES[name]
    carrier_index, count = 48, 48 * times * 4
    lines = comb(np.random.default_rng(7), count, carrier_index, -30.0)
    n = period_points(any_device, times, carrier_index=carrier_index, count=count)
    plain = lines_of(shape(any_device, times, sampled(lines, n)), count)
    off = np.abs(driven(any_device, times, lines, carrier_index=carrier_index) - plain).max()
    assert off > 100 * FOLDED * np.abs(plain[carrier_index * times - 1])


def test_rows_are_independent_of_each_other() -> None:
    any_device, times = CASES["push-push 70, 10 dB"]
    rng = np.random.default_rng(8)
    rows = np.stack([comb(rng, 96, 12, -15.0) for _ in range(6)]).reshape(2, 3, 96)
    together = driven(any_device, times, rows, carrier_index=12)
    assert together.shape == rows.shape
    for i in range(2):
        for j in range(3):
            alone = driven(any_device, times, rows[i, j], carrier_index=12)
            assert together[i, j] == pytest.approx(alone, abs=1e-12)


def test_a_device_that_never_or_always_conducts() -> None:
    """independent: a comb that stays below the corner gives nothing; one that stays above comes out as it is."""
    lines = np.full(8, 0.01, dtype=complex)
    assert np.abs(driven(device("single-ended", 60.0), 2, lines, carrier_index=1)).max() == 0
    assert driven(device("single-ended", 120.0), 2, lines, carrier_index=1) == pytest.approx(lines, abs=1e-12)


KINDS = st.sampled_from(["single-ended 60", "push-push 75", "push-pull 50", "limiter 3", "power-law 2"])


@settings(max_examples=30, deadline=None)
@given(KINDS, st.integers(0, 10_000), st.floats(0.0, 2 * math.pi), st.floats(-60.0, -12.0))
def test_a_shift_in_time_shifts_the_output(name: str, seed: int, shift: float, level_db: float) -> None:
    any_device, times = CASES[name]
    lines = comb(np.random.default_rng(seed), 64, 8, level_db)
    turn = np.exp(1j * shift * np.arange(1, 65))
    first = driven(any_device, times, lines, carrier_index=8)
    second = driven(any_device, times, lines * turn, carrier_index=8)
    assert np.abs(second - first * turn).max() < FOLDED * np.abs(first[8 * times - 1])


@settings(max_examples=30, deadline=None)
@given(st.sampled_from(["push-push", "push-pull"]), st.integers(0, 10_000), st.floats(30.0, 120.0))
def test_perfect_balance_is_even_or_odd(kind: str, seed: int, angle_deg: float) -> None:
    """independent: push-push makes the same of −x as of x, push-pull the opposite."""
    any_device = device(kind, angle_deg, balance_db=math.inf)
    lines = comb(np.random.default_rng(seed), 48, 6, -20.0)
    sign = 1 if kind == "push-push" else -1
    first = driven(any_device, 2, lines, carrier_index=6)
    assert driven(any_device, 2, -lines, carrier_index=6) == pytest.approx(sign * first, abs=1e-8)


def test_a_steep_limiter_asks_for_more_samples() -> None:
    gentle, steep = (
        period_points(device("limiter", steepness=g), 3, carrier_index=96, count=384) for g in (10.0, 100.0)
    )
    assert 384 * 8 < gentle < steep / 5
