"""Response of a circuit as built: ladder recursion with strays and losses, and a nodal solution of its primitives.

References
----------
.. [1] M. E. Van Valkenburg, "Network Analysis", 3rd ed., 1974, ch. 11 (ladder networks from the load back).
.. [2] C.-W. Ho, A. E. Ruehli, P. A. Brennan, "The modified nodal approach to network analysis", IEEE Trans. Circuits
   and Systems 22, 1975 (nodal stamps; no voltage source here, so the plain form suffices).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from harmonic_planner.filters.circuit import GROUND, INPUT, Circuit, CircuitError
from harmonic_planner.filters.response import Complexes, Floats, Response, as_frequencies, rejection_by
from harmonic_planner.filters.strays import Station, impedance_ohm, primitives, resistance_ohm, stations
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Kit


@dataclass(frozen=True)
class LadderState:
    """Voltages and currents along a ladder driven by 1 V behind the source resistance."""

    stations: tuple[Station, ...]
    node_voltage: Complexes
    """(station, frequency), to ground."""
    onward_current: Complexes
    """(station, frequency), out of each station towards the load; the load's own current at the last [A]."""
    input_current: Complexes
    """(frequency,), out of the source [A]."""


def sweep_built(circuit: Circuit, frequency_hz: ArrayLike, *, kit: Kit, frozen_at_hz: float | None = None) -> Response:
    """Compute the response of a ladder as built by recursion from its load.

    Parameters
    ----------
    circuit : Circuit
        A ladder with the values of its parts.
    frequency_hz : array_like
        (frequency,) or scalar, above zero [Hz].
    kit : Kit
        Losses and strays of parts and board.
    frozen_at_hz : float, optional
        Takes all losses as constant resistances found at this frequency, as a netlist has them [Hz]; without it each
        frequency has its own.

    Returns
    -------
    Response
        S21 and S11 between the circuit's source and load.

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder; `nodal_built` takes those.
    PlannerError
        For frequencies that are not above zero.
    """
    frequency = as_frequencies(frequency_hz)
    state = ladder_state(circuit, frequency, kit=kit, frozen_at_hz=frozen_at_hz)
    s21 = 2.0 * math.sqrt(circuit.source_ohm / circuit.load_ohm) * state.node_voltage[-1]
    return Response(frequency, s21, state.node_voltage[0] - circuit.source_ohm * state.input_current)


def ladder_state(
    circuit: Circuit, frequency_hz: ArrayLike, *, kit: Kit, frozen_at_hz: float | None = None
) -> LadderState:
    """Return node voltages and currents of a ladder as built; parameters and errors as for `sweep_built`.

    Returns
    -------
    LadderState
        For 1 V open-circuit source voltage.

    Notes
    -----
    With 1 V on the load, each shunt arm adds its current and each series arm its voltage on the way to the source;
    everything is then divided by the source voltage that came out.
    """
    frequency = as_frequencies(frequency_hz)
    if frozen_at_hz is not None:
        _check_frozen(frozen_at_hz)
    s = 2j * np.pi * frequency
    found = stations(circuit)
    impedances = [impedance_ohm(e, kit, frequency, frozen_at_hz=frozen_at_hz) for e in circuit.elements]
    voltage = np.ones(frequency.shape, dtype=np.complex128)
    current = np.full(frequency.shape, 1.0 / circuit.load_ohm, dtype=np.complex128)
    voltages, currents = [], []
    for station in reversed(found):
        if station.onward:
            voltage = voltage + current * _in_parallel([impedances[i] for i in station.onward])
        voltages.append(voltage)
        currents.append(current)
        current = current + s * (station.pads * kit.board.pad_f) * voltage
        if station.shunt:
            group = _in_parallel([impedances[i] for i in station.shunt])
            if len(station.shunt) > 1:
                group = group + s * kit.board.shared_via_h
            current = current + voltage / group
    source = voltage + circuit.source_ohm * current
    return LadderState(
        found,
        np.asarray(voltages[::-1]) / source,
        np.asarray(currents[::-1]) / source,
        current / source,
    )


