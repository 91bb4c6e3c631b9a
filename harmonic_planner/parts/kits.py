"""Kits: a family of real parts on a real board, as typed values in SI, with losses and strays."""

from __future__ import annotations

import difflib
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from importlib.resources import as_file, files
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kit_files import CONTINUOUS, KitError, read_kit_file
from harmonic_planner.parts.preferred import grid_values

FloatOrArray = float | NDArray[np.float64]

REFERENCE_REACTANCE_OHM = 20.0
"""Reactance at which a resonator's Q is stated where its values are not known yet [ohm]. In a 50 ohm ladder of 20 %
bandwidth the shunt arms have near 10 ohm and the series arms near 250 ohm; 1/20 is about the mean of 1/10 and 1/250,
and the loss of a capacitor's conductor goes with 1/X."""


@dataclass(frozen=True)
class InductorKit:
    """Inductors of one kit; every frequency in hertz, every inductance in henry."""

    smallest_h: float
    largest_h: float
    grid: str | tuple[float, ...]
    """Name of an E series, or the values themselves [H]."""
    tolerance: float
    q_reference: float
    q_reference_hz: float
    q_exponent: float
    q_most: float
    self_resonance_reference_hz: float
    self_resonance_reference_h: float
    self_resonance_exponent: float
    mounting_h: float
    """Inductance of pads and solder in series with each inductor [H]."""
    temperature_per_k: float | None = None
    """Relative change of an inductance per kelvin; None where the kit does not say."""
    current_a: float | None = None
    """Rated current of the smaller values, r.m.s. [A]; None where the kit does not say."""
    parallel: bool = False
    """Whether two parts in parallel may make one value; inductors side by side couple, so normally not."""

    def q(self, frequency_hz: FloatOrArray) -> NDArray[np.float64]:
        """Return the unloaded Q of an inductor.

        Parameters
        ----------
        frequency_hz : float or ndarray
            Any shape [Hz], above zero.

        Returns
        -------
        ndarray
            Same shape.

        Notes
        -----
        Q = min(Q_ref (f/f_ref)^p, Q_most): p = 1/2 where the skin effect alone counts, less for a kit whose large
        values, wound of finer wire, reach their best at lower frequency. One Q for all values of a kit; winding
        losses only, so it does not fall towards self-resonance, which the parallel capacitance brings by itself.
        """
        ratio = np.asarray(frequency_hz, dtype=np.float64) / self.q_reference_hz
        return np.minimum(self.q_reference * ratio**self.q_exponent, self.q_most)

    def self_resonance_hz(self, inductance_h: float) -> float:
        """Return an inductor's own parallel resonance [Hz]: f_ref (L/L_ref)^−s, s = 1/2 for one capacitance in all."""
        ratio = inductance_h / self.self_resonance_reference_h
        return float(self.self_resonance_reference_hz * ratio**-self.self_resonance_exponent)

    def parallel_capacitance_f(self, inductance_h: float) -> float:
        """Return the capacitance across an inductor [F] that gives its self-resonance."""
        return 1.0 / ((2 * math.pi * self.self_resonance_hz(inductance_h)) ** 2 * inductance_h)

    def values_h(self) -> tuple[float, ...]:
        """Return every inductance that can be bought, ascending [H]."""
        return _values(self.grid, self.smallest_h, self.largest_h)


