"""Sidebands of full-wave and limiting devices with the whole comb driven through one period."""

from __future__ import annotations

import math

import numpy as np
import pytest

from harmonic_planner.model import Device
from harmonic_planner.physics.envelope import limited
from harmonic_planner.physics.one_period import driven

pytestmark = pytest.mark.published

K0, OFFSET, RESIDUAL = 16, 3, 1e-3


def sidebands_db(device: Device, times: int) -> tuple[float, float]:
    """Return own and image side relative to the wanted line, per unit of a one-sided residual [dB]."""
    lines = np.zeros(K0 * (times + 2), dtype=complex)
    lines[K0 - 1], lines[K0 + OFFSET - 1] = 1.0, RESIDUAL * np.exp(0.7j)
    out = np.abs(driven(device, times, lines, carrier_index=K0)) / RESIDUAL
    wanted = out[times * K0 - 1] * RESIDUAL
    return tuple(20 * math.log10(out[times * K0 + side * OFFSET - 1] / wanted) for side in (1, -1))  # type: ignore[return-value]


def test_full_wave_doubler() -> None:
    """published: |cos| has 4/(3π) at line 2, its slope sgn(cos) has 4/π and 4/(3π) at lines 1 and 3 (handbook series).

    Half of each over the wanted line: 3/2 and 1/2, +3.52 and −6.02 dB.
    """
    device = Device("push-push", -10.0, half_angle_rad=math.pi / 2, balance_db=math.inf)
    assert sidebands_db(device, 2) == pytest.approx((3.52, -6.02), abs=0.01)


@pytest.mark.parametrize("times", [1, 3, 5])
def test_hard_limiter(times: int) -> None:
    """published: a limiter turns a one-sided residual into two sidebands, 6 dB down each; ×N raises them by N.

    J. J. Jones, "Hard-limiting of two signals in random noise", IEEE Trans. Information Theory 9, 1963: the weaker of
    two signals is suppressed by 6 dB (memory). 20 log10(N/2) for N = 1, 3, 5: −6.02, 3.52, 7.96 dB.
    """
    device = Device("limiter", -10.0, steepness=300.0)
    assert sidebands_db(device, times) == pytest.approx((20 * math.log10(times / 2),) * 2, abs=0.03)


@pytest.mark.parametrize("offset", [1, 3, -5])
def test_limiting_amplifier(offset: int) -> None:
    """published: as above, for the envelope of an amplifier far in saturation."""
    lines = np.zeros(32, dtype=complex)
    lines[K0 - 1], lines[K0 + offset - 1] = 1.0, RESIDUAL
    out = np.abs(limited(lines, drive_db=30.0))
    split = 20 * np.log10(out[[K0 + offset - 1, K0 - offset - 1]] / out[K0 - 1] / RESIDUAL)
    assert split == pytest.approx(-6.02, abs=0.01)


@pytest.mark.parametrize("times, own_db", [(2, 6.02), (3, 9.54), (5, 13.98)])
def test_power_law(times: int, own_db: float) -> None:
    """published: cos N(φ + δ): pure phase and AM of a = N: 20 log10 N on the own side, no image."""
    own, image = sidebands_db(Device("power-law", 0.0), times)
    assert own == pytest.approx(own_db, abs=0.01)
    assert image < own - 50
