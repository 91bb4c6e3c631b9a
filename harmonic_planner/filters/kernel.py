"""Attenuation of one ladder for many sets of element values at once, as yield needs it.

The model is that of `strays`, the recursion that of `built_response`; what differs is the order of the arithmetic.

==================  ==================================================================================================
once per kernel     what depends on frequency alone: s, an inductor's ω(j + 1/Q), a capacitor's loss, mounting, pads
once per trial      what depends on a value alone: L, L times its own capacitance, 1/C
(trial, frequency)  either side of a part's immittance is a sum of products of the two, the product of a narrow matrix
                    with a flat one; after that all is multiplied and added in place, in blocks that stay in the cache
==================  ==================================================================================================

Notes
-----
No division is done before the last step. An impedance N/D in a series arm takes (V, I, w) to (V·D + I·N, I·D, w·D), an
admittance M/K in a shunt arm to (V·K, I·K + V·M, w·K): w collects the denominators, and the voltage of the load is w
where it would be 1. Impedances are counted in units of the source resistance, which keeps the products near one.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.circuit import Circuit, Element
from harmonic_planner.filters.response import as_frequencies
from harmonic_planner.filters.strays import series_inductance_h, stations
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Board, Kit

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]

BLOCK = 128
"""Trials taken together: one array of 128 × 201 complex numbers is 0.4 MB, two of them stay in a cache of 1 MB."""


class LadderKernel:
    """Attenuation of one ladder as built, as a function of its element values.

    Parameters
    ----------
    circuit : Circuit
        A ladder; its own values are not used.
    frequency_hz : array_like
        (frequency,), above zero [Hz].
    kit : Kit, optional
        Losses and strays; without it parts are ideal.
    block : int
        Trials taken together.

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder.
    PlannerError
        For frequencies that are not above zero or a block below 1.
    """

    def __init__(self, circuit: Circuit, frequency_hz: ArrayLike, *, kit: Kit | None, block: int = BLOCK) -> None:
        self.frequency_hz = as_frequencies(frequency_hz)
        if block < 1:
            raise PlannerError(f"block = {block!r} must be at least 1")
        self._block = block
        self._parts = tuple(_Part(element, self.frequency_hz, kit, circuit.source_ohm) for element in circuit.elements)
        self._stations = stations(circuit)
        s: Complexes = np.asarray(2j * np.pi * self.frequency_hz, dtype=np.complex128)
        board = kit.board if kit is not None else Board(via_h=0.0, pad_f=0.0)
        self._pad = s * (board.pad_f * circuit.source_ohm) if board.pad_f > 0 else None
        self._shared = s * (board.shared_via_h / circuit.source_ohm) if board.shared_via_h > 0 else None
        self._load_current = circuit.source_ohm / circuit.load_ohm
        self._offset_db = -20 * math.log10(2 * math.sqrt(circuit.source_ohm / circuit.load_ohm))

    def attenuation_db(self, values: ArrayLike, out: Floats | None = None) -> Floats:
        """Compute the attenuation of every trial.

        Parameters
        ----------
        values : array_like
            (trial, element) in the circuit's order, above zero [henry or farad].
        out : ndarray, optional
            (trial, frequency) float64 that takes the result.

        Returns
        -------
        ndarray
            (trial, frequency), transducer loss −20 log10 |S21| [dB]; `out` where it was given.

        Raises
        ------
        PlannerError
            For values or an `out` of another shape, or values that are not above zero.
        """
        given = np.asarray(values, dtype=np.float64)
        if given.ndim != 2 or given.shape[1] != len(self._parts):
            raise PlannerError(f"values must have the shape (trial, {len(self._parts)}), not {given.shape}")
        if not np.all((given > 0) & np.isfinite(given)):
            raise PlannerError("values must be finite and above zero")
        shape = (given.shape[0], self.frequency_hz.size)
        result = np.empty(shape) if out is None else out
        if result.shape != shape or result.dtype != np.float64:
            raise PlannerError(f"out must be float64 of the shape {shape}, not {result.dtype} of {result.shape}")
        whole = _Work.empty(min(self._block, shape[0]), shape[1])
        for start in range(0, shape[0], self._block):
            rows = slice(start, min(start + self._block, shape[0]))
            self._run(given[rows], result[rows], whole.first(rows.stop - rows.start))
        return result

    def _run(self, values: Floats, out: Floats, work: _Work) -> None:
        """Fill (trial, frequency) `out` for one block, from the load back to the source."""
        voltage, current = work.voltage, work.current
        voltage.fill(1.0)
        current.fill(self._load_current)
        work.weight.fill(1.0)
        for station in reversed(self._stations):
            if station.onward:
                top = self._admittance(station.onward, values, work)
                _add_product(voltage, current, work, numerator=work.bottom, denominator=top)
            if self._pad is not None:
                np.multiply(voltage, self._pad * station.pads, out=work.spare)
                current += work.spare
            if station.shunt:
                top = self._admittance(station.shunt, values, work)
                if top is not None and len(station.shunt) > 1 and self._shared is not None:
                    np.multiply(top, self._shared, out=work.spare)
                    work.bottom += work.spare
                _add_product(current, voltage, work, numerator=top, denominator=work.bottom)
        voltage += current  # the open-circuit voltage of a source whose resistance is 1
        np.abs(work.weight, out=out)
        np.abs(voltage, out=work.real)
        with np.errstate(divide="ignore"):  # at the pole of a lossless part nothing gets through
            np.divide(work.real, out, out=out)
        np.log10(out, out=out)
        out *= 20.0
        out += self._offset_db

    def _admittance(self, places: Sequence[int], values: Floats, work: _Work) -> Complexes | None:
        """Leave the admittance of parts in parallel as top/work.bottom; returns the top, None where it is 1."""
        first, *others = places
        top = self._parts[first].fill(values[:, first], work.top, work.bottom)
        for place in others:
            if top is None:
                top = work.top
                top.fill(1.0)
            other = self._parts[place].fill(values[:, place], work.other_top, work.other_bottom)
            top *= work.other_bottom
            if other is None:
                top += work.bottom
            else:
                np.multiply(other, work.bottom, out=work.spare)
                top += work.spare
            work.bottom *= work.other_bottom
        return top


class _Part:
    """Admittance of one element as a ratio, each side a product of trial weights and rows over frequency."""

    def __init__(self, element: Element, frequency_hz: Floats, kit: Kit | None, unit_ohm: float) -> None:
        self._inductor = kit.inductor if kit is not None and element.kind == "L" else None
        self._kind = element.kind
        self._top: Floats | None = None
        s: Complexes = np.asarray(2j * np.pi * frequency_hz, dtype=np.complex128)
        mounting = s * (series_inductance_h(element, kit) if kit is not None else 0.0)
        if element.kind == "C":
            # (1 + j tan δ)/s per farad and the conductor with the mounting, over columns 1/C and 1
            per_inverse_farad, fixed = 1 / s, mounting
            if kit is not None:
                per_inverse_farad = (1 + 1j * kit.capacitor.dissipation) / s
                fixed = mounting + kit.capacitor.conductor_ohm(frequency_hz)
            self._bottom = _rows(per_inverse_farad / unit_ohm, fixed / unit_ohm)
        elif self._inductor is None:
            self._bottom = _rows(s / unit_ohm)
        else:
            # (winding)/(1 + s·C_p·winding) + mounting with winding = L·per_henry, over columns L, 1 and L·C_p
            per_henry = s + 2 * np.pi * frequency_hz / self._inductor.q(frequency_hz)
            self._top = _rows(np.zeros_like(s), np.ones_like(s), s * per_henry)
            self._bottom = _rows(per_henry / unit_ohm, mounting / unit_ohm, mounting * s * per_henry / unit_ohm)

    def fill(self, value: Floats, top: Complexes, bottom: Complexes) -> Complexes | None:
        """Fill (trial, frequency) top and bottom from (trial,) values; returns the top, None where it is 1."""
        weights = self._weights(value)
        np.matmul(weights, self._bottom, out=bottom.view(np.float64))
        if self._top is None:
            return None
        np.matmul(weights, self._top, out=top.view(np.float64))
        return top

    def _weights(self, value: Floats) -> Floats:
        """Return what depends on the value, (trial, row)."""
        if self._kind == "C":
            return np.stack((1 / value, np.ones_like(value)), axis=1)
        if self._inductor is None:
            return value[:, np.newaxis]
        resonance = 2 * np.pi * self._inductor.self_resonance_hz(1.0) * value**-self._inductor.self_resonance_exponent
        return np.stack((value, np.ones_like(value), resonance**-2), axis=1)


@dataclass
class _Work:
    """Arrays over (trial, frequency) that every block uses again."""

    voltage: Complexes
    current: Complexes
    weight: Complexes
    top: Complexes
    bottom: Complexes
    other_top: Complexes
    other_bottom: Complexes
    spare: Complexes
    real: Floats

    @classmethod
    def empty(cls, trials: int, frequencies: int) -> _Work:
        """Return arrays of one size."""
        shape = (trials, frequencies)
        arrays = {field.name: np.empty(shape, dtype=np.complex128) for field in fields(cls) if field.name != "real"}
        return cls(**arrays, real=np.empty(shape))

    def first(self, trials: int) -> _Work:
        """Return views of the first trials, for a last block that is not full."""
        return self if trials == len(self.real) else _Work(*(getattr(self, f.name)[:trials] for f in fields(self)))


def _add_product(
    target: Complexes, driver: Complexes, work: _Work, *, numerator: Complexes | None, denominator: Complexes | None
) -> None:
    """Add driver · numerator/denominator to the target, both and the weight multiplied by the denominator instead."""
    if denominator is not None:
        target *= denominator
    if numerator is None:
        target += driver
    else:
        np.multiply(driver, numerator, out=work.spare)
        target += work.spare
    if denominator is not None:
        driver *= denominator
        work.weight *= denominator


def _rows(*rows: NDArray[np.complexfloating]) -> Floats:
    """Return complex rows as (row, 2·frequency) floats, real and imaginary part side by side as memory has them."""
    return np.stack(rows).astype(np.complex128).view(np.float64)
