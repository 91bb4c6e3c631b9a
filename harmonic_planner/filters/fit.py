"""Values for which a ladder as built behaves like the ideal one: a path of growing strays, and a fit at its end.

Both work on values relative to the ideal ones, which may become negative on the way: a capacitor that would have to be
−0.08 pF says by how much the strays exceed what is wanted.

References
----------
.. [1] E. L. Allgower, K. Georg, "Introduction to Numerical Continuation Methods", 2003, ch. 2 (Euler-Newton steps).
.. [2] J. Nocedal, S. J. Wright, "Numerical Optimization", 2nd ed., 2006, ch. 10 (Gauss-Newton and Levenberg-Marquardt).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.misfit import Misfit

Floats = NDArray[np.float64]

NUDGE = 1e-6
"""Relative change of a value, or of all strays, for a difference quotient."""
LEAST_SLOPES_DB = (0.3, 1.0)
"""Along the path, directions that change the response less than this per unit of change are hardly moved. Free values
are led farther by the first, which serves best in most cases, and kept from going astray by the second."""
PRIOR_DB = 0.1
"""In the fit, what a change of a value by all of itself costs: values that the response leaves free stay."""
LEAST_SIZE = 0.05
"""Changes of a value are judged against itself, and of one below this, about to change its sign, against this."""
LONGEST_STRIDE = 0.25
"""Of the path from no strays to all."""
MOST_STRIDES = 60
STRIDES = 5
"""From one set of given values to another."""
LONGEST_FOLLOW = 0.3
"""In one of these, in the logarithm."""
MOST_FITS = 25
SETTLED = 5e-3
"""A fit ends when a step reduces the mean square by less than this fraction."""
EXACT_DB2 = 1e-16
"""Mean square below which nothing is left to fit."""
DAMPINGS = np.array([1e-6, 1e-4, 1e-3, 1e-2, 0.3])
"""Tried side by side, as fractions of the largest curvature."""


def grow(misfit: Misfit, *, least_slope_db: float = LEAST_SLOPES_DB[0]) -> Floats:
    """Follow the solution from no strays, where it is the ideal circuit, to all of them.

    Parameters
    ----------
    misfit : Misfit
        The circuit and its strays.
    least_slope_db : float
        One of `LEAST_SLOPES_DB`.

    Returns
    -------
    ndarray
        (element,) values over ideal values, of any sign; near the solution if there is one.

    Notes
    -----
    Euler-Newton steps on `Misfit.distance`, the more and shorter the narrower the band: within one step no value
    moves by more than half the band's width, by which a resonance would leave it.
    """
    ideal = misfit.ideal_values
    count = ideal.size
    nudges = np.concatenate([np.zeros((1, count)), NUDGE * np.eye(count), np.zeros((1, count))])
    relative, grown = np.ones(count), 0.0
    for _ in range(MOST_STRIDES):
        if grown >= 1:
            break
        strays = np.full(count + 2, grown)
        strays[-1] += NUDGE
        around = misfit.distance((relative + nudges) * ideal, strays=strays)
        slopes = (around[1:] - around[0]).T / NUDGE
        by_value, by_strays = slopes[:, :count], slopes[:, count]
        normal = by_value.T @ by_value + least_slope_db**2 * np.eye(count)
        aims = np.stack([by_value.T @ around[0], by_value.T @ by_strays], axis=1)
        back, along = np.linalg.solve(normal, -aims).T
        size = np.maximum(np.abs(relative), LEAST_SIZE)
        fastest = float((np.abs(along) / size).max())
        stride = min(1 - grown, LONGEST_STRIDE, misfit.half_width / fastest if fastest > 0 else 1.0)
        step = back + along * stride
        longest = float((np.abs(step) / size).max())
        relative = relative + step * min(1.0, 2 * misfit.half_width / longest if longest > 0 else 1.0)
        grown += stride
    return relative


def carry(misfit: Misfit, start: Floats, moved: Floats, free: Sequence[int]) -> Floats:
    """Move some values to given ones in strides, the others following so that the response stays as near as it can.

    Parameters
    ----------
    misfit : Misfit
        The circuit and its strays.
    start : ndarray
        (element,) values over ideal values, above zero.
    moved : ndarray
        (element,) where all but the free ones go; above zero.
    free : sequence of int
        Positions of the values that follow.

    Returns
    -------
    ndarray
        (element,) values over ideal values.
    """
    ideal, places = misfit.ideal_values, list(free)
    nudges = np.concatenate([np.zeros((1, ideal.size)), NUDGE * np.eye(ideal.size)[places]])
    wanted = misfit.distance(start * ideal)[0]
    relative, following = start, np.ones(len(places))
    for share in np.arange(1, STRIDES + 1) / STRIDES:
        relative = start * (moved / start) ** share
        relative[places] = start[places] * following
        around = misfit.distance(relative * (1 + nudges) * ideal)
        slopes = (around[1:] - around[0]).T / NUDGE
        normal = slopes.T @ slopes + LEAST_SLOPES_DB[0] ** 2 * np.eye(len(places))
        step = np.linalg.solve(normal, -slopes.T @ (around[0] - wanted))
        following = following * np.exp(np.clip(step, -LONGEST_FOLLOW, LONGEST_FOLLOW))
        relative[places] = start[places] * following
    return relative


def fit(misfit: Misfit, start: ArrayLike, *, least: ArrayLike = -np.inf, most: ArrayLike = np.inf) -> Floats:
    """Reduce the misfit from a near start.

    Parameters
    ----------
    misfit : Misfit
        The circuit and its strays.
    start : array_like
        (element,) values over ideal values.
    least, most : array_like
        (element,) or scalar bounds on them; equal where a value is given.

    Returns
    -------
    ndarray
        (element,) values over ideal values, within the bounds.

    Notes
    -----
    Levenberg-Marquardt with several dampings tried at once. A value at a bound that its slope points across is held.
    """
    ideal = misfit.ideal_values
    least, most = (np.broadcast_to(np.asarray(bound, dtype=np.float64), ideal.shape) for bound in (least, most))
    origin = relative = np.clip(np.asarray(start, dtype=np.float64), least, most)
    nudges = np.concatenate([np.zeros((1, ideal.size)), NUDGE * np.eye(ideal.size)])

    def squares(trials: Floats) -> Floats:
        fitted = np.square(misfit.residual(trials * ideal)).sum(axis=1)
        return np.asarray(fitted + np.square(PRIOR_DB * (trials - origin)).sum(axis=1))

    for _ in range(MOST_FITS):
        around = misfit.residual((relative + nudges) * ideal)
        slopes = (around[1:] - around[0]).T / NUDGE
        prior = PRIOR_DB * (relative - origin)
        square = float(around[0] @ around[0] + prior @ prior)
        gradient = slopes.T @ around[0] + PRIOR_DB * prior
        free = np.flatnonzero(~((relative <= least) & (gradient > 0)) & ~((relative >= most) & (gradient < 0)))
        free = free[least[free] < most[free]]
        if square < EXACT_DB2 or not free.size:
            break
        size = np.maximum(np.abs(relative[free]), LEAST_SIZE)
        scaled = slopes[:, free] * size
        curvature, directions = np.linalg.eigh(scaled.T @ scaled + PRIOR_DB**2 * np.diag(size**2))
        damped = curvature + DAMPINGS[:, np.newaxis] * curvature[-1]
        trials = np.tile(relative, (DAMPINGS.size, 1))
        trials[:, free] -= size * (((gradient[free] * size) @ directions / damped) @ directions.T)
        trials = np.clip(trials, least, most)
        reached = squares(trials)
        best = int(reached.argmin())
        if not reached[best] < square:
            break
        relative = trials[best]
        if reached[best] > (1 - SETTLED) * square:
            break
    return relative
