"""Forward propagation against two independent roads: bookkeeping by fractions, and a time-domain transform."""

from __future__ import annotations

import math
from collections import defaultdict
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.chain.assemble import ChainArrays, assemble
from harmonic_planner.chain.propagate import births, carrier_spread, path_gains, propagate
from harmonic_planner.model import Amplifier, Scenario
from harmonic_planner.physics.conversion import conversion_ratio, device_lines

from builders import SINGLE, chain_of, with_amplifier

SOURCE = {Fraction(2): -40.0, Fraction(3): -45.0, Fraction(1, 2): -60.0}


def _random_transmissions(
    chain: ChainArrays, seed: int, *, least_db: float = 20.0, most_db: float = 50.0
) -> list[np.ndarray]:
    rng = np.random.default_rng(seed)
    filters = []
    for stage in chain.stages:
        t = 10 ** (-rng.uniform(least_db, most_db, chain.grid.count) * chain.exponent / 20)
        t[stage.carrier] = 1.0
        filters.append(t)
    return filters


def _by_fractions(scenario: Scenario, chain: ChainArrays, filters: list[np.ndarray]) -> dict[Fraction, float]:
    """Carry every line as a Fraction in a dict, by the definition of a residual's paths."""
    p = chain.exponent
    lines = {k: 10 ** (level * p / 20) for k, level in scenario.source.lines_dbc.items()}
    k0 = Fraction(1)
    top = chain.grid.line(chain.grid.count - 1)
    for stage, t in zip(scenario.stages, filters, strict=True):
        made: dict[Fraction, float] = defaultdict(float)
        assert stage.device is not None
        reach = int(2 * top / k0) + 2
        own = device_lines(stage.device, stage.times, reach)
        for m in range(1, reach):
            if m != stage.times and m * k0 <= top:
                made[m * k0] += own[m] ** p
        ms = np.arange(-reach, reach + 1)
        ratios = conversion_ratio(stage.device, stage.times, ms) ** p
        for k, a in lines.items():
            for m, ratio in zip(ms, ratios, strict=True):
                out = abs(k + int(m) * k0)
                if 0 < out <= top and out != stage.times * k0:
                    made[out] += ratio * a
        k0 *= stage.times
        lines = {k: a * t[chain.grid.index(k)] for k, a in made.items()}
        if stage.amplifier is not None:
            for n, level in stage.amplifier.lines_dbc.items():
                lines[n * k0] = lines.get(n * k0, 0.0) + 10 ** (level * p / 20)
    return lines


@pytest.mark.parametrize("phases", ["worst-case", "average"])
@pytest.mark.parametrize("factors", [(2,), (3, 2), (2, 3, 2)])
def test_matrices_agree_with_bookkeeping_by_fractions(factors: tuple[int, ...], phases: str) -> None:
    scenario = with_amplifier(chain_of(*factors, lines=SOURCE), 0, Amplifier(20.0, lines_dbc={2: -30.0, 3: -35.0}))
    chain = assemble(scenario, phases=phases)  # type: ignore[arg-type]
    filters = _random_transmissions(chain, 1)
    expected = _by_fractions(scenario, chain, filters)
    leaving = propagate(chain, filters)[-1].leaving
    for k, a in expected.items():
        assert leaving[chain.grid.index(k)] == pytest.approx(a, rel=1e-9, abs=1e-15), k
    assert np.count_nonzero(leaving) == sum(a > 0 for a in expected.values())


def _filtered(x: np.ndarray, grid: ChainArrays, stage: int, t: np.ndarray) -> np.ndarray:
    """Filter one period of the source's 1/q line in the frequency domain; only known lines pass."""
    spectrum = np.fft.rfft(x)
    gain = np.zeros(spectrum.size)
    gain[1 : t.size + 1] = t
    carrier = grid.stages[stage].carrier + 1
    spectrum = spectrum * gain
    return np.fft.irfft(spectrum / (2 * abs(spectrum[carrier]) / x.size), x.size)


@pytest.mark.parametrize("seed", range(6))
def test_a_two_stage_chain_against_the_time_domain(seed: int) -> None:
    """Sample one period of the source's half line through single-ended ×2 and ×3, real residuals and phases.

    Worst-case sums bound every line from above. With only line 3/2 let through, own side and image of the second
    stage each have one path, and equal the linear figure to 0.1 dB.
    """
    rng = np.random.default_rng(seed)
    scenario = chain_of(2, 3, lines={Fraction(1, 2): -60.0}, device=replace(SINGLE, half_angle_rad=math.radians(60)))
    chain = assemble(scenario, phases="worst-case")
    filters = _random_transmissions(chain, seed, least_db=50.0, most_db=60.0)
    predicted = propagate(chain, filters)[-1]
    exact, _ = _two_stages_exact(chain, filters, rng)
    keep = np.arange(chain.grid.count) != chain.stages[1].carrier
    strong = keep & (predicted.filtered > 10 ** (-130 / 20))
    over_db = 20 * np.log10(exact[strong] / predicted.filtered[strong])
    assert over_db.max() < 0.1

    half = chain.grid.index(Fraction(3, 2))
    alone = [np.full(chain.grid.count, 1e-9), np.ones(chain.grid.count)]
    alone[0][[half, chain.stages[0].carrier]] = 0.1, 1.0
    exact, entering = _two_stages_exact(chain, alone, rng)
    for line, m in ((Fraction(11, 2), 2), (Fraction(13, 2), -4)):
        device = scenario.stages[1].device
        assert device is not None
        linear = conversion_ratio(device, 3, np.array([m]))[0] * entering[half]
        assert 20 * np.log10(exact[chain.grid.index(line)] / linear) == pytest.approx(0.0, abs=0.1)


