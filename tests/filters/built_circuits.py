"""Circuits and kits for tests of what is soldered: random ladders, kits without losses or strays."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
from hypothesis import strategies as st

from harmonic_planner.filters.circuit import Circuit, Element
from harmonic_planner.parts.kits import Kit, kit_names, load_kit

KITS = {name: load_kit(name, Path()) for name in kit_names()}
kits = st.sampled_from(list(KITS.values()))


def without_losses(kit: Kit) -> Kit:
    """The same kit with parts that lose nothing; an inductor's Q is not infinite but beyond what a float can tell."""
    return replace(
        kit,
        inductor=replace(kit.inductor, q_reference=1e30, q_most=1e30),
        capacitor=replace(kit.capacitor, dissipation=0.0, esr_reference_ohm=0.0),
    )


def without_strays(kit: Kit) -> Kit:
    """The same kit with nothing but the parts themselves and their losses."""
    return replace(
        kit,
        inductor=replace(kit.inductor, mounting_h=0.0, self_resonance_reference_hz=1e30),
        capacitor=replace(kit.capacitor, inductance_h=0.0),
        board=replace(kit.board, via_h=0.0, pad_f=0.0, shared_via_h=0.0),
    )


@st.composite
def random_ladders(draw) -> Circuit:
    """Any ladder: up to five nodes, up to three parts in parallel to ground or onward, unequal terminations."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    nodes = ["in", *(f"n{i}" for i in range(1, draw(st.integers(1, 4)))), "out"]
    elements: list[Element] = []

    def part(first: str, second: str) -> None:
        kind = "L" if rng.random() < 0.5 else "C"
        value = 10 ** rng.uniform(-9, -7) if kind == "L" else 10 ** rng.uniform(-12.5, -10.5)
        ends = (first, second) if rng.random() < 0.5 else (second, first)
        elements.append(Element(f"{kind}{len(elements)}", kind, ends, float(value)))  # type: ignore[arg-type]

    for node, after in zip(nodes, [*nodes[1:], None], strict=True):
        for _ in range(rng.integers(0, 4)):
            part(node, "0")
        if after is not None:
            for _ in range(1 + (rng.random() < 0.25)):
                part(node, after)
    return Circuit(
        "random",
        tuple(elements),
        centre_hz=float(10 ** rng.uniform(7.7, 9.4)),
        source_ohm=float(rng.uniform(20, 150)),
        load_ohm=float(rng.uniform(20, 150)),
    )


def around(circuit: Circuit, points: int = 41) -> np.ndarray:
    """Frequencies from a fifth of the centre to six times."""
    return circuit.centre_hz * np.geomspace(0.2, 6.0, points)
