"""Cohn's midband loss against the exact dissipated response.

Source: S. B. Cohn, "Dissipation Loss in Multiple-Coupled-Resonator Filters", Proc. IRE 47 (1959), pp. 1342-1348: the
loss at the centre is 4.343·Σg/(Δ·Q_u) dB, and the band edge loses more (published).

Common practice says "within 2 % up to 5 dB of loss". Measured here, that holds for Butterworth from order 3, for
Chebyshev 0.01 dB from order 3, and for odd Chebyshev orders from 5 up to 0.2 dB ripple. The formula always says too
much; elsewhere by

* order 1, every family: 21.0 % at 5 dB, since the loss is then 20 log10(1 + σ·g1/2);
* order 2: 3.7 % at 5 dB for Butterworth, 3.0 % for Chebyshev 0.01 dB;
* order 3: 2.2 % at 5 dB for Chebyshev 0.1 dB, 3.0 % for 0.2 dB; odd orders at 0.5 dB: 4.9 % (n = 3) to 2.8 % (n = 9);
* even Chebyshev orders at every loss, since their centre is a point of mismatch: 2.1 % at 0.1 dB ripple, 4.2 % at
  0.2 dB, 10.2 % at 0.5 dB (order 8, small loss).
"""

from __future__ import annotations

import numpy as np
import pytest

from harmonic_planner.physics.prototypes import Prototype, cohn_midband_loss_db

pytestmark = pytest.mark.published

CLOSE = (
    [Prototype("butterworth", n) for n in range(3, 10)]
    + [Prototype("chebyshev", n, 0.01) for n in range(3, 10)]
    + [Prototype("chebyshev", n, ripple) for n in (5, 7, 9) for ripple in (0.1, 0.2)]
)


def excess(prototype: Prototype, cohn_db: float) -> float:
    """Return by how much, as a share, the exact extra loss exceeds Cohn's, where Cohn's is `cohn_db`."""
    bandwidth = cohn_midband_loss_db(prototype, bandwidth=1.0, unloaded_q=100.0) / cohn_db
    assert cohn_midband_loss_db(prototype, bandwidth=bandwidth, unloaded_q=100.0) == pytest.approx(cohn_db)
    extra = prototype.midband_loss_db(1.0 / (bandwidth * 100.0)) - prototype.midband_loss_db(0.0)
    return float(extra) / cohn_db - 1.0


@pytest.mark.parametrize("prototype", CLOSE, ids=lambda p: p.name)
@pytest.mark.parametrize("cohn_db", [0.1, 0.5, 1.0, 2.0, 3.0, 5.0])
def test_within_2_percent_up_to_5_db(prototype, cohn_db):
    assert abs(excess(prototype, cohn_db)) <= 0.02


@pytest.mark.parametrize(
    ("prototype", "cohn_db", "share"),
    [
        (Prototype("butterworth", 1), 5.0, -0.210),
        (Prototype("butterworth", 2), 5.0, -0.037),
        (Prototype("chebyshev", 2, 0.01), 5.0, -0.030),
        (Prototype("chebyshev", 3, 0.1), 5.0, -0.022),
        (Prototype("chebyshev", 3, 0.2), 5.0, -0.030),
        (Prototype("chebyshev", 3, 0.5), 5.0, -0.049),
        (Prototype("chebyshev", 9, 0.5), 5.0, -0.028),
        (Prototype("chebyshev", 8, 0.1), 1.0, -0.021),
        (Prototype("chebyshev", 8, 0.2), 1.0, -0.042),
        (Prototype("chebyshev", 8, 0.5), 1.0, -0.102),
    ],
    ids=lambda v: v.name if isinstance(v, Prototype) else str(v),
)
def test_the_discrepancies_have_the_sizes_written_above(prototype, cohn_db, share):
    """Regression, unconfirmed: the sizes are this project's own measurement."""
    assert excess(prototype, cohn_db) == pytest.approx(share, abs=6e-4)


@pytest.mark.parametrize("prototype", CLOSE, ids=lambda p: p.name)
@pytest.mark.parametrize("sigma", [0.001, 0.01, 0.05, 0.2])
def test_the_band_edge_loses_more_than_the_centre(prototype, sigma):
    """Loss beyond the lossless response, at the band edge and at the centre."""
    omega = np.array([0.0, 1.0])
    centre, edge = prototype.attenuation_db(omega, sigma) - prototype.attenuation_db(omega)
    assert edge > centre
