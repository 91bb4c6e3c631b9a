"""Conversion ratios, matrix, AM slope and second-order constants against closed forms and slow, plain code."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.model import Device, PlannerError
from harmonic_planner.physics.conversion import (
    am_slope,
    check_device,
    conversion_matrix,
    conversion_ratio,
    device_lines,
    second_order_db,
    second_order_near_db,
)
from harmonic_planner.physics.waveforms import waveform


def device(kind, angle_deg=90.0, **options):
    return Device(kind, -20.0, half_angle_rad=math.radians(angle_deg), **options)


def db(amplitude):
    return 20 * math.log10(amplitude)


def own_and_image_db(any_device, times):
    own, image = conversion_ratio(any_device, times, [times - 1, -(times + 1)])
    return db(own), db(image) if image else -math.inf


PERFECT_DOUBLER = device("push-push", balance_db=math.inf)
TRIPLER = device("single-ended", 40.0)


# ------------------------------------------------------------------------------ conversion of one residual


@pytest.mark.parametrize("times", range(1, 7))
def test_power_law_raises_a_residual_by_20_log_n_without_image(times):
    """independent: T_N(cos φ) = cos Nφ is pure phase and amplitude multiplication, N + a = 2N, N − a = 0."""
    own, image = own_and_image_db(device("power-law"), times)
    assert own == pytest.approx(db(times), abs=1e-12)
    assert image == -math.inf
    assert am_slope(device("power-law"), times) == pytest.approx(times)


@pytest.mark.parametrize("times", [1, 3, 5])
def test_hard_limiter_splits_a_residual_into_two_of_half(times):
    """independent: limiting leaves the phase part: 20 log10(N/2) on both sides; a limiter nears it as 1/g²."""
    coarse, fine = (
        conversion_ratio(device("limiter", steepness=g), times, [times - 1, times + 1]) for g in (200.0, 400.0)
    )
    assert (4 * fine - coarse) / 3 == pytest.approx([times / 2, times / 2], abs=1e-6)
    assert fine == pytest.approx([times / 2, times / 2], rel=1e-3)
    slopes = [am_slope(device("limiter", steepness=g), times) for g in (200.0, 400.0)]
    assert slopes[0] / slopes[1] == pytest.approx(4, abs=0.02)


@pytest.mark.parametrize(
    "any_device, times, own_db, image_db, slope, digits",
    [
        (PERFECT_DOUBLER, 2, 3.52, -6.02, 1.0, 0.005),
        (TRIPLER, 3, 11.2, -4.0, 4.26, 0.05),
    ],
)
def test_own_and_image_side(any_device, times, own_db, image_db, slope, digits):
    """independent: (N + a)/2 and |N − a|/2 by hand from sin(mθ)/(πm), to half a unit of the last digit."""
    own, image = own_and_image_db(any_device, times)
    assert own == pytest.approx(own_db, abs=digits)
    assert image == pytest.approx(image_db, abs=digits)
    assert am_slope(any_device, times) == pytest.approx(slope, abs=0.005)
    assert own == pytest.approx(db((times + am_slope(any_device, times)) / 2))
    assert image == pytest.approx(db(abs(times - am_slope(any_device, times)) / 2))


def test_residual_at_half_the_carrier_meets_two_paths():
    """independent: single-ended ×3, θ = 40°: paths m = 2 and m = N = 3 into 5/2·k0: sin 80°/2 + sin 120°/3."""
    f_3 = (math.sin(math.radians(120)) * math.cos(math.radians(40)) + 1.5 * math.sin(math.radians(40))) / 24
    two, three = math.sin(math.radians(80)) / 2, math.sin(math.radians(120)) / 3
    assert db(conversion_ratio(TRIPLER, 3, 3)) == pytest.approx(6.6, abs=0.05)
    amplitude = conversion_matrix(TRIPLER, 3, carrier_index=2, count=12)[5 - 1, 1 - 1]
    power = conversion_matrix(TRIPLER, 3, carrier_index=2, count=12, power=True)[5 - 1, 1 - 1]
    assert db(amplitude) == pytest.approx(15.2, abs=0.05)
    assert amplitude == pytest.approx((two + three) / (2 * f_3))
    assert power == pytest.approx((two**2 + three**2) / (2 * f_3) ** 2)


SLOPED = [
    (device("single-ended", 60.0), 2),
    (device("single-ended", 40.0), 3),
    (device("single-ended", 30.0), 4),
    (device("push-push", 75.0), 2),
    (device("push-pull", 60.0), 3),
    (device("push-pull", 24.0), 5),
    (device("limiter", steepness=4.0), 3),
    (device("limiter", steepness=10.0, lines_dbc={2: -12.0}), 3),
    (device("power-law"), 4),
]


@pytest.mark.parametrize("any_device, times", SLOPED)
def test_am_slope_is_the_log_derivative_of_the_output(any_device, times):
    """independent: the wanted line of f(A·cos φ) at A = 1 ± 1e-4, transformed here."""
    f, cosine = waveform(any_device, times), np.cos(2 * np.pi * np.arange(2**16) / 2**16)
    low, high = (np.fft.rfft(f(a * cosine))[times].real for a in (1 - 1e-4, 1 + 1e-4))
    slope = math.log(high / low) / math.log((1 + 1e-4) / (1 - 1e-4))
    assert am_slope(any_device, times) == pytest.approx(slope, rel=1e-4)


def test_conversion_ratio_takes_any_shape_and_sign():
    m = np.array([[-3, 0], [3, 1]])
    ratio = conversion_ratio(TRIPLER, 3, m)
    assert ratio.shape == (2, 2)
    assert ratio[0, 0] == ratio[1, 0]
    assert float(conversion_ratio(TRIPLER, 3, -3)) == ratio[0, 0]


# ------------------------------------------------------------------------------ matrix


@given(carrier_index=st.integers(1, 12), count=st.integers(1, 40), power=st.booleans(), times=st.sampled_from([2, 4]))
def test_matrix_equals_a_walk_over_every_path(carrier_index, count, power, times):
    """independent: for every input line and every m of both signs, add to |k + m·k0|; dc and beyond are dropped."""
    doubler = device("push-push", 55.0)
    reach = 2 * count // carrier_index + 2
    expected = np.zeros((count, count))
    paths = np.arange(-reach, reach + 1)
    ratio = conversion_ratio(doubler, times, paths)
    for line_in in range(1, count + 1):
        for m, amplitude in zip(paths, ratio, strict=True):
            line_out = abs(line_in + m * carrier_index)
            if 1 <= line_out <= count:
                expected[line_out - 1, line_in - 1] += amplitude**2 if power else amplitude
    matrix = conversion_matrix(doubler, times, carrier_index=carrier_index, count=count, power=power)
    assert matrix == pytest.approx(expected, rel=1e-12, abs=1e-300)


def test_matrix_of_a_long_comb_has_no_negative_entry():
    matrix = conversion_matrix(device("limiter", lines_dbc={2: -20.0}), 3, carrier_index=6, count=400)
    assert matrix.shape == (400, 400)
    assert np.all(matrix >= 0)
    assert matrix[3 * 6 + 1 - 1, 6 + 1 - 1] == pytest.approx(
        float(conversion_ratio(device("limiter", lines_dbc={2: -20.0}), 3, 2))
    )


# ------------------------------------------------------------------------------ lines, given and modelled


def test_lines_are_relative_to_the_wanted_line():
    """published: |cos φ| has (4/π)/(4k² − 1) at line 2k: line 4 of a full-wave doubler is 1/5 of line 2."""
    lines = device_lines(PERFECT_DOUBLER, 2, 6)
    assert lines == pytest.approx([0, 0, 1, 0, 3 / 15, 0, 3 / 35], abs=1e-15)


@pytest.mark.parametrize("balance_db", [10.0, 25.0, 40.0])
def test_line_1_of_a_push_push_is_not_the_balance(balance_db):
    """independent: θ = 90°: F_1/F_2 = (1/4)/(1/3π) times the unbalance: 20 log10(3π/4) = 7.44 dB over −B."""
    lines = device_lines(device("push-push", balance_db=balance_db), 2, 3)
    assert db(lines[1]) == pytest.approx(7.44 - balance_db, abs=0.005)


def test_given_lines_hold():
    lines = device_lines(device("push-push", lines_dbc={1: -25.0, 4: -18.0, 90: -50.0}), 2, 6)
    modelled = device_lines(device("push-push"), 2, 6)
    assert db(lines[1]) == pytest.approx(-25)
    assert db(lines[4]) == pytest.approx(-18)
    assert lines[2] == 1
    assert lines[[3, 5, 6]] == pytest.approx(modelled[[3, 5, 6]])
    assert device_lines(device("push-push", lines_dbc={1: -25.0}), 2, 1) == pytest.approx([0, 10 ** (-25 / 20)])


def test_given_lines_scale_their_zone():
    """independent: row by row from the ratio of given to modelled lines, k0 = 4, ties to the larger scale."""
    plain = device("push-push", 60.0)
    given = device("push-push", 60.0, lines_dbc={1: -40.0, 3: +3.0})
    modelled = device_lines(plain, 2, 3)
    down, up = 10 ** (-40 / 20) / modelled[1], 10 ** (3 / 20) / modelled[3]
    assert down < 1 < up
    scale = {
        1: 1,
        2: 1,
        3: down,
        4: down,
        5: down,
        6: 1,
        7: 1,
        8: 1,
        9: 1,
        10: up,
        11: up,
        12: up,
        13: up,
        14: up,
        15: 1,
    }
    before = conversion_matrix(plain, 2, carrier_index=4, count=15)
    after = conversion_matrix(given, 2, carrier_index=4, count=15)
    assert after == pytest.approx(before * np.array(list(scale.values()))[:, np.newaxis])
    squared = conversion_matrix(given, 2, carrier_index=4, count=15, power=True)
    unsquared = conversion_matrix(plain, 2, carrier_index=4, count=15, power=True)
    assert squared == pytest.approx(unsquared * np.array(list(scale.values()))[:, np.newaxis] ** 2)


def test_given_line_that_the_waveform_lacks_gives_no_scale():
    """independent: a perfect doubler has no line 1, so there is nothing to scale its zone by."""
    given = device("push-push", balance_db=math.inf, lines_dbc={1: -30.0})
    assert db(device_lines(given, 2, 2)[1]) == pytest.approx(-30)
    assert conversion_matrix(given, 2, carrier_index=3, count=12) == pytest.approx(
        conversion_matrix(PERFECT_DOUBLER, 2, carrier_index=3, count=12)
    )


# ------------------------------------------------------------------------------ second order


def test_second_order_of_the_cubic():
    """independent: T_3″ = 24x, so 24/2·r²/2·cos(2ψ + φ)/2 against T_3's own 1: 3·r² on the own side, 9.54 dB."""
    assert second_order_db(device("power-law"), 3) == pytest.approx(db(3))
    assert second_order_near_db(device("power-law"), 3) == pytest.approx(9.5, abs=0.05)


