"""What leaks past a filter: a floor under its skirts."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.model import Isolation

_KNEE_HZ = 1e9
_SLOPE_DB_PER_DECADE = 20.0


def isolation_db(isolation: Isolation, frequency_hz: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the isolation from a filter's input to its output past it [dB].

    Parameters
    ----------
    isolation : Isolation
        Flat where the user gave a number; else it falls by 20 dB a decade above 1 GHz (common practice, no source).
    frequency_hz : (n,) float
    """
    if isolation.flat or not np.isfinite(isolation.level_db):
        return np.full(np.shape(frequency_hz), isolation.level_db)
    decades = np.log10(np.maximum(frequency_hz, _KNEE_HZ) / _KNEE_HZ)
    return np.asarray(isolation.level_db - _SLOPE_DB_PER_DECADE * decades)


def with_leakage(
    rejection_db: NDArray[np.float64],
    carrier_loss_db: float | NDArray[np.float64],
    leak_db: NDArray[np.float64],
    *,
    exponent: int,
) -> NDArray[np.float64]:
    """Return rejection with the leak added to the filter's own transmission.

    Parameters
    ----------
    rejection_db : (n,) float
        Of the filter alone, relative to its carrier [dB].
    carrier_loss_db : float or array
        The carrier's loss, since the leak is relative to the filter's input [dB].
    leak_db : (n,) float
        Isolation [dB]; infinite for none.
    exponent : {1, 2}
        Whether amplitudes or powers add.
    """
    through = 10 ** (-rejection_db * exponent / 20)
    past = 10 ** ((carrier_loss_db - leak_db) * exponent / 20)
    return np.asarray(-20 / exponent * np.log10(through + past))


def skirt_needed_db(
    required_db: NDArray[np.float64], carrier_loss_db: float, leak_db: NDArray[np.float64], *, exponent: int
) -> NDArray[np.float64]:
    """Return what the filter's own skirt must give so that with the leak `required_db` is met.

    Infinite where the leak alone is already too much.
    """
    allowed = 10 ** (-required_db * exponent / 20) - 10 ** ((carrier_loss_db - leak_db) * exponent / 20)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(allowed > 0, -20 / exponent * np.log10(np.maximum(allowed, 1e-300)), np.inf)
