"""A scenario as arrays: what each stage makes, converts, and what may be added to it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.allowances import Allowance, allowance
from harmonic_planner.chain.leakage import Leak, carrier_leaks
from harmonic_planner.chain.levels import CarrierLevels, lossless_levels
from harmonic_planner.chain.limits import limits_dbc
from harmonic_planner.chain.lines import LineGrid, grid_for
from harmonic_planner.model import Phases, PlannerError, Scenario
from harmonic_planner.physics.amplifiers import amplifier_lines
from harmonic_planner.physics.conversion import check_device, conversion_matrix, device_lines

Array = NDArray[np.float64]


@dataclass(frozen=True)
class StageArrays:
    """One stage on the line grid; amplitudes, or powers where the chain adds powers.

    Attributes
    ----------
    carrier : int
        Array index of the wanted line at the stage's output.
    conversion : (lines, lines) float
        Output line per unit of input residual; the row of the carrier is zero (what lands there is `spread`).
    spread : (lines,) float
        What each residual puts onto the carrier.
    device : (lines,) float
        Lines of the device itself, relative to the wanted one; the carrier is zero.
    amplifier : (lines,) float
        Lines the amplifier adds behind the filter.
    own : (lines,) bool
        Lines that the device makes by itself: multiples of its input carrier.
    allowance : Allowance
        Mismatch and termination [dB].
    mismatch, termination : float
        The same as factors of the quantity that is added (amplitude or power).
    limit : (lines,) float
        Limit at this stage's output, same quantity; infinite where nothing is asked.
    leaks : tuple of Leak
        Earlier carriers that reach the node behind the stage past everything between.
    leak : (lines,) float
        Their sum, same quantity.
    """

    carrier: int
    conversion: Array
    spread: Array
    device: Array
    amplifier: Array
    own: NDArray[np.bool_]
    allowance: Allowance
    mismatch: float
    termination: float
    limit: Array
    leaks: tuple[Leak, ...]
    leak: Array

    @cached_property
    def added(self) -> Array:
        """Lines that appear behind the filter, of the amplifier and by leakage, (lines,)."""
        return self.amplifier + self.leak


@dataclass(frozen=True)
class ChainArrays:
    """The whole chain on the line grid.

    Attributes
    ----------
    exponent : int
        1 where amplitudes add (worst-case), 2 where powers add (average).
    source : (lines,) float
        The source's unwanted lines relative to its carrier.
    low_hz, high_hz : (lines,) float
        Span of each line [Hz].
    """

    grid: LineGrid
    phases: Phases
    exponent: int
    source: Array
    low_hz: Array
    high_hz: Array
    stages: tuple[StageArrays, ...]

    def from_db(self, level_db: Array | float) -> Array:
        """Turn dB into the quantity that is added."""
        return np.asarray(10.0 ** (np.asarray(level_db, dtype=float) * self.exponent / 20))

    def to_db(self, quantity: Array | float) -> Array:
        """Turn the quantity that is added into dB; zero gives −inf."""
        with np.errstate(divide="ignore"):
            return np.asarray(20.0 / self.exponent * np.log10(np.asarray(quantity, dtype=float)))


def assemble(scenario: Scenario, *, phases: Phases) -> ChainArrays:
    """Turn `scenario` into arrays on its line grid.

    Parameters
    ----------
    scenario : Scenario
    phases : {"worst-case", "average"}
        Whether paths into one line add as amplitudes or as powers.

    Returns
    -------
    ChainArrays

    Raises
    ------
    PlannerError
        Where a device cannot be used; the message names the stage.

    Notes
    -----
    What depends on carrier levels, leakage of earlier carriers and limits in dBm, is that of filters without loss;
    `at_levels` puts it right once the filters are known.
    """
    grid = grid_for(scenario)
    exponent = 1 if phases == "worst-case" else 2
    f_low, f_high = scenario.source.frequency_hz
    low_hz, high_hz = grid.numbers * f_low, grid.numbers * f_high
    source = np.zeros(grid.count)
    for line, level_dbc in scenario.source.lines_dbc.items():
        source[grid.index(line)] = 10 ** (level_dbc * exponent / 20)

    stages = []
    for i, stage in enumerate(scenario.stages):
        carrier_in = grid.index(scenario.carrier(i - 1)) + 1
        carrier = grid.index(scenario.carrier(i))
        device = np.zeros(grid.count)
        own = np.zeros(grid.count, dtype=bool)
        conversion = np.eye(grid.count)
        if stage.device is not None:
            multiples = np.arange(carrier_in, grid.count + 1, carrier_in)
            try:
                check_device(stage.device, stage.times)
                conversion = conversion_matrix(
                    stage.device, stage.times, carrier_index=carrier_in, count=grid.count, power=exponent == 2
                )
                device[multiples - 1] = device_lines(stage.device, stage.times, len(multiples))[1:] ** exponent
            except PlannerError as fault:
                raise PlannerError(f'stage[{i + 1}].{fault} (stage "{stage.name}")') from fault
            own[multiples - 1] = True
        spread = conversion[carrier].copy()
        conversion[carrier] = 0.0
        device[carrier] = 0.0
        own[carrier] = False
        amplifier = np.zeros(grid.count)
        if stage.amplifier is not None:
            amplifier = amplifier_lines(stage.amplifier, carrier_index=carrier + 1, count=grid.count) ** exponent
            amplifier[carrier] = 0.0
        allowed = allowance(scenario, i, phases)
        stages.append(
            StageArrays(
                carrier=carrier,
                conversion=conversion,
                spread=spread,
                device=device,
                amplifier=amplifier,
                own=own,
                allowance=allowed,
                mismatch=10 ** (allowed.mismatch_db * exponent / 20),
                termination=10 ** (allowed.termination_db * exponent / 20),
                limit=np.full(grid.count, np.inf),
                leaks=(),
                leak=np.zeros(grid.count),
            )
        )
    chain = ChainArrays(grid, phases, exponent, source, low_hz, high_hz, tuple(stages))
    return at_levels(scenario, chain, lossless_levels(scenario))


def at_levels(scenario: Scenario, chain: ChainArrays, levels: Sequence[CarrierLevels]) -> ChainArrays:
    """Return the chain with leakage and limits as they are at these carrier levels.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
        The same scenario; the limits that it has are replaced by those the user gave.
    levels : sequence of CarrierLevels
        Of every stage, over the same points of the span.

    Returns
    -------
    ChainArrays
    """
    last = len(scenario.stages) - 1
    leaks = carrier_leaks(scenario, chain.grid, chain.high_hz, levels)
    stages = []
    for i, (stage, arrays) in enumerate(zip(scenario.stages, chain.stages, strict=True)):
        limit_dbc = np.full(chain.grid.count, np.inf if stage.limit_dbc is None else stage.limit_dbc)
        for limits in (stage.tap, scenario.output if i == last else None):
            if limits is not None:
                asked = limits_dbc(
                    limits,
                    low_hz=chain.low_hz,
                    high_hz=chain.high_hz,
                    carrier_hz=(float(chain.low_hz[arrays.carrier]), float(chain.high_hz[arrays.carrier])),
                    carrier_dbm=float(np.max(levels[i].output_dbm)),
                )
                limit_dbc = np.minimum(limit_dbc, asked)
        limit_dbc[arrays.carrier] = np.inf
        leak = np.zeros(chain.grid.count)
        for x in leaks[i]:
            leak[x.line] += chain.from_db(x.level_dbc)
        stages.append(replace(arrays, limit=chain.from_db(limit_dbc), leaks=leaks[i], leak=leak))
    return replace(chain, stages=tuple(stages))
