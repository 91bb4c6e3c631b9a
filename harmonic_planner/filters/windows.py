"""Least order, bandwidth window and centre of one bandpass, losses and drift included.

With t = ln f0 and y = Δ/2 the mapping is Ω(f) = |sinh(ln f − t)|/y. The drift d moves the centre to f0·(1 ± d) and is
absorbed into the edges: the passband [p1, p2] into a = ln(p1/(1 + d)) and b = ln(p2/(1 − d)), a line below it into
s_l = ln(f_hi/(1 − d)), a line above it into s_u = ln(f_lo/(1 + d)). With the passband edge Ω_p and the rejection points
Ω_j of `passband` the centres allowed at a bandwidth are one interval::

    t ≥ b − asinh(Ω_p·y),   t ≥ s_l + asinh(Ω_l·y);     t ≤ a + asinh(Ω_p·y),   t ≤ s_u − asinh(Ω_u·y)

and a bandwidth is allowed where the interval is not empty, the midband loss is within its limit, and floor ≤ Δ ≤ cap.
Ω_p and Ω_j depend on Δ through the dissipation, so that the allowed bandwidths are found by a scan of Δ whose ends are
then refined (`bandwidths`).

Definitions
-----------
*Flatness* is the loss at the worst point of span and drift minus that at the best; Ω_p is the largest Ω with max − min
of A on [0, Ω] within it. *Carrier loss* is midband loss + flatness. A line is *satisfied* where A, at its least over
span and drift, is at least rejection + carrier loss; beyond Ω_j that holds for every Ω.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np

from harmonic_planner.filters.bandwidths import Centres, Found, centres_at, search
from harmonic_planner.filters.passband import LossyResponse, lossy_response, turning_points
from harmonic_planner.filters.task import Task, line_text, span_text
from harmonic_planner.model import Family
from harmonic_planner.physics.prototypes import DB_PER_LN, FloatArray, Prototype

__all__ = ["NARROWEST", "Task", "WindowResult", "centres", "least_order", "rejection_db", "scan", "solve"]

NARROWEST: Final = 1e-4
"""Least bandwidth that is looked at, as a fraction of the centre."""
_TOLERANCE: Final = 1e-9
"""Relative rounding allowed in a bandwidth, or in the width of a centre interval, that is asked about."""
_TOLERANCE_DB: Final = 1e-9
"""Rounding allowed when a ripple is compared with a flatness, or a loss with its limit [dB]."""


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
        Family by family, order 1 … `max_order`. Every order is tried, since the loss limit makes a higher order fail
        where a lower one serves.
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
    found = centres_at((prototype,), task, np.array([[bandwidth]]))
    return found.interval_hz(0, 0) if found.width[0, 0] >= -_TOLERANCE else None


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
            f"the line at {line_text(task, edges.overlap)} overlaps the carrier"
            f" ({span_text(*task.passband_hz)}) within the drift of {100.0 * task.drift:g} %"
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
    return float(sigma)


def _solve(prototypes: tuple[Prototype, ...], task: Task) -> tuple[WindowResult, ...]:
    """Solve several prototypes together, so that array operations are shared."""
    narrowest = [_narrowest(prototype, task) for prototype in prototypes]
    found: dict[int, WindowResult] = {
        i: WindowResult(prototype, feasible=False, reason=least)
        for i, (prototype, least) in enumerate(zip(prototypes, narrowest, strict=True))
        if isinstance(least, str)
    }
    rest = [i for i in range(len(prototypes)) if i not in found]
    if rest:
        start = np.array([least for least in narrowest if not isinstance(least, str)])
        outcome = search(tuple(prototypes[i] for i in rest), task, start)
        for row, i in enumerate(rest):
            found[i] = _result(prototypes[i], task, outcome, row, float(start[row]))
    return tuple(found[i] for i in range(len(prototypes)))


def _result(prototype: Prototype, task: Task, outcome: Found, row: int, narrowest: float) -> WindowResult:
    """Turn one row of a search into its result."""
    ends = outcome.ends
    if not outcome.feasible[row]:
        return WindowResult(prototype, feasible=False, reason=_why_not(prototype, task, ends, row, narrowest))
    return WindowResult(
        prototype,
        feasible=True,
        reason="",
        bandwidth_min=float(ends.bandwidth[row, 0]),
        bandwidth_max=float(ends.bandwidth[row, 1]),
        centres_min_hz=ends.interval_hz(row, 0),
        centres_max_hz=ends.interval_hz(row, 1),
        pieces=int(outcome.pieces[row]),
    )


def _why_not(prototype: Prototype, task: Task, found: Centres, p: int, start: float) -> str:
    """Say what fails at the narrowest bandwidth that passes the carrier."""
    bandwidth = float(found.bandwidth[p, 0])
    if found.passing[p, 0] < 0.0:
        return (
            f"no bandwidth up to {100.0 * task.cap:.3g} % passes {span_text(*task.passband_hz)}"
            f" with {task.flatness_db:g} dB flatness and {100.0 * task.drift:g} % drift"
        )
    low_by, high_by = int(found.low_by[p, 0]), int(found.high_by[p, 0])
    # half-way between what the two ends ask for, as far as the carrier still passes
    middle = 0.5 * float(found.low[p, 0] + found.high[p, 0])
    reach = math.asinh(float(found.omega[p, 0, 0]) * 0.5 * bandwidth)
    centre = min(max(middle, task.edges.b - reach), task.edges.a + reach)
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
        line = line_text(task, int(edges.index[j]))
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
