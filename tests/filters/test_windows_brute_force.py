"""Least order and window against brute force, dissipation and drift included.

Independent road: poles from scipy.signal, |H| as the plain product over them, evaluated at the corners and at dense
points of span and drift on a grid of bandwidths and centres. Only the definitions are shared: flatness is max − min of
A over the carrier's Ω from 0 outwards, carrier loss is midband + flatness, a line needs rejection + carrier loss over
its span and drift. A grid point that only the grid accepts is looked at again with many more points in the passband,
since few points miss the top of a ripple.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import pytest
from conftest import is_long
from scipy import signal

from harmonic_planner.filters.windows import Task, WindowResult, centres, rejection_db, solve
from harmonic_planner.physics.prototypes import Prototype

CHUNK = 25
CHUNKS = 40 if is_long() else 6
BANDWIDTHS, CENTRES, DENSE = (60, 61, 33) if is_long() else (30, 31, 33)
ROUNDING_DB = 1e-6


@dataclass(frozen=True)
class Requirement:
    """A random but realistic requirement: the carrier of a ×2 or ×3 stage at 600 MHz among its neighbours."""

    task: Task
    ripple_db: float


def random_requirement(rng: np.random.Generator) -> Requirement:
    times = int(rng.choice([2, 3]))
    span = rng.uniform(0.0, 0.03) * rng.integers(0, 2)
    # the device's own lines, and sometimes the sidebands that residuals at half the input leave
    step = 1.0 if rng.random() < 0.8 else 0.5
    ratio = np.arange(step, 3 * times + 0.5 * step, step) / times
    ratio = ratio[np.abs(ratio - 1.0) > 1e-9]
    sided = rng.random()
    if sided < 0.1:
        ratio = ratio[ratio > 1.0]
    elif sided < 0.2:
        ratio = ratio[ratio < 1.0]
    ratio = ratio[rng.random(ratio.size) < 0.8] if ratio.size > 2 else ratio
    if ratio.size == 0:
        ratio = np.array([(times + 1.0) / times])
    span_low, span_high = 1.0 - span / 2.0, 1.0 + span / 2.0
    return Requirement(
        Task(
            passband_hz=(600e6 * span_low, 600e6 * span_high),
            line_low_hz=600e6 * ratio * span_low,
            line_high_hz=600e6 * ratio * span_high,
            rejection_db=rng.uniform(5.0, rng.uniform(20.0, 85.0), ratio.size),
            flatness_db=float(rng.choice([0.5, 1.0, 2.0, 3.0])),
            loss_db=float(rng.uniform(2.0, 10.0)),
            drift=float(rng.uniform(0.0, 0.02)),
            unloaded_q=float(np.exp(rng.uniform(math.log(30.0), math.log(300.0)))),
            floor=float(np.exp(rng.uniform(math.log(0.01), math.log(0.2)))),
        ),
        ripple_db=float(rng.choice([0.01, 0.1, 0.5])),
    )


@lru_cache
def scipy_prototype(prototype: Prototype) -> tuple[np.ndarray, float]:
    if prototype.family == "butterworth":
        _, poles, gain = signal.buttap(prototype.order)
    else:
        _, poles, gain = signal.cheb1ap(prototype.order, prototype.ripple_db)
    return poles, gain


def attenuation_db(prototype: Prototype, omega: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    """−20 log10|H(jΩ + σ)| from scipy's poles; Ω and σ of one shape, or broadcast."""
    poles, gain = scipy_prototype(prototype)
    s = 1j * omega + sigma
    h = np.full(np.shape(s), gain, dtype=complex)
    for pole in poles:
        h = h / (s - pole)
    return -20.0 * np.log10(np.abs(h))


def detuning(frequency_hz: float, centre_hz: np.ndarray, bandwidth: np.ndarray, shift: float) -> np.ndarray:
    ratio = frequency_hz / (centre_hz * (1.0 + shift))
    return np.abs(ratio - 1.0 / ratio) / bandwidth


