"""What a person reads of a chain as it is: what a plan shows, the drive of every stage, and how the bench compares."""

from rich.console import Console
from rich.table import Table
from rich.text import Text

from harmonic_planner.model import Plan
from harmonic_planner.planning.comparison import Comparison
from harmonic_planner.report.console import bullet, bullets, heading, section, table
from harmonic_planner.report.terminal import show_plan
from harmonic_planner.report.text import decibels, line_name, printable, span


def show_budget(plan: Plan, comparison: Comparison | None, screen: Console) -> None:
    """Show a budget.

    Parameters
    ----------
    plan : Plan
        As `hardware.budget` gives it.
    comparison : Comparison or None
        With measured lines, where there are any.
    screen : Console
        Where to show it.
    """
    show_plan(plan, screen)
    section(screen, "Drive of every stage", _drive_table(plan))
    if comparison is not None:
        show_comparison(comparison, screen)


def show_comparison(comparison: Comparison, screen: Console) -> None:
    """Show measured against computed lines, and what explains the difference."""
    section(screen, "Measured at the output, dBc", _lines_table(comparison))
    bullets(screen, "What the measured lines say", comparison.findings)
    heading(screen, "One change each, the likeliest first; dB rms that it leaves")
    for each in comparison.explanations:
        bullet(screen, Text(printable(f"{each.text}: {decibels(each.rms_db)} dB")))
    bullets(screen, "How they were compared", comparison.notes)


def _drive_table(plan: Plan) -> Table:
    """One row per stage: what drives it, what it gives, what its filter is."""
    made = table("stage", "in\ndBm", "out\ndBm", "filter", right=("in\ndBm", "out\ndBm"))
    for number, stage in enumerate(plan.stages, start=1):
        made.add_row(
            Text(f"{number} {printable(stage.name)}"),
            decibels(stage.drive_dbm),
            decibels(stage.output_dbm),
            Text(printable(stage.filter.reason or stage.filter.source)),
        )
    return made


def _lines_table(comparison: Comparison) -> Table:
    """One row per measured line."""
    heads = ("measured", "computed", "phases give", "explained")
    made = table("line", "frequency", *heads, right=("line", *heads), fixed=("frequency",))
    for line in comparison.lines:
        made.add_row(
            line_name(line.line),
            span((line.frequency_hz, line.frequency_hz)),
            decibels(line.measured_dbc),
            decibels(line.computed_dbc),
            f"{decibels(line.phases_dbc[0])} to {decibels(line.phases_dbc[1])}",
            decibels(line.explained_dbc),
        )
    return made
