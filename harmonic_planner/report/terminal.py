"""What a person reads on the terminal: the verdict first, then why, then what would help."""

import math
from collections.abc import Iterable, Sequence

from rich import box
from rich.console import Console
from rich.table import Table
from rich.text import Text

from harmonic_planner.export.nodes import line_frequency_hz, origins_text
from harmonic_planner.export.proposals import NumberedProposal, numbered_proposals
from harmonic_planner.model import VERDICT_RANK, ElementVerdict, LineLevel, OutputLine, Plan, StagePlan
from harmonic_planner.report.text import (
    decibels,
    filter_name,
    frequency_scale,
    line_name,
    number_text,
    printable,
    quantity,
    span,
    span_of,
)

WIDTH = 80
FAINTEST_DBC = -150.0
"""Lines below this at every node of a stage are counted, not shown."""

_WORST_LINES = 5
_MOST_FLAGS = 12
_PROPOSALS_PER_STAGE = 2
_LEAST_SHARE = 0.1
_LONGEST_TOPOLOGY = 13
"""A longer name wraps, so that the table of stages stays within the width."""
_STYLES = {"ok": "green", "marginal": "yellow", "swamped": "bold red", "no filter": "bold red"}


def console() -> Console:
    """Return a console on standard output; 80 columns and no colour where that is not a terminal."""
    probe = Console(highlight=False, markup=False, emoji=False)
    return (
        probe if probe.is_terminal else Console(width=WIDTH, highlight=False, markup=False, emoji=False, no_color=True)
    )


def show_plan(plan: Plan, screen: Console) -> None:
    """Show a plan: verdict, stages, worst output lines, flags, proposals, warnings, cautions.

    Parameters
    ----------
    plan : Plan
        The plan.
    screen : Console
        Where to show it.
    """
    good = plan.exit_status == 0
    screen.print(Text(printable(plan.sentence), style="bold green" if good else "bold red"))
    screen.print(Text(printable(plan.title), style="dim"))
    _section(screen, "Stages", _stage_table(plan))
    _section(screen, "Output lines with the least margin", _worst_lines_table(plan))
    _flags(plan, screen)
    _proposals(plan, screen)
    _bullets(screen, "Self-check" if plan.self_check else "Self-check FAILED", plan.self_checks)
    _bullets(screen, "Warnings", plan.warnings)
    _bullets(screen, "Cautions", plan.cautions)
    if plan.assumptions:
        screen.print()
        count = len(plan.assumptions)
        screen.print(
            f"{count} assumption{'s' if count > 1 else ''} shaped this plan; plan.json lists them as `assumptions`."
        )


def show_lines(plan: Plan, screen: Console) -> None:
    """Show the comb at every node.

    Parameters
    ----------
    plan : Plan
        The plan.
    screen : Console
        Where to show it.

    Notes
    -----
    Levels are relative to the carrier at the same node. A stage's output is behind its filter and its amplifier.
    """
    screen.print(Text(printable(plan.title), style="bold"))
    screen.print("Levels in dBc, relative to the carrier at the same node; worst over the span.")
    first = plan.stages[0]
    source_hz = (float(first.frequency_hz[0] / first.line), float(first.frequency_hz[1] / first.line))
    screen.print()
    screen.print(Text(f"Source: line 1, {span(source_hz)}", style="bold"))
    if plan.source_lines:
        _comb_table(plan, screen, (("source", plan.source_lines),))
    else:
        screen.print("no other line")
    for number, stage in enumerate(plan.stages, start=1):
        screen.print()
        screen.print(
            Text(
                f"Stage {number}, {printable(stage.name)}: ×{stage.times} to line {line_name(stage.line)}, "
                f"{span(stage.frequency_hz)}, {decibels(stage.output_dbm)} dBm; "
                f"filter {_filter_words(stage)}",
                style="bold",
            )
        )
        _comb_table(
            plan,
            screen,
            (
                ("at the input", stage.input_lines),
                ("multiplier output", stage.device_lines),
                ("stage output", stage.output_lines),
            ),
        )


