"""Linear against exact on random chains, at the same phases: where the linear figure may be trusted, and how far.

500 chains of two to four multipliers (seeds 0–499), 16 draws each; HARMONIC_PLANNER_LONG=1 runs them all, else 60 at
each level. Measured on all of them, first order alone (*apart* chains), largest of the draws against largest of the
draws, lines within 20 dB of the own side at every multiplier:

==================================================  ====================  ====================
lines                                               sum −30 dBc           sum −15 dBc
==================================================  ====================  ====================
own and image side at every multiplier              0.054 dB at most      1 chain beyond 1 dB
within one input carrier of the wanted line         2 chains beyond 0.1   2 chains beyond 1 dB
up to twice the wanted line                         4 chains, to 0.51 dB  15 chains, to 2.9 dB
all, however far                                    29 chains, to 2.9 dB  127 chains, to 12 dB
==================================================  ====================  ====================

So 0.1 dB and 1 dB hold for the sidebands that no later filter reaches, not for every line of the same level: path m
moves by (m·r/sin θ)²/8 (see `conversion`), more with every step away from the wanted line. Where lines of first and
second order fall on each other, as harmonics of a source do in every real chain, the linear sum is passed by what the
second-order bound allows; `test_nothing_passes_the_linear_sum_and_the_second_order_bound` holds on all lines.
"""

from __future__ import annotations

import numpy as np
import pytest
from conftest import is_long
from random_chains import Run, random_runs

from harmonic_planner.chain.second_order import second_order_at_output
from harmonic_planner.physics.conversion import am_slope, second_order_db, second_order_near_db

CHAINS = 500 if is_long() else 60
EACH = 10
DRAWS = 16
FOURTH_ORDER_DB = 0.1
TOLERANCE_DB = {-30.0: 0.1, -15.0: 1.0}
EXCEPTIONS_DB = {(-15.0, 466): 1.45}
"""Discrepancy (regression, unconfirmed): 1.44 dB on an image 15 dB under its own side, moved by the
third order of the latter."""


def trigger_bound(run: Run) -> float:
    """Return what all stages together may bring to the output by second order near their carriers."""
    devices = [(s.device, s.times) for s in run.scenario.stages if s.device is not None]
    found = second_order_at_output(
        run.chain,
        run.linear,
        made_db=[second_order_near_db(d, n) for d, n in devices],
        growth_db=[float(20 * np.log10((n + abs(am_slope(d, n))) / 2)) for d, n in devices],
    )
    return float(sum(10 ** (x.level_dbc / 20) for x in found))


def carried_bound(run: Run, *, paths: int) -> np.ndarray:
    """Return what second order may add to every line at the output, carried linearly from stage to stage.

    `paths` of one pair of residuals may meet in a line. What residuals put onto a carrier changes every level relative
    to it.
    """
    bound = np.zeros(run.chain.grid.count)
    for s, arrays, comb, passed in zip(run.scenario.stages, run.chain.stages, run.linear, run.filters, strict=True):
        assert s.device is not None
        made = 10 ** (second_order_db(s.device, s.times) / 20) * (comb.entering.sum() + bound.sum()) ** 2
        spread = (comb.entering + bound) @ arrays.spread + 2 * made
        bound = passed * (paths * made + arrays.conversion @ bound) + comb.leaving * spread
        bound /= max(1 - spread, 0.05)
        bound[arrays.carrier] = 0.0
    return bound


@pytest.mark.parametrize("start", range(0, CHAINS, EACH))
def test_own_and_image_side_follow_the_linear_figure(start: int) -> None:
    """independent: 0.1 dB for residual sums of −30 dBc, 1 dB for −15 dBc; lines of second order within 2s + c.

    Lines ±2p tell second order apart (see `random_chains`): each pair of residuals reaches them by one path. They also
    stay under what triggers the exact run: the sum over the stages of 2s + c near the carrier, carried on by the own
    side of what follows.
    """
    compared = 0
    for seed in range(start, start + EACH):
        for level_db, run in zip(
            TOLERANCE_DB, random_runs("apart", seed, tuple(TOLERANCE_DB), draws=DRAWS), strict=True
        ):
            sides = run.compared(reach=0.5)
            compared += np.count_nonzero(sides)
            allowed_db = EXCEPTIONS_DB.get((level_db, seed), TOLERANCE_DB[level_db])
            assert np.max(np.abs(run.off_db[sides]), initial=0.0) < allowed_db, (seed, level_db)

            second = (run.order == 2) & (run.linear[-1].leaving == 0)
            highest = run.exact.max(axis=0)[second]
            bound = carried_bound(run, paths=1)[second]
            assert np.all(highest <= bound * 10 ** (FOURTH_ORDER_DB / 20) + 1e-9), (seed, level_db)
            assert 0 < highest.max() <= trigger_bound(run), (seed, level_db)
    assert compared >= EACH


@pytest.mark.parametrize("start", range(0, CHAINS, 2 * EACH))
def test_nothing_passes_the_linear_sum_and_the_second_order_bound(start: int) -> None:
    """independent: plain chains, every line: up to four paths of one pair of residuals meet, own lines included."""
    for seed in range(start, start + EACH):
        for run in random_runs("plain", seed, (-40.0, -30.0, -15.0), draws=DRAWS):
            allowed = (run.linear[-1].leaving + carried_bound(run, paths=4)) * 10 ** (FOURTH_ORDER_DB / 20)
            assert np.all(run.exact.max(axis=0) <= allowed + 1e-9), seed


def test_weak_chains_come_near_their_linear_sums() -> None:
    """regression, unconfirmed: largest of 200 draws under the sum of amplitudes, strong lines beside the carrier.

    Sums of −60 dBc, 12 plain chains: 0.10 dB below in the median, 1.5 dB at most, never above by more than 0.05 dB. In
    60 chains the same lines are (5 %, median, 95 %, highest): −1.1, −0.1, 0.0, 0.0 dB over the sum; with residuals of
    −40 dBc −1.4, −0.3, 0.0, 0.1 dB; of −30 dBc −1.9, −0.4, 0.1, 0.4 dB; of −15 dBc −3.8, −0.8, 2.0, 3.9 dB.
    """
    below_db = []
    for seed in range(12):
        (run,) = random_runs("plain", seed, (-60.0,), draws=200)
        last, linear = run.chain.stages[-1], run.linear[-1].leaving
        carrier_in = run.chain.stages[-2].carrier + 1
        offset = np.abs(np.arange(linear.size) - last.carrier) / carrier_in
        near = (offset <= 1) & ~last.own & (linear > 0)
        strong = near & (linear >= np.max(linear[near]) / 10)
        below_db.append(20 * np.log10(linear[strong] / run.exact.max(axis=0)[strong]))
    every = np.concatenate(below_db)
    assert every.min() > -0.05
    assert np.median(every) < 0.15
    assert every.max() < 1.6
