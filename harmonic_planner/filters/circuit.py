"""A filter as a circuit: ordered elements between named nodes, and the ladder form of it.

Node ``0`` is ground; the source drives ``in`` and the load hangs on the output node, normally ``out``.
Element values are SI. The order of the
elements is the order on the board, left to right.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from harmonic_planner.model import Kind, Placement, PlannerError

GROUND = "0"
INPUT = "in"
OUTPUT = "out"


class CircuitError(PlannerError):
    """A circuit that no response can be computed of, or not by the method asked for."""


@dataclass(frozen=True)
class Element:
    """One part between two nodes; `value` in henry or farad."""

    ref: str
    kind: Kind
    nodes: tuple[str, str]
    value: float

    @property
    def placement(self) -> Placement:
        """`shunt` with one end on ground, else `series`."""
        return "shunt" if GROUND in self.nodes else "series"

    @property
    def live_nodes(self) -> tuple[str, ...]:
        """The ends that are not ground."""
        return tuple(node for node in self.nodes if node != GROUND)


@dataclass(frozen=True)
class Arm:
    """Elements in parallel: from a node to ground (`shunt`), or from one node to the next (`series`)."""

    placement: Placement
    elements: tuple[int, ...]
    """Positions in the circuit's elements."""


@dataclass(frozen=True)
class Circuit:
    """A two-port of lumped elements between a source and a load resistance."""

    topology: str
    elements: tuple[Element, ...]
    centre_hz: float
    source_ohm: float
    load_ohm: float
    output: str = OUTPUT
    """Node of the load; the input itself where no series element stands between."""

    def __post_init__(self) -> None:
        for name, value in (
            ("centre_hz", self.centre_hz),
            ("source_ohm", self.source_ohm),
            ("load_ohm", self.load_ohm),
            *((element.ref, element.value) for element in self.elements),
        ):
            if not 0 < value < math.inf:
                raise CircuitError(f"{self.topology}: {name} = {value!r} must be a finite number above zero")
        refs = [element.ref for element in self.elements]
        for ref in refs:
            if refs.count(ref) > 1:
                raise CircuitError(f"{self.topology}: {ref} is used for more than one element")
        for element in self.elements:
            if element.nodes[0] == element.nodes[1]:
                raise CircuitError(f"{self.topology}: {element.ref} has both ends on node {element.nodes[0]}")

    @property
    def nodes(self) -> tuple[str, ...]:
        """Every node but ground: the input first, the output last, between them as the elements come."""
        inner = dict.fromkeys(node for element in self.elements for node in element.live_nodes)
        ends = tuple(dict.fromkeys((INPUT, self.output)))
        return (INPUT, *(node for node in inner if node not in ends), *ends[1:])

    def stranded_nodes(self) -> tuple[str, ...]:
        """Return the nodes without a path to the input or output that avoids ground."""
        reached, grown = {INPUT, self.output}, True
        while grown:
            ends = {n for element in self.elements if reached & set(element.live_nodes) for n in element.live_nodes}
            grown = not ends <= reached
            reached |= ends
        return tuple(node for node in self.nodes if node not in reached)

    def reversed(self) -> Circuit:
        """Return the same circuit driven from its load side, which gives S12 and S22."""
        swap = {INPUT: self.output, self.output: INPUT}
        return replace(
            self,
            elements=tuple(
                replace(element, nodes=(swap.get(a, a), swap.get(b, b)))
                for element in reversed(self.elements)
                for a, b in [element.nodes]
            ),
            source_ohm=self.load_ohm,
            load_ohm=self.source_ohm,
        )

    def arms(self) -> tuple[Arm, ...]:
        """Return the circuit as a ladder, from source to load.

        Returns
        -------
        tuple of Arm
            Shunt and series arms as they come; several series elements in a row are one arm each.

        Raises
        ------
        CircuitError
            Where the circuit is not a ladder: a node that leads to more than one next node, or elements that the path
            from input to output does not meet.
        """
        left = dict(enumerate(self.elements))
        arms: list[Arm] = []
        node = INPUT
        while True:
            here = {place: element for place, element in left.items() if node in element.nodes}
            shunt = tuple(place for place, element in here.items() if element.placement == "shunt")
            series = tuple(place for place, element in here.items() if element.placement == "series")
            if shunt:
                arms.append(Arm("shunt", shunt))
            for place in here:
                del left[place]
            ahead = {end for place in series for end in self.elements[place].nodes if end != node}
            if not ahead:
                break
            if len(ahead) > 1:
                raise CircuitError(f"{self.topology}: not a ladder, node {node} leads to {', '.join(sorted(ahead))}")
            arms.append(Arm("series", series))
            node = ahead.pop()
        if node != self.output or left:
            stray = ", ".join(element.ref for element in left.values()) or f"node {self.output}"
            raise CircuitError(f"{self.topology}: not a ladder, the path from the input does not meet {stray}")
        return tuple(arms)
