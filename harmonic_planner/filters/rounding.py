"""Least squares over values that can only be chosen from a list each: nearest points in the metric of the response.

To round every value by itself is poor where values can make up for each other, as those of one resonator do. Linearised
in the logarithms of the values, the misfit is |R·δ + o|² with R upper triangular: the last value meets one term alone,
the one before it two, and so on. So choices are made from the last to the first, keeping the best combinations so far.

References
----------
.. [1] L. Babai, "On Lovász' lattice reduction and the nearest lattice point problem", Combinatorica 6, 1986 (one
   combination kept).
.. [2] J. B. Anderson, S. Mohan, "Sequential coding algorithms: a survey and cost analysis", IEEE Trans. Communications
   32, 1984 (a fixed number kept).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

RIDGE = 0.01
"""Weight of a relative change itself: holds what the response does not."""
KEPT = 64


@dataclass(frozen=True)
class Triangle:
    """A linear least-squares problem, min |factor·δ + offset|² up to a constant."""

    factor: Floats
    """(n, n), upper triangular."""
    offset: Floats
    """(n,)"""

    @classmethod
    def of(cls, residual: Floats, slopes: Floats) -> Triangle:
        """Return the problem min |residual + slopes·δ|² + |RIDGE·δ|².

        Parameters
        ----------
        residual : ndarray
            (m,) at δ = 0.
        slopes : ndarray
            (m, n).

        Returns
        -------
        Triangle
            Of size n.
        """
        count = slopes.shape[1]
        basis, factor = np.linalg.qr(np.concatenate([slopes, RIDGE * np.eye(count)]))
        return cls(factor, np.concatenate([residual, np.zeros(count)]) @ basis)

    def last(self, count: int) -> Triangle:
        """Return the problem of the last unknowns, the others following at their best."""
        return Triangle(self.factor[-count:, -count:], self.offset[-count:])


def best_combinations(problem: Triangle, steps: Sequence[Floats], *, kept: int = KEPT) -> NDArray[np.intp]:
    """Search the choices for the combinations with the least squares.

    Parameters
    ----------
    problem : Triangle
        Of n unknowns.
    steps : sequence of ndarray
        n lists of values that an unknown may take.
    kept : int
        Combinations kept on the way.

    Returns
    -------
    ndarray
        (combination, n) positions in the lists, best first. All of them where `kept` is no less than their number;
        else those the search found, of which none need be the best.
    """
    chosen = np.zeros((1, 0))
    places = np.zeros((1, 0), dtype=np.intp)
    squares = np.zeros(1)
    for place in reversed(range(len(steps))):
        row = problem.factor[place]
        so_far = problem.offset[place] + chosen @ row[place + 1 :]
        grown = squares[:, np.newaxis] + (so_far[:, np.newaxis] + row[place] * steps[place]) ** 2
        best = np.argsort(grown, axis=None, kind="stable")[:kept]
        before, choice = np.unravel_index(best, grown.shape)
        chosen = np.concatenate([steps[place][choice, np.newaxis], chosen[before]], axis=1)
        places = np.concatenate([choice[:, np.newaxis], places[before]], axis=1)
        squares = grown[before, choice]
    return places