def nodal_built(circuit: Circuit, frequency_hz: ArrayLike, *, kit: Kit, frozen_at_hz: float | None = None) -> Response:
    """Compute the response of any circuit as built from its primitives; parameters and result as for `sweep_built`.

    Raises
    ------
    CircuitError
        For a node without a path to a port.
    PlannerError
        For frequencies that are not above zero.

    Notes
    -----
    Solves Y V = I over all nodes of `strays.primitives`, inner ones too, and so shares with `sweep_built` the values of
    the strays and nothing of their arrangement.
    """
    frequency = as_frequencies(frequency_hz)
    index, voltage = nodal_voltages(circuit, frequency, kit=kit, frozen_at_hz=frozen_at_hz)
    s21 = 2.0 * math.sqrt(circuit.source_ohm / circuit.load_ohm) * voltage[:, index[circuit.output]]
    return Response(frequency, s21, 2.0 * voltage[:, index[INPUT]] - 1.0)


def nodal_voltages(
    circuit: Circuit, frequency_hz: ArrayLike, *, kit: Kit, frozen_at_hz: float | None = None
) -> tuple[dict[str, int], Complexes]:
    """Return every node's voltage for 1 V open-circuit source voltage; parameters and errors as for `nodal_built`.

    Returns
    -------
    index : dict of str to int
        Node of the primitives -> its column.
    voltage : ndarray
        (frequency, node) complex [V].
    """
    frequency = as_frequencies(frequency_hz)
    if frozen_at_hz is not None:
        _check_frozen(frozen_at_hz)
    for node in circuit.stranded_nodes():
        raise CircuitError(f"{circuit.topology}: node {node} has no path to the input or output")
    s = 2j * np.pi * frequency
    parts = primitives(circuit, kit, at_hz=circuit.centre_hz if frozen_at_hz is None else frozen_at_hz)
    elements = {element.ref: element for element in circuit.elements}
    nodes = dict.fromkeys((INPUT, circuit.output, *(node for part in parts for node in part.nodes)))
    index = {node: place for place, node in enumerate(node for node in nodes if node != GROUND)}
    matrix = np.zeros((frequency.size, len(index), len(index)), dtype=np.complex128)
    for part in parts:
        admittance: Complexes | float
        if part.kind == "C":
            admittance = s * part.value
        elif part.kind == "L":
            admittance = 1 / (s * part.value)
        elif frozen_at_hz is None and part.element is not None:
            admittance = (1 / resistance_ohm(elements[part.element], kit, frequency)).astype(np.complex128)
        else:
            admittance = 1 / part.value
        ends = [index[node] for node in part.nodes if node != GROUND]
        for end in ends:
            matrix[:, end, end] += admittance
        if len(ends) == 2:
            matrix[:, ends[0], ends[1]] -= admittance
            matrix[:, ends[1], ends[0]] -= admittance
    source, load = index[INPUT], index[circuit.output]
    matrix[:, source, source] += 1.0 / circuit.source_ohm
    matrix[:, load, load] += 1.0 / circuit.load_ohm
    drive = np.zeros((frequency.size, len(index), 1), dtype=np.complex128)
    drive[:, source, 0] = 1.0 / circuit.source_ohm
    return index, np.linalg.solve(matrix, drive)[:, :, 0]


def rejection_built_db(
    circuit: Circuit,
    *,
    kit: Kit,
    passband_hz: tuple[float, float],
    line_low_hz: ArrayLike,
    line_high_hz: ArrayLike,
    drift: float,
    points: int = 41,
) -> Floats:
    """Return the rejection of each line as built: its least attenuation less the carrier's most, over span and drift.

    Parameters
    ----------
    circuit : Circuit
        A ladder with the values of its parts.
    kit : Kit
        Losses and strays.
    passband_hz : tuple of float
        The carrier's span [Hz].
    line_low_hz, line_high_hz : array_like
        (line,) spans of the unwanted lines [Hz].
    drift : float
        The filter's centre moves as a whole by ± this fraction.
    points : int
        Frequencies looked at in each span, its drifted ends included.

    Returns
    -------
    ndarray
        (line,) [dB].
    """
    return rejection_by(
        lambda frequency: sweep_built(circuit, frequency, kit=kit).attenuation_db,
        passband_hz=passband_hz,
        line_low_hz=line_low_hz,
        line_high_hz=line_high_hz,
        drift=drift,
        points=points,
    )


def _in_parallel(impedances: list[Complexes]) -> Complexes:
    if len(impedances) == 1:
        return impedances[0]
    return np.asarray(1 / sum(1 / impedance for impedance in impedances))


def _check_frozen(frozen_at_hz: float) -> None:
    if not 0 < frozen_at_hz < math.inf:
        raise PlannerError(f"frozen_at_hz = {frozen_at_hz!r} must be a finite frequency above zero")
