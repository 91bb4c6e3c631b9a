"""What every room shares: the scenario as typed values, and the plan as frozen results.

Everything here is SI: hertz, ohm, henry, farad; levels in dBm, ratios in dB or dBc, bandwidths as a fraction of the
centre. A spectral line is named by its harmonic number *k* relative to the source, a `Fraction` (1/2 where the
oscillator itself multiplies). The field names of the result classes are the keys of ``plan.json``.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path
from typing import Literal

DeviceType = Literal["single-ended", "push-push", "push-pull", "limiter", "power-law"]
DeviceClass = Literal["resistive", "reactive", "active"]
Family = Literal["butterworth", "chebyshev"]
Phases = Literal["worst-case", "average"]
Placement = Literal["series", "shunt"]
Kind = Literal["L", "C"]
ElementVerdict = Literal["ok", "marginal", "swamped"]
FilterSource = Literal["planned", "given", "touchstone", "table", "none"]
BeyondSweep = Literal["refuse", "no-rejection"]

VERDICT_RANK: Mapping[ElementVerdict, int] = {"ok": 0, "marginal": 1, "swamped": 2}


class PlannerError(Exception):
    """A fault the user can mend; the message names the key or option, the value and what is allowed."""


# ---------------------------------------------------------------------------------------------- scenario


@dataclass(frozen=True)
class Device:
    """A multiplier: waveform, conversion gain and what the user knows of its lines."""

    type: DeviceType
    conversion_db: float
    half_angle_rad: float = math.pi / 2
    balance_db: float = 25.0
    steepness: float = 10.0
    """g of the limiter tanh(g·x + b)."""
    device_class: DeviceClass = "resistive"
    drive_dbm: tuple[float, float] | None = None
    lines_dbc: Mapping[int, float] = field(default_factory=dict)
    """Harmonic of the device's own input -> level relative to the wanted line [dBc]."""
    reflection: float = 0.7


@dataclass(frozen=True)
class Amplifier:
    """A gain block behind a stage's filter."""

    gain_db: float
    saturation_dbm: float | None = None
    noise_figure_db: float | None = None
    lines_dbc: Mapping[int, float] = field(default_factory=dict)
    """Harmonic of the amplified carrier -> level relative to it [dBc]."""
    reflection: float = 0.3


@dataclass(frozen=True)
class GivenFilter:
    """A filter the user already has in mind; a lossless prototype unless unloaded_q or topology is given."""

    family: Family
    order: int
    centre_hz: float
    bandwidth_hz: float
    ripple_db: float = 0.1
    topology: str | None = None
    unloaded_q: float | None = None


@dataclass(frozen=True)
class MeasuredFilter:
    """A filter known by what it does at some frequencies: a measurement, a data sheet."""

    source: Literal["touchstone", "table"]
    file: str
    """As the scenario names it."""
    frequency_hz: tuple[float, ...]
    """At least two, ascending [Hz]."""
    attenuation_db: tuple[float, ...]
    """At each frequency, between the stage's impedances [dB]."""
    return_loss_db: tuple[float, ...] = ()
    """At each frequency, at the port towards the multiplier [dB]; empty for a table."""
    impedance_ohm: tuple[float, float] | None = None
    """Of the file's two ports, before it was recalculated to the stage's; None for a table."""
    beyond_sweep: BeyondSweep = "refuse"
    """What to do with a line outside the frequencies: refuse it, or take it to pass as the carrier does."""


@dataclass(frozen=True)
class Isolation:
    """What leaks past a filter, relative to its input, and from earlier carriers into a stage."""

    level_db: float
    """Isolation at and below 1 GHz [dB]; infinite for none."""
    flat: bool = False
    """A number the user gave holds at every frequency; the default falls by 20 dB a decade above 1 GHz."""


