"""Whether the elements of a circuit can be bought and placed, or strays would swamp them.

Each element is judged on three counts, the worst of which is its verdict; thresholds are the kit's (memory).

Strays, as a share of the ideal value:

=================  ===================================================================================================
shunt inductor     via and mounting inductance over L
series inductor    mounting inductance over L
shunt capacitor    over C: the pads of all parts on its node, and the capacitance across the inductors beside it
series capacitor   over C: the pads of all parts on each of its nodes that neither a port nor a shunt capacitor holds,
                   as between the L and the C of a series resonator, where the inductor sees them as part of C
=================  ===================================================================================================

Self-resonance, against the centre: an inductor's own; a capacitor's with its mounted inductance, and a shunt one's with
its via. Range: what the kit does not sell is swamped.

Absorbed strays: where nominal values are given, from which strays were taken off, what is left of a stray is its own
tolerance (30 % of it in the shipped kits); range and self-resonance are then those of the nominal value.

Notes
-----
Strays are weighed against single values; how they act together on the response is not seen here. The capacitance of a
series inductor beside a port or a shunt capacitor counts as that node's.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from harmonic_planner.filters.circuit import GROUND, INPUT, Circuit, CircuitError, Element
from harmonic_planner.model import VERDICT_RANK, ElementReport, ElementVerdict
from harmonic_planner.parts.kits import Kit
from harmonic_planner.parts.quantities import readable


def judge(
    circuit: Circuit,
    kit: Kit,
    *,
    centre_hz: float | None = None,
    highest_line_hz: float | None = None,
    nominal: Circuit | None = None,
) -> tuple[ElementReport, ...]:
    """Judge every element of a circuit against a kit.

    Parameters
    ----------
    circuit : Circuit
        Ideal values.
    kit : Kit
        The parts and the board.
    centre_hz : float, optional
        Frequency against which self-resonance and Q are stated [Hz]; the circuit's centre without it.
    highest_line_hz : float, optional
        Highest line the filter must reject [Hz]; a self-resonance below it is named in the reason and leaves the
        verdict as it is.
    nominal : Circuit, optional
        The same elements by ref with the values that are bought, strays absorbed; without it strays are not absorbed
        and nominal values are the ideal ones.

    Returns
    -------
    tuple of ElementReport
        In the circuit's order. `stray_share` is of the ideal value, of what is left where strays are absorbed.
        `reason` names every count that is not `ok`, the worst first, or the numbers that make the element `ok`.

    Raises
    ------
    CircuitError
        Where the nominal circuit lacks an element.
    """
    centre = circuit.centre_hz if centre_hz is None else centre_hz
    bought = {element.ref: element for element in nominal.elements} if nominal is not None else None
    if bought is not None:
        for element in circuit.elements:
            if element.ref not in bought:
                raise CircuitError(f"{circuit.topology}: {element.ref} has no nominal value")
    return tuple(
        _report(circuit, element, kit, centre, highest_line_hz, None if bought is None else bought[element.ref])
        for element in circuit.elements
    )


def worst(reports: Sequence[ElementReport]) -> ElementReport:
    """Return the report with the worst verdict, among equals the one with the largest stray share, the first of those.

    Raises
    ------
    ValueError
        For no reports.
    """
    if not reports:
        raise ValueError("no elements to judge")
    return max(reports, key=lambda report: (VERDICT_RANK[report.verdict], report.stray_share))


@dataclass(frozen=True)
class _Count:
    verdict: ElementVerdict
    words: str
    told: bool = False
    """Whether the words belong in the reason whatever the verdict."""


def _report(
    circuit: Circuit,
    element: Element,
    kit: Kit,
    centre_hz: float,
    highest_line_hz: float | None,
    absorbed: Element | None,
) -> ElementReport:
    inductor = element.kind == "L"
    stray, stray_words = _inductor_stray(element, kit) if inductor else _capacitor_stray(circuit, element, kit)
    left = 1.0 if absorbed is None else kit.thresholds.stray_tolerance
    bought = element if absorbed is None else absorbed
    if inductor:
        resonance_hz = kit.inductor.self_resonance_hz(bought.value)
        q = float(kit.inductor.q(centre_hz))
    else:
        via_h = kit.board.via_h if element.placement == "shunt" else 0.0
        resonance_hz = kit.capacitor.self_resonance_hz(bought.value, via_h)
        q = float(kit.capacitor.q(bought.value, centre_hz))
    counts = sorted(
        (
            _range_count(bought, kit),
            _stray_count(element, kit, stray, stray_words, left),
            _resonance_count(kit, resonance_hz, centre_hz, highest_line_hz),
        ),
        key=lambda count: -VERDICT_RANK[count.verdict],
    )
    verdict = counts[0].verdict
    words = [
        count.words for count in counts if count.words and (count.verdict != "ok" or verdict == "ok" or count.told)
    ]
    return ElementReport(
        ref=element.ref,
        kind=element.kind,
        placement=element.placement,
        ideal=element.value,
        nominal=bought.value,
        unit="H" if inductor else "F",
        q=q,
        self_resonance_hz=resonance_hz,
        stray_share=left * stray / element.value,
        verdict=verdict,
        reason="; ".join(words),
    )


def _inductor_stray(element: Element, kit: Kit) -> tuple[float, str]:
    """Return the inductance in series with an inductor [H] and what it is."""
    if element.placement == "shunt":
        return kit.board.via_h + kit.inductor.mounting_h, "via and mounting"
    return kit.inductor.mounting_h, "mounting"


def _capacitor_stray(circuit: Circuit, element: Element, kit: Kit) -> tuple[float, str]:
    """Return the capacitance that adds to a capacitor [F] and what it is."""
    if element.placement == "shunt":
        (node,) = element.live_nodes
        across = sum(
            kit.inductor.parallel_capacitance_f(other.value)
            for other in circuit.elements
            if other.kind == "L" and set(other.nodes) == {node, GROUND}
        )
        return _pads(circuit, node) * kit.board.pad_f + across, "pads and inductor capacitance"
    held = {other.live_nodes[0] for other in circuit.elements if other.kind == "C" and other.placement == "shunt"}
    held |= {INPUT, circuit.output}
    pads = sum(_pads(circuit, node) for node in element.live_nodes if node not in held)
    return pads * kit.board.pad_f, "pads"


def _pads(circuit: Circuit, node: str) -> int:
    return sum(node in element.nodes for element in circuit.elements)


def _range_count(element: Element, kit: Kit) -> _Count:
    if element.kind == "L":
        smallest, largest, unit = kit.inductor.smallest_h, kit.inductor.largest_h, "H"
    else:
        smallest, largest, unit = kit.capacitor.smallest_f, kit.capacitor.largest_f, "F"
    value = element.value
    if smallest <= value <= largest:
        return _Count("ok", "")
    word, end = ("below", smallest) if value < smallest else ("above", largest)
    return _Count("swamped", f"not available: {_text(value, unit)} is {word} the kit's {_text(end, unit)}")


def _stray_count(element: Element, kit: Kit, stray: float, words: str, left: float) -> _Count:
    """Judge the part of a stray that is left, as a fraction of the whole; the words give both."""
    share = left * stray / element.value
    limits = kit.thresholds
    verdict: ElementVerdict = "swamped"
    if share <= limits.stray_ok:
        verdict = "ok"
    elif share <= limits.stray_marginal:
        verdict = "marginal"
    unit = "H" if element.kind == "L" else "F"
    if stray == 0:
        return _Count(verdict, "no strays counted")
    what = f"{_text(stray, unit)} of {words} in {_text(element.value, unit)}"
    if left == 1:
        return _Count(verdict, f"strays {share * 100:.3g} % ({what})")
    whole = stray / element.value * 100
    return _Count(verdict, f"strays {whole:.3g} % ({what}), absorbed to {share * 100:.3g} %")


def _resonance_count(kit: Kit, resonance_hz: float, centre_hz: float, highest_line_hz: float | None) -> _Count:
    ratio = resonance_hz / centre_hz
    verdict: ElementVerdict = "swamped"
    if ratio >= kit.thresholds.resonance_ok:
        verdict = "ok"
    elif ratio >= kit.thresholds.resonance_marginal:
        verdict = "marginal"
    if math.isinf(ratio):
        return _Count(verdict, "")
    words = f"self-resonance {readable(resonance_hz, 'Hz')} is {ratio:.3g} × the centre"
    if highest_line_hz is None or resonance_hz >= highest_line_hz:
        return _Count(verdict, words)
    return _Count(verdict, f"{words}, below the highest line to reject, {readable(highest_line_hz, 'Hz')}", told=True)


def _text(value: float, unit: str) -> str:
    return readable(value, "H" if unit == "H" else "F")
