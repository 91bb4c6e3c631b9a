"""What a person reads on the terminal: the verdict first, then why, then what would help."""

import math
from collections.abc import Sequence

from rich.console import Console
from rich.table import Table
from rich.text import Text

from harmonic_planner.export.nodes import line_frequency_hz, origins_text
from harmonic_planner.export.proposals import NumberedProposal, numbered_proposals
from harmonic_planner.export.values import frequency_scale, number_text
from harmonic_planner.model import (
    VERDICT_RANK,
    AllocationPlan,
    ElementVerdict,
    FilterPlan,
    LineLevel,
    OutputLine,
    Plan,
    StagePlan,
)
from harmonic_planner.report.around import show_around, show_why
from harmonic_planner.report.console import STYLES, bullet, bullets, heading, section, table, verdict_line
from harmonic_planner.report.parts import show_doubts
from harmonic_planner.report.text import (
    band_words,
    circuit_words,
    decibels,
    filter_name,
    is_one_sided,
    line_name,
    printable,
    span,
    span_of,
)

FAINTEST_DBC = -150.0
"""Lines below this at every node of a stage are counted, not shown."""

_WORST_LINES = 5
_PROPOSALS_PER_STAGE = 2
_LEAST_SHARE = 0.1
_LONGEST_TOPOLOGY = 13
"""A longer name is broken at a hyphen, so that the table of stages stays within the width."""
_MEASURED = ("touchstone", "table")