@dataclass(frozen=True)
class Design:
    """What a stage's filter is designed to; `[design]` with the stage's own overrides merged in."""

    impedance_ohm: float = 50.0
    kits: tuple[str, ...] = ("chip-0603",)
    """Names of shipped kits, or paths of the user's own; the first is preferred."""
    families: tuple[Family, ...] = ("butterworth", "chebyshev")
    ripple_db: float = 0.1
    max_order: int = 9
    flatness_db: float = 1.0
    loss_db: float = 6.0
    drift: float = 0.01
    margin_db: float = 3.0
    phases: Phases = "worst-case"
    isolation: Isolation = Isolation(75.0)
    reflection: float | None = None
    """|Γ| of whatever faces a filter; None takes the neighbour's own, 0 switches the allowance off."""
    termination_db: float | None = None
    """Spread of a device's conversion into a reflective load [dB]; None takes it from the pad."""
    unloaded_q: float | None = None
    min_bandwidth: float | None = None
    """Fraction of the centre; None takes the floor from kit and tolerance."""
    topology: tuple[str, ...] = ("auto",)
    tuned: bool = False
    order: int | None = None
    """Fixes the filter's order."""
    bandwidth: float | None = None
    """Fixes the filter's bandwidth, a fraction of the centre."""
    resonator_h: float | None = None
    """Fixes the inductance of coupled resonators [H]."""
    resonator_f: float | None = None
    """Fixes the capacitance of inductively coupled resonators [F]."""


@dataclass(frozen=True)
class Stage:
    """Multiplier, pad, filter, pad_after, amplifier, in this order."""

    name: str
    times: int
    device: Device | None
    """None exactly for times = 1, a plain clean-up stage."""
    pad_db: float = 0.0
    pad_after_db: float = 0.0
    filter: Literal["plan", "none"] | GivenFilter | MeasuredFilter = "plan"
    amplifier: Amplifier | None = None
    limit_dbc: float | None = None
    design: Design = Design()
    tap: Limits | None = None
    """Limits of another output, tapped behind this stage."""


@dataclass(frozen=True)
class Source:
    """The reference: its tuning range [Hz], level, and the lines it brings along."""

    frequency_hz: tuple[float, float]
    level_dbm: float = 10.0
    lines_dbc: Mapping[Fraction, float] = field(default_factory=dict)
    phase_noise: tuple[tuple[float, float], ...] = ()
    """(offset [Hz], level [dBc/Hz]) pairs, ascending in offset."""


@dataclass(frozen=True)
class MaskBand:
    """Within [low_hz, high_hz] this limit replaces the general one."""

    low_hz: float
    high_hz: float
    limit_dbc: float


@dataclass(frozen=True)
class OffsetBand:
    """From low_hz to high_hz off the carrier, on both sides, this limit replaces the general one."""

    low_hz: float
    high_hz: float
    limit_dbc: float


@dataclass(frozen=True)
class Limits:
    """What is asked of every unwanted line at one node."""

    limit_dbc: float | None = None
    """The general limit."""
    mask: tuple[MaskBand, ...] = ()
    offset_mask: tuple[OffsetBand, ...] = ()
    """Where bands of either mask meet, the strictest holds."""
    limit_dbm: float | None = None
    """Absolute; it stands beside all others, inside the masks too."""
    sm329_category_a: bool = False
    """The general limit is that of Recommendation ITU-R SM.329, category A, at the carrier's power."""


@dataclass(frozen=True)
class Output(Limits):
    """What is asked of the last node."""

    level_dbm: float | None = None


@dataclass(frozen=True)
class Scenario:
    """One chain with its limits, as read from one file."""

    title: str
    source: Source
    output: Output
    design: Design
    stages: tuple[Stage, ...]
    defaults: tuple[str, ...] = ()
    """Every default that shapes the plan, as text: ``design.drift = 1 %``."""
    folder: Path = Path()
    """Where relative names in the scenario (a kit file) are looked up."""

    def carrier(self, stage: int) -> Fraction:
        """Return the carrier's harmonic number behind `stage` (0-based; -1 is the source)."""
        return Fraction(math.prod(s.times for s in self.stages[: stage + 1]))

    @property
    def total(self) -> int:
        """The chain's whole factor."""
        return math.prod(s.times for s in self.stages)


# ---------------------------------------------------------------------------------------------- results


def line_text(k: Fraction) -> str:
    """Write a line as people do: ``3`` or ``1/2``."""
    return str(k)


@dataclass(frozen=True)
class LineLevel:
    """One line at one node."""

    line: Fraction
    level_dbc: float


