"""A filter as built as a netlist: a plain subcircuit, and a deck that measures it.

The subcircuit has resistors, inductors and capacitors only, so that any circuit simulator takes it. The deck is written
for ngspice, whose ``-b`` runs it as it stands.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Mapping
from fractions import Fraction

from harmonic_planner.export.comments import comment_text
from harmonic_planner.filters.circuit import INPUT, OUTPUT, Circuit
from harmonic_planner.filters.strays import Primitive, primitives
from harmonic_planner.model import PlannerError, line_text
from harmonic_planner.parts.kits import Kit

THROUGH_OHM = 1e-6
"""Joins input and output where no part stands between them; a subcircuit has two ports even then."""
LEAK_OHM = 1e12
"""From every node of the deck to ground, so that nodes between capacitors have a direct voltage."""
SPAN_POINTS = 41
"""Frequencies at which the deck looks at each line's span, both ends with it."""

_NAME = re.compile(r"[A-Za-z0-9_]+")
_STEM = re.compile(r"[a-z0-9_]+")


def subcircuit(name: str, title: str, circuit: Circuit, kit: Kit, *, at_hz: float) -> str:
    """Write a filter as built as a subcircuit.

    Parameters
    ----------
    name : str
        The stem of the stage's files, as `names.stage_stem` makes it: the subcircuit is ``f`` with the stem.
    title : str
        What the filter is, in the user's words.
    circuit : Circuit
        Values of its parts.
    kit : Kit
        Losses and strays.
    at_hz : float
        The carrier, at which losses are taken [Hz].

    Returns
    -------
    str
        One ``.subckt`` with ports ``in`` and ``out``, ground 0, one resistor, inductor or capacitor a line, values in
        ohm, henry and farad with 12 significant digits. The same circuit gives the same bytes.

    Raises
    ------
    PlannerError
        For a name that is not a stem, a node or part whose name a simulator would not take for one, or a frequency that
        is not above zero.
    """
    model = subcircuit_name(name)
    parts = primitives(circuit, kit, at_hz=at_hz)
    # Nothing is soldered to a wire: the joint is not a part of the circuit and gets no pads.
    joint = []
    if circuit.output != OUTPUT:
        if OUTPUT in {node.lower() for part in parts for node in part.nodes}:
            raise PlannerError(f"{circuit.topology}: node {OUTPUT!r} is not the output, which is {circuit.output!r}")
        joint = [Primitive("R_through", "R", (circuit.output, OUTPUT), THROUGH_OHM, "part", None)]
    lines = [
        f"* Filter {name}: {comment_text(title)}",
        f"* {comment_text(circuit.topology)} between {circuit.source_ohm:.6g} ohm and {circuit.load_ohm:.6g} ohm, "
        f"kit {comment_text(kit.name)}: {comment_text(kit.title)}",
        "* As built: parts with their losses and strays, pads and vias of the board. Values in ohm, henry and farad.",
        f"* Resistances are frozen: what the kit's parts lose at {number(at_hz)} Hz stands for all frequencies.",
        "* L1: the part; R_L1: its loss; C_L1: its self-resonance; L_L1: its mounting, and via where it is shunt.",
        "* C_node_pads: pads on a node; L_node_via: what the vias of its shunt parts have in common.",
        f".subckt {model} {INPUT} {OUTPUT}",
        *(_line(part) for part in (*parts, *joint)),
        f".ends {model}",
    ]
    return "\n".join(lines) + "\n"


