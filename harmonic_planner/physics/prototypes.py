"""Butterworth and Chebyshev lossy prototypes, and the bandpass mapping.

A prototype is the low-pass of cutoff 1 rad/s that a bandpass of centre f0 and fractional bandwidth Δ is mapped from by
Ω = |f/f0 − f0/f|/Δ. The Butterworth bandwidth is the 3 dB one, the Chebyshev one the ripple bandwidth. Resonators of
equal unloaded Q shift the argument: the response is exactly |H(jΩ + σ)| with σ = 1/(Δ·Q_u).

References
----------
G. L. Matthaei, L. Young, E. M. T. Jones, *Microwave Filters, Impedance-Matching Networks, and Coupling Structures*,
McGraw-Hill 1964: §2.13 and §4.13 (uniform dissipation as a shift of s), §4.05 (element values), §8.04 (mapping).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.model import Family, PlannerError

FloatArray = NDArray[np.float64]
DB_PER_LN: Final = 10.0 / math.log(10.0)
"""dB per unit of the natural logarithm of a power ratio, 4.343."""


@dataclass(frozen=True)
class Prototype:
    """A family, an order and, for Chebyshev, a ripple.

    Parameters
    ----------
    family
        ``butterworth`` or ``chebyshev``.
    order
        Number of resonators, 1 or more.
    ripple_db
        Ripple of the Chebyshev family [dB], above 0; kept as 0 for Butterworth, which has none.

    Raises
    ------
    PlannerError
        For an unknown family, an order below 1, or a Chebyshev ripple that is not above 0.
    """

    family: Family
    order: int
    ripple_db: float = 0.0

    def __post_init__(self) -> None:
        if self.family not in ("butterworth", "chebyshev"):
            raise PlannerError(f"family = {self.family!r}: allowed are 'butterworth' and 'chebyshev'")
        if self.order < 1:
            raise PlannerError(f"order = {self.order}: a filter has at least 1 resonator")
        if self.family == "butterworth":
            object.__setattr__(self, "ripple_db", 0.0)
        elif not (math.isfinite(self.ripple_db) and self.ripple_db > 0.0):
            raise PlannerError(f"ripple = {self.ripple_db} dB: a Chebyshev ripple is above 0 dB")

    @property
    def epsilon(self) -> float:
        """Ripple factor ε: |H|² = 1/(1 + ε²·T_n²); 1 for Butterworth, whose edge is the 3 dB point."""
        if self.family == "butterworth":
            return 1.0
        return math.sqrt(math.expm1(self.ripple_db / DB_PER_LN))

    @property
    def name(self) -> str:
        """The prototype in words: ``Chebyshev 0.1 dB, order 3``."""
        if self.family == "butterworth":
            return f"Butterworth, order {self.order}"
        return f"Chebyshev {self.ripple_db:g} dB, order {self.order}"

    def g_values(self) -> FloatArray:
        """Return g0 … g_(n+1) by the closed recursions.

        Returns
        -------
        (order + 2,) float
            g0 = 1, the n element values, and the load g_(n+1), which is 1 except for a Chebyshev of even order.

        References
        ----------
        Matthaei, Young & Jones 1964, §4.05, eqs. 4.05-1 and 4.05-2. Their 17.37 is 40/ln 10, used in full here.
        """
        n = self.order
        g = np.ones(n + 2)
        a = np.sin((2.0 * np.arange(1, n + 1) - 1.0) * math.pi / (2 * n))
        if self.family == "butterworth":
            g[1:-1] = 2.0 * a
            return g
        quarter = self.ripple_db / (4.0 * DB_PER_LN)
        beta = -math.log(math.tanh(quarter))
        gamma = math.sinh(beta / (2 * n))
        b = gamma**2 + np.sin(np.arange(1, n + 1) * math.pi / n) ** 2
        g[1] = 2.0 * a[0] / gamma
        for k in range(1, n):
            g[k + 1] = 4.0 * a[k - 1] * a[k] / (b[k - 1] * g[k])
        if n % 2 == 0:
            g[-1] = 1.0 / math.tanh(beta / 4.0) ** 2
        return g

    def poles(self) -> NDArray[np.complex128]:
        """Return the n poles [rad/s], from the largest imaginary part down."""
        n = self.order
        angle = (2.0 * np.arange(1, n + 1) - 1.0) * math.pi / (2 * n)
        if self.family == "butterworth":
            return -np.sin(angle) + 1j * np.cos(angle)
        v = math.asinh(1.0 / self.epsilon) / n
        return -math.sinh(v) * np.sin(angle) + 1j * math.cosh(v) * np.cos(angle)

    def attenuation_db(self, omega: ArrayLike, sigma: ArrayLike = 0.0) -> FloatArray:
        """Return −20 log10 |H(jΩ + σ)|.

        Parameters
        ----------
        omega
            Ω [rad/s], any shape, either sign.
        sigma
            Dissipation 1/(Δ·Q_u), 0 or more; broadcast against `omega`.

        Returns
        -------
        float array
            Attenuation [dB] in the broadcast shape. Without dissipation it is 0 at its least, so that a Chebyshev of
            even order has A(0) = ripple.

        Notes
        -----
        Without dissipation the closed forms 1 + Ω^2n and 1 + ε²·T_n²(Ω) go through ``log1p``, so that a ripple of
        1e-9 dB keeps its digits; with it, the distances to the poles are multiplied as a sum of logarithms.
        """
        w = np.abs(np.asarray(omega, dtype=np.float64))
        s = np.asarray(sigma, dtype=np.float64)
        if not np.any(s):
            power = self._lossless_excess(w)
            return DB_PER_LN * np.log1p(power) + np.zeros_like(s)
        total = np.full(np.broadcast_shapes(w.shape, s.shape), 2.0 * self.log_scale)
        for pole in self.poles():
            total += np.log((s - pole.real) ** 2 + (w - pole.imag) ** 2)
        return DB_PER_LN * total

    def midband_loss_db(self, sigma: ArrayLike) -> FloatArray:
        """Return the attenuation at the centre [dB] for the dissipation `sigma` = 1/(Δ·Q_u)."""
        return self.attenuation_db(0.0, sigma)

    def inverse(self, attenuation_db: ArrayLike) -> FloatArray:
        """Return the largest Ω at which the lossless prototype has this attenuation.

        Parameters
        ----------
        attenuation_db
            Attenuation [dB], 0 or more, any shape.

        Returns
        -------
        float array
            Ω [rad/s]. Below a Chebyshev's ripple it is the outermost of the points inside the band.
        """
        excess = np.expm1(np.asarray(attenuation_db, dtype=np.float64) / DB_PER_LN)
        if self.family == "butterworth":
            return np.asarray(excess ** (1.0 / (2 * self.order)))
        ratio = np.sqrt(excess) / self.epsilon
        outside = np.cosh(np.arccosh(np.maximum(ratio, 1.0)) / self.order)
        inside = np.cos(np.arccos(np.minimum(ratio, 1.0)) / self.order)
        return np.where(ratio >= 1.0, outside, inside)

    def _lossless_excess(self, omega: FloatArray) -> FloatArray:
        """Return |H|^-2 − 1 without dissipation, for Ω ≥ 0."""
        if self.family == "butterworth":
            return np.asarray(omega ** (2 * self.order))
        outside = np.cosh(self.order * np.arccosh(np.maximum(omega, 1.0)))
        inside = np.cos(self.order * np.arccos(np.minimum(omega, 1.0)))
        return np.asarray((self.epsilon * np.where(omega > 1.0, outside, inside)) ** 2)

    @property
    def log_scale(self) -> float:
        """Return ln K with 1/H(s) = K·Π(s − p), the least lossless attenuation being 0 dB."""
        return 0.0 if self.family == "butterworth" else math.log(self.epsilon) + (self.order - 1) * math.log(2.0)


def bandpass_omega(frequency_hz: ArrayLike, *, centre_hz: float, bandwidth: float) -> FloatArray:
    """Map bandpass frequencies to the prototype's Ω = |f/f0 − f0/f|/Δ.

    Parameters
    ----------
    frequency_hz
        Frequencies above 0 [Hz], any shape.
    centre_hz
        f0 [Hz].
    bandwidth
        Δ, as a fraction of the centre.

    Returns
    -------
    float array
        Ω [rad/s].

    References
    ----------
    Matthaei, Young & Jones 1964, §8.04 (lumped resonators).
    """
    ratio = np.asarray(frequency_hz, dtype=np.float64) / centre_hz
    return np.asarray(np.abs(ratio - 1.0 / ratio) / bandwidth)


def cohn_midband_loss_db(prototype: Prototype, *, bandwidth: float, unloaded_q: float) -> float:
    """Return Cohn's midband loss 4.343·Σg/(Δ·Q_u).

    Parameters
    ----------
    prototype
        The prototype whose g1 … gn are summed.
    bandwidth
        Δ, as a fraction of the centre.
    unloaded_q
        Unloaded Q of every resonator.

    Returns
    -------
    float
        Loss at the centre [dB], to first order in 1/Q_u; the exact value is `Prototype.midband_loss_db`.

    References
    ----------
    S. B. Cohn, "Dissipation Loss in Multiple-Coupled-Resonator Filters", Proc. IRE 47 (1959), pp. 1342-1348.
    """
    g_sum = float(prototype.g_values()[1:-1].sum())
    return DB_PER_LN * g_sum / (bandwidth * unloaded_q)
