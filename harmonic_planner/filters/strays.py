"""What a circuit is once it is soldered: losses and strays of its parts and of the board, in one place.

Everything that speaks of a circuit as built takes its strays from here.

===================  =================================================================================================
inductor             L in series with R(f) = ωL/Q(f); across both the capacitance of its self-resonance; then in series
                     its mounting inductance, and its via where it goes to ground
capacitor            C in series with its resistance and its mounted inductance, and its via where it goes to ground
shunt parts          two or more on one node share a pad at ground: beyond their own vias one common inductance
pads                 each end of a part on a live node adds one pad's capacitance from that node to ground
===================  =================================================================================================

Notes
-----
Coupling between neighbouring inductors, the length of traces between parts and the package's box modes are not in it.
Every stray is an arm of its own to ground or in series with its part, so that a ladder stays a ladder.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from harmonic_planner.filters.circuit import GROUND, INPUT, Circuit, Element
from harmonic_planner.model import PlannerError
from harmonic_planner.parts.kits import Kit

Floats = NDArray[np.float64]
Complexes = NDArray[np.complexfloating]
Role = Literal["part", "loss", "across", "mounting", "shared via", "pads"]


@dataclass(frozen=True)
class Primitive:
    """One ideal resistor, inductor or capacitor between two nodes; `value` in ohm, henry or farad."""

    name: str
    """Starts with its kind: ``L1`` and ``C12`` are the parts themselves, ``R_L1`` the loss of L1."""
    kind: Literal["R", "L", "C"]
    nodes: tuple[str, str]
    value: float
    role: Role
    element: str | None
    """Ref of the element it belongs to; None for what belongs to a node."""


@dataclass(frozen=True)
class Station:
    """One node on the way from source to load, with what hangs on it and what leads on."""

    node: str
    shunt: tuple[int, ...]
    """Positions in the circuit's elements, from the node to ground."""
    onward: tuple[int, ...]
    """Positions of the elements in parallel to the next node; empty at the load."""
    pads: int
    """Ends of parts on this node."""


def stations(circuit: Circuit) -> tuple[Station, ...]:
    """Return a ladder's nodes from source to load.

    Parameters
    ----------
    circuit : Circuit
        A ladder.

    Returns
    -------
    tuple of Station
        The first is the input, the last the output.

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder.
    """
    found: list[Station] = []
    node = INPUT
    shunt: tuple[int, ...] = ()
    for arm in circuit.arms():
        if arm.placement == "shunt":
            shunt = arm.elements
            continue
        found.append(Station(node, shunt, arm.elements, pad_count(circuit, node)))
        (node,) = set(circuit.elements[arm.elements[0]].nodes) - {node}
        shunt = ()
    found.append(Station(node, shunt, (), pad_count(circuit, node)))
    return tuple(found)


def pad_count(circuit: Circuit, node: str) -> int:
    """Return how many ends of parts are soldered to a node."""
    return sum(node in element.nodes for element in circuit.elements)


def shunt_parts(circuit: Circuit, node: str) -> tuple[Element, ...]:
    """Return the parts from a node to ground; two or more of them share a pad there."""
    return tuple(element for element in circuit.elements if set(element.nodes) == {node, GROUND})


def series_inductance_h(element: Element, kit: Kit) -> float:
    """Return the inductance in series with a part [H]: mounting (a capacitor's own with it), and via of a shunt one."""
    own = kit.inductor.mounting_h if element.kind == "L" else kit.capacitor.inductance_h
    return own + (kit.board.via_h if element.placement == "shunt" else 0.0)


def across_f(element: Element, kit: Kit) -> float:
    """Return the capacitance across a part [F], that of an inductor's self-resonance; a capacitor has none."""
    return kit.inductor.parallel_capacitance_f(element.value) if element.kind == "L" else 0.0


def resistance_ohm(element: Element, kit: Kit, frequency_hz: float | Floats) -> Floats:
    """Return a part's series resistance.

    Parameters
    ----------
    element : Element
        The part.
    kit : Kit
        Its kit.
    frequency_hz : float or ndarray
        Any shape, above zero [Hz].

    Returns
    -------
    ndarray
        Same shape [ohm]: ωL/Q(f) of an inductor's winding, dielectric and conductor loss of a capacitor.
    """
    frequency = np.asarray(frequency_hz, dtype=np.float64)
    if element.kind == "L":
        return np.asarray(2 * np.pi * frequency * element.value / kit.inductor.q(frequency))
    return kit.capacitor.resistance_ohm(element.value, frequency)


