"""Preferred numbers for resistors and capacitors: the E series of IEC 60063.

References
----------
.. [1] IEC 60063, "Preferred number series for resistors and capacitors", tables of E3 to E24 and of E48 to E192.
"""

from __future__ import annotations

import bisect
import math
from collections.abc import Mapping, Sequence

from harmonic_planner.model import PlannerError

_E24 = (
    1.0, 1.1, 1.2, 1.3, 1.5, 1.6, 1.8, 2.0, 2.2, 2.4, 2.7, 3.0,
    3.3, 3.6, 3.9, 4.3, 4.7, 5.1, 5.6, 6.2, 6.8, 7.5, 8.2, 9.1,
)  # fmt: skip
_E96 = (
    1.00, 1.02, 1.05, 1.07, 1.10, 1.13, 1.15, 1.18, 1.21, 1.24, 1.27, 1.30,
    1.33, 1.37, 1.40, 1.43, 1.47, 1.50, 1.54, 1.58, 1.62, 1.65, 1.69, 1.74,
    1.78, 1.82, 1.87, 1.91, 1.96, 2.00, 2.05, 2.10, 2.15, 2.21, 2.26, 2.32,
    2.37, 2.43, 2.49, 2.55, 2.61, 2.67, 2.74, 2.80, 2.87, 2.94, 3.01, 3.09,
    3.16, 3.24, 3.32, 3.40, 3.48, 3.57, 3.65, 3.74, 3.83, 3.92, 4.02, 4.12,
    4.22, 4.32, 4.42, 4.53, 4.64, 4.75, 4.87, 4.99, 5.11, 5.23, 5.36, 5.49,
    5.62, 5.76, 5.90, 6.04, 6.19, 6.34, 6.49, 6.65, 6.81, 6.98, 7.15, 7.32,
    7.50, 7.68, 7.87, 8.06, 8.25, 8.45, 8.66, 8.87, 9.09, 9.31, 9.53, 9.76,
)  # fmt: skip

SERIES: Mapping[str, tuple[float, ...]] = {
    "E3": _E24[::8],
    "E6": _E24[::4],
    "E12": _E24[::2],
    "E24": _E24,
    "E48": _E96[::2],
    "E96": _E96,
}
"""Name of the series -> its numbers in one decade, 1 to below 10, ascending."""


def grid_values(series: str, *, smallest: float, largest: float) -> tuple[float, ...]:
    """List the preferred values of a series within a range.

    Parameters
    ----------
    series : str
        ``E3``, ``E6``, ``E12``, ``E24``, ``E48`` or ``E96``.
    smallest, largest : float
        Ends of the range, both included, in any unit [same unit as the result]; above zero.

    Returns
    -------
    tuple of float
        Ascending; empty where no number of the series lies in the range.

    Raises
    ------
    PlannerError
        For an unknown series or an empty range.

    Notes
    -----
    Values are formed as decimal numbers (``4.7e-9`` and not 4.7 × 1e-9), so that each is the nearest float to what is
    printed on the reel.

    Examples
    --------
    >>> grid_values("E6", smallest=1e-9, largest=10e-9)
    (1e-09, 1.5e-09, 2.2e-09, 3.3e-09, 4.7e-09, 6.8e-09, 1e-08)
    """
    if series not in SERIES:
        raise PlannerError(f"series {series!r} is not known; allowed: {', '.join(SERIES)}")
    if not 0 < smallest <= largest < math.inf:
        raise PlannerError(f"range {smallest!r} to {largest!r}: both ends must be above zero, the smaller one first")
    decades = range(math.floor(math.log10(smallest)) - 1, math.floor(math.log10(largest)) + 2)
    values = (float(f"{number}e{decade}") for decade in decades for number in SERIES[series])
    return tuple(value for value in values if smallest <= value <= largest)


def nearest(value: float, grid: Sequence[float]) -> float:
    """Return the grid value nearest to a wanted one by ratio.

    Parameters
    ----------
    value : float
        What is wanted, above zero [unit of the grid].
    grid : sequence of float
        Ascending, above zero, not empty.

    Returns
    -------
    float
        The member of `grid` whose ratio to `value` is nearest to one; the smaller of two that are equally near.

    Examples
    --------
    >>> nearest(0.726e-9, grid_values("E12", smallest=0.1e-9, largest=1e-6))
    6.8e-10
    """
    place = bisect.bisect_left(grid, value)
    neighbours = grid[max(place - 1, 0) : place + 1]
    return min(neighbours, key=lambda candidate: abs(math.log(candidate / value)))
