"""Least order, bandwidth window and centre of one bandpass, losses and drift included.

With t = ln f0 and y = Δ/2 the mapping is Ω(f) = |sinh(ln f − t)|/y. The drift d moves the centre to f0·(1 ± d) and is absorbed into
the edges: the passband [p1, p2] into a = ln(p1/(1 + d)) and b = ln(p2/(1 − d)), a line below it into s_l = ln(f_hi/(1 − d)), a line
above it into s_u = ln(f_lo/(1 + d)). With the passband edge Ω_p and the rejection points Ω_j of `passband` the centres allowed at
a bandwidth are one interval::

    t ≥ b − asinh(Ω_p·y),   t ≥ s_l + asinh(Ω_l·y);     t ≤ a + asinh(Ω_p·y),   t ≤ s_u − asinh(Ω_u·y)

and a bandwidth is allowed where the interval is not empty, the midband loss is within its limit, and floor ≤ Δ ≤ cap. Ω_p and Ω_j
depend on Δ through the dissipation, so that the allowed bandwidths are found by a scan of Δ whose ends are then refined.

Definitions
-----------
*Flatness* is the loss at the worst point of span and drift minus that at the best; Ω_p is the largest Ω with max − min of A on
[0, Ω] within it. *Carrier loss* is midband loss + flatness. A line is *satisfied* where A, at its least over span and drift, is at
least rejection + carrier loss; beyond Ω_j that holds for every Ω.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.filters.passband import LossyResponse, edge_and_rejection_points, lossy_response, turning_points
from harmonic_planner.filters.task import Task
from harmonic_planner.model import Family
from harmonic_planner.physics.prototypes import DB_PER_LN, FloatArray, Prototype

__all__ = ["NARROWEST", "Task", "WindowResult", "centres", "least_order", "rejection_db", "scan", "solve"]

NARROWEST: Final = 1e-4
"""Least bandwidth that is looked at, as a fraction of the centre."""
_SCAN: Final = 50
"""Bandwidths of the first scan, evenly spaced in ln Δ between the least allowed and the cap."""
_TOLERANCE_DB: Final = 1e-9
"""Rounding allowed when a ripple is compared with a flatness, or a loss with its limit [dB]."""
_TOLERANCE: Final = 1e-9
"""Relative width to which the ends of a window are refined; the end that is kept is always an allowed one."""


@dataclass(frozen=True)
class WindowResult:
    """For one prototype: the bandwidths that pass the carrier and reject every line, or why there are none.

    Bandwidths are fractions of the centre; they and the centres are NaN where there is no window.
    """

    prototype: Prototype
    feasible: bool
    reason: str
    """Why there is no window, in words; empty where there is one."""
    bandwidth_min: float = math.nan
    bandwidth_max: float = math.nan
    centres_min_hz: tuple[float, float] = (math.nan, math.nan)
    """Allowed centres at the narrowest bandwidth [Hz]."""
    centres_max_hz: tuple[float, float] = (math.nan, math.nan)
    """Allowed centres at the widest bandwidth [Hz]."""
    pieces: int = 0
    """Intervals of allowed bandwidths that the scan saw; the window is the widest of them."""


@dataclass(frozen=True, eq=False)
class _Scan:
    """Centre intervals of p prototypes at k bandwidths; every array (p, k)."""

    bandwidth: FloatArray
    low: FloatArray
    high: FloatArray
    passing: FloatArray
    """Width of the interval that the passband alone allows."""
    low_by: NDArray[np.intp]
    """Which condition sets the lower end: 0 the passband, j ≥ 1 the lower line j − 1."""
    high_by: NDArray[np.intp]

    @property
    def width(self) -> FloatArray:
        """Width of the interval in ln f0: allowed where it is not negative."""
        return self.high - self.low


def _evaluate(prototypes: tuple[Prototype, ...], task: Task, bandwidth: FloatArray) -> _Scan:
    """Return the centre intervals at `bandwidth` (p, k), loss limit and floor aside."""
    edges = task.edges
    sigma = 1.0 / (bandwidth * task.unloaded_q)
    edge, points = edge_and_rejection_points(
        prototypes, sigma, flatness_db=task.flatness_db, rejection_db=edges.rejection_db
    )
    half = 0.5 * bandwidth
    reach = np.arcsinh(edge * half)
    clear = np.arcsinh(points * half[..., np.newaxis])
    lower = edges.lower + clear[..., : edges.lower.size]
    upper = edges.upper - clear[..., edges.lower.size :]
    lows = np.concatenate([(edges.b - reach)[..., np.newaxis], lower], axis=-1)
    highs = np.concatenate([(edges.a + reach)[..., np.newaxis], upper], axis=-1)
    return _Scan(
        bandwidth=bandwidth,
        low=lows.max(axis=-1),
        high=highs.min(axis=-1),
        passing=highs[..., 0] - lows[..., 0],
        low_by=lows.argmax(axis=-1),
        high_by=highs.argmin(axis=-1),
    )


def solve(prototype: Prototype, task: Task) -> WindowResult:
    """Find the window of one prototype.

    Parameters
    ----------
    prototype
        Family, order, ripple.
    task
        What the filter has to do.

    Returns
    -------
    WindowResult
        The window, or why there is none.
    """
    return _solve((prototype,), task)[0]


def scan(task: Task, *, families: Sequence[Family], ripple_db: float, max_order: int) -> tuple[WindowResult, ...]:
    """Find the windows of every family and order.

    Parameters
    ----------
    task
        What the filter has to do.
    families
        Families to try.
    ripple_db
        Ripple of the Chebyshev ones [dB].
    max_order
        Highest order.

    Returns
    -------
    tuple of WindowResult
        Family by family, order 1 … `max_order`. Every order is tried, since the loss limit makes a higher order fail where a lower
        one serves.
    """
    prototypes = tuple(Prototype(family, order, ripple_db) for family in families for order in range(1, max_order + 1))
    return _solve(prototypes, task)


def least_order(results: Sequence[WindowResult]) -> WindowResult | None:
    """Return the feasible result of least order, among equals the one with the widest window, or None."""
    feasible = [result for result in results if result.feasible]
    return min(feasible, key=lambda r: (r.prototype.order, -r.bandwidth_max), default=None)


def centres(prototype: Prototype, task: Task, bandwidth: float) -> tuple[float, float] | None:
    """Return the centres allowed at one bandwidth.

    Parameters
    ----------
    prototype
        Family, order, ripple.
    task
        What the filter has to do.
    bandwidth
        Δ, as a fraction of the centre.

    Returns
    -------
    (lowest, highest) float, or None
        Allowed centres [Hz]; None where the bandwidth is not allowed at any centre.
    """
    narrowest = _narrowest(prototype, task)
    if isinstance(narrowest, str) or not narrowest * (1.0 - _TOLERANCE) <= bandwidth <= task.cap * (1.0 + _TOLERANCE):
        return None
    found = _evaluate((prototype,), task, np.array([[bandwidth]]))
    return _interval_hz(found, 0, 0) if found.width[0, 0] >= -_TOLERANCE else None


def rejection_db(
    prototype: Prototype,
    *,
    centre_hz: float,
    bandwidth: float,
    unloaded_q: float,
    passband_hz: tuple[float, float],
    line_low_hz: FloatArray,
    line_high_hz: FloatArray,
    drift: float,
) -> FloatArray:
    """Return how far a filter puts every line under the carrier.

    Parameters
    ----------
    prototype
        Family, order, ripple.
    centre_hz, bandwidth, unloaded_q
        f0 [Hz], Δ as a fraction of it, and Q_u, which may be infinite.
    passband_hz
        Lowest and highest carrier frequency [Hz].
    line_low_hz, line_high_hz
        (n_lines,) lowest and highest frequency of every line [Hz].
    drift
        The centre moves by this fraction either way.

    Returns
    -------
    (n_lines,) float
        A(line, at its least over span and drift) − A(carrier, at its most over span and drift) [dB].
    """
    sigma = 1.0 / (bandwidth * unloaded_q)
    response, turn, turn_level = _profile(prototype, sigma)
    low = np.log(np.append(line_low_hz, passband_hz[0]) / (centre_hz * (1.0 + drift)))
    high = np.log(np.append(line_high_hz, passband_hz[1]) / (centre_hz * (1.0 - drift)))
    ends = np.sinh(np.abs(np.stack([low, high]))) * (2.0 / bandwidth)
    near = np.where((low <= 0.0) & (high >= 0.0), 0.0, ends.min(axis=0))
    far = ends.max(axis=0)
    level = response.log_and_slope(np.concatenate([near, far])[np.newaxis, np.newaxis])[0][0, 0].reshape(2, -1)
    inside = (turn > near[:, np.newaxis]) & (turn < far[:, np.newaxis])
    least = np.minimum(level.min(axis=0), np.where(inside, turn_level, np.inf).min(axis=-1))
    most = max(level[:, -1].max(), np.where(inside[-1], turn_level, -np.inf).max())
    return np.asarray(DB_PER_LN * (least[:-1] - most))


@lru_cache(maxsize=256)
def _profile(prototype: Prototype, sigma: float) -> tuple[LossyResponse, FloatArray, FloatArray]:
    """Return the response at one dissipation, and its turning points as flat arrays (cached)."""
    response = lossy_response((prototype,), np.array([[sigma]]))
    turn, level = turning_points((prototype,), response)
    return response, turn[0, 0], level[0, 0]


def _narrowest(prototype: Prototype, task: Task) -> float | str:
    """Return the least bandwidth that floor and loss limit allow, or why there is none."""
    if prototype.ripple_db > task.flatness_db + _TOLERANCE_DB:
        return f"its ripple of {prototype.ripple_db:g} dB is above the flatness of {task.flatness_db:g} dB"
    edges = task.edges
    if edges.overlap is not None:
        return (
            f"the line at {_line_text(task, edges.overlap)} overlaps the carrier"
            f" ({_span_text(*task.passband_hz)}) within the drift of {100.0 * task.drift:g} %"
        )
    if task.floor > task.cap:
        return f"the bandwidth floor of {100.0 * task.floor:.3g} % is above the cap of {100.0 * task.cap:.3g} %"
    least_loss = float(prototype.midband_loss_db(1.0 / (task.cap * task.unloaded_q)))
    if least_loss > task.loss_db + _TOLERANCE_DB:
        return (
            f"its midband loss is {least_loss:.2f} dB even at {100.0 * task.cap:.3g} % bandwidth,"
            f" above the limit of {task.loss_db:g} dB"
        )
    by_loss = 0.0
    if math.isfinite(task.unloaded_q) and math.isfinite(task.loss_db):
        by_loss = 1.0 / (_greatest_sigma(prototype, task.loss_db) * task.unloaded_q)
    return min(max(task.floor, by_loss, NARROWEST), task.cap)


@lru_cache(maxsize=256)
def _greatest_sigma(prototype: Prototype, loss_db: float) -> float:
    """Return σ at which the midband loss is `loss_db`, by Newton from above.

    1/H(σ) is a polynomial with positive coefficients: convex and rising, so that the iteration falls onto the root.
    """
    polynomial = np.poly1d(np.poly(prototype.poles()).real)
    slope = polynomial.deriv()
    target = math.exp(loss_db / (2.0 * DB_PER_LN) - prototype.log_scale)
    sigma = target ** (1.0 / prototype.order)
    for _ in range(200):
        step = float((polynomial(sigma) - target) / slope(sigma))
        sigma -= step
        if abs(step) <= 1e-15 * sigma:
            break
    return sigma


def _solve(prototypes: tuple[Prototype, ...], task: Task) -> tuple[WindowResult, ...]:
    """Solve several prototypes together, so that array operations are shared."""
    narrowest = [_narrowest(prototype, task) for prototype in prototypes]
    found: dict[int, WindowResult] = {
        i: WindowResult(prototype, feasible=False, reason=least)
        for i, (prototype, least) in enumerate(zip(prototypes, narrowest, strict=True))
        if isinstance(least, str)
    }
    open_ = [i for i in range(len(prototypes)) if i not in found]
    if open_:
        start = np.array([least for least in narrowest if not isinstance(least, str)])
        windows = _search(tuple(prototypes[i] for i in open_), task, start)
        found.update(zip(open_, windows, strict=True))
    return tuple(found[i] for i in range(len(prototypes)))


def _search(prototypes: tuple[Prototype, ...], task: Task, start: FloatArray) -> list[WindowResult]:
    """Scan the bandwidths from `start` (p,) to the cap and refine the ends of the widest allowed interval."""
    share = np.linspace(0.0, 1.0, _SCAN)
    grid = np.exp(np.log(start)[:, np.newaxis] * (1.0 - share) + math.log(task.cap) * share)
    grid[:, 0], grid[:, -1] = start, task.cap
    coarse = _evaluate(prototypes, task, grid)
    runs = [_runs(row) for row in coarse.width >= 0.0]
    # good and bad end of the bracket of either end, as columns of the grid; equal where there is nothing to refine
    good = np.zeros((len(prototypes), 2), dtype=np.intp)
    bad = np.zeros_like(good)
    for i, pieces in enumerate(runs):
        if pieces:
            first, last = max(pieces, key=lambda run: grid[i, run[1]] - grid[i, run[0]])
            good[i], bad[i] = (first, last), (max(first - 1, 0), min(last + 1, _SCAN - 1))
        else:
            passes = np.flatnonzero(coarse.passing[i] >= 0.0)
            good[i] = passes[0] if passes.size else _SCAN - 1
            bad[i] = (max(good[i, 0] - 1, 0), good[i, 1]) if passes.size else good[i]
    has_run = np.array([bool(pieces) for pieces in runs])
    measure = np.where(has_run[:, np.newaxis], coarse.width, coarse.passing)
    ends = _refine(prototypes, task, grid, measure, good, bad, by_passband=~has_run)
    final = _evaluate(prototypes, task, ends)
    sliver = ~has_run & (final.width[:, 0] >= 0.0)
    if sliver.any():
        # narrower than a step of the scan: from the narrowest that passes to somewhere below the next point of the scan
        grid[:, 0] = np.where(sliver, ends[:, 0], grid[:, 0])
        measure = coarse.width
        measure[:, 0] = np.where(sliver, final.width[:, 0], measure[:, 0])
        upper_bad = np.where(sliver, good[:, 0], 0)
        bad = np.stack([np.zeros_like(upper_bad), upper_bad], axis=-1)
        upper = _refine(prototypes, task, grid, measure, np.zeros_like(bad), bad, by_passband=np.zeros_like(sliver))
        ends[:, 1] = np.where(sliver, upper[:, 1], ends[:, 1])
        final = _evaluate(prototypes, task, ends)
    return [
        WindowResult(
            prototype,
            feasible=True,
            reason="",
            bandwidth_min=float(ends[i, 0]),
            bandwidth_max=float(ends[i, 1]),
            centres_min_hz=_interval_hz(final, i, 0),
            centres_max_hz=_interval_hz(final, i, 1),
            pieces=max(len(runs[i]), 1),
        )
        if has_run[i] or sliver[i]
        else WindowResult(prototype, feasible=False, reason=_why_not(prototype, task, final, i, float(start[i])))
        for i, prototype in enumerate(prototypes)
    ]


def _runs(allowed: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Return first and last index of every run of True."""
    change = np.flatnonzero(np.diff(np.concatenate([[False], allowed, [False]]).astype(np.int8)))
    return [(int(first), int(last) - 1) for first, last in zip(change[::2], change[1::2], strict=True)]


