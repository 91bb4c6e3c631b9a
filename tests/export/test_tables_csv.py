"""The CSV tables, read back with the standard library's own reader."""

import csv
import io
from dataclasses import replace
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from harmonic_planner.export.nodes import line_frequency_hz, origins_text
from harmonic_planner.export.tables import elements_csv, inert, lines_csv, requirements_csv
from harmonic_planner.model import ElementReport, Origin

from plan_fixture import SWAMPED_REASON, example_plan, span_hz


def rows(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text, newline="")))


def test_lines_holds_every_line_of_every_node_once():
    plan = example_plan()
    table = rows(lines_csv(plan))
    expected = len(plan.source_lines) + sum(len(s.device_lines) + len(s.output_lines) for s in plan.stages)
    assert len(table) == expected
    assert len({(row["node"], row["stage_number"], row["line"]) for row in table}) == expected


def test_lines_carries_span_level_and_origin():
    table = rows(lines_csv(example_plan()))
    half = table[0]
    assert (half["node"], half["stage_number"], half["line"], half["level_dbc"]) == ("source", "", "1/2", "-70.0")
    assert (float(half["frequency_low_hz"]), float(half["frequency_high_hz"])) == span_hz("1/2")
    last = next(row for row in table if (row["node"], row["stage"], row["line"]) == ("stage output", "buffer", "5"))
    assert last["origins"] == (
        "line 4 left by first tripler (75 %); line 2 of the source (20 %); line 2 left by first tripler (5 %)"
    )


def test_requirements_pairs_each_need_with_the_level_before_the_filter():
    table = rows(requirements_csv(example_plan()))
    first = table[0]
    assert (first["stage"], first["line"], first["level_before_dbc"]) == ("first tripler", "1", "8.5")
    assert [float(first[key]) for key in ("required_db", "ideal_db", "as_built_db", "margin_db")] == [
        55.0,
        62.5,
        60.5,
        5.5,
    ]


def test_an_infinite_number_is_an_empty_cell():
    table = rows(requirements_csv(example_plan()))
    assert next(row for row in table if row["line"] == "12")["as_built_db"] == ""
    assert rows(elements_csv(example_plan()))[1]["self_resonance_hz"] == ""


def test_elements_lists_every_part_with_verdict_and_reason():
    table = rows(elements_csv(example_plan()))
    assert [(row["ref"], row["verdict"]) for row in table] == [
        ("L1", "ok"),
        ("C1", "ok"),
        ("L1", "marginal"),
        ("C1", "swamped"),
    ]
    assert table[3]["reason"] == SWAMPED_REASON
    assert float(table[3]["ideal"]) == 0.73e-12


def test_elements_say_what_is_bought_as_text_and_as_numbers_in_the_unit():
    table = rows(elements_csv(example_plan()))
    coil, pair = table[:2]
    assert (coil["bought"], coil["bought_1"], coil["bought_2"]) == ("27 nH", "2.7e-08", "")
    assert pair["bought"] == "270 pF + 4.7 pF"
    assert (float(pair["bought_1"]), float(pair["bought_2"])) == (270e-12, 4.7e-12)
    assert float(pair["bought_1"]) + float(pair["bought_2"]) == pytest.approx(float(pair["nominal"]))
    assert (pair["unit"], pair["kit"], pair["topology"]) == ("F", "chip-1008", "ladder-shunt")


def test_elements_say_what_is_borne_and_what_may_be_borne_and_leave_unknown_ratings_empty():
    coil, capacitor = rows(elements_csv(example_plan()))[:2]
    keys = ("peak_v", "rated_v", "rms_a", "rated_a")
    assert [coil[key] for key in keys] == ["1.0", "", "0.5", "0.6"]
    assert [capacitor[key] for key in keys] == ["5.0", "50.0", "0.01", ""]


def test_an_element_of_which_nothing_is_known_but_its_value_has_empty_cells():
    plan = example_plan()
    bare = ElementReport("L1", "L", "series", 1e-9, 1e-9, "H", 30.0, 2e8, 0.2, "ok", "")
    stage = replace(plan.stages[0], filter=replace(plan.stages[0].filter, elements=(bare,)))
    (row,) = rows(elements_csv(replace(plan, stages=(stage,))))
    assert [row[key] for key in ("bought", "bought_1", "bought_2", "peak_v", "rms_a")] == [""] * 5


def test_a_name_that_would_be_a_formula_is_inert_and_numbers_are_not_touched():
    table = rows(requirements_csv(example_plan()))
    assert table[-1]["stage"] == "'=cmd|[bold] $x_ doubler"
    assert float(table[-2]["margin_db"]) == -0.5


@pytest.mark.parametrize("start", ["=", "+", "-", "@", "\t", "\r", " ="])
def test_inert_quotes_every_start_of_a_formula(start):
    assert inert(f"{start}1") == f"'{start}1"


@given(st.text())
def test_inert_never_starts_a_formula_and_only_ever_adds_a_quote(text):
    safe = inert(text)
    assert safe in (text, f"'{text}")
    assert not safe.lstrip(" ").startswith(("=", "+", "-", "@", "\t", "\r", "\n"))


def test_a_plan_without_parts_still_has_its_heads():
    plan = example_plan()
    bare = replace(plan, stages=plan.stages[2:])
    assert elements_csv(bare).splitlines() == [elements_csv(plan).splitlines()[0]]


@given(st.fractions(min_value=Fraction(1, 3), max_value=500, max_denominator=3))
def test_line_frequency_is_the_line_times_the_source(line):
    low, high = line_frequency_hz(example_plan(), line)
    assert (low, high) == pytest.approx(span_hz(line), rel=1e-15)


def test_small_shares_may_be_left_out():
    origins = (Origin("source", Fraction(1, 2), 0.04), Origin("a", Fraction(3), 0.96))
    assert origins_text(origins, at_least=0.1) == "line 3 left by a (96 %)"


def test_a_leak_is_named_by_what_leaks_and_where():
    origins = (Origin("leak of source into the output", Fraction(1), 0.7), Origin("a", Fraction(3), 0.3))
    assert origins_text(origins) == "line 1, leak of source into the output (70 %); line 3 left by a (30 %)"


def test_shares_of_one_stage_by_one_line_are_added():
    origins = (Origin("a", Fraction(3), 0.3), Origin("source", Fraction(2), 0.4), Origin("a", Fraction(3), 0.3))
    assert origins_text(origins) == "line 3 left by a (60 %); line 2 of the source (40 %)"


def test_the_same_plan_gives_the_same_tables():
    for write in (lines_csv, requirements_csv, elements_csv):
        assert write(example_plan()) == write(example_plan())
