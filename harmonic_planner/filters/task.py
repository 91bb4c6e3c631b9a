"""What a bandpass has to do, and the same in logarithms with drift absorbed into the edges."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.model import PlannerError
from harmonic_planner.physics.prototypes import FloatArray


@dataclass(frozen=True, eq=False)
class Task:
    """What a bandpass has to do.

    Parameters
    ----------
    passband_hz
        Lowest and highest carrier frequency [Hz].
    line_low_hz, line_high_hz
        (n_lines,) lowest and highest frequency of every unwanted line [Hz].
    rejection_db
        (n_lines,) rejection each needs relative to the carrier, margin and allowances included [dB]. Lines that need
        none (0 or less) are passed over.
    flatness_db, loss_db
        Greatest flatness and greatest midband loss [dB].
    drift
        The centre moves by this fraction either way.
    unloaded_q
        Of every resonator; may be infinite.
    floor, cap
        Least and greatest bandwidth allowed, as fractions of the centre.

    Raises
    ------
    PlannerError
        Where a value is outside what is allowed.
    """

    passband_hz: tuple[float, float]
    line_low_hz: FloatArray
    line_high_hz: FloatArray
    rejection_db: FloatArray
    flatness_db: float
    loss_db: float
    drift: float
    unloaded_q: float
    floor: float
    cap: float = 1.0
    edges: Edges = field(init=False, repr=False)

    def __post_init__(self) -> None:
        for name in ("line_low_hz", "line_high_hz", "rejection_db"):
            object.__setattr__(self, name, np.asarray(getattr(self, name), dtype=np.float64))
        lo, hi = self.passband_hz
        checks = {
            f"passband = {lo:g} … {hi:g} Hz: allowed is 0 < low ≤ high": 0.0 < lo <= hi < math.inf,
            "lines: low, high and rejection must be of one length": self.line_low_hz.shape
            == self.line_high_hz.shape
            == self.rejection_db.shape
            == (self.rejection_db.size,),
            f"flatness = {self.flatness_db} dB: allowed is above 0": self.flatness_db > 0.0,
            f"loss = {self.loss_db} dB: allowed is above 0": self.loss_db > 0.0,
            f"drift = {self.drift}: allowed is 0 … below 1": 0.0 <= self.drift < 1.0,
            f"unloaded_q = {self.unloaded_q}: allowed is above 0": self.unloaded_q > 0.0,
            f"bandwidth floor = {self.floor}: allowed is 0 or more": 0.0 <= self.floor < math.inf,
            f"bandwidth cap = {self.cap}: allowed is above 0 and at most 2": 0.0 < self.cap <= 2.0,
        }
        for problem, holds in checks.items():
            if not holds:
                raise PlannerError(problem)
        if not (np.all(self.line_low_hz > 0.0) and np.all(self.line_low_hz <= self.line_high_hz)):
            raise PlannerError("lines: every line needs 0 < low ≤ high [Hz]")
        if not np.all(np.isfinite(self.rejection_db)):
            raise PlannerError("lines: every rejection is a finite number of dB")
        object.__setattr__(self, "edges", _absorb_drift(self))


@dataclass(frozen=True, eq=False)
class Edges:
    """The task in logarithms, drift absorbed, with the lines that no other line makes redundant."""

    a: float
    b: float
    lower: FloatArray
    """(l,) s_l."""
    upper: FloatArray
    """(u,) s_u."""
    index: NDArray[np.intp]
    """(l + u,) which line of the task each is."""
    rejection_db: FloatArray
    """(l + u,)"""
    overlap: int | None
    """A line that covers part of the carrier's span, or none."""


def _absorb_drift(task: Task) -> Edges:
    """Sort the lines by side and keep those that can bind: nearer ones, or further ones that need more rejection."""
    needed = np.flatnonzero(task.rejection_db > 0.0)
    a, b = math.log(task.passband_hz[0] / (1.0 + task.drift)), math.log(task.passband_hz[1] / (1.0 - task.drift))
    high = np.log(task.line_high_hz[needed] / (1.0 - task.drift))
    low = np.log(task.line_low_hz[needed] / (1.0 + task.drift))
    is_lower, is_upper = high < a, low > b
    overlapping = needed[~(is_lower | is_upper)]
    distance = np.where(is_lower, a - high, low - b)
    kept: list[list[int]] = []
    for side in (is_lower, is_upper):
        most, chosen = -math.inf, []
        for i in np.flatnonzero(side)[np.lexsort((-task.rejection_db[needed][side], distance[side]))]:
            if task.rejection_db[needed[i]] > most:
                most = task.rejection_db[needed[i]]
                chosen.append(int(i))
        kept.append(chosen)
    index = needed[np.array(kept[0] + kept[1], dtype=np.intp)]
    return Edges(
        a=a,
        b=b,
        lower=high[kept[0]],
        upper=low[kept[1]],
        index=index,
        rejection_db=task.rejection_db[index],
        overlap=int(overlapping[0]) if overlapping.size else None,
    )


def line_text(task: Task, line: int) -> str:
    """Write where a line lies: ``400 MHz``, ``396 to 404 MHz``."""
    return span_text(float(task.line_low_hz[line]), float(task.line_high_hz[line]))


def span_text(low_hz: float, high_hz: float) -> str:
    """Write a span of frequencies: ``400 MHz``, ``396 to 404 MHz``."""
    scale, unit = next(((s, u) for s, u in ((1e9, "GHz"), (1e6, "MHz"), (1e3, "kHz")) if high_hz >= s), (1.0, "Hz"))
    low, high = f"{low_hz / scale:.5g}", f"{high_hz / scale:.5g}"
    return f"{high} {unit}" if low == high else f"{low} to {high} {unit}"
