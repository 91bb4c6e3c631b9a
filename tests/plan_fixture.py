"""A small plan written by hand, with every case a writer must cope with; its numbers are not a design."""

import math
from fractions import Fraction
from functools import cache
from pathlib import Path

import numpy as np

from harmonic_planner.filters.topologies import design
from harmonic_planner.model import (
    AllocationPlan,
    ElementReport,
    ElementVerdict,
    FilterPlan,
    LineLevel,
    Origin,
    OutputLine,
    OutputPlan,
    PhaseNoisePoint,
    Placement,
    Plan,
    Proposal,
    Requirement,
    StagePlan,
    Window,
)
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.physics.prototypes import Prototype
from harmonic_planner.planning.built import Built, Form
from harmonic_planner.planning.jobs import Action
from harmonic_planner.planning.plan import WorkedOut

SOURCE_HZ = (19.9e6, 20.1e6)
SWAMPED_REASON = "pad capacitance 0.3 pF is 41 % of 0.73 pF"


def span_hz(line: Fraction | int | str) -> tuple[float, float]:
    """Span of a line."""
    k = float(Fraction(line))
    return (k * SOURCE_HZ[0], k * SOURCE_HZ[1])


def levels(**dbc: float) -> tuple[LineLevel, ...]:
    """Lines from names such as ``k3`` and ``k1_2``."""
    return tuple(LineLevel(Fraction(name[1:].replace("_", "/")), level) for name, level in dbc.items())


def requirement(line: str, required_db: float, as_built_db: float) -> Requirement:
    """A requirement whose ideal filter is 2 dB better than the real one."""
    return Requirement(
        line=Fraction(line),
        frequency_hz=span_hz(line),
        required_db=required_db,
        ideal_db=as_built_db + 2.0,
        as_built_db=as_built_db,
        margin_db=as_built_db - required_db,
    )


def element(
    ref: str,
    placement: Placement,
    ideal: float,
    *bought: float,
    verdict: ElementVerdict = "ok",
    reason: str = "",
    self_resonance_hz: float = 2.2e9,
    peak_v: float = 1.0,
    rated_v: float | None = None,
    rms_a: float = 0.01,
    rated_a: float | None = None,
) -> ElementReport:
    """A part, or two in parallel, with a stress that is nothing to it unless said."""
    return ElementReport(
        ref=ref,
        kind="L" if ref.startswith("L") else "C",
        placement=placement,
        ideal=ideal,
        nominal=sum(bought),
        unit="H" if ref.startswith("L") else "F",
        q=42.0,
        self_resonance_hz=self_resonance_hz,
        stray_share=0.04,
        verdict=verdict,
        reason=reason,
        bought=bought,
        peak_v=peak_v,
        rms_a=rms_a,
        rated_v=rated_v,
        rated_a=rated_a,
    )


def tripler() -> StagePlan:
    """A stage whose filter is planned and all of whose parts are good."""
    return StagePlan(
        name="first tripler",
        times=3,
        line=Fraction(3),
        frequency_hz=span_hz(3),
        drive_dbm=10.0,
        output_dbm=12.25,
        input_lines=levels(k2=-40.0, k1_2=-70.0),
        device_lines=levels(k1=8.5, k2=-22.0, k4=-25.5, k5=-6.0, k9=-180.0),
        output_lines=levels(k1=-52.0, k2=-61.0, k4=-58.0, k5=-60.25, k9=-190.0),
        filter=FilterPlan(
            source="planned",
            family="chebyshev",
            ripple_db=0.1,
            order=3,
            topology="ladder-shunt",
            centre_hz=59.5e6,
            bandwidth_hz=11.9e6,
            loss_db=1.25,
            return_loss_db=14.0,
            unloaded_q=55.0,
            kit="chip-1008",
            impedance_ohm=50.0,
            reason="least order with a window",
            requirement=(
                requirement("1", 55.0, 60.5),
                requirement("2", 36.0, 39.0),
                requirement("4", 30.0, 32.5),
                requirement("9", 0.0, 95.0),
            ),
            windows=(
                Window("chebyshev", 0.1, 2, 0.0, 0.0, 60e6, feasible=False, reason="line 2 needs 36 dB"),
                Window("chebyshev", 0.1, 3, 9.1e6, 12.5e6, 59.5e6, feasible=True),
            ),
            elements=(
                element("L1", "shunt", 25.4e-9, 27e-9, rms_a=0.5, rated_a=0.6),
                element("C1", "shunt", 277e-12, 270e-12, 4.7e-12, peak_v=5.0, rated_v=50.0, self_resonance_hz=math.inf),
            ),
            response_hz=(10e6, 40e6, 60e6, 80e6, 200e6),
            response_db=(80.0, 42.0, 1.25, 34.0, 90.0),
        ),
    )


