"""Every problem of a scenario as one line: ``dotted.key = value: what is allowed``.

List items are counted from 1, so ``stage[2].pad`` is the second stage's pad; a stage that has a name is also named at
the end of the line.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from pydantic import ValidationError
from pydantic.fields import FieldInfo

from harmonic_planner.rules import Rule, nearest
from harmonic_planner.scenario_rules import AMPLIFIER_LINE, DEVICE_LINE, SOURCE_LINE
from harmonic_planner.scenario_tables import (
    AmplifierTable,
    DesignTable,
    DeviceTable,
    Document,
    FilterTable,
    MaskTable,
    OffsetMaskTable,
    OutputTable,
    RejectionTable,
    SourceTable,
    StageTable,
    Table,
    TapTable,
    TouchstoneTable,
)

Location = tuple[str | int, ...]
"""Keys and 0-based list positions from the top of the document."""

_BELONGS: Mapping[type[Table], str] = {
    Document: "at the top",
    SourceTable: "in [source]",
    OutputTable: "in [output]",
    MaskTable: "in a mask",
    OffsetMaskTable: "in an offset_mask",
    TapTable: "in a stage's tap",
    DesignTable: "in [design]",
    StageTable: "in [[stage]]",
    DeviceTable: "in a stage's device",
    AmplifierTable: "in a stage's amplifier",
    FilterTable: "in a stage's filter",
    TouchstoneTable: "in a stage's measured filter",
    RejectionTable: "in a stage's filter known by a table",
}
_TABLES: Mapping[str, type[Table]] = {
    "source": SourceTable,
    "output": OutputTable,
    "mask": MaskTable,
    "offset_mask": OffsetMaskTable,
    "tap": TapTable,
    "design": DesignTable,
    "stage": StageTable,
    "device": DeviceTable,
    "amplifier": AmplifierTable,
    "filter": FilterTable,
}
_FILTERS: Mapping[str, type[Table]] = {"touchstone": TouchstoneTable, "table": RejectionTable}
"""Tables that stand in place of a given filter's, by the branch that pydantic took."""
_LINES: Mapping[str, Rule] = {"source": SOURCE_LINE, "device": DEVICE_LINE, "amplifier": AMPLIFIER_LINE}
SHAPES: Mapping[str, str] = {
    "source": 'a table: [source] with frequency = "100 MHz"',
    "output": 'a table: [output] with limit = "-60 dBc"',
    "design": 'a table: [design] with keys such as drift = "1 %"',
    "stage": "one or more tables, each headed [[stage]] in double brackets",
    "mask": 'a list of tables, [{ from = "1 GHz", to = "2 GHz", limit = "-70 dBc" }]',
    "offset_mask": 'a list of tables, [{ from = "10 MHz", to = "100 MHz", limit = "-70 dBc" }]',
    "tap": 'a table, { limit = "-60 dBc" }',
    "device": 'a table, { type = "push-push", conversion = "-9 dB" }',
    "amplifier": 'a table, { gain = "20 dB" }',
    "lines": 'a table, { "2" = "-40 dBc" }',
    "phase_noise": 'a table, { "1 kHz" = "-150 dBc/Hz" }',
}


@dataclass(frozen=True)
class Problem:
    """One thing wrong at one place."""

    location: Location
    text: str
    """``must be …``, ``missing; must be …``, ``unknown key; …``."""
    shown: bool = True
    """Whether the value stands in the line."""

    def line(self, raw: Mapping[str, Any]) -> str:
        """Write the problem as one line about the document `raw`."""
        key = key_text(self.location)
        value = f" = {value_text(_at(raw, self.location))}" if self.shown else ""
        stage = _at(raw, self.location[:2]) if self.location[0] == "stage" and len(self.location) > 2 else None
        name = stage.get("name") if isinstance(stage, dict) else None
        named = isinstance(name, str) and self.location[2:] != ("name",)
        return f"{key}{value}: {self.text}" + (f" (stage {value_text(name)})" if named else "")


