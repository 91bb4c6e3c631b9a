"""The fewest resonators of one chain, settled elsewhere by a separate program.

The setting, which leaves out much of real life so that it can be stated in full: 100 MHz ×2 ×3 ×2 ×2; source lines 2
at −40 dBc and 3 at −45 dBc; push-push with 90°, push-pull with 60°, then push-push twice, 25 dB balance each; span
±1 %, drift ±1 %, lines to 120; amplitudes add; no margin and no allowances. Filters are Butterworth skirts without
dissipation, which enters only as the limit 4.343·Σg/(Δ·100) ≤ 3 dB; attenuation at the worst corner of span and drift
≤ 1 dB; rejection is the worst line over the corners less the worst carrier; centres 0.94, 0.95 … 1.00 of the carrier;
25 bandwidths, geometric from the floor to 60 %.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from fractions import Fraction
from functools import cache

import numpy as np
import pytest
from conftest import is_long

from harmonic_planner.chain import lines
from harmonic_planner.chain.allocate import Allocation, allocate
from harmonic_planner.chain.assemble import Array, ChainArrays, assemble
from harmonic_planner.chain.budget import worst_excess
from harmonic_planner.model import Design, Device, Isolation, Output, Scenario, Source, Stage
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega, cohn_midband_loss_db

FACTORS = (2, 3, 2, 2)
SPAN, DRIFT = 0.01, 0.01
LINES = 120
UNLOADED_Q = 100.0
MOST_ORDER = 9


def _scenario(limit_dbc: float) -> Scenario:
    push_push = Device("push-push", 0.0, half_angle_rad=math.radians(90), balance_db=25.0)
    push_pull = Device("push-pull", 0.0, half_angle_rad=math.radians(60), balance_db=25.0)
    design = Design(isolation=Isolation(math.inf), reflection=0.0, termination_db=0.0)
    return Scenario(
        title="check values",
        source=Source((99e6, 101e6), lines_dbc={Fraction(2): -40.0, Fraction(3): -45.0}),
        output=Output(limit_dbc=limit_dbc),
        design=design,
        stages=tuple(
            Stage(f"stage {i}", n, push_pull if n == 3 else push_push, design=design) for i, n in enumerate(FACTORS)
        ),
    )


def _chain(limit_dbc: float, monkeypatch: pytest.MonkeyPatch) -> ChainArrays:
    monkeypatch.setattr(lines, "LINES_PER_FACTOR", LINES // math.prod(FACTORS))
    chain = assemble(_scenario(limit_dbc), phases="worst-case")
    assert chain.grid.count == LINES
    return chain


@cache
def _candidates(k0: int, floor: float) -> Mapping[int, Array]:
    """Return order -> rejections [dB] of every filter of the setting for the carrier at line `k0`."""
    corners = np.array([(1 + s) / (1 + d) for s in (-SPAN, SPAN) for d in (-DRIFT, DRIFT)])
    numbers = np.arange(1, LINES + 1)
    offered = {}
    for order in range(1, MOST_ORDER + 1):
        prototype = Prototype("butterworth", order)
        rows = []
        for bandwidth in np.geomspace(floor, 0.6, 25):
            if cohn_midband_loss_db(prototype, bandwidth=bandwidth, unloaded_q=UNLOADED_Q) > 3.0:
                continue
            for centre in np.arange(94, 101) / 100 * k0:
                omega = bandpass_omega(numbers * corners[:, None], centre_hz=centre, bandwidth=bandwidth)
                attenuation_db = prototype.attenuation_db(omega)
                carrier_db = attenuation_db[:, k0 - 1].max()
                if carrier_db <= 1.0:
                    row = attenuation_db.min(axis=0) - carrier_db
                    row[k0 - 1] = 0.0
                    rows.append(row)
        if rows:
            offered[order] = np.array(rows)
    return offered


def _allocated(
    floor: float, limit_dbc: float, monkeypatch: pytest.MonkeyPatch
) -> tuple[ChainArrays, list[Mapping[int, Array]], Allocation]:
    chain = _chain(limit_dbc, monkeypatch)
    candidates = [_candidates(s.carrier + 1, floor) for s in chain.stages]
    return chain, candidates, allocate(chain, candidates)


TOTALS = {
    # independent: floor of the bandwidths, limit [dBc] -> resonators of all four stages
    (0.05, -60.0): 7,
    (0.05, -70.0): 8,
    (0.10, -70.0): 9,
    (0.15, -60.0): 10,
    (0.15, -70.0): 12,
    (0.20, -60.0): 12,
    (0.20, -70.0): 15,
}
SAMPLED = ((0.10, -70.0), (0.15, -60.0))


@pytest.mark.parametrize("cell", TOTALS if is_long() else SAMPLED)
def test_the_fewest_resonators_are_those_of_the_separate_program(
    cell: tuple[float, float], monkeypatch: pytest.MonkeyPatch
) -> None:
    chain, candidates, found = _allocated(*cell, monkeypatch)
    assert found.met
    assert found.proven
    assert found.total == found.lower_bound == sum(found.orders) == TOTALS[cell]
    assert (worst_excess(chain, found.rejections(candidates)) <= 1.0).all()


def test_twenty_log_n_with_equal_shares_takes_nearly_twice_as_many(monkeypatch: pytest.MonkeyPatch) -> None:
    """Independent: 16 resonators at 10 %, −70 dBc, where the joint choice takes 9.

    The rule: what a device makes beside the wanted line has to fall to the limit, less 20 log10 of the factor that
    follows, less an equal share for each of the four stages (12 dB).
    """
    chain, candidates, found = _allocated(0.10, -70.0, monkeypatch)
    total = 0
    for i, (stage, offered) in enumerate(zip(chain.stages, candidates, strict=True)):
        made = stage.device > 0
        needed_db = 20 * np.log10(stage.device[made] * math.prod(FACTORS[i + 1 :]) * len(FACTORS)) + 70.0
        total += min(n for n, rows in offered.items() if (rows[:, made] >= needed_db).all(axis=1).any())
    assert total == 16
    assert found.total == 9
