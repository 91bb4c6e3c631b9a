"""What may be different on the bench from what the scenario says, each run through the chain by many amounts."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Literal

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays, StageArrays
from harmonic_planner.chain.explain import Suspect
from harmonic_planner.chain.leakage import with_leakage
from harmonic_planner.chain.propagate import propagate
from harmonic_planner.model import Device, Scenario
from harmonic_planner.physics.conversion import conversion_matrix, device_lines
from harmonic_planner.planning.jobs import Job
from harmonic_planner.planning.stage_filter import StageFilter

Part = Literal["filter", "device", "amplifier", "isolation", "source"]

FAINTEST_DBC = -150.0
"""Level at which a line is taken that the chain does not make at all."""
_MOVES = np.delete(np.linspace(-0.12, 0.12, 121), 60)
"""Of a filter, as a fraction of its centre."""
_STEPS_DB = np.concatenate([np.arange(-30.0, 0.0, 0.5), np.arange(0.5, 40.5, 0.5)])
_LEAST_ISOLATION_DB, _MOST_ISOLATION_DB = 10.0, 120.0
_BALANCES_DB = np.arange(4.0, 61.0, 2.0)
_SKIRT_DB = 3.0
"""Rejection that belongs to a filter's skirt; below it a line lies at the passband's edge."""
_SINGLE_LINES = 6
"""Lines of one device that are suspected one by one, the strongest."""


@dataclass(frozen=True)
class Bench:
    """The chain as it stands on the bench, at one frequency of the source.

    Attributes
    ----------
    chain : ChainArrays
        Adding powers: that is how changes of paths whose phases nobody knows are weighed.
    at : float
        Source frequency relative to the middle of its span.
    """

    scenario: Scenario
    chain: ChainArrays
    jobs: Sequence[Job]
    filters: Sequence[StageFilter]
    at: float

    @cached_property
    def transmissions(self) -> list[Array]:
        """Every filter's transmission as the scenario has it, (lines,) each."""
        return [self.filtered(i, np.zeros(1))[0] for i in range(len(self.jobs))]

    @cached_property
    def output_db(self) -> Array:
        """The lines at the output as the scenario has them, by sums of powers [dBc], (lines,)."""
        return output_db(self.chain, self.transmissions)

    def suspect(self, amounts: Array, level_db: Array) -> Suspect:
        """Return what a change shifts, from the output levels it makes, (amounts, lines), the faintest cut off."""
        floor = np.maximum(self.output_db, FAINTEST_DBC)
        return Suspect(amounts, np.maximum(level_db, FAINTEST_DBC) - floor)

    def filtered(
        self, index: int, moves: Array, *, more_db: Array | float = 0.0, leak_db: Array | None = None
    ) -> Array:
        """Return transmissions of one filter.

        Parameters
        ----------
        index : int
            The stage.
        moves : (n,) float
            Of the filter's centre, relative.
        more_db : (n,) float or float
            Rejection more than it has, on its skirts [dB].
        leak_db : (n, lines) float, optional
            Isolation past it; the stage's own unless given.

        Returns
        -------
        (n, lines) float
        """
        job, placed = self.jobs[index], self.filters[index]
        count = self.chain.grid.count
        if placed.attenuation is None:
            return np.ones((moves.size, count))
        middle_hz = (job.low_hz + job.high_hz) / 2 * self.at
        frequency_hz = middle_hz / (1 + moves[:, None])
        loss_db = placed.attenuation(frequency_hz.ravel()).reshape(frequency_hz.shape)
        carrier_db = loss_db[:, job.carrier, None]
        skirt_db = loss_db - carrier_db
        changed_db = np.maximum(skirt_db + np.reshape(more_db, (-1, 1)), 0.0)
        skirt_db = np.where(skirt_db > _SKIRT_DB, changed_db, skirt_db)
        leaks_db = job.leak_db if leak_db is None else leak_db
        transmission = self.chain.from_db(-with_leakage(skirt_db, carrier_db, leaks_db, exponent=self.chain.exponent))
        transmission[:, job.carrier] = 1.0
        return transmission


