"""Response of one ladder as built with its losses taken out, for many sets of element values at once.

Absorbing strays and choosing parts ask the same question hundreds of times: how far is this set of values from the
ideal response? Losses only blur the answer, so they are left out; what remains is real arithmetic. The model is that of
`strays`, the recursion that of `built_response`.

Beyond what those do, all strays may be scaled by one factor (none … all of them), a value may be zero (not placed) or
below zero, which lets a solver say by how much a stray exceeds what is wanted, and an element may be two parts.

References
----------
.. [1] M. E. Van Valkenburg, "Network Analysis", 3rd ed., 1974, ch. 11 (ladder networks from the load back).
.. [2] H. J. Carlin, P. P. Civalleri, "Wideband Circuit Design", 1998, ch. 6 (the characteristic function of a lossless
   two-port, K = S11/S21, with |S21|² = 1/(1 + |K|²)).
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.response import as_frequencies
from harmonic_planner.filters.strays import series_inductance_h, stations
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Kit

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]

BLOCKED = 1e15
"""Stands for a K that is infinite: 300 dB."""


class LosslessLadder:
    """K = S11/S21 of one ladder as built without losses, as a function of its element values.

    Parameters
    ----------
    circuit : Circuit
        A ladder; its own values are not used.
    kit : Kit
        Strays of parts and board.

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder.

    Notes
    -----
    Unit voltage and unit current on the load are followed back to the source side by side. With the imaginary unit
    left out, `across` holds A and B/j of the chain matrix, `through` −C/j and D, and both pairs obey one recursion.
    """

    def __init__(self, circuit: Circuit, kit: Kit) -> None:
        elements = circuit.elements
        self._inductors = np.array([i for i, element in enumerate(elements) if element.kind == "L"], dtype=np.intp)
        self._capacitors = np.array([i for i, element in enumerate(elements) if element.kind == "C"], dtype=np.intp)
        self._series_h = np.array([series_inductance_h(element, kit) for element in elements])
        self._stations = stations(circuit)
        self._ends = tuple(
            [i for i, element in enumerate(elements) if station.node in element.nodes] for station in self._stations
        )
        self._source_ohm, self._load_ohm = circuit.source_ohm, circuit.load_ohm
        self._pad_f, self._shared_h = kit.board.pad_f, kit.board.shared_via_h
        self._slowness = 1 / (2 * math.pi * kit.inductor.self_resonance_hz(1.0))
        self._exponent = kit.inductor.self_resonance_exponent

    def characteristic(
        self, values: ArrayLike, frequency_hz: ArrayLike, *, second: ArrayLike | None = None, strays: ArrayLike = 1.0
    ) -> Complexes:
        """Compute K of every trial.

        Parameters
        ----------
        values : array_like
            (trial, element) or (element,) in the circuit's order [henry or farad], of any sign; zero only for a shunt
            capacitor.
        frequency_hz : array_like
            (frequency,), above zero [Hz].
        second : array_like, optional
            Like `values`: a second capacitor in parallel with each, zero for none; it has strays of its own.
        strays : array_like
            (trial,) or scalar: every stray is multiplied by it.

        Returns
        -------
        ndarray
            (trial, frequency) complex, its phase that of the ports' reference planes; `BLOCKED` where nothing gets
            through.

        Raises
        ------
        PlannerError
            For values of another shape, or frequencies that are not above zero.
        """
        omega = 2 * np.pi * as_frequencies(frequency_hz)
        value = np.atleast_2d(np.asarray(values, dtype=np.float64))
        if value.shape[1] != self._series_h.size:
            raise PlannerError(f"values must have the shape (trial, {self._series_h.size}), not {value.shape}")
        other = None if second is None else np.atleast_2d(np.asarray(second, dtype=np.float64))
        scale = np.broadcast_to(np.asarray(strays, dtype=np.float64), value.shape[:1])[:, np.newaxis]
        across = np.zeros((2, len(value), omega.size))
        through = np.zeros_like(across)
        across[0], through[1] = 1.0, 1.0
        with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
            susceptance = self._susceptance(omega, value, other, scale)
            pads = omega * (self._pad_f * scale)
            shared = omega * (self._shared_h * scale)
            for station, ends in zip(reversed(self._stations), reversed(self._ends), strict=True):
                if station.onward:
                    across -= through / _together(susceptance, station.onward)
                shunt = pads * _parts(ends, other)
                if station.shunt:
                    group = _together(susceptance, station.shunt)
                    parts = _parts(station.shunt, other)
                    shunt += group / (1 - (parts > 1) * shared * group)
                through -= shunt * across
            source, load = self._source_ohm, self._load_ohm
            real = across[0] * load - through[1] * source
            imaginary = across[1] + through[0] * (source * load)
            k = (real + 1j * imaginary) / (2 * math.sqrt(source * load))
        return np.asarray(np.nan_to_num(k, nan=BLOCKED, posinf=BLOCKED, neginf=-BLOCKED))

    def _susceptance(self, omega: Floats, value: Floats, second: Floats | None, scale: Floats) -> Floats:
        """Return the susceptance of every element as mounted, (trial, element, frequency)."""
        result = np.empty((*value.shape, omega.size))
        stray = scale[:, :, np.newaxis]
        at, column = self._inductors, value[:, self._inductors, np.newaxis]
        if at.size:
            resonance = (stray * np.abs(column) ** (2 * self._exponent)) * (omega * self._slowness) ** 2
            series_h = stray * self._series_h[at, np.newaxis]
            result[:, at] = -1 / (omega * (column / (1 - resonance) + series_h))
        at, column = self._capacitors, value[:, self._capacitors, np.newaxis]
        if at.size:
            series = (stray * self._series_h[at, np.newaxis]) * omega**2
            result[:, at] = omega * (column / (1 - series * column))
            if second is not None:
                more = second[:, at, np.newaxis]
                result[:, at] += omega * (more / (1 - series * more))
        return result


def _together(susceptance: Floats, places: Sequence[int]) -> Floats:
    """Return the susceptance of elements in parallel, (trial, frequency)."""
    total = susceptance[:, places[0]]
    for place in places[1:]:
        total = total + susceptance[:, place]
    return total


def _parts(places: Sequence[int], second: Floats | None) -> NDArray[np.int64] | int:
    """Return how many parts stand at these elements, (trial, 1) where some have a second one."""
    if second is None:
        return len(places)
    return np.asarray(len(places) + np.count_nonzero(second[:, list(places)], axis=1)[:, np.newaxis])
