"""Second methods that a plan is checked by before it is shown."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.chain.budget import with_margin, worst_excess
from harmonic_planner.filters.built_response import nodal_built, sweep_built
from harmonic_planner.filters.response import sweep
from harmonic_planner.filters.topologies import REGISTRY
from harmonic_planner.filters.topologies.base import no_skew
from harmonic_planner.model import Scenario
from harmonic_planner.physics.waveforms import spectrum
from harmonic_planner.planning.built import Built
from harmonic_planner.planning.jobs import Job, prototype_attenuation
from harmonic_planner.planning.one_sided import omega
from harmonic_planner.planning.settle import Settled

_CIRCUIT_DB = 1e-6
_PROTOTYPE_DB = 1e-6
_DEEPEST_DB = 200.0
_IDENTITY = 1e-9
_SUM_DB = 1e-6


@dataclass(frozen=True)
class Check:
    """One comparison: what was compared, and whether the difference is within its bound."""

    passed: bool
    text: str


def run_checks(
    scenario: Scenario, chain: ChainArrays, jobs: Sequence[Job], settled: Settled, margins_db: Sequence[float]
) -> tuple[Check, ...]:
    """Run every check on the filters that were settled on; `chain` has the limits as the user gave them."""
    circuits = [f.built for f in settled.filters]
    needed = settled.needed
    return (
        check_identity(scenario),
        check_circuits(jobs, circuits, needed.required_db),
        check_prototypes(jobs, circuits, needed.required_db),
        check_requirement(with_margin(chain, margins_db), needed.required_db, needed.out_of_reach),
    )


def check_identity(scenario: Scenario) -> Check:
    """Compare G_(N−1) − G_(N+1) with 2·N·F_N, which holds for every memoryless device."""
    worst = 0.0
    for stage in scenario.stages:
        if stage.device is None:
            continue
        n = stage.times
        s = spectrum(stage.device, n, n + 1)
        worst = max(worst, abs(s.G[n - 1] - s.G[n + 1] - 2 * n * s.F[n]) / abs(2 * n * s.F[n]))
    return Check(worst < _IDENTITY, f"conversion identity G(N−1) − G(N+1) = 2·N·F(N): {worst:.1e} off at most")


def check_circuits(jobs: Sequence[Job], filters: Sequence[Built | None], needing: Sequence[Array]) -> Check:
    """Compare the ladder recursion with a nodal solution of every part and stray, at carrier and decisive lines."""
    worst = 0.0
    for job, built, required_db in zip(jobs, filters, needing, strict=True):
        if built is None:
            continue
        frequency_hz = _decisive(job, required_db)
        first = sweep_built(built.circuit, frequency_hz, kit=built.form.kit).attenuation_db
        second = nodal_built(built.circuit, frequency_hz, kit=built.form.kit).attenuation_db
        worst = max(worst, _difference(first, second))
    return Check(
        worst < _CIRCUIT_DB, f"circuits as built, ladder recursion against nodal solution: {worst:.1e} dB off at most"
    )


def check_prototypes(jobs: Sequence[Job], filters: Sequence[Built | None], needing: Sequence[Array]) -> Check:
    """Compare the lossless ideal ladders with the prototypes' closed form at the decisive lines."""
    worst = 0.0
    for job, built, required_db in zip(jobs, filters, needing, strict=True):
        if built is None or REGISTRY[built.topology].skew_db is not no_skew:
            continue
        frequency_hz = _decisive(job, required_db)
        ladder_db = sweep(built.ideal, frequency_hz).attenuation_db
        worst = max(worst, _difference(ladder_db, _closed_form_db(built, frequency_hz)))
    return Check(worst < _PROTOTYPE_DB, f"lossless ladders against the prototypes: {worst:.1e} dB off at most")


def _closed_form_db(built: Built, frequency_hz: Array) -> Array:
    """Return the attenuation of a filter's lossless prototype, carried to its band or its cut-off [dB]."""
    if built.one_sided:
        return built.prototype.attenuation_db(omega(REGISTRY[built.topology], frequency_hz, built.centre_hz))
    band = prototype_attenuation(built.prototype, centre_hz=built.centre_hz, bandwidth=built.bandwidth)
    return band(frequency_hz)


def check_requirement(chain: ChainArrays, required_db: Sequence[Array], out_of_reach: NDArray[np.bool_]) -> Check:
    """Run the chain with exactly the required rejections: every limit within reach must hold, margin included."""
    over = float(np.max(np.where(out_of_reach, 0.0, worst_excess(chain, required_db)), initial=0.0))
    over_db = float(chain.to_db(over)) if over > 0 else -np.inf
    return Check(over_db <= _SUM_DB, f"forward run with exactly the required rejections: {over_db:+.3f} dB over")


def _decisive(job: Job, required_db: Array) -> Array:
    """Return the carrier's edges and the lines that need rejection [Hz]."""
    needing = required_db > 0
    return np.concatenate([job.carrier_hz, job.low_hz[needing], job.high_hz[needing]])


def _difference(first_db: Array, second_db: Array) -> float:
    """Return the largest difference, down to where double precision still carries it."""
    seen = np.minimum(first_db, second_db) < _DEEPEST_DB
    return float(np.max(np.abs(first_db - second_db)[seen], initial=0.0))
