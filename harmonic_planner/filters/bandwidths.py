"""The bandwidths at which some centre serves: a scan of Δ, and its ends refined.

Every array is (prototype, bandwidth); several prototypes are scanned together, so that one array expression serves all.

Notes
-----
Δ·Ω_p and Δ·Ω_j rise with Δ: a narrower filter passes less and rejects more, in Hz. The carrier therefore bounds Δ from
below, its neighbours bound it from above, and the allowed bandwidths are one interval, but for one exception. Where a
Chebyshev's flatness is equal or close to its ripple, dissipation tilts a ripple beyond the flatness, Ω_p drops to
inside the band, and comes back at once at some larger Δ. Then a second interval can exist; the one with the most width
is taken. Measured with 1,000 random requirements, both families and orders 1–9, on 400 bandwidths each: 4 of 18,000,
all of them Chebyshev 0.5 dB of order 9 with a flatness of 0.5 dB. None of the 18,000 was feasible only in an interval
that the scan had stepped over.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.filters.passband import edge_and_rejection_points
from harmonic_planner.filters.task import Task
from harmonic_planner.physics.prototypes import FloatArray, Prototype

_SCAN: Final = 50
"""Bandwidths of the first scan, evenly spaced in ln Δ between the least allowed and the cap."""
_END: Final = 1e-7
"""Relative width to which an end of a window is refined; the side that is kept is always an allowed one."""
_CLUSTER: Final = np.array([0.3, 0.1, 1e-2, 1e-3, 1e-5])
_SPREAD: Final = np.array([0.25, 0.5, 0.75])


@dataclass(frozen=True, eq=False)
class Centres:
    """Centre intervals of p prototypes at k bandwidths; every array (p, k) unless it says otherwise."""

    bandwidth: FloatArray
    low: FloatArray
    """Lower end, ln f0."""
    high: FloatArray
    """Upper end, ln f0; below `low` where no centre serves."""
    passing: FloatArray
    """Width of the interval that the passband alone allows."""
    low_by: NDArray[np.intp]
    """Which condition sets the lower end: 0 the passband, j ≥ 1 the lower line j − 1."""
    high_by: NDArray[np.intp]
    """The same of the upper end, with the upper lines."""
    omega: FloatArray
    """(p, k, 1 + j) Ω_p and Ω_j."""

    @property
    def width(self) -> FloatArray:
        """Width of the interval in ln f0: the bandwidth is allowed where it is not negative."""
        return self.high - self.low

    def interval_hz(self, p: int, k: int) -> tuple[float, float]:
        """Return one interval [Hz]; one that rounding turned round is a point."""
        low, high = float(self.low[p, k]), float(self.high[p, k])
        if low > high:
            low = high = 0.5 * (low + high)
        return math.exp(low), math.exp(high)


def centres_at(
    prototypes: tuple[Prototype, ...], task: Task, bandwidth: FloatArray, start: FloatArray | None = None
) -> Centres:
    """Return the centre intervals at some bandwidths; loss limit, floor and cap are the caller's.

    Parameters
    ----------
    prototypes
        p prototypes; the flatness is not below any ripple.
    task
        What the filter has to do.
    bandwidth
        (p, k) Δ, as fractions of the centre.
    start
        (p, k, 1 + j) near guess of Ω_p and Ω_j, if there is one.

    Returns
    -------
    Centres
        Intervals and what sets their ends.
    """
    edges = task.edges
    omega = edge_and_rejection_points(
        prototypes,
        1.0 / (bandwidth * task.unloaded_q),
        flatness_db=task.flatness_db,
        rejection_db=edges.rejection_db,
        start=start,
    )
    reach = np.arcsinh(omega * (0.5 * bandwidth)[..., np.newaxis])
    lower = edges.lower.size
    lows = np.concatenate([edges.b - reach[..., :1], edges.lower + reach[..., 1 : 1 + lower]], axis=-1)
    highs = np.concatenate([edges.a + reach[..., :1], edges.upper - reach[..., 1 + lower :]], axis=-1)
    return Centres(
        bandwidth=bandwidth,
        low=lows.max(axis=-1),
        high=highs.min(axis=-1),
        passing=highs[..., 0] - lows[..., 0],
        low_by=lows.argmax(axis=-1),
        high_by=highs.argmin(axis=-1),
        omega=omega,
    )


@dataclass(frozen=True, eq=False)
class Found:
    """Outcome of a search."""

    feasible: NDArray[np.bool_]
    """(p,)"""
    pieces: NDArray[np.intp]
    """(p,) intervals of allowed bandwidths that the scan saw."""
    ends: Centres
    """(p, 2) narrowest and widest bandwidth; where nothing is feasible, both the narrowest that passes the carrier."""


def search(prototypes: tuple[Prototype, ...], task: Task, narrowest: FloatArray) -> Found:
    """Scan the bandwidths from `narrowest` (p,) to the cap and refine the ends of the widest allowed interval.

    Parameters
    ----------
    prototypes
        p prototypes; the flatness is not below any ripple.
    task
        What the filter has to do.
    narrowest
        (p,) least bandwidth that floor and loss limit allow.

    Returns
    -------
    Found
        Which prototypes have a window, and its ends.
    """
    count = len(prototypes)
    share = np.linspace(0.0, 1.0, _SCAN)
    grid = np.exp(np.log(narrowest)[:, np.newaxis] * (1.0 - share) + math.log(task.cap) * share)
    grid[:, 0], grid[:, -1] = narrowest, task.cap
    coarse = centres_at(prototypes, task, grid)
    # per prototype and end: index of an allowed bandwidth and of a refused one beside it; equal where all is allowed
    good, bad = np.zeros((count, 2), dtype=np.intp), np.zeros((count, 2), dtype=np.intp)
    pieces = np.zeros(count, dtype=np.intp)
    for p in range(count):
        runs = _runs(coarse.width[p] >= 0.0)
        pieces[p] = len(runs)
        if runs:
            widths = [grid[p, last] - grid[p, first] for first, last in runs]
            first, last = runs[int(np.argmax(widths))]
            good[p], bad[p] = (first, last), (max(first - 1, 0), min(last + 1, _SCAN - 1))
        else:
            passes = np.flatnonzero(coarse.passing[p] >= 0.0)
            good[p] = passes[0] if passes.size else _SCAN - 1
            bad[p] = max(good[p, 0] - 1, 0) if passes.size else good[p, 0]
    some = pieces > 0
    ends = _refine(prototypes, task, coarse, good, bad, by_passband=~some)
    # a window narrower than a step of the scan starts at the narrowest bandwidth that passes the carrier
    sliver = ~some & (ends.width[:, 0] >= 0.0)
    if sliver.any():
        columns = ends.bandwidth.copy()
        columns[sliver, 1] = grid[sliver, good[sliver, 0]]
        inside, outside = np.tile([0, 1], (count, 1)), np.tile([0, 1], (count, 1))
        inside[sliver, 1] = 0
        again = centres_at(prototypes, task, columns)
        ends = _refine(prototypes, task, again, inside, outside, by_passband=np.zeros_like(some))
    return Found(feasible=some | sliver, pieces=np.maximum(pieces, sliver), ends=ends)


def _runs(allowed: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Return first and last index of every run of True."""
    change = np.flatnonzero(np.diff(np.concatenate([[False], allowed, [False]]).astype(np.int8)))
    return [(int(first), int(last) - 1) for first, last in zip(change[::2], change[1::2], strict=True)]


