"""Scenarios for tests, built from the model without a file."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction

from harmonic_planner.model import Amplifier, Design, Device, Isolation, Output, Scenario, Source, Stage

PUSH_PUSH = Device("push-push", -8.0, half_angle_rad=math.radians(70))
PUSH_PULL = Device("push-pull", -8.0, half_angle_rad=math.radians(50))
SINGLE = Device("single-ended", -10.0, half_angle_rad=math.radians(60))

DESIGN = Design(kits=("chip-1008",), drift=0.005, isolation=Isolation(math.inf), families=("butterworth", "chebyshev"))


def device_for(times: int) -> Device:
    """Return the usual balanced device for a factor."""
    return PUSH_PUSH if times % 2 == 0 else PUSH_PULL


def stage(times: int, *, name: str | None = None, design: Design = DESIGN, **keys: object) -> Stage:
    """Return a stage with 6 dB pads and the usual device; keys replace the model's fields."""
    fields: dict[str, object] = {
        "device": None if times == 1 else device_for(times),
        "pad_db": 6.0,
        "pad_after_db": 6.0,
    }
    return Stage(name or f"x{times}", times, design=design, **(fields | keys))  # type: ignore[arg-type]


def chain_of(
    *factors: int,
    source_hz: tuple[float, float] = (20e6, 20e6),
    limit_dbc: float = -50.0,
    lines: Mapping[Fraction, float] | None = None,
    design: Design = DESIGN,
    **keys: object,
) -> Scenario:
    """Return a chain of plain stages; keys go to every stage."""
    stages = tuple(stage(n, name=f"stage {i}", design=design, **keys) for i, n in enumerate(factors, 1))
    return Scenario(
        title="a chain for tests",
        source=Source(source_hz, lines_dbc=lines or {}),
        output=Output(limit_dbc=limit_dbc),
        design=design,
        stages=stages,
    )


def with_amplifier(scenario: Scenario, index: int, amplifier: Amplifier) -> Scenario:
    """Return `scenario` with an amplifier behind one stage."""
    stages = list(scenario.stages)
    stages[index] = replace(stages[index], amplifier=amplifier)
    return replace(scenario, stages=tuple(stages))
