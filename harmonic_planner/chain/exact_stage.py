"""One stage with nothing taken as small: the comb that enters its device, and what leaves behind its amplifier.

Where the user gave levels of a device's own lines, the comb that leaves the waveform is multiplied zone by zone by
given over modelled level, as the linear conversion is: right for the device's own lines, and consistent with the
linear figure for everything beside them. A given line that the waveform does not have at all (the first line of a
perfect push-push, say) is added at a random phase.

A filter turns every line by a random phase of its own, unless its transmissions are complex and bring their phases
along; a stage without a filter leaves phases as the waveform made them. Lines that an amplifier or leakage adds come at
random phases.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.chain.assemble import Array, ChainArrays
from harmonic_planner.model import Device, Scenario
from harmonic_planner.physics.conversion import UNMODELLED, device_lines, zone_scale
from harmonic_planner.physics.envelope import limited
from harmonic_planner.physics.one_period import driven, period_points
from harmonic_planner.physics.waveforms import spectrum

Complex = NDArray[np.complex128]


@dataclass(frozen=True)
class ExactStage:
    """A stage on the line grid; every comb is relative to its carrier, which has amplitude 1 and phase 0.

    Attributes
    ----------
    device : Device or None
        None passes the comb on.
    times : int
    carrier_in, carrier : int
        Array index of the carrier at the device's input, and behind the device.
    scale : (lines,) float
        Given over modelled level, zone by zone.
    unmodelled : (lines,) float
        Given lines that the waveform does not have.
    filtered : bool
        Whether a filter turns the phases.
    added : (lines,) float
        Lines that the amplifier and leakage add.
    saturates : bool
        Whether the amplifier's saturation is known.
    am_to_pm_deg_per_db : float
    points : int
        Samples of one period.
    """

    device: Device | None
    times: int
    carrier_in: int
    carrier: int
    scale: Array
    unmodelled: Array
    filtered: bool
    added: Array
    saturates: bool
    am_to_pm_deg_per_db: float
    points: int

    def leaving(
        self, entering: Complex, passed: Array | Complex, *, drive_db: float, rng: np.random.Generator
    ) -> Complex:
        """Return the comb at the stage's output.

        Parameters
        ----------
        entering : (draws, lines) complex
        passed : (lines,) or (draws, lines) float or complex
            The filter's transmissions relative to its carrier; real ones get random phases.
        drive_db : float
            By how much the carrier would exceed the amplifier's saturation if it were linear [dB].
        rng : numpy Generator
        """
        comb = passed * self.made(entering, rng)
        if self.filtered and not np.iscomplexobj(passed):
            comb *= random_phases(rng, comb.shape)
            comb = _with_unit_carrier(comb, self.carrier)
        else:
            comb = carrier_at_one(comb, self.carrier)
        if self.saturates or self.am_to_pm_deg_per_db:
            comb = limited(
                comb,
                drive_db=drive_db if self.saturates else -np.inf,
                am_to_pm_deg_per_db=self.am_to_pm_deg_per_db,
            )
            comb = carrier_at_one(comb, self.carrier)
        if self.added.any():
            comb += self.added * random_phases(rng, comb.shape)
        return comb

    def made(self, entering: Complex, rng: np.random.Generator) -> Complex:
        """Return the comb behind the device, (draws, lines), its carrier's amplitude 1, at the waveform's phases."""
        if self.device is None:
            return entering
        comb = self.scale * driven(
            self.device, self.times, entering, carrier_index=self.carrier_in + 1, points=self.points
        )
        comb /= np.abs(comb[:, self.carrier, np.newaxis])
        if self.unmodelled.any():
            comb += self.unmodelled * random_phases(rng, comb.shape)
        return comb


def exact_stages(
    scenario: Scenario, chain: ChainArrays, am_to_pm_deg_per_db: tuple[float, ...]
) -> tuple[ExactStage, ...]:
    """Return every stage of `scenario` on the grid of `chain`.

    Parameters
    ----------
    scenario : Scenario
    chain : ChainArrays
    am_to_pm_deg_per_db : tuple of float
        Of each stage's amplifier [deg/dB].
    """
    count = chain.grid.count
    carrier_in = chain.grid.q - 1
    found = []
    for stage, arrays, turned in zip(scenario.stages, chain.stages, am_to_pm_deg_per_db, strict=True):
        scale, unmodelled, points = np.ones(count), np.zeros(count), 0
        if stage.device is not None:
            scale = zone_scale(stage.device, stage.times, carrier_index=carrier_in + 1, count=count)
            unmodelled = _unmodelled_lines(stage.device, stage.times, carrier_in + 1, count)
            points = period_points(stage.device, stage.times, carrier_index=carrier_in + 1, count=count)
        found.append(
            ExactStage(
                device=stage.device,
                times=stage.times,
                carrier_in=carrier_in,
                carrier=arrays.carrier,
                scale=scale,
                unmodelled=unmodelled,
                filtered=stage.filter != "none",
                added=arrays.added ** (1 / chain.exponent),
                saturates=stage.amplifier is not None and stage.amplifier.saturation_dbm is not None,
                am_to_pm_deg_per_db=turned if stage.amplifier is not None else 0.0,
                points=points,
            )
        )
        carrier_in = arrays.carrier
    return tuple(found)


def random_phases(rng: np.random.Generator, shape: tuple[int, ...]) -> Complex:
    """Return e^(iψ), ψ uniform."""
    angle = rng.uniform(0.0, 2 * np.pi, shape)
    phases = np.empty(shape, dtype=np.complex128)
    np.cos(angle, out=phases.real)
    np.sin(angle, out=phases.imag)
    return phases


def carrier_at_one(comb: Complex, carrier: int) -> Complex:
    """Return `comb`, (draws, lines), scaled and moved in time until its carrier has amplitude 1 and phase 0."""
    wanted = comb[:, carrier, np.newaxis]
    delay = np.angle(wanted) / (carrier + 1)
    moved = comb / np.abs(wanted) * np.exp(-1j * delay * np.arange(1, comb.shape[-1] + 1))
    return _with_unit_carrier(moved, carrier)


def _with_unit_carrier(comb: Complex, carrier: int) -> Complex:
    """Put 1 in the place of the carrier; where all phases are random it does not matter what its own one was."""
    comb[:, carrier] = 1.0
    return comb


def _unmodelled_lines(device: Device, times: int, carrier_index: int, count: int) -> Array:
    """Return given lines that the waveform makes by less than `UNMODELLED` of the wanted one, (lines,)."""
    harmonics = count // carrier_index
    wanted = device_lines(device, times, harmonics)
    F = np.abs(spectrum(device, times, max(harmonics, times)).F)
    missing = F[: harmonics + 1] < UNMODELLED * F[times]
    lines = np.zeros(count)
    lines[carrier_index - 1 :: carrier_index] = np.where(missing, wanted, 0.0)[1:]
    return lines
