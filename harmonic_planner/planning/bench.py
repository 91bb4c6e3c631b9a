"""One filter by itself: carrier, unwanted lines and rejections in, windows and the chosen circuit out.

No chain and no file: the quick answer at the bench.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from harmonic_planner.model import Design, PlannerError, Stage, Window
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.planning.built import Built
from harmonic_planner.planning.choice import choose
from harmonic_planner.planning.jobs import Job


@dataclass(frozen=True)
class Asked:
    """One unwanted line: its span [Hz] and the rejection it needs [dB]."""

    low_hz: float
    high_hz: float
    rejection_db: float


@dataclass(frozen=True)
class Answer:
    """Windows of every family and order, and the filter chosen among them.

    Attributes
    ----------
    built : Built or None
        None where no filter as built does what is asked; `reason` says why.
    achieved_db : tuple of float
        Rejection as built at each line asked, in their order; empty without a filter.
    """

    windows: tuple[Window, ...]
    built: Built | None
    reason: str
    achieved_db: tuple[float, ...]


def answer(carrier_hz: tuple[float, float], lines: Sequence[Asked], design: Design, folder: Path) -> Answer:
    """Choose one filter.

    Parameters
    ----------
    carrier_hz : (float, float)
        The carrier's span [Hz].
    lines : sequence of Asked
    design : Design
        Kit, families, limits; what leaks past the filter is its `isolation`.
    folder : Path
        Where a kit file's relative path starts.

    Returns
    -------
    Answer

    Raises
    ------
    PlannerError
        Where no line is asked, or the kit cannot be read.
    """
    if not lines:
        raise PlannerError("line: none given; at least one unwanted line with its rejection is needed")
    job = _job(carrier_hz, lines, design, folder)
    required_db = np.array([0.0, *(line.rejection_db for line in lines)])
    choice = choose(job, required_db, carrier_db=design.flatness_db)
    best = choice.built or choice.best
    achieved = () if best is None else tuple(float(x) for x in best.action.rejection_db[1:])
    return Answer(choice.windows, choice.built, choice.reason, achieved)


def _job(carrier_hz: tuple[float, float], lines: Sequence[Asked], design: Design, folder: Path) -> Job:
    """Return the filter as a job whose line 0 is the carrier."""
    kits = tuple(load_kit(name, folder) for name in design.kits)
    centre_hz = sum(carrier_hz) / 2
    floor = min(k.bandwidth_floor(tuned=design.tuned or k.tuned, drift=design.drift) for k in kits)
    low_hz = np.array([carrier_hz[0], *(line.low_hz for line in lines)])
    return Job(
        index=0,
        stage=Stage("window", 1, None, design=design),
        carrier=0,
        carrier_hz=carrier_hz,
        low_hz=low_hz,
        high_hz=np.array([carrier_hz[1], *(line.high_hz for line in lines)]),
        leak_db=np.full(low_hz.size, design.isolation.level_db if design.isolation.flat else math.inf),
        kits=kits,
        unloaded_q=design.unloaded_q or max(k.unloaded_q(centre_hz) for k in kits),
        floor=floor if design.min_bandwidth is None else design.min_bandwidth,
        exponent=1,
    )
