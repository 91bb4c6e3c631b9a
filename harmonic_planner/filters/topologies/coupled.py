"""From a free resonator value to a solved `Network`, and refusals in the words of the topology that asked.

Shared by the three coupled-resonator topologies, which differ in what a normalised susceptance becomes.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from typing import Literal

from harmonic_planner.filters.topologies.base import TopologyError, check_specification
from harmonic_planner.filters.topologies.network import Network, NetworkError, textbook
from harmonic_planner.filters.topologies.tuning import slope_limits, tune
from harmonic_planner.model import Kind
from harmonic_planner.parts.quantities import readable
from harmonic_planner.physics.prototypes import Prototype

Method = Literal["tuned", "textbook"]

WORST_REFLECTION_DB = 1.0
"""Return loss that a design may lose on its prototype where no network has it exactly [dB]."""
INWARD = (0.02, 0.05, 0.1, 0.2, 0.3, 0.4)
"""Steps from a closed-form limit to the other, in the logarithm, of which the first that designs is taken."""


@dataclass(frozen=True)
class Form:
    """How a topology builds the network: names of its parts, and its free value against the slope parameter."""

    name: str
    coupling: Kind
    """Kind of the couplings."""
    part: Kind
    """Kind of a resonator's element that is not free."""
    free: Kind
    wire: Literal["infinite", "zero"]
    """Value of a coupling that has become a wire."""
    slope: Callable[[float, float, float], float]
    """(resonator [H or F], ω0 [rad/s], impedance [ohm]) -> b."""
    resonator: Callable[[float, float, float], float]
    """(b, ω0 [rad/s], impedance [ohm]) -> resonator [H or F]."""

    def coupling_ref(self, index: int, order: int) -> str:
        """Return the name of the coupling behind resonator `index`, 0 being the source: C01, L34."""
        return f"{self.coupling}{index}{'' if order < 10 else '_'}{index + 1}"


def solve(
    form: Form,
    prototype: Prototype,
    *,
    centre_hz: float,
    bandwidth: float,
    impedance_ohm: float,
    resonator: float | None,
    method: Method,
) -> Network:
    """Solve the network of a topology.

    Parameters
    ----------
    form : Form
        The topology.
    prototype : Prototype
        Low-pass prototype.
    centre_hz : float
        Geometric centre of the band edges [Hz].
    bandwidth : float
        Δ.
    impedance_ohm : float
        Source and load [ohm].
    resonator : float or None
        The free value [H or F]; None takes the geometric middle of those that are possible, near a reactance of the
        ports' impedance.
    method : {"tuned", "textbook"}
        Whether the band is met exactly, or the narrow-band equations are taken as they are.

    Returns
    -------
    Network
        Normalised values, all above zero.

    Raises
    ------
    TopologyError
        For a specification that is not above zero, a band too wide for any resonator, or a resonator that makes a value
        infinite or negative, or spoils the return loss: names the element and the resonators that would work.
    """
    given = {} if resonator is None else {"resonator": resonator}
    check_specification(form.name, centre=centre_hz, bandwidth=bandwidth, impedance=impedance_ohm, **given)
    omega = 2.0 * math.pi * centre_hz
    limits = _limits(form, prototype, bandwidth)
    slope = math.sqrt(math.prod(limits)) if resonator is None else form.slope(resonator, omega, impedance_ohm)
    try:
        if method == "textbook":
            return textbook(prototype, bandwidth=bandwidth, slope=slope)
        return _tuned(prototype, bandwidth, slope)
    except NetworkError as error:
        value = form.resonator(slope, omega, impedance_ohm)
        low, high = feasible(form, prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=impedance_ohm)
        raise TopologyError(
            f"{form.name}: {form.free} = {_text(value, form.free)} does not do for {prototype.name} at a bandwidth of "
            f"{bandwidth:.3g}: {_words(form, prototype, error)}; "
            f"{_text(low, form.free)} to {_text(high, form.free)} works"
        ) from error


def feasible(
    form: Form, prototype: Prototype, *, centre_hz: float, bandwidth: float, impedance_ohm: float
) -> tuple[float, float]:
    """Return a range of the free value in which a topology can be designed.

    Parameters
    ----------
    form : Form
        The topology.
    prototype : Prototype
        Low-pass prototype.
    centre_hz : float
        Centre [Hz].
    bandwidth : float
        Δ.
    impedance_ohm : float
        Source and load [ohm].

    Returns
    -------
    tuple of float
        (least, largest) [H or F]; both ends were designed. A little beyond them a design may still exist, with one
        element about to vanish.

    Raises
    ------
    TopologyError
        Where the band is too wide for any.
    """
    check_specification(form.name, centre=centre_hz, bandwidth=bandwidth, impedance=impedance_ohm)
    _limits(form, prototype, bandwidth)
    slopes = _designed_slopes(prototype, bandwidth)
    if slopes is None:
        raise TopologyError(
            f"{form.name}: no values reach the return loss of {prototype.name} at a bandwidth of {bandwidth:.3g}; "
            f"use a narrower band or more ripple"
        )
    omega = 2.0 * math.pi * centre_hz
    ends = sorted(form.resonator(slope, omega, impedance_ohm) for slope in slopes)
    return ends[0], ends[1]


def _tuned(prototype: Prototype, bandwidth: float, slope: float) -> Network:
    tuned = tune(prototype, bandwidth=bandwidth, slope=slope)
    if tuned.reflection_db > WORST_REFLECTION_DB:
        raise NetworkError("coupling", 0, "mismatch")
    return tuned.network


@lru_cache(maxsize=512)
def _designed_slopes(prototype: Prototype, bandwidth: float) -> tuple[float, float] | None:
    low, high = slope_limits(prototype, bandwidth=bandwidth)

    def first_inside(start: float, other: float) -> float | None:
        for step in INWARD:
            slope = start * math.exp(step * math.log(other / start))
            try:
                _tuned(prototype, bandwidth, slope)
            except NetworkError:
                continue
            return slope
        return None

    least, largest = first_inside(low, high), first_inside(high, low)
    return None if least is None or largest is None else (least, largest)


def _limits(form: Form, prototype: Prototype, bandwidth: float) -> tuple[float, float]:
    try:
        return slope_limits(prototype, bandwidth=bandwidth)
    except NetworkError as error:
        raise TopologyError(
            f"{form.name}: a bandwidth of {bandwidth:.3g} is too wide for {prototype.name}: "
            f"{form.part}{error.index} would have to be negative with every {form.free}; use a narrower band"
        ) from error


def _words(form: Form, prototype: Prototype, error: NetworkError) -> str:
    if error.reason == "mismatch":
        return "no couplings reach the return loss"
    if error.part == "coupling":
        return f"{form.coupling_ref(error.index, prototype.order)} would have to be {form.wire}"
    return f"{form.part}{error.index} would have to be negative"


def _text(value: float, kind: Kind) -> str:
    return readable(value, "H" if kind == "L" else "F")
