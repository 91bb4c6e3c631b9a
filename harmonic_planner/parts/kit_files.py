"""Kit files: TOML with units, checked as a whole; every problem of a file is reported at once.

A value stands alone (``mounting = "0.15 nH"``) or with its basis beside it
(``mounting = { value = "0.15 nH", basis = "measured on our board" }``). Shipped kits give a basis for every value.
"""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Iterator, Mapping
from functools import partial
from pathlib import Path
from typing import Annotated, Any

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, ValidationError, field_validator, model_validator

from harmonic_planner.model import PlannerError
from harmonic_planner.parts.preferred import SERIES
from harmonic_planner.parts.quantities import Unit, quantity


class KitError(PlannerError):
    """A kit cannot be used; `problems` has one line for each fault."""

    def __init__(self, problems: tuple[str, ...]) -> None:
        super().__init__("\n".join(problems))
        self.problems = problems


CONTINUOUS = "continuous"
"""Grid of capacitors that can be set to any value of their range."""


def _reader(unit: Unit) -> BeforeValidator:
    return BeforeValidator(partial(quantity, unit=unit))


Inductance = Annotated[float, _reader("H"), Field(gt=0)]
StrayInductance = Annotated[float, _reader("H"), Field(ge=0)]
Capacitance = Annotated[float, _reader("F"), Field(gt=0)]
StrayCapacitance = Annotated[float, _reader("F"), Field(ge=0)]
Frequency = Annotated[float, _reader("Hz"), Field(gt=0)]
Current = Annotated[float, _reader("A"), Field(gt=0)]
Voltage = Annotated[float, _reader("V"), Field(gt=0)]
TemperatureCoefficient = Annotated[float, _reader("ppm/K"), Field(gt=-0.01, lt=0.01)]
Flag = Annotated[bool, Field(strict=True)]
Resistance = Annotated[float, _reader("ohm"), Field(ge=0)]
Tolerance = Annotated[float, _reader("%"), Field(gt=0, lt=1)]
Share = Annotated[float, _reader("%"), Field(gt=0, le=10)]
Number = Annotated[float, Field(gt=0, strict=True, allow_inf_nan=False)]
Exponent = Annotated[float, Field(ge=0, le=1, strict=True, allow_inf_nan=False)]
Dissipation = Annotated[float, Field(ge=0, lt=1, strict=True, allow_inf_nan=False)]