def show_plan(plan: Plan, screen: Console) -> None:
    """Show a plan: verdict, stages, worst output lines, parts to look at, proposals, warnings, cautions.

    Parameters
    ----------
    plan : Plan
        The plan.
    screen : Console
        Where to show it.
    """
    verdict_line(screen, plan.sentence, good=plan.exit_status == 0)
    screen.print(Text(printable(plan.title), style="dim"))
    section(screen, "Stages", _stage_table(plan))
    if plan.allocation is not None:
        screen.print(allocation_words(plan.allocation))
    show_why(plan, screen)
    for stage in plan.stages[:-1]:
        if stage.limited_lines:
            head = f"Lines behind {printable(stage.name)} with the least margin"
            section(screen, head, _worst_lines_table(stage.limited_lines))
    section(screen, "Output lines with the least margin", _worst_lines_table(plan.output.lines))
    show_doubts(plan, screen)
    _proposals(plan, screen)
    show_around(plan, screen)
    bullets(screen, "Self-check" if plan.self_check else "Self-check FAILED", plan.self_checks)
    bullets(screen, "Warnings", merged(plan.warnings, [stage.name for stage in plan.stages]))
    bullets(screen, "Cautions", plan.cautions)
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
    heading(screen, f"Source: line 1, {span(source_hz)}")
    if plan.source_lines:
        _comb_table(plan, screen, (("source", plan.source_lines),))
    else:
        screen.print("no other line")
    for number, stage in enumerate(plan.stages, start=1):
        heading(
            screen,
            f"Stage {number}, {printable(stage.name)}: ×{stage.times} to line {line_name(stage.line)}, "
            f"{span(stage.frequency_hz)}, {decibels(stage.output_dbm)} dBm; filter {_filter_words(stage.filter)}",
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


def allocation_words(allocation: AllocationPlan) -> str:
    """Say how many resonators all stages need together, and whether fewer could do.

    Parameters
    ----------
    allocation : AllocationPlan
        The count as built, and what the search proved.

    Returns
    -------
    str
    """
    count = f"Allocation: {allocation.total} resonator{'s' if allocation.total != 1 else ''}"
    if allocation.proven:
        return f"{count} in all, proven the least for these candidates"
    return f"{count}; at least {allocation.lower_bound} are needed ({allocation.total} is not proven the least)"


def merged(texts: Sequence[str], stage_names: Sequence[str]) -> list[str]:
    """Say once what is said of several stages alike.

    Parameters
    ----------
    texts : sequence of str
        Sentences, those about a stage with its name and a colon before them.
    stage_names : sequence of str
        Names of the stages.

    Returns
    -------
    list of str
        In the order in which each is first said.

    Examples
    --------
    >>> merged(["a: too hot", "no lines given", "b: too hot"], ["a", "b"])
    ['a, b: too hot', 'no lines given']
    """
    names: dict[str, list[str]] = {}
    for text in texts:
        name, colon, said = text.partition(": ")
        about_stage = bool(colon) and name in stage_names
        names.setdefault(said if about_stage else text, []).extend([name] if about_stage else [])
    return [f"{', '.join(of)}: {said}" if of else said for said, of in names.items()]


def _stage_table(plan: Plan) -> Table:
    """One row per stage; kits stand below the topologies where there is more than one."""
    scale, unit = frequency_scale(min(stage.frequency_hz[1] for stage in plan.stages))
    kits = {stage.filter.kit for stage in plan.stages if stage.filter.kit}
    carrier, centre = f"carrier\n{unit}", f"centre\n{unit}"
    circuit = "topology,\nkit" if len(kits) > 1 else "topology"
    right = (carrier, "band\n%", centre, "loss\ndB", "margin\ndB")
    circuits = [_circuit_lines(stage.filter, with_kit=len(kits) > 1) for stage in plan.stages]
    narrow = all(len(line) <= _LONGEST_TOPOLOGY for lines in circuits for line in lines)
    made = table(
        *("stage", carrier, "filter", "band\n%", centre, circuit, "loss\ndB", "margin\ndB", "parts"),
        right=right,
        fixed=("filter", "parts", circuit) if narrow else ("filter", "parts"),
        gap=1,
    )
    for number, (stage, lines) in enumerate(zip(plan.stages, circuits, strict=True), start=1):
        filter_plan = stage.filter
        margins = [need.margin_db for need in filter_plan.requirement if need.required_db > 0]
        parts = _parts(filter_plan)
        made.add_row(
            Text(f"{number} {printable(stage.name)}"),
            span_of(stage.frequency_hz, scale),
            _filter_words(filter_plan),
            _band_percent(filter_plan),
            "–" if filter_plan.centre_hz is None else number_text(filter_plan.centre_hz / scale),
            Text("\n".join(lines)),
            decibels(filter_plan.loss_db),
            decibels(min(margins, default=None), signed=True),
            Text(parts, style=STYLES.get(parts, "")),
        )
    return made


def _band_percent(made: FilterPlan) -> str:
    """Write a bandpass's bandwidth as a share of its centre."""
    if not made.bandwidth_hz or not made.centre_hz or is_one_sided(made.topology):
        return "–"
    return f"{100 * made.bandwidth_hz / made.centre_hz:.1f}"


def _circuit_lines(made: FilterPlan, *, with_kit: bool) -> list[str]:
    """Write a filter's topology, a long name broken behind its last hyphen, and below it the kit."""
    name = made.topology or "–"
    start, hyphen, end = name.rpartition("-")
    lines = [start + hyphen, end] if hyphen and len(name) > _LONGEST_TOPOLOGY else [name]
    return [*lines, printable(made.kit)] if with_kit and made.kit else lines


def _parts(made: FilterPlan) -> str:
    """Say whether a filter can be built: the worst verdict over its parts."""
    if made.source == "none":
        return "–"
    if made.source in _MEASURED:
        return "measured"
    if made.family is None:
        return "no filter"
    if not made.elements:
        return "prototype"
    worst: ElementVerdict = max((part.verdict for part in made.elements), key=lambda verdict: VERDICT_RANK[verdict])
    return worst


def _worst_lines_table(lines: Sequence[OutputLine]) -> Table:
    """List the lines at an output that come closest to their limit, and where each comes from."""
    made = table(
        *("line", "frequency", "dBc", "limit", "margin\ndB", "cause"),
        right=("dBc", "limit", "margin\ndB"),
        fixed=("line", "frequency"),
    )
    limited = [line for line in lines if line.margin_db is not None]
    for line in sorted(limited, key=_margin)[:_WORST_LINES]:
        main = origins_text(line.origins, at_least=_LEAST_SHARE) or origins_text(line.origins)
        made.add_row(
            line_name(line.line),
            span(line.frequency_hz),
            decibels(line.level_dbc),
            decibels(line.limit_dbc),
            Text(decibels(line.margin_db, signed=True), style="red" if _margin(line) < 0 else ""),
            Text(printable(main)),
        )
    return made


def _margin(line: OutputLine) -> float:
    """Order lines by margin; those without a limit come last."""
    return math.inf if line.margin_db is None else line.margin_db


def _proposals(plan: Plan, screen: Console) -> None:
    """Show what would help each stage whose filter is doubtful, with the numbers under which `apply` takes it."""
    numbered = numbered_proposals(plan)
    if not numbered and not any(stage.filter.proposals_note for stage in plan.stages):
        return
    heading(screen, "What would help (each designed anew and run through the chain)")
    shown = 0
    for i, stage in enumerate(plan.stages):
        name, every = printable(stage.name), [each for each in numbered if each.stage_index == i]
        best = [each for each in every if each.proposal.buildable][:_PROPOSALS_PER_STAGE]
        shown += len(best)
        for each in best:
            bullet(screen, _proposal_text(stage, each), mark=f"{each.number}.")
        if stage.filter.proposals_note:
            bullet(screen, Text(f"{name}: {printable(stage.filter.proposals_note)}"))
        elif every and not best:
            bullet(screen, Text(f"{name}: nothing that was tried can be built; plan.json says what was"))
    if numbered:
        more = (
            f" ({len(numbered) - shown} more, counted in the same order, in plan.json)" if len(numbered) > shown else ""
        )
        screen.print(f"Take one with its number: harmonic-planner apply SCENARIO N{more}")


def _proposal_text(stage: StagePlan, numbered: NumberedProposal) -> Text:
    """Say one proposal: the filter it is, what it buys and what it costs."""
    proposal, now = numbered.proposal, stage.filter
    words = [
        f"{stage.name}: "
        + circuit_words(proposal.family, proposal.order, proposal.topology, proposal.resonator)
        + (f" of {proposal.kit}" if proposal.kit and proposal.kit != now.kit else ""),
        band_words(proposal.topology, bandwidth_hz=proposal.bandwidth_hz, centre_hz=proposal.centre_hz),
    ]
    if now.impedance_ohm is not None and proposal.impedance_ohm != now.impedance_ohm:
        words.append(f"{proposal.impedance_ohm:g} ohm inside")
    text = Text(printable(f"{', '.join(words)}: loss {decibels(proposal.loss_db)} dB, "))
    text.append("all parts " if proposal.worst_verdict == "ok" else "worst part ")
    text.append(proposal.worst_verdict, style=STYLES[proposal.worst_verdict])
    part = printable(proposal.worst_element).partition(":")[0]
    text.append(f" ({part})" if part and proposal.worst_verdict != "ok" else "")
    text.append(f", least output margin {decibels(proposal.worst_margin_db, signed=True)} dB")
    text.append(f"; price: {printable(proposal.price)}" if proposal.price else "")
    return text


def _filter_words(made: FilterPlan) -> str:
    """Name a filter in a narrow column or a heading."""
    if made.source in _MEASURED:
        return "measured"
    if made.family is None and made.source != "none":
        return "none found"
    return filter_name(made.family, made.order)


def _comb_table(plan: Plan, screen: Console, columns: Sequence[tuple[str, Sequence[LineLevel]]]) -> None:
    """Show the levels of every line at a stage's nodes side by side, and count those too faint to matter."""
    levels = [{level.line: level.level_dbc for level in node} for _, node in columns]
    heads = [head for head, _ in columns]
    made = table("line", "frequency", *heads, right=("line", *heads), fixed=("frequency",))
    every = sorted({line for node in levels for line in node})
    strong = [line for line in every if max(node.get(line, -math.inf) for node in levels) >= FAINTEST_DBC]
    for line in strong:
        made.add_row(
            line_name(line),
            span(line_frequency_hz(plan, line)),
            *(decibels(node[line]) if line in node else "–" for node in levels),
        )
    screen.print(made if strong else Text("no line"))
    if len(every) > len(strong):
        screen.print(f"{len(every) - len(strong)} more lines below {FAINTEST_DBC:.0f} dBc at every one of these nodes")
