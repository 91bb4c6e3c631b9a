"""Passband edge and rejection points of lossy prototypes, against dense sampling of the attenuation."""

from __future__ import annotations

import numpy as np
import pytest

from harmonic_planner.filters.passband import edge_and_rejection_points, lossy_response, turning_points
from harmonic_planner.physics.prototypes import DB_PER_LN, Prototype

PROTOTYPES = tuple(
    [Prototype("butterworth", n) for n in range(1, 10)]
    + [Prototype("chebyshev", n, ripple) for n in range(1, 10) for ripple in (0.01, 0.1, 0.5)]
)
SIGMA = np.concatenate([[0.0], np.geomspace(1e-4, 3.0, 25)])
REJECTION_DB = np.array([0.3, 3.0, 20.0, 60.0])


@pytest.fixture(scope="module", params=[0.5, 1.0, 3.0])
def solved(request):
    """Flatness and what was found for it; 0.5 dB equals the largest ripple."""
    table = np.tile(SIGMA, (len(PROTOTYPES), 1))
    return request.param, edge_and_rejection_points(
        PROTOTYPES, table, flatness_db=request.param, rejection_db=REJECTION_DB
    )


def test_edge_is_where_max_minus_min_leaves_the_flatness(solved):
    flatness_db, omega = solved
    for i, prototype in enumerate(PROTOTYPES):
        for k, sigma in enumerate(SIGMA):
            edge = omega[i, k, 0]
            inside = prototype.attenuation_db(np.linspace(0.0, edge, 2001), sigma)
            assert np.ptp(inside) <= flatness_db + 1e-9
            beyond = prototype.attenuation_db(np.linspace(0.0, edge * (1.0 + 1e-5), 2001), sigma)
            assert np.ptp(beyond) > flatness_db - 1e-6 * flatness_db - 1e-4 * (prototype.ripple_db > 0.0)


def test_rejection_point_is_the_last_crossing(solved):
    flatness_db, omega = solved
    for i, prototype in enumerate(PROTOTYPES):
        target = prototype.midband_loss_db(SIGMA)[:, np.newaxis] + flatness_db + REJECTION_DB
        outwards = omega[i, :, 1:, np.newaxis] * np.geomspace(1.0, 40.0, 500)
        level = prototype.attenuation_db(outwards, SIGMA[:, np.newaxis, np.newaxis])
        assert level[..., 0] == pytest.approx(target, abs=1e-9)
        assert (level.min(axis=-1) >= target - 1e-9).all()


def test_a_guess_changes_nothing(solved):
    flatness_db, omega = solved
    table = np.tile(SIGMA, (len(PROTOTYPES), 1))
    again = edge_and_rejection_points(
        PROTOTYPES, table, flatness_db=flatness_db, rejection_db=REJECTION_DB, start=omega * 1.3
    )
    assert again == pytest.approx(omega, rel=1e-9)


def test_without_dissipation_it_is_the_closed_form(solved):
    flatness_db, omega = solved
    for i, prototype in enumerate(PROTOTYPES):
        assert omega[i, 0, 0] == pytest.approx(float(prototype.inverse(flatness_db)), rel=1e-9)
        level = REJECTION_DB + float(prototype.midband_loss_db(0.0)) + flatness_db
        assert omega[i, 0, 1:] == pytest.approx(prototype.inverse(level), rel=1e-9)


def test_turning_points_of_a_lossless_chebyshev_are_those_of_its_polynomial():
    """Independent: T_n² turns at cos(kπ/2n), alternately at 0 dB and at the ripple."""
    for prototype in PROTOTYPES:
        n = prototype.order
        turn, level = turning_points((prototype,), lossy_response((prototype,), np.zeros((1, 1))))
        if prototype.family == "butterworth":
            assert turn.ravel() == pytest.approx([0.0])
            continue
        k = np.arange(n, 0, -1)
        assert turn.ravel() == pytest.approx(np.cos(k * np.pi / (2 * n)), abs=1e-6)
        expected = np.where(k % 2 == 0, prototype.ripple_db, 0.0)
        assert DB_PER_LN * level.ravel() == pytest.approx(expected, abs=1e-10)


@pytest.mark.parametrize("order", range(1, 16))
def test_a_lossy_butterworth_has_no_turning_points(order):
    """|1/H(jΩ + σ)|² as a polynomial in Ω² has no negative coefficient; hence it rises."""
    poles = Prototype("butterworth", order).poles()
    for sigma in np.geomspace(1e-6, 100.0, 60):
        polynomial = np.ones(1)
        for pole in poles[: order // 2]:
            a2, b2 = (sigma - pole.real) ** 2, pole.imag**2
            polynomial = np.convolve(polynomial, [1.0, 2.0 * (a2 - b2), (a2 + b2) ** 2])
        if order % 2:
            polynomial = np.convolve(polynomial, [1.0, (sigma - poles[order // 2].real) ** 2])
        assert (polynomial >= 0.0).all()


def test_absolute_skirts_widen_with_the_bandwidth(solved):
    """Δ·Ω grows with Δ at a fixed Q_u, that is Ω/σ falls with σ; the edge excepted where flatness equals ripple."""
    flatness_db, omega = solved
    scaled = omega[:, 1:] / SIGMA[1:, np.newaxis]
    for i, prototype in enumerate(PROTOTYPES):
        assert (np.diff(scaled[i, :, 1:], axis=0) < 0.0).all()
        if prototype.ripple_db < flatness_db:
            assert (np.diff(scaled[i, :, 0]) < 0.0).all()
