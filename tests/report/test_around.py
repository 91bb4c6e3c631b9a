"""What is shown around a plan: why so many resonators, what would change that, resonators against bandwidth."""

import io
import json
from dataclasses import replace
from fractions import Fraction

import pytest
from matplotlib.figure import Figure
from rich.console import Console

from harmonic_planner.export.plan_json import plan_json
from harmonic_planner.model import AllocationPlan, Holding, Origin, TradePoint, WhatIf, Why
from harmonic_planner.report import terminal
from harmonic_planner.report.around import telling
from harmonic_planner.report.figures import draw_trade, trade_figure
from harmonic_planner.report.files import plan_files

from plan_fixture import example_plan, example_worked

HOLDING = Holding(
    stage="first tripler",
    resonators=3,
    line=Fraction(5),
    at="output",
    over_db=2.1,
    bound=True,
    origins=(Origin("source", Fraction(2), 0.42),),
    text="first tripler, 3 resonators: with 2 line 5 at the output would be 2.1 dB beyond its limit [bold]",
)
WHY = Why("first tripler carries 3 of 7 resonators: line 5", (HOLDING,))
ROWS = (
    WhatIf("one resonator more", "a resonator", 7, True, 3.5, 8, True, 5.0),
    WhatIf("one resonator fewer", "", 7, True, 3.5, 6, False, 1.25),
    WhatIf("a better pair", "a matched pair", 7, True, 3.5, 6, True, 3.25, note="strays left out"),
    WhatIf("a shield", "a shield", 7, True, 3.5, 7, True, 3.6),
    WhatIf("a pad", "3 dB of level", 7, True, 3.5, 7, True, 3.7),
)
TRADE = (
    TradePoint(7, 1.0, 0.175, False, (3, 4, 0), 3.5),
    TradePoint(8, 1.25, 0.21875, True, (4, 4, 0), 4.0),
)
PLAN = replace(
    example_plan(), why=WHY, what_if=ROWS, trade=TRADE, allocation=AllocationPlan(9, 7, proven=False, nodes=5)
)


def shown(plan=PLAN) -> str:
    stream = io.StringIO()
    terminal.show_plan(plan, Console(file=stream, width=80, highlight=False, markup=False, emoji=False))
    return stream.getvalue()


def words(text: str) -> str:
    return " ".join(text.split())


def test_why_stands_behind_the_allocation():
    text = words(shown())
    start = text.index("Allocation: 9 resonators")
    assert text.index("First tripler carries 3 of 7 resonators: line 5.") > start
    assert text.index("- first tripler, 3 resonators: with 2 line 5") > start
    assert "beyond its limit [bold]" in text


def test_only_rows_that_change_something_are_told_the_best_first():
    assert [row.change for row in telling(ROWS)] == [
        "a better pair",
        "a pad",
        "one resonator more",
        "one resonator fewer",
    ]


def test_what_if_shows_count_margin_and_price():
    text = words(shown())
    assert "a better pair (strays left out) 6 +3.2 a matched pair" in text
    assert "one resonator fewer 6, not met +1.2 –" in text
    assert "Now: 7 resonators, margin +3.5 dB, by the same search." in text
    assert "The filters as built take 9" in text
    assert "1 more change would do next to nothing" in text


def test_the_trade_is_a_table():
    text = words(shown())
    assert "7 17.5 % wide 3 + 4 + 0 +3.5" in text
    assert "8 21.9 % wide, the widest tried 4 + 4 + 0 +4.0" in text


def test_a_plan_without_them_says_nothing_of_them():
    text = shown(example_plan())
    assert "What if" not in text
    assert "against bandwidth" not in text


def test_everything_stays_within_eighty_columns():
    assert max(len(line) for line in shown().splitlines()) <= 80


def test_the_figure_shows_bandwidth_against_count():
    axes = Figure().add_subplot()
    draw_trade(TRADE, axes)
    (curve,) = axes.get_lines()
    assert list(curve.get_xdata()) == [7, 8]
    assert list(curve.get_ydata()) == pytest.approx([17.5, 21.875])
    assert [text.get_text() for text in axes.texts] == ["3 + 4 + 0\nmargin 3.5 dB", "4 + 4 + 0\nmargin 4.0 dB"]
    assert "%" in axes.get_ylabel()


def test_the_figure_is_a_file_of_the_plan_and_the_same_bytes_twice():
    worked = replace(example_worked(), plan=PLAN)
    files = plan_files(worked)
    assert files["trade.png"] == trade_figure(PLAN)["trade.png"]
    assert "trade.png" in json.loads(files["plan.json"])["files"]
    assert "trade.png" not in plan_files(example_worked())


def test_plan_json_has_why_what_if_and_trade():
    told = json.loads(plan_json(PLAN))
    assert told["why"]["stages"][0]["line"] == "5"
    assert told["why"]["stages"][0]["origins"] == [{"stage": "source", "line": "2", "share": 0.42}]
    assert [row["change"] for row in told["what_if"]] == [row.change for row in ROWS]
    assert told["what_if"][0] == {
        "change": "one resonator more",
        "price": "a resonator",
        "total_now": 7,
        "met_now": True,
        "margin_now_db": 3.5,
        "total": 8,
        "met": True,
        "margin_db": 5.0,
        "note": "",
    }
    assert [(p["total"], p["resonators"]) for p in told["trade"]] == [(7, [3, 4, 0]), (8, [4, 4, 0])]
