"""Amplifiers: gain up to a saturated output, and harmonic lines of their own."""

from __future__ import annotations

from typing import overload

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.model import Amplifier, PlannerError

Array = NDArray[np.float64]


@overload
def output_dbm(amplifier: Amplifier, input_dbm: float) -> float: ...
@overload
def output_dbm(amplifier: Amplifier, input_dbm: Array) -> Array: ...
def output_dbm(amplifier: Amplifier, input_dbm: float | Array) -> float | Array:
    """Return the carrier behind an amplifier: input plus gain, or the saturated output if that is lower.

    Parameters
    ----------
    amplifier
        The gain block; ``saturation_dbm`` None is linear without end.
    input_dbm
        Carrier at its input, a number or an array [dBm].

    Returns
    -------
    float or ndarray
        Carrier at its output, same shape [dBm].

    Notes
    -----
    The corner is sharp: a real amplifier is about 1 dB lower where the two asymptotes meet (common practice, no
    source).
    """
    linear_dbm = input_dbm + amplifier.gain_db
    if amplifier.saturation_dbm is None:
        return linear_dbm
    limited = np.minimum(linear_dbm, amplifier.saturation_dbm)
    return limited if isinstance(input_dbm, np.ndarray) else float(limited)


def amplifier_lines(amplifier: Amplifier, *, carrier_index: int, count: int) -> Array:
    """Return the lines an amplifier adds, relative to the carrier at its output.

    Parameters
    ----------
    amplifier
        ``lines_dbc`` maps the harmonic of the amplified carrier to its level [dBc].
    carrier_index
        Grid index of the carrier.
    count
        Number of grid lines, j = 1 … count.

    Returns
    -------
    ndarray, shape (count,)
        Amplitude at line j, index j − 1; 0 at the carrier itself. Harmonics beyond `count` are dropped.

    Raises
    ------
    PlannerError
        If a line is given that is not a harmonic from 2 on.
    """
    lines = np.zeros(count)
    for harmonic, level_dbc in amplifier.lines_dbc.items():
        if harmonic < 2:
            raise PlannerError(
                f"amplifier.lines: line {harmonic}: allowed are harmonics of the amplified carrier, from 2"
            )
        index = harmonic * carrier_index
        if index <= count:
            lines[index - 1] = 10 ** (level_dbc / 20)
    return lines
