"""The options for one filter at the bench, read by the rules that hold for the keys of a scenario."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar, get_args

from pydantic import ValidationError

from harmonic_planner.model import Design, Family, Isolation, PlannerError
from harmonic_planner.planning.bench import Asked
from harmonic_planner.quantities import FREQUENCY, RATIO_DB, Pair
from harmonic_planner.rules import Choice, RefusedError
from harmonic_planner.scenario_checks import Parts, joint_problems
from harmonic_planner.scenario_problems import Location, key_problems, value_text
from harmonic_planner.scenario_tables import DesignTable, StageTable

OPTIONS: Mapping[str, str] = {
    "kit": "--kit",
    "topology": "--topology",
    "families": "--family",
    "order": "--order",
    "flatness": "--flatness",
    "loss": "--loss",
    "drift": "--drift",
    "min_bandwidth": "--min-bandwidth",
    "impedance": "--impedance",
    "isolation": "--isolation",
    "resonator": "--resonator",
}
"""Key of a scenario's [design] -> the option that sets it."""

SPAN = Pair(FREQUENCY, ("239 MHz", "241 MHz"), single=True, equal=True)
SPAN_ALLOWED = f'{FREQUENCY.allowed}, or a span such as "239 MHz..241 MHz", the lower first'
REJECTION = RATIO_DB.between(0, 200, above=True, example="45 dB")
LINE_ALLOWED = (
    'a frequency or span and its rejection, such as "120 MHz, 45 dB" or "359 MHz..361 MHz, 40 dB": '
    f"{FREQUENCY.allowed.partition(',')[0]}, {REJECTION.allowed.partition(',')[0]}"
)
FAMILY = Choice(get_args(Family))

T = TypeVar("T")


class OptionError(PlannerError):
    """Options that cannot be used, with every problem in them, one line each."""


@dataclass(frozen=True)
class BenchTask:
    """What is asked of one filter."""

    carrier_hz: tuple[float, float]
    lines: tuple[Asked, ...]
    design: Design


def read(carrier: str, lines: Sequence[str], design: Mapping[str, object], folder: Path) -> BenchTask:
    """Read the options of one filter.

    Parameters
    ----------
    carrier : str
        Frequency or span, ``240 MHz`` or ``239 MHz..241 MHz``.
    lines : sequence of str
        Unwanted lines, ``120 MHz, 45 dB`` each.
    design : mapping
        Keys of a scenario's [design] (`OPTIONS`), values as a scenario has them; None or an empty list for a default.
    folder : Path
        Where a kit file's relative path starts.

    Returns
    -------
    BenchTask
        In SI. Isolation counts only where it is given.

    Raises
    ------
    OptionError
        With every problem found, each naming its option, the value and what is allowed.
    """
    given = {key: _as_written(key, value) for key, value in design.items() if value is not None and value != []}
    problems: list[str] = []
    carrier_hz = _checked("--carrier", carrier, span, problems)
    asked = [_checked("--line", text, line, problems) for text in lines]
    problems += _design_problems(given, folder)
    if problems or carrier_hz is None:
        raise OptionError("\n".join(dict.fromkeys(problems)))
    table = DesignTable.model_validate(given)
    return BenchTask(carrier_hz, tuple(each for each in asked if each is not None), _design(table))


def span(text: str) -> tuple[float, float]:
    """Read a frequency or a span.

    Parameters
    ----------
    text : str
        For instance ``239 MHz..241 MHz``.

    Returns
    -------
    tuple of float
        Lowest and highest frequency [Hz].

    Raises
    ------
    RefusedError
        With what is allowed and what is wrong.
    """
    low, dots, high = text.partition("..")
    try:
        ends = SPAN.parse([low, high] if dots else low)
    except RefusedError as error:
        raise RefusedError(SPAN_ALLOWED, error.reason) from None
    return ends


def line(text: str) -> Asked:
    """Read an unwanted line with the rejection it needs.

    Parameters
    ----------
    text : str
        For instance ``120 MHz, 45 dB`` or ``359 MHz..361 MHz, 40 dB``.

    Returns
    -------
    Asked

    Raises
    ------
    RefusedError
        With what is allowed and what is wrong.
    """
    frequency, comma, rejection = text.rpartition(",")
    if not comma:
        raise RefusedError(LINE_ALLOWED, "a comma and the rejection are missing")
    try:
        low_hz, high_hz = span(frequency)
        return Asked(low_hz, high_hz, REJECTION.parse(rejection))
    except RefusedError as error:
        raise RefusedError(LINE_ALLOWED, error.reason) from None


def _as_written(key: str, value: object) -> object:
    """Write an option that may be repeated as the scenario's key would be: each name once, one name by itself."""
    if not isinstance(value, list):
        return value
    names = list(dict.fromkeys(value))
    return names[0] if len(names) == 1 and key != "families" else names


def _checked(option: str, text: str, reader: Callable[[str], T], problems: list[str]) -> T | None:
    """Read one option's text; what is wrong with it goes to the problems."""
    try:
        return reader(text)
    except RefusedError as error:
        problems.append(f"{option} {value_text(text)}: {error}")
        return None


def _design_problems(given: Mapping[str, Any], folder: Path) -> Iterator[str]:
    """Check the design keys, each and together, as those of a scenario with one stage."""
    for family in given.get("families", ()):
        if family not in FAMILY.words:
            yield from _refusal("families", family)
    raw = {"design": given, "stage": [{"times": 1}]}
    try:
        table = DesignTable.model_validate(given)
    except ValidationError as error:
        for problem in key_problems(error):
            if problem.location[0] != "families":
                yield _worded(("design", *problem.location), problem.text, given)
        return
    parts = Parts(source=None, output=None, design=table, stages=(StageTable(times=1),))
    for problem in joint_problems(raw, parts, folder=folder):
        yield _worded(problem.location, problem.text, given)


def _refusal(key: str, value: object) -> Iterator[str]:
    """Say what is wrong with one of several values of an option."""
    try:
        FAMILY.parse(value)
    except RefusedError as error:
        yield f"{OPTIONS[key]} {value_text(value)}: {error}"


def _worded(location: Location, text: str, given: Mapping[str, Any]) -> str:
    """Write a problem with a design key as one with its option."""
    _, key, *rest = location
    value = given[str(key)]
    shown = value[rest[0]] if isinstance(value, list) and rest and isinstance(rest[0], int) else value
    return f"{OPTIONS[str(key)]} {value_text(shown)}: {text}"


def _design(table: DesignTable) -> Design:
    """Convert the keys that have an option; the others keep their defaults."""
    resonator = table.resonator
    return Design(
        impedance_ohm=table.impedance,
        kits=table.kit,
        families=table.families,
        order=table.order,
        flatness_db=table.flatness,
        loss_db=table.loss,
        drift=table.drift,
        isolation=Design().isolation if table.isolation is None else Isolation(table.isolation, flat=True),
        min_bandwidth=table.min_bandwidth,
        topology=table.topology,
        resonator_h=resonator.value if resonator is not None and resonator.unit == "H" else None,
        resonator_f=resonator.value if resonator is not None and resonator.unit == "F" else None,
    )
