"""From a TOML file to a `Scenario`: every problem of the file at once, every default that shaped it listed."""

from __future__ import annotations

import math
import tomllib
from pathlib import Path
from typing import Any, Literal

from pydantic import ValidationError

from harmonic_planner.column_files import ColumnFileError
from harmonic_planner.measured_files import read_filter
from harmonic_planner.model import (
    Amplifier,
    Design,
    Device,
    GivenFilter,
    Isolation,
    Limits,
    MaskBand,
    MeasuredFilter,
    OffsetBand,
    Output,
    PlannerError,
    Scenario,
    Source,
    Stage,
)
from harmonic_planner.scenario_checks import design_value, joint_problems, parts_of, stage_name
from harmonic_planner.scenario_defaults import half_angle_deg, listed_defaults
from harmonic_planner.scenario_problems import Problem, key_problems
from harmonic_planner.scenario_rules import SM329
from harmonic_planner.scenario_tables import (
    AmplifierTable,
    DesignTable,
    DeviceTable,
    Document,
    FilterTable,
    RejectionTable,
    StageTable,
    TapTable,
    TouchstoneTable,
)
from harmonic_planner.template import TEMPLATE

__all__ = ["TEMPLATE", "ScenarioError", "json_schema", "load", "loads", "read_text"]

LARGEST_FILE = 1_000_000
"""Bytes of the longest scenario file that is read."""


class ScenarioError(PlannerError):
    """A scenario file that cannot be used, with every problem in it.

    Parameters
    ----------
    path : pathlib.Path
        The file.
    problems : tuple of str
        One line each, without the file's name.
    """

    def __init__(self, path: Path, problems: tuple[str, ...]) -> None:
        super().__init__("\n".join(f"{path}: {problem}" for problem in problems))
        self.path = path
        self.problems = problems


# -------------------------------------------------------------------------------------------------------- reading


def load(path: Path) -> Scenario:
    """Read a scenario file.

    Parameters
    ----------
    path : pathlib.Path
        A TOML file in UTF-8.

    Returns
    -------
    Scenario
        In SI, with the defaults that were filled in.

    Raises
    ------
    ScenarioError
        With every problem found, one line each.
    """
    return loads(read_text(path), path=path)


def read_text(path: Path) -> str:
    """Read the text of a scenario file, its line ends as they are.

    Parameters
    ----------
    path : pathlib.Path
        A file in UTF-8, with or without a byte-order mark.

    Returns
    -------
    str

    Raises
    ------
    ScenarioError
        Where there is no such file, or it is not text.
    """
    try:
        if path.is_dir():
            raise ScenarioError(path, ("is a folder; name a scenario file in TOML",))
        with path.open("rb") as file:
            data = file.read(LARGEST_FILE + 1)
    except FileNotFoundError:
        raise ScenarioError(path, ("there is no such file",)) from None
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        raise ScenarioError(path, (f"cannot be read: {reason}",)) from None
    if len(data) > LARGEST_FILE:
        raise ScenarioError(path, (f"is longer than {LARGEST_FILE} bytes, which no scenario is",))
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        problem = f"is not UTF-8 text: byte 0x{data[error.start]:02x} in line {line}; save it as UTF-8"
        raise ScenarioError(path, (problem,)) from None


def loads(text: str, *, path: Path) -> Scenario:
    """Read a scenario from text.

    Parameters
    ----------
    text : str
        TOML.
    path : pathlib.Path
        Names the text in errors; its folder is where a kit file is looked up.

    Returns
    -------
    Scenario

    Raises
    ------
    ScenarioError
        With every problem found, one line each.
    """
    if not text.strip():
        raise ScenarioError(path, ("is empty; `harmonic-planner new FILE` writes a scenario to start from",))
    try:
        raw = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        end = f"at line {text.count(chr(10)) + 1}, column {len(text.rpartition(chr(10))[2]) + 1}, the end of the file"
        reason = str(error).replace("at end of document", end)
        raise ScenarioError(path, (f"is not valid TOML: {reason}",)) from None
    except ValueError:  # an integer with thousands of digits
        raise ScenarioError(path, ("is not valid TOML: a number with too many digits",)) from None
    except RecursionError:
        raise ScenarioError(path, ("is not valid TOML: nested too deeply",)) from None
    problems: list[Problem] = []
    document: Document | None = None
    try:
        document = Document.model_validate(raw)
    except ValidationError as error:
        problems.extend(key_problems(error))
    problems.extend(joint_problems(raw, parts_of(raw), folder=path.parent))
    if problems or document is None:
        raise ScenarioError(path, tuple(dict.fromkeys(problem.line(raw) for problem in problems)))
    return _scenario(document, path)


def json_schema() -> dict[str, Any]:
    """Return the JSON Schema of a scenario file.

    Returns
    -------
    dict
        Draft 2020-12; every key with its description, its default as a user would write it, and for quantities the
        pattern of number and unit.
    """
    schema = _plain(Document.model_json_schema(by_alias=True))
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **schema, "title": "harmonic-planner scenario"}


