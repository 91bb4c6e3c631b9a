"""How long the proof of an allocation takes beside an exact run of the chain it chose; only results are asserted.

``python -m pytest -n 0 -s tests/benchmarks`` shows the times; HARMONIC_PLANNER_LONG=1 takes 200 draws at 11 points of
the span instead of 10 draws at 3, and both limits. Times are of the processor, in one process.
"""

from __future__ import annotations

import itertools
import sys
import time
from fractions import Fraction

import numpy as np
import pytest
from conftest import is_long

from harmonic_planner.chain.allocate import allocate
from harmonic_planner.chain.assemble import Array, ChainArrays, assemble
from harmonic_planner.chain.budget import with_margin
from harmonic_planner.chain.exact import exact
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega

from builders import chain_of

FACTORS = (2, 2, 2, 2, 2, 3)
BANDWIDTHS = (0.20, 0.26, 0.34)
CENTRES = (0.985, 1.0)
SPAN = 0.002
DRAWS, POINTS = (200, 11) if is_long() else (10, 3)


def attenuation_db(
    chain: ChainArrays, carrier: int, order: int, bandwidth: float, centre: float, tuning: float
) -> Array:
    omega = bandpass_omega(
        chain.grid.numbers * tuning, centre_hz=float(chain.grid.line(carrier)) * centre, bandwidth=bandwidth
    )
    return Prototype("butterworth", order).attenuation_db(omega)


def passed(chain: ChainArrays, carrier: int, order: int, bandwidth: float, centre: float) -> Array:
    """Return amplitudes relative to the carrier, (points, lines), over a floor 90 dB down."""
    rows = []
    for tuning in np.linspace(1 - SPAN, 1 + SPAN, POINTS):
        loss_db = attenuation_db(chain, carrier, order, bandwidth, centre, float(tuning))
        row = 10 ** (-(loss_db - loss_db[carrier]) / 20) + 10 ** (-90 / 20)
        row[carrier] = 1.0
        rows.append(row)
    return np.array(rows)


@pytest.mark.parametrize("limit_dbc", (-60.0, -70.0) if is_long() else (-60.0,))
def test_a_proof_beside_an_exact_run(limit_dbc: float) -> None:
    scenario = chain_of(*FACTORS, lines={Fraction(2): -40.0, Fraction(3): -45.0}, limit_dbc=limit_dbc)
    chain = assemble(scenario, phases="worst-case")
    shapes = list(itertools.product(BANDWIDTHS, CENTRES))
    offered = [[[passed(chain, s.carrier, n, *shape) for shape in shapes] for n in range(1, 10)] for s in chain.stages]
    candidates = [
        {n: -20 * np.log10(np.array([t.max(axis=0) for t in at])) for n, at in enumerate(stage, 1)} for stage in offered
    ]

    start = time.process_time()
    found = allocate(with_margin(chain, [3.0] * len(FACTORS)), candidates)
    proof_s = time.process_time() - start
    assert found.met
    assert found.proven

    chosen = [stage[n - 1][pick] for stage, n, pick in zip(offered, found.orders, found.picks, strict=True)]
    start = time.process_time()
    levels = exact(scenario, chain, chosen, draws=DRAWS, rng=np.random.default_rng(1))
    exact_s = time.process_time() - start
    sys.stdout.write(
        f"\n×96, {limit_dbc:g} dBc: {found.total} resonators proven in {proof_s:.2f} s; exact, {DRAWS} draws × "
        f"{POINTS} points, in {exact_s:.2f} s; ratio {proof_s / exact_s:.2f}\n"
    )
    assert levels.linear_dbc.max() <= limit_dbc - 3.0 + 1e-6
    assert levels.max_dbc.max() <= limit_dbc
