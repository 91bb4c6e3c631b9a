"""Tables of comma-separated values that a user hands over: named columns, every cell checked, errors that name the row.

A quantity may stand in one of several columns: as text with its unit (``frequency`` holding ``60 MHz``) or as a plain
number whose unit is in the column's name (``frequency_mhz`` holding ``60``). Other columns are left aside; empty lines
and lines that start with ``#`` too.
"""

from __future__ import annotations

import csv
import math
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

from harmonic_planner.model import PlannerError
from harmonic_planner.quantities import FREQUENCY

LARGEST_FILE = 20_000_000
"""Bytes of the longest file of numbers that is read."""
_LONGEST_CELL = 60

Reader = Callable[[str], Any]
"""The text of a cell -> its value; ValueError with what it must be."""


class ColumnFileError(PlannerError):
    """A file of numbers that cannot be used; the message is what is wrong, on one line, without the file's name."""


def number_in(low: float, high: float, *, times: float = 1.0) -> Reader:
    """Return a reader of plain numbers from `low` to `high`, multiplied by `times` to the SI unit."""

    def read(text: str) -> float:
        try:
            value = float(text.replace("−", "-"))
        except ValueError:
            value = math.nan
        if not low <= value <= high:  # NaN is in no range
            raise ValueError(f"must be a plain number from {low:g} to {high:g}")
        return value * times

    return read


FREQUENCY_COLUMNS: Mapping[str, Reader] = {
    "frequency": FREQUENCY.parse,
    "frequency_hz": number_in(1e3, 1e12),
    "frequency_khz": number_in(1.0, 1e9, times=1e3),
    "frequency_mhz": number_in(1e-3, 1e6, times=1e6),
    "frequency_ghz": number_in(1e-6, 1e3, times=1e9),
}


def read_bytes(path: Path) -> bytes:
    """Read a file that is not too long.

    Raises
    ------
    ColumnFileError
        Where there is none, or it cannot be read.
    """
    try:
        if path.is_dir():
            raise ColumnFileError("it is a folder")
        with path.open("rb") as file:
            data = file.read(LARGEST_FILE + 1)
    except FileNotFoundError:
        raise ColumnFileError("there is no such file") from None
    except (OSError, ValueError) as error:
        raise ColumnFileError(f"it cannot be read: {getattr(error, 'strerror', None) or error}") from None
    if len(data) > LARGEST_FILE:
        raise ColumnFileError(f"it is longer than {LARGEST_FILE} bytes")
    return data


def read_columns(path: Path, quantities: Sequence[Mapping[str, Reader]]) -> list[tuple[str, list[Any]]]:
    """Read one column for each quantity.

    Parameters
    ----------
    path : pathlib.Path
        CSV in UTF-8 whose first line names the columns.
    quantities : sequence of mapping
        For each quantity, the columns it may stand in and how their cells are read.

    Returns
    -------
    list of tuple
        For each quantity, the name of its column and the values from the first row on.

    Raises
    ------
    ColumnFileError
        Where the file, its columns or a cell cannot be used.
    """
    try:
        text = read_bytes(path).decode("utf-8-sig")
    except UnicodeDecodeError:
        raise ColumnFileError("it is not UTF-8 text") from None
    lines = [(n, line) for n, line in enumerate(text.splitlines(), 1) if line.strip() and not line.startswith("#")]
    try:
        rows = [(n, cells) for (n, _), cells in zip(lines, csv.reader(line for _, line in lines), strict=False)]
    except csv.Error as error:
        raise ColumnFileError(f"it is not a table of comma-separated values: {error}") from None
    if not rows:
        raise ColumnFileError("it is empty")
    heads = [head.strip().lower() for head in rows[0][1]]
    chosen = [_column(heads, columns) for columns in quantities]
    if len(rows) == 1:
        raise ColumnFileError("it has no row of numbers under its columns")
    read: list[tuple[str, list[Any]]] = [(heads[at], []) for at in chosen]
    for number, cells in rows[1:]:
        for at, columns, (name, values) in zip(chosen, quantities, read, strict=True):
            cell = cells[at].strip() if at < len(cells) else ""
            try:
                values.append(columns[name](cell))
            except ValueError as error:
                raise ColumnFileError(f"line {number}: {name} = {_shown(cell)} {error}") from None
    return read


def _column(heads: Sequence[str], columns: Mapping[str, Reader]) -> int:
    """Return the place of the one column that holds a quantity."""
    present = [at for at, head in enumerate(heads) if head in columns]
    if len(present) != 1:
        listed = ", ".join(columns)
        found = "none of them" if not present else " and ".join(heads[at] for at in present)
        raise ColumnFileError(f"its first line must name one of the columns {listed}; it has {found}")
    return present[0]


def _shown(cell: str) -> str:
    """Quote a cell, shortened, on one line."""
    text = cell if len(cell) <= _LONGEST_CELL else cell[: _LONGEST_CELL - 1] + "…"
    return '"' + "".join(c if c.isprintable() else "?" for c in text) + '"'