_CLUSTER: Final = np.array([0.3, 0.1, 1e-2, 1e-3, 1e-5])


def _refine(
    prototypes: tuple[Prototype, ...],
    task: Task,
    grid: FloatArray,
    measure: FloatArray,
    good: NDArray[np.intp],
    bad: NDArray[np.intp],
    *,
    by_passband: NDArray[np.bool_],
) -> FloatArray:
    """Narrow brackets between an allowed (`good`) and a refused (`bad`) bandwidth; return the allowed ends (p, 2).

    Every pass evaluates points gathered round the secant's root, and three evenly spaced ones, which guard it.
    """
    x_good, x_bad = (np.log(np.take_along_axis(grid, i, 1)) for i in (good, bad))
    v_good, v_bad = (np.take_along_axis(measure, i, 1) for i in (good, bad))
    kept = np.take_along_axis(grid, good, 1)
    for _ in range(14):
        todo = np.abs(x_bad - x_good) > _TOLERANCE
        if not todo.any():
            break
        gap = v_good - v_bad
        root = np.clip(v_good / np.where(gap > 0.0, gap, 1.0), 0.0, 1.0)[..., np.newaxis]
        points = np.concatenate(
            [
                root * (1.0 - _CLUSTER),
                root + (1.0 - root) * _CLUSTER,
                np.broadcast_to([0.25, 0.5, 0.75], (*root.shape[:2], 3)),
            ],
            axis=-1,
        )
        points.sort(axis=-1)
        x = x_good[..., np.newaxis] + (x_bad - x_good)[..., np.newaxis] * points
        bandwidth = np.exp(x)
        found = _evaluate(prototypes, task, bandwidth.reshape(len(prototypes), -1))
        value = np.where(by_passband[:, np.newaxis], found.passing, found.width).reshape(x.shape)
        # with the old ends on either side, the first refused point from the good end outwards
        x = np.concatenate([x_good[..., np.newaxis], x, x_bad[..., np.newaxis]], axis=-1)
        value = np.concatenate([v_good[..., np.newaxis], value, v_bad[..., np.newaxis]], axis=-1)
        bandwidth = np.concatenate([kept[..., np.newaxis], bandwidth, np.zeros_like(kept)[..., np.newaxis]], axis=-1)
        refused = value < 0.0
        refused[..., 0], refused[..., -1] = False, True
        j = np.argmax(refused, axis=-1)[..., np.newaxis]
        new = (
            np.take_along_axis(array, index, -1)[..., 0]
            for array, index in ((x, j - 1), (x, j), (value, j - 1), (value, j))
        )
        moved = np.where(todo, np.take_along_axis(bandwidth, j - 1, -1)[..., 0], kept)
        x_good, x_bad, v_good, v_bad = (
            np.where(todo, a, old) for a, old in zip(new, (x_good, x_bad, v_good, v_bad), strict=True)
        )
        kept = moved
    return kept


