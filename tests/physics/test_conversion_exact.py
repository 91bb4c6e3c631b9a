"""Linear conversion against the exact way: sample one period of the driven waveform and transform.

Nothing here comes from the package but the answer under test and the limiter's bias: the waveforms are written out
again, and what a residual does is read off the transform. Clipped shapes alias, so a carrier period has some 10,000
points.
"""

import math

import numpy as np
import pytest

from harmonic_planner.model import Device, PlannerError
from harmonic_planner.physics.conversion import (
    check_device,
    conversion_matrix,
    conversion_ratio,
    device_lines,
    second_order_db,
)
from harmonic_planner.physics.waveforms import bias_of

RESIDUAL = 0.01  # −40 dBc
POINTS = 2**16
SMALL_SHIFT = 0.25  # m·r/sin θ up to which third-order terms stay below 0.1 dB


def device(kind, angle_deg=90.0, **options):
    return Device(kind, -20.0, half_angle_rad=math.radians(angle_deg), **options)


SHAPES = {
    **{
        f"{kind} {angle:g}": device(kind, angle)
        for kind in ("single-ended", "push-push", "push-pull")
        for angle in (24.0, 30.0, 40.0, 50.0, 60.0, 75.0, 90.0)
    },
    "single-ended 120": device("single-ended", 120.0),
    **{f"limiter {g:g}": device("limiter", steepness=g) for g in (1.0, 3.0, 10.0, 30.0)},
    "limiter 10 biased": device("limiter", lines_dbc={2: -10.0}),
    "power-law": device("power-law"),
}
REFUSED = {
    *(("single-ended 90", n) for n in (3, 5)),
    *(("push-push 90", n) for n in (3, 5)),
    *((f"push-push {angle}", 5) for angle in (50, 60, 75)),
    *((f"push-pull {angle}", 4) for angle in (60, 75)),
    *(("push-pull 90", n) for n in (3, 4, 5)),
    *((f"limiter {g}{b}", n) for g, b in ((1, ""), (3, ""), (10, ""), (30, ""), (10, " biased")) for n in (2, 4)),
    ("limiter 1", 5),
}
CONTRADICTED = {("limiter 10 biased", 2)}  # its given line 2 would be the wanted one
CASES = [(name, n) for name in SHAPES for n in range(1, 6) if (name, n) not in REFUSED | CONTRADICTED]


def shape(any_device, times):
    """Write the waveform out again, from its definition."""
    corner = math.cos(any_device.half_angle_rad)
    unbalance = 10 ** (-any_device.balance_db / 20)
    sigma = (1 - unbalance) / (1 + unbalance)
    bias = bias_of(any_device, times)
    return {
        "single-ended": lambda x: np.where(x > corner, x - corner, 0),
        "push-push": lambda x: np.where(x > corner, x - corner, 0) + sigma * np.where(-x > corner, -x - corner, 0),
        "push-pull": lambda x: np.where(x > corner, x - corner, 0) - sigma * np.where(-x > corner, -x - corner, 0),
        "limiter": lambda x: np.tanh(any_device.steepness * x + bias),
        "power-law": [
            None,
            lambda x: x,
            lambda x: 2 * x**2 - 1,
            lambda x: 4 * x**3 - 3 * x,
            lambda x: 8 * x**4 - 8 * x**2 + 1,
            lambda x: 16 * x**5 - 20 * x**3 + 5 * x,
        ][times],
    }[any_device.type]


def exact_lines(any_device, times, *, carrier_index, count, residuals):
    """Return amplitudes at lines 1 … count relative to the undisturbed wanted line; residuals are (line, r, phase)."""
    f = shape(any_device, times)
    t = 2 * np.pi * np.arange(POINTS) / POINTS
    carrier = np.cos(carrier_index * t)
    disturbed = carrier + sum(r * np.cos(line * t + phase) for line, r, phase in residuals)
    wanted = abs(np.fft.rfft(f(carrier))[times * carrier_index])
    return np.abs(np.fft.rfft(f(disturbed)))[1 : count + 1] / wanted


@pytest.mark.parametrize("name, times", sorted(REFUSED - CONTRADICTED))
def test_refused_devices_are_the_expected_ones(name, times):
    with pytest.raises(PlannerError, match=r"allowed: up to 40 dB"):
        check_device(SHAPES[name], times)


