"""The network behind all three coupled-resonator topologies, normalised to ω0 = 1 and to the ports' conductance 1.

Shunt resonators of one susceptance slope parameter b, each an inductor of susceptance −b/x beside capacitors, coupled
by series capacitors to each other and to the ports; x = f/f0. Inductive coupling is this network at 1/x; shunt
capacitors between series resonators are the dual of that. So one set of values serves all three.

References
----------
.. [1] G. L. Matthaei, L. Young, E. M. T. Jones, "Microwave Filters, Impedance-Matching Networks, and Coupling
   Structures", 1964, §8.11, fig. 8.11-1 (lumped-element shunt resonators with capacitive coupling).
.. [2] S. B. Cohn, "Direct-coupled-resonator filters", Proc. IRE 45, 1957, pp. 187-196.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.filters.topologies.base import TopologyError
from harmonic_planner.physics.prototypes import Prototype

Floats = NDArray[np.float64]


class NetworkError(TopologyError):
    """A value that would be infinite, negative or without a solution; who names the elements says which one it is."""

    def __init__(
        self,
        part: Literal["coupling", "shunt"],
        index: int,
        reason: Literal["infinite", "negative", "too wide", "mismatch"],
    ) -> None:
        super().__init__(f"{part} {index} is {reason}")
        self.part = part
        self.index = index
        """Coupling 0 is at the source; resonators count from 1."""
        self.reason = reason


@dataclass(frozen=True)
class Network:
    """Susceptances at the centre, over the ports' conductance."""

    couplings: tuple[float, ...]
    """(order + 1,), the first and last to the ports."""
    shunts: tuple[float, ...]
    """(order,), what remains of each resonator's capacitor beside its couplings."""
    slope: float
    """b of every resonator; its inductor's susceptance at the centre."""

    def check(self) -> None:
        """Raise NetworkError for the first value that is not above zero and finite."""
        for index, value in enumerate(self.couplings):
            if not 0 < value < math.inf:
                raise NetworkError("coupling", index, "infinite")
        for index, value in enumerate(self.shunts, start=1):
            if not value > 0:
                raise NetworkError("shunt", index, "negative")


def band_edges(bandwidth: float) -> tuple[float, float]:
    """Return x at both band edges, whose product is 1 and difference Δ."""
    middle = math.hypot(1.0, bandwidth / 2.0)
    return middle - bandwidth / 2.0, middle + bandwidth / 2.0


def textbook(prototype: Prototype, *, bandwidth: float, slope: float) -> Network:
    """Design a network by the narrow-band equations.

    Parameters
    ----------
    prototype : Prototype
        Low-pass prototype; an even-order Chebyshev too.
    bandwidth : float
        Δ.
    slope : float
        b of every resonator over the port's conductance G.

    Returns
    -------
    Network
        Checked values.

    Raises
    ------
    NetworkError
        Where a value would be infinite or negative.

    Notes
    -----
    With ω1' = 1 and normalised to G: J01 = sqrt(Δ·b/(g0·g1)), J_jk = Δ·b/sqrt(g_j·g_k),
    J_n,n+1 = sqrt(Δ·b/(g_n·g_(n+1))); B_jk = J_jk; B01 = J01/sqrt(1 − J01²), which loads the resonator with
    B01/(1 + B01²); the shunt parts are b less what the couplings on both sides add.
    """
    g = prototype.g_values()
    ends = np.sqrt(bandwidth * slope / np.array([g[0] * g[1], g[-2] * g[-1]]))
    for index, end in zip((0, prototype.order), ends, strict=True):
        if end >= 1.0:
            raise NetworkError("coupling", index, "infinite")
    inner = bandwidth * slope / np.sqrt(g[1:-2] * g[2:-1])
    outer = ends / np.sqrt(1.0 - ends**2)
    couplings = np.concatenate([outer[:1], inner, outer[1:]])
    loading = np.concatenate([outer[:1] / (1.0 + outer[:1] ** 2), inner, outer[1:] / (1.0 + outer[1:] ** 2)])
    network = Network(tuple(couplings.tolist()), tuple((slope - loading[:-1] - loading[1:]).tolist()), slope)
    network.check()
    return network


def characteristic(couplings: Floats, shunts: Floats, slope: float, x: Floats) -> Floats:
    """Compute Im(S11/S21) of symmetric networks between unit resistances.

    Parameters
    ----------
    couplings : (…, order + 1) float
        Susceptances at x = 1.
    shunts : (…, order) float
        Susceptances at x = 1.
    slope : float
        b.
    x : (point,) float
        f/f0.

    Returns
    -------
    (…, point) float
        K/j; the real part of S11/S21 is zero where the network is symmetric.

    Notes
    -----
    Ladder recursion from 1 V and 1 A at the load. Without loss the current at the load and the voltage at the load
    each set up a real chain of their own, which halves the work against complex numbers.
    """
    reactance = 1.0 / (couplings[..., None] * x)
    susceptance = shunts[..., None] * x - slope / x
    voltage = np.zeros((2, *np.broadcast_shapes(reactance.shape[:-2], ()), x.size))
    current = np.zeros_like(voltage)
    voltage[0] = 1.0  # the real part of V, with the imaginary part of I
    current[1] = 1.0  # the real part of I, with minus the imaginary part of V
    for position in range(shunts.shape[-1], -1, -1):
        voltage += current * reactance[..., position, :]
        if position:
            current += susceptance[..., position - 1, :] * voltage
    return np.asarray(-0.5 * (voltage[1] + current[0]))