def _table(*columns: str, right: Iterable[str] = (), fixed: Iterable[str] = (), gap: int = 2) -> Table:
    """Make an empty table with a rule under its heads; numbers stand to the right, fixed columns never wrap."""
    table = Table(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, gap - 1, 0, 0), header_style="bold")
    aligned = set(right)
    unbroken = aligned | set(fixed)
    for column in columns:
        table.add_column(
            column, justify="right" if column in aligned else "left", overflow="fold", no_wrap=column in unbroken
        )
    return table


def _section(screen: Console, title: str, table: Table) -> None:
    """Show a table under its title."""
    screen.print()
    screen.print(Text(title, style="bold"))
    screen.print(table if table.row_count else Text("none"))


def _bullets(screen: Console, title: str, texts: Sequence[str]) -> None:
    """Show sentences, if any, one after the other under a title."""
    if not texts:
        return
    screen.print()
    screen.print(Text(title, style="bold"))
    for text in texts:
        _bullet(screen, Text(printable(text)))


def _bullet(screen: Console, text: Text, mark: str = "-") -> None:
    """Show one sentence, indented behind a dash or another mark."""
    grid = Table.grid(padding=(0, 1, 0, 0))
    grid.add_row(mark, text)
    screen.print(grid)


def _stage_table(plan: Plan) -> Table:
    """One row per stage."""
    scale, unit = frequency_scale(min(stage.frequency_hz[1] for stage in plan.stages))
    carrier, centre = f"carrier\n{unit}", f"centre\n{unit}"
    longest = max(len(stage.filter.topology or "") for stage in plan.stages)
    right = (carrier, "band\n%", centre, "loss\ndB", "margin\ndB")
    table = _table(
        *("stage", carrier, "filter", "band\n%", centre, "topology", "loss\ndB", "margin\ndB", "parts"),
        right=right,
        fixed=("filter", "parts", "topology") if longest <= _LONGEST_TOPOLOGY else ("filter", "parts"),
        gap=1,
    )
    for number, stage in enumerate(plan.stages, start=1):
        made = stage.filter
        band = made.bandwidth_hz / made.centre_hz if made.bandwidth_hz and made.centre_hz else None
        margins = [need.margin_db for need in made.requirement if need.required_db > 0]
        parts = _parts(stage)
        table.add_row(
            Text(f"{number} {printable(stage.name)}"),
            span_of(stage.frequency_hz, scale),
            filter_name(made.family, made.order),
            "–" if band is None else f"{100 * band:.1f}",
            "–" if made.centre_hz is None else number_text(made.centre_hz / scale),
            made.topology or "–",
            decibels(made.loss_db),
            decibels(min(margins, default=None), signed=True),
            Text(parts, style=_STYLES.get(parts, "")),
        )
    return table


def _parts(stage: StagePlan) -> str:
    """Say whether a stage's filter can be built: the worst verdict over its parts."""
    made = stage.filter
    if made.source == "none":
        return "–"
    if made.family is None:
        return "no filter"
    if not made.elements:
        return "prototype"
    worst: ElementVerdict = max((part.verdict for part in made.elements), key=lambda verdict: VERDICT_RANK[verdict])
    return worst


def _worst_lines_table(plan: Plan) -> Table:
    """List the output lines that come closest to their limit, and where each comes from."""
    table = _table(
        *("line", "frequency", "dBc", "limit", "margin\ndB", "cause"),
        right=("dBc", "limit", "margin\ndB"),
        fixed=("line", "frequency"),
    )
    limited = [line for line in plan.output.lines if line.margin_db is not None]
    for line in sorted(limited, key=_margin)[:_WORST_LINES]:
        main = origins_text(line.origins, at_least=_LEAST_SHARE) or origins_text(line.origins)
        table.add_row(
            line_name(line.line),
            span(line.frequency_hz),
            decibels(line.level_dbc),
            decibels(line.limit_dbc),
            Text(decibels(line.margin_db, signed=True), style="red" if _margin(line) < 0 else ""),
            Text(printable(main)),
        )
    return table


def _margin(line: OutputLine) -> float:
    """Order lines by margin; those without a limit come last."""
    return math.inf if line.margin_db is None else line.margin_db


