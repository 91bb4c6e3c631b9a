"""Random chains of multipliers, run linearly and exactly at the same phases.

In an *apart* chain the source's one residual is at a fraction p/7 of the carrier and the filters hold the devices' own
lines 100 dB and more down. Its lines then tell their order by their remainder to 7: ±p first, ±2p second, ±3p third
order; sixth order is the first to fall on the first again. In a *plain* chain the source has harmonics and often a
half line, the devices' own lines pass the filters, and everything falls on everything.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from copy import deepcopy
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

import numpy as np

from harmonic_planner.chain.assemble import Array, ChainArrays, assemble
from harmonic_planner.chain.exact import combs_of
from harmonic_planner.chain.exact_stage import Complex, exact_stages
from harmonic_planner.chain.propagate import Comb, propagate
from harmonic_planner.model import Device, Scenario
from harmonic_planner.physics.waveforms import spectrum

from builders import chain_of

FACTORS = ((2, 2), (2, 3), (3, 2), (3, 3), (2, 2, 2), (2, 3, 2), (3, 2, 2), (2, 2, 3), (2, 2, 2, 2), (3, 2, 2, 2))
APART = 7
OWED = 0.9
"""Share of a line that has to come along the paths compared."""
FAINTEST = 1e-9
"""Amplitudes below are rounding: a power law, say, makes no image."""


@dataclass(frozen=True)
class Run:
    """One chain at one set of residual levels.

    Attributes
    ----------
    linear : tuple of Comb
        The linear figure: sums of amplitudes.
    signed : (draws, lines) float
        Linear conversion with the signs of its paths, at the phases of each draw.
    exact : (draws, lines) float
    """

    scenario: Scenario
    chain: ChainArrays
    filters: list[Array]
    linear: tuple[Comb, ...]
    signed: Array
    exact: Array

    @property
    def order(self) -> np.ndarray:
        """Order of every line in an apart chain: 0, 1, 2 or 3."""
        (k,) = self.scenario.source.lines_dbc
        p = int(k * APART)
        by_remainder = {(sign * n * p) % APART: n for n in range(4) for sign in (1, -1)}
        return np.array([by_remainder[j % APART] for j in range(1, self.chain.grid.count + 1)])

    def compared(self, reach: float | None = None) -> np.ndarray:
        """First-order lines that owe nearly all to lines within 20 dB of the own side at every multiplier.

        Parameters
        ----------
        reach
            How far from the wanted line, over the multiplier's input carrier: 1/2 for the own and the image side. None
            for lines up to twice the wanted one.
        """
        kept = self.chain.source
        made, near = kept, np.ones(kept.size, dtype=bool)
        carrier_in = self.chain.grid.q
        for s, arrays, passed in zip(self.scenario.stages, self.chain.stages, self.filters, strict=True):
            made = np.where(arrays.own, 0.0, arrays.conversion @ kept)
            offset = np.abs(np.arange(made.size) - arrays.carrier) / carrier_in
            own_side = np.max(made[offset <= 0.5], initial=0.0)
            near = (offset <= (s.times if reach is None else reach)) & (made >= own_side / 10) & (made > FAINTEST)
            if len(self.scenario.source.lines_dbc) == 1:
                near &= self.order == 1
            kept = passed * np.where(near, made, 0.0)
            carrier_in = arrays.carrier + 1
        return near & (kept >= OWED * self.linear[-1].leaving)

    @property
    def off_db(self) -> Array:
        """Exact over signed linear level, each the largest of the draws [dB]."""
        highest, expected = self.exact.max(axis=0), self.signed.max(axis=0)
        return np.where(expected > 0, _db(highest) - _db(np.where(expected > 0, expected, 1.0)), np.inf)


def random_runs(
    kind: Literal["apart", "plain"], seed: int, levels_db: Sequence[float], *, draws: int
) -> tuple[Run, ...]:
    """Return one chain at several levels: the residuals' sum at one multiplier's input, 5–30 dB less at the others."""
    rng = np.random.default_rng(seed)
    factors = FACTORS[seed % len(FACTORS)]
    lines: dict[Fraction, float]
    if kind == "apart":
        lines = {Fraction(int(rng.choice([1, 2, 3, 4, 5, 6, 8, 9, 10])), APART): -60.0}
    else:
        lines = {Fraction(2): rng.uniform(-50, -30), Fraction(3): rng.uniform(-55, -35)}
        if rng.random() < 0.5:
            lines[Fraction(1, 2)] = rng.uniform(-80, -60)
    scenario = chain_of(*factors, lines=lines)
    devices = [_device(n, rng) for n in factors]
    scenario = replace(
        scenario, stages=tuple(replace(s, device=d) for s, d in zip(scenario.stages, devices, strict=True))
    )
    chain = assemble(scenario, phases="worst-case")
    filters = [_filter(chain, i, rng, hold_own=kind == "apart") for i in range(len(factors))]
    conversions = _signed_conversions(scenario, chain)
    runs = []
    for level_db in levels_db:
        own = deepcopy(rng)  # a level does not depend on which others are asked for
        scaled, at_level = _at_level(chain, filters, level_db, own)
        signed, exact = _draws(scenario, scaled, at_level, conversions, own, draws)
        runs.append(Run(scenario, scaled, at_level, propagate(scaled, at_level), signed, exact))
    return tuple(runs)


def _device(times: int, rng: np.random.Generator) -> Device:
    if times == 2:
        kind = str(rng.choice(["push-push", "single-ended"]))
        angle = rng.uniform(55, 90) if kind == "push-push" else rng.uniform(50, 75)
    else:
        kind = str(rng.choice(["push-pull", "single-ended", "limiter", "power-law"]))
        angle = rng.uniform(38, 60)
    return Device(
        kind,  # type: ignore[arg-type]
        -9.0,
        half_angle_rad=math.radians(angle),
        balance_db=rng.uniform(15, 35),
        steepness=rng.uniform(2, 12),
    )


def _filter(chain: ChainArrays, index: int, rng: np.random.Generator, *, hold_own: bool) -> Array:
    """Return transmissions that fall by 20–60 dB an octave to a floor 40–90 dB down, 0–6 dB rough."""
    j = np.arange(1, chain.grid.count + 1)
    carrier = chain.stages[index].carrier
    octaves = np.abs(np.log2(j / (carrier + 1)))
    down_db = np.minimum(rng.uniform(20, 60) * octaves, rng.uniform(40, 90)) + rng.uniform(0, 6, j.size)
    passed = 10 ** (-down_db / 20)
    if hold_own:
        passed[j % chain.grid.q == 0] *= 1e-5
    passed[carrier] = 1.0
    return np.asarray(passed)


def _at_level(
    chain: ChainArrays, filters: list[Array], level_db: float, rng: np.random.Generator
) -> tuple[ChainArrays, list[Array]]:
    """Scale the source and the filters until the residuals' sums are as asked."""
    filters = list(filters)
    loudest = int(rng.integers(len(filters)))
    for i in range(len(filters)):
        asked_db = level_db if i == loudest else level_db - rng.uniform(5, 30)
        scale = 10 ** (asked_db / 20) / float(propagate(chain, filters)[i].entering.sum())
        if i == 0:
            chain = replace(chain, source=chain.source * scale)
        else:
            filters[i - 1] = filters[i - 1] * scale
            filters[i - 1][chain.stages[i - 1].carrier] = 1.0
    return chain, filters


