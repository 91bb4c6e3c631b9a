"""Prototypes: identities, limits, and a second road to every number."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.model import PlannerError
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega, cohn_midband_loss_db

RIPPLES_DB = (0.01, 0.1, 0.2, 0.5)
ALL = [Prototype("butterworth", n) for n in range(1, 13)] + [
    Prototype("chebyshev", n, ripple) for n in range(1, 13) for ripple in RIPPLES_DB
]
PROTOTYPES = st.one_of(
    st.builds(Prototype, st.just("butterworth"), st.integers(1, 12)),
    st.builds(Prototype, st.just("chebyshev"), st.integers(1, 12), st.floats(1e-3, 3.0)),
)


def ladder_db(prototype: Prototype, omega: np.ndarray, sigma: float) -> np.ndarray:
    """Independent road: insertion loss of the g-value ladder by its chain matrix, elements lossy by s = jΩ + σ.

    Relative to the loss without dissipation at the frequency of perfect transfer: the load g_(n+1) takes at most
    4·g0·g_(n+1)/(1 + g_(n+1))² of the available power at zero frequency, and all of it where the response touches 0 dB.
    """
    g = prototype.g_values()
    s = 1j * omega + sigma
    a, b, c, d = np.ones_like(s), np.zeros_like(s), np.zeros_like(s), np.ones_like(s)
    for k, value in enumerate(g[1:-1]):
        if k % 2 == 0:  # a shunt capacitor
            a, c = a + b * s * value, c + d * s * value
        else:  # a series inductor
            b, d = b + a * s * value, d + c * s * value
    # behind a last shunt element (odd order) g_(n+1) is the load's resistance, behind a series one its conductance
    load = g[-1] if prototype.order % 2 else 1.0 / g[-1]
    voltage = 1.0 / (a + b / load + c + d / load)
    return -10.0 * np.log10(4.0 * np.abs(voltage) ** 2 / load)


@pytest.mark.parametrize("prototype", ALL, ids=lambda p: p.name)
@pytest.mark.parametrize("sigma", [0.0, 0.003, 0.05, 0.4])
def test_attenuation_equals_the_lossy_ladder_of_its_g_values(prototype, sigma):
    """Independent: chain-matrix solution of the ladder; g-values, poles and scale factor agree with each other."""
    omega = np.array([0.0, 0.1, 0.5, 0.9, 1.0, 1.1, 2.0, 7.0])
    assert prototype.attenuation_db(omega, sigma) == pytest.approx(ladder_db(prototype, omega, sigma), abs=2e-8)


@pytest.mark.parametrize("prototype", ALL, ids=lambda p: p.name)
def test_the_closed_form_and_the_poles_agree_without_dissipation(prototype):
    """Independent: |H| as a product over the poles, against 1 + Ω^2n and 1 + ε²T_n²."""
    omega = np.linspace(0.0, 4.0, 201)
    s = 1j * omega[:, np.newaxis]
    distance = np.abs(s - prototype.poles()).prod(axis=1) * math.exp(prototype.log_scale)
    assert prototype.attenuation_db(omega) == pytest.approx(20.0 * np.log10(distance), abs=1e-10)


def test_poles_lie_in_the_left_half_plane_in_conjugate_pairs():
    for prototype in ALL:
        poles = prototype.poles()
        assert (poles.real < 0.0).all()
        assert poles == pytest.approx(poles[::-1].conj(), abs=1e-14)


def test_band_edge_is_3_db_for_butterworth_and_the_ripple_for_chebyshev():
    for prototype in ALL:
        edge = 10.0 * math.log10(2.0) if prototype.family == "butterworth" else prototype.ripple_db
        assert float(prototype.attenuation_db(1.0)) == pytest.approx(edge, rel=1e-12)


def test_even_chebyshev_starts_at_its_ripple_and_odd_at_zero():
    for prototype in ALL:
        even = prototype.family == "chebyshev" and prototype.order % 2 == 0
        assert float(prototype.attenuation_db(0.0)) == pytest.approx(prototype.ripple_db if even else 0.0, abs=1e-12)


def test_a_tiny_ripple_keeps_its_digits():
    prototype = Prototype("chebyshev", 4, 1e-9)
    assert float(prototype.attenuation_db(1.0)) == pytest.approx(1e-9, rel=1e-9)
    assert float(prototype.attenuation_db(prototype.inverse(40.0))) == pytest.approx(40.0, rel=1e-9)


@given(PROTOTYPES, st.floats(1e-6, 150.0))
def test_inverse_undoes_the_attenuation(prototype, level_db):
    assert float(prototype.attenuation_db(prototype.inverse(level_db))) == pytest.approx(level_db, rel=1e-8, abs=1e-12)


@given(PROTOTYPES, st.floats(1e-3, 100.0))
def test_beyond_the_inverse_the_attenuation_stays_above(prototype, level_db):
    omega = float(prototype.inverse(level_db)) * np.linspace(1.0, 20.0, 400)
    assert (prototype.attenuation_db(omega) >= level_db * (1.0 - 1e-9)).all()


@given(PROTOTYPES, st.floats(1e-6, 1.0), st.floats(1.001, 3.0))
def test_more_dissipation_loses_more_everywhere(prototype, sigma, factor):
    omega = np.linspace(0.0, 3.0, 61)
    assert (prototype.attenuation_db(omega, sigma * factor) > prototype.attenuation_db(omega, sigma)).all()


@given(PROTOTYPES)
def test_dissipation_that_vanishes_leaves_the_lossless_response(prototype):
    omega = np.linspace(0.0, 3.0, 31)
    lossless = prototype.attenuation_db(omega)
    assert prototype.attenuation_db(omega, np.array([[0.0], [1e-14]])) == pytest.approx(
        np.stack([lossless, lossless]), abs=1e-10
    )


def test_attenuation_broadcasts_frequency_against_dissipation():
    prototype = Prototype("chebyshev", 3, 0.1)
    table = prototype.attenuation_db(np.array([[0.5], [2.0]]), np.array([0.0, 0.1, 0.2]))
    assert table.shape == (2, 3)
    assert table[1, 2] == pytest.approx(float(prototype.attenuation_db(2.0, 0.2)))
    assert prototype.attenuation_db(0.5, np.zeros(3)).shape == (3,)


@given(st.floats(1e6, 1e10), st.floats(0.005, 0.9), st.floats(1.001, 5.0))
def test_mapping_has_geometric_symmetry_and_unit_edges(centre_hz, bandwidth, ratio):
    upper, lower = (
        float(bandpass_omega(f, centre_hz=centre_hz, bandwidth=bandwidth))
        for f in (centre_hz * ratio, centre_hz / ratio)
    )
    assert upper == pytest.approx(lower, rel=1e-9)
    edge = centre_hz * (math.sqrt(1.0 + bandwidth**2 / 4.0) + bandwidth / 2.0)
    assert float(bandpass_omega(edge, centre_hz=centre_hz, bandwidth=bandwidth)) == pytest.approx(1.0, rel=1e-9)
    # the two edges are Δ·f0 apart
    assert edge - centre_hz**2 / edge == pytest.approx(bandwidth * centre_hz, rel=1e-9)


def test_cohn_loss_is_the_slope_of_the_exact_loss():
    for prototype in ALL:
        lossless = float(prototype.midband_loss_db(0.0))
        exact = float(prototype.midband_loss_db(1.0 / (0.1 * 1e7))) - lossless
        cohn = cohn_midband_loss_db(prototype, bandwidth=0.1, unloaded_q=1e7)
        if prototype.g_values()[-1] == 1.0:
            assert exact == pytest.approx(cohn, rel=1e-4)


@pytest.mark.parametrize(
    ("arguments", "named"),
    [
        (("bessel", 3), "family = 'bessel'"),
        (("butterworth", 0), "order = 0"),
        (("chebyshev", 3), "ripple = 0.0 dB"),
        (("chebyshev", 3, -0.1), "ripple = -0.1 dB"),
        (("chebyshev", 3, math.nan), "ripple = nan dB"),
    ],
)
def test_what_is_not_a_prototype_is_refused(arguments, named):
    with pytest.raises(PlannerError, match=named):
        Prototype(*arguments)


def test_butterworth_forgets_a_ripple():
    assert Prototype("butterworth", 3, 0.1) == Prototype("butterworth", 3)
