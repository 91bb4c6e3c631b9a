"""Names for the strays that stand in the way: of one element's value, or of the response as a whole.

A value that would have to be negative is exceeded by the strays on the spot. Where all values are possible and the
response still is not, each kind of stray is taken away in turn; the kind whose absence helps most is named, where it is
largest against what it stands beside.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

from harmonic_planner.filters.circuit import INPUT, Circuit, Element
from harmonic_planner.filters.strays import across_f, pad_count, series_inductance_h, shunt_parts
from harmonic_planner.parts.kits import Kit
from harmonic_planner.parts.quantities import readable

LEAST_TOLD_F = 1e-15
"""A smaller capacitance is not worth a word."""


def of_value(circuit: Circuit, kit: Kit, element: Element) -> str:
    """Say which strays exceed what is wanted of an element.

    Parameters
    ----------
    circuit : Circuit
        Ideal values.
    kit : Kit
        The strays.
    element : Element
        One of the circuit's, whose value would have to be negative.

    Returns
    -------
    str
        ``0.35 pF of pads stand on its node``.
    """
    if element.kind == "L":
        what = "mounting and via" if element.placement == "shunt" else "mounting"
        words = [f"{readable(series_inductance_h(element, kit), 'H')} of {what} are in series with it"]
        across = across_f(element, kit)
        words += [f"{readable(across, 'F')} across it"] if across > LEAST_TOLD_F else []
    else:
        pads_f = kit.board.pad_f * sum(pad_count(circuit, node) for node in element.live_nodes)
        where = "its node" if len(element.live_nodes) == 1 else "its nodes"
        words = [f"{readable(pads_f, 'F')} of pads stand on {where}"] if pads_f > 0 else []
        beside = [e for e in circuit.elements if e.kind == "L" and set(e.live_nodes) & set(element.live_nodes)]
        coils_f = sum(across_f(inductor, kit) for inductor in beside)
        words += [f"{readable(coils_f, 'F')} across the inductors beside it"] if coils_f > LEAST_TOLD_F else []
        series_h = series_inductance_h(element, kit)
        if not words and series_h > 0:
            words = [f"{readable(series_h, 'H')} are in series with it"]
    return " and ".join(words)


def of_response(circuit: Circuit, kit: Kit, cost_db: Callable[[Kit], float]) -> str:
    """Say which stray keeps the response from the ideal one.

    Parameters
    ----------
    circuit : Circuit
        Ideal values.
    kit : Kit
        The strays.
    cost_db : callable
        Kit -> what is left of the misfit after absorbing that kit's strays [dB].

    Returns
    -------
    str
        ``0.24 pF of pads between L2 and C2 cannot be absorbed``.
    """
    inductor, capacitor, board = kit.inductor, kit.capacitor, kit.board
    without = {
        _pads: replace(kit, board=replace(board, pad_f=0.0)),
        _series: replace(
            kit,
            inductor=replace(inductor, mounting_h=0.0),
            capacitor=replace(capacitor, inductance_h=0.0),
            board=replace(board, via_h=0.0),
        ),
        _across: replace(kit, inductor=replace(inductor, self_resonance_reference_hz=1e30)),
        _shared: replace(kit, board=replace(board, shared_via_h=0.0)),
    }
    words = {name: name(circuit, kit) for name in without}
    costs = {name: cost_db(other) for name, other in without.items() if words[name]}
    return f"{words[min(costs, key=costs.__getitem__)]} cannot be absorbed"


def _pads(circuit: Circuit, kit: Kit) -> str:
    if kit.board.pad_f == 0:
        return ""

    def pads_f(node: str) -> float:
        return pad_count(circuit, node) * kit.board.pad_f

    def share(node: str) -> float:
        beside_f = sum(e.value for e in circuit.elements if e.kind == "C" and node in e.nodes)
        port_ohm = {INPUT: circuit.source_ohm, circuit.output: circuit.load_ohm}.get(node)
        port_f = 0.0 if port_ohm is None else 1 / (2 * math.pi * circuit.centre_hz * port_ohm)
        return pads_f(node) / (beside_f + port_f) if beside_f + port_f > 0 else math.inf

    node = max(circuit.nodes, key=share)
    beside = [element.ref for element in circuit.elements if node in element.nodes]
    return f"{readable(pads_f(node), 'F')} of pads on the node of {_listed(beside)}"


def _series(circuit: Circuit, kit: Kit) -> str:
    omega2 = (2 * math.pi * circuit.centre_hz) ** 2

    def share(element: Element) -> float:
        series_h = series_inductance_h(element, kit)
        return series_h / element.value if element.kind == "L" else series_h * element.value * omega2

    element = max(circuit.elements, key=share)
    series_h = series_inductance_h(element, kit)
    what = "mounting and via" if element.placement == "shunt" else "mounting"
    return f"{readable(series_h, 'H')} of {what} in series with {element.ref}" if share(element) > 0 else ""


def _across(circuit: Circuit, kit: Kit) -> str:
    inductors = [element for element in circuit.elements if element.kind == "L"]
    if not inductors:
        return ""
    lowest = max(inductors, key=lambda element: element.value * across_f(element, kit))
    return f"{readable(across_f(lowest, kit), 'F')} across {lowest.ref}"


def _shared(circuit: Circuit, kit: Kit) -> str:
    groups = [parts for node in circuit.nodes if len(parts := shunt_parts(circuit, node)) > 1]
    if not groups or kit.board.shared_via_h == 0:
        return ""
    largest = max(groups, key=lambda parts: sum(part.value for part in parts if part.kind == "C"))
    return f"{readable(kit.board.shared_via_h, 'H')} of via common to {_listed([part.ref for part in largest])}"


def _listed(refs: list[str]) -> str:
    return " and ".join([", ".join(refs[:-1]), refs[-1]] if len(refs) > 1 else refs)
