"""The answer for one filter at the bench: which filter and why, its windows, rejections and parts."""

from collections.abc import Iterator, Sequence
from dataclasses import replace
from itertools import groupby

from rich.console import Console
from rich.table import Table
from rich.text import Text

from harmonic_planner.export.values import frequency_scale, number_text
from harmonic_planner.model import ElementReport, Family, Window
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

_NAMED = 4
"""At most so many parts are named in the sentence."""


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
    does = f"rejects every line as built, {decibels(spare_db)} dB to spare at the least"
    loss = f"{decibels(built.midband_db)} dB loss"
    why = f" Why: {answer.reason}." if "; " in answer.reason else ""
    return f"{circuit} of {built.form.kit.name}, {band}, {does}, with {loss}; {_parts_words(built)}.{why}"


def _parts_words(built: Built) -> str:
    """Say how many of the parts have the worst verdict, and which."""
    worst = [part.ref for part in built.elements if part.verdict == built.verdict]
    if built.verdict == "ok":
        return "all parts ok"
    named = f" ({', '.join(worst)})" if len(worst) <= _NAMED else ""
    return f"{len(worst)} of {len(built.elements)} parts {built.verdict}{named}"


def bought_parts(built: Built) -> tuple[ElementReport, ...]:
    """Return a filter's parts from the input to the output, with what is bought for each."""
    bought = {
        element.ref: values for element, values in zip(built.nominal.elements, built.parts, strict=bool(built.parts))
    }
    return tuple(replace(part, bought=bought.get(part.ref, ())) for part in built.elements)


def _show_windows(answer: Answer, screen: Console) -> None:
    """Show the windows in a table, and below it why there is none for other orders."""
    usable = [window for window in answer.windows if window.feasible and not window.reason]
    made = _window_table(usable, answer.built) if usable else table("filter")
    section(screen, "Windows: bandwidths that pass the carrier and reject every line", made)
    if not usable and {window.reason for window in answer.windows} == {answer.reason}:
        return  # the sentence at the top says it
    for text in _without(answer.windows):
        bullet(screen, Text(printable(text)))


def _window_table(windows: Sequence[Window], built: Built | None) -> Table:
    """One row for each family and order that has a window."""
    scale, unit = frequency_scale(max(window.bandwidth_max_hz for window in windows))
    centre_scale, centre_unit = frequency_scale(min(window.centre_hz for window in windows))
    band, centre = f"bandwidth {unit}", f"centre {centre_unit}"
    made = table(*("filter", "bandwidth %", band, centre, ""), right=("bandwidth %", band, centre), fixed=("filter",))
    for window in windows:
        made.add_row(
            filter_name(window.family, window.order),
            _percent(window),
            span_of((window.bandwidth_min_hz, window.bandwidth_max_hz), scale, 3),
            number_text(window.centre_hz / centre_scale),
            "chosen" if built is not None and _is_of(window, built) else "",
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


def _without(windows: Sequence[Window]) -> Iterator[str]:
    """Say for each run of orders without a usable window why the highest of them has none."""
    unrealised: dict[str, dict[Family, list[int]]] = {}
    for (family, feasible), group in groupby(windows, key=lambda window: (window.family, window.feasible)):
        run = list(group)
        if feasible:
            for window in run:
                if window.reason:
                    unrealised.setdefault(window.reason, {}).setdefault(family, []).append(window.order)
            continue
        first, last = run[0].order, run[-1].order
        if first == last:
            yield f"{filter_name(family, last)} has none: {run[-1].reason}"
        else:
            yield f"{filter_name(family, first)} to {last} have none; order {last}: {run[-1].reason}"
    for reason, orders in unrealised.items():
        names = (
            f"{filter_name(family, of[0])}{''.join(f', {order}' for order in of[1:])}" for family, of in orders.items()
        )
        yield f"{'; '.join(names)} have windows, but {reason}"


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
