"""Every stage's filter at once: the fewest resonators that meet all limits, proven.

The lines at an output grow with every transmission on the way, for sums of amplitudes and of powers alike. So each
stage at its best in every line bounds what any choice can do: totals are tried upwards from the least that bound
allows, and the first one at which an allocation exists is the least there is. The bound, the labels and their
dominance are those of shortest paths with several resources; see `order_vectors` and `labels`.

References
----------
S. Irnich, G. Desaulniers, "Shortest Path Problems with Resource Constraints", in *Column Generation*, Springer 2005
(labels, dominance, bounding by completion).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.allocation import Allocation, fallen_short
from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.labels import Chosen, Search
from harmonic_planner.chain.order_vectors import NORM, Effort, NodeLimitError, Orders, OrderVectors, Vectors, power_sum
from harmonic_planner.chain.reduce import ReducedStage, reduced
from harmonic_planner.chain.screening import Candidates, Obstacle, Options, excess_over, options, screen, set_aside

NODE_LIMIT = 200_000
_WIDTH = 12
_VECTORS = 24
_PREFIXES = 400
_NEAR = 3


def allocate(
    chain: ChainArrays, candidates: Sequence[Candidates], *, node_limit: int = NODE_LIMIT, largest_margin: bool = True
) -> Allocation:
    """Choose order and candidate of every stage: the least total that meets all limits, then the largest margin.

    Parameters
    ----------
    chain : ChainArrays
        With the limits to meet, margin included.
    candidates : sequence of mapping
        For every stage, order -> (candidates, lines) rejections [dB], leakage included. A stage without a choice
        (none, or given) has one order, 0, with one candidate.
    node_limit : int
        Labels and order vectors to try at most; then the best found is returned, not proven.
    largest_margin : bool
        Look for the least norm among allocations of the least total; else the first found is as good.

    Returns
    -------
    Allocation

    Notes
    -----
    Levels are compared to 1e-5 dB: an allocation that meets a limit by less than that may be passed over. What is
    returned as met was run through the chain in full.
    """
    task = _Task.of(chain, candidates, node_limit)
    return task if isinstance(task, Allocation) else task.least(largest_margin=largest_margin)


def allocate_within(
    chain: ChainArrays,
    candidates: Sequence[Candidates],
    *,
    total: int,
    node_limit: int = NODE_LIMIT,
    largest_margin: bool = False,
) -> Allocation | None:
    """Return an allocation of at most `total` resonators, None where there is none or none was found.

    Parameters
    ----------
    chain, candidates, node_limit, largest_margin
        As for `allocate`; with `largest_margin` the least norm among all allocations up to `total` is looked for.
    total : int

    Returns
    -------
    Allocation or None
        Its `lower_bound` is the least total that the bound alone leaves open.
    """
    task = _Task.of(chain, candidates, node_limit)
    if isinstance(task, Allocation):
        return None
    least, most = task.vectors.totals
    best: Chosen | None = None
    margin_proven = largest_margin
    try:
        for t in range(min(total, most), least - 1, -1):
            best, proven = task.search(t, best, largest_margin=largest_margin)
            margin_proven = margin_proven and proven
            if best is not None and not largest_margin:
                break
    except NodeLimitError:
        margin_proven = False
    return None if best is None else task.allocation(best, lower_bound=least, margin_proven=margin_proven)


def trade(
    chain: ChainArrays, candidates: Sequence[Candidates], *, extra: int = 2, node_limit: int = NODE_LIMIT
) -> tuple[Allocation, ...]:
    """Return the allocations with the largest margin at the least total T, and up to T + 1, … T + `extra`.

    Parameters
    ----------
    chain, candidates
        As for `allocate`.
    extra : int
    node_limit : int
        For each of the totals.

    Returns
    -------
    tuple of Allocation
        One a total. The same allocation again where a resonator more buys no margin; only the first where limits are
        not met.
    """
    task = _Task.of(chain, candidates, node_limit)
    if isinstance(task, Allocation):
        return (task,)
    least = task.least(largest_margin=True)
    if not least.met:
        return (least,)
    found = [least]
    best: Chosen | None = Chosen(least.orders, least.picks, least.excess**NORM)
    for total in range(least.total + 1, least.total + extra + 1):
        task = replace(task, effort=Effort(node_limit))
        try:
            best, margin_proven = task.search(total, best, largest_margin=True)
        except NodeLimitError:
            margin_proven = False
        if best is not None:
            bound = task.allocation(best, lower_bound=least.lower_bound, margin_proven=margin_proven)
            found.append(replace(bound, proven=least.proven))
    return tuple(found)


@dataclass(frozen=True)
class _Task:
    """Candidates that can matter under limits that are in reach, and the effort spent."""

    chain: ChainArrays
    stages: tuple[Options, ...]
    vectors: OrderVectors
    effort: Effort
    obstacle: Obstacle | None

    @classmethod
    def of(cls, chain: ChainArrays, candidates: Sequence[Candidates], node_limit: int) -> _Task | Allocation:
        """Set aside what is out of reach and screen the candidates; an allocation where that already ends it."""
        every = tuple(options(chain, c) for c in candidates)
        chain, out_of_reach = set_aside(chain, every)
        screened, no_candidate = screen(chain, every)
        if no_candidate is not None:
            return fallen_short(chain, every, out_of_reach or no_candidate, nodes=0)
        return cls(chain, tuple(screened), OrderVectors(reduced(chain, screened)), Effort(node_limit), out_of_reach)

    def least(self, *, largest_margin: bool) -> Allocation:
        """Try totals upwards until one is enough."""
        total, most = self.vectors.totals
        try:
            while total <= most:
                best, margin_proven = self.search(total, None, largest_margin=largest_margin)
                if best is not None:
                    return self.allocation(best, lower_bound=total, margin_proven=margin_proven)
                total += 1
        except NodeLimitError:
            return self.unproven(total)
        return fallen_short(self.chain, self.stages, self.obstacle, nodes=self.effort.nodes)

    def search(self, total: int, best: Chosen | None, *, largest_margin: bool) -> tuple[Chosen | None, bool]:
        """Return the best of `total` resonators, `best` where none is better, and whether its margin is proven.

        NodeLimitError where the limit ended the search before anything was found.
        """
        stages, vectors = self._narrowed(self.vectors.of(total, self.effort))
        search = Search(stages, self._judge, self.effort, width=_WIDTH, first=not largest_margin, best=best)
        try:
            search.run(vectors[:_VECTORS])
            search.width = None
            search.run(vectors)
        except NodeLimitError:
            if search.best is None:
                raise
            return search.best, False
        return search.best, largest_margin

    def allocation(self, best: Chosen, *, lower_bound: int, margin_proven: bool) -> Allocation:
        """Return `best` as an allocation, proven where it needs no more than `lower_bound`."""
        total = sum(best.orders)
        return Allocation(
            orders=best.orders,
            picks=best.picks,
            total=total,
            lower_bound=lower_bound,
            proven=total == lower_bound,
            margin_proven=margin_proven,
            nodes=self.effort.nodes,
            met=self.obstacle is None,
            excess=best.power ** (1 / NORM),
            obstacle=self.obstacle,
        )

    def unproven(self, lower_bound: int) -> Allocation:
        """Return the first allocation that a search of limited width finds, from `lower_bound` upwards."""
        free = replace(self, effort=Effort(np.inf, self.effort.nodes))
        for total in range(lower_bound, self.vectors.totals[1] + 1):
            stages, vectors = self._narrowed(self.vectors.of(total, free.effort, widest=_PREFIXES))
            search = Search(stages, self._judge, free.effort, width=_WIDTH)
            search.run(vectors[:_VECTORS])
            if search.best is not None:
                return free.allocation(search.best, lower_bound=lower_bound, margin_proven=False)
        short = fallen_short(self.chain, self.stages, self.obstacle, nodes=free.effort.nodes)
        return replace(short, lower_bound=lower_bound, proven=False, obstacle=self.obstacle)

    def _narrowed(self, vectors: Vectors) -> tuple[tuple[ReducedStage, ...], Vectors]:
        """Return the stages with only the orders in `vectors`, and those of them that keep a candidate everywhere."""
        if not len(vectors):
            return (), vectors
        some = [s.only(np.isin(s.orders, v)) for s, v in zip(self.stages, vectors.T, strict=True)]
        stages = reduced(self.chain, some, near=vectors[:_NEAR])
        offered = [np.isin(v, list(s.choices)) for s, v in zip(stages, vectors.T, strict=True)]
        return stages, vectors[np.all(offered, axis=0)]

    def _judge(self, orders: Orders, picks: NDArray[np.int_]) -> Array:
        """Return the norm's power over all limits of picks at these orders, infinite where one is missed."""
        passed = []
        for stage, n, p in zip(self.stages, orders, picks.T, strict=True):
            of = stage.only(stage.orders == n)
            passed.append(of.passed[np.searchsorted(of.picks, p)])
        excess = excess_over(self.chain, passed).reshape(len(picks), -1)
        return np.where((excess <= 1.0).all(axis=1), power_sum(excess), np.inf)