def _draws(
    scenario: Scenario,
    chain: ChainArrays,
    filters: list[Array],
    conversions: list[tuple[Array, Array, Array]],
    rng: np.random.Generator,
    draws: int,
) -> tuple[Array, Array]:
    """Return lines at the output, linear and exact, with the same phases of source and filters."""
    shape = (draws, chain.grid.count)
    entering = chain.source * np.exp(2j * np.pi * rng.random(shape))
    turned = []
    for t, s in zip(filters, chain.stages, strict=True):
        turned.append(t * np.exp(2j * np.pi * rng.random(shape)))
        turned[-1][:, s.carrier] = 1.0
    signed: Complex = entering
    for (direct, mirrored, own), arrays, passed in zip(conversions, chain.stages, turned, strict=True):
        signed = passed * (signed @ direct.T + np.conj(signed) @ mirrored.T + own)
        signed[:, arrays.carrier] = 0.0
    entering = entering.copy()
    entering[:, chain.grid.q - 1] = 1.0
    idle = np.full(len(filters), -np.inf)
    exact = combs_of(exact_stages(scenario, chain, (0.0,) * len(filters)), entering, turned, idle, rng)[-1]
    exact[:, chain.stages[-1].carrier] = 0.0
    return np.abs(signed), np.abs(exact)


def _signed_conversions(scenario: Scenario, chain: ChainArrays) -> list[tuple[Array, Array, Array]]:
    """Return, per stage, what lines and mirrored (conjugate) lines convert to, and the own lines, over the wanted line.

    f′(cos φ) = Σ G_|m| e^(jmφ) multiplies the residual: at `in` + m·k0 as it is, at −(`in` + m·k0) conjugate.
    """
    found = []
    count, carrier_in = chain.grid.count, chain.grid.q
    j = np.arange(1, count + 1)
    for stage, arrays in zip(scenario.stages, chain.stages, strict=True):
        assert stage.device is not None
        s = spectrum(stage.device, stage.times, 2 * count // carrier_in + stage.times + 1)
        ratio = s.G / (2 * s.F[stage.times])
        matrices = []
        for distance in (j[:, None] - j, j[:, None] + j):
            reached = distance % carrier_in == 0
            matrices.append(np.where(reached, ratio[np.abs(distance) // carrier_in], 0.0))
        own = np.zeros(count)
        own[carrier_in - 1 :: carrier_in] = (s.F / s.F[stage.times])[1 : count // carrier_in + 1]
        found.append((matrices[0], matrices[1], own))
        carrier_in = arrays.carrier + 1
    return found


def _db(amplitude: Array) -> Array:
    with np.errstate(divide="ignore"):
        return np.asarray(20 * np.log10(amplitude))
