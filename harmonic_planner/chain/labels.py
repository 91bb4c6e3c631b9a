"""The best candidates within a set of order vectors.

Labels (the lines behind a stage, and the candidates that led to them) are carried forward stage by stage. A label goes
on while some order vector could complete it, and while no other label of the same orders is as good in every line that
the next device makes.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array
from harmonic_planner.chain.order_vectors import (
    NORM,
    Completion,
    Effort,
    Orders,
    Vectors,
    completed,
    ended,
    ending,
    fits,
    power_sum,
)
from harmonic_planner.chain.reduce import ReducedStage

CLOSE = 1e-3
"""Among equal totals, a norm that is better by less than this share (0.01 dB) is not looked for."""
_BATCH = 64
_CHILDREN = 20_000


@dataclass(frozen=True)
class Chosen:
    """A candidate a stage, as order and row of that order, and the norm's power over all limits."""

    orders: Orders
    picks: tuple[int, ...]
    power: float


@dataclass
class Search:
    """The best candidates within a set of order vectors.

    Attributes
    ----------
    stages : sequence of ReducedStage
    judge : callable
        Orders and (n, stages) picks -> (n,) the norm's power over all limits, infinite where one is missed.
    effort : Effort
    width : int or None
        Keep only so many labels a step, those with the least bound; the search is exact where None.
    first : bool
        Stop at the first that suffices.
    best : Chosen or None
        The best so far, also when the node limit ended the search; one from elsewhere may be given.
    """

    stages: Sequence[ReducedStage]
    judge: Callable[[Orders, NDArray[np.int_]], Array]
    effort: Effort
    width: int | None = None
    first: bool = False
    best: Chosen | None = None
    _known: dict[Orders, Completion] = field(default_factory=dict)

    def run(self, vectors: Vectors) -> None:
        """Search `vectors`, the most promising first."""
        if not len(vectors):
            return
        self._extend((), vectors, np.zeros((1, 0)), np.zeros(1), np.zeros((1, 0), dtype=int))

    def _extend(self, prefix: Orders, vectors: Vectors, behind: Array, so_far: Array, rows: NDArray[np.int_]) -> None:
        """Carry labels through the next stage, for each order that `vectors` go on with there."""
        i = len(prefix)
        made = self.stages[i].device(behind)
        for n in dict.fromkeys(vectors[:, i].tolist()):
            if self.first and self.best is not None:
                return
            going = vectors[vectors[:, i] == n]
            passed = self.stages[i].choices[n].passed
            batches = []
            step = max(_CHILDREN // len(passed), 1)
            for start in range(0, len(made), step):
                batch = slice(start, start + step)
                batches.append(self._children(i, n, going, made[batch], so_far[batch], rows[batch]))
            v, here, grown, bound, opened = (np.concatenate(b) for b in zip(*batches, strict=True))
            if not len(v):
                continue
            if i + 1 == len(self.stages):
                self._take((*prefix, n), grown, bound)
                continue
            some = self._undominated(i + 1, v, here, bound)[: self.width]
            self._extend((*prefix, n), going[opened.any(axis=0)], v[some], here[some], grown[some])

    def _children(
        self, i: int, n: int, vectors: Vectors, made: Array, so_far: Array, rows: NDArray[np.int_]
    ) -> tuple[Array, Array, NDArray[np.int_], Array, NDArray[np.bool_]]:
        """Return the children that some vector can complete: lines, norm so far, rows, bound, vectors that can."""
        stage = self.stages[i]
        passed = stage.choices[n].passed
        self.effort.spend(len(made) * len(passed))
        v = (made[:, None, :] * passed + stage.added).reshape(len(made) * len(passed), stage.made.size)
        here = stage.excess(v)
        power = np.repeat(so_far, len(passed)) + power_sum(here)
        grown = np.column_stack([np.repeat(rows, len(passed), axis=0), np.tile(np.arange(len(passed)), len(made))])
        good = fits(here)
        v, power, grown = v[good], power[good], grown[good]
        most = np.inf if self.best is None else self.best.power * (1 - CLOSE) ** NORM
        bounds = np.full((len(v), len(vectors)), np.inf)
        for s, vector in enumerate(vectors):
            bounds[:, s] = self._completion(tuple(vector[i + 1 :].tolist())).bound(v, power)
        opened = bounds < most
        good = np.asarray(opened.any(axis=1))
        return v[good], power[good], grown[good], bounds[good].min(axis=1, initial=np.inf), opened[good]

    def _completion(self, suffix: Orders) -> Completion:
        """Return the completion with the last stages at the best of the orders in `suffix`."""
        if not suffix:
            return ended(self.stages[-1])
        if suffix not in self._known:
            stage, n = self.stages[len(self.stages) - len(suffix)], suffix[0]
            if len(suffix) == 1:
                self._known[suffix] = ending(stage, [n])
            else:
                self._known[suffix] = completed(stage, stage.least[n], self._completion(suffix[1:]))
        return self._known[suffix]

    def _undominated(self, i: int, v: Array, so_far: Array, bound: Array) -> NDArray[np.int_]:
        """Return the labels that no other matches in every line that stage `i` makes of them, least bound first."""
        stage = self.stages[i]
        made = np.maximum(stage.device(v), stage.negligible)
        made = made[:, (made > stage.negligible).any(axis=0)]
        compared = np.column_stack([made, so_far])
        scale = np.maximum(compared.max(axis=0), 1e-300)
        taken: list[int] = []
        for a in np.argsort((compared / scale).sum(axis=1), kind="stable"):
            if not (compared[taken] <= compared[a]).all(axis=1).any():
                taken.append(int(a))
        kept = np.array(taken)
        return kept[np.argsort(bound[kept], kind="stable")]

    def _take(self, orders: Orders, rows: NDArray[np.int_], bound: Array) -> None:
        """Judge whole allocations by all limits, least bound first, until none can be better."""
        picks = np.column_stack([s.choices[n].picks[r] for s, n, r in zip(self.stages, orders, rows.T, strict=True)])
        ascending = np.argsort(bound, kind="stable")
        for start in range(0, len(ascending), _BATCH):
            some = ascending[start : start + _BATCH]
            if self.best is not None and bound[some[0]] >= self.best.power:
                return
            power = self.judge(orders, picks[some])
            least = int(np.argmin(power))
            if power[least] < (np.inf if self.best is None else self.best.power):
                self.best = Chosen(orders, tuple(picks[some[least]].tolist()), float(power[least]))