def _interval_hz(found: _Scan, p: int, k: int) -> tuple[float, float]:
    """Return the centre interval [Hz]; one that rounding turned round is a point."""
    low, high = float(found.low[p, k]), float(found.high[p, k])
    if low > high:
        low = high = 0.5 * (low + high)
    return math.exp(low), math.exp(high)


def _why_not(prototype: Prototype, task: Task, found: _Scan, p: int, start: float) -> str:
    """Say what fails at the narrowest bandwidth that passes the carrier."""
    bandwidth = float(found.bandwidth[p, 0])
    if found.passing[p, 0] < 0.0:
        return (
            f"no bandwidth up to {100.0 * task.cap:.3g} % passes {_span_text(*task.passband_hz)}"
            f" with {task.flatness_db:g} dB flatness and {100.0 * task.drift:g} % drift"
        )
    low_by, high_by = int(found.low_by[p, 0]), int(found.high_by[p, 0])
    low, high = float(found.low[p, 0]), float(found.high[p, 0])
    # a carrier at the edge of the passband fixes the centre; between two lines the middle is as good as any
    centre = low if low_by == 0 else high if high_by == 0 else 0.5 * (low + high)
    sigma = 1.0 / (bandwidth * task.unloaded_q)
    carrier = float(prototype.midband_loss_db(sigma)) + task.flatness_db
    edges = task.edges
    binding = [low_by - 1] if low_by else []
    binding += [edges.lower.size + high_by - 1] if high_by else []
    ends = np.concatenate([edges.lower, edges.upper])
    parts = []
    for j in binding:
        omega = 2.0 * abs(math.sinh(float(ends[j]) - centre)) / bandwidth
        got = float(prototype.attenuation_db(omega, sigma)) - carrier
        line = _line_text(task, int(edges.index[j]))
        parts.append(f"the line at {line} needs {edges.rejection_db[j]:.1f} dB and gets {got:.1f} dB")
    if bandwidth > start:
        which = "the narrowest that passes the carrier"
    else:
        which = (
            "the floor"
            if start == task.floor
            else "the narrowest within the loss limit"
            if start > NARROWEST
            else "the least tried"
        )
    return f"at {100.0 * bandwidth:.3g} % bandwidth, {which}, " + " while ".join(parts)


def _line_text(task: Task, line: int) -> str:
    return _span_text(float(task.line_low_hz[line]), float(task.line_high_hz[line]))


def _span_text(low_hz: float, high_hz: float) -> str:
    """Write a span of frequencies: ``400 MHz``, ``396 to 404 MHz``."""
    scale, unit = next(((s, u) for s, u in ((1e9, "GHz"), (1e6, "MHz"), (1e3, "kHz")) if high_hz >= s), (1.0, "Hz"))
    low, high = f"{low_hz / scale:.5g}", f"{high_hz / scale:.5g}"
    return f"{high} {unit}" if low == high else f"{low} to {high} {unit}"