def _pack(centres: Centres) -> FloatArray:
    """Return everything known of every point as one (p, k, column) array; the columns are those of `_unpack`."""
    known = (centres.bandwidth, centres.low, centres.high, centres.passing, centres.low_by, centres.high_by)
    return np.concatenate([np.stack(known, axis=-1), centres.omega], axis=-1)


def _unpack(table: FloatArray) -> Centres:
    return Centres(
        bandwidth=table[..., 0],
        low=table[..., 1],
        high=table[..., 2],
        passing=table[..., 3],
        low_by=table[..., 4].astype(np.intp),
        high_by=table[..., 5].astype(np.intp),
        omega=table[..., 6:],
    )


def _refine(
    prototypes: tuple[Prototype, ...],
    task: Task,
    scan: Centres,
    good: NDArray[np.intp],
    bad: NDArray[np.intp],
    *,
    by_passband: NDArray[np.bool_],
) -> Centres:
    """Narrow the brackets between allowed and refused points (p, 2) of a scan; return the allowed ends.

    Allowed means a centre interval that is not empty or, for the prototypes `by_passband`, one that the passband alone
    allows. Every pass evaluates points gathered round the secant's root and three spread evenly, which guard it.
    """
    count = len(prototypes)

    def value(table: FloatArray) -> FloatArray:
        judge = by_passband.reshape(count, *(1,) * (table.ndim - 2))
        return np.where(judge, table[..., 3], table[..., 2] - table[..., 1])

    scanned = _pack(scan)
    inner, outer = (np.take_along_axis(scanned, index[..., np.newaxis], axis=1) for index in (good, bad))
    for _ in range(16):
        span = np.log(outer[..., :1] / inner[..., :1])
        if not np.any(np.abs(span) > _END):
            break
        fall = value(inner) - value(outer)
        root = np.clip(value(inner) / np.where(fall > 0.0, fall, 1.0), 0.0, 1.0)[..., np.newaxis]
        spread = np.broadcast_to(_SPREAD, (count, 2, _SPREAD.size))
        share = np.concatenate([root * (1.0 - _CLUSTER), root + (1.0 - root) * _CLUSTER, spread], axis=-1)
        share.sort(axis=-1)
        near = inner[:, :, np.newaxis, 6:]
        guess = near + (outer[:, :, np.newaxis, 6:] - near) * share[..., np.newaxis]
        bandwidth = inner[..., :1] * np.exp(span * share)  # times exactly 1 where there is nothing to narrow
        found = centres_at(prototypes, task, bandwidth.reshape(count, -1), guess.reshape(count, -1, guess.shape[-1]))
        table = _pack(found).reshape(count, 2, share.shape[-1], -1)
        points = np.concatenate([inner[:, :, np.newaxis], table, outer[:, :, np.newaxis]], axis=2)
        refused = value(points) < 0.0
        refused[..., 0], refused[..., -1] = False, True
        first = np.argmax(refused, axis=-1)[..., np.newaxis, np.newaxis]
        inner, outer = (np.take_along_axis(points, i, axis=2)[:, :, 0] for i in (first - 1, first))
    return _unpack(inner)
