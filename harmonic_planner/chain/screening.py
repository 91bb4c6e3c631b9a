"""Candidates side by side: limits out of reach are set aside, candidates that cannot suffice are dropped."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.budget import without_limits
from harmonic_planner.chain.propagate import propagate

Candidates = Mapping[int, Array]
"""Order -> rejections of its candidates [dB], shape (candidates, lines)."""

ROUNDING = 1e-9
"""Share of a limit that sums in another order may differ by."""


@dataclass(frozen=True)
class Obstacle:
    """Why not every limit can be met.

    Attributes
    ----------
    kind : {"out-of-reach", "stage", "together"}
        A limit that is missed with every stage at its best in every line; a stage none of whose candidates suffices
        with all others at their best; candidates that suffice one by one and never together.
    stage : int or None
        The stage whose candidates are the reason, 0-based; None where no single one is.
    to, line : int
        The limit: stage at whose output it stands, array index of the line.
    over_db : float
        By how much it is missed: by the bound, by the stage's best candidate, or by the allocation given.
    """

    kind: Literal["out-of-reach", "stage", "together"]
    stage: int | None
    to: int
    line: int
    over_db: float


@dataclass(frozen=True)
class Options:
    """One stage's candidates side by side.

    Attributes
    ----------
    orders, picks : (candidates,) int
        Order, and row within that order as it was given.
    passed : (candidates, lines) float
        Transmission in the chain's quantity.
    """

    orders: NDArray[np.int_]
    picks: NDArray[np.int_]
    passed: Array

    @property
    def least(self) -> Array:
        """The least transmission in each line, (lines,)."""
        return np.asarray(self.passed.min(axis=0))

    def only(self, kept: NDArray[np.bool_] | NDArray[np.int_]) -> Options:
        """Return the candidates that `kept` marks or lists."""
        return Options(self.orders[kept], self.picks[kept], self.passed[kept])


def options(chain: ChainArrays, candidates: Candidates) -> Options:
    """Lay one stage's candidates side by side, as transmissions."""
    orders = np.concatenate([np.full(len(rows), n) for n, rows in candidates.items()])
    picks = np.concatenate([np.arange(len(rows)) for rows in candidates.values()])
    return Options(orders, picks, chain.from_db(-np.concatenate(list(candidates.values()))))


def excess_over(chain: ChainArrays, passed: Sequence[Array]) -> Array:
    """Return level over limit with every allowance, the leading axis of any transmission in front.

    Parameters
    ----------
    chain : ChainArrays
    passed : sequence of (lines,) or (n, lines) float
        Transmissions, one entry a stage.

    Returns
    -------
    (stages, lines) or (n, stages, lines) float
    """
    combs = propagate(chain, passed, allowed=True)
    over = [c.leaving / s.limit for c, s in zip(combs, chain.stages, strict=True)]
    return np.stack(np.broadcast_arrays(*over), axis=-2)


def set_aside(chain: ChainArrays, stages: Sequence[Options]) -> tuple[ChainArrays, Obstacle | None]:
    """Take away the limits that are missed with every stage at its best in every line.

    Returns
    -------
    chain : ChainArrays
    obstacle : Obstacle or None
        The limit that is missed by most.
    """
    over = excess_over(chain, [s.least for s in stages])
    if (over <= 1.0).all():
        return chain, None
    return without_limits(chain, over > 1.0), obstacle_at(chain, over, "out-of-reach")


def obstacle_at(
    chain: ChainArrays, over: Array, kind: Literal["out-of-reach", "stage", "together"], stage: int | None = None
) -> Obstacle:
    """Return the worst of `over`, (stages, lines), as an obstacle."""
    to, line = np.unravel_index(int(np.argmax(over)), over.shape)
    return Obstacle(kind, stage, int(to), int(line), float(chain.to_db(over[to, line])))


def screen(chain: ChainArrays, stages: Sequence[Options]) -> tuple[list[Options], Obstacle | None]:
    """Drop every candidate that misses a limit with all other stages at their best, until none does.

    Returns
    -------
    stages : list of Options
    obstacle : Obstacle or None
        The first stage that has no candidate left; it is returned with those it had.
    """
    kept = list(stages)
    unchanged = 0
    i = 0
    while unchanged < len(kept):
        over = excess_of_each(chain, kept, i)
        worst = over.max(axis=(1, 2))
        good = worst <= 1.0 + ROUNDING
        if not good.any():
            return kept, obstacle_at(chain, over[int(np.argmin(worst))], "stage", i)
        unchanged = unchanged + 1 if good.all() else 1
        kept[i] = kept[i].only(good)
        i = (i + 1) % len(kept)
    return kept, None


def excess_of_each(chain: ChainArrays, stages: Sequence[Options], i: int) -> Array:
    """Return level over limit for each candidate of stage `i`, all other stages at their best.

    Returns
    -------
    (candidates, stages, lines) float
    """
    return excess_over(chain, [s.passed if j == i else s.least for j, s in enumerate(stages)])
