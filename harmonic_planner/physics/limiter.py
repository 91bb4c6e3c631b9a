"""The limiter tanh(g·x + b): Fourier coefficients by a doubled transform, and the bias that gives line 2.

References
----------
L. N. Trefethen, J. A. C. Weideman, "The exponentially convergent trapezoidal rule", SIAM Review 56, 2014, theorem 3.2.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from harmonic_planner.model import PlannerError

Array = NDArray[np.float64]

MAX_STEEPNESS = 1000.0
"""A limiter steeper than this is hard to 1e-5 of its lines; the transform would grow without gain."""
SETTLED = 1e-13
MAX_POINTS = 2**20


class ConvergenceError(PlannerError):
    """A doubled transform that did not stand still; carries the last change, relative to the largest coefficient."""

    def __init__(self, message: str, *, points: int, change: float) -> None:
        super().__init__(message)
        self.points = points
        self.change = change


def limiter_coefficients(*, steepness: float, bias: float, m_max: int) -> Array:
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
    ndarray, shape (3, m_max + 1)
        Two-sided Fourier coefficients of f(cos φ), f′(cos φ), f″(cos φ), index m = 0 … m_max. Doubling the points once
        more changed none by more than 1e-13 of the mean size, or by more than the rounding of g·cos φ + b where that is
        larger (g above 112).

    Raises
    ------
    ConvergenceError
        If the transform does not stand still within `MAX_POINTS`.

    Notes
    -----
    tanh(g·cos φ) is analytic in a strip of half-width asinh(π/2g) about the real axis, so the error of an n-point
    transform falls as exp(−n·asinh(π/2g)). The first transform is taken fine enough to see the corner.
    """
    settled = max(SETTLED, 4 * steepness * float(np.finfo(float).eps))
    points = _points(max(4.0 * (m_max + 1), 4 / _strip(steepness)))
    previous, change = None, math.inf
    while points <= MAX_POINTS:
        current, size = _sampled_limiter(steepness, bias, points, m_max)
        if previous is not None:
            moved = np.max(np.abs(current - previous), axis=1)
            if np.all(moved <= settled * size):
                return current
            change = float(np.max(moved / size))
        previous = current
        points *= 2
    raise ConvergenceError(
        f"device.steepness = {steepness:g}: the limiter's transform does not settle within {MAX_POINTS} points "
        f"(last change {change:.1e}); allowed is up to {MAX_STEEPNESS:g}",
        points=MAX_POINTS,
        change=change,
    )


def _strip(steepness: float) -> float:
    """Return the half-width of the strip in which tanh(g·cos φ + b) is analytic for every real b [rad]."""
    return math.asinh(math.pi / (2 * steepness))


def _points(least: float) -> int:
    """Return the power of two from 64 on that is at least `least`."""
    return max(64, int(2 ** math.ceil(math.log2(least))))


def _sampled_limiter(steepness: float, bias: float, points: int, m_max: int) -> tuple[Array, Array]:
    """Return F, G, H from `points` samples of one period, shape (3, m_max + 1), and the mean size of each, shape (3,).

    sech² is taken from e^(−2|u|), not as 1 − tanh²: that would lose the slope of a saturated limiter in rounding.
    """
    u = steepness * np.cos(2 * math.pi * np.arange(points) / points) + bias
    t, tail = np.tanh(u), np.exp(-2 * np.abs(u))
    slope = 4 * tail / (1 + tail) ** 2
    samples = np.stack([t, steepness * slope, -2 * steepness**2 * t * slope])
    lines = np.fft.rfft(samples, axis=1).real[:, : m_max + 1] / points
    return np.asarray(lines, dtype=np.float64), np.asarray(np.mean(np.abs(samples), axis=1))


def _limiter_lines(steepness: float, bias: Array, m_max: int) -> Array:
    """Return |F_m| of tanh(g·cos φ + b), shape (b, m_max + 1), with points enough for `SETTLED` at once."""
    points = _points(2 * m_max - math.log(SETTLED) / _strip(steepness))
    phase = 2 * math.pi * np.arange(points) / points
    lines = np.fft.rfft(np.tanh(steepness * np.cos(phase) + bias[:, np.newaxis]), axis=1)
    return np.asarray(np.abs(lines.real[:, : m_max + 1]) / points, dtype=np.float64)


def limiter_bias(*, steepness: float, line_2_dbc: float, times: int, weakest_db: float) -> float:
    """Return the bias b ≥ 0 at which tanh(g·cos φ + b) has line 2 at a given level.

    Parameters
    ----------
    steepness
        g, 0 < g ≤ `MAX_STEEPNESS`.
    line_2_dbc
        Level of line 2 relative to the wanted line [dBc].
    times
        Wanted line N, odd.
    weakest_db
        The search ends where the wanted line is this far under the strongest [dB].

    Returns
    -------
    float
        Bias b; 0 where the wanted line is too weak even without bias.

    Raises
    ------
    PlannerError
        If no bias reaches that level.

    Notes
    -----
    From b = 0 line 2 rises with b until the wanted line passes a zero (N ≥ 3) or the waveform shrinks to a pulse
    (N = 1). The solution is sought on that first branch, up to b = g + 3.
    """
    g = steepness
    target = 10 ** (line_2_dbc / 20)
    m_max = times + 2

    biases = np.linspace(0.0, g + 3.0, 128)
    lines = _limiter_lines(g, biases, m_max)
    strong = lines[:, times] >= 10 ** (-weakest_db / 20) * np.max(lines[:, 1:], axis=1)
    ratio = lines[:, 2] / np.where(strong, lines[:, times], 1.0)
    on_branch = strong & np.concatenate(([True], np.diff(ratio) > 0))
    end = len(biases) if on_branch.all() else int(np.argmin(on_branch))
    if end == 0:
        return 0.0
    reached = np.nonzero(ratio[:end] >= target)[0]
    if not len(reached):
        highest = 20 * math.log10(ratio[end - 1]) if end > 1 else -math.inf
        raise PlannerError(
            f"device.lines: line 2 = {line_2_dbc:g} dBc is out of reach of a limiter ×{times} of steepness {g:g}; "
            f"allowed: up to {highest:.2f} dBc"
        )

    def excess(bias: float) -> float:
        exact = _limiter_lines(g, np.array([bias]), m_max)[0]
        return float(exact[2] / exact[times]) - target

    upper = float(biases[reached[0]])
    if excess(upper) <= 0:
        return upper
    return float(brentq(excess, 0.0, upper, xtol=1e-15)) if excess(0.0) < 0 else 0.0
