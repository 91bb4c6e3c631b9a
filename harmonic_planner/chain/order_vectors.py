"""What later stages can do at best, and the order vectors that could suffice.

An order vector is tried with each stage at its order's best in every line. That is a bound, since no candidate of that
order does better anywhere; only of the last stage the candidates are tried one by one, which costs little and catches
the commonest conflict, that of the lines below the carrier with those above.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array
from harmonic_planner.chain.reduce import ReducedStage
from harmonic_planner.chain.screening import ROUNDING

Orders = tuple[int, ...]
Vectors = NDArray[np.int_]
"""Order vectors, (vectors, stages)."""

NORM = 8
"""Level over limit is summed at this power: near its maximum, yet every line is felt."""
_BATCH = 64


class NodeLimitError(Exception):
    """The search has made as many nodes as it may."""


@dataclass
class Effort:
    """Nodes made, labels and prefixes of order vectors alike, against the limit."""

    limit: float
    nodes: int = 0

    def spend(self, nodes: int) -> None:
        """Count `nodes`; NodeLimitError where that is more than is left."""
        if self.nodes + nodes > self.limit:
            raise NodeLimitError
        self.nodes += nodes


@dataclass(frozen=True)
class Completion:
    """What later stages make of the lines behind a stage: all but the last at some best, the last by candidate.

    Attributes
    ----------
    constant : (n,) float
    gain : (n, lines) float
        Affine in the lines behind the stage: level over limit at stages between, then what the last device makes of
        the last stage's watched lines.
    last : (candidates, limits) float
        Transmission over limit of the last stage's candidates.
    added : (limits,) float
        What is added behind the last filter, over limit.
    """

    constant: Array
    gain: Array
    last: Array
    added: Array

    def bound(self, behind: Array, so_far: Array) -> Array:
        """Return the least norm's power that can follow, (labels, lines) and (labels,) -> (labels,).

        Infinite where no candidate of the last stage meets its limits.
        """
        found = np.full(len(behind), np.inf)
        out = self.constant + behind @ self.gain.T
        between = self.constant.size - self.added.size
        open_ = np.flatnonzero(fits(out[:, :between]) & fits(out[:, between:] * self.last.min(axis=0) + self.added))
        for start in range(0, open_.size, _BATCH):
            some = open_[start : start + _BATCH]
            excess = out[some, None, between:] * self.last + self.added
            power = np.where(fits(excess), power_sum(excess), np.inf).min(axis=1)
            found[some] = so_far[some] + power_sum(out[some, :between]) + power
        return found


def ended(stage: ReducedStage) -> Completion:
    """Return the completion from behind the last stage: nothing follows."""
    return Completion(np.zeros(0), np.zeros((0, stage.made.size)), np.zeros((1, 0)), np.zeros(0))


def ending(stage: ReducedStage, orders: Sequence[int]) -> Completion:
    """Return the completion from before the last stage with its candidates of `orders`."""
    at = stage.limited
    passed = np.concatenate([stage.choices[n].passed[:, at] for n in orders])
    return Completion(stage.made[at], stage.convert[at], passed / stage.limit, stage.added[at] / stage.limit)


def completed(stage: ReducedStage, passed: Array, later: Completion) -> Completion:
    """Return the completion from before a stage that is not the last, its filter passing `passed`."""
    own = np.zeros((stage.limited.size, stage.made.size))
    own[np.arange(stage.limited.size), stage.limited] = 1.0 / stage.limit
    gain = np.concatenate([own, later.gain])
    constant = np.concatenate([np.zeros(stage.limited.size), later.constant])
    constant = constant + gain @ (passed * stage.made + stage.added)
    return Completion(constant, (gain * passed) @ stage.convert, later.last, later.added)


def power_sum(excess: Array) -> Array:
    """Return level over limit at the power `NORM`, summed over the last axis."""
    fourth = np.square(np.square(excess))
    return np.asarray(np.square(fourth).sum(axis=-1))


def fits(excess: Array) -> NDArray[np.bool_]:
    """Tell where every level over limit, along the last axis, is at most 1 but for rounding."""
    return np.asarray((excess <= 1.0 + ROUNDING).all(axis=-1))


@dataclass
class OrderVectors:
    """The order vectors that suffice with each stage at its order's best in every line."""

    stages: Sequence[ReducedStage]
    _known: dict[tuple[int, Orders], Completion] = field(default_factory=dict)

    @property
    def totals(self) -> tuple[int, int]:
        """Least and most resonators that the candidates allow."""
        return sum(min(s.least) for s in self.stages), sum(max(s.least) for s in self.stages)

    def of(self, total: int, effort: Effort, *, widest: int | None = None) -> Vectors:
        """Return the vectors of `total` resonators, the least norm first.

        Parameters
        ----------
        total : int
        effort : Effort
        widest : int or None
            Keep only so many prefixes a stage, those with the least bound; all of them where None.
        """
        prefixes, behind, partial = np.zeros((1, 0), dtype=int), np.zeros((1, 0)), np.zeros(1)
        for i, stage in enumerate(self.stages):
            made = stage.device(behind)
            budget = total - prefixes.sum(axis=1)
            parts = []
            for n, passed in stage.least.items():
                for left in np.unique(budget - n):
                    completion = self._within(i, int(left))
                    if completion is None:
                        continue
                    of = np.flatnonzero(budget - n == left)
                    effort.spend(of.size)
                    v = passed * made[of] + stage.added
                    here = stage.excess(v)
                    so_far = partial[of] + power_sum(here)
                    bound = completion.bound(v, so_far)
                    good = fits(here) & np.isfinite(bound)
                    grown = np.column_stack([prefixes[of], np.full(of.size, n)])
                    parts.append((grown[good], v[good], so_far[good], bound[good]))
            if not parts:
                return np.zeros((0, len(self.stages)), dtype=int)
            prefixes, behind, partial, bound = (np.concatenate(p) for p in zip(*parts, strict=True))
            first = np.argsort(bound, kind="stable")[:widest]
            prefixes, behind, partial = prefixes[first], behind[first], partial[first]
        return prefixes

    def _within(self, i: int, budget: int) -> Completion | None:
        """Return the completion behind stage `i` with all later ones at the best that `budget`, used up, allows."""
        later = self.stages[i + 1 :]
        least, most = [min(s.least) for s in later], [max(s.least) for s in later]
        if not sum(least) <= budget <= sum(most):
            return None
        spare = budget - sum(least)
        return self._capped(i, tuple(min(a + spare, b) for a, b in zip(least, most, strict=True)))

    def _capped(self, i: int, caps: Orders) -> Completion:
        if not caps:
            return ended(self.stages[i])
        if (i, caps) not in self._known:
            following = self.stages[i + 1]
            orders = [n for n in following.choices if n <= caps[0]]
            if len(caps) == 1:
                self._known[i, caps] = ending(following, orders)
            else:
                passed = np.min([following.least[n] for n in orders], axis=0)
                self._known[i, caps] = completed(following, passed, self._capped(i + 1, caps[1:]))
        return self._known[i, caps]
