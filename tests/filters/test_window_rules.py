"""Windows: the rules of order, floor, cap and loss, and the words a refusal comes with."""

from __future__ import annotations

import math

import numpy as np
import pytest

from harmonic_planner.filters.windows import Task, WindowResult, least_order, scan, solve
from harmonic_planner.model import PlannerError
from harmonic_planner.physics.prototypes import Prototype


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


NO_LINES = {"line_low_hz": np.array([]), "line_high_hz": np.array([]), "rejection_db": np.array([])}
FAMILIES = ("butterworth", "chebyshev")


def test_scan_lists_every_family_and_order_and_agrees_with_solve():
    results = scan(task(), families=FAMILIES, ripple_db=0.1, max_order=9)
    assert [(r.prototype.family, r.prototype.order) for r in results] == [
        (f, n) for f in FAMILIES for n in range(1, 10)
    ]
    for result in results:
        alone = solve(result.prototype, task())
        assert alone.feasible == result.feasible
        assert alone.bandwidth_max == pytest.approx(result.bandwidth_max, rel=1e-6, nan_ok=True)


def test_least_order_prefers_few_resonators_then_the_wider_window():
    def result(family, order, widest, feasible=True):
        prototype = Prototype(family, order, 0.1)
        return WindowResult(prototype, feasible, "", 0.05 if feasible else math.nan, widest if feasible else math.nan)

    results = [
        result("butterworth", 2, 0.5, feasible=False),
        result("butterworth", 3, 0.2),
        result("butterworth", 4, 0.9),
        result("chebyshev", 3, 0.3),
    ]
    assert least_order(results) is results[3]
    assert least_order(results[:1]) is None


def test_the_floor_comes_before_the_order():
    low = least_order(scan(task(floor=0.02), families=FAMILIES, ripple_db=0.1, max_order=9))
    high = least_order(scan(task(floor=0.25), families=FAMILIES, ripple_db=0.1, max_order=9))
    assert high.prototype.order > low.prototype.order
    assert high.bandwidth_min >= 0.25


def test_a_loss_limit_breaks_the_monotony_in_order():
    """Order 9 loses too much at a bandwidth where a lower order serves."""
    work = task(loss_db=1.5, unloaded_q=40.0, rejection_db=np.array([25.0, 25.0]), floor=0.02)
    feasible = [r.feasible for r in scan(work, families=("butterworth",), ripple_db=0.1, max_order=9)]
    assert feasible == [False, False, True, True, True, True, True, True, False]


def test_one_sided_and_lineless_requirements_reach_the_cap():
    above = task(line_low_hz=np.array([3e9]), line_high_hz=np.array([3e9]), rejection_db=np.array([30.0]))
    assert solve(Prototype("butterworth", 5), above).bandwidth_max == 1.0
    free = solve(Prototype("butterworth", 1), task(**NO_LINES))
    assert free.bandwidth_max == 1.0
    assert solve(Prototype("butterworth", 1), task(**NO_LINES, cap=0.4)).bandwidth_max == 0.4


def test_a_window_at_the_floor_starts_exactly_there():
    assert solve(Prototype("butterworth", 3), task(floor=0.123)).bandwidth_min == 0.123


def test_lines_that_need_nothing_are_passed_over():
    lines = {"line_low_hz": np.array([600e6, 297e6]), "line_high_hz": np.array([600e6, 303e6])}
    assert solve(Prototype("butterworth", 3), task(**lines, rejection_db=np.array([-3.0, 30.0]))).feasible


@pytest.mark.parametrize(
    ("prototype", "changes", "words"),
    [
        (Prototype("chebyshev", 3, 0.5), {"flatness_db": 0.4}, "its ripple of 0.5 dB is above the flatness of 0.4 dB"),
        (
            Prototype("butterworth", 3),
            {"line_low_hz": np.array([297e6, 612e6]), "line_high_hz": np.array([303e6, 620e6])},
            "the line at 612 to 620 MHz overlaps the carrier (594 to 606 MHz) within the drift of 1 %",
        ),
        (Prototype("butterworth", 9), {"unloaded_q": 5.0}, "above the limit of 6 dB"),
        (Prototype("chebyshev", 4, 0.5), {"loss_db": 0.3}, "above the limit of 0.3 dB"),
        (Prototype("butterworth", 3), {"floor": 1.2}, "the bandwidth floor of 120 % is above the cap of 100 %"),
        (
            Prototype("butterworth", 3),
            {"passband_hz": (300e6, 900e6)},
            "no bandwidth up to 100 % passes 300 to 900 MHz",
        ),
        (Prototype("butterworth", 1), {}, "the line at 297 to 303 MHz needs 45.0 dB and gets"),
        (Prototype("butterworth", 2), {"floor": 0.3}, "at 30 % bandwidth, the floor, "),
        (
            Prototype("butterworth", 9),
            {"loss_db": 1.5, "unloaded_q": 40.0, "rejection_db": np.array([25.0, 25.0])},
            "the narrowest within the loss limit, the line at",
        ),
        (
            Prototype("butterworth", 1),
            {"floor": 0.0, "loss_db": 9.0},
            "the narrowest that passes the carrier, the line",
        ),
    ],
    ids=lambda v: v.name if isinstance(v, Prototype) else None,
)
def test_reasons_say_which_line_and_why(prototype, changes, words):
    lines = {"line_low_hz": np.array([297e6, 891e6]), "line_high_hz": np.array([303e6, 909e6])}
    if changes.get("passband_hz"):
        lines = {"line_low_hz": np.array([100e6, 2500e6]), "line_high_hz": np.array([100e6, 2500e6])}
    result = solve(prototype, task(**{**lines, **changes}))
    assert not result.feasible
    assert words in result.reason
    assert math.isnan(result.bandwidth_min)


@pytest.mark.parametrize(
    ("changes", "named"),
    [
        ({"passband_hz": (606e6, 594e6)}, "passband"),
        ({"passband_hz": (0.0, 594e6)}, "passband"),
        ({"rejection_db": np.array([40.0])}, "one length"),
        ({"rejection_db": np.array([40.0, math.nan])}, "finite"),
        ({"line_low_hz": np.array([297e6, 999e6])}, "low ≤ high"),
        ({"flatness_db": 0.0}, "flatness = 0.0"),
        ({"loss_db": -1.0}, "loss = -1.0"),
        ({"drift": 1.0}, "drift = 1.0"),
        ({"unloaded_q": 0.0}, "unloaded_q = 0.0"),
        ({"floor": -0.1}, "floor = -0.1"),
        ({"cap": 0.0}, "cap = 0.0"),
        ({"flatness_db": math.nan}, "flatness = nan"),
    ],
)
def test_impossible_tasks_are_refused_by_name(changes, named):
    with pytest.raises(PlannerError, match=named):
        task(**changes)