def _plain(node: Any) -> Any:
    """Drop what TOML has no use for: the null of a key left out, titles made from field names."""
    if isinstance(node, list):
        return [_plain(item) for item in node]
    if not isinstance(node, dict):
        return node
    node = {key: _plain(value) for key, value in node.items() if key != "title" or not isinstance(value, str)}
    branches = [item for item in node.get("anyOf", ()) if item != {"type": "null"}]
    if len(branches) == 1:
        return {**branches[0], **{key: value for key, value in node.items() if key != "anyOf"}}
    return node


# ----------------------------------------------------------------------------------------------------- conversion


def _scenario(document: Document, path: Path) -> Scenario:
    source, output = document.source, document.output
    return Scenario(
        title=document.title if document.title is not None else path.stem,
        source=Source(
            frequency_hz=source.frequency,
            level_dbm=source.level,
            lines_dbc=dict(source.lines or {}),
            phase_noise=tuple(sorted((source.phase_noise or {}).items())),
        ),
        output=Output(**_limits(output), level_dbm=output.level),
        design=_design(document.design),
        stages=tuple(_stage(i, stage, document.design, path) for i, stage in enumerate(document.stage)),
        defaults=tuple(listed_defaults(document)),
        folder=path.parent,
    )


def _limits(table: TapTable) -> dict[str, Any]:
    """Convert what is asked at a node to the fields of `Limits`."""
    named = table.limit == SM329
    return {
        "limit_dbc": None if named else table.limit,
        "mask": tuple(MaskBand(band.from_, band.to, band.limit) for band in table.mask or ()),
        "offset_mask": tuple(OffsetBand(band.from_, band.to, band.limit) for band in table.offset_mask or ()),
        "limit_dbm": table.limit_dbm,
        "sm329_category_a": named,
    }


def _design(table: DesignTable, stage: StageTable | None = None) -> Design:
    """Convert [design], or what of it holds in a stage."""
    values = {name: getattr(table, name) for name in DesignTable.model_fields}
    if stage is not None:
        values |= {name: design_value(name, table, stage) for name in DesignTable.model_fields}
    isolation, resonator = values["isolation"], values["resonator"]
    return Design(
        impedance_ohm=values["impedance"],
        kits=values["kit"],
        families=values["families"],
        ripple_db=values["ripple"],
        max_order=values["max_order"],
        flatness_db=values["flatness"],
        loss_db=values["loss"],
        drift=values["drift"],
        margin_db=values["margin"],
        phases=values["phases"],
        isolation=Design().isolation if isolation is None else Isolation(isolation, flat=True),
        reflection=values["reflection"],
        termination_db=values["termination"],
        unloaded_q=values["unloaded_q"],
        min_bandwidth=values["min_bandwidth"],
        topology=values["topology"],
        tuned=values["tuned"],
        order=values["order"],
        bandwidth=values["bandwidth"],
        resonator_h=resonator.value if resonator is not None and resonator.unit == "H" else None,
        resonator_f=resonator.value if resonator is not None and resonator.unit == "F" else None,
    )


def _stage(i: int, table: StageTable, design: DesignTable, path: Path) -> Stage:
    merged = _design(design, table)
    return Stage(
        name=stage_name(i, table),
        times=table.times,
        device=_device(table.device, table.times) if table.device is not None else None,
        pad_db=table.pad or 0.0,
        pad_after_db=table.pad_after or 0.0,
        filter=_filter(table, merged, path),
        amplifier=_amplifier(table.amplifier) if table.amplifier is not None else None,
        limit_dbc=table.limit,
        design=merged,
        tap=Limits(**_limits(table.tap)) if table.tap is not None else None,
    )


def _device(table: DeviceTable, times: int) -> Device:
    half_angle_rad = table.half_angle if table.half_angle is not None else math.radians(half_angle_deg(times))
    return Device(
        type=table.type,
        conversion_db=table.conversion if table.conversion is not None else 0.0,
        half_angle_rad=half_angle_rad,
        balance_db=table.balance,
        steepness=table.steepness,
        device_class=table.class_,
        drive_dbm=table.drive,
        lines_dbc=dict(table.lines or {}),
        reflection=table.reflection,
    )


def _amplifier(table: AmplifierTable) -> Amplifier:
    return Amplifier(
        gain_db=table.gain,
        saturation_dbm=table.saturation,
        noise_figure_db=table.noise_figure,
        lines_dbc=dict(table.lines or {}),
        reflection=table.reflection,
    )


def _filter(table: StageTable, design: Design, path: Path) -> Literal["plan", "none"] | GivenFilter | MeasuredFilter:
    """Convert what stands for a stage's filter; a file has been read once before, for what is wrong with it."""
    if isinstance(table.filter, FilterTable):
        return _given(table.filter, design)
    if isinstance(table.filter, TouchstoneTable | RejectionTable):
        try:
            return read_filter(table.filter, folder=path.parent, impedance_ohm=design.impedance_ohm)
        except ColumnFileError as error:  # the file has changed since
            raise ScenarioError(path, (f"a filter's file cannot be used: {error}",)) from None
    return "none" if table.filter == "none" else "plan"


def _given(table: FilterTable, design: Design) -> GivenFilter:
    return GivenFilter(
        family=table.family,
        order=table.order,
        centre_hz=table.centre,
        bandwidth_hz=table.bandwidth.hz(table.centre),
        ripple_db=table.ripple if table.ripple is not None else design.ripple_db,
        topology=table.topology,
        unloaded_q=table.unloaded_q,
    )
