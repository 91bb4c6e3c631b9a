"""What a kit has near a wanted value: single parts, and two capacitors side by side as one.

Two in parallel are two parts in every respect: each has its own series inductance, via and resistance, one pad more
stands at each live end, and on a node to ground they share a via as any two parts do. That is on the safe side for two
on one pair of pads. Only for choosing is a pair reckoned as the single part that is like it at the centre.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.filters.circuit import INPUT, Circuit, Element
from harmonic_planner.filters.strays import pad_count, series_inductance_h
from harmonic_planner.parts.kits import CapacitorKit, Kit

Floats = NDArray[np.float64]

FARTHEST_PAIR = 0.5
"""Largest (f/f_series resonance)² of a part of a pair: beyond its resonance it is an inductor."""


@dataclass(frozen=True, eq=False)
class Shelf:
    """Everything that can stand for one element: single parts first, then pairs, each by what they equal, ascending."""

    parts: Floats
    """(choice, 2): the values to buy, the second zero for a single part [henry or farad]."""
    equals: Floats
    """(choice,): the single value that is like it at the centre."""
    singles: int
    """How many of the choices are single parts."""

    @classmethod
    def of(cls, singles: Floats, pairs: Floats, pair_equals: Floats) -> Shelf:
        """Return a shelf of single values (ascending) and of pairs (choice, 2) with what these equal."""
        order = np.argsort(pair_equals, kind="stable")
        parts = np.concatenate([np.stack([singles, np.zeros_like(singles)], axis=1), pairs[order]])
        return cls(parts, np.concatenate([singles, pair_equals[order]]), singles.size)

    def near(self, wanted: float, *, singles: int, pairs: int) -> NDArray[np.intp]:
        """Return the choices nearest to a wanted value by ratio.

        Parameters
        ----------
        wanted : float
            Value, above zero [henry or farad].
        singles, pairs : int
            How many of either kind, fewer where the shelf has no more.

        Returns
        -------
        ndarray
            Positions in the shelf, singles first, the nearest of each kind first.
        """
        found = []
        for count, first, end in ((singles, 0, self.singles), (pairs, self.singles, self.equals.size)):
            middle = first + int(np.searchsorted(self.equals[first:end], wanted))
            window = np.arange(max(middle - count, first), min(middle + count, end))
            away = np.abs(np.log(self.equals[window] / wanted))
            found.append(window[np.argsort(away, kind="stable")[:count]])
        return np.concatenate(found)

    def like(self, first: float, second: float) -> float:
        """Return the single value that a choice on this shelf is like [henry or farad]."""
        (at,) = np.nonzero((self.parts[:, 0] == first) & (self.parts[:, 1] == second))
        return float(self.equals[at[0]])


def shelf(circuit: Circuit, element: Element, kit: Kit, *, centre_hz: float) -> Shelf:
    """Return what a kit has for an element.

    Parameters
    ----------
    circuit : Circuit
        Where the element stands.
    element : Element
        Its value does not count.
    kit : Kit
        With a grid for parts of this kind.
    centre_hz : float
        Where two in parallel are compared with one [Hz].

    Returns
    -------
    Shelf
        Single values; pairs of capacitors too where the kit allows them.

    Notes
    -----
    A second part's pads add to its value where nothing else holds the node: on the node of a shunt part, and on one
    that a series part shares with one other part, as between the L and the C of a series arm.
    """
    if element.kind == "L":
        values = np.array(kit.inductor.values_h())
        return Shelf.of(values, np.zeros((0, 2)), np.zeros(0))
    shunt = element.placement == "shunt"
    ports = (INPUT, circuit.output)
    pads = sum(shunt or (node not in ports and pad_count(circuit, node) == 2) for node in element.live_nodes)
    return _capacitors(kit.capacitor, series_inductance_h(element, kit), pads * kit.board.pad_f, centre_hz)


@lru_cache(maxsize=64)
def _capacitors(kit: CapacitorKit, series_h: float, pads_f: float, centre_hz: float) -> Shelf:
    values = np.array(kit.values_f())
    if not kit.parallel:
        return Shelf.of(values, np.zeros((0, 2)), np.zeros(0))
    slowness = (2 * math.pi * centre_hz) ** 2 * series_h
    larger, smaller = np.tril_indices(values.size)
    pairs = np.stack([values[larger], values[smaller]], axis=1)
    pairs = pairs[slowness * pairs[:, 0] < FARTHEST_PAIR]
    together = (pairs / (1 - slowness * pairs)).sum(axis=1) + pads_f
    return Shelf.of(values, pairs, together / (1 + slowness * together))
