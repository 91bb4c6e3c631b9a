"""The plan as JSON, for programs and for a careful reader."""

import json
import math
from collections.abc import Iterable, Mapping
from dataclasses import fields, is_dataclass
from fractions import Fraction
from numbers import Integral, Real
from typing import Any

from harmonic_planner.model import Plan

_WIDTH = 120
_RECORD_WIDTH = 800


def plain(value: object) -> Any:
    """Reduce a result to what JSON knows.

    Parameters
    ----------
    value : object
        A dataclass of the model, a mapping, a sequence, a number, a text, a bool or None, nested at will.

    Returns
    -------
    dict, list, str, int, float, bool or None
        Dataclasses become objects with their field names as keys, fractions text (``3``, ``1/2``), and numbers that
        JSON lacks (infinite or undefined) None.

    Raises
    ------
    TypeError
        For a value of any other type.
    """
    if value is None or isinstance(value, str | bool):
        return value
    if isinstance(value, Fraction):
        return str(value)
    if isinstance(value, Integral):
        return int(value)
    if isinstance(value, Real):
        return float(value) if math.isfinite(value) else None
    if is_dataclass(value) and not isinstance(value, type):
        return {field.name: plain(getattr(value, field.name)) for field in fields(value)}
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    raise TypeError(f"{type(value).__name__} has no form in JSON")


def layout(value: Any, indent: int = 0) -> str:
    """Write JSON so that one line of it is one thing: a requirement, an element, a row of numbers.

    Parameters
    ----------
    value : dict, list, str, int, float, bool or None
        What `plain` returns.
    indent : int
        Depth of the value [spaces].

    Returns
    -------
    str
        JSON text. An array of numbers stays on one line, and so does an object of single values and such arrays while
        the line is not too long; anything else only where it fits between the margins.
    """
    flat = json.dumps(value, ensure_ascii=False, allow_nan=False)
    if not isinstance(value, dict | list) or _is_numbers(value):
        return flat
    record = isinstance(value, dict) and all(_is_single(item) or _is_numbers(item) for item in value.values())
    if indent + len(flat) <= (_RECORD_WIDTH if record else _WIDTH):
        return flat
    inner = " " * (indent + 2)
    if isinstance(value, list):
        rows = [f"{inner}{layout(item, indent + 2)}" for item in value]
        return "[\n" + ",\n".join(rows) + "\n" + " " * indent + "]"
    rows = [f"{inner}{json.dumps(key, ensure_ascii=False)}: {layout(item, indent + 2)}" for key, item in value.items()]
    return "{\n" + ",\n".join(rows) + "\n" + " " * indent + "}"


def _is_single(value: Any) -> bool:
    """Tell a text, number, bool or None from a container."""
    return not isinstance(value, dict | list)


def _is_numbers(value: Any) -> bool:
    """Tell an array of numbers."""
    return isinstance(value, list) and all(isinstance(item, int | float) for item in value)


def plan_json(plan: Plan, files: Iterable[str] = ()) -> str:
    """Write the whole plan as JSON.

    Parameters
    ----------
    plan : Plan
        The plan; its field names are the keys.
    files : iterable of str
        Names of the files that stand beside this one, relative to its folder.

    Returns
    -------
    str
        JSON text, SI units, levels in dB and dBm as the keys say. The same plan gives the same text.

    Notes
    -----
    Numbers keep all their digits: a reader may round, a program may compare. An infinite number (a rejection of a line
    that the filter does not pass at all) is null.
    """
    return layout(plain(plan) | {"files": sorted(files)}) + "\n"
