"""What a person reads: the verdict first, 80 columns, nothing that a terminal would obey."""

import io
from dataclasses import replace

import pytest
from rich.console import Console

from harmonic_planner.model import AllocationPlan
from harmonic_planner.report import terminal
from harmonic_planner.report.console import console

from plan_fixture import SWAMPED_REASON, doubler, element, example_plan, tripler


def shown(show=terminal.show_plan, plan=None, **settings) -> str:
    stream = io.StringIO()
    screen = Console(file=stream, width=80, highlight=False, markup=False, emoji=False, **settings)
    show(plan or example_plan(), screen)
    return stream.getvalue()


def words(text: str) -> str:
    """The text with its line breaks and columns taken out."""
    return " ".join(text.split())


def section(text: str, title: str) -> list[str]:
    """Rows under a section's title."""
    rows = text.splitlines()
    start = rows.index(title) + 1
    end = next((i for i in range(start, len(rows)) if not rows[i].strip()), len(rows))
    return rows[start:end]


def test_the_verdict_comes_first():
    assert shown().splitlines()[0] == example_plan().sentence


@pytest.mark.parametrize("show", [terminal.show_plan, terminal.show_lines])
def test_it_fits_eighty_columns(show):
    assert max(map(len, shown(show).splitlines())) <= 80


def test_wide_frequencies_and_long_names_fit_eighty_columns_too():
    stage = replace(
        doubler(),
        name="the very long name of a stage that nobody shortened",
        frequency_hz=(2399.4e6, 2400.6e6),
        filter=replace(doubler().filter, topology="quarter-wave-coaxial"),
    )
    text = shown(plan=replace(example_plan(), stages=(stage, *example_plan().stages)))
    assert max(map(len, text.splitlines())) <= 80
    assert "swamped" in text


def test_the_stage_table_says_filter_band_centre_loss_margin_and_parts():
    rows = section(shown(), "Stages")
    first = next(row for row in rows if row.startswith("1 first"))
    assert first.split()[2:] == ["59.7–60.3", "Cheb", "3", "20.0", "59.5", "ladder-shunt", "1.2", "+2.5", "ok"]
    second = next(row for row in rows if row.startswith("2 "))
    assert second.split()[-2:] == ["-0.5", "swamped"]


def test_output_lines_come_in_order_of_margin_with_their_cause_and_without_those_that_have_no_limit():
    rows = section(shown(), "Output lines with the least margin")
    numbers = [row.split()[0] for row in rows if row[:1].isdigit()]
    assert numbers == ["5", "7", "3"]
    assert "line 4 left by first tripler (75 %); line 2 of the source (20 %)" in words(
        " ".join(row[45:] for row in rows)
    )


def test_at_most_five_output_lines_are_shown():
    plan = example_plan()
    many = tuple(replace(plan.output.lines[0], margin_db=float(i)) for i in range(9))
    rows = section(
        shown(plan=replace(plan, output=replace(plan.output, lines=many))), "Output lines with the least margin"
    )
    assert sum(row.startswith("3 ") for row in rows) == 5


def test_lines_of_a_tap_have_a_table_of_their_own():
    plan = example_plan()
    first = replace(plan.stages[0], limited_lines=plan.output.lines[:2])
    rows = section(
        shown(plan=replace(plan, stages=(first, *plan.stages[1:]))), "Lines behind first tripler with the least margin"
    )
    assert [row.split()[0] for row in rows if row[:1].isdigit()] == ["5", "3"]
    assert "Lines behind" not in shown()


def parts_shown(plan=None) -> list[list[str]]:
    """Words of the rows under parts to look at, headings of stages and continued lines among them."""
    return [row.split() for row in section(shown(plan=plan), "Parts to look at")[2:]]


def with_parts(*parts, name="d", **filter_plan):
    """The example with one stage that has these parts."""
    return replace(
        example_plan(),
        stages=(replace(doubler(), name=name, filter=replace(doubler().filter, elements=parts, **filter_plan)),),
    )


def test_parts_that_are_not_ok_are_shown_worst_first_with_what_to_buy_and_their_reason():
    rows = section(shown(), "Parts to look at")
    verdicts = [word for row in rows for word in row.split() if word in ("ok", "marginal", "swamped")]
    assert verdicts == ["swamped", "marginal", "ok"]
    assert rows[2].strip() == "=cmd|[bold] $x_ doubler, ladder-series, chip-1008"
    assert rows[3].split()[:4] == ["C1", "0.75", "pF", "swamped"]
    assert SWAMPED_REASON in words(rows[3][35:])


def test_two_parts_in_parallel_are_bought_by_name():
    part = element("C12", "series", 3e-12, 1.8e-12, 1.2e-12, verdict="marginal", reason="strays 12 %")
    assert parts_shown(with_parts(part))[1] == ["C12", "1.8", "pF", "+", "1.2", "pF", "marginal", "strays", "12", "%"]


