"""Which one change explains measured lines best: levels in, a ranking out.

Every suspect is one thing that may be different, by each of several amounts, with the shifts of the output lines that
follow. What a line would be without any change is no one level, since nobody knows the phases of its paths: it is given
as draws over random phases. The likelihood of a measured level is the mean of normal densities around the draws,
shifted alike; lines count as independent. A suspect whose misfit, minus twice the log of its likelihood, is 6 larger is
e³ ≈ 20 times less likely, and that is where two are told apart. A line may also have a cause of its own, nothing to do
with the chain: that has a small probability, which keeps one stray line from deciding everything.

References
----------
.. [1] A. W. F. Edwards, "Likelihood", 1972 (support: differences of log likelihood compare hypotheses).
.. [2] P. J. Huber, "Robust Estimation of a Location Parameter", Ann. Math. Statist. 35, 1964 (contaminated samples).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

APART = 6.0
"""Difference of misfits from which one suspect is taken over another."""
_STRAY_SHARE = 0.01
"""Probability that a measured line has a cause of its own (our own choice)."""
_STRAY_RANGE_DB = 100.0
"""Levels such a line may have, all alike [dB]."""
_TAIL = 0.005
_DEVIATIONS = 3.0


@dataclass(frozen=True)
class Suspect:
    """One change, by several amounts.

    Attributes
    ----------
    amounts : (amounts,) float
        Of the change, in the suspect's own unit.
    shift_db : (amounts, lines) float
        By how much the output lines rise.
    """

    amounts: Array
    shift_db: Array


@dataclass(frozen=True)
class Readings:
    """What was measured, against what may be expected without any change.

    Attributes
    ----------
    where : (measured,) int
        Place of each measured line among all lines.
    level_db : (measured,) float
    draws_db : (draws, measured) float
        Levels expected without any change, over random phases.
    deviation_db : (measured,) float
        Standard deviation of a reading, and of what else is uncertain beside phases; above zero.
    """

    where: NDArray[np.intp]
    level_db: Array
    draws_db: Array
    deviation_db: Array

    def misfit(self, shift_db: Array) -> Array:
        """Return minus twice the log likelihood of shifts of all lines, (amounts, lines) -> (amounts,)."""
        over = self._over(shift_db[:, self.where])
        return np.asarray(np.sum(over, axis=1))

    def _over(self, shift_db: Array) -> Array:
        """Return the misfit of every line, (amounts, measured)."""
        off = (self.level_db - self.draws_db - shift_db[:, np.newaxis, :]) / self.deviation_db
        density = np.mean(np.exp(-(off**2) / 2), axis=1)
        stray = self.deviation_db * np.sqrt(2 * np.pi) / _STRAY_RANGE_DB
        return np.asarray(-2 * np.log((1 - _STRAY_SHARE) * density + _STRAY_SHARE * stray))

    def unexplained(self, shift_db: Array) -> NDArray[np.intp]:
        """Return which measured lines lie outside nearly all draws, shifted by (lines,), and three deviations more."""
        low, high = np.quantile(self.draws_db + shift_db[self.where], (_TAIL, 1 - _TAIL), axis=0)
        room = _DEVIATIONS * self.deviation_db
        return np.flatnonzero((self.level_db < low - room) | (self.level_db > high + room))


@dataclass(frozen=True)
class Fit:
    """The amount at which a suspect is most likely.

    Attributes
    ----------
    suspect : int
        Its place among the suspects.
    misfit : float
        Minus twice the log likelihood.
    shift_db : (lines,) float
    """

    suspect: int
    amount: float
    misfit: float
    shift_db: Array


def explain(readings: Readings, suspects: Sequence[Suspect]) -> list[Fit]:
    """Rank suspects by how well they explain measured levels.

    Parameters
    ----------
    readings : Readings
    suspects : sequence of Suspect

    Returns
    -------
    list of Fit
        One for each suspect, least misfit first; of amounts that do as well the smaller change.
    """
    fits = []
    for i, suspect in enumerate(suspects):
        misfit = readings.misfit(suspect.shift_db)
        best = int(np.lexsort((np.abs(suspect.amounts), np.round(misfit, 9)))[0])
        fits.append(Fit(i, float(suspect.amounts[best]), float(misfit[best]), suspect.shift_db[best]))
    return sorted(fits, key=lambda fit: (round(fit.misfit, 9), fit.suspect))


def telling_line(one_db: Array, other_db: Array, candidates: NDArray[np.bool_], *, faintest_db: float) -> int | None:
    """Return the line that two explanations differ most about, of those loud enough in either; None without one."""
    loud = candidates & (np.maximum(one_db, other_db) > faintest_db)
    if not loud.any():
        return None
    apart = np.where(loud, np.abs(np.maximum(one_db, faintest_db) - np.maximum(other_db, faintest_db)), -1.0)
    return int(np.argmax(apart))
