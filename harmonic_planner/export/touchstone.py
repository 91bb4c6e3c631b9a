"""A filter as built as a Touchstone file of two ports, version 1, written by scikit-rf.

References
----------
.. [1] IBIS Open Forum, "Touchstone File Format Specification", version 1.1 (the option line; a two-port's order S11,
   S21, S12, S22; ``!`` starts a comment).
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.export.comments import comment_text
from harmonic_planner.filters.response import Response
from harmonic_planner.model import PlannerError

BAND_POINTS = 81
"""Frequencies within the filter's band, both edges with it."""
SAME = 1e-9
"""Frequencies nearer than this fraction are one."""


def touchstone(
    forward: Response, backward: Response, impedance_ohm: float, *, comments: Sequence[tuple[str, str]] = ()
) -> str:
    """Write a two-port as a Touchstone file.

    Parameters
    ----------
    forward : Response
        From source to load: S11 and S21.
    backward : Response
        Of the reversed circuit at the same frequencies: its S11 is S22. The two-port is reciprocal: S12 = S21.
    impedance_ohm : float
        Resistance of source and load alike, the file's reference [ohm].
    comments : sequence of (str, str)
        What a line is about, in our own words, and its text, which may be the user's: ``("Filter", title)``.

    Returns
    -------
    str
        Option line ``# Hz S RI R <impedance>``; all digits of every number; no date. The same responses give the same
        bytes.

    Raises
    ------
    PlannerError
        Where the frequencies are not ascending or not the same both ways, or the impedance is not above zero.
    """
    import skrf  # heavy, and only this function needs it

    frequency = forward.frequency_hz
    if not np.array_equal(frequency, backward.frequency_hz) or not np.all(np.diff(frequency) > 0):
        raise PlannerError("a Touchstone file needs ascending frequencies, the same forward and backward")
    if not 0 < impedance_ohm < np.inf:
        raise PlannerError(f"impedance = {impedance_ohm!r} ohm must be a finite number above zero")
    s = np.empty((frequency.size, 2, 2), dtype=np.complex128)
    s[:, 0, 0], s[:, 1, 1] = forward.s11, backward.s11
    s[:, 1, 0] = s[:, 0, 1] = forward.s21
    network = skrf.Network(
        f=frequency,
        f_unit="Hz",
        s=s,
        z0=impedance_ohm,
        name="filter",
        comments="\n".join(f" {comment_text(what)}: {comment_text(text)}" for what, text in comments),
    )
    return str(network.write_touchstone(return_string=True, form="ri", skrf_comment=False))


def frequencies_hz(
    carrier_hz: tuple[float, float],
    lines_hz: Iterable[tuple[float, float]],
    *,
    passband_hz: tuple[float, float],
    sweep_hz: tuple[float, float],
    points: int = 401,
) -> NDArray[np.float64]:
    """Return the frequencies worth a row in a file.

    Parameters
    ----------
    carrier_hz : tuple of float
        Span of the carrier [Hz].
    lines_hz : iterable of tuple of float
        Spans of the unwanted lines [Hz].
    passband_hz : tuple of float
        Edges of the filter's band [Hz].
    sweep_hz : tuple of float
        Ends of the sweep [Hz].
    points : int
        Of the sweep, equally spaced in the logarithm.

    Returns
    -------
    ndarray
        (frequency,) ascending [Hz]: the sweep, the filter's band, and exactly both ends and the middle of every span,
        beside which a point of the sweep that is all but the same has made way.
    """
    spans = (carrier_hz, *lines_hz)
    exact = np.unique([edge for low, high in spans for edge in (low, (low + high) / 2, high)])
    grid = np.concatenate((np.geomspace(*sweep_hz, points), np.linspace(*passband_hz, BAND_POINTS)))
    apart = np.abs(grid[:, np.newaxis] - exact).min(axis=1) > SAME * grid
    return np.unique(np.concatenate((exact, grid[apart])))
