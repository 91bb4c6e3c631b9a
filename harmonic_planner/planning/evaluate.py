"""The whole chain with its filters in place: levels, allowances and margins of every line at the output."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.propagate import Birth, Comb, births, propagate
from harmonic_planner.model import LEAK_OF, Origin, OutputLine, Scenario

FAINTEST_DBC = -200.0
"""Lines below this are left out of what people read."""
_LEAST_SHARE = 1e-3


@dataclass(frozen=True)
class Run:
    """A forward run over every point of span and drift.

    Attributes
    ----------
    combs : tuple of Comb
        Nominal, each (points, lines) or (lines,), one a stage.
    level_db, allowed_db : (stages, lines) float
        At each stage's output, the worst over the points [dBc]: nominal, and with allowances.
    margin_db : (stages, lines) float
        Limit less allowed level; infinite where nothing is asked.
    """

    combs: tuple[Comb, ...]
    level_db: Array
    allowed_db: Array
    margin_db: Array


def run(chain: ChainArrays, transmissions: Sequence[Array]) -> Run:
    """Run the chain nominally and with allowances.

    Parameters
    ----------
    chain : ChainArrays
        With the limits as the user gave them.
    transmissions : sequence of (points, lines) float
        One array a stage.
    """
    combs = propagate(chain, transmissions)
    allowed = propagate(chain, transmissions, allowed=True)
    level_db = np.array([worst_db(chain, c.leaving) for c in combs])
    allowed_db = np.array([worst_db(chain, c.leaving) for c in allowed])
    limit_db = np.array([chain.to_db(s.limit) for s in chain.stages])
    finite = np.isfinite(limit_db)
    margin_db = np.full_like(limit_db, np.inf)
    margin_db[finite] = limit_db[finite] - allowed_db[finite]
    return Run(combs, level_db, allowed_db, margin_db)


def beyond_db(chain: ChainArrays, transmissions: Sequence[Array], margin_db: Sequence[float]) -> float:
    """Return the least margin over all limits less the margin asked for there [dB], from a forward run."""
    allowed = propagate(chain, transmissions, allowed=True)
    over = [
        chain.to_db(float(np.max(c.leaving / s.limit))) + m
        for s, c, m in zip(chain.stages, allowed, margin_db, strict=True)
    ]
    return -float(np.max(over))


def worst_db(chain: ChainArrays, comb: Array) -> Array:
    """Return the highest level of each line over all points [dBc], shape (lines,)."""
    return chain.to_db(np.reshape(comb, (-1, chain.grid.count)).max(axis=0))


def output_lines(
    scenario: Scenario,
    chain: ChainArrays,
    transmissions: Sequence[Array],
    result: Run,
    other_margin_db: Array,
    *,
    to: int | None = None,
) -> tuple[OutputLine, ...]:
    """Return every unwanted line at the output, or behind another stage, with its margin and what caused it.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
    transmissions : sequence of (points, lines) float
    result : Run
        Of the same transmissions.
    other_margin_db : (lines,) float
        Margins there under the other phase rule.
    to : int, optional
        Stage behind which to look, the last unless given.
    """
    last = len(chain.stages) - 1 if to is None else to
    leaving = np.atleast_2d(result.combs[last].leaving)
    worst_point = leaving.argmax(axis=0)
    wanted = [
        k
        for k in range(chain.grid.count)
        if k != chain.stages[last].carrier and result.level_db[last, k] > FAINTEST_DBC
    ]
    origins = {}
    for point in sorted({int(worst_point[k]) for k in wanted}):
        there = [np.atleast_2d(t)[min(point, np.atleast_2d(t).shape[0] - 1)] for t in transmissions]
        found = births(chain, there, to=last)
        for k in wanted:
            if worst_point[k] == point:
                origins[k] = origins_of(scenario, chain, found, k)
    limit_db = chain.to_db(chain.stages[last].limit)
    lines = []
    for k in wanted:
        asked = bool(np.isfinite(limit_db[k]))
        lines.append(
            OutputLine(
                line=chain.grid.line(k),
                frequency_hz=(float(chain.low_hz[k]), float(chain.high_hz[k])),
                level_dbc=float(result.level_db[last, k]),
                allowance_db=float(result.allowed_db[last, k] - result.level_db[last, k]),
                limit_dbc=float(limit_db[k]) if asked else None,
                margin_db=float(result.margin_db[last, k]) if asked else None,
                margin_other_phases_db=float(other_margin_db[k]) if asked else None,
                origins=origins[k],
            )
        )
    return tuple(lines)


def origins_of(scenario: Scenario, chain: ChainArrays, found: Sequence[Birth], line: int) -> tuple[Origin, ...]:
    """Return where a line, an array index, comes from, the largest share first; tiny shares are left out.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
    found : sequence of Birth
        All that make up the level.
    line : int
    """
    level = sum(float(b.paths[line].sum()) for b in found)
    parts = [
        (_birthplace(scenario, b), chain.grid.line(int(j)), float(b.paths[line, j] / level))
        for b in found
        for j in np.flatnonzero(b.paths[line] > _LEAST_SHARE * level)
    ]
    return tuple(
        Origin(place, born, share)
        for place, born, share in sorted(parts, key=lambda part: (-part[2], part[0], part[1]))
    )


def _birthplace(scenario: Scenario, birth: Birth) -> str:
    """Name where lines are born: the source, a stage's device, its amplifier, or what leaks and where to."""
    names = [stage.name for stage in scenario.stages]
    place = "source" if birth.stage < 0 else names[birth.stage]
    if birth.part == "leak":
        return f"{LEAK_OF}{place} into {(*names, 'the output')[birth.behind + 1]}"
    return f"{place} (amplifier)" if birth.part == "amplifier" else place
