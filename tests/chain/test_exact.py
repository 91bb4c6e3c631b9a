"""The exact run against a transform in the time domain written here, and against what it must reduce to."""

from __future__ import annotations

import math
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.chain.assemble import ChainArrays, assemble
from harmonic_planner.chain.exact import amplifier_drive_db, combs_of, exact
from harmonic_planner.chain.exact_stage import exact_stages
from harmonic_planner.chain.levels import carrier_levels
from harmonic_planner.chain.propagate import propagate
from harmonic_planner.model import Amplifier, Device, PlannerError, Scenario

from builders import PUSH_PULL, PUSH_PUSH, SINGLE, chain_of, stage, with_amplifier

SOURCE = {Fraction(2): -40.0, Fraction(3): -45.0, Fraction(1, 2): -60.0}
FINE = 2**17
LIMITER = Device("limiter", -10.0, steepness=4.0)
DEVICES = {2: (PUSH_PUSH, SINGLE), 3: (PUSH_PULL, LIMITER, replace(SINGLE, half_angle_rad=math.radians(45)))}


def filters_of(chain: ChainArrays, seed: int, *, least_db: float = 20.0, most_db: float = 50.0) -> list[np.ndarray]:
    rng = np.random.default_rng(seed)
    found = []
    for s in chain.stages:
        t = 10 ** (-rng.uniform(least_db, most_db, chain.grid.count) / 20)
        t[s.carrier] = 1.0
        found.append(t)
    return found


def with_phases(chain: ChainArrays, filters: list[np.ndarray], seed: int) -> list[np.ndarray]:
    rng = np.random.default_rng(seed)
    turned = [t * np.exp(2j * np.pi * rng.random(t.shape)) for t in filters]
    for s, t in zip(chain.stages, turned, strict=True):
        t[s.carrier] = 1.0
    return turned


def chain_with(factors: tuple[int, ...], seed: int, **keys: object) -> Scenario:
    rng = np.random.default_rng(seed)
    scenario = chain_of(*factors, lines=SOURCE, **keys)  # type: ignore[arg-type]
    devices = [DEVICES[n][int(rng.integers(len(DEVICES[n])))] for n in factors]
    return replace(scenario, stages=tuple(replace(s, device=d) for s, d in zip(scenario.stages, devices, strict=True)))


def waveform_of(device: Device, x: np.ndarray) -> np.ndarray:
    """Write the waveforms out again, from their definitions."""
    if device.type == "limiter":
        return np.tanh(device.steepness * x)
    c = math.cos(device.half_angle_rad)
    unbalance = 10 ** (-device.balance_db / 20)
    sigma = (1 - unbalance) / (1 + unbalance)
    other = {"single-ended": 0.0, "push-push": sigma, "push-pull": -sigma}[device.type]
    return np.where(x > c, x - c, 0.0) + other * np.where(x < -c, -x - c, 0.0)