def key_text(location: Location) -> str:
    """Write a place in the document as a dotted key, list items counted from 1.

    Parameters
    ----------
    location : tuple of str and int
        Keys and 0-based positions.

    Returns
    -------
    str

    Examples
    --------
    >>> key_text(("stage", 1, "device", "lines", "1/2"))
    'stage[2].device.lines."1/2"'
    """
    text = ""
    for part in location:
        if isinstance(part, int):
            text += f"[{part + 1}]"
        else:
            bare = re.fullmatch(r"[A-Za-z0-9_-]+", part) is not None
            text += ("." if text else "") + (part if bare else value_text(part))
    return text


def value_text(value: object, *, depth: int = 3, longest: int = 80) -> str:
    """Write a value on one line as the file would, shortened to `longest` characters.

    Parameters
    ----------
    value : object
        What the file holds.
    depth : int
        Levels of nesting that are written out.
    longest : int
        Length at which the text is cut.

    Returns
    -------
    str
    """
    if isinstance(value, bool):
        text = str(value).lower()
    elif isinstance(value, str):
        text = json.dumps(value, ensure_ascii=not value.isprintable())
    elif isinstance(value, dict | list) and depth == 0:
        text = "…"
    elif isinstance(value, list):
        text = "[" + ", ".join(value_text(item, depth=depth - 1) for item in value[:9]) + "]"
    elif isinstance(value, dict):
        items = list(value.items())[:9]
        text = "{ " + ", ".join(f"{key_text((k,))} = {value_text(v, depth=depth - 1)}" for k, v in items) + " }"
    elif isinstance(value, int) and value.bit_length() > 200:
        text = "a number of more than 60 digits"
    else:
        text = str(value)
    return text if len(text) <= longest else text[: longest - 1] + "…"


def _at(raw: object, location: Location) -> Any:
    """Return the value at a place of the document, None where there is none."""
    for part in location:
        try:
            raw = raw[part]  # type: ignore[index]
        except (KeyError, IndexError, TypeError):
            return None
    return raw


# ------------------------------------------------------------------------------------- what single keys may hold


def key_problems(error: ValidationError) -> Iterator[Problem]:
    """Turn pydantic's findings into problems.

    Parameters
    ----------
    error : pydantic.ValidationError
        Raised for a `Document`.

    Yields
    ------
    Problem
    """
    for found in error.errors(include_url=False):
        kind, place = found["type"], found["loc"]
        holder = _holder(place)
        if place[0] == "stage" and place[2:3] == ("filter",):  # pydantic also names the branch taken
            branch, place = place[3:4], place[:3] + place[4:]
            holder = _FILTERS.get(str(*branch), _holder(place))
        if kind == "extra_forbidden":
            yield Problem(place, _unknown(str(place[-1]), holder), shown=False)
        elif kind == "missing":
            field = next(f for n, f in holder.model_fields.items() if (f.alias or n) == place[-1])
            yield Problem(place, f"missing; must be {_allowed(str(place[-1]), field)}", shown=False)
        elif kind == "value_error":
            text = str(found["ctx"]["error"])
            if place[-1] == "[key]":  # pydantic's mark of the key itself
                yield Problem(place[:-1], f"the key {text}", shown=False)
            else:
                yield Problem(place, text)
        else:  # a table or a list where something else stands, or the other way round
            shape = next((str(p) for p in reversed(place) if isinstance(p, str)), "")
            yield Problem(place, f"must be {SHAPES.get(shape, 'a table of keys')}")


def _holder(place: Location) -> type[Table]:
    """Return the table whose key the last part of `place` is."""
    return next((_TABLES[p] for p in reversed(place[:-1]) if p in _TABLES), Document)  # type: ignore[index]


def _allowed(key: str, field: FieldInfo) -> str:
    rule = next((m for m in field.metadata if isinstance(m, Rule)), None)
    return rule.allowed if rule else SHAPES[key]


def _keys(table: type[Table]) -> tuple[str, ...]:
    return tuple(field.alias or name for name, field in table.model_fields.items())


def _unknown(key: str, holder: type[Table]) -> str:
    near = nearest(key, _keys(holder))
    if near:
        return f"unknown key; did you mean {near}?"
    homes = [place for table, place in _BELONGS.items() if key in _keys(table)]
    if homes and holder not in _FILTERS.values():
        return f"unknown key here; it belongs {' or '.join(homes)}"
    return f"unknown key; known here: {', '.join(_keys(holder))}"
