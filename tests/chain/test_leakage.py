"""Earlier carriers at later nodes: levels worked by hand, and what becomes of them in the chain."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.chain.allocate import allocate
from harmonic_planner.chain.assemble import ChainArrays, assemble, at_levels
from harmonic_planner.chain.budget import requirement, with_margin, worst_excess
from harmonic_planner.chain.exact import exact
from harmonic_planner.chain.levels import carrier_levels
from harmonic_planner.chain.propagate import births, propagate
from harmonic_planner.model import Amplifier, Design, Isolation, Scenario
from harmonic_planner.physics.conversion import conversion_ratio

from builders import DESIGN, chain_of, stage, with_amplifier

ISOLATED = replace(DESIGN, isolation=Isolation(80.0, flat=True))
SOURCE = {Fraction(2): -40.0, Fraction(3): -45.0}


def _leaks(chain: ChainArrays, node: int) -> dict[tuple[int, Fraction], float]:
    return {(x.origin, chain.grid.line(x.line)): x.level_dbc for x in chain.stages[node].leaks}


def test_levels_by_hand() -> None:
    """Source 10 dBm; each stage −8 dB, pads 12 dB; an amplifier of 24 dB behind the first, saturated at 12 dBm.

    Carriers: 10 dBm; multiplier 2, behind the amplifier 12 (14 without saturation); multiplier 4, stage −8;
    multiplier −16, stage −28 dBm.
    """
    scenario = with_amplifier(chain_of(2, 3, 2, design=ISOLATED), 0, Amplifier(24.0, saturation_dbm=12.0))
    chain = assemble(scenario, phases="worst-case")
    assert _leaks(chain, 0) == {(-1, 1): pytest.approx(10 - 80 - 12)}
    assert _leaks(chain, 1) == {(-1, 1): pytest.approx(10 - 80 + 8), (0, 2): pytest.approx(12 - 80 + 8)}
    assert _leaks(chain, 2) == {
        (-1, 1): pytest.approx(10 - 80 + 28),
        (0, 2): pytest.approx(12 - 80 + 28),
        (1, 6): pytest.approx(4 - 80 + 28),  # strongest behind its multiplier, before the pads
    }


def test_a_filter_s_loss_lowers_the_carrier_that_a_leak_is_compared_with() -> None:
    scenario = chain_of(2, 3, design=ISOLATED)
    chain = assemble(scenario, phases="worst-case")
    lossy = at_levels(scenario, chain, carrier_levels(scenario, [np.array([1.0, 2.5]), np.array([3.0, 2.0])]))
    before, after = _leaks(chain, 1), _leaks(lossy, 1)
    assert after[-1, Fraction(1)] == pytest.approx(before[-1, Fraction(1)] + 4.5)  # the worst point: 2.5 + 2
    assert after[0, Fraction(2)] == pytest.approx(
        before[0, Fraction(2)] + 4.5
    )  # its multiplier stands before its filter


def test_the_stage_that_is_reached_decides_and_frequency_counts() -> None:
    shielded, bare = replace(DESIGN, isolation=Isolation(90.0, flat=True)), replace(DESIGN, isolation=Isolation(75.0))
    stages = (stage(2, name="a"), stage(3, name="b", design=shielded), stage(2, name="c", design=bare))
    scenario = replace(chain_of(2, source_hz=(1e9, 1e9)), stages=stages)
    chain = assemble(scenario, phases="worst-case")
    isolation = [{x.origin: x.isolation_db for x in s.leaks} for s in chain.stages]
    assert isolation[0] == {-1: 90}  # into b
    assert isolation[1] == {-1: pytest.approx(75), 0: pytest.approx(75 - 20 * math.log10(2))}  # into c, at 1 and 2 GHz
    assert isolation[2][1] == pytest.approx(75 - 20 * math.log10(6))  # the output: the last stage's


def test_no_isolation_asked_for_means_no_leakage() -> None:
    chain = assemble(chain_of(2, 3, 2), phases="worst-case")  # isolation = "none"
    assert all(s.leaks == () and not s.leak.any() for s in chain.stages)


def test_a_clean_up_stage_leaks_the_same_line_again_and_never_onto_the_carrier() -> None:
    """Lines 1 and 2 at the output of ×1, ×2, ×1: line 1 of source and first clean-up; line 2 belongs there."""
    scenario = chain_of(1, 2, 1, design=ISOLATED)
    chain = assemble(scenario, phases="worst-case")
    assert [sorted((x.origin, chain.grid.line(x.line)) for x in s.leaks) for s in chain.stages] == [
        [],
        [(-1, 1), (0, 1)],
        [(-1, 1), (0, 1)],
    ]
    # source 10, behind the clean-up 10 − 12 = −2, doubler −22 dBm
    assert chain.stages[1].leak[0] == pytest.approx(10 ** (-48 / 20) + 10 ** (-60 / 20))
    average = assemble(scenario, phases="average").stages[1].leak[0]
    assert average == pytest.approx(10 ** (-48 / 10) + 10 ** (-60 / 10))


def test_a_leak_converts_as_a_residual_does() -> None:
    """Source into the input of a tripler at line 2: own side at |1 + 2·2| = 5, image at |1 − 4·2| = 7, by hand."""
    scenario = chain_of(2, 3, design=replace(DESIGN, isolation=Isolation(60.0, flat=True)))
    chain = assemble(scenario, phases="worst-case")
    silent = [np.zeros(chain.grid.count) for _ in chain.stages]
    device = scenario.stages[1].device
    assert device is not None
    made = propagate(chain, silent)[1].device
    leak = 10 ** ((10 - 60 + 10) / 20)  # the drive is 10 − 8 − 12 = −10 dBm
    assert propagate(chain, silent)[1].entering[0] == pytest.approx(leak)
    for line, m in ((5, 2), (7, -4), (1, 0)):
        own = chain.stages[1].device[line - 1]
        others = sum(
            conversion_ratio(device, 3, np.array([k]))[0] for k in range(-30, 31) if abs(1 + 2 * k) == line and k != m
        )
        assert made[line - 1] - own == pytest.approx(leak * (conversion_ratio(device, 3, np.array([m]))[0] + others))


@settings(max_examples=20, deadline=None)
@given(seed=st.integers(0, 10_000), phases=st.sampled_from(["worst-case", "average"]), allowed=st.booleans())
def test_births_name_every_leak_and_add_up(seed: int, phases: str, allowed: bool) -> None:
    scenario = with_amplifier(chain_of(2, 3, 2, lines=SOURCE, design=ISOLATED), 0, Amplifier(20.0, lines_dbc={2: -30}))
    chain = assemble(scenario, phases=phases)  # type: ignore[arg-type]
    rng = np.random.default_rng(seed)
    passed = [chain.from_db(-rng.uniform(20, 60, chain.grid.count)) for _ in chain.stages]
    for to in range(3):
        found = births(chain, passed, to=to, allowed=allowed)
        total = sum(b.paths.sum(axis=1) for b in found)
        assert total == pytest.approx(propagate(chain, passed, allowed=allowed)[to].leaving, rel=1e-9)
        leaks = sorted((b.stage, b.behind) for b in found if b.part == "leak")
        assert leaks == [(origin, node) for origin in range(-1, to) for node in range(max(origin + 1, 0), to + 1)]


def _skirts(chain: ChainArrays, order: int) -> np.ndarray:
    """Rejections of Butterworth skirts of 20 %, by hand, (1, lines)."""
    rows = []
    for s in chain.stages:
        ratio = (np.arange(chain.grid.count) + 1) / (s.carrier + 1)
        row = 10 * np.log10(1 + np.abs((ratio - 1 / ratio) / 0.2) ** (2 * order))
        row[s.carrier] = 0.0
        rows.append(row)
    return np.array(rows)


def test_the_joint_choice_counts_leakage() -> None:
    """Independent: every combination of orders. The source, in the second doubler, comes out beside the carrier."""
    totals = []
    for isolation_db in (40.0, 55.0, 70.0):
        design = replace(DESIGN, isolation=Isolation(isolation_db, flat=True))
        scenario = with_amplifier(chain_of(2, 2, lines=SOURCE, design=design, limit_dbc=-55), 1, Amplifier(60.0))
        chain = with_margin(assemble(scenario, phases="worst-case"), [3.0, 3.0])
        rows = {n: _skirts(chain, n) for n in range(1, 9)}
        tried = itertools.product(rows, rows)
        met = [a + b for a, b in tried if worst_excess(chain, [rows[a][0], rows[b][1]]).max() <= 1]
        found = allocate(chain, [{n: r[i][None, :] for n, r in rows.items()} for i in range(2)])
        assert found.met
        assert found.total == min(met)
        totals.append(found.total)
    assert totals == sorted(set(totals), reverse=True)


def test_leakage_alone_is_out_of_reach_of_every_filter() -> None:
    """Source at 10 dBm, output at −10 dBm, 60 dB: −40 dBc at line 1, where −50 dBc and a margin of 3 dB is asked."""
    scenario = chain_of(2, design=replace(DESIGN, isolation=Isolation(60.0, flat=True)))
    chain = with_margin(assemble(scenario, phases="worst-case"), [3.0])
    found = requirement(chain, [np.full(chain.grid.count, 100.0)], [True])
    assert [chain.grid.line(int(k)) for k in np.flatnonzero(found.out_of_reach[0])] == [1]
    obstacle = allocate(chain, [{1: np.full((1, chain.grid.count), 150.0)}]).obstacle
    assert obstacle is not None
    assert (obstacle.kind, obstacle.line) == ("out-of-reach", 0)
    assert obstacle.over_db == pytest.approx(13, abs=1e-3)


def test_leakage_takes_its_share_of_what_filters_may_leave() -> None:
    """One path into line 1 of a doubler: what is left of the limit beside the leak is what the filter must reach."""
    quiet, leaky = (
        with_margin(assemble(s, phases="worst-case"), [3.0])
        for s in (chain_of(2), chain_of(2, design=replace(DESIGN, isolation=Isolation(75.0, flat=True))))
    )
    strong = [np.full(quiet.grid.count, 150.0)]
    before, after = (requirement(c, strong, [True]).required_db[0] for c in (quiet, leaky))
    leak, allowed = 10 ** ((10 - 75 + 10) / 20), 10 ** (-53 / 20)
    assert after[0] - before[0] == pytest.approx(-20 * math.log10(1 - leak / allowed), abs=1e-6)
    assert after[1:] == pytest.approx(before[1:])


def test_the_exact_run_has_the_leak_too() -> None:
    """With all else taken out the exact run shows the leak's own and image side, 0.1 dB from the linear figure."""
    scenario = chain_of(2, 3, design=ISOLATED)
    chain = assemble(scenario, phases="worst-case")
    silent = [np.where(np.arange(chain.grid.count) == s.carrier, 1.0, 0.0) for s in chain.stages]
    silent[1][:] = 1.0
    run = exact(scenario, chain, silent, draws=20, rng=np.random.default_rng(1))
    for line in (5, 7):
        assert run.max_dbc[line - 1] == pytest.approx(run.linear_dbc[line - 1], abs=0.1)
        assert run.max_dbc[line - 1] > -70


def test_absolute_limits_move_with_the_carrier() -> None:
    scenario: Scenario = replace(chain_of(2, design=Design(isolation=Isolation(math.inf))))
    scenario = replace(scenario, output=replace(scenario.output, limit_dbc=None, limit_dbm=-60.0))
    chain = assemble(scenario, phases="worst-case")
    assert chain.to_db(chain.stages[0].limit[0]) == pytest.approx(-60 + 10)  # the output is at −10 dBm
    lossy = at_levels(scenario, chain, carrier_levels(scenario, [np.array([2.0, 3.0])]))
    assert lossy.to_db(lossy.stages[0].limit[0]) == pytest.approx(-60 + 12)  # at its highest it is at −12 dBm
