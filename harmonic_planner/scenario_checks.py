"""What the keys of a scenario may hold together: limits, devices, filters, kits, factors, names."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar

from pydantic import ValidationError

from harmonic_planner.column_files import ColumnFileError
from harmonic_planner.filters import topologies
from harmonic_planner.measured_files import read_filter
from harmonic_planner.model import DeviceType
from harmonic_planner.parts.kit_files import KitError
from harmonic_planner.parts.kits import kit_names, load_kit
from harmonic_planner.quantities import PERCENT, Reactance
from harmonic_planner.rules import nearest
from harmonic_planner.scenario_problems import SHAPES, Location, Problem
from harmonic_planner.scenario_rules import ANY_LIMIT, GAIN
from harmonic_planner.scenario_tables import (
    DesignTable,
    FilterTable,
    OutputTable,
    RejectionTable,
    SourceTable,
    StageTable,
    Table,
    TapTable,
    TouchstoneTable,
)

MOST_STAGES = 12
LARGEST_TOTAL = 1024
"""Largest product of all factors and the common denominator of the source's lines;
lines are followed to four times that, and a conversion matrix has their number squared."""

_ROUNDING = 1e-9
"""Of two percentages that were written alike, relative."""

T = TypeVar("T", bound=Table)


@dataclass(frozen=True)
class Parts:
    """The tables of a document that could be read; None for those that could not."""

    source: SourceTable | None
    output: OutputTable | None
    design: DesignTable | None
    stages: tuple[StageTable | None, ...]


def parts_of(raw: Mapping[str, Any]) -> Parts:
    """Read each table on its own, so that one with problems does not hide what others do together.

    Parameters
    ----------
    raw : mapping
        The document.

    Returns
    -------
    Parts
    """
    stages = raw.get("stage")
    return Parts(
        source=_read(SourceTable, raw.get("source")),
        output=_read(OutputTable, raw.get("output")),
        design=_read(DesignTable, raw.get("design", {})),
        stages=tuple(_read(StageTable, item) for item in stages) if isinstance(stages, list) else (),
    )


def _read(table: type[T], raw: object) -> T | None:
    try:
        return table.model_validate(raw)
    except ValidationError:
        return None


def design_value(name: str, design: DesignTable, stage: StageTable) -> Any:
    """Return a design key as it holds in a stage: the stage's own, else that of [design]."""
    return getattr(stage if name in stage.model_fields_set else design, name)


def joint_problems(raw: Mapping[str, Any], parts: Parts, *, folder: Path) -> Iterator[Problem]:
    """Find what is wrong between keys.

    Parameters
    ----------
    raw : mapping
        The document.
    parts : Parts
        Its tables, as far as they could be read.
    folder : pathlib.Path
        Where kit files and filters' files are looked up.

    Yields
    ------
    Problem
    """
    yield from _source_problems(raw, parts.source)
    if parts.output is not None:
        yield from _limit_problems(("output",), parts.output)
    for i, stage in enumerate(parts.stages):
        if stage is not None:
            yield from _device_problems(i, stage)
            if stage.tap is not None:
                yield from _limit_problems(("stage", i, "tap"), stage.tap)
            yield from _filter_problems(i, stage)
            yield from _file_problems(i, stage, folder)
            if parts.design is not None and stage.filter == "plan":
                yield from _flatness_problems(i, stage, parts.design)
                yield from _fixed_problems(i, stage, parts.design)
    yield from _kit_problems(raw, parts, folder)
    yield from _chain_problems(raw, parts)
    yield from _name_problems(raw)


def _source_problems(raw: Mapping[str, Any], source: SourceTable | None) -> Iterator[Problem]:
    noise = source.phase_noise if source is not None else None
    if noise is not None and len(noise) != len(raw["source"]["phase_noise"]):
        yield Problem(("source", "phase_noise"), "must name each offset once")