def test_second_order_of_the_square():
    """independent: T_2 = 2x² − 1: δ² alone, 2·r²/2 at 2ψ: 0 dB, away from the carrier's lines m = 2, 4."""
    assert second_order_db(device("power-law"), 2) == pytest.approx(0, abs=1e-12)
    assert second_order_near_db(device("power-law"), 2) == pytest.approx(0, abs=1e-12)


def test_second_order_of_the_single_ended_tripler():
    """independent: f″ is an impulse at the corner, cos mθ/(π sin θ): at most at m = 0, near the carrier at m = 5."""
    f_3 = (math.sin(math.radians(120)) * math.cos(math.radians(40)) + 1.5 * math.sin(math.radians(40))) / (24 * math.pi)
    fifth = abs(math.cos(math.radians(200))) / (math.pi * math.sin(math.radians(40)))
    assert second_order_near_db(TRIPLER, 3) == pytest.approx(db(fifth / (8 * f_3)))
    assert second_order_near_db(TRIPLER, 3) == pytest.approx(8.6, abs=0.05)
    assert second_order_db(TRIPLER, 3) == pytest.approx(db(1 / (math.pi * math.sin(math.radians(40))) / (8 * f_3)))


@pytest.mark.parametrize("times", [3, 5, 7])
def test_second_order_of_the_hard_limiter_near_the_carrier(times):
    """independent: f″ = 2δ′(x): |H_m| = 2m/π, F_N = 2/(πN): c → 20 log10(N(N + 2)/8), 5.46 dB for ×3."""
    near = second_order_near_db(device("limiter", steepness=400.0), times)
    assert near == pytest.approx(db(times * (times + 2) / 8), abs=0.01)