@pytest.mark.parametrize("name, times", CASES)
def test_one_residual(name, times):
    """independent: k0 = 7 steps, so that no two paths of a residual meet and second-order lines stand apart.

    Within 20 dB of the own side: 0.1 dB, wherever third-order terms allow it (m·r ≤ sin θ/4; on all lines up to 2N
    in any case). Everywhere else, lines without a linear path included: within the second-order bound.
    """
    any_device, k0 = SHAPES[name], 7
    check_device(any_device, times)
    count = 8 * times * k0
    out = np.arange(1, count + 1)
    matrix = conversion_matrix(any_device, times, carrier_index=k0, count=count)
    bound = RESIDUAL**2 * 10 ** (second_order_db(any_device, times) / 20)
    own = RESIDUAL * float(conversion_ratio(any_device, times, times - 1))
    width = math.sin(any_device.half_angle_rad) if any_device.type.startswith(("single", "push")) else 1.0
    rng = np.random.default_rng(times)
    compared = 0
    for line in (3, 8, 16):
        linear = RESIDUAL * matrix[:, line - 1]
        carrier_lines = np.zeros(count)
        carrier_lines[k0 - 1 :: k0] = device_lines(any_device, times, count // k0)[1:]
        exact = exact_lines(
            any_device, times, carrier_index=k0, count=count, residuals=[(line, RESIDUAL, rng.uniform(0, 2 * np.pi))]
        )
        paths = (out + line) / k0
        close = (linear >= own / 10) & (linear > 1e-9)
        close &= (out <= 2 * times * k0) | (paths * RESIDUAL <= SMALL_SHIFT * width)
        if own > 1e-9:
            assert 20 * np.abs(np.log10(exact[close] / linear[close])) == pytest.approx(0, abs=0.1)
            compared += np.count_nonzero(close)
        else:
            close[:] = False
        # the steady part of δ² reaches the carrier's own lines by two equal paths
        allowed = bound * np.where(out % k0 == 0, 2.0, 1.0) * 10 ** (0.1 / 20) + 1e-7
        assert np.all(np.abs(exact - linear - carrier_lines)[~close] <= allowed[~close])
    assert compared or own <= 1e-9


@pytest.mark.parametrize(
    "name, times", [("power-law", 3), ("single-ended 40", 3), ("push-push 75", 2), ("limiter 3", 3)]
)
def test_second_order_constant_is_reached(name, times):
    """independent: the largest second-order line comes within 0.5 dB of 2s + c, so the bound is no loose one."""
    any_device, k0 = SHAPES[name], 7
    exact = exact_lines(any_device, times, carrier_index=k0, count=40 * k0, residuals=[(3, RESIDUAL, 0.4)])
    out = np.arange(1, 40 * k0 + 1)
    second = exact[((out - 6) % k0 == 0) | ((out + 6) % k0 == 0)]
    assert 20 * math.log10(np.max(second)) == pytest.approx(-80 + second_order_db(any_device, times), abs=0.5)


@pytest.mark.parametrize(
    "name, times",
    [
        ("power-law", 3),
        ("single-ended 40", 3),
        ("push-push 75", 2),
        ("push-pull 60", 3),
        ("limiter 3", 3),
        ("power-law", 5),
    ],
)
def test_three_residuals_together(name, times):
    """independent: −40 dBc in all, k0 = 31: first-order lines ±1, ±5, ±14 stand apart from all pairs of them."""
    any_device, k0 = SHAPES[name], 31
    count = 3 * times * k0
    out = np.arange(1, count + 1)
    levels = {1: 0.005, k0 + 5: 0.003, 2 * k0 - 14: 0.002}
    rng = np.random.default_rng(31)
    exact = exact_lines(
        any_device,
        times,
        carrier_index=k0,
        count=count,
        residuals=[(line, r, rng.uniform(0, 2 * np.pi)) for line, r in levels.items()],
    )
    matrix = conversion_matrix(any_device, times, carrier_index=k0, count=count)
    bound = 0.01**2 * 10 ** (second_order_db(any_device, times) / 20)
    linear = sum(matrix[:, line - 1] * r for line, r in levels.items())
    for line, r in levels.items():
        alone = matrix[:, line - 1] * r
        close = alone >= r * float(conversion_ratio(any_device, times, times - 1)) / 10
        assert np.count_nonzero(close) >= 2
        assert 20 * np.abs(np.log10(exact[close] / alone[close])) == pytest.approx(0, abs=0.1)
    nowhere = (linear == 0) & (out % k0 != 0)
    assert np.max(exact[nowhere]) <= bound + 1e-7
    assert np.max(exact[nowhere]) > bound / 30


@pytest.mark.parametrize(
    "name, times, worst_db",
    [
        ("single-ended 40", 3, 15.2),
        ("single-ended 60", 2, None),
        ("push-push 75", 2, None),
        ("push-pull 60", 3, None),
        ("limiter 3", 3, None),
        ("limiter 10 biased", 3, None),
        ("power-law", 4, None),
    ],
)
def test_residual_at_half_the_carrier_over_all_phases(name, times, worst_db):
    """independent: worst phase = sum of amplitudes, phase average = sum of powers; ×3 at 40°: +15.2 dB."""
    any_device, k0, count = SHAPES[name], 2, 4 * times
    phases = np.pi * np.arange(24) / 24 + 0.01
    levels = np.array(
        [
            exact_lines(any_device, times, carrier_index=k0, count=count, residuals=[(1, RESIDUAL, phase)])
            for phase in phases
        ]
    )
    amplitude = RESIDUAL * conversion_matrix(any_device, times, carrier_index=k0, count=count)[:, 0]
    power = RESIDUAL**2 * conversion_matrix(any_device, times, carrier_index=k0, count=count, power=True)[:, 0]
    near = amplitude >= np.max(amplitude[2 * times - 2 : 2 * times + 1]) / 10
    near &= np.arange(1, count + 1) % 2 == 1
    assert np.count_nonzero(near) >= 2
    assert 20 * np.log10(np.max(levels, axis=0)[near] / amplitude[near]) == pytest.approx(0, abs=0.1)
    assert 10 * np.log10(np.mean(levels**2, axis=0)[near] / power[near]) == pytest.approx(0, abs=0.1)
    if worst_db is not None:
        assert 20 * np.log10(np.max(levels[:, 2 * times - 2]) / RESIDUAL) == pytest.approx(worst_db, abs=0.1)


@pytest.mark.parametrize(
    "name, times", [("single-ended 40", 3), ("push-push 60", 2), ("limiter 3", 3), ("power-law", 3)]
)
def test_many_residuals_never_exceed_the_worst_case(name, times):
    """independent: random phases and levels on k0 = 4; the powers average, the amplitudes bound.

    Twelve seeded draws over a dozen lines leave their mean power within 1.5 dB; no line passes the amplitude sum by
    more than the second-order bound, each pair reaching a line by up to four paths here.
    """
    any_device, k0, count = SHAPES[name], 4, 6 * times * 4
    rng = np.random.default_rng(4)
    lines = [1, 2, 3, 5, 6, 7, 9, 10, 11]
    levels = rng.uniform(0.2, 1.0, len(lines))
    levels *= 0.01 / np.sum(levels)
    column = np.zeros(count)
    column[np.array(lines) - 1] = levels
    worst = conversion_matrix(any_device, times, carrier_index=k0, count=count) @ column
    average = conversion_matrix(any_device, times, carrier_index=k0, count=count, power=True) @ column**2
    between = np.arange(1, count + 1) % k0 != 0
    bound = 4 * 0.01**2 * 10 ** (second_order_db(any_device, times) / 20)
    draws = np.array(
        [
            exact_lines(
                any_device,
                times,
                carrier_index=k0,
                count=count,
                residuals=list(zip(lines, levels, rng.uniform(0, 2 * np.pi, len(lines)), strict=True)),
            )
            for _ in range(12)
        ]
    )
    assert np.all(draws[:, between] <= worst[between] + bound)
    strong = between & (average >= np.max(average[between]) / 100)
    ratio = np.mean(draws[:, strong] ** 2 / average[strong])
    assert 10 * math.log10(ratio) == pytest.approx(0, abs=1.5)