@dataclass(frozen=True)
class Named:
    """A suspect with what it is.

    Attributes
    ----------
    stage : int
        0-based; −1 is the source.
    words : str
        The change, with ``{amount}`` where its amount goes.
    shown : str
        How to write the amount: ``percent``, ``more`` (dB more or less), ``level`` (dB).
    """

    stage: int
    part: Part
    words: str
    shown: Literal["percent", "more", "level"]
    suspect: Suspect


def suspects(bench: Bench) -> Iterator[Named]:
    """Yield everything that is suspected, from the source on."""
    base = bench.transmissions
    yield from _of_source(bench, base)
    for i in range(len(bench.jobs)):
        yield from _of_filter(bench, base, i)
        yield from _of_device(bench, base, i)
        yield from _of_amplifier(bench, base, i)
        yield from _of_leaks(bench, base, i)


def output_db(chain: ChainArrays, transmissions: Sequence[Array]) -> Array:
    """Return the lines at the output [dBc], (..., lines)."""
    return chain.to_db(propagate(chain, transmissions)[-1].leaving)


def _run(bench: Bench, chain: ChainArrays, transmissions: Sequence[Array], amounts: Array) -> Suspect:
    """Run a changed chain, of which one array has an axis of amounts in front."""
    level_db = np.broadcast_to(output_db(chain, transmissions), (amounts.size, chain.grid.count))
    return bench.suspect(amounts, level_db)


def _of_source(bench: Bench, base: Sequence[Array]) -> Iterator[Named]:
    """Suspect the source's lines, all and one by one."""
    chain = bench.chain
    present = np.flatnonzero(chain.source > 0)
    factor = chain.from_db(_STEPS_DB)[:, None]
    groups = [(present, "the lines of the source are {amount}")] if present.size > 1 else []
    groups += [(np.array([k]), f"line {chain.grid.line(int(k))} of the source is {{amount}}") for k in present]
    for group, words in groups:
        source = np.tile(chain.source, (_STEPS_DB.size, 1))
        source[:, group] *= factor
        yield Named(-1, "source", words, "more", _run(bench, replace(chain, source=source), base, _STEPS_DB))


def _of_filter(bench: Bench, base: Sequence[Array], i: int) -> Iterator[Named]:
    """Suspect a filter of being elsewhere, of rejecting less or more, and its shield of leaking."""
    job, name = bench.jobs[i], bench.scenario.stages[i].name
    if bench.filters[i].attenuation is None:
        return

    def tried(changed: Array, amounts: Array) -> Suspect:
        return _run(bench, bench.chain, [*base[:i], changed, *base[i + 1 :]], amounts)

    moved = tried(bench.filtered(i, _MOVES), _MOVES)
    yield Named(i, "filter", f"the filter of {name} has moved by {{amount}}", "percent", moved)
    still = np.zeros_like(_STEPS_DB)
    less = tried(bench.filtered(i, still, more_db=-_STEPS_DB), -_STEPS_DB)
    yield Named(i, "filter", f"the filter of {name} rejects {{amount}}", "more", less)
    isolation = job.design.isolation
    if np.isfinite(isolation.level_db):
        level_db = np.arange(isolation.level_db - 1.0, _LEAST_ISOLATION_DB, -1.0)
        leak_db = job.leak_db + (level_db - isolation.level_db)[:, None]
    else:
        level_db = np.arange(_MOST_ISOLATION_DB, _LEAST_ISOLATION_DB, -1.0)
        leak_db = np.tile(level_db[:, None], (1, bench.chain.grid.count))
    if level_db.size:
        leaking = tried(bench.filtered(i, np.zeros_like(level_db), leak_db=leak_db), level_db)
        given = f"{isolation.level_db:g} dB" if np.isfinite(isolation.level_db) else "none leaking"
        words = f"the isolation past the filter of {name} is {{amount}} instead of {given}"
        yield Named(i, "isolation", words, "level", leaking)


