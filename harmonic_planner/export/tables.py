"""The plan as tables of comma-separated values, for spreadsheets and scripts."""

import math
from collections.abc import Mapping, Sequence
from fractions import Fraction

import pandas as pd

from harmonic_planner.export.nodes import line_frequency_hz, nodes, origins_text
from harmonic_planner.export.values import to_buy
from harmonic_planner.model import ElementReport, Plan

Cell = str | float | int | bool | Fraction | None

_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n")


def inert(text: str) -> str:
    """Keep a spreadsheet from taking text for a formula.

    Parameters
    ----------
    text : str
        Text of a cell, from the user's scenario or kit.

    Returns
    -------
    str
        The text, with a single quote before it where its first character starts a formula.

    Examples
    --------
    >>> inert("=HYPERLINK(1)"), inert("doubler")
    ("'=HYPERLINK(1)", 'doubler')
    """
    return f"'{text}" if text.lstrip(" ").startswith(_FORMULA_STARTS) else text


def lines_csv(plan: Plan) -> str:
    """Tabulate every line at every node.

    Parameters
    ----------
    plan : Plan
        The plan.

    Returns
    -------
    str
        CSV: node, stage number and name, line, its span [Hz], level relative to that node's carrier [dBc]; at the last
        node also where the line comes from.
    """
    origins = {line.line: origins_text(line.origins) for line in plan.output.lines}
    last = len(plan.stages)
    rows: list[dict[str, Cell]] = []
    for node, number, name, levels in nodes(plan):
        for level in levels:
            low, high = line_frequency_hz(plan, level.line)
            rows.append(
                {
                    "node": node,
                    "stage_number": number,
                    "stage": name,
                    "line": level.line,
                    "frequency_low_hz": low,
                    "frequency_high_hz": high,
                    "level_dbc": level.level_dbc,
                    "origins": origins.get(level.line, "") if (node, number) == ("stage output", last) else "",
                }
            )
    columns = ("node", "stage_number", "stage", "line", "frequency_low_hz", "frequency_high_hz", "level_dbc", "origins")
    return _csv(columns, rows)


def requirements_csv(plan: Plan) -> str:
    """Tabulate what each filter must do, and does.

    Parameters
    ----------
    plan : Plan
        The plan.

    Returns
    -------
    str
        CSV, one row per stage and unwanted line: its span [Hz], the level before the filter [dBc], the rejection
        required, of the ideal filter and as built [dB], and the margin [dB].
    """
    columns = (
        "stage_number",
        "stage",
        "line",
        "frequency_low_hz",
        "frequency_high_hz",
        "level_before_dbc",
        "required_db",
        "ideal_db",
        "as_built_db",
        "margin_db",
    )
    rows: list[dict[str, Cell]] = []
    for number, stage in enumerate(plan.stages, start=1):
        before = {level.line: level.level_dbc for level in stage.device_lines}
        rows += [
            {
                "stage_number": number,
                "stage": stage.name,
                "line": need.line,
                "frequency_low_hz": need.frequency_hz[0],
                "frequency_high_hz": need.frequency_hz[1],
                "level_before_dbc": before.get(need.line),
                "required_db": need.required_db,
                "ideal_db": need.ideal_db,
                "as_built_db": need.as_built_db,
                "margin_db": need.margin_db,
            }
            for need in stage.filter.requirement
        ]
    return _csv(columns, rows)


def elements_csv(plan: Plan) -> str:
    """Tabulate the parts of every filter.

    Parameters
    ----------
    plan : Plan
        The plan.

    Returns
    -------
    str
        CSV, one row per element: its value by design and as built, in `unit` (H or F); what is bought for it as text,
        ``10 pF + 2.2 pF`` where two parts stand in parallel, and as numbers; strays' share as a fraction; what it bears
        at the carrier and may bear [V peak, A rms]; the verdict and its reason.
    """
    columns = (
        "stage_number",
        "stage",
        "topology",
        "kit",
        "ref",
        "kind",
        "placement",
        "ideal",
        "nominal",
        "bought",
        "bought_1",
        "bought_2",
        "unit",
        "q",
        "self_resonance_hz",
        "stray_share",
        "peak_v",
        "rated_v",
        "rms_a",
        "rated_a",
        "verdict",
        "reason",
    )
    rows: list[dict[str, Cell]] = []
    for number, stage in enumerate(plan.stages, start=1):
        made = stage.filter
        own: dict[str, Cell] = {"stage_number": number, "stage": stage.name, "topology": made.topology, "kit": made.kit}
        rows += [own | _element_cells(part) for part in made.elements]
    return _csv(columns, rows)


def _element_cells(part: ElementReport) -> dict[str, Cell]:
    """Return the cells of one element; an element is one part or two."""
    first, second = (*part.bought, None, None)[:2]
    return {
        "ref": part.ref,
        "kind": part.kind,
        "placement": part.placement,
        "ideal": part.ideal,
        "nominal": part.nominal,
        "bought": to_buy(part.bought, part.unit),
        "bought_1": first,
        "bought_2": second,
        "unit": part.unit,
        "q": part.q,
        "self_resonance_hz": part.self_resonance_hz,
        "stray_share": part.stray_share,
        "peak_v": part.peak_v,
        "rated_v": part.rated_v,
        "rms_a": part.rms_a,
        "rated_a": part.rated_a,
        "verdict": part.verdict,
        "reason": part.reason,
    }


def _csv(columns: Sequence[str], rows: Sequence[Mapping[str, Cell]]) -> str:
    """Write rows under their columns; an empty cell stands for a number that is missing, infinite or undefined."""
    cells = [[_cell(row[column]) for column in columns] for row in rows]
    frame = pd.DataFrame(cells, columns=list(columns), dtype=object)
    return frame.to_csv(index=False, lineterminator="\n")


def _cell(value: Cell) -> str | float | int | bool | None:
    """Turn a value into what the CSV writer prints in full: plain Python numbers and inert text."""
    if value is None or isinstance(value, bool):
        return value
    if isinstance(value, Fraction):
        return str(value)
    if isinstance(value, str):
        return inert(value)
    if isinstance(value, int):
        return int(value)
    return float(value) if math.isfinite(value) else None
