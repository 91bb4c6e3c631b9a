"""What holds the count of resonators up, recomputed by a forward run written here."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from typing import NamedTuple

import numpy as np
import pytest

from harmonic_planner.chain.allocate import allocate
from harmonic_planner.chain.assemble import Array, ChainArrays, assemble
from harmonic_planner.chain.budget import with_margin
from harmonic_planner.model import Scenario, Why
from harmonic_planner.planning.jobs import make_jobs, sample
from harmonic_planner.planning.settle import Settled, settle
from harmonic_planner.planning.why import why

from builders import DESIGN, chain_of

LADDERS = replace(DESIGN, topology=("ladder",))
CHAIN = chain_of(3, 2, 2, limit_dbc=-55.0, lines={Fraction(2): -35.0, Fraction(3): -45.0}, design=LADDERS)


class Worked(NamedTuple):
    target: ChainArrays
    settled: Settled
    transmissions: list[Array]
    why: Why | None


def worked(scenario: Scenario) -> Worked:
    chain = assemble(scenario, phases=scenario.design.phases)
    jobs = make_jobs(scenario, chain)
    margins_db = [s.design.margin_db for s in scenario.stages]
    settled = settle(chain, jobs, margins_db)
    passed = [sample(job, f.attenuation).transmission for job, f in zip(jobs, settled.filters, strict=True)]
    return Worked(with_margin(chain, margins_db), settled, passed, why(scenario, chain, settled, passed, margins_db))


@pytest.fixture(scope="module")
def found() -> Worked:
    return worked(CHAIN)


def beyond_db(target: ChainArrays, transmissions: Sequence[Array]) -> Array:
    """Return level over limit of every line at the output [dB], (points, lines): v = D·(F + M·v) + A by stages."""
    v = np.broadcast_to(target.source, np.broadcast_shapes(*(t.shape for t in transmissions)))
    for stage, passed in zip(target.stages, transmissions, strict=True):
        made = stage.termination * (stage.device + np.einsum("oi,...i->...o", stage.conversion, v))
        v = stage.mismatch * passed * made + stage.amplifier + stage.leak
    with np.errstate(divide="ignore"):
        return np.asarray(20 * np.log10(v / target.stages[-1].limit))


def test_every_planned_filter_is_tried_with_a_resonator_fewer(found: Worked) -> None:
    assert found.why is not None
    built = [f.built.resonators for f in found.settled.filters if f.built is not None]
    assert [s.resonators for s in found.why.stages] == built
    assert [s.stage for s in found.why.stages] == [s.name for s in CHAIN.stages]


def test_the_limit_missed_first_is_that_of_the_nearest_candidate(found: Worked) -> None:
    assert found.why is not None
    tried = 0
    for i, holding in enumerate(found.why.stages):
        if holding.line is None:
            continue
        tried += 1
        rows = found.settled.rows[i].get(holding.resonators - 1, np.zeros((1, found.target.grid.count)))
        worst = []
        for row in rows:
            trial = [*found.transmissions[:i], 10 ** (-row / 20), *found.transmissions[i + 1 :]]
            over = np.atleast_2d(beyond_db(found.target, trial)).max(axis=0)
            worst.append((float(over.max()), found.target.grid.line(int(over.argmax()))))
        assert (pytest.approx(holding.over_db, abs=1e-6), holding.line) == min(worst)
        assert f"{holding.over_db:.1f} dB" in holding.text
        assert f"line {holding.line} at the output" in holding.text
    assert tried >= 2


def test_where_no_choice_elsewhere_helps_the_joint_search_finds_none(found: Worked) -> None:
    assert found.why is not None
    assert any(s.bound for s in found.why.stages)
    for i, holding in enumerate(found.why.stages):
        fewer = {n: r for n, r in found.settled.rows[i].items() if n < holding.resonators}
        rows = [*found.settled.rows[:i], fewer or {0: np.zeros((1, found.target.grid.count))}]
        other = allocate(found.target, [*rows, *found.settled.rows[i + 1 :]])
        if holding.bound:
            assert not other.met
        elif other.met:
            assert other.total >= found.settled.allocation.total


def test_origins_are_shares_of_one_line_and_name_the_source(found: Worked) -> None:
    assert found.why is not None
    for holding in found.why.stages:
        shares = [o.share for o in holding.origins]
        assert shares == sorted(shares, reverse=True)
        assert sum(shares) <= 1 + 1e-9
        if holding.line is not None:
            assert sum(shares) > 0.95
    tripler = found.why.stages[0]
    source = next(o for o in tripler.origins if o.stage == "source")
    assert source.line == 2
    assert f"{100 * source.share:.0f} % from line 2 of the source" in tripler.text
    assert f"{100 * source.share:.0f} % from line 2 of the source" in found.why.sentence


def test_the_sentence_names_stages_that_have_most_resonators_and_their_lines(found: Worked) -> None:
    assert found.why is not None
    most = max(found.why.stages, key=lambda s: s.resonators)
    total = sum(s.resonators for s in found.why.stages)
    assert most.stage in found.why.sentence
    assert f"of {total} resonators" in found.why.sentence
    assert str(most.line) in found.why.sentence


def test_a_filter_of_one_resonator_is_tried_without() -> None:
    """One doubler: its line 4 has to fall by what the limit asks, and does not without a filter."""
    one = worked(chain_of(2, limit_dbc=-25.0, design=LADDERS))
    assert one.why is not None
    (holding,) = one.why.stages
    assert holding.resonators == 1
    assert holding.bound
    assert "without a filter" in holding.text
    through = [np.ones((1, one.target.grid.count))]
    assert holding.over_db == pytest.approx(beyond_db(one.target, through).max(), abs=1e-9)


def test_there_is_nothing_to_say_where_limits_are_missed_or_nothing_is_planned() -> None:
    assert worked(chain_of(2, limit_dbc=-160.0, design=LADDERS)).why is None
    assert worked(chain_of(2, limit_dbc=10.0, filter="none")).why is None
