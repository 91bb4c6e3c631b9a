"""Which order each stage's filter gets, from what the candidates of each order do to every line.

Start from a guess, tighten the stage that contributes most to the worst line until all limits are met, then relax
what is slack, one resonator at a time.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.budget import without_limits, worst_excess
from harmonic_planner.chain.propagate import births

_NORM = 8
_PASSES = 2

Candidates = Mapping[int, Array]
"""Order -> rejections of its candidates [dB], shape (candidates, lines)."""


@dataclass(frozen=True)
class Assignment:
    """The order of each stage's filter and which of its candidates, and whether limits in reach are met."""

    orders: tuple[int, ...]
    picks: tuple[int, ...]
    met: bool

    def rejections(self, candidates: Sequence[Candidates]) -> list[Array]:
        """Return the picked candidates' rejections [dB], one (lines,) array a stage."""
        return [c[n][p] for c, n, p in zip(candidates, self.orders, self.picks, strict=True)]


def assign(chain: ChainArrays, candidates: Sequence[Candidates], start: Sequence[int]) -> Assignment:
    """Choose an order for every stage by tightening and relaxing.

    Parameters
    ----------
    chain : ChainArrays
        With the limits to meet, margin included.
    candidates : sequence of mapping
        For every stage, order -> (candidates, lines) rejections [dB], leakage included. A stage without a choice
        (none, or given) has one order with one candidate.
    start : sequence of int
        First guess of the orders.

    Returns
    -------
    Assignment
    """
    best = [np.max(np.concatenate(list(c.values())), axis=0) for c in candidates]
    chain = without_limits(chain, worst_excess(chain, best) > 1.0)
    orders = [_nearest(c, n) for c, n in zip(candidates, start, strict=True)]
    picks = _pick(chain, candidates, orders)
    while not (met := _meets(chain, candidates, orders, picks)):
        raised = _tighten(chain, candidates, orders, picks)
        if raised is None:
            break
        orders = raised
        picks = _pick(chain, candidates, orders)
    while met:
        lower = _relax(chain, candidates, orders)
        if lower is None:
            break
        orders, picks = lower
    return Assignment(tuple(orders), tuple(picks), met)


def _nearest(candidates: Candidates, order: int) -> int:
    """Return the least order there is at or above `order`, else the highest."""
    above = [n for n in candidates if n >= order]
    return min(above) if above else max(candidates)


def _pick(chain: ChainArrays, candidates: Sequence[Candidates], orders: Sequence[int]) -> list[int]:
    """Choose each stage's candidate at its order, one stage at a time, by the norm of level over limit."""
    picks = [len(c[n]) // 2 for c, n in zip(candidates, orders, strict=True)]
    for _ in range(_PASSES):
        for i, (c, n) in enumerate(zip(candidates, orders, strict=True)):
            if len(c[n]) == 1:
                continue
            others = [cj[nj][p] for cj, nj, p in zip(candidates, orders, picks, strict=True)]
            costs = [_cost(chain, [*others[:i], row, *others[i + 1 :]]) for row in c[n]]
            picks[i] = int(np.argmin(costs))
    return picks


def _cost(chain: ChainArrays, rejections_db: Sequence[Array]) -> float:
    """Return a norm of level over limit that is near its maximum yet feels every line."""
    return float(np.linalg.norm(worst_excess(chain, rejections_db).ravel(), ord=_NORM))


def _meets(chain: ChainArrays, candidates: Sequence[Candidates], orders: Sequence[int], picks: Sequence[int]) -> bool:
    rows = [c[n][p] for c, n, p in zip(candidates, orders, picks, strict=True)]
    return bool((worst_excess(chain, rows) <= 1.0).all())


def _tighten(
    chain: ChainArrays, candidates: Sequence[Candidates], orders: Sequence[int], picks: Sequence[int]
) -> list[int] | None:
    """Raise the order of the stage that contributes most to the worst line, among those that have a higher one."""
    rows = [c[n][p] for c, n, p in zip(candidates, orders, picks, strict=True)]
    over = worst_excess(chain, rows)
    to, line = np.unravel_index(int(np.argmax(over)), over.shape)
    by_stage = np.zeros(len(orders))
    for birth in births(chain, [chain.from_db(-r) for r in rows], to=int(to)):
        by_stage[max(birth.stage, 0)] += birth.paths[line].sum()
    for i in np.argsort(-by_stage):
        higher = [n for n in candidates[i] if n > orders[i]]
        if by_stage[i] > 0 and higher:
            raised = list(orders)
            raised[i] = min(higher)
            return raised
    return None


def _relax(
    chain: ChainArrays, candidates: Sequence[Candidates], orders: Sequence[int]
) -> tuple[list[int], list[int]] | None:
    """Lower one stage's order where all limits stay met; the highest order is tried first."""
    for i in sorted(range(len(orders)), key=lambda i: -orders[i]):
        lower = [n for n in candidates[i] if n < orders[i]]
        if not lower:
            continue
        trial = list(orders)
        trial[i] = max(lower)
        picks = _pick(chain, candidates, trial)
        if _meets(chain, candidates, trial, picks):
            return trial, picks
    return None
