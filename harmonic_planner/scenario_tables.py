"""The tables of a scenario file, one pydantic model each: which keys there are, what each allows, its default.

A default stands here as a user would write it, so that the published schema and the list of defaults in a plan show
the same text. A key that may be left out without a value to write for it has None.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Annotated, Any, Literal, get_args

from pydantic import BaseModel, ConfigDict, Discriminator, Field, Tag

from harmonic_planner.model import BeyondSweep, DeviceClass, DeviceType, Family, Phases
from harmonic_planner.quantities import (
    ANGLE,
    FREQUENCY,
    LEVEL_DBM,
    LINE_DBC,
    NOISE_DBC_HZ,
    OFFSET,
    PERCENT,
    RATIO_DB,
    REACTANCE,
    RESISTANCE,
    Either,
    Pair,
    Reactance,
    Width,
    WidthRule,
)
from harmonic_planner.rules import Choice, Flag, Names, Number, Several, Text
from harmonic_planner.scenario_rules import (
    AMPLIFIER_LINE,
    ANY_LIMIT,
    DEVICE_LINE,
    FILE,
    GAIN,
    LARGEST_FACTOR,
    LIMIT,
    LIMIT_DBM,
    ORDER,
    QUALITY,
    REFLECTION,
    RIPPLE,
    SEPARATION,
    SHARE,
    SOURCE_LINE,
    FilterWord,
    TopologyRule,
)

# ------------------------------------------------------------------------------------------------- kinds of keys


def _need(description: str) -> Any:
    """Declare a key that must be there."""
    return Field(description=description)


def _default(value: object, description: str) -> Any:
    """Declare a key with the default a user could have written."""
    return Field(default=value, validate_default=True, description=description)


def _without_default(schema: dict[str, Any]) -> None:
    schema.pop("default", None)


def _maybe(description: str) -> Any:
    """Declare a key that may be left out without a value to write for it."""
    return Field(default=None, description=description, json_schema_extra=_without_default)


class Table(BaseModel):
    """What all tables share: unknown keys are errors."""

    model_config = ConfigDict(extra="forbid", frozen=True)


# --------------------------------------------------------------------------------------------------------- tables


class SourceTable(Table):
    """The reference: its frequency or tuning span, level, and the lines it brings along."""

    frequency: Annotated[tuple[float, float], Pair(FREQUENCY, ("99 MHz", "101 MHz"), single=True, equal=True)] = _need(
        "Frequency of the source, or its tuning span"
    )
    level: Annotated[float, LEVEL_DBM] = _default("10 dBm", "Level of the carrier")
    lines: dict[Annotated[Fraction, SOURCE_LINE], Annotated[float, LINE_DBC]] | None = _maybe(
        'Lines of the source by harmonic number, "1/2" where the oscillator itself multiplies; default: none'
    )
    phase_noise: dict[Annotated[float, OFFSET], Annotated[float, NOISE_DBC_HZ]] | None = _maybe(
        "Single-sideband phase noise by offset; default: none, and none reported"
    )


class MaskTable(Table):
    """A range of frequency in which another limit holds."""

    from_: Annotated[float, FREQUENCY] = Field(alias="from", description="Lower end of the range")
    to: Annotated[float, FREQUENCY] = _need("Upper end of the range")
    limit: Annotated[float, LIMIT] = _need("Limit of every unwanted line in the range, relative to the carrier")


class OffsetMaskTable(MaskTable):
    """A range of the offset from the carrier, on both sides, in which another limit holds."""

    from_: Annotated[float, SEPARATION] = Field(alias="from", description="Least distance from the carrier")
    to: Annotated[float, SEPARATION] = _need("Largest distance from the carrier")


class TapTable(Table):
    """What is asked of another output, behind a stage."""

    limit: Annotated[float | Literal["SM.329 category A"] | None, ANY_LIMIT] = _maybe(
        "Limit of every unwanted line, or that of Recommendation ITU-R SM.329, category A, for emission at an antenna; "
        "required unless mask, offset_mask or limit_dbm is given"
    )
    limit_dbm: Annotated[float | None, LIMIT_DBM] = _maybe(
        "Absolute limit of every unwanted line, beside all others; default: none"
    )
    mask: list[MaskTable] | None = _maybe("Ranges in which another limit replaces the general one; default: none")
    offset_mask: list[OffsetMaskTable] | None = _maybe(
        "Ranges of the offset from the carrier in which another limit replaces the general one; default: none"
    )


class OutputTable(TapTable):
    """What is asked of the last node."""

    level: Annotated[float | None, LEVEL_DBM] = _maybe("Level asked for, a warning beyond 2 dB; default: none")


class DesignTable(Table):
    """What the filters are designed to."""

    impedance: Annotated[float, RESISTANCE] = _default("50 ohm", "Impedance between which the filters work")
    kit: Annotated[tuple[str, ...], Names(Text("the name of a kit or of a kit file", 200))] = _default(
        "chip-0603",
        "Parts to build from: a shipped kit, a kit file ending in .toml, relative to the scenario, "
        "or a list of these, the preferred one first",
    )
    families: Annotated[tuple[Family, ...], Several(Choice(get_args(Family)))] = _default(
        ["butterworth", "chebyshev"], "Filter families to choose from"
    )
    ripple: Annotated[float, RIPPLE] = _default("0.1 dB", "Passband ripple of the Chebyshev filters")
    max_order: Annotated[int, ORDER] = _default(9, "Most resonators in one filter")
    order: Annotated[int | None, Either("auto", None, ORDER)] = _default(
        "auto", 'Resonators in the filter, at most max_order, or "auto": the fewest that do'
    )
    bandwidth: Annotated[float | None, Either("auto", None, SHARE)] = _default(
        "auto", 'Bandwidth as a share of the centre, or "auto": what every line and the parts allow'
    )
    flatness: Annotated[float, RATIO_DB.between(0.01, 6, example="1 dB")] = _default(
        "1 dB", "Loss at the worst point of span and drift, less the midband loss, at most"
    )
    loss: Annotated[float, RATIO_DB.between(0, 60, above=True, example="6 dB")] = _default(
        "6 dB", "Midband loss of one filter, at most"
    )
    drift: Annotated[float, PERCENT.between(0, 20, example="1 %")] = _default(
        "1 %", "Movement of a filter's centre as a whole, to either side"
    )
    margin: Annotated[float, RATIO_DB.between(0, 40)] = _default("3 dB", "Margin to every limit")
    phases: Annotated[Phases, Choice(get_args(Phases))] = _default(
        "worst-case", "How paths into one line combine: amplitudes add (worst-case) or powers (average)"
    )
    isolation: Annotated[
        float | None, Either("none", float("inf"), RATIO_DB.between(0, 200, above=True, example="75 dB"))
    ] = _maybe('Leakage past a filter, flat, or "none"; default: 75 dB to 1 GHz, 20 dB a decade less above')
    reflection: Annotated[float | None, REFLECTION] = _maybe(
        "Reflection factor of the device facing a filter, 0 for no mismatch allowance; default: the neighbour's own"
    )
    termination: Annotated[float | None, RATIO_DB.between(0, 20, example="1.5 dB")] = _maybe(
        "Spread of conversion into a reflective load; default: 3 dB without a pad, 1.5 dB with 3 dB, 1 dB with 6 dB"
    )
    unloaded_q: Annotated[float | None, QUALITY] = _maybe("Unloaded Q of a resonator; default: from kit and topology")
    min_bandwidth: Annotated[float | None, Either("kit", None, SHARE)] = _default(
        "kit", 'Narrowest bandwidth as a share of the centre, or "kit": from kit and tolerance'
    )
    topology: Annotated[tuple[str, ...], TopologyRule(several=True)] = _default(
        "auto", 'Circuit to build: "auto", a name, or a list of names'
    )
    resonator: Annotated[Reactance | None, Either("auto", None, REACTANCE)] = _default(
        "auto", 'Inductance or capacitance of coupled resonators, whichever their circuit leaves free, or "auto"'
    )
    tuned: Annotated[bool, Flag()] = _default(False, "Resonators are adjusted on the bench")


class DeviceTable(Table):
    """A multiplier."""

    type: Annotated[DeviceType, Choice(get_args(DeviceType))] = _need("Waveform of the multiplier")
    conversion: Annotated[float | None, GAIN] = _maybe(
        "Conversion gain from carrier to wanted line; required, but 0 dB for power-law"
    )
    half_angle: Annotated[float | None, ANGLE] = _maybe(
        "Conduction half-angle of single-ended, push-push and push-pull; default: x2 70 deg, x3 50 deg, else 120/N deg"
    )
    balance: Annotated[float, RATIO_DB.between(0, 100, example="25 dB")] = _default(
        "25 dB", "Balance of push-push and push-pull"
    )
    steepness: Annotated[float, Number(0, 1000, above=True)] = _default(10, "Steepness g of the limiter tanh(g x + b)")
    class_: Annotated[DeviceClass, Choice(get_args(DeviceClass))] = Field(
        default="resistive", alias="class", description="What limits the conversion gain in principle"
    )
    drive: Annotated[tuple[float, float] | None, Pair(LEVEL_DBM, ("7 dBm", "13 dBm"))] = _maybe(
        "Drive window; nominal drive is its middle; default: the planned level is nominal, no window checked"
    )
    lines: dict[Annotated[int, DEVICE_LINE], Annotated[float, LINE_DBC.between(-250, 40, example="-25 dBc")]] | None = (
        _maybe("Output lines by harmonic of the input, relative to the wanted line; default: those of the waveform")
    )
    reflection: Annotated[float, REFLECTION] = _default(0.7, "Reflection factor of the multiplier's output and input")


class AmplifierTable(Table):
    """A gain block behind a stage's filter."""

    gain: Annotated[float, GAIN.between(-40, 80, example="20 dB")] = _need("Gain")
    saturation: Annotated[float | None, LEVEL_DBM] = _maybe("Saturated output level; default: linear")
    noise_figure: Annotated[float | None, RATIO_DB.between(0, 50, example="4 dB")] = _maybe(
        "Noise figure; default: not counted"
    )
    lines: dict[Annotated[int, AMPLIFIER_LINE], Annotated[float, LINE_DBC]] | None = _maybe(
        "The amplifier's own lines by harmonic of its carrier; default: none"
    )
    reflection: Annotated[float, REFLECTION] = _default(0.3, "Reflection factor of the amplifier's input")


