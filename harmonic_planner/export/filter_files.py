"""Every file of one stage's filter that another program reads: netlist, bench deck, Touchstone."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from harmonic_planner.export.netlist import bench_deck, subcircuit
from harmonic_planner.export.touchstone import frequencies_hz, touchstone
from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.circuit import Circuit, CircuitError
from harmonic_planner.parts.kits import Kit

FOLDER = "filters"
BEYOND = 2.0
"""How far the sweep reaches beyond the lowest and the highest line, as a ratio."""


@dataclass(frozen=True)
class FilterNames:
    """Names of a filter's files, relative to the plan's folder."""

    netlist: str
    bench: str
    touchstone: str


def filter_names(stem: str) -> FilterNames:
    """Name a filter's files.

    Parameters
    ----------
    stem : str
        As `names.stage_stem` makes it.

    Returns
    -------
    FilterNames
        For instance ``filters/01_first_doubler.cir``.
    """
    return FilterNames(f"{FOLDER}/{stem}.cir", f"{FOLDER}/{stem}_bench.cir", f"{FOLDER}/{stem}.s2p")


def filter_files(
    stem: str,
    title: str,
    circuit: Circuit,
    kit: Kit,
    *,
    carrier_hz: tuple[float, float],
    passband_hz: tuple[float, float],
    lines_hz: Mapping[Fraction, tuple[float, float]],
) -> dict[str, str]:
    """Write a filter's files.

    Parameters
    ----------
    stem : str
        As `names.stage_stem` makes it.
    title : str
        What the filter is, in the user's words.
    circuit : Circuit
        A ladder between equal resistances, with the values of its parts.
    kit : Kit
        Losses and strays.
    carrier_hz : tuple of float
        Span of the carrier [Hz]; the netlist's losses are those at its geometric middle.
    passband_hz : tuple of float
        Edges of the filter's band, which the Touchstone file looks at closely [Hz].
    lines_hz : mapping of Fraction to tuple of float
        Span of every line of the requirement [Hz].

    Returns
    -------
    dict of str to str
        File name (`filter_names`) -> content. The Touchstone file has each frequency's own losses.

    Raises
    ------
    CircuitError
        Where the circuit is not a ladder, or ends in another resistance than it starts from.
    PlannerError
        For a stem that `names.stage_stem` does not make, or frequencies that are not above zero.
    """
    if circuit.source_ohm != circuit.load_ohm:
        raise CircuitError(
            f"{circuit.topology}: a Touchstone file has one resistance for both ports, not "
            f"{circuit.source_ohm:.6g} ohm and {circuit.load_ohm:.6g} ohm"
        )
    names = filter_names(stem)
    edges = [edge for span in (carrier_hz, *lines_hz.values()) for edge in span]
    sweep_hz = (min(edges) / BEYOND, max(edges) * BEYOND)
    frequency = frequencies_hz(carrier_hz, lines_hz.values(), passband_hz=passband_hz, sweep_hz=sweep_hz)
    forward, backward = (sweep_built(c, frequency, kit=kit) for c in (circuit, circuit.reversed()))
    comments = (
        (f"Filter {stem}", title),
        (circuit.topology, "as built, losses of each frequency"),
        (f"Kit {kit.name}", kit.title),
    )
    return {
        names.netlist: subcircuit(stem, title, circuit, kit, at_hz=math.sqrt(math.prod(carrier_hz))),
        names.bench: bench_deck(stem, title, circuit, carrier_hz=carrier_hz, lines_hz=lines_hz, sweep_hz=sweep_hz),
        names.touchstone: touchstone(forward, backward, circuit.source_ohm, comments=comments),
    }
