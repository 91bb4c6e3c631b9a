"""The chain as the allocation sees it: of every comb the lines that can matter, and candidates without the dominated.

The output is monotone in every transmission, so with every filter at its best in each line, or at its worst, one
forward run bounds every level and every gain. A line that cannot bring any limit nearer by more than `NEGLIGIBLE` of
it is held at its least level and leaves the arrays. A candidate that is nowhere better than another of no higher order
is dropped.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.propagate import propagate
from harmonic_planner.chain.screening import Options, excess_of_each

NEGLIGIBLE = 1e-6
"""Share of a limit, 1e-5 dB, that the lines left out, and each comparison of labels, may be wrong by."""
_NEVER_NEAR = 0.02
_WATCHED = 0.1


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
        The kept lines whose limit here is watched. At the last stage those are the ones that a single candidate can
        bring near their limit, the rest being left to the final check.
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
        return np.asarray(self.made + before @ self.convert.T)

    def excess(self, behind: Array) -> Array:
        """Return level over limit of lines behind the stage, (..., kept) -> (..., limits)."""
        return np.asarray(behind[..., self.limited] / self.limit)


def reduced(
    chain: ChainArrays, stages: Sequence[Options], *, near: NDArray[np.int_] | None = None
) -> tuple[ReducedStage, ...]:
    """Return the chain on the lines that can matter, with the candidates that can.

    Parameters
    ----------
    chain : ChainArrays
        With limits that are in reach.
    stages : sequence of Options
        As `screen` left them.
    near : (vectors, stages) int or None
        Order vectors around which the search will move: at the last stage only those limits are watched that one
        candidate, the other stages at the best of such a vector, brings to a tenth or more.

    Returns
    -------
    tuple of ReducedStage
    """
    best = propagate(chain, [s.least for s in stages], allowed=True)
    most = [s.passed.max(axis=0) for s in stages]
    worst = propagate(chain, most, allowed=True)
    gains = _most_gains(chain, most)
    last = len(stages) - 1
    followed = np.ones(chain.grid.count, dtype=bool) if near is None else _approached(chain, stages, near)
    before = np.zeros(0, dtype=int)
    entering = chain.source
    found = []
    for i, (stage, option) in enumerate(zip(chain.stages, stages, strict=True)):
        in_reach = worst[i].leaving > _NEVER_NEAR * stage.limit
        watched = in_reach & followed if i == last else in_reach
        kept = np.flatnonzero(watched | _matters(gains[i] * worst[i].leaving))
        gain = np.maximum(gains[i], np.where(in_reach, 1.0 / stage.limit, 0.0))[kept]
        allowed = NEGLIGIBLE / (max(kept.size, 1) * np.maximum(gain, 1e-300))
        held = entering.copy()
        held[before] = 0.0
        through = stage.mismatch * stage.termination
        choices = _choices(option, kept, allowed / np.maximum(stage.mismatch * worst[i].device[kept], 1e-300))
        limited = np.flatnonzero(watched[kept])
        found.append(
            ReducedStage(
                made=(through * (stage.device + stage.conversion @ held))[kept],
                added=stage.added[kept],
                convert=through * stage.conversion[np.ix_(kept, before)],
                negligible=allowed / np.maximum(most[i][kept], 1e-300),
                limited=limited,
                limit=stage.limit[kept][limited],
                choices=choices,
                least={n: o.least for n, o in choices.items()},
            )
        )
        before, entering = kept, best[i].leaving
    return tuple(found)


def _approached(chain: ChainArrays, stages: Sequence[Options], vectors: NDArray[np.int_]) -> NDArray[np.bool_]:
    """Mark the last stage's limits that a single candidate approaches while the others are at a vector's best."""
    most = np.zeros(chain.grid.count)
    for vector in vectors:
        at = [s.only(s.orders == n) for s, n in zip(stages, vector, strict=True)]
        for i in range(len(stages)):
            most = np.maximum(most, excess_of_each(chain, [*at[:i], stages[i], *at[i + 1 :]], i)[:, -1].max(axis=0))
    return most > _WATCHED


def _matters(share: Array) -> NDArray[np.bool_]:
    """Mark lines but for as many of the smallest shares as stay below `NEGLIGIBLE` together."""
    ascending = np.argsort(share)
    marked = np.zeros(share.size, dtype=bool)
    marked[ascending[np.cumsum(share[ascending]) > NEGLIGIBLE]] = True
    return marked


def _choices(option: Options, kept: NDArray[np.int_], negligible: Array) -> Mapping[int, Options]:
    """Return order -> candidates on the kept lines, without those that another of no higher order matches."""
    compared = np.maximum(option.passed[:, kept], negligible)
    taken: list[int] = []
    for c in np.lexsort((compared.sum(axis=1), option.orders)):
        if not (compared[taken] <= compared[c]).all(axis=1).any():
            taken.append(int(c))
    some = option.only(np.array(taken))
    some = Options(some.orders, some.picks, some.passed[:, kept])
    return {int(n): some.only(some.orders == n) for n in np.unique(some.orders)}


def _most_gains(chain: ChainArrays, most: Sequence[Array]) -> list[Array]:
    """Return for each line behind each stage the largest gain into any later limit, per unit of that limit."""
    gains = np.zeros((0, chain.grid.count))
    found = [np.zeros(chain.grid.count)]
    for i in range(len(chain.stages) - 1, 0, -1):
        stage = chain.stages[i]
        limited = np.flatnonzero(np.isfinite(stage.limit))
        own = np.zeros((limited.size, chain.grid.count))
        own[np.arange(limited.size), limited] = 1.0 / stage.limit[limited]
        through = stage.mismatch * stage.termination * most[i]
        gains = (np.concatenate([own, gains]) * through) @ stage.conversion
        found.append(gains.max(axis=0, initial=0.0))
    return found[::-1]
