"""What a topology is to the registry."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal, Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.model import PlannerError
from harmonic_planner.physics.prototypes import Prototype


class TopologyError(PlannerError):
    """A prototype that a topology cannot realise; the message says why and what would help."""


class UnequalTerminationError(TopologyError):
    """The prototype ends in another impedance than it starts from; `load_ohm` is the load it needs."""

    def __init__(self, message: str, load_ohm: float) -> None:
        super().__init__(message)
        self.load_ohm = load_ohm


class Synthesis(Protocol):
    """Ideal element values of one topology, from a prototype."""

    def __call__(
        self,
        prototype: Prototype,
        *,
        centre_hz: float,
        bandwidth: float,
        impedance_ohm: float,
        resonator: float | None = None,
    ) -> Circuit:
        """Return the circuit; bandwidth as a fraction of the centre, resonator in henry or farad as `Topology.free`."""


class Feasible(Protocol):
    """Values of the free element that a topology can be designed with."""

    def __call__(
        self, prototype: Prototype, *, centre_hz: float, bandwidth: float, impedance_ohm: float
    ) -> tuple[float, float]:
        """Return (least, largest) [henry or farad]."""


class Skew(Protocol):
    """By how much a topology's attenuation differs from the prototype's."""

    def __call__(self, order: int, ratio: ArrayLike) -> NDArray[np.float64]:
        """Return what is added to the prototype's attenuation [dB] at f/f0 = ratio."""


def no_skew(order: int, ratio: ArrayLike) -> NDArray[np.float64]:
    """Return 0 dB in the shape of `ratio`: the skew of a circuit that is its prototype mapped."""
    del order
    return np.zeros_like(np.asarray(ratio, dtype=np.float64))


@dataclass(frozen=True)
class Topology:
    """One way to build a filter."""

    name: str
    title: str
    """What a person reads."""
    source: str
    """The published source of its design equations."""
    design: Synthesis
    free: Literal["L", "C"] | None = None
    """The element of every resonator whose value may be chosen; None where all follow from the prototype."""
    skew_db: Skew = no_skew
    feasible_resonator: Feasible | None = None
    """Range of the free element; None where nothing is free."""
    passes: Literal["band", "low", "high"] = "band"
    """What a low-pass or high-pass takes for its centre is the cut-off; it does not look at the bandwidth."""


def check_specification(name: str, **values: float) -> None:
    """Raise unless every value is a finite number above zero.

    Parameters
    ----------
    name : str
        The topology's name, for the message.
    **values : float
        What was asked for, by the word a person knows it under.

    Raises
    ------
    TopologyError
        For the first value that is not.
    """
    for key, value in values.items():
        if not 0 < value < math.inf:
            raise TopologyError(f"{name}: {key} = {value!r} must be a finite number above zero")


def refuse_resonator(name: str, resonator: float | None) -> None:
    """Raise where a resonator value is given to a topology without a free one.

    Raises
    ------
    TopologyError
        For any value.
    """
    if resonator is not None:
        raise TopologyError(f"{name}: resonator = {resonator!r}: every value follows from the prototype, leave it out")