class FilterTable(Table):
    """A filter the user already has in mind."""

    family: Annotated[Family, Choice(get_args(Family))] = _need("Filter family")
    order: Annotated[int, ORDER] = _need("Number of resonators")
    centre: Annotated[float, FREQUENCY] = _need("Centre frequency")
    bandwidth: Annotated[Width, WidthRule(FREQUENCY.between(1, 1e12, example="60 MHz"), SHARE)] = _need(
        "Bandwidth, 3 dB for Butterworth and ripple for Chebyshev: a frequency or a share of the centre"
    )
    ripple: Annotated[float | None, RIPPLE] = _maybe("Passband ripple of Chebyshev; default: the stage's design ripple")
    topology: Annotated[str | None, TopologyRule(several=False)] = _maybe(
        "Circuit, built from the stage's kit with its strays; default: none, the prototype itself"
    )
    unloaded_q: Annotated[float | None, QUALITY] = _maybe("Unloaded Q of a resonator; default: lossless")


_BEYOND = 'A line outside the frequencies there: "refuse", or "no-rejection", which lets it pass as the carrier does'


class TouchstoneTable(Table):
    """A filter measured as a two-port, port 1 towards the multiplier."""

    touchstone: Annotated[str, FILE] = _need("Touchstone file (.s2p, or .ts), relative to the scenario's folder")
    beyond_sweep: Annotated[BeyondSweep, Choice(get_args(BeyondSweep))] = _default("refuse", _BEYOND)