def impedance_ohm(element: Element, kit: Kit, frequency_hz: Floats, *, frozen_at_hz: float | None = None) -> Complexes:
    """Return the impedance of a part as mounted, its own via included and what it shares with others left out.

    Parameters
    ----------
    element : Element
        The part.
    kit : Kit
        Its kit and board.
    frequency_hz : ndarray
        (frequency,), above zero [Hz].
    frozen_at_hz : float, optional
        Takes the resistance at this frequency for all; without it at each.

    Returns
    -------
    ndarray
        (frequency,) complex [ohm].
    """
    s = 2j * np.pi * frequency_hz
    resistance = resistance_ohm(element, kit, frequency_hz if frozen_at_hz is None else frozen_at_hz)
    mounting = s * series_inductance_h(element, kit)
    if element.kind == "C":
        return np.asarray(1 / (s * element.value) + resistance + mounting)
    winding = s * element.value + resistance
    return np.asarray(winding / (1 + s * across_f(element, kit) * winding) + mounting)


def primitives(circuit: Circuit, kit: Kit, *, at_hz: float) -> tuple[Primitive, ...]:
    """Flatten a circuit as built into ideal resistors, inductors and capacitors.

    Parameters
    ----------
    circuit : Circuit
        Values of the parts; a ladder or not.
    kit : Kit
        Losses and strays.
    at_hz : float
        Frequency at which losses are taken, above zero [Hz].

    Returns
    -------
    tuple of Primitive
        Element by element in the circuit's order, then node by node. What is zero is left out. Nodes of the circuit
        keep their names; an element's inner nodes are its ref in lower case with ``_1`` and so on.

    Raises
    ------
    PlannerError
        For a frequency that is not above zero.
    """
    if not 0 < at_hz < np.inf:
        raise PlannerError(f"at_hz = {at_hz!r} must be a finite frequency above zero")
    names = _Names(circuit)
    found: list[Primitive] = []
    lower = {}
    for node in circuit.nodes:
        together = len(shunt_parts(circuit, node)) > 1 and kit.board.shared_via_h > 0
        lower[node] = names.node(f"{node}_via") if together else GROUND
    for element in circuit.elements:
        found += _of_element(element, kit, at_hz, lower, names)
    for node in circuit.nodes:
        if lower[node] != GROUND:
            value = kit.board.shared_via_h
            found.append(Primitive(names.part(f"L_{node}_via"), "L", (lower[node], GROUND), value, "shared via", None))
        pads_f = pad_count(circuit, node) * kit.board.pad_f
        if pads_f > 0:
            found.append(Primitive(names.part(f"C_{node}_pads"), "C", (node, GROUND), pads_f, "pads", None))
    return tuple(found)


class _Names:
    """Hands out names that nothing else has, capitals not counted, as circuit simulators read them."""

    def __init__(self, circuit: Circuit) -> None:
        self._nodes = {GROUND, *(node.lower() for node in circuit.nodes)}
        self._parts = {element.ref.lower() for element in circuit.elements}

    def node(self, wanted: str) -> str:
        return self._free(wanted.lower(), self._nodes)

    def part(self, wanted: str) -> str:
        return self._free(wanted, self._parts)

    @staticmethod
    def _free(wanted: str, taken: set[str]) -> str:
        while wanted.lower() in taken:
            wanted += "x"
        taken.add(wanted.lower())
        return wanted


def _of_element(element: Element, kit: Kit, at_hz: float, lower: dict[str, str], names: _Names) -> Iterator[Primitive]:
    """Yield an element's primitives from its live end (or first node) to the other: part, loss, across, mounting."""
    ref = element.ref
    start, end = element.nodes
    if element.placement == "shunt":
        start = element.live_nodes[0]
        end = lower[start]
    mounting = series_inductance_h(element, kit)
    loss = float(resistance_ohm(element, kit, at_hz))
    after_loss = names.node(f"{ref}_2") if mounting > 0 else end
    after_part = names.node(f"{ref}_1") if loss > 0 else after_loss
    name = ref if ref.upper().startswith(element.kind) else names.part(f"{element.kind}_{ref}")
    yield Primitive(name, element.kind, (start, after_part), element.value, "part", ref)
    if loss > 0:
        yield Primitive(names.part(f"R_{ref}"), "R", (after_part, after_loss), loss, "loss", ref)
    across = across_f(element, kit)
    if across > 0:
        yield Primitive(names.part(f"C_{ref}"), "C", (start, after_loss), across, "across", ref)
    if mounting > 0:
        yield Primitive(names.part(f"L_{ref}"), "L", (after_loss, end), mounting, "mounting", ref)
