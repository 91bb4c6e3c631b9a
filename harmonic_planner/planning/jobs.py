"""One stage's filter as a job: where its carrier and its unwanted lines are, and what it is built from."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import ChainArrays
from harmonic_planner.chain.leakage import isolation_db, with_leakage
from harmonic_planner.model import Design, Scenario, Stage
from harmonic_planner.parts.kits import Kit, load_kit
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega

Array = NDArray[np.float64]
Attenuation = Callable[[Array], Array]
"""Frequencies [Hz] -> attenuation between the stage's impedances [dB]."""

SPAN_POINTS = 11
_LINE_POINTS = 5
_NEAR = (0.4, 2.2)


@dataclass(frozen=True)
class Job:
    """A filter to choose or to judge.

    Attributes
    ----------
    carrier : int
        Array index of the carrier.
    carrier_hz : (float, float)
        Its span.
    low_hz, high_hz : (lines,) float
        Span of every line of the grid.
    leak_db : (lines,) float
        Isolation past the filter.
    unloaded_q, floor : float
        Of the resonators; least bandwidth that kit and tolerance allow.
    exponent : int
        1 for amplitude sums, 2 for power sums.
    """

    index: int
    stage: Stage
    carrier: int
    carrier_hz: tuple[float, float]
    low_hz: Array
    high_hz: Array
    leak_db: Array
    kits: tuple[Kit, ...]
    unloaded_q: float
    floor: float
    exponent: int

    @property
    def kit(self) -> Kit:
        """The preferred kit."""
        return self.kits[0]

    @property
    def design(self) -> Design:
        """The stage's design keys."""
        return self.stage.design

    @property
    def centre_hz(self) -> float:
        """Middle of the carrier's span."""
        return sum(self.carrier_hz) / 2


@dataclass(frozen=True)
class Action:
    """What a filter does to every line.

    Attributes
    ----------
    carrier_most_db, carrier_least_db : float
        Attenuation of the carrier over span and drift.
    skirt_db : (lines,) float
        Rejection of the circuit alone: A(line, least over span and drift) − A(carrier, most over span and drift).
    rejection_db : (lines,) float
        With what leaks past it.
    """

    carrier_most_db: float
    carrier_least_db: float
    skirt_db: Array
    rejection_db: Array


@dataclass(frozen=True)
class Sample:
    """A filter at points of span and drift together, drift running fastest.

    Attributes
    ----------
    transmission : (points, lines) float
        Relative to the carrier at the same point, leakage included, in the chain's quantity.
    carrier_db : (points,) float
        The carrier's loss.
    """

    transmission: Array
    carrier_db: Array


def make_jobs(scenario: Scenario, chain: ChainArrays) -> tuple[Job, ...]:
    """Return one job a stage, whether it has a filter or not."""
    jobs = []
    for i, (stage, arrays) in enumerate(zip(scenario.stages, chain.stages, strict=True)):
        design = stage.design
        kits = tuple(replace(load_kit(name, scenario.folder), name=name) for name in design.kits)
        carrier_hz = (float(chain.low_hz[arrays.carrier]), float(chain.high_hz[arrays.carrier]))
        centre_hz = sum(carrier_hz) / 2
        floor = min(k.bandwidth_floor(tuned=design.tuned or k.tuned, drift=design.drift) for k in kits)
        jobs.append(
            Job(
                index=i,
                stage=stage,
                carrier=arrays.carrier,
                carrier_hz=carrier_hz,
                low_hz=chain.low_hz,
                high_hz=chain.high_hz,
                leak_db=isolation_db(design.isolation, chain.high_hz),
                kits=kits,
                unloaded_q=design.unloaded_q or max(k.unloaded_q(centre_hz) for k in kits),
                floor=floor if design.min_bandwidth is None else design.min_bandwidth,
                exponent=chain.exponent,
            )
        )
    return tuple(jobs)


def is_far(job: Job) -> NDArray[np.bool_]:
    """Mark the lines so far from the carrier that a narrower band or more resonators do not help strays, (lines,)."""
    return (job.high_hz < _NEAR[0] * job.centre_hz) | (job.low_hz > _NEAR[1] * job.centre_hz)


def act(job: Job, attenuation: Attenuation) -> Action:
    """Return what a filter with this attenuation does to every line, the worst over span and drift.

    The filter's centre moves by ±drift as a whole, so the response is read at f/(1 ± drift).
    """
    up, down = 1 + job.design.drift, 1 - job.design.drift
    carrier = np.linspace(job.carrier_hz[0] / up, job.carrier_hz[1] / down, 4 * SPAN_POINTS + 1)
    steps = np.linspace(0.0, 1.0, _LINE_POINTS)
    low, high = job.low_hz / up, job.high_hz / down
    lines = low[:, None] + (high - low)[:, None] * steps
    both = attenuation(np.concatenate([carrier, lines.ravel()]))
    on_carrier = both[: carrier.size]
    least = both[carrier.size :].reshape(lines.shape).min(axis=1)
    most = float(on_carrier.max())
    skirt = least - most
    skirt[job.carrier] = 0.0
    rejection = with_leakage(skirt, most, job.leak_db, exponent=job.exponent)
    rejection[job.carrier] = 0.0
    return Action(most, float(on_carrier.min()), skirt, rejection)


def sample(job: Job, attenuation: Attenuation | None) -> Sample:
    """Return what a filter does at each point of span and drift, with what leaks past it.

    Parameters
    ----------
    job : Job
    attenuation : callable or None
        None for a through connection.
    """
    numbers = np.linspace(*job.carrier_hz, SPAN_POINTS) / job.centre_hz
    moved = (numbers[:, None] / (1 + job.design.drift * np.array([-1.0, 0.0, 1.0]))).ravel()
    if attenuation is None:
        return Sample(np.ones((moved.size, job.low_hz.size)), np.zeros(moved.size))
    middle_hz = (job.low_hz + job.high_hz) / 2
    loss_db = attenuation((moved[:, None] * middle_hz).ravel()).reshape(moved.size, -1)
    carrier_db = loss_db[:, job.carrier]
    with_leak = with_leakage(loss_db - carrier_db[:, None], carrier_db[:, None], job.leak_db, exponent=job.exponent)
    transmission = 10 ** (-with_leak * job.exponent / 20)
    transmission[:, job.carrier] = 1.0
    return Sample(transmission, carrier_db)


def no_filter(job: Job) -> Action:
    """Return the action of a through connection."""
    nothing = np.zeros(job.low_hz.size)
    return Action(0.0, 0.0, nothing, nothing)


def prototype_attenuation(
    prototype: Prototype, *, centre_hz: float, bandwidth: float, unloaded_q: float = math.inf
) -> Attenuation:
    """Return the attenuation of the prototype's ideal bandpass, equal resonator Q included."""
    sigma = 1 / (bandwidth * unloaded_q)

    def attenuation(frequency_hz: Array) -> Array:
        omega = bandpass_omega(frequency_hz, centre_hz=centre_hz, bandwidth=bandwidth)
        return prototype.attenuation_db(omega, sigma)

    return attenuation