def accepted(
    prototype: Prototype,
    task: Task,
    centre_hz: np.ndarray,
    bandwidth: np.ndarray,
    *,
    slack_db: float = 0.0,
    dense: int = DENSE,
) -> np.ndarray:
    """Tell which (centre, bandwidth) points meet the task, by evaluation alone; both of shape (point,)."""
    keep = np.flatnonzero((bandwidth >= task.floor * (1.0 - 1e-12)) & (bandwidth <= 1.0 + 1e-12))
    shifts = (-task.drift, 0.0, task.drift)

    def state() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        return centre_hz[keep], bandwidth[keep], 1.0 / (bandwidth[keep] * task.unloaded_q)

    _, _, sigma = state()
    keep = keep[attenuation_db(prototype, np.zeros(keep.size), sigma) <= task.loss_db + slack_db]
    f0, delta, sigma = state()
    corners = [detuning(f, f0, delta, d) for f in task.passband_hz for d in shifts]
    furthest = np.max(corners, axis=0)
    limit = attenuation_db(prototype, np.zeros(keep.size), sigma) + task.flatness_db + slack_db
    keep = keep[attenuation_db(prototype, furthest, sigma) <= limit]
    for low, high, rejection in zip(task.line_low_hz, task.line_high_hz, task.rejection_db, strict=True):
        f0, delta, sigma = state()
        target = attenuation_db(prototype, np.zeros(keep.size), sigma) + task.flatness_db + rejection - slack_db
        least = np.min(
            [attenuation_db(prototype, detuning(f, f0, delta, d), sigma) for f in (low, high) for d in shifts[::2]],
            axis=0,
        )
        keep = keep[least >= target]
    # dense points, for what the corners have left
    f0, delta, sigma = state()
    furthest = np.max([detuning(f, f0, delta, d) for f in task.passband_hz for d in shifts], axis=0)
    inside = attenuation_db(prototype, furthest[:, np.newaxis] * np.linspace(0.0, 1.0, dense), sigma[:, np.newaxis])
    keep = keep[np.ptp(inside, axis=1) <= task.flatness_db + slack_db]
    f0, delta, sigma = state()
    midband = attenuation_db(prototype, np.zeros(keep.size), sigma)
    good = np.ones(keep.size, dtype=bool)
    for low, high, rejection in zip(task.line_low_hz, task.line_high_hz, task.rejection_db, strict=True):
        for f in np.linspace(low, high, 5):
            for d in shifts:
                level = attenuation_db(prototype, detuning(f, f0, delta, d), sigma)
                good &= level >= midband + task.flatness_db + rejection - slack_db
    result = np.zeros(bandwidth.size, dtype=bool)
    result[keep[good]] = True
    return result


