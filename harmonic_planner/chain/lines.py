"""The grid of spectral lines that a chain is computed on."""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.model import Scenario

LINES_PER_FACTOR = 4
"""Lines are kept up to this many times the chain's whole factor."""


@dataclass(frozen=True)
class LineGrid:
    """Lines j/q, j = 1 … count, of a source at 1.

    Array index j − 1 belongs to line j/q everywhere in this package.
    """

    q: int
    count: int

    def line(self, index: int) -> Fraction:
        """Return the harmonic number of array index `index`."""
        return Fraction(index + 1, self.q)

    def index(self, line: Fraction) -> int:
        """Return the array index of `line`; ValueError where the line is not on the grid."""
        j = line * self.q
        if j.denominator != 1 or not 1 <= j <= self.count:
            raise ValueError(f"line {line} is not on the grid of 1/{self.q} up to {self.count}/{self.q}")
        return int(j) - 1

    @property
    def numbers(self) -> NDArray[np.float64]:
        """Harmonic numbers as floats, shape (count,)."""
        return np.arange(1, self.count + 1) / self.q


def grid_for(scenario: Scenario) -> LineGrid:
    """Return the grid that holds every line of `scenario` up to four times its whole factor.

    Parameters
    ----------
    scenario : Scenario
        Fractional source lines set the denominator.

    Returns
    -------
    LineGrid
    """
    q = math.lcm(*(k.denominator for k in scenario.source.lines_dbc), 1)
    highest_source = max(scenario.source.lines_dbc, default=Fraction(1))
    top = max(LINES_PER_FACTOR * scenario.total, 2 * math.ceil(highest_source))
    return LineGrid(q, top * q)