class _Table(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


class _Ranged(_Table):
    smallest: float
    largest: float
    grid: str | tuple[float, ...]

    @model_validator(mode="after")
    def _range_in_order(self) -> _Ranged:
        if self.smallest >= self.largest:
            raise ValueError("smallest must be below largest")
        if not isinstance(self.grid, str) and any(not self.smallest <= value <= self.largest for value in self.grid):
            raise ValueError("every value of grid must lie between smallest and largest")
        return self


def _read_grid(raw: object, unit: Unit) -> str | tuple[float, ...]:
    if isinstance(raw, str) and raw in SERIES:
        return raw
    if isinstance(raw, list) and raw:
        values = tuple(quantity(item, unit) for item in raw)
        if all(a < b for a, b in zip((0.0, *values), values, strict=False)):
            return values
    if raw == CONTINUOUS and unit == "F":
        return CONTINUOUS
    named = ", ".join((*SERIES, CONTINUOUS) if unit == "F" else SERIES)
    raise ValueError(f"expected one of {named}, or a list of values in {unit}, above zero and ascending")


class InductorTable(_Ranged):
    """`[inductor]`."""

    smallest: Inductance
    largest: Inductance
    tolerance: Tolerance
    q: Number
    q_frequency: Frequency
    q_exponent: Exponent = 0.5
    q_most: Number
    self_resonance: Frequency
    self_resonance_inductance: Inductance
    self_resonance_exponent: Exponent = 0.5
    mounting: StrayInductance
    temperature: TemperatureCoefficient | None = None
    current: Current | None = None
    parallel: Flag = False

    _grid = field_validator("grid", mode="before")(lambda raw: _read_grid(raw, "H"))


class CapacitorTable(_Ranged):
    """`[capacitor]`."""

    smallest: Capacitance
    largest: Capacitance
    tolerance: Tolerance
    dissipation: Dissipation
    esr: Resistance
    esr_frequency: Frequency
    inductance: StrayInductance
    temperature: TemperatureCoefficient | None = None
    voltage: Voltage | None = None
    parallel: Flag = False

    _grid = field_validator("grid", mode="before")(lambda raw: _read_grid(raw, "F"))


class BoardTable(_Table):
    """`[board]`."""

    via: StrayInductance
    pad: StrayCapacitance
    shared_via: StrayInductance = 0.0


class VerdictTable(_Table):
    """`[verdict]`; the defaults are (memory) common practice, no source."""

    stray_ok: Share = 0.10
    stray_marginal: Share = 0.25
    resonance_ok: Number = 3.0
    resonance_marginal: Number = 1.5
    stray_tolerance: Share = 0.30

    @model_validator(mode="after")
    def _in_order(self) -> VerdictTable:
        if self.stray_ok > self.stray_marginal:
            raise ValueError("stray_ok must not exceed stray_marginal")
        if self.resonance_ok < self.resonance_marginal:
            raise ValueError("resonance_ok must not be below resonance_marginal")
        return self


class BandwidthTable(_Table):
    """`[bandwidth]`; the defaults are (memory) common practice, no source."""

    untuned: Number = 5.0
    tuned: Number = 3.0


class KitTable(_Table):
    """A whole kit file, in SI."""

    name: Annotated[str, Field(min_length=1)]
    title: str
    tuned: Flag = False
    inductor: InductorTable
    capacitor: CapacitorTable
    board: BoardTable
    verdict: VerdictTable = VerdictTable()
    bandwidth: BandwidthTable = BandwidthTable()


def read_kit_file(path: Path) -> tuple[KitTable, dict[str, str]]:
    """Read and check one kit file.

    Parameters
    ----------
    path : Path
        A TOML file.

    Returns
    -------
    table : KitTable
        Its values in SI.
    basis : dict of str to str
        Dotted key -> where the value comes from; keys whose value stands alone are absent.

    Raises
    ------
    KitError
        With every problem of the file: dotted key, value, what is allowed.
    """
    try:
        raw = tomllib.loads(path.read_bytes().decode("utf-8"))
    except OSError as error:
        reason = "is a folder" if path.is_dir() else error.strerror or "cannot be read"
        raise KitError((f"kit file {path}: {reason}; expected a TOML file",)) from error
    except UnicodeDecodeError as error:
        raise KitError((f"kit file {path}: is not UTF-8 text (byte {error.start})",)) from error
    except tomllib.TOMLDecodeError as error:
        raise KitError((f"kit file {path}: is not TOML: {error}",)) from error
    values, basis = _split_basis(raw)
    problems = [f"{key}.basis = {text!r}: expected a text" for key, text in basis.items() if not isinstance(text, str)]
    try:
        table = KitTable.model_validate(values)
    except ValidationError as error:
        problems += [_sentence(fault, values) for fault in error.errors()]
    if problems:
        raise KitError(tuple(f"kit file {path}: {problem}" for problem in problems))
    return table, {key: str(text) for key, text in basis.items()}


def _split_basis(raw: Mapping[str, Any], prefix: str = "") -> tuple[dict[str, Any], dict[str, Any]]:
    """Part each ``{ value, basis }`` into the value, in place, and the basis, by dotted key."""
    values: dict[str, Any] = {}
    basis: dict[str, Any] = {}
    for key, item in raw.items():
        if isinstance(item, dict) and "value" in item and item.keys() <= {"value", "basis"}:
            values[key] = item["value"]
            if "basis" in item:
                basis[prefix + key] = item["basis"]
        elif isinstance(item, dict):
            values[key], inner = _split_basis(item, f"{prefix}{key}.")
            basis |= inner
        else:
            values[key] = item
    return values, basis


def _models(path: tuple[str, ...]) -> Iterator[type[BaseModel]]:
    model: type[BaseModel] = KitTable
    yield model
    for key in path:
        field = model.model_fields.get(key)
        if field is None or not isinstance(field.annotation, type) or not issubclass(field.annotation, BaseModel):
            return
        model = field.annotation
        yield model


def _sentence(fault: Any, values: Mapping[str, Any]) -> str:
    """Write one pydantic fault as: dotted key, value, what is allowed."""
    path = tuple(str(part) for part in fault["loc"])
    dotted = ".".join(path) or "file"
    value = fault["input"]
    match fault["type"]:
        case "missing":
            return f"{dotted} is missing; it is required"
        case "extra_forbidden":
            allowed = list(tuple(_models(path[:-1]))[-1].model_fields)
            close = difflib.get_close_matches(path[-1], allowed, n=1, cutoff=0.0)
            return f"{dotted} = {value!r}: unknown key; nearest: {close[0]}; allowed: {', '.join(allowed)}"
        case "model_type":
            return f"{dotted} = {value!r}: expected a table [{dotted}]"
        case "value_error" if len(tuple(_models(path))) > len(path):  # of a table, not of one value
            return f"{dotted}: {fault['ctx']['error']}"
        case "value_error":
            return f"{dotted} = {value!r}: {fault['ctx']['error']}"
        case _:
            written = values
            for part in path:
                written = written.get(part, {}) if isinstance(written, Mapping) else {}
            return f"{dotted} = {written!r}: {fault['msg']}"
