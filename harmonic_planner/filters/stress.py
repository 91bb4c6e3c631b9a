"""Voltage and current of every part of a filter at the stage's power, against the kit's ratings.

A capacitor's voltage is that of its capacitance alone, an inductor's that across its winding; an inductor's current is
the winding's, without what its own capacitance takes. Both follow from the voltages along the ladder as built.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from harmonic_planner.filters.built_response import LadderState, ladder_state
from harmonic_planner.filters.circuit import Circuit, Element
from harmonic_planner.filters.response import Complexes, Floats
from harmonic_planner.filters.strays import across_f, impedance_ohm, resistance_ohm
from harmonic_planner.model import Kind, PlannerError
from harmonic_planner.parts.kits import Kit

CAUTION_DBM = 30.0
"""Power above which a person is warned; common practice, no source (memory)."""
CAUTION_V = 50.0
"""Peak voltage above which a person is warned; common practice, no source (memory)."""


@dataclass(frozen=True)
class ElementStress:
    """What one part bears; ratings are None where the kit does not say."""

    ref: str
    kind: Kind
    peak_voltage_v: float
    """At the middle of the carrier's span [V]."""
    rms_current_a: float
    """At the middle of the carrier's span [A]."""
    worst_peak_voltage_v: float
    """Over the carrier's span [V]."""
    worst_rms_current_a: float
    """Over the carrier's span [A]."""
    voltage_rating_v: float | None
    current_rating_a: float | None

    @property
    def share(self) -> float | None:
        """The worst of the span over the rating, the larger of voltage and current; None without a rating."""
        shares = [
            worst / rating
            for worst, rating in (
                (self.worst_peak_voltage_v, self.voltage_rating_v),
                (self.worst_rms_current_a, self.current_rating_a),
            )
            if rating is not None
        ]
        return max(shares, default=None)


def stress(
    circuit: Circuit, kit: Kit, *, frequency_hz: tuple[float, float], power_dbm: float, points: int = 41
) -> tuple[ElementStress, ...]:
    """Compute what each part of a ladder bears at the carrier.

    Parameters
    ----------
    circuit : Circuit
        A ladder with the values of its parts.
    kit : Kit
        Losses, strays and ratings.
    frequency_hz : tuple of float
        The carrier's span, low and high end; equal ends for one frequency [Hz].
    power_dbm : float
        Power available from the source [dBm].
    points : int
        Frequencies looked at over the span, its ends included.

    Returns
    -------
    tuple of ElementStress
        In the circuit's order.

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder.
    PlannerError
        For a span that does not ascend or a power that is not finite.

    Notes
    -----
    The available power P of a source behind R has the open-circuit peak voltage sqrt(8 R P). Lines other than the
    carrier are left out: at 20 dB down all of them together add about a tenth to the voltage.
    """
    low, high = frequency_hz
    if not 0 < low <= high < math.inf:
        raise PlannerError(f"frequency_hz = {frequency_hz!r}: both ends must be above zero, the lower one first")
    if not math.isfinite(power_dbm):
        raise PlannerError(f"power_dbm = {power_dbm!r} must be finite")
    frequency = np.concatenate(([(low + high) / 2], np.linspace(low, high, points)))
    state = ladder_state(circuit, frequency, kit=kit)
    through = _currents(circuit, kit, frequency, state)
    source_v = math.sqrt(8 * circuit.source_ohm * 10 ** ((power_dbm - 30) / 10))
    found = []
    for element, current in zip(circuit.elements, through, strict=True):
        volts, amperes = _of_part(element, kit, frequency, current)
        peak, rms = np.abs(volts) * source_v, np.abs(amperes) * source_v / math.sqrt(2)
        found.append(
            ElementStress(
                element.ref,
                element.kind,
                peak_voltage_v=float(peak[0]),
                rms_current_a=float(rms[0]),
                worst_peak_voltage_v=float(peak.max()),
                worst_rms_current_a=float(rms.max()),
                voltage_rating_v=kit.capacitor.voltage_v if element.kind == "C" else None,
                current_rating_a=kit.inductor.current_a if element.kind == "L" else None,
            )
        )
    return tuple(found)


def cautions(stresses: Sequence[ElementStress], *, power_dbm: float) -> tuple[str, ...]:
    """Return what a person must be told of a filter at this power: parts over their rating, and danger to people.

    Parameters
    ----------
    stresses : sequence of ElementStress
        Of all parts.
    power_dbm : float
        Power available from the source [dBm].

    Returns
    -------
    tuple of str
        Empty where there is nothing to say.
    """
    told = []
    for part in stresses:
        if part.voltage_rating_v is not None and part.worst_peak_voltage_v > part.voltage_rating_v:
            told.append(
                f"{part.ref} bears {part.worst_peak_voltage_v:.3g} V peak, above its rating of "
                f"{part.voltage_rating_v:.3g} V"
            )
        if part.current_rating_a is not None and part.worst_rms_current_a > part.current_rating_a:
            told.append(
                f"{part.ref} carries {part.worst_rms_current_a:.3g} A r.m.s., above its rating of "
                f"{part.current_rating_a:.3g} A"
            )
    highest = max(stresses, key=lambda part: part.worst_peak_voltage_v, default=None)
    reasons = []
    if power_dbm > CAUTION_DBM:
        reasons.append(f"{power_dbm:.3g} dBm at the filter")
    if highest is not None and highest.worst_peak_voltage_v > CAUTION_V:
        reasons.append(f"{highest.worst_peak_voltage_v:.3g} V peak at {highest.ref}")
    if reasons:
        told.append(
            f"{' and '.join(reasons)}: radio-frequency burns and fields; the limits for exposure where you work and "
            "the rules of your licence hold, and this plan does not replace them"
        )
    return tuple(told)


def _currents(circuit: Circuit, kit: Kit, frequency_hz: Floats, state: LadderState) -> list[Complexes]:
    """Return the current into each element as mounted, (frequency,) [A per V of the source], in the circuit's order."""
    impedances = [impedance_ohm(element, kit, frequency_hz) for element in circuit.elements]
    through: dict[int, Complexes] = {}
    for place, station in enumerate(state.stations):
        if station.onward:
            admittance = sum(1 / impedances[i] for i in station.onward)
            drop = state.onward_current[place] / admittance
            through |= {i: drop / impedances[i] for i in station.onward}
        if station.shunt:
            parallel = 1 / sum(1 / impedances[i] for i in station.shunt)
            shared = 2j * np.pi * frequency_hz * kit.board.shared_via_h if len(station.shunt) > 1 else 0.0
            across = state.node_voltage[place] * parallel / (parallel + shared)
            through |= {i: across / impedances[i] for i in station.shunt}
    return [through[i] for i in range(len(circuit.elements))]


def _of_part(element: Element, kit: Kit, frequency_hz: Floats, current: Complexes) -> tuple[Complexes, Complexes]:
    """Return voltage across and current through the capacitance or the winding itself."""
    s = 2j * np.pi * frequency_hz
    if element.kind == "C":
        return np.asarray(current / (s * element.value)), current
    winding = s * element.value + resistance_ohm(element, kit, frequency_hz)
    inner = current / (1 + s * across_f(element, kit) * winding)
    return np.asarray(inner * winding), inner
