"""The limits asked at a node, as one level for each line relative to the carrier there.

A general limit (dBc, or that of Recommendation ITU-R SM.329, category A) holds everywhere but in the bands of a mask
over frequency or over the offset from the carrier, which replace it; a limit in dBm stands beside all of them. A line
and the carrier move together over the span of the source, and the strictest limit that the line meets on its way holds.
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.model import Limits
from harmonic_planner.physics.emission import sm329_category_a_db

Array = NDArray[np.float64]
Band = tuple[float, float, float]
"""Lower end, upper end, limit [dBc]."""

_ROUNDING = 1e-9
"""Relative width of a band's edge, so that a line exactly on it is inside."""


def limits_dbc(
    limits: Limits, *, low_hz: Array, high_hz: Array, carrier_hz: tuple[float, float], carrier_dbm: float
) -> Array:
    """Return the limit of each line, the strictest over its span.

    Parameters
    ----------
    limits : Limits
    low_hz, high_hz : (lines,) float
        Span of each line [Hz].
    carrier_hz : (float, float)
        Span of the carrier, which the offsets are from [Hz].
    carrier_dbm : float
        Level of the carrier, highest over its span [dBm].

    Returns
    -------
    (lines,) float
        Limit [dBc]; infinite where nothing is asked.
    """
    general = general_limit_dbc(limits, carrier_dbm)
    absolute = np.inf if limits.limit_dbm is None else limits.limit_dbm - carrier_dbm
    found = np.full(low_hz.shape, absolute)
    for i, (low, high) in enumerate(zip(low_hz, high_hz, strict=True)):
        off_low, off_high = abs(low - carrier_hz[0]), abs(high - carrier_hz[1])
        bands = [
            *_met([(b.low_hz, b.high_hz, b.limit_dbc) for b in limits.mask], low, high),
            *_met([(b.low_hz, b.high_hz, b.limit_dbc) for b in limits.offset_mask], off_low, off_high),
        ]
        asked = [limit for _, _, limit in bands]
        if general is not None and not _covered(low / high, bands):
            asked.append(general)
        found[i] = min([*asked, absolute])
    return found


def general_limit_dbc(limits: Limits, carrier_dbm: float) -> float | None:
    """Return the limit outside the masks [dBc], None where there is none.

    Parameters
    ----------
    limits : Limits
    carrier_dbm : float
        Level of the carrier [dBm].
    """
    if limits.sm329_category_a:
        return -sm329_category_a_db(carrier_dbm)
    return limits.limit_dbc


def _met(bands: Iterable[Band], low: float, high: float) -> list[Band]:
    """Return the bands that [low, high] meets, their ends as shares of `high`."""
    if high <= 0:  # the carrier itself, which is no unwanted line
        return []
    ends = ((b_low * (1 - _ROUNDING) / high, b_high * (1 + _ROUNDING) / high, limit) for b_low, b_high, limit in bands)
    return [b for b in ends if b[0] <= 1.0 and b[1] >= low / high]


def _covered(start: float, bands: Iterable[Band]) -> bool:
    """Tell whether `bands` cover [start, 1] without a gap."""
    reached = start
    for low, high, _ in sorted(bands):
        if low > reached:
            return False
        reached = max(reached, high)
        if reached >= 1.0:
            return True
    return False
