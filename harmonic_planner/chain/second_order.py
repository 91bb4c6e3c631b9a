"""Where lines of second order may come near a limit, so that linear sums are not enough.

Residuals of s dBc in all at a multiplier's input make lines of second order of at most 2s + c dB beside its carrier;
the own side of every later multiplier carries them on. Products of residuals that are all multiples of the input
carrier fall on the device's own lines, which its filter rejects anyway; those with at least one residual apart from
them can come out beside the carrier.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import ChainArrays
from harmonic_planner.chain.propagate import Comb
from harmonic_planner.model import Scenario
from harmonic_planner.physics.conversion import am_slope, second_order_near_db

GUARD_DB = 6.0
"""Lines of second order this far under the limit are left to the linear sums [dB]."""


@dataclass(frozen=True)
class SecondOrder:
    """What one multiplier may make of second order.

    Attributes
    ----------
    stage : int
        0-based.
    residuals_dbc : float
        Sum of all residuals at its input, the worst over the points [dBc].
    level_dbc : float
        Bound on a line of second order, carried to the output [dBc].
    """

    stage: int
    residuals_dbc: float
    level_dbc: float


def second_order_at_output(
    chain: ChainArrays, combs: Sequence[Comb], *, made_db: Sequence[float], growth_db: Sequence[float]
) -> tuple[SecondOrder, ...]:
    """Return the bound for every stage that makes lines of second order.

    Parameters
    ----------
    chain : ChainArrays
    combs : sequence of Comb
        Of a forward run, nominal.
    made_db : (stages,) float
        c of each stage's device near the carrier; −inf for a stage without one [dB].
    growth_db : (stages,) float
        By how much each stage raises a line beside the carrier, 0 without a device [dB].
    """
    found = []
    for i, comb in enumerate(combs):
        amplitude = np.reshape(comb.entering, (-1, chain.grid.count)) ** (1 / chain.exponent)
        total = amplitude.sum(axis=-1)
        apart = amplitude[:, _apart(chain, i)].sum(axis=-1)
        product = float(np.max(apart * (2 * total - apart)))
        if product > 0 and np.isfinite(made_db[i]):
            level_db = 20 * np.log10(product) + made_db[i] + sum(growth_db[i + 1 :])
            found.append(SecondOrder(i, float(20 * np.log10(total.max())), float(level_db)))
    return tuple(found)


def needs_exact(
    scenario: Scenario, chain: ChainArrays, combs: Sequence[Comb], *, guard_db: float = GUARD_DB
) -> tuple[SecondOrder, ...]:
    """Return the stages whose lines of second order may come within `guard_db` of the strictest limit, or above it.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
        With the limits as the user gave them.
    combs : sequence of Comb
        Of a forward run, nominal.
    guard_db : float

    Returns
    -------
    tuple of SecondOrder
        Empty where linear sums are enough.
    """
    made_db = [-np.inf if s.device is None else second_order_near_db(s.device, s.times) for s in scenario.stages]
    growth_db = [
        0.0 if s.device is None else float(20 * np.log10((s.times + abs(am_slope(s.device, s.times))) / 2))
        for s in scenario.stages
    ]
    limit_db = min((float(chain.to_db(s.limit.min())) for s in chain.stages), default=np.inf)
    found = second_order_at_output(chain, combs, made_db=made_db, growth_db=growth_db)
    return tuple(x for x in found if x.level_dbc > limit_db - guard_db)


def _apart(chain: ChainArrays, index: int) -> NDArray[np.bool_]:
    """Mark the lines that are no multiples of the carrier entering stage `index`, (lines,) bool."""
    carrier_in = chain.stages[index - 1].carrier + 1 if index else chain.grid.q
    return np.asarray(np.arange(1, chain.grid.count + 1) % carrier_in != 0)
