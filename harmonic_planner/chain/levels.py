"""Carrier levels in dBm along the chain."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.model import Scenario
from harmonic_planner.physics.amplifiers import output_dbm


@dataclass(frozen=True)
class CarrierLevels:
    """Carrier levels of one stage over the span, each (points,) [dBm]."""

    drive_dbm: NDArray[np.float64]
    filter_input_dbm: NDArray[np.float64]
    amplifier_input_dbm: NDArray[np.float64]
    output_dbm: NDArray[np.float64]


def carrier_levels(scenario: Scenario, filter_loss_db: Sequence[NDArray[np.float64]]) -> tuple[CarrierLevels, ...]:
    """Carry the carrier's level from the source to the output.

    Parameters
    ----------
    scenario : Scenario
    filter_loss_db : sequence of (points,) float
        Each stage's filter loss at the carrier, over the same points of the span [dB].

    Returns
    -------
    tuple of CarrierLevels
        One a stage.
    """
    level = np.full(np.shape(filter_loss_db[0]), scenario.source.level_dbm)
    levels = []
    for stage, loss_db in zip(scenario.stages, filter_loss_db, strict=True):
        drive = level
        conversion_db = stage.device.conversion_db if stage.device is not None else 0.0
        at_filter = drive + conversion_db - stage.pad_db
        behind = at_filter - loss_db - stage.pad_after_db
        amplifier = stage.amplifier
        level = behind if amplifier is None else np.asarray(output_dbm(amplifier, behind))
        levels.append(CarrierLevels(drive, at_filter, behind, level))
    return tuple(levels)


def lossless_levels(scenario: Scenario) -> tuple[CarrierLevels, ...]:
    """Return the carrier levels with filters that lose nothing, each (1,) [dBm]: what is known before any is chosen."""
    return carrier_levels(scenario, [np.zeros(1)] * len(scenario.stages))
