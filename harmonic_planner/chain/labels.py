"""The search itself: which order vectors of one total could suffice, and the best candidates within them.

An order vector is tried first with each stage at its order's best in every line; that is a bound, since no candidate
of that order is better anywhere. Within the vectors that survive, labels (lines behind a stage, and how they came
about) are carried forward stage by stage; a label goes on while some surviving vector could complete it and no other
label of the same orders is better in every line.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array
from harmonic_planner.chain.reduce import ROUNDING, ReducedStage

Orders = tuple[int, ...]
NORM = 8
"""Level over limit is summed at this power: near its maximum, yet every line is felt."""
_CLOSE = 1e-3
"""Among equal totals, a norm that is better by less than this share (0.01 dB) is not looked for."""


class NodeLimitError(Exception):
    """The search made as many labels as it may."""


@dataclass
class Effort:
    """Counts labels and order vectors against the limit."""

    limit: int
    nodes: int = 0

    def spend(self, nodes: int) -> None:
        """Count `nodes`; NodeLimitError where that is more than is left."""
        if self.nodes + nodes > self.limit:
            raise NodeLimitError
        self.nodes += nodes


@dataclass(frozen=True)
class Completion:
    """Level over limit at all later limits as an affine function of the lines behind a stage."""

    constant: Array
    gain: Array

    def excess(self, behind: Array) -> Array:
        """Return level over limit, (labels, lines) -> (labels, limits)."""
        return self.constant + behind @ self.gain.T


def completed(stage: ReducedStage, passed: Array, later: Completion) -> Completion:
    """Return the completion from before `stage`, its filter passing `passed`."""
    own = np.zeros((stage.limited.size, stage.made.size))
    own[np.arange(stage.limited.size), stage.limited] = 1.0 / stage.limit
    gain = np.concatenate([own, later.gain])
    constant = np.concatenate([np.zeros(stage.limited.size), later.constant]) + gain @ (
        passed * stage.made + stage.added
    )
    return Completion(constant, (gain * passed) @ stage.convert)


def power_sum(excess: Array) -> Array:
    """Return the NORM-th power of level over limit summed over the last axis."""
    squared = excess * excess
    fourth = squared * squared
    return np.asarray((fourth * fourth).sum(axis=-1))


def order_vectors(
    stages: Sequence[ReducedStage], total: int, effort: Effort, *, widest: int | None = None
) -> NDArray[np.int_]:
    """Return the order vectors of `total` that suffice with each stage at its order's best in every line.

    Parameters
    ----------
    stages : sequence of ReducedStage
    total : int
    effort : Effort
    widest : int or None
        Keep only so many prefixes a stage, those with the least bound.

    Returns
    -------
    (vectors, stages) int
        The least norm first.
    """
    bounds = _Bounds(stages)
    prefixes = np.zeros((1, 0), dtype=int)
    behind = np.zeros((1, 0))
    partial = np.zeros(1)
    for i, stage in enumerate(stages):
        made = stage.device(behind)
        left = total - prefixes.sum(axis=1)
        parts = []
        for n, passed in stage.least.items():
            budget = left - n
            for b in np.unique(budget):
                completion = bounds.completion(i, int(b))
                if completion is None:
                    continue
                which = np.flatnonzero(budget == b)
                effort.spend(which.size)
                v = passed * made[which] + stage.added
                here = stage.excess(v)
                excess = completion.excess(v)
                good = _fits(here) & _fits(excess)
                so_far = partial[which] + power_sum(here)
                bound = so_far + power_sum(excess)
                grown = np.column_stack([prefixes[which], np.full(which.size, n)])
                parts.append((grown[good], v[good], so_far[good], bound[good]))
        if not parts:
            return np.zeros((0, len(stages)), dtype=int)
        prefixes, behind, partial, bound = (np.concatenate(x) for x in zip(*parts, strict=True))
        best = np.argsort(bound, kind="stable")[:widest]
        prefixes, behind, partial = prefixes[best], behind[best], partial[best]
    return prefixes


class _Bounds:
    """Completions with every later stage at its best among the orders that a budget still allows."""

    def __init__(self, stages: Sequence[ReducedStage]) -> None:
        self._stages = stages
        self._least = [min(s.least) for s in stages]
        self._most = [max(s.least) for s in stages]
        self._known: dict[tuple[int, Orders], Completion] = {}

    def completion(self, i: int, budget: int) -> Completion | None:
        """Return the completion from behind stage `i` with `budget` to be used up; None where it cannot be."""
        later = range(i + 1, len(self._stages))
        least, most = (sum(x[j] for j in later) for x in (self._least, self._most))
        if not least <= budget <= most:
            return None
        caps = tuple(min(budget - least + self._least[j], self._most[j]) for j in later)
        return self._from(i, caps)

    def _from(self, i: int, caps: Orders) -> Completion:
        stage = self._stages[i]
        if not caps:
            return Completion(np.zeros(0), np.zeros((0, stage.made.size)))
        if (i, caps) not in self._known:
            following = self._stages[i + 1]
            passed = np.min([p for n, p in following.least.items() if n <= caps[0]], axis=0)
            self._known[i, caps] = completed(following, passed, self._from(i + 1, caps[1:]))
        return self._known[i, caps]


def _fits(excess: Array) -> NDArray[np.bool_]:
    return np.asarray((excess <= 1.0 + ROUNDING).all(axis=-1))


@dataclass(frozen=True)
class Chosen:
    """A candidate a stage, as an index into the choices of its order, and the norm's NORM-th power."""

    orders: Orders
    rows: tuple[int, ...]
    power: float


