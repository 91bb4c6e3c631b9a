"""An amplifier that saturates, seen at its envelope: lines in, lines out, with AM-to-PM.

With z(t) = Σ x_j e^(ijt) the comb at its input, all lines on the positive side, the output is z·g(|z|)·e^(iφ(|z|)):

    g = (1 + u^2p)^(−1/2p),   u = |z| over the input at which the straight line of small signals meets saturation

p sets how round the knee is; the output is 3.01/p dB below the meeting point where u = 1. The envelope makes no
harmonics of the carrier (their levels are given by the user); one-sided residuals come out on both sides of it: with
a = 1/(1 + u^2p), the AM slope, and K = 0.1516·k for k deg/dB, own side |1 + a + jK|/2, image side |1 − a − jK|/2.

References
----------
C. Rapp, "Effects of HPA-nonlinearity on a 4-DPSK/OFDM-signal for a digital sound broadcasting system", Proc. 2nd
European Conference on Satellite Communications, 1991, ESA SP-332 (the envelope's curve).
N. M. Blachman, "Band-pass nonlinearities", IEEE Trans. Information Theory 10, 1964 (nonlinearity of the envelope).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy import fft

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

SMOOTHNESS = 3.0
"""p: 1 dB below the meeting point, and 2 to 3 are usual for solid-state amplifiers (memory)."""
POINTS_PER_LINE = 8
"""Samples of one period per line that is kept."""
_FAINTEST = 1e-3
"""AM-to-PM turns the phase no further below this share of the carrier's envelope: a zero has no phase."""


def envelope_gain(level: Array | float, *, smoothness: float = SMOOTHNESS) -> Array:
    """Return the gain relative to small signals.

    Parameters
    ----------
    level
        u, envelope relative to the input at which the straight line meets saturation.
    smoothness
        p.

    Returns
    -------
    ndarray
        (1 + u^2p)^(−1/2p), shape of `level`.
    """
    return np.asarray((1 + np.asarray(level, dtype=float) ** (2 * smoothness)) ** (-0.5 / smoothness))


def am_slope(level: float, *, smoothness: float = SMOOTHNESS) -> float:
    """Return a = d ln output / d ln input at envelope `level`: 1 for small signals, 0 in saturation."""
    return float(1 / (1 + level ** (2 * smoothness)))


def limited(
    lines: Complex, *, drive_db: float | Array, am_to_pm_deg_per_db: float = 0.0, smoothness: float = SMOOTHNESS
) -> Complex:
    """Return the lines behind an amplifier of gain 1 for small signals.

    Parameters
    ----------
    lines : (..., count) complex
        Amplitude of line j at index j − 1, relative to the carrier.
    drive_db : float or (...) float
        By how much the carrier alone would exceed saturation if the amplifier were linear [dB]; −inf is linear.
    am_to_pm_deg_per_db
        Phase per change of the input envelope from the carrier's own [deg/dB].
    smoothness
        p.

    Returns
    -------
    (..., count) complex
        Lines that end below zero frequency are turned up, as in every real signal; the steady part is dropped.

    Notes
    -----
    Lines spread over more than an octave are taken through one envelope all the same: what falls on a harmonic band
    is as good as the envelope model there.
    """
    count = lines.shape[-1]
    n = int(fft.next_fast_len(POINTS_PER_LINE * count))
    padded = np.zeros((*lines.shape[:-1], n), dtype=np.complex128)
    padded[..., 1 : count + 1] = lines
    z = fft.ifft(padded) * n
    size = np.abs(z)
    factor = np.asarray(10 ** (np.asarray(drive_db, dtype=float) / 20))[..., np.newaxis]
    out = z * envelope_gain(factor * size, smoothness=smoothness)
    if am_to_pm_deg_per_db:
        turned = math.radians(am_to_pm_deg_per_db) * 20 * np.log10(np.maximum(size, _FAINTEST))
        out = out * np.exp(1j * turned)
    both = fft.fft(out) / n
    return np.asarray(both[..., 1 : count + 1] + np.conj(both[..., : -count - 1 : -1]))