def _two_stages_exact(
    chain: ChainArrays, filters: list[np.ndarray], rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Return lines behind the second filter, and entering the second device, relative to their carriers."""
    n = 1 << 17
    phi = 2 * np.pi * np.arange(n) / n
    cos_theta = math.cos(math.radians(60))
    x = np.cos(2 * phi) + 1e-3 * np.cos(phi + rng.uniform(0, 2 * np.pi))
    for i in range(2):
        y = np.maximum(x - cos_theta, 0.0)
        if i == 0:
            x = _filtered(y, chain, 0, filters[0])
            # put the carrier at phase 0: a shift in time that leaves all magnitudes alone
            carrier = chain.stages[0].carrier + 1
            delay = np.angle(np.fft.rfft(x)[carrier]) / carrier
            spectrum = np.fft.rfft(x) * np.exp(-1j * delay * np.arange(n // 2 + 1))
            x = np.fft.irfft(spectrum, n)
            entering = np.abs(np.fft.rfft(x))[1 : chain.grid.count + 1] * 2 / n
    lines = np.abs(np.fft.rfft(y))[1 : chain.grid.count + 1]
    return lines / lines[chain.stages[1].carrier] * filters[1], entering


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 1000), st.sampled_from([(2, 3), (3, 2, 2)]))
def test_births_add_up_to_every_line(seed: int, factors: tuple[int, ...]) -> None:
    scenario = with_amplifier(chain_of(*factors, lines=SOURCE), 0, Amplifier(20.0, lines_dbc={2: -30.0}))
    chain = assemble(scenario, phases="worst-case")
    filters = _random_transmissions(chain, seed)
    total = sum(b.paths.sum(axis=1) for b in births(chain, filters))
    assert total == pytest.approx(propagate(chain, filters)[-1].leaving, rel=1e-9)


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 1000), st.floats(0.1, 20))
def test_the_output_is_monotone_in_every_transmission(seed: int, by_db: float) -> None:
    chain = assemble(chain_of(2, 3, lines=SOURCE), phases="worst-case")
    filters = _random_transmissions(chain, seed)
    before = propagate(chain, filters)[-1].leaving
    rng = np.random.default_rng(seed)
    stage, line = int(rng.integers(2)), int(rng.integers(chain.grid.count))
    filters[stage][line] *= 10 ** (by_db / 20)
    assert (propagate(chain, filters)[-1].leaving >= before * (1 - 1e-12)).all()


def test_path_gains_carry_what_propagate_carries() -> None:
    chain = assemble(chain_of(2, 3, 2, lines=SOURCE), phases="worst-case")
    filters = _random_transmissions(chain, 3)
    combs = propagate(chain, filters, allowed=True)
    extra = np.zeros(chain.grid.count)
    extra[chain.grid.index(Fraction(1))] = 1e-3
    gains = path_gains(chain, filters, after=0, to=2, allowed=True)
    raised = replace(chain, stages=(replace(chain.stages[0], amplifier=extra), *chain.stages[1:]))
    after = propagate(raised, filters, allowed=True)[-1].leaving
    assert after - combs[-1].leaving == pytest.approx(gains @ extra, rel=1e-9, abs=1e-12)


def test_points_of_the_span_are_carried_side_by_side() -> None:
    chain = assemble(chain_of(2, 3, lines=SOURCE), phases="average")
    two = [_random_transmissions(chain, s) for s in (1, 2)]
    stacked = [np.stack(pair) for pair in zip(*two, strict=True)]
    both = propagate(chain, stacked)[-1].leaving
    for i in range(2):
        assert both[i] == pytest.approx(propagate(chain, two[i])[-1].leaving)


def test_what_lands_on_the_carrier_is_spread_and_no_line() -> None:
    # the source's third harmonic in ×2: |3 − 1| = 2 lands on the wanted line through path m = −1
    scenario = chain_of(2, lines={Fraction(3): -40.0})
    chain = assemble(scenario, phases="worst-case")
    combs = propagate(chain, [np.ones(chain.grid.count)])
    device = scenario.stages[0].device
    assert device is not None
    paths = conversion_ratio(device, 2, np.array([-1, -5])).sum()
    assert carrier_spread(chain, combs)[0] == pytest.approx(0.01 * paths)
    assert combs[0].leaving[chain.stages[0].carrier] == 0


def test_allowances_multiply_every_path_they_apply_to() -> None:
    chain = assemble(chain_of(2, 3), phases="worst-case")
    filters = _random_transmissions(chain, 5)
    nominal, allowed = propagate(chain, filters), propagate(chain, filters, allowed=True)
    one = chain.stages[0].mismatch * chain.stages[0].termination
    assert allowed[0].leaving == pytest.approx(nominal[0].leaving * one)
    ratio = allowed[1].leaving / np.where(nominal[1].leaving > 0, nominal[1].leaving, np.inf)
    two = chain.stages[1].mismatch * chain.stages[1].termination
    assert ratio[ratio > 0].min() >= two - 1e-9
    assert ratio.max() <= one * two + 1e-9
