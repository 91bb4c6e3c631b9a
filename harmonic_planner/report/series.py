"""What each figure shows, taken from the plan: numbers on the figure's axes, ready to be drawn."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from harmonic_planner.export.nodes import line_frequency_hz
from harmonic_planner.export.values import frequency_scale, quantity
from harmonic_planner.model import LineLevel, Plan, StagePlan
from harmonic_planner.report.text import decibels, is_one_sided, printable

_LEAST_FLOOR_DBC = -80.0
_ROOM = 1.06
"""Ratio by which an axis of frequency goes beyond what it shows."""
_NAME_ROOM = 0.025
"""Share of the axis that the name of a line takes."""
_LOG_RATIO = 12.0
"""A response over a wider ratio of frequencies than this is drawn over a logarithmic axis."""


@dataclass(frozen=True)
class Mark:
    """One line of a comb, or a limit at that line."""

    name: str
    low: float
    high: float
    """Span on the frequency axis, in the figure's unit."""
    level_dbc: float

    @property
    def middle(self) -> float:
        """Middle of the span."""
        return (self.low + self.high) / 2


@dataclass(frozen=True)
class Comb:
    """The lines at a stage's multiplier output and at the stage's own output."""

    title: str
    unit: str
    carrier: Mark
    before: tuple[Mark, ...]
    after: tuple[Mark, ...]
    allowed: tuple[Mark, ...]
    """What the budget allows behind the filter: level before it less the rejection required."""
    limits: tuple[Mark, ...]
    """The stage's own limit, or the chain's at the last stage."""
    named: tuple[Mark, ...]
    """The strongest lines, each at the higher of its two levels, to be marked with their harmonic number."""
    x_max: float
    y_min_dbc: float
    y_max_dbc: float


@dataclass(frozen=True)
class Need:
    """The rejection required at one line, and what the filter does there."""

    name: str
    low: float
    high: float
    required_db: float
    as_built_db: float
    shown_db: float
    """`as_built_db`, or the end of the axis where it lies beyond."""
    met: bool
    named: bool
    """Its name is shown; where names would cover each other, the highest requirement's is."""


@dataclass(frozen=True)
class Response:
    """A filter's attenuation relative to midband, with what is required of it."""

    title: str
    unit: str
    note: str
    frequency: tuple[float, ...]
    attenuation_db: tuple[float, ...]
    carrier: tuple[float, float]
    needs: tuple[Need, ...]
    x_range: tuple[float, float]
    y_max_db: float
    logarithmic: bool


def _limits(plan: Plan, index: int) -> list[LineLevel]:
    """Return the limit at every line of a stage's output, the stricter where the chain's stands there too."""
    stage = plan.stages[index]
    at_output = plan.output.lines if index == len(plan.stages) - 1 else ()
    found: dict[Fraction, float] = {}
    for line in (*stage.limited_lines, *at_output):
        if line.limit_dbc is not None:
            found[line.line] = min(line.limit_dbc, found.get(line.line, line.limit_dbc))
    return [LineLevel(line, limit) for line, limit in found.items()]


def comb(plan: Plan, index: int) -> Comb:
    """Collect the comb of one stage.

    Parameters
    ----------
    plan : Plan
        The plan.
    index : int
        Position of the stage, from 0.

    Returns
    -------
    Comb
        Lines that lie below the figure's floor are left out.
    """
    stage = plan.stages[index]
    before = {level.line: level.level_dbc for level in stage.device_lines if level.line != stage.line}
    allowed = [
        LineLevel(need.line, before[need.line] - need.required_db)
        for need in stage.filter.requirement
        if need.required_db > 0 and need.line in before
    ]
    limits = _limits(plan, index)
    asked = [level.level_dbc for level in (*allowed, *limits) if math.isfinite(level.level_dbc)]
    floor = min(_LEAST_FLOOR_DBC, 10.0 * math.floor(min(asked, default=0.0) / 10.0 - 2.0))

    seen = [level for level in (*stage.device_lines, *stage.output_lines) if level.level_dbc > floor]
    shown = {level.line for level in seen} | {level.line for level in allowed} | {stage.line}
    highest_hz = max(line_frequency_hz(plan, line)[1] for line in shown)
    scale, unit = frequency_scale(stage.frequency_hz[1])

    def marks(levels: Sequence[LineLevel]) -> tuple[Mark, ...]:
        chosen = [level for level in levels if level.line in shown - {stage.line} and level.level_dbc > floor]
        spans = [line_frequency_hz(plan, level.line) for level in chosen]
        return tuple(
            Mark(str(level.line), low / scale, high / scale, level.level_dbc)
            for level, (low, high) in zip(chosen, spans, strict=True)
        )

    low, high = stage.frequency_hz
    before_marks, after_marks = marks(stage.device_lines), marks(stage.output_lines)
    higher = {mark.name: mark for mark in sorted((*before_marks, *after_marks), key=lambda mark: mark.level_dbc)}
    strongest = sorted(higher.values(), key=lambda mark: -mark.level_dbc)
    tops = [level.level_dbc for level in seen if math.isfinite(level.level_dbc)]
    return Comb(
        title=f"{_heading(index, stage)}: lines before and after the filter",
        unit=unit,
        carrier=Mark(str(stage.line), low / scale, high / scale, 0.0),
        before=before_marks,
        after=after_marks,
        allowed=marks(allowed),
        limits=marks(limits),
        named=tuple(strongest[i] for i in _apart([mark.middle for mark in strongest], _NAME_ROOM * highest_hz / scale)),
        x_max=1.04 * highest_hz / scale,
        y_min_dbc=floor,
        y_max_dbc=10.0 * math.ceil(max([0.0, *tops]) / 10.0 + 1.0),
    )