def _limit_problems(place: Location, table: TapTable) -> Iterator[Problem]:
    if table.limit is None and table.limit_dbm is None and not table.mask and not table.offset_mask:
        others = "unless mask, offset_mask or limit_dbm is given"
        yield Problem((*place, "limit"), f"missing; must be {ANY_LIMIT.allowed}, {others}", False)
    for key, bands in (("mask", table.mask), ("offset_mask", table.offset_mask)):
        for i, band in enumerate(bands or ()):
            if band.from_ >= band.to:
                yield Problem((*place, key, i, "to"), "must be above the range's lower end, from")


SHAPE_KEYS: Mapping[str, tuple[DeviceType, ...]] = {
    "half_angle": ("single-ended", "push-push", "push-pull"),
    "balance": ("push-push", "push-pull"),
    "steepness": ("limiter",),
}


def _device_problems(i: int, stage: StageTable) -> Iterator[Problem]:
    place: Location = ("stage", i, "device")
    device = stage.device
    if device is None:
        if stage.times > 1:
            yield Problem(place, f"missing; must be {SHAPES['device']}, unless times is 1", False)
        return
    if stage.times == 1:
        yield Problem(place, "must be left out where times is 1: a clean-up stage has no multiplier")
    if device.conversion is None and device.type != "power-law":
        yield Problem((*place, "conversion"), f"missing; must be {GAIN.allowed}, except for power-law", False)
    for key, types in SHAPE_KEYS.items():
        if key in device.model_fields_set and device.type not in types:
            owners = " and ".join((", ".join(types[:-1]), types[-1])) if len(types) > 1 else types[0]
            yield Problem((*place, key), f"must be left out for {device.type}: it shapes {owners} only")
    if stage.times in (device.lines or {}):
        wanted = (*place, "lines", str(stage.times))
        yield Problem(wanted, "must be left out: it is the wanted line, to which the others are relative")


def _filter_problems(i: int, stage: StageTable) -> Iterator[Problem]:
    given = stage.filter
    if not isinstance(given, FilterTable):
        return
    if given.bandwidth.hz(given.centre) > given.centre:
        yield Problem(("stage", i, "filter", "bandwidth"), "must be at most the centre frequency")
    if given.family == "butterworth" and given.ripple is not None:
        yield Problem(("stage", i, "filter", "ripple"), "must be left out for butterworth: it has no ripple")


def _file_problems(i: int, stage: StageTable, folder: Path) -> Iterator[Problem]:
    """Read the file of a measured filter for what is wrong with it; between which impedances is no matter here."""
    if not isinstance(stage.filter, TouchstoneTable | RejectionTable):
        return
    key, noun = (
        ("touchstone", "the path of a Touchstone file of two ports")
        if isinstance(stage.filter, TouchstoneTable)
        else ("table", "the path of a CSV file with frequency and rejection")
    )
    try:
        read_filter(stage.filter, folder=folder, impedance_ohm=50.0)
    except ColumnFileError as error:
        yield Problem(("stage", i, "filter", key), f"must be {noun}; {error}")


def _flatness_problems(i: int, stage: StageTable, design: DesignTable) -> Iterator[Problem]:
    flatness, ripple = (design_value(key, design, stage) for key in ("flatness", "ripple"))
    if "chebyshev" not in design_value("families", design, stage) or flatness >= ripple:
        return
    texts = {
        "flatness": f"must be at least the ripple, {ripple:g} dB",
        "ripple": f"must be at most the flatness, {flatness:g} dB",
    }
    yield _conflict(i, stage, design, texts)


