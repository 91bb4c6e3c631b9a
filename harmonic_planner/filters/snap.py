"""From nominal values to parts that can be bought, and the rest trimmed to them.

1. Inductors go to the grid: of the two nearest values of each those that together leave least when capacitors make up
   for them; one beyond the range to its end.
2. For the best few sets of inductors the capacitors are fitted anew, within the kit's range.
3. Capacitors go to the grid, one part or, where the kit allows it, two in parallel; a second part must be worth
   `PAIR_PRICE_DB`. Trimmers stay as fitted.
4. Any one capacitor is changed for a neighbour as long as that helps.

What is better is always told by the response of exactly those parts with their strays (`misfit`), losses taken out.

Notes
-----
No accuracy is promised; of 392 random designs over all topologies and shipped kits (elements in range and not swamped,
strays absorbed), 11 of which reach beyond a kit's range, as bought and without losses:

============  ====  ===================  =======================  ============
kit           n     centre off, %        return loss change, dB   within 2 dB
                    middle, nine of ten  middle, nine of ten
============  ====  ===================  =======================  ============
air-wound     69    0.03     0.14        -0.3     -5.1            77 %
chip-0402     52    0.04     0.21        -0.3     -3.3            81 %
chip-0603     67    0.04     0.24        -0.3     -2.8            79 %
chip-0805     76    0.07     0.24        -0.5     -5.5            70 %
chip-1008     99    0.04     0.20        -0.5     -5.2            70 %
chip-trimmer  29    0.04     0.15        -0.0     -2.3            90 %
all           392   0.04     0.21        -0.3     -4.4            76 %
============  ====  ===================  =======================  ============

What is left is mostly that of inductors on E12 and E24, and of single series capacitors below two of the least value.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.filters.absorb import with_values
from harmonic_planner.filters.choices import Shelf, shelf
from harmonic_planner.filters.circuit import Circuit, CircuitError, Element
from harmonic_planner.filters.fit import NUDGE, carry, fit
from harmonic_planner.filters.misfit import Misfit
from harmonic_planner.filters.rounding import Triangle, best_combinations
from harmonic_planner.parts.kits import Kit
from harmonic_planner.parts.quantities import readable

Floats = NDArray[np.float64]

PAIR_PRICE_DB = 0.1
"""By how much a second part must reduce the misfit [dB]; the project's own choice."""
INDUCTOR_SETS = 4
"""Sets of inductors for which the capacitors are fitted."""
SCORED = 16
"""Combinations of capacitors whose response is looked at, of each search."""
LONGEST_TRIM = 0.5
"""Of a predicted change of a capacitor, in the logarithm; the prediction is linear."""
MOST_CHANGES = 30
ROUNDING = 1e-9
"""Relative; a value this near to a bound is at it."""


@dataclass(frozen=True)
class Snapped:
    """A filter as it is bought."""

    circuit: Circuit
    """One element for each of the nominal circuit; two parts in parallel count as one of their sum."""
    soldered: Circuit
    """The same with one element for each part: C2 of two parts is C2a and C2b. The response as built is this one's."""
    parts: tuple[tuple[float, ...], ...]
    """Values to buy of each element, one or two [henry or farad]."""
    cost: float
    """What is left of the misfit to the ideal response [dB], `PAIR_PRICE_DB` for each second part included."""
    centre_error: float
    """Relative, of the soldered circuit without losses; NaN where a band edge is gone."""
    return_loss_change_db: float
    """Of the least return loss over the passband, without losses; below zero for a worse one, either counted up to
    30 dB."""
    problem: str
    """Values that the kit does not have, and what stands for them; empty where it has all."""


