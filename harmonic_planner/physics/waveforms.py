"""Waveforms of memoryless multipliers: Fourier coefficients of f(cos φ), f′(cos φ) and f″(cos φ).

A multiplier is a function f(x) driven by the carrier x = cos φ at its nominal drive:

===============  =====================================================================
single-ended     h(x) = max(x − cos θ, 0), θ the conduction half-angle
push-push        h(x) + σ·h(−x), even lines
push-pull        h(x) − σ·h(−x), odd lines
limiter          tanh(g·x + b), odd lines but for the bias b
power-law        T_N(x), the Chebyshev polynomial: the ideal ×N
===============  =====================================================================

Balance B [dB] sets the second half: (1 − σ)/(1 + σ) = 10^(−B/20).

The clipped shapes have a corner, so their series fall off as a power of m and a sampled transform never reaches
1e-9: they are written in closed form. The limiter is smooth: its transform is doubled until it stands still.

References
----------
K. K. Clarke, D. T. Hess, *Communication Circuits: Analysis and Design*, 1971, class-C operation (clipped cosine).
J. C. Mason, D. C. Handscomb, *Chebyshev Polynomials*, 2003, ch. 2 (derivatives of T_N).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from harmonic_planner.model import Device, DeviceType, PlannerError
from harmonic_planner.physics.limiter import MAX_STEEPNESS, limiter_bias, limiter_coefficients

Array = NDArray[np.float64]

WEAKEST_DB = 40.0
"""A wanted line further than this under the strongest line is no multiplier [dB]."""


@dataclass(frozen=True)
class Spectrum:
    """Two-sided Fourier coefficients of a waveform at nominal drive; real and even in m.

    Attributes
    ----------
    F, G, H
        Coefficients of f(cos φ), f′(cos φ), f″(cos φ), shape (m_max + 1,), index m = 0 … m_max:
        f(cos φ) = Σ F_|m| e^(jmφ) over all integers m.
    """

    F: Array
    G: Array
    H: Array


# ---------------------------------------------------------------------------------------------- shapes


def clipped_spectrum(half_angle_rad: float, m_max: int) -> Spectrum:
    """Return the coefficients of h(cos φ), h(x) = max(x − cos θ, 0), and of its derivatives.

    Parameters
    ----------
    half_angle_rad
        Conduction half-angle θ, 0 < θ < π [rad].
    m_max
        Largest line.

    Returns
    -------
    Spectrum
        F_m = (sin mθ cos θ − m cos mθ sin θ)/(π m (m² − 1)), G_m = sin mθ/(π m), H_m = cos mθ/(π sin θ).

    Notes
    -----
    h″ is a unit impulse at the corner, so H does not fall off with m. The peak of h is 1 − cos θ; the one-sided series
    of a clipped cosine of unit peak is 2·F_m/(1 − cos θ).
    """
    theta = half_angle_rad
    m = np.arange(m_max + 1, dtype=float)
    beyond = m[2:]
    F = np.empty(m_max + 1)
    F[0] = (math.sin(theta) - theta * math.cos(theta)) / math.pi
    F[1:2] = (theta - math.sin(theta) * math.cos(theta)) / (2 * math.pi)
    F[2:] = (np.sin(beyond * theta) * math.cos(theta) - beyond * np.cos(beyond * theta) * math.sin(theta)) / (
        math.pi * beyond * (beyond**2 - 1)
    )
    G = theta / math.pi * np.sinc(m * theta / math.pi)
    H = np.cos(m * theta) / (math.pi * math.sin(theta))
    return Spectrum(F=F, G=G, H=H)


def power_law_spectrum(times: int, m_max: int) -> Spectrum:
    """Return the coefficients of T_N(cos φ) = cos Nφ and of its derivatives; exact.

    Parameters
    ----------
    times
        Factor N.
    m_max
        Largest line.

    Returns
    -------
    Spectrum
        F_N = 1/2; G_m = N for m = N−1, N−3, … ≥ 0; H_m = N(N² − m²)/2 for m = N−2, N−4, … ≥ 0; all others 0.
    """
    m = np.arange(m_max + 1)
    same_parity = (m - times) % 2 == 0
    F = np.where(m == times, 0.5, 0.0)
    G = np.where(~same_parity & (m < times), float(times), 0.0)
    H = np.where(same_parity & (m < times), times * (times**2 - m**2) / 2.0, 0.0)
    return Spectrum(F=F, G=G, H=H)


def limiter_spectrum(*, steepness: float, bias: float, m_max: int) -> Spectrum:
    """Return the coefficients of tanh(g·cos φ + b) and of its derivatives by a doubled transform.

    Parameters
    ----------
    steepness
        g, 0 < g ≤ `MAX_STEEPNESS`.
    bias
        b.
    m_max
        Largest line.

    Returns
    -------
    Spectrum
        Accurate to 1e-13 of the largest coefficient (g up to 112; beyond, to the rounding of g·cos φ + b).

    Raises
    ------
    ConvergenceError
        If the transform does not stand still.
    """
    F, G, H = limiter_coefficients(steepness=steepness, bias=bias, m_max=m_max)
    return Spectrum(F=F, G=G, H=H)


def second_half(balance_db: float) -> float:
    """Return σ, the weight of the second half of a balanced device: (1 − σ)/(1 + σ) = 10^(−B/20).

    Parameters
    ----------
    balance_db
        Balance B [dB]; infinite gives σ = 1, 0 dB gives σ = 0.

    Returns
    -------
    float
        σ, 0 to 1.
    """
    unbalance = 10 ** (-balance_db / 20)
    return (1 - unbalance) / (1 + unbalance)


def bias_of(device: Device, times: int) -> float:
    """Return the bias b ≥ 0 of a limiter: what puts line 2 where ``lines_dbc[2]`` says; 0 without it or at an even N.

    Parameters
    ----------
    device
        A limiter.
    times
        Factor N.

    Returns
    -------
    float
        Bias b.

    Raises
    ------
    PlannerError
        If no bias reaches that level.
    """
    if 2 not in device.lines_dbc or times % 2 == 0:
        return 0.0
    return limiter_bias(steepness=device.steepness, line_2_dbc=device.lines_dbc[2], times=times, weakest_db=WEAKEST_DB)


# ---------------------------------------------------------------------------------------------- devices


def _single_ended(device: Device, times: int, m_max: int) -> Spectrum:  # noqa: ARG001 - one signature for all devices
    return clipped_spectrum(device.half_angle_rad, m_max)


def _balanced(device: Device, times: int, m_max: int, *, sign: int) -> Spectrum:  # noqa: ARG001 - as above
    """h(x) + sign·σ·h(−x): each argument −x turns φ by π, and each derivative turns the sign."""
    half = clipped_spectrum(device.half_angle_rad, m_max)
    turned = sign * second_half(device.balance_db) * (-1.0) ** np.arange(m_max + 1)
    return Spectrum(F=half.F * (1 + turned), G=half.G * (1 - turned), H=half.H * (1 + turned))


def _limiter(device: Device, times: int, m_max: int) -> Spectrum:
    return limiter_spectrum(steepness=device.steepness, bias=bias_of(device, times), m_max=m_max)


def _power_law(device: Device, times: int, m_max: int) -> Spectrum:  # noqa: ARG001 - as above
    return power_law_spectrum(times, m_max)


SPECTRA: Mapping[DeviceType, Callable[[Device, int, int], Spectrum]] = {
    "single-ended": _single_ended,
    "push-push": partial(_balanced, sign=+1),
    "push-pull": partial(_balanced, sign=-1),
    "limiter": _limiter,
    "power-law": _power_law,
}


def spectrum(device: Device, times: int, m_max: int) -> Spectrum:
    """Return the Fourier coefficients of a device's waveform and its first two derivatives.

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N ≥ 1.
    m_max
        Largest line.

    Returns
    -------
    Spectrum
        F, G, H, each shape (m_max + 1,).

    Raises
    ------
    PlannerError
        If a parameter of the device is outside its range.

    Notes
    -----
    By parts, G_(m−1) − G_(m+1) = 2·m·F_m and H_(m−1) − H_(m+1) = 2·m·G_m for every memoryless waveform.
    """
    _check_range(device, times)
    return SPECTRA[device.type](device, times, m_max)


def waveform(device: Device, times: int) -> Callable[[Array], Array]:
    """Return f itself, x relative to the carrier's nominal amplitude, for an exact transform of one period.

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N ≥ 1.

    Returns
    -------
    callable
        f(x), elementwise on an array of any shape; same scale as `spectrum`.

    Raises
    ------
    PlannerError
        If a parameter of the device is outside its range.
    """
    _check_range(device, times)
    corner = math.cos(device.half_angle_rad)

    def half(x: Array) -> Array:
        return np.maximum(x - corner, 0.0)

    if device.type == "single-ended":
        return half
    if device.type == "limiter":
        bias = bias_of(device, times)
        return lambda x: np.tanh(device.steepness * x + bias)
    if device.type == "power-law":
        coefficients = np.eye(times + 1)[times]
        return lambda x: chebyshev.chebval(x, coefficients)
    other = second_half(device.balance_db) * (1 if device.type == "push-push" else -1)
    return lambda x: half(x) + other * half(-x)


def _check_range(device: Device, times: int) -> None:
    if times < 1:
        raise PlannerError(f"times = {times}: allowed is a whole number from 1")
    clipped = device.type in ("single-ended", "push-push", "push-pull")
    if clipped and not 0 < device.half_angle_rad < math.pi:
        raise PlannerError(
            f"device.half_angle = {math.degrees(device.half_angle_rad):g} deg: allowed is above 0 and below 180 deg"
        )
    if device.type in ("push-push", "push-pull") and not device.balance_db >= 0:
        raise PlannerError(f"device.balance = {device.balance_db:g} dB: allowed is 0 dB or more")
    if device.type == "limiter" and not 0 < device.steepness <= MAX_STEEPNESS:
        raise PlannerError(f"device.steepness = {device.steepness:g}: allowed is above 0 and up to {MAX_STEEPNESS:g}")