LEAK_OF = "leak of "
"""How the origin of what an earlier carrier leaks begins: ``leak of source into second doubler``."""


@dataclass(frozen=True)
class Origin:
    """Where part of a line was born; share of the amplitude sum, or of the power under `average`."""

    stage: str
    line: Fraction
    share: float


@dataclass(frozen=True)
class OutputLine:
    """One unwanted line at the output, against its limit."""

    line: Fraction
    frequency_hz: tuple[float, float]
    level_dbc: float
    allowance_db: float
    limit_dbc: float | None
    margin_db: float | None
    margin_other_phases_db: float | None
    origins: tuple[Origin, ...]


@dataclass(frozen=True)
class PhaseNoisePoint:
    """Single-sideband phase noise at one offset."""

    offset_hz: float
    dbc_hz: float


@dataclass(frozen=True)
class Requirement:
    """What a stage's filter must do at one unwanted line, and does."""

    line: Fraction
    frequency_hz: tuple[float, float]
    required_db: float
    ideal_db: float
    as_built_db: float
    margin_db: float


@dataclass(frozen=True)
class Window:
    """For one family and order: the bandwidths that pass the carrier and reject every unwanted line."""

    family: Family
    ripple_db: float
    order: int
    bandwidth_min_hz: float
    bandwidth_max_hz: float
    centre_hz: float
    """Middle of the centres allowed at the widest bandwidth."""
    feasible: bool
    reason: str = ""
    """Why there is no window, in words."""
    centre_min_hz: float | None = None
    """Middle of the centres allowed at the narrowest bandwidth."""


@dataclass(frozen=True)
class ElementReport:
    """One part of a filter, with what strays do to it."""

    ref: str
    kind: Kind
    placement: Placement
    ideal: float
    nominal: float
    unit: Literal["H", "F"]
    q: float
    self_resonance_hz: float
    stray_share: float
    verdict: ElementVerdict
    reason: str
    bought: tuple[float, ...] = ()
    """Values to buy, two where parts stand in parallel."""
    peak_v: float | None = None
    """Largest peak voltage across the part at the stage's power [V]."""
    rms_a: float | None = None
    """Largest current through it [A rms]."""
    rated_v: float | None = None
    rated_a: float | None = None


@dataclass(frozen=True)
class Proposal:
    """A change that was re-designed and run through the chain before it is shown."""

    change: str
    family: Family
    ripple_db: float
    order: int
    topology: str
    bandwidth_hz: float
    centre_hz: float
    worst_verdict: ElementVerdict
    worst_element: str
    worst_margin_db: float
    """Least output margin of the whole chain with this change, design margin included [dB]."""
    loss_db: float
    buildable: bool
    """No element swamped."""
    kit: str = ""
    impedance_ohm: float = 50.0
    resonator: float | None = None
    """Free inductance [H] or capacitance [F] of coupled resonators."""
    price: str = ""
    """What it costs, in words."""


@dataclass(frozen=True)
class FilterPlan:
    """A stage's filter: the specification, the windows it came from, its parts."""

    source: FilterSource
    family: Family | None = None
    ripple_db: float | None = None
    order: int | None = None
    topology: str | None = None
    centre_hz: float | None = None
    bandwidth_hz: float | None = None
    loss_db: float = 0.0
    """Midband loss as built [dB]."""
    return_loss_db: float | None = None
    """Worst over the carrier's span and drift, as built [dB]."""
    unloaded_q: float | None = None
    kit: str | None = None
    impedance_ohm: float | None = None
    resonator: float | None = None
    """Free inductance [H] or capacitance [F] of coupled resonators."""
    netlist: str | None = None
    touchstone: str | None = None
    """Names of the files in the plan's folder."""
    reason: str = ""
    """Why this filter, or why none, in words."""
    requirement: tuple[Requirement, ...] = ()
    windows: tuple[Window, ...] = ()
    elements: tuple[ElementReport, ...] = ()
    proposals: tuple[Proposal, ...] = ()
    proposals_note: str = ""
    response_hz: tuple[float, ...] = ()
    response_db: tuple[float, ...] = ()
    """Attenuation as built over `response_hz` [dB], for the figure."""


