"""What holds the count of resonators up: for each stage, the limit that a resonator fewer would miss.

One stage at a time is given the best candidate of one resonator fewer. Beside the other filters as they were built that
tells which line stops it, by how much and where that line comes from; beside the best that any candidate of the other
stages does in each line, whether another choice there could make up for it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.budget import with_margin
from harmonic_planner.chain.propagate import births
from harmonic_planner.chain.screening import Candidates, excess_over
from harmonic_planner.model import LEAK_OF, Holding, Origin, Scenario, Why
from harmonic_planner.planning.evaluate import beyond_db, origins_of
from harmonic_planner.planning.settle import Settled

_LEAST_SHARE = 0.1
_MOST_ORIGINS = 3
_MOST_OF_LOAD = 0.6


def why(
    scenario: Scenario,
    chain: ChainArrays,
    settled: Settled,
    transmissions: Sequence[Array],
    margins_db: Sequence[float],
) -> Why | None:
    """Say what keeps each planned filter from doing with a resonator fewer.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
        With the limits as the user gave them.
    settled : Settled
    transmissions : sequence of (points, lines) float
        Of the filters as built, over span and drift.
    margins_db : sequence of float
        Margin asked for at each stage's output [dB].

    Returns
    -------
    Why or None
        None where a limit is missed as it is, or no filter is planned.
    """
    target = with_margin(chain, margins_db)
    planned = [i for i, f in enumerate(settled.filters) if f.source == "planned" and f.built is not None]
    if not planned or beyond_db(chain, transmissions, margins_db) < 0:
        return None
    best = [_best(target, rows, built) for rows, built in zip(settled.rows, transmissions, strict=True)]
    stages = tuple(_holding(scenario, target, settled, transmissions, best, i) for i in planned)
    return Why(_sentence(stages), stages)


@dataclass(frozen=True)
class _Missed:
    """The limit that is missed first, with the origins of its line."""

    to: int
    line: int
    over_db: float
    origins: tuple[Origin, ...]


def _best(target: ChainArrays, rows: Candidates, built: Array) -> Array:
    """Return the least transmission in each line that any candidate, or the filter as built, has, (lines,)."""
    every = np.concatenate([target.from_db(-r) for r in rows.values()])
    return np.asarray(np.minimum(every.min(axis=0), np.reshape(built, (-1, target.grid.count)).max(axis=0)))


def _holding(
    scenario: Scenario,
    target: ChainArrays,
    settled: Settled,
    transmissions: Sequence[Array],
    best: Sequence[Array],
    i: int,
) -> Holding:
    """Try stage `i` with a resonator fewer."""
    built = settled.filters[i].built
    assert built is not None
    name, resonators, fewer = scenario.stages[i].name, built.resonators, built.resonators - 1
    rows = settled.rows[i]
    words = f"{name}, {_count(resonators)}: "
    offered = {n: r for n, r in rows.items() if n <= fewer}
    if fewer == 0:
        offered = {0: np.zeros((1, target.grid.count))}
    if fewer not in offered:
        text = f"{words}no filter of {fewer} is allowed there or passes the carrier"
        return Holding(name, resonators, None, "", None, True, (), text)
    missed = _missed_first(scenario, target, offered[fewer], transmissions, i)
    if missed is None:
        text = f"{words}by their prototypes {fewer} would do, but no circuit of {fewer} as built does all"
        return Holding(name, resonators, None, "", None, False, (), text)
    less = np.concatenate([target.from_db(-r) for r in offered.values()])
    bound = bool(_least_excess(target, [*best[:i], less, *best[i + 1 :]]) > 1.0)
    at = "output" if missed.to == len(target.stages) - 1 else scenario.stages[missed.to].name
    line = target.grid.line(missed.line)
    where = "at the output" if at == "output" else f"behind {at}"
    text = (
        f"{words}{'without a filter' if fewer == 0 else f'with {fewer}'} line {line} {where} would be "
        f"{missed.over_db:.1f} dB beyond its limit with margin, {_origin_words(missed.origins)}; "
        + ("no choice at the other stages makes up for that" if bound else "other stages could make up for that")
    )
    return Holding(name, resonators, line, at, missed.over_db, bound, missed.origins, text)


def _missed_first(
    scenario: Scenario, target: ChainArrays, rows: Array, transmissions: Sequence[Array], i: int
) -> _Missed | None:
    """Return the limit that the best of these candidates misses most beside the other filters as built."""
    trials = [[*transmissions[:i], target.from_db(-row), *transmissions[i + 1 :]] for row in rows]
    excesses = [excess_over(target, trial).reshape(-1, len(target.stages), target.grid.count) for trial in trials]
    nearest = int(np.argmin([over.max() for over in excesses]))
    over, trial = excesses[nearest], trials[nearest]
    if over.max() <= 1.0:
        return None
    point, to, line = (int(x) for x in np.unravel_index(int(np.argmax(over)), over.shape))
    there = [np.atleast_2d(t)[min(point, np.atleast_2d(t).shape[0] - 1)] for t in trial]
    origins = origins_of(scenario, target, births(target, there, to=to), line)
    return _Missed(to, line, float(target.to_db(over.max())), origins)


def _least_excess(target: ChainArrays, passed: Sequence[Array]) -> float:
    """Return the least, over the candidates that one entry of `passed` lists, of the worst level over limit."""
    over = excess_over(target, passed)
    return float(over.reshape(-1, over.shape[-2] * over.shape[-1]).max(axis=1).min())


def _sentence(stages: Sequence[Holding]) -> str:
    """Name the stages that carry most of the load, the lines that stop them, and what the first one consists of."""
    limited = sorted((s for s in stages if s.line is not None), key=lambda s: -s.resonators)
    if not limited:
        return "parts as built hold the count up, no limit does"
    total, carrying = sum(s.resonators for s in stages), limited[:1]
    for s in limited[1:]:
        if sum(c.resonators for c in carrying) >= _MOST_OF_LOAD * total:
            break
        carrying.append(s)
    held, first = sum(s.resonators for s in carrying), carrying[0]
    carrying.sort(key=lambda s: stages.index(s))
    lines = [str(k) for k in dict.fromkeys(s.line for s in carrying)]
    return (
        f"{listed([s.stage for s in carrying])} carr{'ies' if len(carrying) == 1 else 'y'} {held} of {total} "
        f"resonators: line{'s' if len(lines) > 1 else ''} {listed(lines)}; with one fewer at {first.stage} line "
        f"{first.line} would come {_origin_words(first.origins)}"
    )


def _origin_words(origins: Sequence[Origin]) -> str:
    """Say what a line consists of: shares and birth places."""
    told = [o for o in origins if o.share >= _LEAST_SHARE][:_MOST_ORIGINS] or list(origins[:1])
    return listed([f"{o.share * 100:.0f} % from line {o.line}{_place(o.stage)}" for o in told])


def _place(stage: str) -> str:
    if stage.startswith(LEAK_OF):
        return f", {stage}"
    return " of the source" if stage == "source" else f" of {stage}"


def _count(resonators: int) -> str:
    return f"{resonators} resonator{'s' if resonators != 1 else ''}"


def listed(words: Sequence[str]) -> str:
    """Join words as in a sentence."""
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"