def in_time(scenario: Scenario, chain: ChainArrays, filters: list[np.ndarray], entering: np.ndarray) -> np.ndarray:
    """Return amplitudes at the output: fine samples of one period, distorted, transformed, filtered, and so on."""
    count = chain.grid.count
    t = 2 * np.pi * np.arange(FINE) / FINE
    x = np.zeros(FINE)
    for j in np.flatnonzero(entering):
        x += abs(entering[j]) * np.cos((j + 1) * t + np.angle(entering[j]))
    for s, arrays, passed in zip(scenario.stages, chain.stages, filters, strict=True):
        y = x if s.device is None else waveform_of(s.device, x)
        lines = np.zeros(FINE // 2 + 1, dtype=complex)
        lines[1 : count + 1] = np.fft.rfft(y)[1 : count + 1] * passed
        carrier = lines[arrays.carrier + 1]
        delay = np.angle(carrier) / (arrays.carrier + 1)
        lines *= np.exp(-1j * delay * np.arange(lines.size)) / abs(carrier)
        x = np.fft.irfft(lines, FINE) * FINE / 2
    return np.abs(lines[1 : count + 1])


def source_of(chain: ChainArrays, rng: np.random.Generator) -> np.ndarray:
    entering = chain.source * np.exp(2j * np.pi * rng.random(chain.grid.count))
    entering[chain.grid.q - 1] = 1.0
    return entering


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("factors", [(2, 3), (3, 2, 2), (3, 1, 2)])
def test_a_chain_at_known_phases_against_the_time_domain(factors: tuple[int, ...], seed: int) -> None:
    """independent: every line down to −120 dBc, to 0.01 dB; the fine samples themselves fold back some 1e-7."""
    rng = np.random.default_rng(seed)
    scenario = chain_of(*factors, lines=SOURCE)
    stages = [
        s if n == 1 else replace(s, device=DEVICES[n][seed % 2]) for s, n in zip(scenario.stages, factors, strict=True)
    ]
    scenario = replace(scenario, stages=tuple(stages))
    chain = assemble(scenario, phases="worst-case")
    filters = with_phases(chain, filters_of(chain, seed), seed)
    entering = source_of(chain, rng)
    idle = np.full(len(factors), -np.inf)
    got = combs_of(exact_stages(scenario, chain, (0.0,) * len(factors)), entering[None], filters, idle, rng)[-1][0]
    expected = in_time(scenario, chain, filters, entering)
    seen = expected > 1e-6
    assert np.count_nonzero(seen) > 12
    assert 20 * np.log10(np.abs(got)[seen] / expected[seen]) == pytest.approx(0.0, abs=0.01)


def test_without_filters_phases_stay_as_the_waveforms_made_them() -> None:
    """independent: a stage without a filter keeps phases; then nothing is random but the source's lines."""
    scenario = chain_with((2, 3), 2, filter="none")
    chain = assemble(scenario, phases="worst-case")
    open_ended = [np.ones(chain.grid.count)] * 2
    rng = np.random.default_rng(1)
    entering = source_of(chain, rng)
    stages = exact_stages(scenario, chain, (0.0, 0.0))
    got = combs_of(stages, entering[None], open_ended, [-np.inf] * 2, rng)[-1][0]
    expected = in_time(scenario, chain, open_ended, entering)
    assert np.abs(got) == pytest.approx(expected, abs=1e-5 * expected.max())


@pytest.mark.parametrize("line", [Fraction(1, 2), Fraction(7, 5), Fraction(9, 4)])
def test_one_weak_residual_reaches_the_linear_figure(line: Fraction) -> None:
    """independent: where one line of the source meets each output line by one path, all draws give the linear figure.

    Line 1/2 meets a line by two paths, whose phases the draws run through: its largest level is the sum of both.
    """
    scenario = chain_of(3, lines={line: -60.0}, device=replace(SINGLE, half_angle_rad=math.radians(40)))
    chain = assemble(scenario, phases="worst-case")
    got = exact(scenario, chain, [np.ones(chain.grid.count)], draws=300, rng=np.random.default_rng(3))
    numbers = chain.grid.numbers
    sides = (numbers > 2) & (numbers < 4) & np.isfinite(got.linear_dbc)
    assert np.count_nonzero(sides) >= 2
    assert got.max_dbc[sides] == pytest.approx(got.linear_dbc[sides], abs=0.05)
    if line != Fraction(1, 2):
        assert got.p95_dbc[sides] == pytest.approx(got.linear_dbc[sides], abs=0.05)


def test_powers_average_where_the_chain_adds_powers() -> None:
    """independent: the 95 % level of many like paths is 4.8 dB over their mean power (Rayleigh: 10 log10(−ln 0.05))."""
    lines = {Fraction(k, 5): -70.0 for k in range(1, 10) if k != 5}
    scenario = chain_of(2, 3, lines=lines)
    scenario = replace(scenario, stages=tuple(replace(s, device=SINGLE) for s in scenario.stages))
    chain = assemble(scenario, phases="average")
    worst = assemble(scenario, phases="worst-case")
    filters = [np.full(chain.grid.count, 0.3), np.ones(chain.grid.count)]
    for s, t in zip(chain.stages, filters, strict=True):
        t[s.own] *= 1e-3
        t[s.carrier] = 1.0
    powers = exact(scenario, chain, filters, draws=1500, rng=np.random.default_rng(4))
    sums = exact(scenario, worst, filters, draws=1500, rng=np.random.default_rng(4))
    assert powers.max_dbc == pytest.approx(sums.max_dbc)
    first = np.arange(1, chain.grid.count + 1) % 5 != 0
    near = first & (np.abs(chain.grid.numbers - 6) < 1)
    assert np.count_nonzero(near) == 8
    assert np.mean(powers.p95_dbc[near] - powers.linear_dbc[near]) == pytest.approx(4.77, abs=0.5)
    assert np.all(powers.max_dbc[near] < sums.linear_dbc[near])


def test_the_same_seed_gives_the_same_numbers_and_more_draws_no_lower_maximum() -> None:
    scenario = chain_with((2, 3), 5)
    chain = assemble(scenario, phases="worst-case")
    filters = filters_of(chain, 5)
    first, second, more = (
        exact(scenario, chain, filters, draws=n, rng=np.random.default_rng(9)) for n in (20, 20, 400)
    )
    assert np.array_equal(first.max_dbc, second.max_dbc)
    assert np.array_equal(first.p95_dbc, second.p95_dbc)
    lines = np.isfinite(first.max_dbc)
    assert np.all(first.p95_dbc[lines] <= first.max_dbc[lines])
    assert np.mean(more.max_dbc[lines] - first.max_dbc[lines]) > 0
    assert first.draws == 20


def test_points_are_run_one_by_one_and_the_worst_counts() -> None:
    scenario = chain_with((2, 3), 6)
    chain = assemble(scenario, phases="worst-case")
    strong, weak = filters_of(chain, 6), filters_of(chain, 6)
    weak = [np.where(np.arange(t.size) == s.carrier, 1.0, t / 10) for t, s in zip(weak, chain.stages, strict=True)]
    both = [np.stack(pair) for pair in zip(weak, strong, strict=True)]
    whole = exact(scenario, chain, both, draws=60, rng=np.random.default_rng(1))
    only_strong = exact(scenario, chain, both, draws=60, rng=np.random.default_rng(1), points=[1])
    only_weak = exact(scenario, chain, both, draws=60, rng=np.random.default_rng(1), points=[0])
    assert (whole.points, only_weak.points, only_strong.points) == ((0, 1), (0,), (1,))
    lines = np.isfinite(whole.max_dbc)
    assert np.all(whole.max_dbc[lines] >= only_weak.max_dbc[lines] - 1e-9)
    assert np.all(whole.linear_dbc >= only_weak.linear_dbc)
    assert whole.linear_dbc == pytest.approx(only_strong.linear_dbc)
    alone = exact(scenario, chain, strong, draws=60, rng=np.random.default_rng(1))
    assert alone.max_dbc == pytest.approx(only_strong.max_dbc)


def test_the_carrier_is_no_line() -> None:
    scenario = chain_with((2, 3), 6)
    chain = assemble(scenario, phases="worst-case")
    got = exact(scenario, chain, filters_of(chain, 1), draws=3, rng=np.random.default_rng(1))
    carrier = chain.stages[-1].carrier
    for levels in (got.max_dbc, got.p95_dbc, got.linear_dbc):
        assert levels[carrier] == -np.inf


def test_nothing_to_draw_is_refused() -> None:
    scenario = chain_with((2,), 6)
    chain = assemble(scenario, phases="worst-case")
    with pytest.raises(PlannerError, match=r"draws = 0: allowed is a whole number from 1"):
        exact(scenario, chain, filters_of(chain, 1), draws=0, rng=np.random.default_rng(1))


# ---------------------------------------------------------------------------------------------- measured lines


MEASURED = {1: -25.0, 3: -33.0, 4: -12.0}


@pytest.mark.parametrize("balance_db", [25.0, math.inf])
def test_measured_lines_hold(balance_db: float) -> None:
    """independent: levels given come out; with perfect balance the waveform has no odd lines, and they are added."""
    device = replace(PUSH_PUSH, balance_db=balance_db, lines_dbc=MEASURED)
    scenario = chain_of(2, device=device)
    chain = assemble(scenario, phases="worst-case")
    got = exact(scenario, chain, [np.ones(chain.grid.count)], draws=4, rng=np.random.default_rng(2))
    for m, level_dbc in MEASURED.items():
        assert got.max_dbc[m - 1] == pytest.approx(level_dbc, abs=1e-4)
    assert got.max_dbc[5] == pytest.approx(got.linear_dbc[5], abs=1e-4)


def test_residuals_in_a_measured_zone_follow_the_linear_conversion() -> None:
    scenario = chain_of(2, lines={Fraction(7, 5): -70.0}, device=replace(PUSH_PUSH, lines_dbc=MEASURED))
    chain = assemble(scenario, phases="worst-case")
    got = exact(scenario, chain, [np.ones(chain.grid.count)], draws=4, rng=np.random.default_rng(2))
    seen = np.isfinite(got.linear_dbc) & (got.linear_dbc > -110) & (chain.grid.numbers < 5)
    assert np.count_nonzero(seen) > 8
    assert got.max_dbc[seen] == pytest.approx(got.linear_dbc[seen], abs=0.05)


# ---------------------------------------------------------------------------------------------- amplifiers


AMPLIFIER = Amplifier(20.0, saturation_dbm=10.0)


def cleaned(drive_db: float, amplifier: Amplifier) -> tuple[Scenario, ChainArrays]:
    """Return a clean-up stage with an amplifier that the source drives by `drive_db` over saturation."""
    scenario = chain_of(1, 2, lines={Fraction(7, 5): -60.0})
    saturation_dbm = amplifier.saturation_dbm if amplifier.saturation_dbm is not None else 10.0
    level_dbm = saturation_dbm - amplifier.gain_db + drive_db + 12.0
    scenario = replace(scenario, source=replace(scenario.source, level_dbm=level_dbm))
    scenario = replace(scenario, stages=scenario.stages[:1])
    scenario = with_amplifier(scenario, 0, amplifier)
    return scenario, assemble(scenario, phases="worst-case")


@pytest.mark.parametrize(
    ("drive_db", "own_db", "image_db"),
    [(-30.0, 0.0, -140.0), (0.0, 20 * math.log10(0.75), -12.04), (30.0, -6.02, -6.02)],
)
def test_an_amplifier_splits_a_residual_as_it_saturates(drive_db: float, own_db: float, image_db: float) -> None:
    """independent: (1 ± a)/2, a = 1 far below, 1/2 where the straight lines meet, 0 in saturation (6 dB each)."""
    scenario, chain = cleaned(drive_db, AMPLIFIER)
    assert amplifier_drive_db(scenario, 1)[0, 0] == pytest.approx(drive_db)
    got = exact(scenario, chain, [np.ones(chain.grid.count)], draws=5, rng=np.random.default_rng(2))
    own, image = chain.grid.index(Fraction(7, 5)), chain.grid.index(Fraction(3, 5))
    assert got.max_dbc[own] == pytest.approx(-60 + own_db, abs=0.02)
    if image_db > -100:
        assert got.max_dbc[image] == pytest.approx(-60 + image_db, abs=0.02)
    else:
        assert got.max_dbc[image] < image_db
    assert got.linear_dbc[own] == pytest.approx(-60)


def test_the_loss_of_filters_takes_drive_away() -> None:
    scenario, _ = cleaned(6.0, AMPLIFIER)
    losses = [np.array([0.0, 2.0, 6.0])]
    drive_db = amplifier_drive_db(scenario, 3, carrier_levels(scenario, losses))
    assert drive_db[0] == pytest.approx([6.0, 4.0, 0.0])


def test_am_to_pm_makes_sidebands_of_its_own() -> None:
    """independent: own |1 + a + jK|/2, image |1 − a − jK|/2 with K = 0.1516·k; here without saturation, a = 1."""
    scenario, chain = cleaned(0.0, Amplifier(20.0))
    got = exact(
        scenario,
        chain,
        [np.ones(chain.grid.count)],
        draws=3,
        rng=np.random.default_rng(2),
        am_to_pm_deg_per_db=[3.0],
    )
    K = 0.1516 * 3.0
    own, image = chain.grid.index(Fraction(7, 5)), chain.grid.index(Fraction(3, 5))
    assert got.max_dbc[own] == pytest.approx(-60 + 20 * math.log10(abs(2 + 1j * K) / 2), abs=0.02)
    assert got.max_dbc[image] == pytest.approx(-60 + 20 * math.log10(K / 2), abs=0.02)


def test_an_amplifier_adds_its_own_lines_behind_the_knee() -> None:
    scenario, chain = cleaned(20.0, replace(AMPLIFIER, lines_dbc={2: -35.0, 3: -42.0}))
    got = exact(scenario, chain, [np.ones(chain.grid.count)], draws=3, rng=np.random.default_rng(2))
    q = chain.grid.q
    assert got.max_dbc[[2 * q - 1, 3 * q - 1]] == pytest.approx([-35.0, -42.0], abs=0.01)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 1000), st.sampled_from([(2, 3), (3, 2), (2, 2, 2)]))
