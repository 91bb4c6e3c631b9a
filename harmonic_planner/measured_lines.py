"""Lines read from a spectrum analyser at a chain's output, from a CSV file."""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from fractions import Fraction
from pathlib import Path

from harmonic_planner.chain.lines import grid_for
from harmonic_planner.column_files import FREQUENCY_COLUMNS, ColumnFileError, number_in, read_columns
from harmonic_planner.model import PlannerError, Scenario
from harmonic_planner.planning.comparison import MeasuredLines
from harmonic_planner.quantities import LEVEL_DBM, LINE_DBC

_DBC = LINE_DBC.between(-250, 60, example="-60 dBc")
_CARRIER_DBC = 0.1
_OFF_GRID = 0.1
"""Distance from a line, as a share of the lines' spacing, at which a frequency still belongs to it."""

Level = tuple[float, bool]
"""A level, and whether it is in dBm."""


def _line(text: str) -> Fraction:
    """Read a line's name."""
    if re.fullmatch(r"[1-9][0-9]{0,5}(/[1-9][0-9]{0,2})?", text) is None:
        raise ValueError("must be a line such as 3 or 1/2")
    return Fraction(text)


def _level(text: str) -> Level:
    """Read a level with its unit."""
    if text.endswith("dBm"):
        return LEVEL_DBM.between(-200, 80).parse(text), True
    return _DBC.parse(text), False


def _plain_dbc(text: str) -> Level:
    return number_in(_DBC.low, _DBC.high)(text), False


def _plain_dbm(text: str) -> Level:
    return number_in(-200, 80)(text), True


_PLACE_COLUMNS = {"line": _line, **FREQUENCY_COLUMNS}
_LEVEL_COLUMNS = {"level": _level, "level_dbc": _plain_dbc, "level_dbm": _plain_dbm}


def read_lines(path: Path, scenario: Scenario) -> MeasuredLines:
    """Read lines measured at the output.

    Parameters
    ----------
    path : pathlib.Path
        CSV with the columns ``line`` (3, 1/2) or ``frequency`` (with its unit; or ``frequency_hz``, ``_khz``, ``_mhz``,
        ``_ghz``), and ``level`` (in dBc or dBm; or ``level_dbc``, ``level_dbm``). The carrier may be among them.
    scenario : Scenario
        The chain they were measured at.

    Returns
    -------
    MeasuredLines

    Raises
    ------
    PlannerError
        Where the file cannot be used; the message names it, and the row.
    """
    try:
        return _lines(path, scenario)
    except ColumnFileError as error:
        raise PlannerError(f"--measured {path}: {error}") from None


def _lines(path: Path, scenario: Scenario) -> MeasuredLines:
    (place, places), (_, levels) = read_columns(path, (_PLACE_COLUMNS, _LEVEL_COLUMNS))
    in_dbm = levels[0][1]
    if any(unit != in_dbm for _, unit in levels):
        raise ColumnFileError("levels must be all in dBc or all in dBm")
    values = [value for value, _ in levels]
    carrier = Fraction(scenario.total)
    low_hz, high_hz = scenario.source.frequency_hz
    source_hz = (low_hz + high_hz) / 2
    if place == "line":
        numbers: list[Fraction] = places
    else:
        source_hz = _source_hz(places, values, scenario)
        numbers = [_nearest(frequency_hz, source_hz, scenario) for frequency_hz in places]
    grid = grid_for(scenario)
    found: dict[Fraction, float] = {}
    for number, value, written in zip(numbers, values, places, strict=True):
        if number in found:
            raise ColumnFileError(f"line {number} stands there twice ({place} {_text(written)})")
        try:
            grid.index(number)
        except ValueError:
            raise ColumnFileError(
                f"line {number} is none this chain is computed for: they are multiples of 1/{grid.q} up to "
                f"{grid.line(grid.count - 1)}"
            ) from None
        found[number] = value
    carrier_level = found.pop(carrier, None)
    if carrier_level is not None and not in_dbm and abs(carrier_level) > _CARRIER_DBC:
        raise ColumnFileError(f"line {carrier} is the carrier and must be at 0 dBc, not {carrier_level:g} dBc")
    if not found:
        raise ColumnFileError("it holds no line beside the carrier")
    return MeasuredLines(
        lines=tuple(found),
        levels=tuple(found.values()),
        in_dbm=in_dbm,
        carrier_dbm=carrier_level if in_dbm else None,
        source_hz=source_hz,
    )


def _source_hz(frequency_hz: Sequence[float], levels: Sequence[float], scenario: Scenario) -> float:
    """Return the frequency the source had: its own where fixed, else by the strongest line in the carrier's span."""
    low_hz, high_hz = scenario.source.frequency_hz
    if low_hz == high_hz:
        return low_hz
    slack = 1e-6
    inside = [
        (level, f)
        for f, level in zip(frequency_hz, levels, strict=True)
        if low_hz * (1 - slack) <= f / scenario.total <= high_hz * (1 + slack)
    ]
    if not inside:
        raise ColumnFileError(
            f"the source tunes, and no line lies where the carrier can be, {low_hz * scenario.total / 1e6:.9g} to "
            f"{high_hz * scenario.total / 1e6:.9g} MHz; put the carrier among them, or name lines by number"
        )
    return max(inside)[1] / scenario.total


def _nearest(frequency_hz: float, source_hz: float, scenario: Scenario) -> Fraction:
    """Return the line at a frequency."""
    q = grid_for(scenario).q
    exact = frequency_hz / source_hz * q
    j = round(exact)
    if j < 1 or not math.isclose(exact, j, rel_tol=0, abs_tol=_OFF_GRID):
        raise ColumnFileError(
            f"{frequency_hz / 1e6:.9g} MHz is no line of this chain, a multiple of {source_hz / q / 1e6:.9g} MHz"
        )
    return Fraction(j, q)


def _text(place: Fraction | float) -> str:
    return str(place) if isinstance(place, Fraction) else f"{place / 1e6:.9g} MHz"