def test_a_part_near_its_rating_is_shown_whatever_its_verdict_with_share_and_rating():
    near = element("L2", "shunt", 8e-9, 8.2e-9, rms_a=0.57, rated_a=0.7)
    far = element("L3", "shunt", 8e-9, 8.2e-9, rms_a=0.55, rated_a=0.7)
    beyond = element(
        "C2", "shunt", 8e-12, 8e-12, peak_v=61.0, rated_v=50.0, verdict="marginal", reason="strays 12 %; b"
    )
    text = words(" ".join(section(shown(plan=with_parts(near, far, beyond)), "Parts to look at")))
    assert "L2 8.2 nH ok bears 570 mA rms, 81 % of its 700 mA" in text
    assert "C2 8 pF marginal strays 12 %; bears 61 V peak, 122 % of its 50 V" in text
    assert "L3" not in text


def test_parts_that_bear_little_and_are_ok_are_not_shown():
    assert "Parts to look at" not in shown(plan=with_parts(element("L1", "shunt", 8e-9, 8.2e-9)))


def test_a_remark_about_the_filter_is_made_once_a_stage_and_reasons_beyond_the_first_not_at_all():
    remark = "below the highest line to reject, 9.58 GHz"
    parts = [
        element(
            f"C{i}", "shunt", 8e-12, 8e-12, verdict="marginal", reason=f"self-resonance {i} GHz, {remark}; strays 9 %"
        )
        for i in (1, 2, 3)
    ]
    text = words(shown(plan=with_parts(*parts)))
    assert text.count(remark) == 1
    assert all(f"self-resonance {i} GHz" in text for i in (1, 2, 3))
    assert "strays 9 %" not in text


def test_many_parts_are_counted():
    parts = [element(f"C{i}", "shunt", 8e-12, 8e-12, verdict="marginal", reason="strays 12 %") for i in range(15)]
    text = shown(plan=with_parts(*parts))
    assert sum("strays 12 %" in row for row in text.splitlines()) == 12
    assert "and 3 more in elements.csv" in text


def test_topologies_and_kits_are_in_the_stage_table_kits_only_where_there_are_several():
    assert "chip-1008" not in " ".join(section(shown(), "Stages"))
    second = replace(doubler(), filter=replace(doubler().filter, kit="air-wound", topology="series-capacitive"))
    plan = replace(example_plan(), stages=(tripler(), second))
    rows = section(shown(plan=plan), "Stages")
    start = rows[0].index("topology")
    assert [row[start : start + 13].strip() for row in rows[:2]] == ["topology,", "kit"]
    cells = [row[start : start + 13].strip() for row in rows[3:-1]]
    assert [cell for cell in cells if cell] == ["ladder-shunt", "chip-1008", "series-", "capacitive", "air-wound"]
    assert max(map(len, rows)) <= 80


def test_a_low_pass_has_no_bandwidth_and_a_measured_filter_no_family():
    low_pass = replace(doubler().filter, topology="low-pass")
    measured = replace(doubler().filter, source="touchstone", family=None, order=None, topology=None, elements=())
    stages = tuple(
        replace(doubler(), name=name, filter=made) for name, made in (("cut", low_pass), ("bench", measured))
    )
    rows = section(shown(plan=replace(example_plan(), stages=stages)), "Stages")
    assert next(row for row in rows if "cut" in row).split()[5:8] == ["–", "120", "low-pass"]
    bench = next(row for row in rows if "bench" in row).split()
    assert (bench[3], bench[-1]) == ("measured", "measured")


def test_the_allocation_is_said_in_one_line_under_the_stages():
    assert section(shown(), "Stages")[-1] == (
        "Allocation: 7 resonators; at least 6 are needed (7 is not proven the least)"
    )
    proven = replace(example_plan(), allocation=AllocationPlan(10, 10, proven=True, nodes=3))
    assert section(shown(plan=proven), "Stages")[-1] == (
        "Allocation: 10 resonators in all, proven the least for these candidates"
    )
    assert "Allocation" not in shown(plan=replace(example_plan(), allocation=None))


def test_what_is_said_of_several_stages_is_said_once():
    plan = example_plan()
    said = [f"{stage.name}: too narrow: 12 %" for stage in plan.stages[:2]] + ["output.level: missed"]
    text = words(shown(plan=replace(plan, warnings=tuple(said))))
    assert f"- first tripler, {plan.stages[1].name}: too narrow: 12 % - output.level: missed" in text