def test_weak_residuals_never_pass_the_linear_sum(seed: int, factors: tuple[int, ...]) -> None:
    """independent: sums of amplitudes bound the first order; with residuals of −60 dBc the rest is below 0.05 dB."""
    scenario = chain_with(factors, seed)
    chain = assemble(scenario, phases="worst-case")
    chain = replace(chain, source=chain.source * 1e-2)
    filters = filters_of(chain, seed, least_db=75.0, most_db=95.0)
    got = exact(scenario, chain, filters, draws=10, rng=np.random.default_rng(seed))
    last = chain.stages[-1]
    seen = (got.linear_dbc > np.max(got.linear_dbc[~last.own]) - 20) & ~last.own
    assert np.any(seen)
    assert np.all(got.max_dbc[seen] <= got.linear_dbc[seen] + 0.05)


def test_span_points_carry_their_own_drive() -> None:
    scenario, chain = cleaned(30.0, AMPLIFIER)
    levels = carrier_levels(scenario, [np.array([0.0, 60.0])])
    both = [np.ones((2, chain.grid.count))]
    image = chain.grid.index(Fraction(3, 5))
    saturated, linear = (
        exact(scenario, chain, both, draws=2, rng=np.random.default_rng(1), points=[p], levels=levels).max_dbc[image]
        for p in (0, 1)
    )
    assert saturated == pytest.approx(-66.02, abs=0.02)
    assert linear < -150