@dataclass(frozen=True)
class StagePlan:
    """Everything known of one stage."""

    name: str
    times: int
    line: Fraction
    frequency_hz: tuple[float, float]
    drive_dbm: float
    output_dbm: float
    input_lines: tuple[LineLevel, ...]
    device_lines: tuple[LineLevel, ...]
    output_lines: tuple[LineLevel, ...]
    filter: FilterPlan
    limit_dbc: float | None = None
    """The stage's own limit at its output, where it has one."""
    limited_lines: tuple[OutputLine, ...] = ()
    """Unwanted lines against the limits of this stage's own output or tap; empty where it has none."""


@dataclass(frozen=True)
class OutputPlan:
    """The last node."""

    carrier_dbm: tuple[float, float]
    frequency_hz: tuple[float, float]
    lines: tuple[OutputLine, ...]
    phase_noise: tuple[PhaseNoisePoint, ...] = ()


@dataclass(frozen=True)
class AllocationPlan:
    """How many resonators all stages need together."""

    total: int
    """Resonators of the planned filters; a low-pass or high-pass counts one for every pair of its parts."""
    lower_bound: int
    """What no choice among the candidates gets below."""
    proven: bool
    """The total is that bound."""
    nodes: int
    """Partial choices the search looked at."""


@dataclass(frozen=True)
class Holding:
    """What keeps one stage's filter from doing with a resonator fewer."""

    stage: str
    resonators: int
    line: Fraction | None
    """The line that misses its limit first with one fewer, the other filters as they are; None where none does."""
    at: str
    """Where: the stage behind which it is judged, or ``output``."""
    over_db: float | None
    """By how much it is then beyond its limit, the margin asked for counted [dB]."""
    bound: bool
    """Whatever the other filters do, fewer are not enough."""
    origins: tuple[Origin, ...]
    """Of that line, then."""
    text: str


@dataclass(frozen=True)
class Why:
    """What holds the count of resonators up."""

    sentence: str
    stages: tuple[Holding, ...]


@dataclass(frozen=True)
class WhatIf:
    """A change to the chain, for which the joint search was made again; not built."""

    change: str
    price: str
    """What it costs, in words; empty where nothing is known of that."""
    total_now: int
    met_now: bool
    margin_now_db: float
    """Least margin over all limits, by the search's candidates at the corners of span and drift [dB]."""
    total: int
    """Resonators with the change; where `met` is False, of the choice that comes nearest."""
    met: bool
    margin_db: float
    note: str = ""


@dataclass(frozen=True)
class TradePoint:
    """The widest common bandwidth that so many resonators allow."""

    total: int
    factor: float
    """Every stage's least bandwidth can be so many times what it has to be."""
    bandwidth: float
    """The least of these bandwidths, a fraction of the centre: every bandpass is at least so wide."""
    widest_tried: bool
    """More may be possible: no wider was tried."""
    resonators: tuple[int, ...]
    """By stage; 0 where nothing is planned."""
    margin_db: float
    """Least margin over all limits [dB]."""


@dataclass(frozen=True)
class Plan:
    """The whole answer; `plan.json` has these keys."""

    schema: str
    title: str
    verdict: Literal["met", "not met"]
    sentence: str
    """The verdict in one sentence a person can act on."""
    limits_met: bool
    buildable: bool
    self_check: bool
    self_checks: tuple[str, ...]
    """What was checked by a second method, with the difference found."""
    warnings: tuple[str, ...]
    assumptions: tuple[str, ...]
    cautions: tuple[str, ...]
    source_lines: tuple[LineLevel, ...]
    output: OutputPlan
    stages: tuple[StagePlan, ...]
    allocation: AllocationPlan | None = None
    why: Why | None = None
    """None where limits are not met, or nothing was planned."""
    what_if: tuple[WhatIf, ...] = ()
    """On request, and the trade below as well."""
    trade: tuple[TradePoint, ...] = ()

    @property
    def exit_status(self) -> int:
        """0 when limits are met, every filter can be built and the self-check passed; else 3."""
        return 0 if self.limits_met and self.buildable and self.self_check else 3
