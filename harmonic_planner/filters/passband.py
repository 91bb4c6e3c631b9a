"""Where a lossy prototype stops passing and starts rejecting: its edge Ω_p and the rejection points Ω_j.

Without dissipation both are the closed-form inverse of the attenuation. With it, |H(jΩ + σ)| has no closed inverse, and
a Chebyshev's ripple, tilted by the loss, still turns a few times inside the band. So the turning points are found
first; between two of them the attenuation is monotone and a bracketed Newton iteration finds the crossing wanted:

* Ω_p, the *first* place where max − min of A over [0, Ω] exceeds the flatness;
* Ω_j, the *last* crossing of a level: beyond it the attenuation stays at or above the level.

Attenuations here are ln |H|^-2; arrays are (prototype, bandwidth, level).

Notes
-----
There are no turning points above the largest Im p, since from there on the distance to every pole grows, and none
at all for Butterworth: the coefficients of |1/H(jΩ + σ)|² in Ω² are then all non-negative (evaluated for orders 1–15
and σ = 1e-6 … 100).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.physics.prototypes import DB_PER_LN, FloatArray, Prototype

_ROUNDING_LN = 1e-10
"""Slack on the flatness, about 4e-10 dB: a flatness equal to the ripple must not fail by rounding."""
_SETTLED_LN = 1e-14
"""An attenuation within about 4e-14 dB of its target is there."""
_POINTS_PER_TURN = 12
"""Samples of the slope per turning point that a prototype can have."""


@dataclass(frozen=True, eq=False)
class PoleArrays:
    """Several prototypes as padded arrays, so that one expression serves all of them.

    A conjugate pair −a ± jb contributes (Ω² + c)² + d to |1/H|², c = (a + σ)² − b² and d = 4·(a + σ)²·b²; the real
    pole of an odd order contributes Ω² + (a + σ)², and padding 1.
    """

    order: FloatArray
    """(p,)"""
    log_scale: FloatArray
    """(p,) ln K², 1/H(s) = K·Π(s − p)."""
    a: FloatArray
    """(pair, p, 1) −Re p."""
    b: FloatArray
    """(pair, p, 1) Im p, above 0."""
    present: FloatArray
    """(pair, p, 1) 1 for a pair, 0 for padding."""
    real: FloatArray
    """(p, 1) −p of the real pole, 0 for even orders."""
    odd: FloatArray
    """(p, 1) 1 for odd orders, else 0."""
    epsilon: FloatArray
    """(p,) ripple factor, 1 for Butterworth."""
    is_chebyshev: NDArray[np.bool_]
    """(p,)"""
    turning: NDArray[np.intp]
    """Indices of the prototypes that can have turning points: Chebyshev from order 2."""


@lru_cache(maxsize=64)
def pole_arrays(prototypes: tuple[Prototype, ...]) -> PoleArrays:
    """Return the prototypes' poles as padded arrays (cached: the same few are asked for again and again)."""
    count = len(prototypes)
    pairs = max(p.order // 2 for p in prototypes)
    a, b, present = (np.zeros((pairs, count, 1)) for _ in range(3))
    real, odd = np.zeros((count, 1)), np.zeros((count, 1))
    for i, prototype in enumerate(prototypes):
        poles = prototype.poles()
        half = prototype.order // 2
        a[:half, i, 0], b[:half, i, 0], present[:half, i, 0] = -poles.real[:half], poles.imag[:half], 1.0
        if prototype.order % 2:
            real[i], odd[i] = -poles.real[half], 1.0
    arrays = PoleArrays(
        order=np.array([float(p.order) for p in prototypes]),
        log_scale=np.array([2.0 * p.log_scale for p in prototypes]),
        a=a,
        b=b,
        present=present,
        real=real,
        odd=odd,
        epsilon=np.array([p.epsilon for p in prototypes]),
        is_chebyshev=np.array([p.family == "chebyshev" for p in prototypes]),
        turning=np.array(
            [i for i, p in enumerate(prototypes) if p.family == "chebyshev" and p.order > 1], dtype=np.intp
        ),
    )
    for array in vars(arrays).values():
        array.setflags(write=False)
    return arrays


@dataclass(frozen=True, eq=False)
class LossyResponse:
    """|1/H(jΩ + σ)|² of several prototypes at several dissipations, as factors in Ω²."""

    present: FloatArray
    """(pair, p, 1)"""
    c: FloatArray
    """(pair, p, k)"""
    d: FloatArray
    """(pair, p, k)"""
    real: FloatArray
    """(p, k) square of the real pole's distance to the axis, 1 for even orders."""
    odd: FloatArray
    """(p, 1)"""
    log_scale: FloatArray
    """(p, 1)"""
    order: FloatArray
    """(p, 1)"""
    highest: FloatArray
    """(p, 1) largest Im p: no turning point above it."""

    def pick(self, p: NDArray[np.intp], k: NDArray[np.intp]) -> LossyResponse:
        """Return the chosen (prototype, dissipation) couples as a (couple, 1) response."""

        def take(array: FloatArray) -> FloatArray:
            column = k if array.shape[-1] > 1 else np.zeros_like(k)
            return array[..., p, column][..., np.newaxis]

        return LossyResponse(
            **{
                name: take(getattr(self, name))
                for name in ("present", "c", "d", "real", "odd", "log_scale", "order", "highest")
            }
        )

    def log_and_slope(self, omega: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return ln |H|^-2 and its derivative with respect to Ω², at `omega` (p, k, j)."""
        x = omega * omega
        q = x * self.present[..., np.newaxis] + self.c[..., np.newaxis]
        norm = q * q + self.d[..., np.newaxis]
        linear = x * self.odd[..., np.newaxis] + self.real[..., np.newaxis]
        product = linear * np.multiply.reduce(norm, axis=0)
        slope = np.add.reduce(q * self.present[..., np.newaxis] / norm, axis=0)
        return self.log_scale[..., np.newaxis] + np.log(product), 2.0 * slope + self.odd[..., np.newaxis] / linear


def lossy_response(prototypes: tuple[Prototype, ...], sigma: FloatArray) -> LossyResponse:
    """Return the factors of |1/H(jΩ + σ)|².

    Parameters
    ----------
    prototypes
        p prototypes.
    sigma
        (p, k) dissipations 1/(Δ·Q_u).

    Returns
    -------
    LossyResponse
        Factors for every prototype and dissipation.
    """
    poles = pole_arrays(prototypes)
    distance = (poles.a + sigma) ** 2
    b2 = poles.b**2
    return LossyResponse(
        present=poles.present,
        c=poles.present * (distance - b2) + (1.0 - poles.present),
        d=4.0 * poles.present * distance * b2,
        real=np.where(poles.odd > 0.0, (poles.real + sigma) ** 2, 1.0),
        odd=poles.odd,
        log_scale=poles.log_scale[:, np.newaxis],
        order=poles.order[:, np.newaxis],
        highest=np.max(poles.b, axis=0, initial=0.0),
    )


def turning_points(prototypes: tuple[Prototype, ...], response: LossyResponse) -> tuple[FloatArray, FloatArray]:
    """Find where the attenuation turns, from the centre outwards.

    Parameters
    ----------
    prototypes
        p prototypes.
    response
        Their response at k dissipations.

    Returns
    -------
    omega, level : (p, k, turns + 1) float
        Ω = 0 first, then every local maximum and minimum in ascending order, padded with infinity; and ln |H|^-2 there.
    """
    shape = response.real.shape
    turning = pole_arrays(prototypes).turning
    start, _ = response.log_and_slope(np.zeros((*shape, 1)))
    if turning.size == 0 or not np.any(response.c[:, turning] < 0.0):
        return np.zeros((*shape, 1)), start
    every = np.arange(shape[1])
    p, k = (index.ravel() for index in np.meshgrid(turning, every, indexing="ij"))
    couples = response.pick(p, k)
    samples = _POINTS_PER_TURN * max(proto.order for proto in prototypes)
    grid = couples.highest[..., np.newaxis] * np.sin(np.linspace(0.0, np.pi / 2, samples + 1))
    positive = couples.log_and_slope(grid)[1] > 0.0
    couple, cell = np.nonzero(positive[:, 0, 1:] != positive[:, 0, :-1])
    if couple.size == 0:
        return np.zeros((*shape, 1)), start
    found = response.pick(p[couple], k[couple])
    turn = _zero_slope(found, grid[couple, 0, cell], grid[couple, 0, cell + 1], rising=positive[couple, 0, cell + 1])
    level, _ = found.log_and_slope(turn[:, np.newaxis, np.newaxis])
    # `couple` ascends and cells ascend within it, so that the position of a turn among its couple's is a running count
    place = np.arange(couple.size) - np.searchsorted(couple, couple) + 1
    omega = np.full((*shape, int(place.max()) + 1), np.inf)
    levels = np.full_like(omega, np.inf)
    omega[..., 0], levels[..., :1] = 0.0, start
    omega[p[couple], k[couple], place] = turn
    levels[p[couple], k[couple], place] = level[:, 0, 0]
    return omega, levels


def edge_and_rejection_points(
    prototypes: tuple[Prototype, ...],
    sigma: FloatArray,
    *,
    flatness_db: float,
    rejection_db: FloatArray,
    start: FloatArray | None = None,
) -> FloatArray:
    """Find the passband edge Ω_p and the rejection points Ω_j.

    Parameters
    ----------
    prototypes
        p prototypes; the flatness is not below any ripple.
    sigma
        (p, k) dissipations 1/(Δ·Q_u).
    flatness_db
        Greatest max − min of A over [0, Ω_p] [dB].
    rejection_db
        (j,) rejections above 0 [dB]; the level of each is rejection + midband loss + flatness.
    start
        (p, k, 1 + j) where the iteration starts, if a near guess is at hand; it saves time and changes nothing else.

    Returns
    -------
    (p, k, 1 + j) float
        First Ω_p, the largest Ω with max − min of A over [0, Ω] within the flatness; then Ω_j, beyond which A never
        again falls below its level.
    """
    response = lossy_response(prototypes, sigma)
    turn, level = turning_points(prototypes, response)
    last = turn.shape[-1] - 1
    flatness = flatness_db / DB_PER_LN

    # the piece between turning points on which max − min first exceeds the flatness; it may rise or fall
    highest, lowest = np.maximum.accumulate(level, axis=-1), np.minimum.accumulate(level, axis=-1)
    piece_p = np.count_nonzero(highest - lowest <= flatness + _ROUNDING_LN, axis=-1, keepdims=True) - 1
    falling = (piece_p < last) & (_pick(level, np.minimum(piece_p + 1, last)) < _pick(level, piece_p))
    target_p = np.where(falling, _pick(highest, piece_p) - flatness, _pick(lowest, piece_p) + flatness)

    # the piece on which the level is crossed for the last time: it starts at the last turning point below the level
    target_j = level[..., :1] + flatness + rejection_db / DB_PER_LN
    below = level[..., np.newaxis, :] < target_j[..., np.newaxis]
    piece_j = last - np.argmax(below[..., ::-1], axis=-1)

    piece = np.concatenate([piece_p, piece_j], axis=-1)
    target = np.concatenate([target_p, target_j], axis=-1)
    inner, outer = _pick(turn, piece), _pick(turn, np.minimum(piece + 1, last))
    scale, order = response.log_scale[..., np.newaxis], response.order[..., np.newaxis]
    # |jΩ + σ − p| ≥ Ω − |Im p|: from here on the target is surely reached
    beyond = response.highest[..., np.newaxis] + np.exp((target - scale) / (2.0 * order))
    outer = np.where((piece == last) | ~np.isfinite(outer), beyond, outer)
    sign = np.ones_like(target)
    sign[..., :1] = np.where(falling, -1.0, 1.0)
    if start is None:
        start = _lossless_inverse(prototypes, target - level[..., :1])
    return _newton(response, target, inner, outer, np.clip(start, inner, outer), sign)


def _pick(array: FloatArray, index: NDArray[np.intp]) -> FloatArray:
    """Take along the last axis; where that is one long there is nothing to choose."""
    if array.shape[-1] == 1:
        return np.broadcast_to(array, index.shape)
    return np.take_along_axis(array, index, axis=-1)


def _lossless_inverse(prototypes: tuple[Prototype, ...], level: FloatArray) -> FloatArray:
    """Return the largest Ω with this ln |H|^-2 without dissipation (p, k, j): where the iteration starts."""
    poles = pole_arrays(prototypes)
    order = poles.order[:, np.newaxis, np.newaxis]
    ratio = np.sqrt(np.expm1(np.maximum(level, 0.0))) / poles.epsilon[:, np.newaxis, np.newaxis]
    chebyshev = np.cosh(np.arccosh(np.maximum(ratio, 1.0)) / order)
    return np.where(poles.is_chebyshev[:, np.newaxis, np.newaxis], chebyshev, ratio ** (1.0 / order))


def _newton(
    response: LossyResponse,
    target: FloatArray,
    inner: FloatArray,
    outer: FloatArray,
    start: FloatArray,
    sign: FloatArray,
) -> FloatArray:
    """Solve ln |H|^-2 = target on monotone pieces (sign −1: falling), by Newton in ln Ω held inside its bracket.

    Where a step leaves the bracket, or the error has not halved, the bracket is halved instead: it always converges.
    """
    omega, previous = start, np.full_like(start, np.inf)
    for _ in range(100):
        value, slope = response.log_and_slope(omega)
        error = value - target
        high = error * sign >= 0.0
        outer = np.where(high, omega, outer)
        inner = np.where(high, inner, omega)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            step = omega * np.exp(-error / (2.0 * omega * omega * slope))
        size = np.abs(error)
        good = (step >= inner) & (step <= outer) & (size <= np.maximum(0.5 * previous, _SETTLED_LN))
        moved = np.where(good, step, 0.5 * (inner + outer))
        # a Newton step of 1e-8 leaves an error of second order, below 1e-14; a halving must close its bracket
        settled = np.abs(moved - omega) <= np.where(good, 1e-8, 1e-14) * omega
        omega, previous = moved, size
        if settled.all():
            break
    return omega


def _zero_slope(
    response: LossyResponse, inner: FloatArray, outer: FloatArray, *, rising: NDArray[np.bool_]
) -> FloatArray:
    """Find the zero of the slope inside each bracket (`rising`: the slope ends positive) to 1e-6 of its width.

    The attenuation is stationary there, so that it is found to better than 1e-12 dB.
    """
    share = np.linspace(0.0, 1.0, 33)
    for _ in range(4):
        points = inner[:, np.newaxis] + (outer - inner)[:, np.newaxis] * share
        slope = response.log_and_slope(points[:, np.newaxis, 1:-1])[1][:, 0]
        beyond = (slope > 0.0) == rising[:, np.newaxis]
        # the first point beyond the zero, the outer end if there is none
        cell = np.where(beyond.any(axis=1), beyond.argmax(axis=1), share.size - 2)
        each = np.arange(cell.size)
        inner, outer = points[each, cell], points[each, cell + 1]
    return np.asarray(0.5 * (inner + outer))