def _of_device(bench: Bench, base: Sequence[Array], i: int) -> Iterator[Named]:
    """Suspect a multiplier's lines, all and the strongest one by one, and its balance."""
    chain, stage, arrays = bench.chain, bench.scenario.stages[i], bench.chain.stages[i]
    if stage.device is None:
        return
    present = np.flatnonzero(arrays.device > 0)
    strongest = present[np.argsort(-arrays.device[present], kind="stable")][:_SINGLE_LINES]
    groups = [(present, f"the lines of {stage.name}'s multiplier are {{amount}}")] if present.size > 1 else []
    groups += [
        (np.array([k]), f"line {chain.grid.line(int(k))} of {stage.name}'s multiplier is {{amount}}")
        for k in sorted(strongest)
    ]
    factor = chain.from_db(_STEPS_DB)[:, None]
    for group, words in groups:
        device = np.tile(arrays.device, (_STEPS_DB.size, 1))
        device[:, group] *= factor
        yield Named(
            i,
            "device",
            words,
            "more",
            _run(bench, _with_stage(chain, i, replace(arrays, device=device)), base, _STEPS_DB),
        )
    if stage.device.type in ("push-push", "push-pull"):
        balances = _BALANCES_DB[np.abs(_BALANCES_DB - stage.device.balance_db) > 0.5]
        levels = [
            output_db(_with_stage(chain, i, _balanced(bench, i, replace(stage.device, balance_db=float(b)))), base)
            for b in balances
        ]
        words = f"the balance of {stage.name}'s multiplier is {{amount}} instead of {stage.device.balance_db:g} dB"
        yield Named(i, "device", words, "level", bench.suspect(balances, np.array(levels)))


def _of_amplifier(bench: Bench, base: Sequence[Array], i: int) -> Iterator[Named]:
    """Suspect an amplifier's lines."""
    arrays = bench.chain.stages[i]
    if not arrays.amplifier.any():
        return
    amplifier = bench.chain.from_db(_STEPS_DB)[:, None] * arrays.amplifier
    words = f"the lines of {bench.scenario.stages[i].name}'s amplifier are {{amount}}"
    changed = _with_stage(bench.chain, i, replace(arrays, amplifier=amplifier))
    yield Named(i, "amplifier", words, "more", _run(bench, changed, base, _STEPS_DB))


def _of_leaks(bench: Bench, base: Sequence[Array], i: int) -> Iterator[Named]:
    """Suspect the isolation from every earlier carrier to the node behind a stage."""
    chain, stages, arrays = bench.chain, bench.scenario.stages, bench.chain.stages[i]
    to = "the output" if i == len(stages) - 1 else f"the input of {stages[i + 1].name}"
    for found in arrays.leaks:
        levels_db = np.arange(found.isolation_db - 1.0, _LEAST_ISOLATION_DB, -1.0)
        if not levels_db.size:
            continue
        leak = np.tile(arrays.leak, (levels_db.size, 1))
        now, then = chain.from_db(found.level_dbc), chain.from_db(found.level_dbc + found.isolation_db - levels_db)
        leak[:, found.line] += then - now
        origin = "the source" if found.origin < 0 else stages[found.origin].name
        words = f"the isolation from {origin} to {to} is {{amount}} instead of {found.isolation_db:.0f} dB"
        changed = _with_stage(chain, i, replace(arrays, leak=leak))
        yield Named(i, "isolation", words, "level", _run(bench, changed, base, levels_db))


def _with_stage(chain: ChainArrays, i: int, changed: StageArrays) -> ChainArrays:
    return replace(chain, stages=(*chain.stages[:i], changed, *chain.stages[i + 1 :]))


def _balanced(bench: Bench, i: int, device: Device) -> StageArrays:
    """Return a stage's arrays with another multiplier of the same kind."""
    chain, arrays, times = bench.chain, bench.chain.stages[i], bench.scenario.stages[i].times
    carrier_in = chain.grid.index(bench.scenario.carrier(i - 1)) + 1
    count, power = chain.grid.count, chain.exponent == 2
    conversion = conversion_matrix(device, times, carrier_index=carrier_in, count=count, power=power)
    conversion[arrays.carrier] = 0.0
    multiples = np.arange(carrier_in, count + 1, carrier_in)
    lines = np.zeros(count)
    lines[multiples - 1] = device_lines(device, times, len(multiples))[1:] ** chain.exponent
    lines[arrays.carrier] = 0.0
    return replace(arrays, device=lines, conversion=conversion)