def grid(prototype: Prototype, task: Task, extra: tuple[float, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Bandwidths from floor to 1, and round the carrier every centre that could pass it."""
    bandwidth = np.concatenate([np.geomspace(task.floor, 1.0, BANDWIDTHS), extra])
    edge = max(1.5 * float(prototype.inverse(task.flatness_db)), 1.5)
    reach = np.arcsinh(np.minimum(0.5 * edge * bandwidth, 0.5))
    middle = math.sqrt(task.passband_hz[0] * task.passband_hz[1])
    centre = middle * np.exp(reach[:, np.newaxis] * np.linspace(-1.0, 1.0, CENTRES))
    return centre.ravel(), np.repeat(bandwidth, CENTRES)


def check(requirement: Requirement) -> tuple[int, int]:
    """Compare one requirement; return (windows compared, windows with another interval beside them)."""
    task, compared, split = requirement.task, 0, 0
    for family in ("butterworth", "chebyshev"):
        for order in range(1, 10):
            prototype = Prototype(family, order, requirement.ripple_db)
            result = solve(prototype, task)
            split += check_against_grid(result, task)
            if result.feasible:
                check_answer(result, task)
                compared += 1
                break
            assert result.reason
    return compared, split


def check_against_grid(result: WindowResult, task: Task) -> bool:
    """What the grid accepts lies in our window or, rarely, in a second interval of bandwidths, never the wider one."""
    prototype = result.prototype
    extra = (result.bandwidth_min * 0.999, result.bandwidth_max * 1.001) if result.feasible else ()
    centre, bandwidth = grid(prototype, task, tuple(d for d in extra if d >= task.floor))
    found = accepted(prototype, task, centre, bandwidth)
    if not found.any():
        return False
    assert result.feasible or not found_again(prototype, task, centre, bandwidth, found).any(), (
        f"brute force finds {prototype.name}: {task}, but {result.reason}"
    )
    lo, hi = result.bandwidth_min * (1.0 - 1e-6), result.bandwidth_max * (1.0 + 1e-6)
    outside = found & ((bandwidth < lo) | (bandwidth > hi))
    outside = found_again(prototype, task, centre, bandwidth, outside)
    # centres: at the first and last accepted bandwidth and some between
    values = np.unique(bandwidth[found])
    for delta in values[np.unique(np.linspace(0, values.size - 1, 5).astype(int))]:
        low_hz, high_hz = centres(prototype, task, float(delta)) or (math.inf, -math.inf)
        beyond = (centre < low_hz * (1.0 - 1e-9)) | (centre > high_hz * (1.0 + 1e-9))
        assert not found_again(prototype, task, centre, bandwidth, found & (bandwidth == delta) & beyond).any()
    if outside.any():
        assert prototype.family == "chebyshev"
        assert np.ptp(bandwidth[outside]) <= result.bandwidth_max - result.bandwidth_min
        for delta in (result.bandwidth_min * 0.999, result.bandwidth_max * 1.001):
            assert delta < task.floor or delta > 1.0 or centres(prototype, task, delta) is None
    return bool(outside.any())


def found_again(
    prototype: Prototype, task: Task, centre_hz: np.ndarray, bandwidth: np.ndarray, doubtful: np.ndarray
) -> np.ndarray:
    """Return the doubtful points that the grid's check still accepts with many points in the passband."""
    again = np.zeros_like(doubtful)
    again[doubtful] = accepted(prototype, task, centre_hz[doubtful], bandwidth[doubtful], dense=8001)
    return again


def check_answer(result: WindowResult, task: Task) -> None:
    """Our own window must pass the grid's check: ends, middle, and the ends of the centre interval at each."""
    prototype = result.prototype
    middle = math.sqrt(result.bandwidth_min * result.bandwidth_max)
    for delta in (result.bandwidth_min, middle, result.bandwidth_max):
        allowed = centres(prototype, task, delta)
        assert allowed is not None
        centre = np.array([allowed[0], math.sqrt(allowed[0] * allowed[1]), allowed[1]])
        assert accepted(prototype, task, centre, np.full(3, delta), slack_db=ROUNDING_DB).all()
        got = rejection_db(
            prototype,
            centre_hz=float(centre[1]),
            bandwidth=delta,
            unloaded_q=task.unloaded_q,
            passband_hz=task.passband_hz,
            line_low_hz=task.line_low_hz,
            line_high_hz=task.line_high_hz,
            drift=task.drift,
        )
        assert (got >= task.rejection_db - ROUNDING_DB).all()


@pytest.mark.parametrize("chunk", range(CHUNKS))
def test_least_order_and_window_against_a_grid(chunk):
    """Never an order more than the grid finds, never an answer that the grid's own check refuses."""
    compared, split = 0, 0
    for seed in range(chunk * CHUNK, (chunk + 1) * CHUNK):
        windows, others = check(random_requirement(np.random.default_rng(seed)))
        compared, split = compared + windows, split + others
    assert compared >= CHUNK // 2
    assert split <= 1, f"{split} of {compared} windows have another interval of bandwidths beside them"
