"""What the joint choice of all stages' filters found, and what is given where no choice meets every limit."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.order_vectors import NORM, power_sum
from harmonic_planner.chain.screening import Candidates, Obstacle, Options, excess_over, obstacle_at

_ROUNDS = 20
_AS_GOOD = 1.01


@dataclass(frozen=True)
class Allocation:
    """An order and a candidate for every stage.

    Attributes
    ----------
    orders, picks : tuple of int
        Order, and row of that order's candidates, one a stage.
    total, lower_bound : int
        Resonators, and how many are needed at the least; equal where the total is proven.
    proven : bool
        Every smaller total was excluded; where `met` is False, every total was.
    margin_proven : bool
        No other allocation of this total has a norm of level over limit that is less by 0.01 dB.
    nodes : int
        Labels and order vectors tried.
    met : bool
        Every limit is met. Where some are out of reach the allocation is that of the others; where no allocation
        meets all, it is one of little norm that spends no resonator in vain.
    excess : float
        Norm of level over limit, over the limits in reach: a little above the largest of them.
    obstacle : Obstacle or None
        Why not every limit can be met; None where all are, or where the node limit left it open.
    """

    orders: tuple[int, ...]
    picks: tuple[int, ...]
    total: int
    lower_bound: int
    proven: bool
    margin_proven: bool
    nodes: int
    met: bool
    excess: float
    obstacle: Obstacle | None = None

    def rejections(self, candidates: Sequence[Candidates]) -> list[Array]:
        """Return the picked candidates' rejections [dB], one (lines,) array a stage."""
        return [c[n][p] for c, n, p in zip(candidates, self.orders, self.picks, strict=True)]


def fallen_short(chain: ChainArrays, stages: Sequence[Options], obstacle: Obstacle | None, *, nodes: int) -> Allocation:
    """Return an allocation of little norm where none meets all limits."""
    chosen = _little_norm(chain, stages)
    excess = excess_over(chain, [s.passed[c] for s, c in zip(stages, chosen, strict=True)])
    orders = tuple(int(s.orders[c]) for s, c in zip(stages, chosen, strict=True))
    return Allocation(
        orders=orders,
        picks=tuple(int(s.picks[c]) for s, c in zip(stages, chosen, strict=True)),
        total=sum(orders),
        lower_bound=sum(orders),
        proven=True,
        margin_proven=False,
        nodes=nodes,
        met=False,
        excess=float(power_sum(excess.ravel())) ** (1 / NORM),
        obstacle=obstacle or obstacle_at(chain, excess, "together"),
    )


def _little_norm(chain: ChainArrays, stages: Sequence[Options]) -> list[int]:
    """Return one candidate a stage such that no other of a single stage brings the norm of level over limit down.

    At the end every stage, the highest order first, takes its least order that leaves the norm within 0.1 dB, so that
    no resonator is spent in vain.

    Parameters
    ----------
    chain : ChainArrays
    stages : sequence of Options

    Returns
    -------
    list of int
        Index of each stage's candidate.
    """
    chosen = [int(np.argmin(s.passed.max(axis=1))) for s in stages]

    def powers(i: int) -> Array:
        passed = [s.passed if j == i else s.passed[c] for j, (s, c) in enumerate(zip(stages, chosen, strict=True))]
        return power_sum(excess_over(chain, passed).reshape(len(stages[i].orders), -1))

    for _ in range(_ROUNDS):
        before = list(chosen)
        for i in range(len(stages)):
            chosen[i] = int(np.argmin(powers(i)))
        if chosen == before:
            break
    enough = float(powers(0)[chosen[0]]) * _AS_GOOD**NORM
    for i in sorted(range(len(stages)), key=lambda i: -stages[i].orders[chosen[i]]):
        power, orders = powers(i), stages[i].orders
        good = np.flatnonzero(power <= enough)
        chosen[i] = int(good[np.lexsort((power[good], orders[good]))[0]])
    return chosen
