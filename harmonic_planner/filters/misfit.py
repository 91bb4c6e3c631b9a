"""How far a ladder as built, losses taken out, is from the ideal one: the measure that absorbing and snapping reduce.

At each frequency the two are compared by their level 10 log10(|K|² + ε²), K = S11/S21. In the passband |K| is the
reflection, so that a difference of levels is one of return loss; beyond it |1/K| is the transmission, so that it is one
of attenuation. ε keeps a return loss better than `RETURN_LOSS_WORTH_DB` from counting. One more difference is that of
the bands' centres.

Notes
-----
The weights are the project's own choice: the band to be passed counts twice as much as the rest of the filter's band,
the skirts, to twice that band, a fifth; a centre that is off by 0.1 % as much as 0.5 dB everywhere.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.lossless import LosslessLadder
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Kit

Floats = NDArray[np.float64]

RETURN_LOSS_WORTH_DB = 30.0
"""A return loss beyond this counts as this; common practice, no source (memory)."""
EDGE_DB = 6.0
"""A band is measured between the points that lie this far below its best point."""
BAND_WEIGHT = 0.5
"""Of a decibel in the filter's band against one in the band to be passed."""
SKIRT_WEIGHT = 0.2
"""Of a decibel on the skirts."""
CENTRE_WEIGHT_DB = 500.0
"""Decibels for a centre that is off by the whole of itself."""
ONE_SIDED_WIDTH = 0.35
"""Taken for half the band, ln f, of a filter with one edge."""
FARTHEST = 3.0
"""Factor on the passband's ends within which an edge counts as one."""


@dataclass(frozen=True)
class Band:
    """Where the attenuation passes `EDGE_DB`; an edge is None where the response does not fall off on that side."""

    low_hz: float | None
    high_hz: float | None

    @property
    def centre_hz(self) -> float:
        """Geometric mean of the edges; the only edge of a low-pass or high-pass; NaN without any [Hz]."""
        edges = [edge for edge in (self.low_hz, self.high_hz) if edge is not None]
        return math.prod(edges) ** (1 / len(edges)) if edges else math.nan