def snap(nominal: Circuit, kit: Kit, *, ideal: Circuit, passband_hz: tuple[float, float]) -> Snapped:
    """Choose the parts of a filter.

    Parameters
    ----------
    nominal : Circuit
        A ladder with strays absorbed (`absorb`).
    kit : Kit
        The parts and their strays.
    ideal : Circuit
        The same elements by ref, with ideal values; their arrangement does not count.
    passband_hz : tuple of float
        The band to be passed, low and high end [Hz].

    Returns
    -------
    Snapped
        What to buy.

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder, or the ideal one lacks an element.
    PlannerError
        For a passband that does not ascend.
    """
    bench = _Bench(nominal, kit, ideal, passband_hz)
    sets = [bench.retrimmed(inductors) for inductors in bench.inductor_sets()]
    if bench.capacitors and not kit.capacitor.continuous:
        rounded = [bench.rounded(values) for values in sets]
        best = int(np.argmin([bench.score(parts[np.newaxis])[0] for parts in rounded]))
        parts = bench.improved(rounded[best])
    else:
        best = int(np.argmin([bench.misfit.cost_db(values)[0] for values in sets]))
        parts = _single(sets[best])
    misfit, second = bench.misfit, parts[:, 1] if parts[:, 1].any() else None
    return Snapped(
        circuit=with_values(nominal, parts.sum(axis=1)),
        soldered=_soldered(nominal, parts),
        parts=tuple(tuple(float(value) for value in row if value > 0) for row in parts),
        cost=float(bench.score(parts[np.newaxis])[0]),
        centre_error=misfit.centre_error(parts[:, 0], second=second),
        return_loss_change_db=misfit.return_loss_change_db(parts[:, 0], second=second),
        problem=bench.missing(sets[best]),
    )


