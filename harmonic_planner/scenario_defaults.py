"""Every default that shaped a scenario, as text."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from harmonic_planner.scenario_checks import SHAPE_KEYS, design_value
from harmonic_planner.scenario_tables import (
    AmplifierTable,
    DesignTable,
    DeviceTable,
    Document,
    FilterTable,
    RejectionTable,
    SourceTable,
    StageTable,
    TouchstoneTable,
)

HALF_ANGLES_DEG: Mapping[int, float] = {2: 70.0, 3: 50.0}
"""Conduction half-angle by factor where none is given (memory); 120/N deg for the others."""


def half_angle_deg(times: int) -> float:
    """Return the conduction half-angle [deg] of a multiplier by `times` for which none is given."""
    return HALF_ANGLES_DEG.get(times, 120.0 / times)


_DESIGN_WORDS: Mapping[str, str] = {
    "families": " = butterworth and chebyshev",
    "isolation": " = 75 dB to 1 GHz, 20 dB a decade less above",
    "reflection": ": the neighbour's own",
    "termination": ": by pad, 3 dB without one, 1.5 dB with 3 dB, 1 dB with 6 dB",
    "unloaded_q": ": from kit and topology",
    "tuned": " = false",
}
"""Design keys whose default is not one text to write."""


def _written(table: type[DesignTable | DeviceTable | AmplifierTable | SourceTable], name: str) -> str:
    return f" = {table.model_fields[name].default}"


def listed_defaults(document: Document) -> Iterator[str]:
    """List every default that shaped a scenario, in the order of the file.

    Parameters
    ----------
    document : Document
        The scenario as read.

    Yields
    ------
    str
        For instance ``design.drift = 1 %``.
    """
    source = document.source.model_fields_set
    if "level" not in source:
        yield "source.level" + _written(SourceTable, "level")
    if "lines" not in source:
        yield "source.lines: none given; a real source has harmonics"
    if "phase_noise" not in source:
        yield "source.phase_noise: none given, none reported"
    if document.output.level is None:
        yield "output.level: none asked for"
    if document.output.limit is None:
        yield "output.limit: none outside the masks" if document.output.limit_dbm is None else "output.limit: none"
    for name in DesignTable.model_fields:
        everywhere = all(name in stage.model_fields_set for stage in document.stage)
        if name not in document.design.model_fields_set and not everywhere:
            yield f"design.{name}" + _DESIGN_WORDS.get(name, _written(DesignTable, name))
    for i, stage in enumerate(document.stage):
        place = f"stage[{i + 1}]"
        yield from _stage_defaults(place, stage, document.design)


def _stage_defaults(place: str, stage: StageTable, design: DesignTable) -> Iterator[str]:
    if stage.device is not None:
        own_reflection = design_value("reflection", design, stage) is None
        yield from _device_defaults(f"{place}.device", stage.device, stage.times, own_reflection=own_reflection)
    for name in ("pad", "pad_after", "limit", "tap", "amplifier"):
        if name not in stage.model_fields_set:
            yield f"{place}.{name}: none"
    if "filter" not in stage.model_fields_set:
        yield f"{place}.filter = plan"
    if (
        isinstance(stage.filter, TouchstoneTable | RejectionTable)
        and "beyond_sweep" not in stage.filter.model_fields_set
    ):
        yield f"{place}.filter.beyond_sweep = {stage.filter.beyond_sweep}"
    if isinstance(stage.filter, FilterTable):
        given = stage.filter
        if given.ripple is None and given.family == "chebyshev":
            yield f"{place}.filter.ripple = {design_value('ripple', design, stage):g} dB"
        if given.topology is None:
            yield f"{place}.filter.topology: none, the prototype's own response"
        if given.unloaded_q is None and given.topology is None:
            yield f"{place}.filter.unloaded_q: lossless"
    if stage.amplifier is not None:
        own_reflection = design_value("reflection", design, stage) is None
        yield from _amplifier_defaults(f"{place}.amplifier", stage.amplifier, own_reflection=own_reflection)


def _device_defaults(place: str, device: DeviceTable, times: int, *, own_reflection: bool) -> Iterator[str]:
    absent = DeviceTable.model_fields.keys() - device.model_fields_set
    words = {
        "half_angle": f" = {half_angle_deg(times):.4g} deg",
        "balance": _written(DeviceTable, "balance"),
        "steepness": _written(DeviceTable, "steepness"),
    }
    if "conversion" in absent:
        yield f"{place}.conversion = 0 dB"
    for name, types in SHAPE_KEYS.items():
        if name in absent and device.type in types:
            yield f"{place}.{name}{words[name]}"
    if "class_" in absent:
        yield f"{place}.class" + _written(DeviceTable, "class_")
    if "drive" in absent:
        yield f"{place}.drive: no window, none checked; the planned level is nominal"
    if "lines" in absent:
        yield f"{place}.lines: those of the waveform"
    if "reflection" in absent and own_reflection:
        yield f"{place}.reflection" + _written(DeviceTable, "reflection")


def _amplifier_defaults(place: str, amplifier: AmplifierTable, *, own_reflection: bool) -> Iterator[str]:
    absent = AmplifierTable.model_fields.keys() - amplifier.model_fields_set
    words = {"saturation": "none, linear", "noise_figure": "not counted", "lines": "none given"}
    for name, text in words.items():
        if name in absent:
            yield f"{place}.{name}: {text}"
    if "reflection" in absent and own_reflection:
        yield f"{place}.reflection" + _written(AmplifierTable, "reflection")
