"""The parts of filters on the terminal: which of a plan's to look at, and all of one filter's."""

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from rich import box
from rich.console import Console
from rich.table import Table
from rich.text import Text

from harmonic_planner.export.values import quantity, stress_share, to_buy
from harmonic_planner.filters import flags
from harmonic_planner.model import VERDICT_RANK, ElementReport, ElementVerdict, Plan, StagePlan
from harmonic_planner.report.console import STYLES, heading, table
from harmonic_planner.report.text import printable

STRESSED = 0.8
"""Share of a rating beyond which a part is shown; common practice, no source (memory)."""

_OF_THE_FILTER = ", below the highest line to reject"
"""A remark about the whole filter, which one of its parts makes for all."""
_MOST = 12
_WIDTHS = {"part": 4, "to buy": 17, "verdict": 8}
_GAP = 2


@dataclass(frozen=True)
class Doubt:
    """A part to look at, and why."""

    stage: StagePlan
    part: ElementReport
    reason: str


def doubts(plan: Plan) -> list[Doubt]:
    """Return the parts that strays, the kit's range or the power make doubtful, the gravest first.

    Parameters
    ----------
    plan : Plan
        The plan.

    Returns
    -------
    list of Doubt
        Parts whose verdict is not ok, and parts that bear more than `STRESSED` of a rating.
    """
    found = []
    for stage in plan.stages:
        for part in stage.filter.elements:
            reasons = [_gravest(part)] if part.verdict != "ok" else []
            reasons += stress_words(part)
            if reasons:
                found.append(Doubt(stage, part, "; ".join(reasons)))
    return sorted(found, key=lambda doubt: (-VERDICT_RANK[doubt.part.verdict], -(stress_share(doubt.part) or 0.0)))


def stress_words(part: ElementReport) -> Iterator[str]:
    """Say which ratings a part comes close to or exceeds, with the numbers."""
    borne = ((part.peak_v, part.rated_v, "V", "V peak"), (part.rms_a, part.rated_a, "A", "A rms"))
    for value, rated, unit, measure in borne:
        if value is not None and rated and value > STRESSED * rated:
            yield f"bears {quantity(value, measure, 3)}, {100 * value / rated:.0f} % of its {quantity(rated, unit, 3)}"


def show_doubts(plan: Plan, screen: Console) -> None:
    """Show the parts to look at, stage by stage, with what is bought for each.

    Parameters
    ----------
    plan : Plan
        The plan.
    screen : Console
        Where to show them; nothing where all parts are good.
    """
    found = doubts(plan)
    if not found:
        return
    heading(screen, "Parts to look at")
    screen.print(_grid(screen, heads=True))
    shown = found[:_MOST]
    for stage in dict.fromkeys(doubt.stage.name for doubt in shown):
        of_stage = [doubt for doubt in shown if doubt.stage.name == stage]
        rows = _grid(screen)
        said = False
        for doubt in of_stage:
            remark, of_filter, _ = doubt.reason.partition(_OF_THE_FILTER)
            rows.add_row(
                doubt.part.ref,
                _buy_text(doubt.part),
                Text(doubt.part.verdict, style=STYLES[doubt.part.verdict]),
                Text(printable(remark if said and of_filter else doubt.reason), style=_reason_style(doubt.part)),
            )
            said = said or bool(of_filter)
        screen.print(Text(printable(_stage_words(of_stage[0].stage)), style="italic"))
        screen.print(rows)
    if len(found) > _MOST:
        screen.print(f"and {len(found) - _MOST} more in elements.csv")


def element_table(parts: Iterable[ElementReport]) -> Table:
    """Tabulate every part of one filter: where it stands, what is bought, what it is by design.

    Parameters
    ----------
    parts : iterable of ElementReport
        From the input to the output.

    Returns
    -------
    rich.table.Table
    """
    made = table(
        *("part", "placed", "to buy", "ideal", "Q", "self-res.", "verdict"),
        right=("ideal", "Q", "self-res."),
        fixed=("part", "placed", "to buy", "verdict"),
    )
    for part in parts:
        made.add_row(
            part.ref,
            part.placement,
            _buy_text(part),
            quantity(part.ideal, part.unit, 3),
            f"{part.q:.0f}",
            quantity(part.self_resonance_hz, "Hz", 3),
            Text(part.verdict, style=STYLES[part.verdict]),
        )
    return made


def element_remarks(parts: Iterable[ElementReport]) -> Iterator[str]:
    """Say what is wrong with the parts of one filter.

    Parameters
    ----------
    parts : iterable of ElementReport

    Yields
    ------
    str
        Parts with the same fault together, with the numbers of the worst of them.
    """
    alike: dict[tuple[ElementVerdict, str], list[ElementReport]] = {}
    for part in sorted(parts, key=lambda part: -VERDICT_RANK[part.verdict]):
        if part.verdict != "ok":
            fault = re.split(r"\d", _gravest(part), maxsplit=1)[0]
            alike.setdefault((part.verdict, fault), []).append(part)
    for (verdict, fault), same in alike.items():
        by_resonance = fault.startswith("self-resonance")
        worst = min(same, key=lambda part: part.self_resonance_hz) if by_resonance else flags.worst(same)
        example = f" ({worst.ref})" if len(same) > 1 else ""
        yield f"{', '.join(part.ref for part in same)} {verdict}: {_gravest(worst)}{example}"


def _gravest(part: ElementReport) -> str:
    """Return the first of a part's reasons, which is the gravest."""
    return part.reason.partition(";")[0]


def _reason_style(part: ElementReport) -> str:
    """Let a part that bears more than it may stand out, whatever its verdict."""
    return "bold red" if (stress_share(part) or 0.0) > 1.0 else ""


def _buy_text(part: ElementReport) -> str:
    """Say what is bought, the nominal value where that is not known."""
    return to_buy(part.bought or (part.nominal,), part.unit)


def _stage_words(stage: StagePlan) -> str:
    """Name a stage with its circuit and kit."""
    return ", ".join(filter(None, (stage.name, stage.filter.topology, stage.filter.kit)))


def _grid(screen: Console, *, heads: bool = False) -> Table:
    """Make a table of parts whose columns stand alike in every stage."""
    made = Table(
        box=box.SIMPLE_HEAD,
        show_edge=False,
        pad_edge=False,
        padding=(0, _GAP - 1, 0, 0),
        header_style="bold",
        show_header=heads,
    )
    for head, width in _WIDTHS.items():
        made.add_column(head, width=width, overflow="fold")
    taken = sum(width + _GAP for width in _WIDTHS.values())
    made.add_column("reason", width=max(screen.width - taken - 1, 20), overflow="fold")
    return made