def response(plan: Plan, index: int) -> Response:
    """Collect the response of one stage's filter.

    Parameters
    ----------
    plan : Plan
        The plan.
    index : int
        Position of the stage, from 0.

    Returns
    -------
    Response
        Attenuations are relative to midband, so that the rejections required stand on the same axis.
    """
    stage = plan.stages[index]
    made = stage.filter
    needs = [need for need in made.requirement if need.required_db > 0]
    edges = [*made.response_hz, *stage.frequency_hz, *(edge for need in needs for edge in need.frequency_hz)]
    low, high = min(edges), max(edges)
    if low == high:
        low, high = 0.5 * low, 1.5 * high
    low, high = low / _ROOM, high * _ROOM
    scale, unit = frequency_scale(stage.frequency_hz[1])
    required = max((need.required_db for need in needs if math.isfinite(need.required_db)), default=0.0)
    y_max = 10.0 * math.ceil(max(40.0, 1.25 * required + 10.0) / 10.0)
    logarithmic = low > 0 and high / low > _LOG_RATIO
    place = {need.line: _place(need.frequency_hz, low, high, logarithmic=logarithmic) for need in needs}
    ranked = sorted(needs, key=lambda need: -need.required_db)
    named = {ranked[i].line for i in _apart([place[need.line] for need in ranked], _NAME_ROOM)}
    return Response(
        title=f"{_heading(index, stage)}: attenuation as built",
        unit=unit,
        note=_filter_note(stage),
        frequency=tuple(frequency / scale for frequency in made.response_hz),
        attenuation_db=tuple(value - made.loss_db for value in made.response_db),
        carrier=(stage.frequency_hz[0] / scale, stage.frequency_hz[1] / scale),
        needs=tuple(
            Need(
                name=str(need.line),
                low=need.frequency_hz[0] / scale,
                high=need.frequency_hz[1] / scale,
                required_db=min(need.required_db, y_max),
                as_built_db=need.as_built_db,
                shown_db=min(need.as_built_db, y_max),
                met=need.margin_db >= 0,
                named=need.line in named,
            )
            for need in needs
        ),
        x_range=(low / scale, high / scale),
        y_max_db=y_max,
        logarithmic=logarithmic,
    )


def _apart(places: Sequence[float], room: float) -> list[int]:
    """Choose places, the first ones before later ones, so that no two are closer than `room`; return their indices."""
    chosen: list[int] = []
    for index, place in enumerate(places):
        if all(abs(place - places[other]) >= room for other in chosen):
            chosen.append(index)
    return chosen


def _place(frequency_hz: tuple[float, float], low: float, high: float, *, logarithmic: bool) -> float:
    """Place of a line on the axis from `low` to `high` [Hz], from 0 to 1."""
    middle = sum(frequency_hz) / 2
    if logarithmic:
        return math.log(middle / low) / math.log(high / low)
    return (middle - low) / (high - low)


def _heading(index: int, stage: StagePlan) -> str:
    """Name a stage in a title."""
    return f"Stage {index + 1}, {printable(stage.name)} (×{stage.times})"


def _filter_note(stage: StagePlan) -> str:
    """Say in one line which filter it is."""
    made = stage.filter
    if made.source in ("touchstone", "table"):
        return f"{printable(made.reason).capitalize()}, loss {decibels(made.loss_db)} dB"
    if made.centre_hz is None or made.bandwidth_hz is None:
        return f"No filter: {printable(made.reason)}" if made.reason else "No filter"
    band = "cut-off" if is_one_sided(made.topology) else f"{quantity(made.bandwidth_hz, 'Hz', 3)} at"
    return (
        f"{(made.family or '').capitalize()} of order {made.order}, {made.topology or 'prototype'}, "
        f"{band} {quantity(made.centre_hz, 'Hz')}, midband loss {decibels(made.loss_db)} dB"
    )