@dataclass(frozen=True)
class CapacitorKit:
    """Capacitors of one kit; every frequency in hertz, every capacitance in farad."""

    smallest_f: float
    largest_f: float
    grid: str | tuple[float, ...]
    """Name of an E series, the values themselves [F], or ``continuous`` for trimmers."""
    tolerance: float
    dissipation: float
    """tan δ of the dielectric."""
    esr_reference_ohm: float
    esr_reference_hz: float
    inductance_h: float
    """Of a mounted part, pads and solder included, without a via [H]."""
    temperature_per_k: float | None = None
    """Relative change of a capacitance per kelvin; None where the kit does not say."""
    voltage_v: float | None = None
    """Rated voltage, peak [V]; None where the kit does not say."""
    parallel: bool = False
    """Whether two parts in parallel may make one value."""

    def resistance_ohm(self, capacitance_f: FloatOrArray, frequency_hz: FloatOrArray) -> NDArray[np.float64]:
        """Return the series resistance of a capacitor.

        Parameters
        ----------
        capacitance_f : float or ndarray
            Value [F], above zero.
        frequency_hz : float or ndarray
            Broadcasts with the value [Hz], above zero.

        Returns
        -------
        ndarray
            Dielectric and conductor loss in series, tan δ/(ωC) + R_ref sqrt(f/f_ref) [ohm].
        """
        frequency = np.asarray(frequency_hz, dtype=np.float64)
        dielectric = self.dissipation / (2 * np.pi * frequency * capacitance_f)
        return np.asarray(dielectric + self.conductor_ohm(frequency))

    def conductor_ohm(self, frequency_hz: FloatOrArray) -> NDArray[np.float64]:
        """Return the conductor's part of a capacitor's resistance, any shape [ohm]: R_ref sqrt(f/f_ref)."""
        ratio = np.asarray(frequency_hz, dtype=np.float64) / self.esr_reference_hz
        return np.asarray(self.esr_reference_ohm * np.sqrt(ratio))

    def q(self, capacitance_f: FloatOrArray, frequency_hz: FloatOrArray) -> NDArray[np.float64]:
        """Return the unloaded Q of a capacitor: its reactance over its series resistance; arguments broadcast."""
        reactance = 1.0 / (2 * np.pi * np.asarray(frequency_hz, dtype=np.float64) * capacitance_f)
        resistance = self.resistance_ohm(capacitance_f, frequency_hz)
        with np.errstate(divide="ignore"):  # a kit may claim lossless capacitors
            return np.asarray(reactance / resistance)

    def self_resonance_hz(self, capacitance_f: float, extra_h: float = 0.0) -> float:
        """Return the series resonance [Hz] with the part's own inductance and `extra_h` [H], a via's for instance."""
        total_h = self.inductance_h + extra_h
        return math.inf if total_h == 0 else 1.0 / (2 * math.pi * math.sqrt(total_h * capacitance_f))

    @property
    def continuous(self) -> bool:
        """Whether any value of the range can be set."""
        return self.grid == CONTINUOUS

    def values_f(self) -> tuple[float, ...]:
        """Return every capacitance that can be bought, ascending [F]; PlannerError where the range is continuous."""
        if self.continuous:
            raise PlannerError("a continuous range of capacitors has no list of values")
        return _values(self.grid, self.smallest_f, self.largest_f)


@dataclass(frozen=True)
class Board:
    """What the board adds."""

    via_h: float
    """From a shunt part's pad to the ground plane [H]."""
    pad_f: float
    """From one pad to ground [F]."""
    shared_via_h: float = 0.0
    """Common to the vias of two or more shunt parts on one node, beyond each part's own [H]."""


@dataclass(frozen=True)
class Thresholds:
    """Where an element stops being `ok` or `marginal`."""

    stray_ok: float
    stray_marginal: float
    """Largest share of strays in a value."""
    resonance_ok: float
    resonance_marginal: float
    """Least self-resonance over the filter's centre."""
    stray_tolerance: float
    """How well a stray is known, as a fraction of itself."""


@dataclass(frozen=True)
class Kit:
    """A family of real parts with its board, tolerances and verdict thresholds."""

    name: str
    title: str
    inductor: InductorKit
    capacitor: CapacitorKit
    board: Board
    thresholds: Thresholds
    untuned_factor: float
    """Least bandwidth over a resonator's tolerance, filters that nobody tunes."""
    tuned_factor: float
    """Least bandwidth over the drift, filters tuned on the bench."""
    tuned: bool = False
    """Whether its capacitors are made to be adjusted on the bench; then every filter of this kit is."""
    basis: Mapping[str, str] = field(default_factory=dict, hash=False)
    """Dotted key of the kit file -> where its value comes from."""

    @property
    def resonator_tolerance(self) -> float:
        """Of a resonator's frequency, as a fraction: half the sum of its parts' tolerances, f = 1/(2π sqrt(LC))."""
        return (self.inductor.tolerance + self.capacitor.tolerance) / 2

    def unloaded_q(self, frequency_hz: float, reactance_ohm: float = REFERENCE_REACTANCE_OHM) -> float:
        """Return the unloaded Q of a resonator of this kit's parts.

        Parameters
        ----------
        frequency_hz : float
            Resonance [Hz], above zero.
        reactance_ohm : float
            Reactance of the inductor and of the capacitor there [ohm]; the smaller, the more the capacitor loses.

        Returns
        -------
        float
            1/(1/Q_L + 1/Q_C).
        """
        capacitance_f = 1.0 / (2 * math.pi * frequency_hz * reactance_ohm)
        capacitor_q = float(self.capacitor.q(capacitance_f, frequency_hz))
        return 1.0 / (1.0 / float(self.inductor.q(frequency_hz)) + 1.0 / capacitor_q)

    def bandwidth_floor(self, *, tuned: bool, drift: float) -> float:
        """Return the narrowest bandwidth worth designing, as a fraction of the centre.

        Parameters
        ----------
        tuned : bool
            Whether each resonator is adjusted on the bench; a kit that is `tuned` always is.
        drift : float
            Common drift of the centre, as a fraction.

        Returns
        -------
        float
            Untuned: a multiple (5 in the shipped kits) of the resonator's tolerance. Tuned: one (3) of the drift.
        """
        return self.tuned_factor * drift if tuned or self.tuned else self.untuned_factor * self.resonator_tolerance


