"""A multiplier driven by everything at once: one period of the whole comb through the waveform, and back to lines.

The comb is x(t) = Re Σ x_j e^(ijt), j = 1 … count, t one period of the grid's fundamental; nothing in it needs to be
small. A limiter and a power law are sampled, f(x) is transformed. A clipped waveform has corners, and samples of a
corner alias for ever (the lines fall off as 1/m² only), so it is not sampled but switched:

    max(x − c, 0) = (x − c)·s(t),   s = 1 where x > c, else 0

x has no line beyond `count`, so a line of the product up to `count` needs the lines of s up to 2·count and no others,
and those follow from the instants t_i at which x crosses c: S_m = Σ ± e^(−imt_i)/(2πim). The sum over instants is a
non-uniform transform, spread over the regular grid by a Kaiser–Bessel kernel. An instant that is off by δ changes the
product by δ² only, since x − c is zero there.

References
----------
A. Dutt, V. Rokhlin, "Fast Fourier transforms for nonequispaced data", SIAM J. Sci. Comput. 14, 1993 (the transform).
P. J. Beatty, D. G. Nishimura, J. M. Pauly, "Rapid gridding reconstruction with a minimal oversampling ratio", IEEE
Trans. Medical Imaging 24, 2005, eq. 5 (shape of the kernel) (memory).
L. N. Trefethen, J. A. C. Weideman, "The exponentially convergent trapezoidal rule", SIAM Review 56, 2014 (limiter).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy import fft
from scipy.special import i0

from harmonic_planner.model import Device
from harmonic_planner.physics.waveforms import second_half, waveform

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

POINTS_PER_LINE = 8
"""Samples of one period per line that is kept: product and transform of the instants are free of aliasing at 8."""
POINTS_PER_ANGLE = 4
"""Samples within the conduction half-angle, or within what is left of 180°, at least: no pulse is overlooked."""
ALIASING = 1e-8
"""Share by which the lines of a limiter fold back; e^(−n·strip) of the trapezoidal rule."""
_KERNEL_WIDTH = 10
_NEWTON_STEPS = 4


def period_points(device: Device, times: int, *, carrier_index: int, count: int) -> int:
    """Return how many samples of one period a device needs, so that folded lines stay below 1e-6 of the wanted one.

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N.
    carrier_index
        Grid index of the carrier that drives it.
    count
        Lines that are kept.

    Returns
    -------
    int
        A length that transforms fast.

    Notes
    -----
    A steep limiter is dear: g = 10 takes 118 samples of a carrier's period, g = 100 takes 1,173.
    """
    least = POINTS_PER_LINE * count
    if device.type == "power-law":
        least = max(least, (times + 1) * count + 1)
    elif device.type == "limiter":
        strip = math.asinh(math.pi / (2 * device.steepness))
        least = max(least, math.ceil(count - carrier_index * math.log(ALIASING) / strip))
    else:
        angle = min(device.half_angle_rad, math.pi - device.half_angle_rad)
        least = max(least, math.ceil(carrier_index * POINTS_PER_ANGLE * 2 * math.pi / angle))
    return int(fft.next_fast_len(least, real=True))


def driven(device: Device, times: int, lines: Complex, *, carrier_index: int, points: int | None = None) -> Complex:
    """Return the lines a device makes of a whole comb.

    Parameters
    ----------
    device
        The multiplier; levels given in ``lines_dbc`` are not looked at here, but for a limiter's bias.
    times
        Factor N.
    lines : (..., count) complex
        Amplitude of line j at index j − 1; the carrier has amplitude 1 at nominal drive.
    carrier_index
        Grid index of the carrier.
    points
        Samples of one period; `period_points` unless given.

    Returns
    -------
    (..., count) complex
        Amplitudes in the scale of the waveform: the wanted line of an undisturbed device is 2·F_N. The steady part
        and lines beyond `count` are dropped.

    Raises
    ------
    PlannerError
        If a parameter of the device is outside its range.
    """
    count = lines.shape[-1]
    n = points or period_points(device, times, carrier_index=carrier_index, count=count)
    x = sampled(lines, n)
    if device.type in ("limiter", "power-law"):
        return lines_of(waveform(device, times)(x), count)
    corner = math.cos(device.half_angle_rad)
    on = _Switch.of(x, corner)
    if device.type == "single-ended":
        return lines_of(x * on.samples(count), count) - 2 * corner * on.lines(count)
    weight = second_half(device.balance_db) * (1 if device.type == "push-push" else -1)
    other = _Switch.of(-x, corner)
    both = on.plus(other, -weight)
    return lines_of(x * both.samples(count), count) - 2 * corner * on.plus(other, weight).lines(count)


def sampled(lines: Complex, points: int) -> Array:
    """Return x(t) = Re Σ x_j e^(ijt) at `points` instants of one period, shape (..., points)."""
    padded = np.zeros((*lines.shape[:-1], lines.shape[-1] + 1), dtype=np.complex128)
    padded[..., 1:] = lines
    return np.asarray(fft.irfft(padded, points) * (points / 2))


def lines_of(samples: Array, count: int) -> Complex:
    """Return the amplitudes of lines 1 … count of one period's samples, shape (..., count)."""
    return np.asarray(fft.rfft(samples)[..., 1 : count + 1] * (2 / samples.shape[-1]))