class _Bench:
    """One filter, its kit and its measure; values are (element,), parts (element, 2) with zero for no second part."""

    def __init__(self, nominal: Circuit, kit: Kit, ideal: Circuit, passband_hz: tuple[float, float]) -> None:
        ideal_value = {element.ref: element.value for element in ideal.elements}
        for element in nominal.elements:
            if element.ref not in ideal_value:
                raise CircuitError(f"{nominal.topology}: {element.ref} has no ideal value")
        values = np.array([ideal_value[element.ref] for element in nominal.elements])
        self.misfit = Misfit(with_values(nominal, values), kit, passband_hz)
        self.nominal_values = np.array([element.value for element in nominal.elements])
        kinds = np.array([element.kind for element in nominal.elements])
        self.inductors: list[int] = np.flatnonzero(kinds == "L").tolist()
        self.capacitors: list[int] = np.flatnonzero(kinds == "C").tolist()
        self._elements, self._kit = nominal.elements, kit
        centre_hz = self.misfit.ideal_band.centre_hz
        centre_hz = nominal.centre_hz if math.isnan(centre_hz) else centre_hz
        self._shelves: dict[int, Shelf] = {
            place: shelf(nominal, element, kit, centre_hz=centre_hz)
            for place, element in enumerate(nominal.elements)
            if element.kind == "L" or not kit.capacitor.continuous
        }

    def score(self, parts: Floats) -> Floats:
        """Return the misfit with the price of second parts, (trial,) [dB], of (trial, element, 2) parts."""
        pairs = np.count_nonzero(parts[:, :, 1], axis=1)
        second = parts[:, :, 1] if pairs.any() else None
        return np.asarray(self.misfit.cost_db(parts[:, :, 0], second=second) + PAIR_PRICE_DB * pairs)

    def inductor_sets(self) -> list[Floats]:
        """Return the nominal values with the inductors on the grid in the ways that look best."""
        values = self.nominal_values
        if not self.inductors:
            return [values]
        residual, slopes = self._slopes(_single(values), values)
        problem = Triangle.of(residual, slopes[:, [*self.capacitors, *self.inductors]])
        sold = self._kit.inductor.values_h()
        beside = [2 if sold[0] <= values[i] <= sold[-1] else 1 for i in self.inductors]
        near = [
            self._shelves[i].near(values[i], singles=n, pairs=0) for i, n in zip(self.inductors, beside, strict=True)
        ]
        steps = [self._steps(i, values[i], choices) for i, choices in zip(self.inductors, near, strict=True)]
        sets = []
        for places in best_combinations(problem.last(len(self.inductors)), steps)[:INDUCTOR_SETS]:
            changed = values.copy()
            for k, (i, place) in enumerate(zip(self.inductors, places, strict=True)):
                changed[i] = self._shelves[i].equals[near[k][place]]
            sets.append(changed)
        return sets

    def retrimmed(self, values: Floats) -> Floats:
        """Return values with the capacitors fitted within the kit's range, the inductors as they are."""
        if not self.capacitors:
            return values
        ideal = self.misfit.ideal_values
        start = carry(self.misfit, self.nominal_values / ideal, values / ideal, self.capacitors)
        least, most = values.copy(), values.copy()
        least[self.capacitors], most[self.capacitors] = self._kit.capacitor.smallest_f, self._kit.capacitor.largest_f
        fitted = fit(self.misfit, start, least=least / ideal, most=most / ideal) * ideal
        return np.asarray(np.clip(fitted, least, most))

    def rounded(self, values: Floats) -> Floats:
        """Return parts with the capacitors on the grid, those that do best together."""
        problems = [
            Triangle.of(residual, slopes[:, self.capacitors])
            for residual, slopes in (self._slopes(_single(values)), self._slopes(_single(values), values))
        ]
        trials = []
        for singles, pairs in ((3, 0), (2, 3)) if self._kit.capacitor.parallel else ((3, 0),):
            near = [self._shelves[i].near(values[i], singles=singles, pairs=pairs) for i in self.capacitors]
            steps = [self._steps(i, values[i], choices) for i, choices in zip(self.capacitors, near, strict=True)]
            for problem in problems:
                places = best_combinations(problem, steps)[:SCORED]
                parts = np.tile(_single(values), (len(places), 1, 1))
                for k, i in enumerate(self.capacitors):
                    parts[:, i] = self._shelves[i].parts[near[k][places[:, k]]]
                trials.append(parts)
        every = np.concatenate(trials)
        return np.asarray(every[int(np.argmin(self.score(every)))])

    def improved(self, parts: Floats) -> Floats:
        """Return parts after changing one capacitor at a time for a neighbour of where its slope points."""
        reached = float(self.score(parts[np.newaxis])[0])
        for _ in range(MOST_CHANGES):
            residual, slopes = self._slopes(parts)
            trials = []
            for i in self.capacitors:
                slope = slopes[:, i]
                step = -float(slope @ residual) / max(float(slope @ slope), 1e-9)
                wanted = self._shelves[i].like(*parts[i]) * math.exp(min(max(step, -LONGEST_TRIM), LONGEST_TRIM))
                for choice in self._shelves[i].near(wanted, singles=2, pairs=4):
                    trial = parts.copy()
                    trial[i] = self._shelves[i].parts[choice]
                    trials.append(trial)
            scores = self.score(np.array(trials))
            best = int(scores.argmin())
            if not scores[best] < reached - 1e-9:
                break
            parts, reached = trials[best], float(scores[best])
        return parts

    def missing(self, fitted: Floats) -> str:
        """Say which inductors' nominal values, and which capacitors' fitted ones, are beyond the kit's range."""
        words = []
        for element, nominal, value in zip(self._elements, self.nominal_values.tolist(), fitted.tolist(), strict=True):
            if element.kind == "L":
                least, most, unit = self._kit.inductor.smallest_h, self._kit.inductor.largest_h, "H"
                below, above = nominal < least, nominal > most
            else:
                least, most, unit = self._kit.capacitor.smallest_f, self._kit.capacitor.largest_f, "F"
                below, above = value <= least * (1 + ROUNDING), value >= most * (1 - ROUNDING)
            if below or above:
                end = f"least, {_text(least, unit)}" if below else f"largest, {_text(most, unit)}"
                words.append(f"{element.ref} would be {_text(nominal, unit)}: the kit's {end}, stands for it")
        return "; ".join(words)

    def _slopes(self, parts: Floats, like: Floats | None = None) -> tuple[Floats, Floats]:
        """Return how far parts are off and the derivatives by their logarithms, (n,) and (n, element).

        With the values they should be `like` the measure is the distance of K, which is straighter, and without them
        the misfit itself.
        """
        factors = 1 + np.concatenate([np.zeros((1, len(parts))), NUDGE * np.eye(len(parts))])
        second = parts[:, 1] * factors if parts[:, 1].any() else None
        measure = self.misfit.residual if like is None else self.misfit.distance
        around = measure(parts[:, 0] * factors, second=second)
        wanted = 0.0 if like is None else self.misfit.distance(like)[0]
        return around[0] - wanted, (around[1:] - around[0]).T / NUDGE

    def _steps(self, place: int, value: float, choices: NDArray[np.intp]) -> Floats:
        return np.asarray(np.log(self._shelves[place].equals[choices] / value))


def _text(value: float, unit: str) -> str:
    return readable(value, "H" if unit == "H" else "F")


def _single(values: Floats) -> Floats:
    return np.stack([values, np.zeros_like(values)], axis=1)


def _soldered(circuit: Circuit, parts: Floats) -> Circuit:
    elements: list[Element] = []
    for element, (first, second) in zip(circuit.elements, parts.tolist(), strict=True):
        if second > 0:
            elements.append(replace(element, ref=f"{element.ref}a", value=first))
            elements.append(replace(element, ref=f"{element.ref}b", value=second))
        else:
            elements.append(replace(element, value=first))
    return replace(circuit, elements=tuple(elements))
