"""What leaks: past a filter, a floor under its skirts, and from every earlier carrier into every later stage.

An earlier carrier, the source's or a stage's, is strongest behind its multiplier or behind its amplifier. From there it
reaches every later stage's input and the output past everything between, lower by the isolation of the stage that it
reaches (of the last stage, at the output), and is there relative to the carrier that belongs there.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.levels import CarrierLevels
from harmonic_planner.chain.lines import LineGrid
from harmonic_planner.model import Isolation, Scenario

_KNEE_HZ = 1e9
_SLOPE_DB_PER_DECADE = 20.0


def isolation_db(isolation: Isolation, frequency_hz: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the isolation from a filter's input to its output past it [dB].

    Parameters
    ----------
    isolation : Isolation
        Flat where the user gave a number; else it falls by 20 dB a decade above 1 GHz (common practice, no source).
    frequency_hz : (n,) float
    """
    if isolation.flat or not np.isfinite(isolation.level_db):
        return np.full(np.shape(frequency_hz), isolation.level_db)
    decades = np.log10(np.maximum(frequency_hz, _KNEE_HZ) / _KNEE_HZ)
    return np.asarray(isolation.level_db - _SLOPE_DB_PER_DECADE * decades)


def with_leakage(
    rejection_db: NDArray[np.float64],
    carrier_loss_db: float | NDArray[np.float64],
    leak_db: NDArray[np.float64],
    *,
    exponent: int,
) -> NDArray[np.float64]:
    """Return rejection with the leak added to the filter's own transmission.

    Parameters
    ----------
    rejection_db : (n,) float
        Of the filter alone, relative to its carrier [dB].
    carrier_loss_db : float or array
        The carrier's loss, since the leak is relative to the filter's input [dB].
    leak_db : (n,) float
        Isolation [dB]; infinite for none.
    exponent : {1, 2}
        Whether amplitudes or powers add.
    """
    through = 10 ** (-rejection_db * exponent / 20)
    past = 10 ** ((carrier_loss_db - leak_db) * exponent / 20)
    return np.asarray(-20 / exponent * np.log10(through + past))


def skirt_needed_db(
    required_db: NDArray[np.float64], carrier_loss_db: float, leak_db: NDArray[np.float64], *, exponent: int
) -> NDArray[np.float64]:
    """Return what the filter's own skirt must give so that with the leak `required_db` is met.

    Infinite where the leak alone is already too much.
    """
    allowed = 10 ** (-required_db * exponent / 20) - 10 ** ((carrier_loss_db - leak_db) * exponent / 20)
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(allowed > 0, -20 / exponent * np.log10(np.maximum(allowed, 1e-300)), np.inf)


@dataclass(frozen=True)
class Leak:
    """An earlier carrier at a later node.

    Attributes
    ----------
    origin : int
        Stage whose carrier it is, 0-based; −1 is the source.
    line : int
        Its array index.
    isolation_db : float
        Between its own node and this one [dB].
    level_dbc : float
        Here, relative to the carrier that belongs here, the most over the span [dBc].
    """

    origin: int
    line: int
    isolation_db: float
    level_dbc: float


def carrier_leaks(
    scenario: Scenario, grid: LineGrid, high_hz: NDArray[np.float64], levels: Sequence[CarrierLevels]
) -> tuple[tuple[Leak, ...], ...]:
    """Return what earlier carriers leak to the node behind each stage: the next stage's input, or the output.

    Parameters
    ----------
    scenario : Scenario
    grid : LineGrid
    high_hz : (lines,) float
        Highest frequency of each line, where isolation is least [Hz].
    levels : sequence of CarrierLevels
        Of every stage, over the same points of the span.

    Returns
    -------
    tuple of tuple of Leak
        One a stage. An earlier carrier on the same line as the one that belongs there is part of that one.
    """
    strongest = [np.full(np.shape(levels[0].drive_dbm), scenario.source.level_dbm)]
    for stage, level in zip(scenario.stages, levels, strict=True):
        made_dbm = level.output_dbm if stage.device is None else level.drive_dbm + stage.device.conversion_db
        strongest.append(np.maximum(made_dbm, level.output_dbm))
    last = len(scenario.stages) - 1
    found = []
    for node, level in enumerate(levels):
        isolation = scenario.stages[min(node + 1, last)].design.isolation
        leaks = []
        for origin in range(-1, node):
            line = grid.index(scenario.carrier(origin))
            apart_db = float(isolation_db(isolation, high_hz[line : line + 1])[0])
            if scenario.carrier(origin) != scenario.carrier(node) and np.isfinite(apart_db):
                over_db = float(np.max(strongest[origin + 1] - level.output_dbm))
                leaks.append(Leak(origin, line, apart_db, over_db - apart_db))
        found.append(tuple(leaks))
    return tuple(found)