class _Switch:
    """Transform of s(t) = 1 where x > c: its mean, and its impulses spread over the grid of samples."""

    def __init__(self, impulses: Array, mean: Array) -> None:
        self.impulses = impulses
        self.mean = mean

    @classmethod
    def of(cls, x: Array, corner: float) -> _Switch:
        """Find where `x`, (..., n), crosses `corner`."""
        n = x.shape[-1]
        rows = x.reshape(-1, n)
        above = rows > corner
        changes = above != np.roll(above, -1, axis=-1)
        row, first = np.nonzero(changes)
        instant = first + _crossing(rows, row, first, corner)
        sign = np.where(above[row, first], -1.0, 1.0)
        mean = np.bincount(row, -sign * instant, len(rows)) / n + above[:, 0]
        return cls(_spread(instant, sign, row, len(rows), n).reshape(x.shape), mean.reshape(x.shape[:-1]))

    def plus(self, other: _Switch, weight: float) -> _Switch:
        """Return s + weight·s′."""
        return _Switch(self.impulses + weight * other.impulses, self.mean + weight * other.mean)

    def lines(self, count: int) -> Complex:
        """Return the two-sided coefficients S_1 … S_count, shape (..., count)."""
        n = self.impulses.shape[-1]
        m = np.arange(1, count + 1)
        divisor = 2j * np.pi * m * _kernel_transform(m / n)
        return np.asarray(fft.rfft(self.impulses)[..., 1 : count + 1] / divisor)

    def samples(self, count: int) -> Array:
        """Return s with its lines up to 2·count, at the samples of x."""
        n = self.impulses.shape[-1]
        padded = np.zeros((*self.impulses.shape[:-1], 2 * count + 1), dtype=np.complex128)
        padded[..., 1:] = self.lines(2 * count)
        padded[..., 0] = self.mean
        return np.asarray(fft.irfft(padded, n) * n)


def _crossing(rows: Array, row: NDArray[np.intp], first: NDArray[np.intp], corner: float) -> Array:
    """Return where between sample `first` and the next the corner is crossed, 0 to 1, by a cubic through four samples.

    Linear interpolation starts, Newton's steps follow, kept within the two samples.
    """
    n = rows.shape[-1]
    before, left, right, after = (rows[row, (first + k) % n] - corner for k in (-1, 0, 1, 2))
    # Newton's form of the cubic through u = −1, 0, 1, 2, as a + b·u + c·u² + d·u³
    c = (before + right) / 2 - left
    d = (after - 3 * right + 3 * left - before) / 6
    b = right - left - c - d
    u = left / (left - right)
    for _ in range(_NEWTON_STEPS):
        slope = b + u * (2 * c + 3 * u * d)
        value = left + u * (b + u * (c + u * d))
        step = np.divide(value, slope, out=np.zeros_like(value), where=slope != 0)
        u = np.clip(u - step, 0.0, 1.0)
    return np.asarray(u)


def _shape() -> float:
    """Return β of the kernel for twice as many grid points as lines on both sides."""
    return math.pi * math.sqrt((_KERNEL_WIDTH / 2) ** 2 * 1.5**2 - 0.8)


def _spread(instant: Array, sign: Array, row: NDArray[np.intp], rows: int, n: int) -> Array:
    """Spread impulses at `instant` [samples] over their rows' grids, shape (rows, n)."""
    half = _KERNEL_WIDTH // 2
    start = np.floor(instant).astype(np.intp) - half + 1
    offset = np.arange(_KERNEL_WIDTH)
    distance = (start - instant)[:, np.newaxis] + offset
    inside = np.maximum(1 - (distance / half) ** 2, 0.0)
    weight = sign[:, np.newaxis] * i0(_shape() * np.sqrt(inside))
    place = row[:, np.newaxis] * n + (start[:, np.newaxis] + offset) % n
    return np.asarray(np.bincount(place.ravel(), weight.ravel(), rows * n).reshape(rows, n), dtype=np.float64)


def _kernel_transform(cycles_per_point: Array) -> Array:
    """Return the Fourier transform of the kernel: w·sinh(q)/q, q² = β² − (π·w·ξ)²."""
    q = np.sqrt(_shape() ** 2 - (math.pi * _KERNEL_WIDTH * cycles_per_point) ** 2)
    return np.asarray(_KERNEL_WIDTH * np.sinh(q) / q)
