"""The answer for one filter at the bench: which filter and why, its windows, rejections and parts."""

from collections.abc import Iterator, Sequence
from dataclasses import replace
from itertools import groupby

from rich.console import Console
from rich.table import Table
from rich.text import Text

from harmonic_planner.export.values import frequency_scale, number_text
from harmonic_planner.model import ElementReport, Window
from harmonic_planner.planning.bench import Answer, Asked
from harmonic_planner.planning.built import Built
from harmonic_planner.report.console import bullet, section, table, verdict_line
from harmonic_planner.report.parts import element_remarks, element_table
from harmonic_planner.report.text import (
    band_words,
    circuit_words,
    decibels,
    filter_name,
    printable,
    span,
    span_of,
)


def does_it(answer: Answer) -> bool:
    """Tell whether the filter as built does what is asked and every part can be bought and placed.

    Parameters
    ----------
    answer : Answer

    Returns
    -------
    bool
    """
    return answer.built is not None and answer.built.verdict != "swamped"


def show_window(answer: Answer, lines: Sequence[Asked], screen: Console) -> None:
    """Show which filter does it and why, the windows, the rejection at every line, the parts.

    Parameters
    ----------
    answer : Answer
    lines : sequence of Asked
        What was asked, in the order of `answer.achieved_db`.
    screen : Console
        Where to show it.
    """
    verdict_line(screen, sentence(answer, lines), good=does_it(answer))
    _show_windows(answer, screen)
    title = "Rejection" if answer.built is not None else "Rejection of the nearest filter"
    if answer.achieved_db:
        section(screen, title, _rejection_table(answer, lines))
    if answer.built is not None:
        parts = bought_parts(answer.built)
        section(screen, f"Parts of {printable(answer.built.form.kit.name)}", element_table(parts))
        for remark in element_remarks(parts):
            bullet(screen, Text(printable(remark)))


def sentence(answer: Answer, lines: Sequence[Asked]) -> str:
    """Say in one sentence which filter does it and why, or why none does.

    Parameters
    ----------
    answer : Answer
    lines : sequence of Asked

    Returns
    -------
    str
    """
    built = answer.built
    if built is None:
        return f"No filter does it: {answer.reason}."
    spare_db = min(achieved - line.rejection_db for achieved, line in zip(answer.achieved_db, lines, strict=True))
    resonator = built.form.resonator
    circuit = circuit_words(built.prototype.family, built.prototype.order, built.topology, resonator)
    band = band_words(built.topology, bandwidth_hz=built.bandwidth * built.centre_hz, centre_hz=built.centre_hz)
    does = f"rejects every line as built with {decibels(spare_db)} dB to spare and loses {decibels(built.midband_db)} dB"
    worst = [part.ref for part in built.elements if part.verdict == built.verdict]
    parts = {
        "ok": "all parts ok",
        "marginal": f"parts are marginal at worst ({', '.join(worst)})",
        "swamped": f"but strays or the kit's range swamp {', '.join(worst)}",
    }[built.verdict]
    return f"{circuit}, {band}, of {built.form.kit.name} {does}; {parts}. Chosen so: {answer.reason}."


def bought_parts(built: Built) -> tuple[ElementReport, ...]:
    """Return a filter's parts from the input to the output, with what is bought for each."""
    bought = {
        element.ref: values for element, values in zip(built.circuit.elements, built.parts, strict=bool(built.parts))
    }
    return tuple(replace(part, bought=bought.get(part.ref, ())) for part in built.elements)


def _show_windows(answer: Answer, screen: Console) -> None:
    """Show the windows in a table, and below it the orders that have none with what the highest of them lacks."""
    open_windows = [window for window in answer.windows if window.feasible]
    made = _window_table(open_windows, answer.built) if open_windows else table("filter")
    section(screen, "Windows: bandwidths that pass the carrier and reject every line", made)
    reasons = {window.reason for window in answer.windows if not window.feasible}
    if not open_windows and len(reasons) == 1 and answer.reason in reasons:
        return  # the sentence at the top says it
    for text in _none(answer.windows):
        bullet(screen, Text(printable(text)))


def _window_table(windows: Sequence[Window], built: Built | None) -> Table:
    """One row for each family and order that has a window."""
    scale, unit = frequency_scale(max(window.bandwidth_max_hz for window in windows))
    centre_scale, centre_unit = frequency_scale(min(window.centre_hz for window in windows))
    band, centre = f"bandwidth {unit}", f"centre {centre_unit}"
    made = table(
        *("filter", "bandwidth %", band, centre, ""), right=("bandwidth %", band, centre), fixed=("filter",)
    )
    for window in windows:
        made.add_row(
            filter_name(window.family, window.order),
            _percent(window),
            span_of((window.bandwidth_min_hz, window.bandwidth_max_hz), scale, 3),
            number_text(window.centre_hz / centre_scale),
            Text("chosen" if built is not None and _is_of(window, built) else printable(window.reason)),
        )
    return made


def _percent(window: Window) -> str:
    """Write a window's bandwidths as shares of their centres; only the widest where the other centre is not known."""
    widest = 100 * window.bandwidth_max_hz / window.centre_hz
    if window.centre_min_hz is None:
        return f"to {widest:.1f}"
    narrowest = 100 * window.bandwidth_min_hz / window.centre_min_hz
    return f"{narrowest:.1f}–{widest:.1f}"


def _is_of(window: Window, built: Built) -> bool:
    """Tell the window that a filter was chosen from; a low-pass or high-pass is from none."""
    prototype = built.prototype
    return not built.one_sided and (window.family, window.order) == (prototype.family, prototype.order)


def _none(windows: Sequence[Window]) -> Iterator[str]:
    """Say for each run of orders without a window why the highest of them has none."""
    for (family, feasible), group in groupby(windows, key=lambda window: (window.family, window.feasible)):
        if feasible:
            continue
        run = list(group)
        first, last = run[0].order, run[-1].order
        if first == last:
            yield f"{filter_name(family, last)} has none: {run[-1].reason}"
        else:
            yield f"{filter_name(family, first)} to {last} have none; order {last}: {run[-1].reason}"


def _rejection_table(answer: Answer, lines: Sequence[Asked]) -> Table:
    """One row for each line that was asked."""
    made = table(
        *("line", "required dB", "as built dB", "margin dB"), right=("required dB", "as built dB", "margin dB")
    )
    for line, achieved_db in zip(lines, answer.achieved_db, strict=True):
        margin_db = achieved_db - line.rejection_db
        made.add_row(
            span((line.low_hz, line.high_hz)),
            decibels(line.rejection_db),
            decibels(achieved_db),
            Text(decibels(margin_db, signed=True), style="red" if margin_db < 0 else ""),
        )
    return made