def bench_deck(
    name: str,
    title: str,
    circuit: Circuit,
    *,
    carrier_hz: tuple[float, float],
    lines_hz: Mapping[Fraction, tuple[float, float]],
    sweep_hz: tuple[float, float],
    points: int = 1001,
) -> str:
    """Write a deck that measures a filter's subcircuit between its source and load.

    Parameters
    ----------
    name : str
        The stem given to `subcircuit`; the deck includes ``<name>.cir`` from its own folder.
    title : str
        What the filter is, in the user's words.
    circuit : Circuit
        The filter, for its source and load.
    carrier_hz : tuple of float
        Span of the carrier [Hz].
    lines_hz : mapping of Fraction to tuple of float
        Span of every line of the requirement [Hz].
    sweep_hz : tuple of float
        Ends of the sweep [Hz].
    points : int
        About how many frequencies the sweep has, equally spaced in the logarithm.

    Returns
    -------
    str
        A deck for ``ngspice -b``: it prints |S21| in dB over the sweep, then a line for the carrier and for each line:
        both ends of its span, |S21| there, and the least and the largest |S21| within.

    Raises
    ------
    PlannerError
        For a name that is not a stem, or frequencies that are not above zero and in order.

    Notes
    -----
    The source has 2 sqrt(R_S/R_L) volts, so that the voltage on the load is S21 = 2 V_L/V_S sqrt(R_S/R_L).
    """
    model = subcircuit_name(name)
    spans = [("carrier", carrier_hz), *((f"line {line_text(line)}", span) for line, span in lines_hz.items())]
    for what, (low, high) in (*spans, ("sweep", sweep_hz)):
        if not 0 < low <= high < math.inf:
            raise PlannerError(f"{what}: {low!r} to {high!r} Hz must be finite, above zero and in order")
    if not sweep_hz[0] < sweep_hz[1] or points < 2:
        raise PlannerError(f"sweep: needs two frequencies or more, not {points} from {sweep_hz[0]!r} Hz on")
    per_decade = math.ceil((points - 1) / math.log10(sweep_hz[1] / sweep_hz[0]))
    lines = [
        f"* Bench of filter {name}: {comment_text(title)}",
        "* Run it with: ngspice -b; it prints 20 log10 |S21| between the resistances of source and load.",
        f".include {name}.cir",
        f".option rshunt={number(LEAK_OHM)}",
        "* The voltage on the load is S21: the source has 2 sqrt(Rs/Rl) volts.",
        f"Vs emf 0 dc 0 ac {number(2.0 * math.sqrt(circuit.source_ohm / circuit.load_ohm))}",
        f"Rs emf {INPUT} {number(circuit.source_ohm)}",
        f"Rl {OUTPUT} 0 {number(circuit.load_ohm)}",
        f"X1 {INPUT} {OUTPUT} {model}",
        f".ac dec {per_decade} {number(sweep_hz[0])} {number(sweep_hz[1])}",
        ".control",
        "set numdgt=9",
        "set nobreak",
        "run",
        f"let s21_db = vdb({OUTPUT})",
        "print s21_db",
        *(text for what, span in spans for text in _measure(what, span)),
        "if $?batchmode",
        "  quit",
        "end",
        ".endc",
        ".end",
    ]
    return "\n".join(lines) + "\n"


def subcircuit_name(name: str) -> str:
    """Return the name of a filter's subcircuit; PlannerError unless `name` is a stem of a to z, 0 to 9 and _."""
    if not _STEM.fullmatch(name):
        raise PlannerError(f"name = {name!r}: a netlist's name has a to z, 0 to 9 and _ only")
    return f"f{name}"


def number(value: float) -> str:
    """Write a value with 12 significant digits and an exponent, which every simulator reads alike.

    Examples
    --------
    >>> number(127.0e-9)
    '1.27000000000e-07'
    """
    return f"{value:.11e}"


def _line(part: Primitive) -> str:
    for word in (part.name, *part.nodes):
        if not _NAME.fullmatch(word):
            raise PlannerError(f"{word!r}: a part or node of a netlist has letters, digits and _ only in its name")
    return f"{part.name} {part.nodes[0]} {part.nodes[1]} {number(part.value)}"


def _measure(what: str, span_hz: tuple[float, float]) -> Iterator[str]:
    """Yield the commands that look at one span; of a single frequency the simulator makes scalars, not vectors."""
    low, high = span_hz
    single = high - low < 1e-9 * high
    yield f"ac lin {1 if single else SPAN_POINTS} {number(low)} {number(high)}"
    yield f"let s21_db = vdb({OUTPUT})"
    for variable, vector, scalar in (
        ("at_low", "s21_db[0]", "s21_db"),
        ("at_high", f"s21_db[{SPAN_POINTS - 1}]", "s21_db"),
        ("least", "vecmin(s21_db)", "s21_db"),
        ("largest", "vecmax(s21_db)", "s21_db"),
    ):
        yield f"let {variable} = {scalar if single else vector}"
    yield (
        f'echo "{what}: {number(low)} Hz $&at_low dB, {number(high)} Hz $&at_high dB, '
        f'least $&least dB, largest $&largest dB"'
    )
