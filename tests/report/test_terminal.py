"""What a person reads: the verdict first, 80 columns, nothing that a terminal would obey."""

import io
from dataclasses import replace

import pytest
from rich.console import Console

from harmonic_planner.report import terminal

from plan_fixture import SWAMPED_REASON, doubler, example_plan


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


def test_parts_that_are_not_ok_are_shown_worst_first_with_their_reason():
    rows = section(shown(), "Parts to look at")
    verdicts = [word for row in rows for word in row.split() if word in ("ok", "marginal", "swamped")]
    assert verdicts == ["swamped", "marginal"]
    assert SWAMPED_REASON in words(" ".join(row[50:] for row in rows))


def test_proposals_warnings_cautions_checks_and_assumptions_are_there():
    text = words(shown())
    assert "resonators: Cheb 5 ladder-shunt, 20.2 % at 119 MHz, loss 1.8 dB; worst part marginal (C3), least" in text
    plan = example_plan()
    for sentence in (*plan.warnings, *plan.cautions, *plan.self_checks):
        assert sentence in text
    assert "2 assumptions" in text


def test_proposals_carry_the_numbers_under_which_they_are_taken_and_their_price():
    (one,) = doubler().filter.proposals
    several = tuple(replace(one, change=f"change {i}", price=f"{i} dB of loss") for i in range(4))
    stages = tuple(
        replace(doubler(), name=name, filter=replace(doubler().filter, proposals=several)) for name in ("d", "e")
    )
    text = shown(plan=replace(example_plan(), stages=stages))
    rows = [row for row in text.splitlines() if "change" in row]
    assert [row.split(":")[0] for row in rows] == ["1. d", "2. d", "5. e", "6. e"]
    assert "price: 0 dB of loss" in words(text)
    assert "harmonic-planner apply SCENARIO N (4 more, counted in the same order, in plan.json)" in words(text)
    assert "more" not in words(shown()).partition("apply SCENARIO N")[2].partition("Self-check")[0]


def test_a_stage_for_which_nothing_helps_says_so():
    filter_plan = replace(doubler().filter, proposals=(), proposals_note="no ladder can be built here")
    plan = replace(example_plan(), stages=(replace(doubler(), name="d", filter=filter_plan),))
    assert "- d: no ladder can be built here" in shown(plan=plan)


def test_a_proposal_that_cannot_be_built_is_not_shown_as_help():
    (proposal,) = doubler().filter.proposals
    filter_plan = replace(doubler().filter, proposals=(replace(proposal, buildable=False),))
    text = words(shown(plan=replace(example_plan(), stages=(replace(doubler(), name="d", filter=filter_plan),))))
    assert "wider band" not in text
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
    terminal.show_plan(example_plan(), terminal.console())
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
