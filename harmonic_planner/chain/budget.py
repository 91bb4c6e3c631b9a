"""One output limit turned into a rejection for every unwanted line of every stage.

`allocate` chooses the filters; `requirement` turns what they then do into the smallest set of rejections that suffices
together, which is what each filter is specified by.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.propagate import excess, path_gains, propagate

LEAST_USEFUL_DB = 3.0
"""A filter's rejection below this is not relied upon: such a line lies at the passband's edge."""
_RESERVE_DB = 0.4
_REACH_DB = 200.0
_HALVINGS = 26


@dataclass(frozen=True)
class Rejections:
    """A set of rejections that suffices together.

    Attributes
    ----------
    required_db : tuple of (lines,) float
        One array a stage; a line that needs none has 0.
    out_of_reach : (stages, lines) bool
        Limits that no rejection by these filters can meet.
    surplus_db : float
        By how much the filters' rejections could be lowered alike; negative where they do not suffice.
    """

    required_db: tuple[Array, ...]
    out_of_reach: NDArray[np.bool_]
    surplus_db: float


def with_margin(chain: ChainArrays, margin_db: Sequence[float]) -> ChainArrays:
    """Return `chain` with each stage's limit lowered by its margin [dB]."""
    stages = (
        replace(s, limit=s.limit * 10 ** (-m * chain.exponent / 20))
        for s, m in zip(chain.stages, margin_db, strict=True)
    )
    return replace(chain, stages=tuple(stages))


def without_limits(chain: ChainArrays, dropped: NDArray[np.bool_]) -> ChainArrays:
    """Return `chain` with the limits marked in `dropped`, (stages, lines), taken away."""
    stages = (replace(s, limit=np.where(d, np.inf, s.limit)) for s, d in zip(chain.stages, dropped, strict=True))
    return replace(chain, stages=tuple(stages))


def worst_excess(chain: ChainArrays, rejections_db: Sequence[Array]) -> Array:
    """Return level over limit, (stages, lines), allowances counted, for filters that give `rejections_db`."""
    combs = propagate(chain, [chain.from_db(-r) for r in rejections_db], allowed=True)
    return excess(chain, combs)


def requirement(
    chain: ChainArrays,
    achieved_db: Sequence[Array],
    filtered: Sequence[bool],
    *,
    movable: Sequence[bool] | None = None,
) -> Rejections:
    """Return rejections that suffice together and of which none can be lowered alone.

    The filters' surplus is first shared by lowering every rejection alike; then far lines, where filters do much
    more than is needed, are brought down to equal shares of what is left; then every line is lowered as far as it
    goes alone, lines next to the carrier first.

    Parameters
    ----------
    chain : ChainArrays
        With the limits to meet, margin included.
    achieved_db : sequence of (lines,) float
        Rejection of each stage's filter, leakage included; ignored below 3 dB.
    filtered : sequence of bool
        Whether the stage has a filter.
    movable : sequence of bool, optional
        Stages whose rejections may be changed, all by default; the others keep what they achieve.

    Returns
    -------
    Rejections
    """
    moves = [True] * len(chain.stages) if movable is None else list(movable)
    usable = [
        np.where(a < LEAST_USEFUL_DB, 0.0, a) if has else np.zeros_like(a)
        for a, has in zip(achieved_db, filtered, strict=True)
    ]

    def lowered(by_db: float) -> list[Array]:
        return [
            np.where(u > 0, np.maximum(u - by_db, 0.0), 0.0) if moving else u
            for u, moving in zip(usable, moves, strict=True)
        ]

    out_of_reach = worst_excess(chain, lowered(-_REACH_DB)) > 1.0
    chain = without_limits(chain, out_of_reach)
    reserve = float(chain.from_db(-_RESERVE_DB))
    surplus = _last_that_meets(
        lambda x: bool((worst_excess(chain, lowered(x)) <= reserve).all()), low=-_REACH_DB, high=_REACH_DB
    )
    alike = lowered(surplus)
    share_db = _last_that_meets(
        lambda s: bool((worst_excess(chain, _capped(chain, alike, s, moves)) <= 1.0).all()), low=-_REACH_DB, high=0.0
    )
    shared = _capped(chain, alike, share_db, moves)
    return Rejections(tuple(_relaxed(chain, shared, moves)), out_of_reach, surplus)


def _last_that_meets(meets: Callable[[float], bool], *, low: float, high: float) -> float:
    """Return the largest x in [low, high] that meets, by bisection; `low` is taken to meet."""
    if meets(high):
        return high
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        if meets(middle):
            low = middle
        else:
            high = middle
    return low


def _capped(chain: ChainArrays, rejections_db: Sequence[Array], share_db: float, moves: Sequence[bool]) -> list[Array]:
    """Lower every rejection until its line takes `share_db` of a limit; none is raised."""
    combs = propagate(chain, [chain.from_db(-r) for r in rejections_db], allowed=True)
    share = float(chain.from_db(share_db))
    needed_db = [np.zeros_like(r) for r in rejections_db]
    for to, last in enumerate(chain.stages):
        if not np.isfinite(last.limit).any():
            continue
        gains: Array = np.eye(chain.grid.count)
        for i in range(to, -1, -1):
            stage = chain.stages[i]
            into = gains * (stage.mismatch * combs[i].device)
            here_db = chain.to_db((into / (share * last.limit[:, None])).max(axis=0))
            needed_db[i] = np.maximum(needed_db[i], here_db) if moves[i] else rejections_db[i]
            transmission = chain.from_db(-np.minimum(rejections_db[i], needed_db[i]))
            gains = (gains * (stage.mismatch * stage.termination * transmission)) @ stage.conversion
    return [np.minimum(r, n) for r, n in zip(rejections_db, needed_db, strict=True)]


def _relaxed(chain: ChainArrays, rejections_db: Sequence[Array], moves: Sequence[bool]) -> list[Array]:
    """Lower each rejection alone as far as every limit allows; the last stage and the nearest lines come first.

    The level at an output is affine in one transmission, so each step is closed form, and since slack only shrinks
    one pass suffices.
    """
    relaxed = [r.copy() for r in rejections_db]
    outputs = [to for to, s in enumerate(chain.stages) if np.isfinite(s.limit).any()]
    for i in range(len(chain.stages) - 1, -1, -1):
        stage = chain.stages[i]
        transmissions = [chain.from_db(-r) for r in relaxed]
        combs = propagate(chain, transmissions, allowed=True)
        bound = [to for to in outputs if to >= i]
        if not moves[i] or not bound or not (relaxed[i] > 0).any():
            continue
        slack = np.concatenate([chain.stages[to].limit - combs[to].leaving for to in bound])
        into = np.concatenate([path_gains(chain, transmissions, after=i, to=to, allowed=True) for to in bound]) * (
            stage.mismatch * combs[i].device
        )
        distance = np.abs(np.log((np.arange(chain.grid.count) + 1) / (stage.carrier + 1)))
        t = transmissions[i].copy()
        for k in sorted(np.flatnonzero(relaxed[i] > 0), key=lambda k: distance[k]):
            column = into[:, k]
            reached = column > 0
            room = 1.0 - t[k]
            if reached.any():
                room = min(room, float(np.min(slack[reached] / column[reached])))
            if room > 0:
                t[k] += room
                slack[reached] -= room * column[reached]
        relaxed[i] = np.maximum(-chain.to_db(t), 0.0)
    return relaxed