class Misfit:
    """Difference of a ladder as built from the ideal one, in and near the passband.

    Parameters
    ----------
    ideal : Circuit
        A ladder with ideal values.
    kit : Kit
        Strays of parts and board.
    passband_hz : tuple of float
        The band to be passed, low and high end [Hz].

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder.
    PlannerError
        For a passband that does not ascend.
    """

    def __init__(self, ideal: Circuit, kit: Kit, passband_hz: tuple[float, float]) -> None:
        low, high = passband_hz
        if not 0 < low <= high < math.inf:
            raise PlannerError(f"passband_hz = {passband_hz!r}: both ends must be above zero, the lower one first")
        self.ideal_values = np.array([element.value for element in ideal.elements])
        """(element,) [henry or farad]."""
        self._ladder = LosslessLadder(ideal, kit)
        self._passband = np.geomspace(low, high, 61)
        self.ideal_band = self.band(self.ideal_values, strays=0.0)
        self._frequency_hz, self._weight = self._grid(points=15 + 2 * len(ideal.elements))
        self._wanted = self._ladder.characteristic(self.ideal_values, self._frequency_hz, strays=0.0)[0]
        self._edges = self._edge_weights()

    @property
    def half_width(self) -> float:
        """Half the ideal band, ln f; `ONE_SIDED_WIDTH` where it has one edge only."""
        low, high = self.ideal_band.low_hz, self.ideal_band.high_hz
        return ONE_SIDED_WIDTH if low is None or high is None else math.log(high / low) / 2

    def distance(self, values: ArrayLike, *, second: ArrayLike | None = None, strays: ArrayLike = 1.0) -> Floats:
        """Return the difference of K, real and imaginary part, over |K| where that is large.

        Parameters
        ----------
        values, second, strays : array_like
            As for `LosslessLadder.characteristic`.

        Returns
        -------
        ndarray
            (trial, 2·frequency), near decibels where it is small.

        Notes
        -----
        Smoother than `residual`, for values that are far off: K is a ratio of low-order polynomials in every value.
        It also holds the phase of K, which an ideal response does not ask for.
        """
        k = self._ladder.characteristic(values, self._frequency_hz, second=second, strays=strays)
        scaled = (k - self._wanted) * (20 / math.log(10) * self._weight / (0.1 + np.abs(self._wanted)))
        return np.concatenate([scaled.real, scaled.imag], axis=1)

    def residual(self, values: ArrayLike, *, second: ArrayLike | None = None, strays: ArrayLike = 1.0) -> Floats:
        """Return the weighted differences of level and of the centre.

        Parameters
        ----------
        values, second, strays : array_like
            As for `LosslessLadder.characteristic`.

        Returns
        -------
        ndarray
            (trial, frequency + 1) [dB], so scaled that the sum of squares is a mean square.
        """
        k = self._ladder.characteristic(values, self._frequency_hz, second=second, strays=strays)
        power, wanted = _square(k), _square(self._wanted)
        levels = (_level(power) - _level(wanted)) * self._weight
        shift = (10 * np.log10((1 + power) / (1 + wanted))) @ self._edges
        return np.concatenate([levels, shift[:, np.newaxis] * CENTRE_WEIGHT_DB], axis=1)

    def cost_db(self, values: ArrayLike, *, second: ArrayLike | None = None) -> Floats:
        """Return the root mean square of the differences, (trial,) [dB]."""
        return np.asarray(np.sqrt(np.square(self.residual(values, second=second)).sum(axis=1)))

    def return_loss_db(self, values: ArrayLike, *, second: ArrayLike | None = None, strays: float = 1.0) -> float:
        """Return the least return loss over the passband [dB], of one set of values."""
        k = self._ladder.characteristic(values, self._passband, second=second, strays=strays)[0]
        with np.errstate(divide="ignore"):
            return float(np.min(10 * np.log10(1 + 1 / _square(k))))

    @property
    def ideal_return_loss_db(self) -> float:
        """Least return loss over the passband of the ideal circuit [dB]."""
        return self.return_loss_db(self.ideal_values, strays=0.0)

    def return_loss_change_db(self, values: ArrayLike, *, second: ArrayLike | None = None) -> float:
        """Return the least return loss less the ideal one's, either counted up to `RETURN_LOSS_WORTH_DB` [dB]."""
        built = self.return_loss_db(values, second=second)
        return min(built, RETURN_LOSS_WORTH_DB) - min(self.ideal_return_loss_db, RETURN_LOSS_WORTH_DB)

    def centre_error(self, values: ArrayLike, *, second: ArrayLike | None = None) -> float:
        """Return by how much the centre of the ideal band's edges is off, as a fraction; NaN where one is gone."""
        built, ideal = self.band(values, second=second, farthest=1.5 * FARTHEST), self.ideal_band
        low_hz = built.low_hz if ideal.low_hz is not None else None
        high_hz = built.high_hz if ideal.high_hz is not None else None
        if (ideal.low_hz, low_hz).count(None) == 1 or (ideal.high_hz, high_hz).count(None) == 1:
            return math.nan
        return Band(low_hz, high_hz).centre_hz / ideal.centre_hz - 1

    def band(
        self, values: ArrayLike, *, second: ArrayLike | None = None, strays: float = 1.0, farthest: float = FARTHEST
    ) -> Band:
        """Find the edges nearest to the passband's best point.

        Parameters
        ----------
        values, second : array_like
            One set of values, as for `LosslessLadder.characteristic`.
        strays : float
            Factor on all strays.
        farthest : float
            Factor on the passband's ends within which to look.

        Returns
        -------
        Band
            Where the attenuation first exceeds its least in the passband by `EDGE_DB`.
        """

        def attenuation_db(frequency_hz: Floats) -> Floats:
            k = self._ladder.characteristic(values, frequency_hz, second=second, strays=strays)[0]
            return np.asarray(10 * np.log10(1 + _square(k)))

        at = attenuation_db(self._passband)
        best_hz, limit_db = float(self._passband[at.argmin()]), float(at.min()) + EDGE_DB
        to_low, to_high = math.log(best_hz / self._passband[0]), math.log(self._passband[-1] / best_hz)
        low = _first_above(limit_db, lambda away: attenuation_db(best_hz * np.exp(-away)), to_low + math.log(farthest))
        high = _first_above(limit_db, lambda away: attenuation_db(best_hz * np.exp(away)), to_high + math.log(farthest))
        return Band(
            None if low is None else best_hz * math.exp(-low),
            None if high is None else best_hz * math.exp(high),
        )

    def _grid(self, points: int) -> tuple[Floats, Floats]:
        """Return frequencies over twice the ideal band and their weights, whose squares add up to one."""
        low, high = self.ideal_band.low_hz, self.ideal_band.high_hz
        first = math.log(self._passband[0] if low is None else low)
        last = math.log(self._passband[-1] if high is None else high)
        inside = first + (last - first) * (1 - np.cos(np.pi * np.arange(points) / (points - 1))) / 2
        beyond = np.linspace(0.15, 1.0, 6) * self.half_width
        below, above = (first - beyond[::-1]) if low else beyond[:0], (last + beyond) if high else beyond[:0]
        passed = np.log(self._passband[::6])
        log_hz = np.concatenate([below, inside, above, passed])
        weight = np.where((log_hz >= first) & (log_hz <= last), BAND_WEIGHT, SKIRT_WEIGHT)
        weight[-passed.size :] = 1.0
        return np.exp(log_hz), weight / math.sqrt(float(np.square(weight).sum()))

    def _edge_weights(self) -> Floats:
        """Return the shift of the centre, ln f, per decibel of attenuation at each frequency of the grid."""
        weights = np.zeros_like(self._frequency_hz)
        edges = [edge for edge in (self.ideal_band.low_hz, self.ideal_band.high_hz) if edge is not None]
        for edge in edges:
            step = 1e-4 * self.half_width
            around = edge * np.exp([-step, step])
            k = self._ladder.characteristic(self.ideal_values, around, strays=0.0)[0]
            slope = float(np.diff(10 * np.log10(1 + _square(k)))[0]) / (2 * step)
            weights[np.abs(self._frequency_hz / edge - 1).argmin()] = -1 / (slope * len(edges))
        return weights


def _square(k: NDArray[np.complex128]) -> Floats:
    """Return |K|²."""
    return np.asarray(k.real**2 + k.imag**2)


def _level(power: Floats) -> Floats:
    return np.asarray(10 * np.log10(power + 10 ** (-RETURN_LOSS_WORTH_DB / 10)))


def _first_above(limit: float, of_distance: Callable[[Floats], Floats], farthest: float) -> float | None:
    """Return the least distance, ln f, at which a curve exceeds the limit, in ever finer steps; None if nowhere."""
    away, before = np.geomspace(2e-3, farthest, 160), 0.0
    for _ in range(6):
        over = of_distance(away) > limit
        if not over.any():
            return None
        first = int(over.argmax())
        before, after = float(away[first - 1]) if first else before, float(away[first])
        away = np.linspace(before, after, 17)[1:]
    return after