def test_proposals_warnings_cautions_checks_and_assumptions_are_there():
    text = words(shown())
    assert (
        "doubler: Cheb 5 ladder-shunt, 20.2 % at 119 MHz: loss 1.8 dB, worst part marginal (C3), least output" in text
    )
    assert "margin +3.4 dB; price: 1 resonator more" in text
    plan = example_plan()
    for sentence in (*plan.warnings, *plan.cautions, *plan.self_checks):
        assert sentence in text
    assert "2 assumptions" in text


def test_proposals_carry_the_numbers_under_which_they_are_taken_and_their_price():
    (one,) = doubler().filter.proposals
    several = tuple(replace(one, order=3 + i, price=f"{i} dB of loss") for i in range(4))
    stages = tuple(
        replace(doubler(), name=name, filter=replace(doubler().filter, proposals=several)) for name in ("d", "e")
    )
    text = shown(plan=replace(example_plan(), stages=stages))
    rows = [row.split() for row in text.splitlines() if "Cheb" in row and "ladder-shunt" in row and row[1:2] == "."]
    assert [(row[:2], row[3]) for row in rows] == [
        (["1.", "d:"], "3"),
        (["2.", "d:"], "4"),
        (["5.", "e:"], "3"),
        (["6.", "e:"], "4"),
    ]
    assert "price: 0 dB of loss" in words(text)
    assert "harmonic-planner apply SCENARIO N (4 more, counted in the same order, in plan.json)" in words(text)
    assert "more" not in words(shown()).partition("apply SCENARIO N")[2].partition("Self-check")[0]


def test_a_proposal_says_resonator_kit_and_impedance_where_they_are_not_those_of_the_stage():
    (one,) = doubler().filter.proposals
    coupled = replace(one, topology="capacitive", resonator=8.2e-9, kit="air-wound", impedance_ohm=100.0)
    low_pass = replace(one, topology="low-pass", centre_hz=260e6, bandwidth_hz=260e6, worst_verdict="ok")
    filter_plan = replace(doubler().filter, proposals=(coupled, low_pass))
    text = words(shown(plan=replace(example_plan(), stages=(replace(doubler(), name="d", filter=filter_plan),))))
    assert "1. d: Cheb 5 capacitive with 8.2 nH of air-wound, 20.2 % at 119 MHz, 100 ohm inside: loss" in text
    assert "2. d: Cheb 5 low-pass, cut-off 260 MHz: loss 1.8 dB, all parts ok, least" in text


def test_a_stage_for_which_nothing_helps_says_so():
    filter_plan = replace(doubler().filter, proposals=(), proposals_note="no ladder can be built here")
    plan = replace(example_plan(), stages=(replace(doubler(), name="d", filter=filter_plan),))
    assert "- d: no ladder can be built here" in shown(plan=plan)


def test_a_proposal_that_cannot_be_built_is_not_shown_as_help():
    (proposal,) = doubler().filter.proposals
    filter_plan = replace(doubler().filter, proposals=(replace(proposal, buildable=False),))
    text = words(shown(plan=replace(example_plan(), stages=(replace(doubler(), name="d", filter=filter_plan),))))
    assert "Cheb 5" not in text
    assert "- d: nothing that was tried can be built" in text


def test_a_filter_that_was_not_found_is_no_filter():
    missing = replace(doubler(), filter=replace(doubler().filter, family=None, order=None, elements=()))
    assert "no filter" in shown(plan=replace(example_plan(), stages=(missing,)))


def test_a_failed_self_check_stands_out():
    assert "Self-check FAILED" in shown(plan=replace(example_plan(), self_check=False))


def test_names_are_shown_as_they_are_and_cannot_steer_the_terminal():
    plan = replace(example_plan(), title="a\x1b[2J[red]b[/red]", warnings=("\x07\x1b]0;x",))
    text = shown(plan=plan, force_terminal=True)
    assert "[red]b[/red]" in text
    assert "\x1b[2J" not in text
    assert "\x1b]0" not in text
    assert "\x07" not in text


def test_a_pipe_gets_plain_text_of_eighty_columns(capsys):
    terminal.show_plan(example_plan(), console())
    text = capsys.readouterr().out
    assert "\x1b" not in text
    assert max(map(len, text.splitlines())) <= 80


def test_lines_shows_every_node_and_counts_what_it_leaves_out():
    text = shown(terminal.show_lines)
    assert "Source: line 1, 19.9–20.1 MHz" in text
    first = section(text, "Stage 1, first tripler: ×3 to line 3, 59.7–60.3 MHz, 12.2 dBm; filter Cheb 3")
    rows = {row.split()[0]: row.split()[3:] for row in first if row.strip()[:1].isdigit() and "MHz" in row}
    assert rows["2"] == ["-40.0", "-22.0", "-61.0"]
    assert rows["1"] == ["–", "8.5", "-52.0"]
    assert "9" not in rows
    assert "1 more lines below -150 dBc" in text
