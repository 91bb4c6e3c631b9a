"""What a person reads around a plan: why it takes so many resonators, and what would change that."""

from collections.abc import Sequence

from rich.console import Console
from rich.text import Text

from harmonic_planner.model import Plan, TradePoint, WhatIf
from harmonic_planner.report.console import bullet, heading, section, table
from harmonic_planner.report.text import decibels, printable

_SMALL_DB = 0.2
"""A change of margin that is not worth a row."""


def show_why(plan: Plan, screen: Console) -> None:
    """Show what holds the count of resonators up, if that is known."""
    if plan.why is None:
        return
    sentence = plan.why.sentence
    screen.print(Text(printable(f"{sentence[:1].upper()}{sentence[1:]}.")))
    for stage in plan.why.stages:
        bullet(screen, Text(printable(stage.text)))


def show_around(plan: Plan, screen: Console) -> None:
    """Show what changes to the chain would do, and resonators against bandwidth, where a plan has them."""
    if plan.what_if:
        _show_what_if(plan, screen)
    if plan.trade:
        _show_trade(plan.trade, [stage.name for stage in plan.stages], screen)


def telling(rows: Sequence[WhatIf]) -> list[WhatIf]:
    """Return the rows that change something, the fewest resonators first, then the largest margin.

    Parameters
    ----------
    rows : sequence of WhatIf

    Returns
    -------
    list of WhatIf
        Without those that leave count and verdict alone and move the margin by less than 0.2 dB.
    """
    changed = [
        row
        for row in rows
        if (row.total, row.met) != (row.total_now, row.met_now)
        or round(abs(row.margin_db - row.margin_now_db), 6) >= _SMALL_DB
    ]
    return sorted(changed, key=lambda row: (not row.met, row.total, -row.margin_db))


def _show_what_if(plan: Plan, screen: Console) -> None:
    now, shown = plan.what_if[0], telling(plan.what_if)
    made = table("change", "resonators", "margin\ndB", "price", right=("resonators", "margin\ndB"))
    for row in shown:
        made.add_row(
            Text(printable(row.change + (f" ({row.note})" if row.note else ""))),
            Text(f"{row.total}" if row.met else f"{row.total}, not met", style="" if row.met else "red"),
            decibels(row.margin_db, signed=True),
            Text(printable(row.price or "–")),
        )
    section(screen, "What if (each searched anew, none built)", made)
    count = f"{now.total_now} resonators" if now.met_now else f"{now.total_now} resonators, not met"
    screen.print(f"Now: {count}, margin {decibels(now.margin_now_db, signed=True)} dB, by the same search.")
    if plan.allocation is not None and plan.allocation.total != now.total_now:
        more = ": strays and grid values cost the rest" if plan.allocation.total > now.total_now else ""
        screen.print(f"The filters as built take {plan.allocation.total}{more}.")
    still = len(plan.what_if) - len(shown)
    if still:
        screen.print(f"{still} more change{'s' if still > 1 else ''} would do next to nothing; plan.json has them.")


def _show_trade(points: Sequence[TradePoint], names: Sequence[str], screen: Console) -> None:
    heading(screen, "Resonators against bandwidth")
    made = table("resonators", "every bandpass at least", "by stage", "margin\ndB", right=("resonators", "margin\ndB"))
    for point in points:
        wide = f"{100 * point.bandwidth:.1f} % wide" + (", the widest tried" if point.widest_tried else "")
        made.add_row(
            str(point.total),
            wide,
            Text(" + ".join(str(n) for n in point.resonators)),
            decibels(point.margin_db, signed=True),
        )
    screen.print(made)
    if len(names) == 1:
        return
    screen.print(Text(printable(f"By stage: {' + '.join(names)}. Each least bandwidth is raised by the same factor.")))