@pytest.mark.parametrize("angle_deg", [60.0, 65.0, 70.0, 75.0, 90.0])
@pytest.mark.parametrize("kind", ["single-ended", "push-push"])
def test_second_order_of_usual_doublers_is_below_0_db(kind, angle_deg):
    """independent: 1/(π sin θ)/(8·sin³θ/3π) = 3/(8 sin⁴θ); at and above 0 dB only below θ = 51.5°."""
    c = second_order_db(device(kind, angle_deg), 2)
    assert c == pytest.approx(db(3 / (8 * math.sin(math.radians(angle_deg)) ** 4)))
    assert c < 0


def test_linear_device_has_no_second_order():
    assert second_order_db(device("power-law"), 1) == -math.inf
    assert second_order_near_db(device("power-law"), 1) == -math.inf


# ------------------------------------------------------------------------------ refusals


@pytest.mark.parametrize(
    "any_device, times, message",
    [
        (device("push-pull"), 3, r"device\.type = push-pull, times = 3: .*line 1; allowed: up to 40 dB.*odd.*90 deg"),
        (device("single-ended"), 3, r"device\.type = single-ended, times = 3.*device\.half_angle from 90 deg"),
        (device("push-pull", 60.0, balance_db=45.0), 2, r"line 2 is 4\d\.\d dB under its line 1.*odd lines"),
        (device("limiter"), 2, r"limiter, times = 2.*odd lines"),
        (device("limiter", steepness=0.5), 5, r"limiter, times = 5.*device\.steepness = 0\.5"),
        (device("push-push", balance_db=math.inf), 3, r"line 3 is missing beside its line 2.*even lines"),
    ],
)
def test_device_without_its_wanted_line_is_refused(any_device, times, message):
    for function in (check_device, am_slope, second_order_db, lambda d, n: device_lines(d, n, 4)):
        with pytest.raises(PlannerError, match=message):
            function(any_device, times)
    with pytest.raises(PlannerError, match=message):
        conversion_matrix(any_device, times, carrier_index=1, count=8)


def test_refusal_starts_at_40_db():
    """independent: push-pull ×2, θ = 90°, line 1 is B + 7.44 dB above line 2."""
    assert check_device(device("push-pull", balance_db=32.5), 2) == []
    with pytest.raises(PlannerError, match=r"line 2 is 40\.\d dB under"):
        check_device(device("push-pull", balance_db=32.6), 2)


@pytest.mark.parametrize(
    "lines_dbc, message",
    [
        ({0: -10.0}, r"device\.lines: line 0: allowed are harmonics"),
        ({2: -3.0}, r"device\.lines: line 2 = -3 dBc: levels are relative to the wanted line"),
        ({1: 41.0}, r"device\.lines: line 1 = 41 dBc .*allowed: up to 40 dBc"),
    ],
)
def test_impossible_lines_are_refused(lines_dbc, message):
    with pytest.raises(PlannerError, match=message):
        check_device(device("push-push", lines_dbc=lines_dbc), 2)


def test_wanted_line_given_as_0_dbc_is_harmless():
    given = device("push-push", lines_dbc={2: 0.0, 1: -30.0})
    assert check_device(given, 2) == []
    assert device_lines(given, 2, 2)[2] == 1