def _flags(plan: Plan, screen: Console) -> None:
    """Show the parts that strays or the kit's range make doubtful, worst first."""
    flagged = [(stage, part) for stage in plan.stages for part in stage.filter.elements if part.verdict != "ok"]
    if not flagged:
        return
    flagged.sort(key=lambda pair: -VERDICT_RANK[pair[1].verdict])
    table = _table("stage", "part", "value", "verdict", "reason", fixed=("part", "value", "verdict"))
    for stage, part in flagged[:_MOST_FLAGS]:
        table.add_row(
            Text(printable(stage.name)),
            part.ref,
            quantity(part.ideal, part.unit, 3),
            Text(part.verdict, style=_STYLES[part.verdict]),
            Text(printable(part.reason)),
        )
    _section(screen, "Parts to look at", table)
    if len(flagged) > _MOST_FLAGS:
        screen.print(f"and {len(flagged) - _MOST_FLAGS} more in elements.csv")


def _proposals(plan: Plan, screen: Console) -> None:
    """Show what would help each stage whose filter is doubtful, with the numbers under which `apply` takes it."""
    numbered = numbered_proposals(plan)
    if not numbered and not any(stage.filter.proposals_note for stage in plan.stages):
        return
    screen.print()
    screen.print(Text("What would help (each designed anew and run through the chain)", style="bold"))
    shown = 0
    for i, stage in enumerate(plan.stages):
        name, every = printable(stage.name), [each for each in numbered if each.stage_index == i]
        best = [each for each in every if each.proposal.buildable][:_PROPOSALS_PER_STAGE]
        shown += len(best)
        for each in best:
            _bullet(screen, _proposal_text(name, each), mark=f"{each.number}.")
        if stage.filter.proposals_note:
            _bullet(screen, Text(f"{name}: {printable(stage.filter.proposals_note)}"))
        elif every and not best:
            _bullet(screen, Text(f"{name}: nothing that was tried can be built; plan.json says what was"))
    if numbered:
        more = (
            f" ({len(numbered) - shown} more, counted in the same order, in plan.json)" if len(numbered) > shown else ""
        )
        screen.print(f"Take one with its number: harmonic-planner apply SCENARIO N{more}")


def _proposal_text(stage_name: str, numbered: NumberedProposal) -> Text:
    """Say one proposal with what it buys and costs."""
    proposal = numbered.proposal
    text = Text(
        f"{stage_name}: {printable(proposal.change)}: {filter_name(proposal.family, proposal.order)} "
        f"{proposal.topology}, {100 * proposal.bandwidth_hz / proposal.centre_hz:.1f} % at "
        f"{quantity(proposal.centre_hz, 'Hz')}, loss {decibels(proposal.loss_db)} dB; worst part "
    )
    text.append(proposal.worst_verdict, style=_STYLES[proposal.worst_verdict])
    part = printable(proposal.worst_element).partition(":")[0]
    text.append(f" ({part})" if part else "")
    text.append(f", least output margin {decibels(proposal.worst_margin_db, signed=True)} dB")
    text.append(f"; price: {printable(proposal.price)}" if proposal.price else "")
    return text


def _filter_words(stage: StagePlan) -> str:
    """Name a stage's filter in a heading."""
    made = stage.filter
    if made.family is None:
        return "none" if made.source == "none" else "none found"
    return filter_name(made.family, made.order)


def _comb_table(plan: Plan, screen: Console, columns: Sequence[tuple[str, Sequence[LineLevel]]]) -> None:
    """Show the levels of every line at a stage's nodes side by side, and count those too faint to matter."""
    levels = [{level.line: level.level_dbc for level in node} for _, node in columns]
    heads = [head for head, _ in columns]
    table = _table("line", "frequency", *heads, right=("line", *heads), fixed=("frequency",))
    every = sorted({line for node in levels for line in node})
    strong = [line for line in every if max(node.get(line, -math.inf) for node in levels) >= FAINTEST_DBC]
    for line in strong:
        table.add_row(
            line_name(line),
            span(line_frequency_hz(plan, line)),
            *(decibels(node[line]) if line in node else "–" for node in levels),
        )
    screen.print(table if strong else Text("no line"))
    if len(every) > len(strong):
        screen.print(f"{len(every) - len(strong)} more lines below {FAINTEST_DBC:.0f} dBc at every one of these nodes")