@dataclass
class Search:
    """The best candidates within a set of order vectors.

    Attributes
    ----------
    stages : sequence of ReducedStage
    effort : Effort
    width : int or None
        Keep only so many labels a step, those with the least bound; the search is exact without.
    first : bool
        Stop at the first allocation that suffices.
    best : Chosen or None
        The best so far; stays when the node limit ends the search.
    """

    stages: Sequence[ReducedStage]
    effort: Effort
    width: int | None = None
    first: bool = False
    best: Chosen | None = None
    _known: dict[Orders, Completion] = field(default_factory=dict)

    def run(self, vectors: NDArray[np.int_]) -> None:
        """Search `vectors`, (vectors, stages), the most promising first."""
        self._extend((), vectors, np.zeros((1, 0)), np.zeros(1), np.zeros((1, 0), dtype=int))

    def _extend(
        self, prefix: Orders, vectors: NDArray[np.int_], behind: Array, partial: Array, rows: NDArray[np.int_]
    ) -> None:
        """Carry labels with the orders `prefix` on through the next stage, for each order `vectors` go on with."""
        i = len(prefix)
        if i == len(self.stages):
            self._take(prefix, partial, rows)
            return
        stage = self.stages[i]
        made = stage.device(behind)
        for n in dict.fromkeys(vectors[:, i].tolist()):
            if self.first and self.best is not None:
                return
            passed = stage.choices[n].passed
            going = vectors[vectors[:, i] == n]
            self.effort.spend(len(made) * len(passed))
            v = (made[:, None, :] * passed + stage.added).reshape(-1, stage.made.size)
            here = stage.excess(v)
            so_far = np.repeat(partial, len(passed)) + power_sum(here)
            parents, picks = np.divmod(np.arange(len(v)), len(passed))
            some = np.flatnonzero(_fits(here))
            bound, open_vectors = self._bound(v[some], so_far[some], going[:, i + 1 :])
            alive = np.isfinite(bound)
            some, bound = some[alive], bound[alive]
            if not some.size:
                continue
            if i + 1 < len(self.stages):
                some = self._undominated(i + 1, v, so_far, some[np.argsort(bound, kind="stable")])[: self.width]
            grown = np.column_stack([rows[parents[some]], picks[some]])
            self._extend((*prefix, n), going[open_vectors], v[some], so_far[some], grown)

    def _bound(self, v: Array, so_far: Array, suffixes: NDArray[np.int_]) -> tuple[Array, NDArray[np.bool_]]:
        """Return each label's least bound over `suffixes`, infinite where none completes it, and which suffixes do."""
        bound = np.full(len(v), np.inf)
        opened = np.zeros(len(suffixes), dtype=bool)
        most = np.inf if self.best is None else self.best.power * (1 - _CLOSE) ** NORM
        for s, suffix in enumerate(suffixes):
            excess = self._completion(tuple(suffix.tolist())).excess(v)
            power = so_far + power_sum(excess)
            good = _fits(excess) & (power < most)
            opened[s] = good.any()
            bound[good] = np.minimum(bound[good], power[good])
        return bound, opened

    def _completion(self, suffix: Orders) -> Completion:
        if suffix not in self._known:
            i = len(self.stages) - len(suffix)
            if not suffix:
                self._known[suffix] = Completion(np.zeros(0), np.zeros((0, self.stages[-1].made.size)))
            else:
                stage = self.stages[i]
                self._known[suffix] = completed(stage, stage.least[suffix[0]], self._completion(suffix[1:]))
        return self._known[suffix]

    def _undominated(self, i: int, v: Array, so_far: Array, some: NDArray[np.int_]) -> NDArray[np.int_]:
        """Drop labels that another matches in every line the device of stage `i` makes of them."""
        stage = self.stages[i]
        compared = np.column_stack([np.maximum(stage.device(v[some]), stage.negligible), so_far[some]])
        taken: list[int] = []
        for a in np.argsort((compared / compared.max(axis=0)).sum(axis=1), kind="stable"):
            if not (compared[taken] <= compared[a]).all(axis=1).any():
                taken.append(int(a))
        return some[np.sort(taken)]

    def _take(self, orders: Orders, power: Array, rows: NDArray[np.int_]) -> None:
        least = int(np.argmin(power))
        if self.best is None or power[least] < self.best.power:
            self.best = Chosen(orders, tuple(rows[least].tolist()), float(power[least]))


def by_order(vectors: NDArray[np.int_]) -> list[Mapping[int, bool]]:  # pragma: no cover
    return [dict.fromkeys(v.tolist(), True) for v in vectors.T]
