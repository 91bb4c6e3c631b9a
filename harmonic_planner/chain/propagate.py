"""Forward propagation of lines through the chain, and where each line at the output was born.

A residual is small against its carrier, so every multiplier is linear in it (conversion matrix: Torrey & Whitmer,
*Crystal Rectifiers*, 1948; Maas, *Nonlinear Microwave and RF Circuits*). With v the unwanted lines behind a stage
relative to its carrier,

    v_i = D_i (F_i + M_i v_(i−1)) + A_i

D the filter's transmissions relative to its carrier, F the device's lines, M its conversion matrix, A the amplifier's
lines and earlier carriers that leak to this node; every entry is non-negative, so the output is monotone in every
transmission. `allowed` computes the same with every path's mismatch and termination at its worst.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array, ChainArrays, StageArrays


@dataclass(frozen=True)
class Comb:
    """Unwanted lines at the nodes of one stage, each (..., lines), relative to the carrier there."""

    entering: Array
    device: Array
    filtered: Array
    leaving: Array


@dataclass(frozen=True)
class Birth:
    """What was born in one place, and its share in every line at the output.

    Attributes
    ----------
    stage : int
        0-based; −1 is the source. Of a leak, the stage whose carrier it is.
    part : {"source", "device", "amplifier", "leak"}
    paths : (lines out, lines born) float
    behind : int
        Where it joins the chain: behind this stage's filter. Of a leak that is later than its own stage.
    """

    stage: int
    part: Literal["source", "device", "amplifier", "leak"]
    paths: Array
    behind: int


def propagate(chain: ChainArrays, transmissions: Sequence[Array], *, allowed: bool = False) -> tuple[Comb, ...]:
    """Carry every line from the source to the output.

    Parameters
    ----------
    chain : ChainArrays
    transmissions : sequence of (..., lines) float
        Of each stage's filter, relative to its carrier, in the chain's quantity (amplitude or power); leading axes
        (points of the span, say) are carried along.
    allowed : bool
        Count mismatch and termination at their worst.

    Returns
    -------
    tuple of Comb
        One a stage.
    """
    v: Array = chain.source
    combs = []
    for stage, d in zip(chain.stages, transmissions, strict=True):
        gain_device, gain_filter = _gains(stage, allowed)
        made = gain_device * (stage.device + v @ stage.conversion.T)
        filtered = gain_filter * d * made
        leaving = filtered + stage.added
        combs.append(Comb(v, made, filtered, leaving))
        v = leaving
    return tuple(combs)


def path_gains(
    chain: ChainArrays, transmissions: Sequence[Array], *, after: int, to: int, allowed: bool = False
) -> Array:
    """Return the gain of every line from behind stage `after`'s filter to stage `to`'s output.

    Returns
    -------
    (lines, lines) float
        [out, in]; the identity where `after` equals `to`.
    """
    gains: Array = np.eye(chain.grid.count)
    for j in range(to, after, -1):
        stage = chain.stages[j]
        gain_device, gain_filter = _gains(stage, allowed)
        gains = (gains * (gain_device * gain_filter * transmissions[j])) @ stage.conversion
    return gains


def births(
    chain: ChainArrays, transmissions: Sequence[Array], *, to: int | None = None, allowed: bool = False
) -> tuple[Birth, ...]:
    """Return every birth place with its contribution to each line at stage `to`'s output, the last unless given.

    Parameters
    ----------
    chain : ChainArrays
    transmissions : sequence of (lines,) float
    to : int, optional
    allowed : bool
        Count mismatch and termination at their worst.
    """
    last = len(chain.stages) - 1 if to is None else to
    gains: Array = np.eye(chain.grid.count)
    found = []
    for i in range(last, -1, -1):
        stage = chain.stages[i]
        gain_device, gain_filter = _gains(stage, allowed)
        through = gain_device * gain_filter * transmissions[i]
        if stage.amplifier.any():
            found.append(Birth(i, "amplifier", gains * stage.amplifier, i))
        for leak in stage.leaks:
            carrier = np.zeros(chain.grid.count)
            carrier[leak.line] = chain.from_db(leak.level_dbc)
            found.append(Birth(leak.origin, "leak", gains * carrier, i))
        found.append(Birth(i, "device", gains * (through * stage.device), i))
        gains = (gains * through) @ stage.conversion
    found.append(Birth(-1, "source", gains * chain.source, -1))
    return tuple(found)


def carrier_spread(chain: ChainArrays, combs: Sequence[Comb]) -> Array:
    """Return what residuals put onto the carrier at each stage's output, the most over leading axes, (stages,)."""
    return np.array([np.max(c.entering @ s.spread) for s, c in zip(chain.stages, combs, strict=True)])


def excess(chain: ChainArrays, combs: Sequence[Comb]) -> NDArray[np.float64]:
    """Return level over limit of every line at every stage's output, shape (stages, ..., lines); 0 without a limit."""
    return np.array([c.leaving / s.limit for s, c in zip(chain.stages, combs, strict=True)])


def _gains(stage: StageArrays, allowed: bool) -> tuple[float, float]:
    """Return the factors of termination and mismatch, or ones."""
    return (stage.termination, stage.mismatch) if allowed else (1.0, 1.0)