def _fixed_problems(i: int, stage: StageTable, design: DesignTable) -> Iterator[Problem]:
    """Check what the user fixes against the limits that the user sets."""
    order, most = (design_value(key, design, stage) for key in ("order", "max_order"))
    if order is not None and order > most:
        texts = {"order": f"must be at most max_order, {most}", "max_order": f"must be at least the order, {order}"}
        yield _conflict(i, stage, design, texts)
    bandwidth, least = (design_value(key, design, stage) for key in ("bandwidth", "min_bandwidth"))
    if bandwidth is not None and least is not None and bandwidth < least * (1 - _ROUNDING):
        texts = {
            "bandwidth": f"must be at least min_bandwidth, {PERCENT.write(least)}",
            "min_bandwidth": f"must be at most the bandwidth, {PERCENT.write(bandwidth)}",
        }
        yield _conflict(i, stage, design, texts)
    resonator, names = (design_value(key, design, stage) for key in ("resonator", "topology"))
    if isinstance(resonator, Reactance) and names != ("auto",):
        part, noun = ("L", "inductance") if resonator.unit == "H" else ("C", "capacitance")
        if all(topologies.REGISTRY[name].free != part for name in topologies.expand(names)):
            listed = " and ".join(names)
            texts = {
                "resonator": f"must be left out for {listed}: the {noun} of its resonators is not free",
                "topology": f'must name a circuit that leaves the {noun} of resonators free, or resonator be "auto"',
            }
            yield _conflict(i, stage, design, texts)


def _conflict(i: int, stage: StageTable, design: DesignTable, texts: Mapping[str, str]) -> Problem:
    """Blame the first of some keys that was written, the stage's own before those of [design].

    There always is one: the defaults agree with each other.
    """
    owners: tuple[tuple[Location, DesignTable], ...] = ((("stage", i), stage), (("design",), design))
    written = [(place, key) for place, table in owners for key in texts if key in table.model_fields_set]
    place, key = written[0]
    return Problem((*place, key), texts[key])


def _kit_problems(raw: Mapping[str, Any], parts: Parts, folder: Path) -> Iterator[Problem]:
    if parts.design is not None:
        yield from _kits_not_found(("design",), parts.design, raw.get("design", {}), folder)
    for i, stage in enumerate(parts.stages):
        if stage is not None:
            yield from _kits_not_found(("stage", i), stage, raw["stage"][i], folder)


def _kits_not_found(place: Location, table: DesignTable, raw: Mapping[str, Any], folder: Path) -> Iterator[Problem]:
    shipped = kit_names()
    allowed = ", ".join(f'"{name}"' for name in shipped)
    for j, name in enumerate(table.kit if "kit" in table.model_fields_set else ()):
        if name in shipped:
            continue
        where: Location = (*place, "kit", j) if isinstance(raw["kit"], list) else (*place, "kit")
        try:
            load_kit(name, folder)
        except KitError as error:
            for text in error.problems if (folder / name).exists() else ("not found",):
                near = nearest(name, shipped) if text == "not found" else None
                hint = f'; did you mean "{near}"?' if near else f"; {text}"
                yield Problem(where, f"must be {allowed} or the path of a kit file{hint}")


def _chain_problems(raw: Mapping[str, Any], parts: Parts) -> Iterator[Problem]:
    count = len(parts.stages)
    if isinstance(raw.get("stage"), list) and not 1 <= count <= MOST_STAGES:
        yield Problem(("stage",), f"must be 1 to {MOST_STAGES} tables [[stage]]; there are {count}", shown=False)
    total = math.prod(stage.times for stage in parts.stages if stage is not None)
    lines = parts.source.lines if parts.source is not None else None
    common = math.lcm(*(line.denominator for line in lines or ()))
    if total * common > LARGEST_TOTAL:
        halves = f"{LARGEST_TOTAL // common} with source lines in 1/{common}" if common > 1 else f"{LARGEST_TOTAL}"
        yield Problem(("stage",), f"the factors multiply to {total}, must be at most {halves}", shown=False)


def _name_problems(raw: Mapping[str, Any]) -> Iterator[Problem]:
    stages = raw.get("stage")
    items = [item if isinstance(item, dict) else {} for item in stages] if isinstance(stages, list) else []
    names = [str(item.get("name", f"stage {i + 1}")).strip() for i, item in enumerate(items)]
    for i, name in enumerate(names):
        if "name" in items[i] and names.count(name) > 1:
            yield Problem(("stage", i, "name"), "must be a name that no other stage has")


def stage_name(i: int, stage: StageTable) -> str:
    """Return a stage's name, "stage 1" and so on where it has none; `i` counts from 0."""
    return stage.name if stage.name is not None else f"stage {i + 1}"