def kit_names() -> tuple[str, ...]:
    """Return the names of the shipped kits, sorted."""
    folder = files("harmonic_planner.parts") / "data"
    return tuple(sorted(item.name[:-5] for item in folder.iterdir() if item.name.endswith(".toml")))


def load_kit(name: str, folder: Path) -> Kit:
    """Load a shipped kit, or the user's own from a TOML file of the same form.

    Parameters
    ----------
    name : str
        A shipped kit's name, or the path of a kit file.
    folder : Path
        Where a relative path starts, normally the scenario's folder.

    Returns
    -------
    Kit
        Checked, in SI.

    Raises
    ------
    KitError
        Where there is no such kit, or with every problem of its file.
    """
    if name in kit_names():
        with as_file(files("harmonic_planner.parts") / "data" / f"{name}.toml") as shipped:
            return _read(shipped)
    path = folder / name
    if not name or not path.exists():
        close = difflib.get_close_matches(name, kit_names(), n=1)
        hint = f"; nearest: {close[0]}" if close else ""
        shipped_names = ", ".join(kit_names())
        raise KitError((f"kit = {name!r}: neither a shipped kit ({shipped_names}) nor a kit file{hint}",))
    return _read(path)


def _read(path: Path) -> Kit:
    table, basis = read_kit_file(path)
    inductor, capacitor, verdict = table.inductor, table.capacitor, table.verdict
    return Kit(
        name=table.name,
        title=table.title,
        inductor=InductorKit(
            smallest_h=inductor.smallest,
            largest_h=inductor.largest,
            grid=inductor.grid,
            tolerance=inductor.tolerance,
            q_reference=inductor.q,
            q_reference_hz=inductor.q_frequency,
            q_exponent=inductor.q_exponent,
            q_most=inductor.q_most,
            self_resonance_reference_hz=inductor.self_resonance,
            self_resonance_reference_h=inductor.self_resonance_inductance,
            self_resonance_exponent=inductor.self_resonance_exponent,
            mounting_h=inductor.mounting,
            temperature_per_k=inductor.temperature,
            current_a=inductor.current,
            parallel=inductor.parallel,
        ),
        capacitor=CapacitorKit(
            smallest_f=capacitor.smallest,
            largest_f=capacitor.largest,
            grid=capacitor.grid,
            tolerance=capacitor.tolerance,
            dissipation=capacitor.dissipation,
            esr_reference_ohm=capacitor.esr,
            esr_reference_hz=capacitor.esr_frequency,
            inductance_h=capacitor.inductance,
            temperature_per_k=capacitor.temperature,
            voltage_v=capacitor.voltage,
            parallel=capacitor.parallel,
        ),
        board=Board(via_h=table.board.via, pad_f=table.board.pad, shared_via_h=table.board.shared_via),
        thresholds=Thresholds(
            stray_ok=verdict.stray_ok,
            stray_marginal=verdict.stray_marginal,
            resonance_ok=verdict.resonance_ok,
            resonance_marginal=verdict.resonance_marginal,
            stray_tolerance=verdict.stray_tolerance,
        ),
        untuned_factor=table.bandwidth.untuned,
        tuned_factor=table.bandwidth.tuned,
        tuned=table.tuned,
        basis=basis,
    )


def _values(grid: str | tuple[float, ...], smallest: float, largest: float) -> tuple[float, ...]:
    return grid_values(grid, smallest=smallest, largest=largest) if isinstance(grid, str) else grid
