"""Topologies: one module each, listed once here."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping
from types import MappingProxyType

from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.topologies import (
    capacitive,
    high_pass,
    inductive,
    ladder_series,
    ladder_shunt,
    low_pass,
    series_capacitive,
)
from harmonic_planner.filters.topologies.base import Topology, TopologyError, UnequalTerminationError
from harmonic_planner.physics.prototypes import Prototype

__all__ = ["ALIASES", "REGISTRY", "Topology", "TopologyError", "UnequalTerminationError", "design", "expand"]

REGISTRY: Mapping[str, Topology] = MappingProxyType(
    {
        module.TOPOLOGY.name: module.TOPOLOGY
        for module in (
            ladder_series,
            ladder_shunt,
            capacitive,
            inductive,
            series_capacitive,
            low_pass,
            high_pass,
        )
    }
)
"""Name -> topology, in the order in which they are tried."""

ALIASES: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {
        "ladder": (ladder_series.NAME, ladder_shunt.NAME),
        "auto": tuple(REGISTRY),
    }
)
"""Name that stands for several topologies -> those."""


def expand(names: Iterable[str]) -> tuple[str, ...]:
    """Resolve aliases to topologies.

    Parameters
    ----------
    names : iterable of str
        Topologies and aliases.

    Returns
    -------
    tuple of str
        Names in `REGISTRY`, each once, in the order given.

    Raises
    ------
    TopologyError
        For a name that is neither.

    Examples
    --------
    >>> expand(["ladder-shunt", "ladder"])
    ('ladder-shunt', 'ladder-series')
    """
    resolved: dict[str, None] = {}
    for name in names:
        if name not in REGISTRY and name not in ALIASES:
            allowed = [*REGISTRY, *ALIASES]
            close = difflib.get_close_matches(name, allowed, n=1, cutoff=0.0)
            raise TopologyError(f"topology = {name!r} is not known; nearest: {close[0]}; allowed: {', '.join(allowed)}")
        resolved |= dict.fromkeys(ALIASES.get(name, (name,)))
    return tuple(resolved)


def design(
    name: str,
    prototype: Prototype,
    *,
    centre_hz: float,
    bandwidth: float,
    impedance_ohm: float,
    resonator: float | None = None,
) -> Circuit:
    """Design one topology's ideal circuit from a prototype.

    Parameters
    ----------
    name : str
        A name in `REGISTRY`; an alias is not one circuit and is refused.
    prototype : Prototype
        Low-pass prototype.
    centre_hz : float
        Centre [Hz].
    bandwidth : float
        Bandwidth as a fraction of the centre.
    impedance_ohm : float
        Source and load [ohm].
    resonator : float, optional
        Free inductance [H] or capacitance [F], where the topology has one.

    Returns
    -------
    Circuit
        Ideal values.

    Raises
    ------
    TopologyError
        For an unknown name, or a prototype the topology cannot realise, with the reason.
    """
    if name not in REGISTRY:
        raise TopologyError(f"topology = {name!r} is not one circuit; allowed: {', '.join(REGISTRY)}")
    return REGISTRY[name].design(
        prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=impedance_ohm, resonator=resonator
    )
