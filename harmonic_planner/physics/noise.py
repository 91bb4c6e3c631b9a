"""Phase noise of a chain: the source's, raised by the factor, and every amplifier's thermal floor.

References
----------
W. P. Robins, *Phase Noise in Signal Sources*, 1982, ch. 3 and 5 (additive noise; multiplication).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

THERMAL_PHASE_DBM_HZ = -177.0
"""Half of kT at 290 K: the share of thermal noise that is phase noise [dBm/Hz]."""


def raised_db(factor: ArrayLike) -> Array:
    """Return by how much a frequency multiplier raises phase noise: 20 log10 N.

    Parameters
    ----------
    factor
        Factor N ≥ 1, any shape.

    Returns
    -------
    ndarray
        Rise [dB], same shape.
    """
    return np.asarray(20 * np.log10(np.asarray(factor, dtype=float)))


def amplifier_floor_dbc_hz(noise_figure_db: ArrayLike, *, input_dbm: ArrayLike) -> Array:
    """Return the phase-noise floor of an amplifier: −177 + NF − P_in.

    Parameters
    ----------
    noise_figure_db
        Noise figure, any shape [dB].
    input_dbm
        Carrier at the amplifier's input, same shape [dBm].

    Returns
    -------
    ndarray
        Single-sideband phase noise at the amplifier's output [dBc/Hz].

    Notes
    -----
    Thermal noise is half amplitude and half phase noise; flicker noise of the amplifier is not counted.
    """
    return np.asarray(
        THERMAL_PHASE_DBM_HZ + np.asarray(noise_figure_db, dtype=float) - np.asarray(input_dbm, dtype=float)
    )


def phase_noise(
    source_dbc_hz: ArrayLike,
    *,
    factor: float,
    noise_figure_db: ArrayLike = (),
    input_dbm: ArrayLike = (),
    factor_after: ArrayLike = (),
) -> Array:
    """Return the phase noise at the output of a chain.

    Parameters
    ----------
    source_dbc_hz
        Phase noise of the source, shape (offset,) [dBc/Hz].
    factor
        Factor of the whole chain.
    noise_figure_db, input_dbm, factor_after
        Of every amplifier with a noise figure: that noise figure [dB], the carrier at its input [dBm] and the factor of
        the multipliers behind it; each shape (amplifier,).

    Returns
    -------
    ndarray, shape (offset,)
        Power sum of the raised source and all raised floors [dBc/Hz].
    """
    source = np.asarray(source_dbc_hz, dtype=float) + raised_db(factor)
    floors = amplifier_floor_dbc_hz(noise_figure_db, input_dbm=input_dbm) + raised_db(factor_after)
    return np.asarray(10 * np.log10(10 ** (source / 10) + np.sum(10 ** (floors / 10))))
