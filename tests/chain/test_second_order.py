"""When linear sums are not enough: the bound by hand, and what moves it."""

from __future__ import annotations

import math
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.chain.assemble import ChainArrays, assemble
from harmonic_planner.chain.exact import exact
from harmonic_planner.chain.propagate import propagate
from harmonic_planner.chain.second_order import GUARD_DB, needs_exact, second_order_at_output
from harmonic_planner.model import Device, Output, Phases, Scenario

from builders import chain_of, stage

CUBE = Device("power-law", 0.0)
LINE = Fraction(6, 5)


def cubes(*factors: int, level_dbc: float = -40.0, limit_dbc: float = -60.0) -> Scenario:
    return chain_of(*factors, lines={LINE: level_dbc}, limit_dbc=limit_dbc, device=CUBE)


def closed(chain: ChainArrays) -> list[np.ndarray]:
    """Return filters that pass nothing but the carrier."""
    return [np.where(np.arange(chain.grid.count) == s.carrier, 1.0, 0.0) for s in chain.stages]


@pytest.mark.parametrize(("later", "growth_db"), [((), 0.0), ((3,), 9.54), ((2, 3), 15.56)])
def test_the_bound_of_an_ideal_tripler(later: tuple[int, ...], growth_db: float) -> None:
    """independent: T_3 makes 2s + 9.5 dB; an ideal ×N behind it raises that by 20 log10 N."""
    scenario = cubes(3, *later)
    chain = assemble(scenario, phases="worst-case")
    found = needs_exact(scenario, chain, propagate(chain, closed(chain)), guard_db=200.0)
    assert [x.stage for x in found] == [0]
    assert found[0].residuals_dbc == pytest.approx(-40.0)
    assert found[0].level_dbc == pytest.approx(-80 + 9.54 + growth_db, abs=0.01)


def test_the_bound_is_the_line_that_comes_out() -> None:
    """independent: (x + r)³ by one period: the line of two residuals and one carrier, 2·6/5 + 1, is 2s + 9.5 dB."""
    scenario = cubes(3)
    chain = assemble(scenario, phases="worst-case")
    got = exact(scenario, chain, [np.ones(chain.grid.count)], draws=2, rng=np.random.default_rng(1))
    assert got.linear_dbc[chain.grid.index(Fraction(17, 5))] == -np.inf
    assert got.max_dbc[chain.grid.index(Fraction(17, 5))] == pytest.approx(-80 + 9.54, abs=0.02)


def test_the_exact_run_is_asked_for_from_6_db_under_the_limit() -> None:
    """independent: 2·(−40) + 9.54 = −70.46 dBc against limits on both sides of −70.46 + 6."""
    for limit_dbc, asked in ((-64.4, False), (-64.5, True)):
        scenario = cubes(3, limit_dbc=limit_dbc)
        chain = assemble(scenario, phases="worst-case")
        assert bool(needs_exact(scenario, chain, propagate(chain, closed(chain)))) is asked
    assert GUARD_DB == 6.0


def test_without_a_limit_nothing_is_asked_for() -> None:
    scenario = replace(cubes(3), output=Output())
    chain = assemble(scenario, phases="worst-case")
    assert needs_exact(scenario, chain, propagate(chain, closed(chain))) == ()


def test_residuals_on_multiples_of_the_carrier_alone_are_left_out() -> None:
    """A source's harmonics make nothing but harmonics: the first filter rejects those, of second order too."""
    scenario = chain_of(3, lines={Fraction(2): -20.0, Fraction(3): -20.0}, device=CUBE)
    chain = assemble(scenario, phases="worst-case")
    assert needs_exact(scenario, chain, propagate(chain, closed(chain)), guard_db=500.0) == ()


def test_a_residual_apart_counts_with_those_on_multiples() -> None:
    """independent: of (a + b)², without b² where b is on the multiples: a·(a + 2b)."""
    scenario = chain_of(3, lines={LINE: -40.0, Fraction(2): -30.0}, device=CUBE)
    chain = assemble(scenario, phases="worst-case")
    (found,) = needs_exact(scenario, chain, propagate(chain, closed(chain)), guard_db=200.0)
    a, b = 10 ** (-40 / 20), 10 ** (-30 / 20)
    assert found.residuals_dbc == pytest.approx(20 * math.log10(a + b))
    assert found.level_dbc == pytest.approx(20 * math.log10(a * (a + 2 * b)) + 9.54, abs=0.01)


def test_a_clean_up_stage_makes_and_raises_nothing() -> None:
    scenario = cubes(3)
    scenario = replace(scenario, stages=(stage(1), *scenario.stages, stage(1)))
    chain = assemble(scenario, phases="worst-case")
    passed = [np.ones(chain.grid.count), *closed(chain)[1:]]
    (found,) = needs_exact(scenario, chain, propagate(chain, passed), guard_db=200.0)
    assert found.stage == 1
    assert found.level_dbc == pytest.approx(-70.46, abs=0.01)


@pytest.mark.parametrize("phases", ["worst-case", "average"])
def test_the_worst_point_counts_and_powers_give_the_same_sums(phases: Phases) -> None:
    scenario = cubes(2, 3)
    chain = assemble(scenario, phases=phases)
    weak, strong = ([np.full(chain.grid.count, t**chain.exponent) for _ in chain.stages] for t in (1e-3, 1e-2))
    for t in (*weak, *strong):
        t[[s.carrier for s in chain.stages]] = 1.0
    both = propagate(chain, [np.stack(pair) for pair in zip(weak, strong, strict=True)])
    alone = propagate(chain, strong)
    constants = {"made_db": [0.0, 9.5], "growth_db": [6.0, 9.5]}
    assert second_order_at_output(chain, both, **constants) == second_order_at_output(chain, alone, **constants)


@settings(max_examples=40, deadline=None)
@given(st.floats(-70, -20), st.floats(0.1, 20))
def test_one_db_more_residual_is_two_db_more_second_order(level_dbc: float, more_db: float) -> None:
    def bound(dbc: float) -> float:
        scenario = cubes(3, level_dbc=dbc)
        chain = assemble(scenario, phases="worst-case")
        return needs_exact(scenario, chain, propagate(chain, closed(chain)), guard_db=500.0)[0].level_dbc

    assert bound(level_dbc + more_db) - bound(level_dbc) == pytest.approx(2 * more_db, abs=1e-9)