def test_a_stage_built_from_the_model_runs_as_it_is() -> None:
    """A single ×2 with a filter and nothing else: its own lines come out at the waveform's levels."""
    scenario = replace(chain_of(2), stages=(stage(2),))
    chain = assemble(scenario, phases="worst-case")
    filters = filters_of(chain, 3)
    got = exact(scenario, chain, filters, draws=5, rng=np.random.default_rng(1))
    expected = chain.to_db(propagate(chain, filters)[-1].leaving)
    seen = expected > -120
    assert got.max_dbc[seen] == pytest.approx(expected[seen], abs=1e-3)


def test_earlier_carriers_that_leak_are_added() -> None:
    """A carrier past the last filter comes out at the level of its leak, which no filter touches."""
    scenario = chain_with((2, 3), 4)
    chain = assemble(scenario, phases="worst-case")
    leak = np.zeros(chain.grid.count)
    line = chain.grid.index(Fraction(2))
    leak[line] = 10 ** (-40 / 20)
    last = replace(chain.stages[-1], leak=leak)
    chain = replace(chain, stages=(*chain.stages[:-1], last))
    closed = [np.where(np.arange(chain.grid.count) == s.carrier, 1.0, 0.0) for s in chain.stages]
    got = exact(scenario, chain, closed, draws=3, rng=np.random.default_rng(1))
    assert got.max_dbc[line] == pytest.approx(-40.0)
    assert got.linear_dbc[line] == pytest.approx(-40.0)
