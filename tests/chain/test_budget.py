"""Rejections that suffice together and of which none can be lowered alone."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.chain.assemble import ChainArrays, assemble
from harmonic_planner.chain.budget import requirement, with_margin, worst_excess
from harmonic_planner.model import Amplifier

from builders import chain_of, with_amplifier

SOURCE = {Fraction(2): -40.0, Fraction(3): -45.0, Fraction(1, 2): -70.0}


def _skirts(chain: ChainArrays, rng: np.random.Generator, orders: tuple[int, ...]) -> list[np.ndarray]:
    """Return Butterworth-like rejections around each carrier: 10 log10(1 + Ω^2n) less 1 dB, at least 0."""
    k = chain.grid.numbers
    rows = []
    for stage, n in zip(chain.stages, orders, strict=True):
        k0 = float(chain.grid.line(stage.carrier))
        omega = np.abs(k / k0 - k0 / k) / rng.uniform(0.1, 0.2)
        skirt = np.maximum(10 * np.log10(1 + omega ** (2 * n)) - 1, 0)
        skirt[stage.carrier] = 0
        rows.append(skirt)
    return rows


@pytest.mark.parametrize("phases", ["worst-case", "average"])
@settings(max_examples=25, deadline=None)
@given(seed=st.integers(0, 10_000), factors=st.sampled_from([(2,), (3, 2), (2, 3, 2), (2, 2, 3)]))
def test_the_requirement_suffices_and_is_minimal(phases: str, seed: int, factors: tuple[int, ...]) -> None:
    rng = np.random.default_rng(seed)
    chain = with_margin(assemble(chain_of(*factors, lines=SOURCE), phases=phases), [3.0] * len(factors))  # type: ignore[arg-type]
    achieved = _skirts(chain, rng, tuple(int(n) for n in rng.integers(2, 7, len(factors))))
    found = requirement(chain, achieved, [True] * len(factors))
    required = list(found.required_db)
    excess = np.where(found.out_of_reach, 0.0, worst_excess(chain, required))
    assert excess.max() <= 1 + 1e-9
    if found.surplus_db >= 0:
        for r, a in zip(required, achieved, strict=True):
            assert (r <= a + 1e-9).all()
    for i, r in enumerate(required):
        for k in np.flatnonzero(r > 0):
            lowered = [x.copy() for x in required]
            lowered[i][k] = max(lowered[i][k] - 0.5, 0.0)
            over = np.where(found.out_of_reach, 0.0, worst_excess(chain, lowered))
            assert over.max() > 1, f"stage {i}, line {chain.grid.line(k)}: {r[k]:.2f} dB could be lowered alone"


def test_a_single_stage_needs_what_subtraction_says() -> None:
    """One path into each line: required = level + termination + mismatch + margin − limit, by hand."""
    chain = assemble(chain_of(2, limit_dbc=-50), phases="worst-case")
    target = with_margin(chain, [3.0])
    strong = [np.full(chain.grid.count, 150.0)]
    required = requirement(target, strong, [True]).required_db[0]
    stage = chain.stages[0]
    with np.errstate(divide="ignore"):
        level_db = 20 * np.log10(stage.device)
    expected = np.maximum(level_db + stage.allowance.termination_db + stage.allowance.mismatch_db + 3.0 + 50.0, 0)
    assert required == pytest.approx(expected, abs=1e-6)
    assert (expected > 0).sum() >= 5


def test_what_no_filter_can_reach_is_named_and_the_rest_still_required() -> None:
    scenario = with_amplifier(chain_of(2), 0, Amplifier(20.0, lines_dbc={2: -30.0}))
    chain = assemble(scenario, phases="worst-case")
    found = requirement(chain, [np.full(chain.grid.count, 100.0)], [True])
    assert chain.grid.line(int(np.flatnonzero(found.out_of_reach[0])[0])) == 4
    assert found.out_of_reach.sum() == 1
    assert found.required_db[0][chain.grid.index(Fraction(1))] > 0


def test_filters_that_fall_short_have_a_negative_surplus_and_a_requirement_above_them() -> None:
    chain = assemble(chain_of(2, 3), phases="worst-case")
    weak = _skirts(chain, np.random.default_rng(0), (1, 1))
    found = requirement(chain, weak, [True, True])
    assert found.surplus_db < 0
    assert any((r > w + 1).any() for r, w in zip(found.required_db, weak, strict=True))
