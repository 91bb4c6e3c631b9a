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
"""How far the sweep reaches beyond the lowest and the highest line of the requirement, as a ratio."""
LEAST_POINTS = 401
WIDEST_STEP = 0.004
"""Largest ratio, less one, between neighbouring frequencies: what is read between them is then within 0.05 dB."""
BEYOND_PRESENT = 1.25
"""The same beyond any line that is there: as far as the largest drift moves a filter."""


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
    present_hz: tuple[float, float] | None = None,
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
    present_hz : tuple of float, optional
        From the lowest to the highest line that reaches the filter [Hz]: the Touchstone file covers them all, drift and
        more, so that a budget can be made of it.

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
    whole_hz = sweep_hz
    if present_hz is not None:
        low, high = present_hz
        whole_hz = (min(sweep_hz[0], low / BEYOND_PRESENT), max(sweep_hz[1], high * BEYOND_PRESENT))
    points = max(LEAST_POINTS, math.ceil(math.log(whole_hz[1] / whole_hz[0]) / WIDEST_STEP) + 1)
    frequency = frequencies_hz(carrier_hz, lines_hz.values(), passband_hz=passband_hz, sweep_hz=whole_hz, points=points)
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
