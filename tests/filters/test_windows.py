"""Windows: closed forms, invariants, reasons; the comparison with brute force has its own module."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from harmonic_planner.filters.windows import (
    Task,
    centres,
    rejection_db,
    solve,
)
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega


def task(**changes) -> Task:
    """Carrier 594–606 MHz, the neighbours of a doubler, and what a test changes."""
    values = {
        "passband_hz": (594e6, 606e6),
        "line_low_hz": np.array([297e6, 891e6]),
        "line_high_hz": np.array([303e6, 909e6]),
        "rejection_db": np.array([45.0, 40.0]),
        "flatness_db": 1.0,
        "loss_db": 6.0,
        "drift": 0.01,
        "unloaded_q": 100.0,
        "floor": 0.05,
    }
    return Task(**{**values, **changes})


prototypes = st.one_of(
    st.builds(Prototype, st.just("butterworth"), st.integers(1, 9)),
    st.builds(Prototype, st.just("chebyshev"), st.integers(1, 9), st.sampled_from([0.01, 0.1, 0.5])),
)


@st.composite
def tasks(draw) -> Task:
    """A carrier with neighbours at the harmonics of half or a third of it; some of them absent."""
    times = draw(st.sampled_from([2, 3]))
    ratio = np.array([k / times for k in range(1, 3 * times) if k != times])
    ratio = ratio[np.array(draw(st.lists(st.booleans(), min_size=ratio.size, max_size=ratio.size)))]
    assume(ratio.size)
    span = draw(st.floats(0.0, 0.015))
    return Task(
        passband_hz=(1e9 * (1.0 - span), 1e9 * (1.0 + span)),
        line_low_hz=1e9 * ratio * (1.0 - span),
        line_high_hz=1e9 * ratio * (1.0 + span),
        rejection_db=np.array([draw(st.floats(3.0, 70.0)) for _ in ratio]),
        flatness_db=draw(st.floats(0.6, 3.0)),
        loss_db=draw(st.floats(2.0, 10.0)),
        drift=draw(st.floats(0.0, 0.02)),
        unloaded_q=draw(st.one_of(st.floats(30.0, 300.0), st.just(math.inf))),
        floor=draw(st.floats(0.01, 0.2)),
    )


def achieved(prototype: Prototype, work: Task, centre_hz: float, bandwidth: float) -> np.ndarray:
    return rejection_db(
        prototype,
        centre_hz=centre_hz,
        bandwidth=bandwidth,
        unloaded_q=work.unloaded_q,
        passband_hz=work.passband_hz,
        line_low_hz=work.line_low_hz,
        line_high_hz=work.line_high_hz,
        drift=work.drift,
    )


# ------------------------------------------------------------------------------- closed forms without dissipation


def edges(work: Task) -> tuple[float, float, float, float]:
    """a, b, s_l, s_u of a task with one line on either side, each written as the worst over both ends of the drift."""
    corners = [1.0 - work.drift, 1.0 + work.drift]
    (p1, p2), lower, upper = work.passband_hz, float(work.line_high_hz[0]), float(work.line_low_hz[1])
    return (
        min(math.log(p1 / c) for c in corners),
        max(math.log(p2 / c) for c in corners),
        max(math.log(lower / c) for c in corners),
        min(math.log(upper / c) for c in corners),
    )


@settings(max_examples=80, deadline=None)
@given(
    prototype=prototypes,
    lower_db=st.floats(1.0, 80.0),
    upper_db=st.floats(1.0, 80.0),
    flatness_db=st.floats(0.55, 3.0),
    drift=st.floats(0.0, 0.03),
    span=st.floats(1e-3, 0.03),
)
def test_without_dissipation_the_window_is_the_closed_form(prototype, lower_db, upper_db, flatness_db, drift, span):
    """Independent: each pair of conditions on t solved for Δ by itself (hyperbolic identities), against the scan.

    Passband edges: Δ ≥ 2 sinh((b−a)/2)/w_p. A lower with an upper line, E = s_u − s_l:
    Δ ≤ 2 sinh E/√(w_l² + w_u² + 2 w_l w_u cosh E). An edge with the line on that side, e^E < w_j/w_p:
    Δ ≤ 2 sinh E/√(w_j² + w_p² − 2 w_j w_p cosh E); otherwise no bound.
    """
    work = task(
        passband_hz=(600e6 * (1.0 - span), 600e6 * (1.0 + span)),
        rejection_db=np.array([lower_db, upper_db]),
        flatness_db=flatness_db,
        drift=drift,
        unloaded_q=math.inf,
        floor=0.0,
        cap=1.0,
    )
    a, b, s_l, s_u = edges(work)
    midband_db = float(prototype.midband_loss_db(0.0))
    w_p = float(prototype.inverse(flatness_db))
    w_l, w_u = (float(prototype.inverse(r + midband_db + flatness_db)) for r in (lower_db, upper_db))
    narrowest = 2.0 * math.sinh((b - a) / 2.0) / w_p
    bounds = [1.0]
    e = s_u - s_l
    bounds.append(2.0 * math.sinh(e) / math.sqrt(w_l**2 + w_u**2 + 2.0 * w_l * w_u * math.cosh(e)))
    for e, w_j in ((a - s_l, w_l), (s_u - b, w_u)):
        if math.exp(e) < w_j / w_p:
            bounds.append(2.0 * math.sinh(e) / math.sqrt(w_j**2 + w_p**2 - 2.0 * w_j * w_p * math.cosh(e)))
    widest = min(bounds)
    assume(abs(widest / narrowest - 1.0) > 1e-6)
    result = solve(prototype, work)
    assert result.feasible == (narrowest <= widest)
    if result.feasible:
        assert result.bandwidth_min == pytest.approx(max(narrowest, 1e-4), rel=3e-7)
        assert result.bandwidth_max == pytest.approx(widest, rel=3e-7)


# ------------------------------------------------------------------------------------------------- invariants


@settings(max_examples=50, deadline=None)
@given(prototype=prototypes, work=tasks())
def test_the_answer_passes_a_direct_check(prototype, work):
    """A at dense points of span and drift, at both ends of the window."""
    result = solve(prototype, work)
    assume(result.feasible)
    for delta, interval in (
        (result.bandwidth_min, result.centres_min_hz),
        (result.bandwidth_max, result.centres_max_hz),
    ):
        assert work.floor <= delta <= work.cap
        sigma = 1.0 / (delta * work.unloaded_q)
        midband = float(prototype.midband_loss_db(sigma))
        assert midband <= work.loss_db + 1e-8
        for centre in interval:
            moved = centre * (1.0 + work.drift * np.linspace(-1.0, 1.0, 5))[:, np.newaxis]
            carrier = np.linspace(*work.passband_hz, 41)
            ratio = carrier / moved
            furthest = float(np.max(np.abs(ratio - 1.0 / ratio))) / delta
            band = prototype.attenuation_db(np.linspace(0.0, furthest, 301), sigma)
            assert np.ptp(band) <= work.flatness_db + 1e-6
            for low, high, rejection in zip(work.line_low_hz, work.line_high_hz, work.rejection_db, strict=True):
                ratio = np.linspace(low, high, 21) / moved
                level = prototype.attenuation_db(np.abs(ratio - 1.0 / ratio) / delta, sigma)
                assert level.min() >= rejection + midband + work.flatness_db - 1e-6
            assert (achieved(prototype, work, centre, delta) >= work.rejection_db - 1e-6).all()


@settings(max_examples=50, deadline=None)
@given(prototype=prototypes, work=tasks(), more=st.floats(0.1, 20.0), which=st.integers(0, 7))
def test_tighter_rejection_never_widens_the_window(prototype, work, more, which):
    before = solve(prototype, work)
    tighter = work.rejection_db.copy()
    tighter[which % tighter.size] += more
    after = solve(prototype, replace(work, rejection_db=tighter))
    if not before.feasible:
        assert not after.feasible
    elif after.feasible:
        assert after.bandwidth_max - after.bandwidth_min <= (before.bandwidth_max - before.bandwidth_min) * (1.0 + 1e-6)
        assert after.bandwidth_max <= before.bandwidth_max * (1.0 + 1e-6)


@settings(max_examples=30, deadline=None)
@given(prototype=prototypes, work=tasks(), factor=st.floats(1e-3, 50.0))
def test_scaling_all_frequencies_scales_the_centre_and_leaves_the_bandwidth(prototype, work, factor):
    lo, hi = work.passband_hz
    scaled = replace(
        work,
        passband_hz=(lo * factor, hi * factor),
        line_low_hz=work.line_low_hz * factor,
        line_high_hz=work.line_high_hz * factor,
    )
    before, after = solve(prototype, work), solve(prototype, scaled)
    assert before.feasible == after.feasible
    if before.feasible:
        assert after.bandwidth_min == pytest.approx(before.bandwidth_min, rel=1e-6)
        assert after.bandwidth_max == pytest.approx(before.bandwidth_max, rel=1e-6)
        assert after.centres_max_hz == pytest.approx([f * factor for f in before.centres_max_hz], rel=1e-6)


@settings(max_examples=30, deadline=None)
@given(prototype=prototypes, work=tasks(), seed=st.integers(0, 2**32 - 1))
def test_the_order_of_the_lines_and_lines_that_are_easier_change_nothing(prototype, work, seed):
    """A line further out that needs less than a nearer one is covered by it."""
    rng = np.random.default_rng(seed)
    shuffle = rng.permutation(work.rejection_db.size)
    low, high, need = (array[shuffle] for array in (work.line_low_hz, work.line_high_hz, work.rejection_db))
    above = low > work.passband_hz[1]
    other = replace(
        work,
        line_low_hz=np.concatenate([low, low[above] * 1.5]),
        line_high_hz=np.concatenate([high, high[above] * 1.5]),
        rejection_db=np.concatenate([need, need[above] * 0.9]),
    )
    assert solve(prototype, other) == replace(solve(prototype, work), reason=solve(prototype, other).reason)


@settings(max_examples=30, deadline=None)
@given(prototype=prototypes, work=tasks(), share=st.floats(0.0, 1.0))
def test_centres_inside_the_window_exist_and_beyond_its_ends_do_not(prototype, work, share):
    result = solve(prototype, work)
    assume(result.feasible)
    inside = result.bandwidth_min ** (1.0 - share) * result.bandwidth_max**share
    allowed = centres(prototype, work, inside)
    assert allowed is not None
    assert allowed[0] <= allowed[1]
    for beyond in (result.bandwidth_min * 0.9999, result.bandwidth_max * 1.0001):
        assert centres(prototype, work, beyond) is None


@settings(max_examples=30, deadline=None)
@given(
    prototype=prototypes,
    centre=st.floats(0.9, 1.1),
    bandwidth=st.floats(0.03, 0.6),
    unloaded_q=st.one_of(st.floats(20.0, 300.0), st.just(math.inf)),
    drift=st.floats(0.0, 0.03),
    low=st.floats(0.3, 3.0),
    width=st.floats(1.0, 1.3),
)
def test_rejection_is_the_least_over_line_and_drift_minus_the_carrier_most(
    prototype, centre, bandwidth, unloaded_q, drift, low, width
):
    """Independent: dense sampling, also of lines that lie across the passband, where a ripple turns inside the span."""
    got = rejection_db(
        prototype,
        centre_hz=centre,
        bandwidth=bandwidth,
        unloaded_q=unloaded_q,
        passband_hz=(0.98, 1.02),
        line_low_hz=np.array([low]),
        line_high_hz=np.array([low * width]),
        drift=drift,
    )

    def level(first: float, last: float) -> np.ndarray:
        frequency = np.geomspace(first / (1.0 + drift), last / (1.0 - drift), 4001)
        omega = bandpass_omega(frequency, centre_hz=centre, bandwidth=bandwidth)
        return prototype.attenuation_db(omega, 1.0 / (bandwidth * unloaded_q))

    expected = level(low, low * width).min() - level(0.98, 1.02).max()
    # sampling finds the least too high and the most too low
    assert got[0] <= expected + 1e-9
    assert got[0] == pytest.approx(expected, abs=0.02 + 1e-3 * abs(expected))


@settings(max_examples=30, deadline=None)
@given(prototype=prototypes, work=tasks())
def test_a_reason_with_numbers_never_contradicts_itself(prototype, work):
    """What a line `gets` in the reason is below what it `needs`; where there is a window there is no reason."""
    result = solve(prototype, work)
    assert (result.reason == "") == result.feasible
    for part in result.reason.split(" needs ")[1:]:
        need, got = part.split(" dB and gets ")
        assert float(got.split(" dB")[0]) <= float(need) + 0.05