class RejectionTable(Table):
    """A filter known by its rejection at some frequencies."""

    table: Annotated[str, FILE] = _need(
        "CSV file with the columns frequency (with unit; or frequency_hz, _khz, _mhz, _ghz) and rejection (with unit; "
        "or rejection_db), relative to the scenario's folder"
    )
    beyond_sweep: Annotated[BeyondSweep, Choice(get_args(BeyondSweep))] = _default("refuse", _BEYOND)


def _filter_tag(value: object) -> str:
    """Tell the ways to write a filter apart by the key that only one of them has."""
    if isinstance(value, dict):
        return next((tag for tag in ("touchstone", "table") if tag in value), "described")
    if isinstance(value, TouchstoneTable):
        return "touchstone"
    return "table" if isinstance(value, RejectionTable) else "described" if isinstance(value, FilterTable) else "word"


def _without_defaults(schema: dict[str, Any]) -> None:
    """Drop the defaults of design keys: in a stage the default is what [design] says."""
    for name in DesignTable.model_fields:
        schema["properties"][name].pop("default", None)


class StageTable(DesignTable):
    """Multiplier, pad, filter, pad_after and amplifier, in this order; every key of [design] may be overridden."""

    model_config = ConfigDict(json_schema_extra=_without_defaults)

    name: Annotated[str | None, Text("a name", 60)] = _maybe(
        'Name, different for each stage; default: "stage 1" and so on'
    )
    times: Annotated[int, Number(1, LARGEST_FACTOR, whole=True)] = _need("Factor; 1 is a plain clean-up stage")
    device: DeviceTable | None = _maybe("The multiplier; required unless times is 1")
    pad: Annotated[float | None, RATIO_DB] = _maybe("Pad between multiplier and filter; default: none")
    pad_after: Annotated[float | None, RATIO_DB] = _maybe("Pad behind the filter; default: none")
    limit: Annotated[float | None, LIMIT] = _maybe("Limit of every unwanted line at this stage's output; default: none")
    tap: TapTable | None = _maybe("Limits of another output, tapped behind this stage; default: none")
    filter: Annotated[
        Annotated[FilterTable, Tag("described")]
        | Annotated[TouchstoneTable, Tag("touchstone")]
        | Annotated[RejectionTable, Tag("table")]
        | Annotated[str, FilterWord(), Tag("word")],
        Discriminator(_filter_tag),
    ] = _default("plan", '"plan", "none", a given filter, or a measured one')
    amplifier: AmplifierTable | None = _maybe("Amplifier behind the filter; default: none")


class Document(Table):
    """A multiplier chain with its limits."""

    title: Annotated[str | None, Text("a title", 200)] = _maybe("What the chain is for; default: the file's name")
    source: SourceTable = _need("The table [source] with at least a frequency")
    output: OutputTable = _need("The table [output] with a limit or a mask")
    design: DesignTable = Field(default=DesignTable(), description="The table [design]")
    stage: list[StageTable] = _need("The tables [[stage]], in the order of the chain")
