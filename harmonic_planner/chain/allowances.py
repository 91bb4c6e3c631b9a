"""What a reflective filter may add to a line: multiple reflections, and a device that sees a reflective load.

Off its passband a filter reflects nearly everything. With a pad of A dB between it and a neighbour that reflects |Γ|,
the wave between them returns with ρ = |Γ|·|S11|·10^(−A/10) (the pad is passed twice), and the sum of all returns can
raise a line by 1/(1 − ρ); over random phases its power rises by 1/(1 − ρ²). |S11| = 1 is taken for every unwanted line.

The spread of a device's conversion into a reflective load, ±3 dB without a pad, ±1.5 dB with 3 dB and ±1 dB with 6 dB,
is common practice without a source (memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from harmonic_planner.model import Phases, Scenario, Stage

FILTER_REFLECTION = 0.9
"""|Γ| of another filter off its passband, as a neighbour (memory)."""
SOURCE_REFLECTION = 0.3
"""|Γ| of the source's buffer amplifier (memory)."""

_PAD_DB = (0.0, 3.0, 6.0)
_TERMINATION_DB = (3.0, 1.5, 1.0)


def mismatch_db(*, reflection: float, pad_db: float, phases: Phases) -> float:
    """Return by how much multiple reflections can raise a line [dB].

    Parameters
    ----------
    reflection : float
        |Γ| of the neighbour, 0 ≤ |Γ| < 1.
    pad_db : float
        Attenuation between filter and neighbour [dB].
    phases : {"worst-case", "average"}
        Amplitudes in phase, or the average power over phases.
    """
    rho = reflection * 10 ** (-pad_db / 10)
    if phases == "worst-case":
        return -20 * math.log10(1 - rho)
    return -10 * math.log10(1 - rho**2)


def termination_db(pad_db: float) -> float:
    """Return the spread of a device's conversion into a filter behind `pad_db` [dB]; see the module text."""
    return float(np.interp(pad_db, _PAD_DB, _TERMINATION_DB))


@dataclass(frozen=True)
class Neighbour:
    """What a filter sees on one side: |Γ| behind so many dB of pad, and its name."""

    name: str
    reflection: float
    pad_db: float


@dataclass(frozen=True)
class Allowance:
    """What is allowed for at one stage, each in dB."""

    before: Neighbour
    after: Neighbour
    mismatch_db: float
    termination_db: float


def neighbour_before(scenario: Scenario, index: int) -> Neighbour:
    """Return what the filter of stage `index` sees towards the source."""
    stage = scenario.stages[index]
    pad_db = stage.pad_db
    if stage.device is not None:
        return _facing(stage, "its multiplier", stage.device.reflection, pad_db)
    for earlier in reversed(scenario.stages[:index]):
        if earlier.amplifier is not None:
            return _facing(stage, f"the amplifier of {earlier.name}", earlier.amplifier.reflection, pad_db)
        pad_db += earlier.pad_after_db
        if earlier.filter != "none":
            return _facing(stage, f"the filter of {earlier.name}", FILTER_REFLECTION, pad_db)
        pad_db += earlier.pad_db
        if earlier.device is not None:
            return _facing(stage, f"the multiplier of {earlier.name}", earlier.device.reflection, pad_db)
    return _facing(stage, "the source", SOURCE_REFLECTION, pad_db)


def neighbour_after(scenario: Scenario, index: int) -> Neighbour:
    """Return what the filter of stage `index` sees towards the output; the load is taken as matched."""
    stage = scenario.stages[index]
    pad_db = stage.pad_after_db
    if stage.amplifier is not None:
        return _facing(stage, "its amplifier", stage.amplifier.reflection, pad_db)
    for later in scenario.stages[index + 1 :]:
        if later.device is not None:
            return _facing(stage, f"the multiplier of {later.name}", later.device.reflection, pad_db)
        pad_db += later.pad_db
        if later.filter != "none":
            return _facing(stage, f"the filter of {later.name}", FILTER_REFLECTION, pad_db)
        pad_db += later.pad_after_db
        if later.amplifier is not None:
            return _facing(stage, f"the amplifier of {later.name}", later.amplifier.reflection, pad_db)
    return Neighbour("the load", 0.0, pad_db)


def allowance(scenario: Scenario, index: int, phases: Phases) -> Allowance:
    """Return the allowances of stage `index`, on both sides of its filter.

    A stage without a filter has none: nothing there is reflective.
    """
    stage = scenario.stages[index]
    before, after = neighbour_before(scenario, index), neighbour_after(scenario, index)
    if stage.filter == "none":
        return Allowance(before, after, 0.0, 0.0)
    both = sum(mismatch_db(reflection=n.reflection, pad_db=n.pad_db, phases=phases) for n in (before, after))
    given = stage.design.termination_db
    spread = 0.0
    if stage.device is not None:
        spread = termination_db(stage.pad_db) if given is None else given
    return Allowance(before, after, both, spread)


def _facing(stage: Stage, name: str, reflection: float, pad_db: float) -> Neighbour:
    """Apply the user's own |Γ| where one is given."""
    given = stage.design.reflection
    return Neighbour(name, reflection if given is None else given, pad_db)
