"""The chain as the allocation sees it: candidates that can matter, and of every comb the lines that can.

Bounds come from two forward runs, every filter at its best in each line and at its worst; since the output is monotone
in every transmission, each level and each gain lies between the two. A line that cannot bring any limit nearer by
more than `NEGLIGIBLE` of it is set to its least level and leaves the arrays; a candidate that misses a limit with all
other stages at their best is dropped, and one that is nowhere better than another of no higher order.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array, ChainArrays, StageArrays
from harmonic_planner.chain.budget import without_limits
from harmonic_planner.chain.propagate import propagate

Candidates = Mapping[int, Array]
"""Order -> rejections of its candidates [dB], shape (candidates, lines)."""

NEGLIGIBLE = 1e-6
"""Share of a limit, 1e-5 dB, that all simplifications of one comb together may be wrong by."""
ROUNDING = 1e-9
_NEVER_NEAR = 0.02
"""A line that stays below this share of its limit whatever is chosen is not followed."""


@dataclass(frozen=True)
class Obstacle:
    """Why not every limit can be met.

    Attributes
    ----------
    kind : {"out-of-reach", "stage", "together"}
        A limit that is missed with every stage at its best in every line; a stage none of whose candidates suffices
        with all others at their best; or candidates that suffice one by one and never together.
    stage : int or None
        The stage whose candidates are the reason, 0-based; None where no single one is.
    to, line : int
        The limit: stage at whose output it stands, array index of the line.
    over_db : float
        By how much it is missed, at the least.
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

    def only(self, kept: NDArray[np.bool_] | NDArray[np.int_]) -> Options:
        """Return the candidates that `kept` marks or lists."""
        return Options(self.orders[kept], self.picks[kept], self.passed[kept])


@dataclass(frozen=True)
class ReducedStage:
    """One stage on the lines that matter behind it, allowances included.

    With v the lines behind the stage before, this stage's device makes u = made + convert·v and the lines behind it
    are v = passed·u + added.

    Attributes
    ----------
    made, added : (kept,) float
    convert : (kept, kept before) float
    negligible : (kept,) float
        A level of u that may be taken for any lower one.
    limited : (limits,) int
        Which of the kept lines have a limit here.
    limit : (limits,) float
    choices : mapping of int to Options
        Order -> its candidates on the kept lines.
    least : mapping of int to (kept,) float
        Order -> least transmission in each line among its candidates.
    """

    made: Array
    added: Array
    convert: Array
    negligible: Array
    limited: NDArray[np.int_]
    limit: Array
    choices: Mapping[int, Options]
    least: Mapping[int, Array]

    def device(self, before: Array) -> Array:
        """Return u for lines before the stage, (..., kept before) -> (..., kept)."""
        return self.made + before @ self.convert.T

    def excess(self, behind: Array) -> Array:
        """Return level over limit of lines behind the stage, (..., kept) -> (..., limits)."""
        return np.asarray(behind[..., self.limited] / self.limit)


def options(chain: ChainArrays, candidates: Candidates) -> Options:
    """Lay one stage's candidates side by side, as transmissions."""
    orders = np.concatenate([np.full(len(rows), n) for n, rows in candidates.items()])
    picks = np.concatenate([np.arange(len(rows)) for rows in candidates.values()])
    return Options(orders, picks, chain.from_db(-np.concatenate(list(candidates.values()))))


def set_aside(chain: ChainArrays, stages: Sequence[Options]) -> tuple[ChainArrays, Obstacle | None]:
    """Take away the limits that are missed with every stage at its best in every line.

    Returns
    -------
    chain : ChainArrays
    obstacle : Obstacle or None
        The limit that is missed by most.
    """
    over = _excess(chain, [s.passed.min(axis=0) for s in stages])
    if (over <= 1.0).all():
        return chain, None
    to, line = np.unravel_index(int(np.argmax(over)), over.shape)
    obstacle = Obstacle("out-of-reach", None, int(to), int(line), float(chain.to_db(over[to, line])))
    return without_limits(chain, over > 1.0), obstacle


def screen(chain: ChainArrays, stages: Sequence[Options]) -> tuple[list[Options], Obstacle | None]:
    """Drop every candidate that misses a limit with all other stages at their best, until none does.

    Returns
    -------
    stages : list of Options
    obstacle : Obstacle or None
        The first stage that has no candidate left; it is returned with those it had.
    """
    kept = list(stages)
    changed = True
    while changed:
        changed = False
        for i, stage in enumerate(kept):
            over, where = _excess_of_each(chain, kept, i)
            good = over <= 1.0 + ROUNDING
            if good.all():
                continue
            if not good.any():
                c = int(np.argmin(over))
                to, line = where[c]
                return kept, Obstacle("stage", i, int(to), int(line), float(chain.to_db(over[c])))
            kept[i] = stage.only(good)
            changed = True
    return kept, None


