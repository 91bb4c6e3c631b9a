"""A saturating amplifier against its own formula, conservation in the small, and sidebands written out again."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.physics.envelope import SMOOTHNESS, am_slope, envelope_gain, limited

COUNT, CARRIER = 24, 12


def one_sided(residual: complex, offset: int = 2) -> np.ndarray:
    lines = np.zeros(COUNT, dtype=complex)
    lines[CARRIER - 1], lines[CARRIER - 1 + offset] = 1.0, residual
    return lines


def test_the_knee() -> None:
    """published: C. Rapp 1991: output 1/(1 + 1)^(1/2p) where the two straight lines meet: 3.01/p dB below."""
    for p in (1.0, 2.0, SMOOTHNESS, 10.0):
        assert -20 * math.log10(float(envelope_gain(1.0, smoothness=p))) == pytest.approx(3.0103 / p, abs=1e-4)


@settings(max_examples=50, deadline=None)
@given(st.floats(-40.0, 40.0), st.floats(1.0, 8.0))
def test_a_carrier_alone_follows_the_curve(drive_db: float, smoothness: float) -> None:
    """independent: output = drive/(1 + drive^2p)^(1/2p) of saturation; never above either straight line."""
    out = limited(one_sided(0.0), drive_db=drive_db, smoothness=smoothness)
    u = 10 ** (drive_db / 20)
    assert abs(out[CARRIER - 1]) * u == pytest.approx(u / (1 + u ** (2 * smoothness)) ** (0.5 / smoothness))
    assert abs(out[CARRIER - 1]) * u <= min(1.0, u) * (1 + 1e-12)
    assert np.abs(np.delete(out, CARRIER - 1)).max() < 1e-12


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 10_000))
def test_without_saturation_nothing_changes(seed: int) -> None:
    rng = np.random.default_rng(seed)
    lines = rng.normal(size=(3, COUNT)) + 1j * rng.normal(size=(3, COUNT))
    assert limited(lines, drive_db=-np.inf) == pytest.approx(lines, abs=1e-12)


@settings(max_examples=40, deadline=None)
@given(st.floats(-20.0, 20.0), st.floats(0.0, 8.0), st.floats(0.0, 2 * math.pi))
def test_sidebands_of_a_small_residual(drive_db: float, am_to_pm: float, phase: float) -> None:
    """independent: own side |1 + a + jK|/2, image |1 − a − jK|/2, K = 0.1516·k, a the curve's slope by difference."""

    def out_of(u: float) -> float:
        return u / (1 + u ** (2 * SMOOTHNESS)) ** (0.5 / SMOOTHNESS)

    u, h = 10 ** (drive_db / 20), 1e-6
    a = (math.log(out_of(u * (1 + h))) - math.log(out_of(u * (1 - h)))) / (2 * h)
    K = math.radians(am_to_pm) * 20 / math.log(10)
    assert pytest.approx(0.1516 * am_to_pm, rel=1e-3, abs=1e-12) == K
    assert am_slope(u) == pytest.approx(a, abs=1e-6)
    r = 1e-4
    out = limited(one_sided(r * np.exp(1j * phase)), drive_db=drive_db, am_to_pm_deg_per_db=am_to_pm)
    out /= abs(out[CARRIER - 1])
    assert abs(out[CARRIER + 1]) / r == pytest.approx(abs(1 + a + 1j * K) / 2, abs=2e-3)
    assert abs(out[CARRIER - 3]) / r == pytest.approx(abs(1 - a - 1j * K) / 2, abs=2e-3)


def test_lines_below_zero_frequency_are_turned_up() -> None:
    """independent: carrier 2, residual 7: the image 2 − 5 = −3 is line 3."""
    lines = np.zeros(COUNT, dtype=complex)
    lines[1], lines[6] = 1.0, 1e-4
    out = limited(lines, drive_db=40.0)
    assert 20 * np.log10(np.abs(out[[6, 2]]) / np.abs(out[1])) == pytest.approx(-80 - 6.02, abs=0.01)


def test_every_row_has_its_own_drive() -> None:
    rows = np.stack([one_sided(0.01), one_sided(0.02)])
    together = limited(rows, drive_db=np.array([0.0, 10.0]))
    for row, drive, got in zip(rows, (0.0, 10.0), together, strict=True):
        assert got == pytest.approx(limited(row, drive_db=drive))
