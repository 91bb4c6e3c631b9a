"""Which way round the L and the C of a series arm stand: nothing to an ideal ladder, much to one with pads.

Pads on the node between the L and the C of a series arm, of susceptance B against the arm's reactance X at resonance,
make the arm an ideal transformer of ratio 1 − BX besides what can be absorbed; turned round, its inverse:

    [1 jX; 0 1] [1 0; jB 1] [1 −jX; 0 1] = [1 − BX, jBX²; jB, 1 + BX]

So arms that alternate (L C … C L … L C) undo each other's transformation, and arms that all stand alike add it up. One
arm alone leaves it, as a mismatch of equal terminations.
"""

from __future__ import annotations

from dataclasses import replace

from harmonic_planner.filters.circuit import Circuit


def turning_arms(circuit: Circuit) -> tuple[int, ...]:
    """Return where two elements in a row are the L and C of a series arm with a node to themselves.

    Parameters
    ----------
    circuit : Circuit
        Any circuit.

    Returns
    -------
    tuple of int
        Positions of each arm's first element.
    """
    found = []
    for place, (first, second) in enumerate(zip(circuit.elements, circuit.elements[1:], strict=False)):
        inner = set(first.nodes) & set(second.nodes)
        alone = all(sum(node in element.nodes for element in circuit.elements) == 2 for node in inner)
        series = first.placement == second.placement == "series"
        if series and first.kind != second.kind and len(inner) == 1 and alone:
            found.append(place)
    return tuple(found)


def turned(circuit: Circuit, place: int) -> Circuit:
    """Return the circuit with two elements in a row changed round.

    Parameters
    ----------
    circuit : Circuit
        Any circuit.
    place : int
        One of `turning_arms`.

    Returns
    -------
    Circuit
        The same nodes and refs, the two elements in each other's place.
    """
    first, second = circuit.elements[place : place + 2]
    (inner,) = set(first.nodes) & set(second.nodes)
    (start,), (end,) = set(first.nodes) - {inner}, set(second.nodes) - {inner}
    elements = list(circuit.elements)
    elements[place] = replace(second, nodes=(start, inner))
    elements[place + 1] = replace(first, nodes=(inner, end))
    return replace(circuit, elements=tuple(elements))


def arrangements(circuit: Circuit) -> tuple[Circuit, ...]:
    """Return the circuit with its series arms alternating, beginning either way.

    Parameters
    ----------
    circuit : Circuit
        Any circuit; its arms may all stand alike.

    Returns
    -------
    tuple of Circuit
        Two, the one that leaves the first arm as it is first; the circuit itself where there are no such arms, or
        where capacitors alone couple them, which take the transformation up by themselves.
    """
    places = turning_arms(circuit)
    if not places or not any(element.kind == "L" and element.placement == "shunt" for element in circuit.elements):
        return (circuit,)
    first_kind = circuit.elements[places[0]].kind
    found = []
    for begins in (first_kind, "L" if first_kind == "C" else "C"):
        arranged = circuit
        for number, place in enumerate(places):
            stands = (circuit.elements[place].kind == begins) == (number % 2 == 0)
            arranged = arranged if stands else turned(arranged, place)
        found.append(arranged)
    return tuple(found)
