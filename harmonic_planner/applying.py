"""A scenario in which a proposal is taken: the old text with some keys of one stage set, comments and layout kept."""

from __future__ import annotations

import os
import tomllib
from collections.abc import Iterator, Mapping
from decimal import ROUND_FLOOR, Decimal
from pathlib import Path
from typing import Any

import tomlkit
from tomlkit.items import AoT, InlineTable, Item, Key, SingleKey, Table

from harmonic_planner.filters import topologies
from harmonic_planner.model import Proposal
from harmonic_planner.parts.kits import kit_names
from harmonic_planner.quantities import PERCENT, RATIO_DB, REACTANCE, RESISTANCE, Reactance
from harmonic_planner.scenario_checks import design_value, parts_of
from harmonic_planner.scenario_problems import value_text
from harmonic_planner.scenario_tables import DesignTable, StageTable

_DIGITS = 6
"""Significant digits of a bandwidth or a resonator that is written into a scenario."""

Value = str | int | list[str]
"""What a key is set to, as a user would write it."""


def apply_proposal(text: str, stage_index: int, proposal: Proposal) -> str:
    """Return the text of a new scenario in which one stage's filter is fixed to what a proposal says.

    Parameters
    ----------
    text : str
        A scenario that can be read.
    stage_index : int
        The stage, from 0.
    proposal : Proposal
        Found for this stage of this scenario.

    Returns
    -------
    str
        The same text with the stage's keys families, ripple (Chebyshev), order, bandwidth, topology and kit set, and
        impedance and resonator where they are not what holds already; max_order where the order is beyond it.

    Raises
    ------
    ValueError
        Where the text is no scenario or has no such stage.

    Notes
    -----
    A key that the stage has keeps its place and its comment; others come behind the stage's last plain key. Where a
    file has other tables between those of its stages, TOML's way to write them together is taken: they move, with
    their comments.
    """
    raw = tomllib.loads(text)
    parts = parts_of(raw)
    stage = parts.stages[stage_index] if 0 <= stage_index < len(parts.stages) else None
    if parts.design is None or stage is None:
        raise ValueError(f"there is no stage {stage_index + 1} that can be read")
    document = _document(text)
    _set(_stage_tables(document)[stage_index], _keys(proposal, parts.design, stage))
    return _like(text, tomlkit.dumps(document))


def moved(text: str, *, from_folder: Path, to_folder: Path) -> str:
    """Return a scenario's text for another folder: files that it names relative to its own are still found.

    Parameters
    ----------
    text : str
        A scenario that can be read.
    from_folder, to_folder : Path
        Where it was and where it will be.

    Returns
    -------
    str
        The text itself where nothing has to change.
    """
    start, end = from_folder.resolve(), to_folder.resolve()
    if start == end:
        return text
    document = _document(text)
    shipped = kit_names()

    def renamed(name: str) -> str:
        if name.strip() in shipped or Path(name.strip()).is_absolute():
            return name
        file = start / name.strip()
        return (file if start.anchor != end.anchor else Path(os.path.relpath(file, end))).as_posix()

    for table in (document.get("design", {}), *_stage_tables(document)):
        kit = table.get("kit")
        if kit is not None:
            new: Value = [renamed(name) for name in kit] if isinstance(kit, list) else renamed(kit)
            if new != kit:
                table["kit"] = new
        given = table.get("filter")
        for key in ("touchstone", "table"):
            if isinstance(given, dict) and key in given and (file := renamed(given[key])) != given[key]:
                given[key] = file
    return _like(text, tomlkit.dumps(document))


def changes(old: str, new: str, stage_index: int) -> Iterator[str]:
    """Say what a stage's filter is now designed to, and what it was designed to before.

    Parameters
    ----------
    old, new : str
        Two scenarios that differ in design keys of one stage.
    stage_index : int
        The stage, from 0.

    Yields
    ------
    str
        One key each, for instance ``order = 4 (was "auto")``.
    """
    before, after = (_in_force(tomllib.loads(text), stage_index) for text in (old, new))
    for key, value in after.items():
        if value != before[key]:
            yield f"{key} = {value_text(value)} (was {value_text(before[key])})"