def reduced(chain: ChainArrays, stages: Sequence[Options]) -> tuple[ReducedStage, ...]:
    """Return the chain on the lines that can matter, with the candidates that can.

    Parameters
    ----------
    chain : ChainArrays
        With limits that are in reach.
    stages : sequence of Options
        As `screen` left them.

    Returns
    -------
    tuple of ReducedStage
    """
    best = propagate(chain, [s.passed.min(axis=0) for s in stages], allowed=True)
    worst_passed = [s.passed.max(axis=0) for s in stages]
    worst = propagate(chain, worst_passed, allowed=True)
    gains = _most_gains(chain, worst_passed)
    count = chain.grid.count
    before = np.zeros(0, dtype=int)
    fixed = chain.source
    found = []
    for i, (stage, option, gain) in enumerate(zip(chain.stages, stages, gains, strict=True)):
        made_most = stage.mismatch * worst[i].device
        near = worst[i].leaving > _NEVER_NEAR * stage.limit
        share = gain * worst[i].leaving
        ascending = np.argsort(share)
        negligible = np.zeros(count, dtype=bool)
        negligible[ascending[np.cumsum(share[ascending]) <= NEGLIGIBLE]] = True
        kept = np.flatnonzero(~negligible | near)
        gain = np.maximum(gain, np.where(near, 1.0 / stage.limit, 0.0))[kept]
        allowed = NEGLIGIBLE / (max(kept.size, 1) * np.maximum(gain, 1e-300))
        limited = np.flatnonzero(near[kept])
        through = stage.mismatch * stage.termination
        still = np.ones(count, dtype=bool)
        still[before] = False
        made = through * (stage.device + stage.conversion @ np.where(still, fixed, 0.0))
        choices = _choices(option, kept, allowed / np.maximum(made_most[kept], 1e-300))
        found.append(
            ReducedStage(
                made=made[kept],
                added=stage.amplifier[kept],
                convert=through * stage.conversion[np.ix_(kept, before)],
                negligible=allowed / np.maximum(worst_passed[i][kept], 1e-300),
                limited=limited,
                limit=stage.limit[kept][limited],
                choices=choices,
                least={n: o.passed.min(axis=0) for n, o in choices.items()},
            )
        )
        before, fixed = kept, best[i].leaving
    return tuple(found)


def _choices(option: Options, kept: NDArray[np.int_], negligible: Array) -> Mapping[int, Options]:
    """Return order -> candidates on the kept lines, without those that another of no higher order matches."""
    passed = np.maximum(option.passed[:, kept], negligible)
    by_order = np.lexsort((passed.sum(axis=1), option.orders))
    taken: list[int] = []
    for c in by_order:
        if not (passed[taken] <= passed[c]).all(axis=1).any():
            taken.append(int(c))
    some = option.only(np.array(taken))
    some = Options(some.orders, some.picks, some.passed[:, kept])
    return {int(n): some.only(some.orders == n) for n in np.unique(some.orders)}


def _excess(chain: ChainArrays, passed: Sequence[Array]) -> Array:
    combs = propagate(chain, passed, allowed=True)
    return np.stack([c.leaving / s.limit for c, s in zip(combs, chain.stages, strict=True)])


def _excess_of_each(chain: ChainArrays, stages: Sequence[Options], i: int) -> tuple[Array, NDArray[np.int_]]:
    """Return each candidate's worst level over limit with all other stages at their best, and where that is.

    Returns
    -------
    over : (candidates,) float
    where : (candidates, 2) int
        Stage at whose output the limit stands, and line.
    """
    least = [s.passed.min(axis=0) for s in stages]
    device = propagate(chain, least, allowed=True)[i].device
    behind = chain.stages[i].mismatch * stages[i].passed * device + chain.stages[i].amplifier
    over = np.zeros(len(behind))
    where = np.zeros((len(behind), 2), dtype=int)
    v = behind
    for to in range(i, len(chain.stages)):
        stage = chain.stages[to]
        if to > i:
            v = stage.mismatch * least[to] * _made(stage, v) + stage.amplifier
        here = v / stage.limit
        line = here.argmax(axis=1)
        most = here[np.arange(len(here)), line]
        higher = most > over
        over[higher] = most[higher]
        where[higher] = np.stack([np.full(line.size, to), line], axis=1)[higher]
    return over, where


def _made(stage: StageArrays, before: Array) -> Array:
    return np.asarray(stage.termination * (stage.device + before @ stage.conversion.T))


def _most_gains(chain: ChainArrays, worst_passed: Sequence[Array]) -> list[Array]:
    """Return for each line behind each stage the largest gain into any later limit, per unit of that limit."""
    gains = np.zeros((0, chain.grid.count))
    most = [np.zeros(chain.grid.count)]
    for i in range(len(chain.stages) - 1, 0, -1):
        stage = chain.stages[i]
        limited = np.flatnonzero(np.isfinite(stage.limit))
        own = np.zeros((limited.size, chain.grid.count))
        own[np.arange(limited.size), limited] = 1.0 / stage.limit[limited]
        through = stage.mismatch * stage.termination * worst_passed[i]
        gains = (np.concatenate([own, gains]) * through) @ stage.conversion
        most.append(gains.max(axis=0, initial=0.0))
    return most[::-1]
