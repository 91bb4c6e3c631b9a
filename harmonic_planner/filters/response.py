"""Response of a circuit between its source and load: ladder recursion, and a nodal solution as a second method.

Losses are of the elements; strays are not in this response: `built_response` has them.

References
----------
.. [1] M. E. Van Valkenburg, "Network Analysis", 3rd ed., 1974, ch. 11 (ladder networks from the load back).
.. [2] S. B. Cohn, "Dissipation loss in multiple-coupled-resonator filters", Proc. IRE 47, 1959 (equal-Q resonators).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.circuit import GROUND, INPUT, Circuit, CircuitError, Element
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Kit

Floats = NDArray[np.float64]
Complexes = NDArray[np.complexfloating]


@dataclass(frozen=True)
class Response:
    """Scattering parameters of a circuit, referred to its own source and load resistance."""

    frequency_hz: Floats
    """(frequency,) [Hz]."""
    s21: Complexes
    """(frequency,), the forward transmission; |s21|² is the transducer power gain."""
    s11: Complexes
    """(frequency,), the reflection at the source."""

    @property
    def attenuation_db(self) -> Floats:
        """Transducer loss, −20 log10 |S21| [dB]."""
        return attenuation_db(self.s21)

    @property
    def return_loss_db(self) -> Floats:
        """Return loss, −20 log10 |S11| [dB]; infinite where nothing is reflected."""
        return attenuation_db(self.s11)

    @property
    def dissipation(self) -> Floats:
        """Share of the available power that stays in the circuit, 1 − |S11|² − |S21|²."""
        return np.asarray(1.0 - np.abs(self.s11) ** 2 - np.abs(self.s21) ** 2)

    @property
    def group_delay_s(self) -> Floats:
        """Group delay −d(arg S21)/dω [s], by central differences: the phase must turn less than π from point to point.

        Raises
        ------
        PlannerError
            For fewer than three frequencies, or frequencies that do not ascend.
        """
        if self.frequency_hz.size < 3 or not np.all(np.diff(self.frequency_hz) > 0):
            raise PlannerError("a group delay needs at least three frequencies, ascending")
        phase = np.unwrap(np.angle(self.s21))
        return np.asarray(-np.gradient(phase, 2 * np.pi * self.frequency_hz, edge_order=2))


def attenuation_db(transmission: ArrayLike) -> Floats:
    """Return −20 log10 |s| [dB] of scattering parameters of any shape; infinite where s = 0."""
    with np.errstate(divide="ignore"):
        return np.asarray(-20.0 * np.log10(np.abs(np.asarray(transmission, dtype=np.complex128))))


def sweep(
    circuit: Circuit, frequency_hz: ArrayLike, *, kit: Kit | None = None, unloaded_q: float | None = None
) -> Response:
    """Compute the response of a ladder by recursion from its load.

    Parameters
    ----------
    circuit : Circuit
        A ladder of series and shunt arms.
    frequency_hz : array_like
        (frequency,) or scalar, above zero [Hz].
    kit : Kit, optional
        Takes each element's loss from the kit, at each frequency.
    unloaded_q : float, optional
        One Q for all resonators, frozen at the circuit's centre, instead of the kit's losses; may be infinite.
        Without either the circuit is lossless.

    Returns
    -------
    Response
        S21 and S11 between the circuit's source and load.

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder; `nodal_sweep` takes those.
    PlannerError
        For frequencies or a Q that are not above zero.

    Notes
    -----
    With 1 V on the load, each shunt arm adds its current and each series arm its voltage on the way to the source;
    the open-circuit source voltage then gives S21 = 2 sqrt(R_S/R_L) V_L/V_S. No division by the load side's
    immittance occurs, so a resonance is no special case.
    """
    frequency = as_frequencies(frequency_hz)
    losses = _Losses(circuit, frequency, kit, unloaded_q)
    voltage = np.ones(frequency.shape, dtype=np.complex128)
    current = np.full(frequency.shape, 1.0 / circuit.load_ohm, dtype=np.complex128)
    for arm in reversed(circuit.arms()):
        elements = [circuit.elements[place] for place in arm.elements]
        if arm.placement == "shunt":
            for element in elements:
                current += losses.admittance(element) * voltage
        elif len(elements) == 1:
            voltage += losses.impedance(elements[0]) * current
        else:
            voltage += current / sum(losses.admittance(element) for element in elements)
    source = voltage + circuit.source_ohm * current
    s21 = 2.0 * math.sqrt(circuit.source_ohm / circuit.load_ohm) / source
    s11 = (voltage - circuit.source_ohm * current) / source
    return Response(frequency, s21, s11)


def nodal_sweep(
    circuit: Circuit, frequency_hz: ArrayLike, *, kit: Kit | None = None, unloaded_q: float | None = None
) -> Response:
    """Compute the response of any circuit by nodal analysis: parameters, result and errors as for `sweep`.

    Parameters
    ----------
    circuit : Circuit
        Any circuit, coupled and bridged ones too.
    frequency_hz : array_like
        (frequency,) or scalar, above zero [Hz].
    kit, unloaded_q
        Losses, as for `sweep`.

    Returns
    -------
    Response
        S21 and S11 between the circuit's source and load.

    Raises
    ------
    CircuitError
        For a node without a path to a port.
    PlannerError
        For frequencies or a Q that are not above zero.

    Notes
    -----
    Solves Y V = I with the source as a Norton current behind its conductance, each frequency by itself. It shares
    with `sweep` the immittance of an element and nothing else, and serves as its check.
    """
    frequency = as_frequencies(frequency_hz)
    for node in circuit.stranded_nodes():
        raise CircuitError(f"{circuit.topology}: node {node} has no path to the input or output")
    losses = _Losses(circuit, frequency, kit, unloaded_q)
    index = {node: place for place, node in enumerate(circuit.nodes)}
    matrix = np.zeros((frequency.size, len(index), len(index)), dtype=np.complex128)
    for element in circuit.elements:
        admittance = losses.admittance(element)
        ends = [index[node] for node in element.nodes if node != GROUND]
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
    voltage = np.linalg.solve(matrix, drive)[:, :, 0]
    s21 = 2.0 * math.sqrt(circuit.source_ohm / circuit.load_ohm) * voltage[:, load]
    return Response(frequency, s21, 2.0 * voltage[:, source] - 1.0)


def rejection_db(
    circuit: Circuit,
    *,
    passband_hz: tuple[float, float],
    line_low_hz: ArrayLike,
    line_high_hz: ArrayLike,
    drift: float,
    kit: Kit | None = None,
    unloaded_q: float | None = None,
    points: int = 41,
) -> Floats:
    """Return the rejection of each line: its least attenuation less the carrier's most, over span and drift.

    Parameters
    ----------
    circuit : Circuit
        A ladder.
    passband_hz : tuple of float
        The carrier's span [Hz].
    line_low_hz, line_high_hz : array_like
        (line,) spans of the unwanted lines [Hz].
    drift : float
        The filter's centre moves as a whole by ± this fraction.
    kit, unloaded_q
        Losses, as for `sweep`.
    points : int
        Frequencies looked at in each span, its drifted ends included.

    Returns
    -------
    ndarray
        (line,) [dB].

    Notes
    -----
    A filter that drifts by d does at f what the undrifted one does at f/(1 + d); losses are taken there too, a
    difference of second order.
    """
    return rejection_by(
        lambda frequency: sweep(circuit, frequency, kit=kit, unloaded_q=unloaded_q).attenuation_db,
        passband_hz=passband_hz,
        line_low_hz=line_low_hz,
        line_high_hz=line_high_hz,
        drift=drift,
        points=points,
    )


def rejection_by(
    attenuation: Callable[[Floats], Floats],
    *,
    passband_hz: tuple[float, float],
    line_low_hz: ArrayLike,
    line_high_hz: ArrayLike,
    drift: float,
    points: int = 41,
) -> Floats:
    """Return the rejection of each line as `rejection_db` does, of any response.

    Parameters
    ----------
    attenuation : callable
        (frequency,) [Hz] -> (frequency,) [dB].
    passband_hz, line_low_hz, line_high_hz, drift, points
        As for `rejection_db`.

    Returns
    -------
    ndarray
        (line,) [dB].
    """
    low = np.concatenate(([passband_hz[0]], np.atleast_1d(np.asarray(line_low_hz, dtype=np.float64))))
    high = np.concatenate(([passband_hz[1]], np.atleast_1d(np.asarray(line_high_hz, dtype=np.float64))))
    grid = np.geomspace(low / (1 + drift), high / (1 - drift), points)
    loss = attenuation(grid.ravel()).reshape(grid.shape)
    return np.asarray(loss[:, 1:].min(axis=0) - loss[:, 0].max())


class _Losses:
    """Immittance of elements over one set of frequencies, with what does not depend on the element done once."""

    def __init__(self, circuit: Circuit, frequency_hz: Floats, kit: Kit | None, unloaded_q: float | None) -> None:
        if unloaded_q is not None and not unloaded_q > 0:
            raise PlannerError(f"unloaded_q = {unloaded_q!r} must be above zero")
        self._frequency_hz = frequency_hz
        self._omega = 2 * np.pi * frequency_hz
        self._centre = 2 * math.pi * circuit.centre_hz
        self._frozen_q = unloaded_q
        self._capacitors = kit.capacitor if kit is not None and unloaded_q is None else None
        lossless = kit is None or unloaded_q is not None
        # An inductor's impedance per henry: ω (j + 1/Q).
        self._per_henry: Complexes = self._omega * (
            1j if lossless or kit is None else 1j + 1 / kit.inductor.q(frequency_hz)
        )

    def impedance(self, element: Element) -> Complexes:
        """Return Z [ohm], (frequency,)."""
        if element.kind == "C":
            reactance = -1.0 / (self._omega * element.value)
            if self._capacitors is None:
                return 1j * reactance
            return self._capacitors.resistance_ohm(element.value, self._frequency_hz) + 1j * reactance
        if self._frozen_q is not None:
            if element.placement == "shunt":
                return 1.0 / self.admittance(element)
            return self._per_henry * element.value + self._centre * element.value / self._frozen_q
        return self._per_henry * element.value

    def admittance(self, element: Element) -> Complexes:
        """Return Y [siemens], (frequency,)."""
        if element.kind == "C" and self._capacitors is None:
            return 1j * (self._omega * element.value)
        if element.kind == "L" and element.placement == "shunt" and self._frozen_q is not None:
            # The resonator's loss as a conductance: then the response is the prototype's at jΩ + 1/(ΔQ) exactly.
            return 1.0 / (self._per_henry * element.value) + 1.0 / (self._frozen_q * self._centre * element.value)
        return 1.0 / self.impedance(element)


def as_frequencies(frequency_hz: ArrayLike) -> Floats:
    """Return frequencies as a list, (frequency,) [Hz]; PlannerError where one is not finite and above zero."""
    frequency = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
    if frequency.ndim != 1 or not np.all((frequency > 0) & np.isfinite(frequency)):
        raise PlannerError("frequency_hz must be a list of finite frequencies above zero")
    return frequency