def _in_force(raw: Mapping[str, Any], stage_index: int) -> dict[str, object]:
    """Return every design key as it holds in a stage, as a user would write it."""
    defaults = {name: field.default for name, field in DesignTable.model_fields.items()}
    stage = {key: value for key, value in raw["stage"][stage_index].items() if key in defaults}
    return {**defaults, **raw.get("design", {}), **stage}


# ------------------------------------------------------------------------------------------------- what is set


def _keys(proposal: Proposal, design: DesignTable, stage: StageTable) -> dict[str, Value]:
    """Return the keys that fix a stage's filter to what a proposal says."""
    keys: dict[str, Value] = {"families": [proposal.family]}
    if proposal.family == "chebyshev":
        keys["ripple"] = RATIO_DB.write(proposal.ripple_db)
    keys["order"] = proposal.order
    if proposal.order > design_value("max_order", design, stage):
        keys["max_order"] = proposal.order
    share = proposal.bandwidth_hz / proposal.centre_hz
    floor = min(design_value("min_bandwidth", design, stage) or 0.0, share)
    keys["bandwidth"] = PERCENT.write(max(_rounded_down(share), floor))
    keys["topology"] = proposal.topology
    if proposal.kit:
        keys["kit"] = proposal.kit
    if proposal.impedance_ohm != design_value("impedance", design, stage):
        keys["impedance"] = RESISTANCE.write(proposal.impedance_ohm)
    free = topologies.REGISTRY[proposal.topology].free
    if proposal.resonator is not None and free is not None:
        value = float(f"{proposal.resonator:.{_DIGITS}g}")
        keys["resonator"] = REACTANCE.write(Reactance(value, "H" if free == "L" else "F"))
    elif design_value("resonator", design, stage) is not None:
        keys["resonator"] = "auto"
    return keys


def _rounded_down(share: float) -> float:
    """Round a bandwidth so that it never gets wider than what was found to reject every line."""
    exact = Decimal(f"{share:.12g}")
    return float(exact.quantize(Decimal(1).scaleb(exact.adjusted() + 1 - _DIGITS), rounding=ROUND_FLOOR))


# ------------------------------------------------------------------------------------------ how it is written


def _document(text: str) -> tomlkit.TOMLDocument:
    """Read a text whose lines all end with a line feed, the last one too."""
    lines = text.replace("\r\n", "\n")
    return tomlkit.parse(lines if lines.endswith("\n") else lines + "\n")


def _like(model: str, text: str) -> str:
    """Return `text` with the line ends of `model`."""
    return text.replace("\n", "\r\n") if "\r\n" in model else text


def _stage_tables(document: tomlkit.TOMLDocument) -> list[Table | InlineTable]:
    """Return the tables of the stages, written as ``[[stage]]`` or in one array."""
    stages = document["stage"]
    return list(stages.body) if isinstance(stages, AoT) else list(stages)


def _set(table: Table | InlineTable, keys: Mapping[str, Value]) -> None:
    """Set keys of a table; those that it lacks come behind its last plain key."""
    new = {key: value for key, value in keys.items() if key not in table}
    for key, value in keys.items():
        if key not in new or isinstance(table, InlineTable):
            table[key] = value
    if isinstance(table, Table):
        _insert(table.value.body, new)


def _insert(body: list[tuple[Key | None, Item]], keys: Mapping[str, Value]) -> None:
    """Insert keys into the lines of a table, which is written out at once: nothing looks them up any more."""
    indent = next(item.trivia.indent for key, item in body if key is not None and key.key == "times")
    last = max(i for i, (key, item) in enumerate(body) if key is not None and not _has_heading(key, item))
    for at, (key, value) in enumerate(keys.items(), start=last + 1):
        item = tomlkit.item(value)
        item.trivia.indent = indent
        body.insert(at, (SingleKey(key), item))


def _has_heading(key: Key, item: Item) -> bool:
    """Whether an item stands under a heading of its own, [stage.device], and not on lines of its table."""
    return isinstance(item, Table | AoT) and not key.is_dotted()