def doubler() -> StagePlan:
    """A stage whose filter misses a requirement and has a swamped and a marginal part; its name is hostile."""
    return StagePlan(
        name="=cmd|[bold] $x_ doubler",
        times=2,
        line=Fraction(6),
        frequency_hz=span_hz(6),
        drive_dbm=9.0,
        output_dbm=8.0,
        input_lines=levels(k1=-52.0, k2=-61.0, k4=-58.0),
        device_lines=levels(k3=-15.0, k5=-45.0, k7=-46.0, k12=-12.0),
        output_lines=levels(k3=-66.0, k5=-55.0, k7=-58.0, k12=-75.0),
        filter=FilterPlan(
            source="planned",
            family="butterworth",
            order=4,
            topology="ladder-series",
            centre_hz=120e6,
            bandwidth_hz=9.6e6,
            loss_db=2.5,
            kit="chip-1008",
            impedance_ohm=50.0,
            requirement=(requirement("3", 48.0, 51.0), requirement("5", 12.0, 11.5), requirement("12", 60.0, math.inf)),
            elements=(
                element("L1", "series", 1.2e-6, 1.2e-6, verdict="marginal", reason="self-resonance"),
                element("C1", "series", 0.73e-12, 0.75e-12, verdict="swamped", reason=SWAMPED_REASON),
            ),
            proposals=(
                Proposal(
                    change="wider band, more resonators",
                    family="chebyshev",
                    ripple_db=0.1,
                    order=5,
                    topology="ladder-shunt",
                    bandwidth_hz=24e6,
                    centre_hz=119e6,
                    worst_verdict="marginal",
                    worst_element="C3",
                    worst_margin_db=3.4,
                    loss_db=1.75,
                    buildable=True,
                    kit="chip-1008",
                    price="1 resonator more",
                ),
            ),
            response_hz=(5e6, 60e6, 120e6, 240e6, 600e6),
            response_db=(120.0, 55.0, 2.5, 70.0, 110.0),
        ),
    )


def buffer_stage() -> StagePlan:
    """A last stage that has no filter."""
    return StagePlan(
        name="buffer",
        times=1,
        line=Fraction(6),
        frequency_hz=span_hz(6),
        drive_dbm=8.0,
        output_dbm=10.0,
        input_lines=levels(k3=-66.0, k5=-55.0, k7=-58.0),
        device_lines=levels(k3=-66.0, k5=-55.0, k7=-58.0),
        output_lines=levels(k3=-66.0, k5=-55.0, k7=-58.0, k12=-40.0),
        filter=FilterPlan(source="none", reason="the scenario asks for none"),
    )


def output_line(line: str, level: float, limit: float | None, origins: tuple[Origin, ...]) -> OutputLine:
    """An output line with an allowance of 1.5 dB."""
    margin = None if limit is None else limit - level - 1.5
    return OutputLine(Fraction(line), span_hz(line), level, 1.5, limit, margin, margin, origins)


def example_plan() -> Plan:
    """Three stages from 20 MHz to 120 MHz."""
    return Plan(
        schema="harmonic-planner/plan/1",
        title="Hand-made example",
        verdict="not met",
        sentence="Not met: line 5 has 3.5 dB at the output and is asked for 6 dB.",
        limits_met=False,
        buildable=False,
        self_check=True,
        self_checks=("one-period transform: 0.02 dB off at most",),
        warnings=("amplifier of stage 3: its harmonics come after the last filter",),
        assumptions=("design.drift = 1 %", "device.balance = 25 dB"),
        cautions=("gain is taken as flat over three octaves",),
        source_lines=levels(k1_2=-70.0, k2=-40.0),
        output=OutputPlan(
            carrier_dbm=(9.5, 10.5),
            frequency_hz=span_hz(6),
            lines=(
                output_line("3", -66.0, -50.0, (Origin("first tripler", Fraction(1), 1.0),)),
                output_line(
                    "5",
                    -55.0,
                    -50.0,
                    (
                        Origin("source", Fraction(2), 0.2),
                        Origin("first tripler", Fraction(4), 0.75),
                        Origin("first tripler", Fraction(2), 0.05),
                    ),
                ),
                output_line("7", -58.0, -50.0, ()),
                output_line("12", -40.0, None, ()),
            ),
            phase_noise=(PhaseNoisePoint(1e3, -134.0),),
        ),
        stages=(tripler(), doubler(), buffer_stage()),
        allocation=AllocationPlan(total=7, lower_bound=6, proven=False, nodes=41),
    )


def built(
    prototype: Prototype,
    form: Form,
    *,
    centre_hz: float,
    bandwidth: float,
    parts: tuple[ElementReport, ...] = (),
    rejection_db: tuple[float, ...] = (),
) -> Built:
    """A circuit whose ideal values are bought as they are; its verdicts and rejections are written by hand."""
    circuit = design(
        form.topology,
        prototype,
        centre_hz=centre_hz,
        bandwidth=bandwidth,
        impedance_ohm=form.impedance_ohm,
        resonator=form.resonator,
    )
    rejections = np.array([0.0, *rejection_db])
    return Built(
        prototype=prototype,
        form=form,
        centre_hz=centre_hz,
        bandwidth=bandwidth,
        ideal=circuit,
        nominal=circuit,
        circuit=circuit,
        parts=tuple((each.value,) for each in circuit.elements),
        action=Action(1.5, 1.25, rejections, rejections),
        midband_db=1.25,
        elements=parts,
        short_db=0.5,
    )


@cache
def example_worked() -> WorkedOut:
    """The plan with a circuit for its first stage; no simulator looks at the others."""
    form = Form("ladder-shunt", load_kit("chip-1008", Path()), 50.0)
    circuit = built(Prototype("chebyshev", 3, 0.1), form, centre_hz=59.5e6, bandwidth=0.2)
    return WorkedOut(example_plan(), (circuit, None, None))
