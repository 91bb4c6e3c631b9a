"""The whole chain by one period, everything at once: what linear sums leave out, over random phases.

Every draw takes the source's lines at random phases and carries the comb from stage to stage with nothing taken as
small: each multiplier is driven by all lines together (`one_period`), each filter turns every line by a random phase,
amplifiers saturate (`envelope`). Every multiplier is driven nominally: the comb that enters it is scaled and moved in
time until its carrier has amplitude 1 and phase 0. See `exact_stage` for measured lines and for whose phases are
random.

Sums of amplitudes bound the first order from above; how near the largest of the draws comes depends on how many paths
of like size meet in a line, since all their phases have to agree by chance.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.exact_stage import Complex, ExactStage, exact_stages, random_phases
from harmonic_planner.chain.levels import CarrierLevels, carrier_levels
from harmonic_planner.chain.propagate import propagate
from harmonic_planner.model import PlannerError, Scenario

QUANTILE = 0.95
_BLOCK_SAMPLES = 2**16
"""Draws are taken in blocks of about this many samples, so that a block stays in the processor's cache."""


@dataclass(frozen=True)
class ExactLevels:
    """Lines at the output relative to its carrier, the worst over the points; the carrier itself is −inf.

    Attributes
    ----------
    draws : int
        Random phases taken at each point.
    points : tuple of int
        Points of the span that were run.
    max_dbc, p95_dbc : (lines,) float
        Largest level, and the level that 95 % of the draws of a point stay below [dBc].
    linear_dbc : (lines,) float
        The linear figure at the same points, by the chain's rule of adding, without allowances [dBc].
    """

    draws: int
    points: tuple[int, ...]
    max_dbc: Array
    p95_dbc: Array
    linear_dbc: Array


def exact(
    scenario: Scenario,
    chain: ChainArrays,
    transmissions: Sequence[NDArray[np.float64] | Complex],
    *,
    draws: int,
    rng: np.random.Generator,
    points: Sequence[int] | None = None,
    levels: Sequence[CarrierLevels] | None = None,
    am_to_pm_deg_per_db: Sequence[float] | None = None,
) -> ExactLevels:
    """Run the chain over random phases.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
        The same scenario as arrays.
    transmissions : sequence of (points, lines) or (lines,) float or complex
        Amplitudes of each stage's filter relative to its carrier, leakage included; amplitudes also where the chain
        adds powers. Real ones get random phases.
    draws : int
        Random phases at each point.
    rng : numpy Generator
    points : sequence of int, optional
        Points of the span to run; all unless given.
    levels : sequence of CarrierLevels, optional
        What drives the amplifiers, at the same points; without it filters are taken to have no loss.
    am_to_pm_deg_per_db : sequence of float, optional
        Of each stage's amplifier [deg/dB]; none unless given.

    Returns
    -------
    ExactLevels

    Raises
    ------
    PlannerError
        If there is nothing to draw, or a device cannot be used.

    Notes
    -----
    A device's output is right to 1e-8 of its wanted line (1e-6 where whole pulses of a narrow conduction angle come and
    go with the residuals): what is shown below −160 dBc there is rounding. Every point has phases of its own.
    """
    if draws < 1:
        raise PlannerError(f"draws = {draws}: allowed is a whole number from 1")
    count, last = chain.grid.count, chain.stages[-1].carrier
    passed = np.broadcast_arrays(*(np.atleast_2d(t) for t in transmissions), subok=False)
    chosen = tuple(range(len(passed[0])) if points is None else (int(p) for p in points))
    stages = exact_stages(scenario, chain, tuple(am_to_pm_deg_per_db or (0.0,) * len(chain.stages)))
    drive_db = amplifier_drive_db(scenario, len(passed[0]), levels)
    source = chain.source ** (1 / chain.exponent)
    highest, usual = np.zeros(count), np.zeros(count)
    for point in chosen:
        size = np.empty((draws, count))
        for rows in _blocks(draws, stages, count):
            entering = source * random_phases(rng, (rows.stop - rows.start, count))
            entering[:, chain.grid.q - 1] = 1.0
            combs = combs_of(stages, entering, [t[point] for t in passed], drive_db[:, point], rng)
            size[rows] = np.abs(combs[-1])
        highest = np.maximum(highest, size.max(axis=0))
        usual = np.maximum(usual, np.quantile(size, QUANTILE, axis=0))
    sums = propagate(chain, [np.abs(t[list(chosen)]) ** chain.exponent for t in passed])[-1].leaving
    highest[last] = usual[last] = 0.0
    return ExactLevels(
        draws=draws,
        points=chosen,
        max_dbc=_db(highest),
        p95_dbc=_db(usual),
        linear_dbc=chain.to_db(np.max(sums, axis=0)),
    )


def combs_of(
    stages: Sequence[ExactStage],
    entering: Complex,
    passed: Sequence[NDArray[np.float64] | Complex],
    drive_db: Sequence[float] | Array,
    rng: np.random.Generator,
) -> tuple[Complex, ...]:
    """Carry combs through every stage.

    Parameters
    ----------
    stages : sequence of ExactStage
    entering : (draws, lines) complex
        From the source, its carrier 1.
    passed : sequence of (lines,) or (draws, lines) float or complex
        Transmissions of each stage's filter.
    drive_db : (stages,) float
        By how much each stage's carrier would exceed its amplifier's saturation [dB].
    rng : numpy Generator

    Returns
    -------
    tuple of (draws, lines) complex
        What leaves each stage, its carrier 1.
    """
    combs = []
    for stage, t, drive in zip(stages, passed, drive_db, strict=True):
        entering = stage.leaving(entering, t, drive_db=float(drive), rng=rng)
        combs.append(entering)
    return tuple(combs)


def amplifier_drive_db(scenario: Scenario, points: int, levels: Sequence[CarrierLevels] | None = None) -> Array:
    """Return by how much each stage's carrier would exceed its amplifier's saturation if that were linear.

    Parameters
    ----------
    scenario : Scenario
    points : int
    levels : sequence of CarrierLevels, optional
        Without it filters are taken to have no loss.

    Returns
    -------
    (stages, points) float
        −inf for a stage without a known saturation [dB].
    """
    known = levels or carrier_levels(scenario, [np.zeros(points)] * len(scenario.stages))
    drive_db = np.full((len(scenario.stages), points), -np.inf)
    for i, (stage, level) in enumerate(zip(scenario.stages, known, strict=True)):
        amplifier = stage.amplifier
        if amplifier is not None and amplifier.saturation_dbm is not None:
            drive_db[i] = level.amplifier_input_dbm + amplifier.gain_db - amplifier.saturation_dbm
    return drive_db


def _blocks(draws: int, stages: Sequence[ExactStage], count: int) -> list[slice]:
    """Cut the draws into blocks by the longest transform."""
    rows = max(1, _BLOCK_SAMPLES // max(count, *(s.points for s in stages)))
    return [slice(start, min(start + rows, draws)) for start in range(0, draws, rows)]


def _db(amplitude: Array) -> Array:
    with np.errstate(divide="ignore"):
        return np.asarray(20 * np.log10(amplitude))
