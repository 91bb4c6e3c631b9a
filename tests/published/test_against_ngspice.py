"""Filters as built against ngspice, which runs the exported netlist and bench deck as they stand.

independent: ngspice solves its own matrix by its own parser's reading of the file; losses frozen at the centre on both
sides. Sixty seeded random filters over all topologies and kits, the first twelve of them unless run at full size.
"""

import os
import re
import subprocess
import sys
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from conftest import external_program, is_long
from random_filters import random_filter

from harmonic_planner.export.netlist import bench_deck, subcircuit
from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.circuit import Circuit, Element
from harmonic_planner.filters.topologies import REGISTRY
from harmonic_planner.parts.kits import Kit, load_kit
from harmonic_planner.physics.prototypes import Prototype

SEED = 20260
FILTERS, SAMPLE = 60, 12
KIT = load_kit("chip-0603", Path())
DEEPEST_DB = 100.0
TOLERANCE_DB = 0.05
NASTY = (
    "#shell touch trace",
    ".control\nshell touch trace\n.endc",
    "*#shell touch trace",
    "ends with a backslash \\\\",
    "a\\\nR9 in out 1",
    "x\r\nR9 in 0 1\r\n",
    "x\x0bR9 in 0 1\x0c\x85\u2028R8 in 0 1",
    "+ R9 in out 1 ; $ ' \" `touch trace` $(touch trace) {1/0}",
    "日本 \x1b[2J \x00 \u202e",
    ".end",
    "ng_script",
    "x" * 5000,
)
NUMBER = r"[-+]?\d+(?:\.\d+)?(?:e[-+]?\d+)?"
ROW = re.compile(rf"^\d+\t({NUMBER})\t({NUMBER})\t*$", re.MULTILINE)
MEASURED = re.compile(
    rf"^(carrier|line \S+): ({NUMBER}) Hz ({NUMBER}) dB, ({NUMBER}) Hz ({NUMBER}) dB, "
    rf"least ({NUMBER}) dB, largest ({NUMBER}) dB$",
    re.MULTILINE,
)


@dataclass(frozen=True)
class Measurement:
    """What a deck printed."""

    frequency_hz: np.ndarray
    s21_db: np.ndarray
    spans: dict[str, list[float]]
    """Name -> low [Hz], |S21| there [dB], high [Hz], |S21| there, least, largest."""


def measure(folder: Path, circuit: Circuit, kit: Kit, *, title: str = "random", points: int = 401) -> Measurement:
    """Export, and let the simulator run the deck from another folder than its own."""
    at_hz, name = circuit.centre_hz, "07_random"
    near = {Fraction(k): float(Fraction(k)) * at_hz for k in ("1/2", "3/2", "2", "3")}
    lines = {k: (0.99 * line_hz, 1.01 * line_hz) for k, line_hz in near.items()}
    lines[Fraction(4)] = (4 * at_hz, 4 * at_hz)
    (folder / f"{name}.cir").write_text(subcircuit(name, title, circuit, kit, at_hz=at_hz), encoding="ascii")
    deck = bench_deck(
        name,
        title,
        circuit,
        carrier_hz=(0.98 * at_hz, 1.02 * at_hz),
        lines_hz=lines,
        sweep_hz=(at_hz / 5, at_hz * 6),
        points=points,
    )
    (folder / f"{name}_bench.cir").write_text(deck, encoding="ascii")
    return read(run(folder / f"{name}_bench.cir"))


def run(deck: Path) -> str:
    """Run a deck and return what it printed; it must not complain."""
    command = [external_program("ngspice"), "-b", str(deck)]
    elsewhere = deck.parent / "elsewhere"
    elsewhere.mkdir(exist_ok=True)
    environment = {"PATH": os.environ["PATH"], "LC_ALL": "C", "HOME": str(deck.parent)}
    done = subprocess.run(
        command, cwd=elsewhere, env=environment, capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == 0, done.stderr
    assert done.stderr.strip() == ""
    return done.stdout


def read(printed: str) -> Measurement:
    frequency, s21 = np.array([[float(cell) for cell in row] for row in ROW.findall(printed)]).T
    spans = {what: [float(cell) for cell in rest] for what, *rest in MEASURED.findall(printed)}
    assert list(spans) == ["carrier", "line 1/2", "line 3/2", "line 2", "line 3", "line 4"]
    assert frequency.size >= 400
    return Measurement(frequency, s21, spans)


def s21_db(circuit: Circuit, kit: Kit, frequency_hz: np.ndarray, *, frozen: bool = True) -> np.ndarray:
    at_hz = circuit.centre_hz if frozen else None
    return -sweep_built(circuit, frequency_hz, kit=kit, frozen_at_hz=at_hz).attenuation_db


def difference_of_q_db(circuit: Circuit, kit: Kit, frequency_hz: np.ndarray) -> tuple[float, float]:
    """What freezing the losses changes [dB]: within 5 % of the centre, and wherever it can be seen."""
    frozen, own = (s21_db(circuit, kit, frequency_hz, frozen=frozen) for frozen in (True, False))
    apart = np.abs(frozen - own)
    near = np.abs(frequency_hz / circuit.centre_hz - 1) < 0.05
    return float(apart[near].max()), float(apart[own > -DEEPEST_DB].max())


def worst_db(circuit: Circuit, kit: Kit, found: Measurement) -> float:
    """Largest difference of sweep and spans [dB]."""
    own = s21_db(circuit, kit, found.frequency_hz)
    seen = own > -DEEPEST_DB
    assert seen.any()
    differences = [np.abs(own - found.s21_db)[seen].max()]
    for low, at_low, high, at_high, least, largest in found.spans.values():
        within = s21_db(circuit, kit, np.linspace(low, high, 41))
        own = np.array([within[0], within[-1], within.min(), within.max()])
        seen = own > -DEEPEST_DB
        differences.append(np.abs(own - (at_low, at_high, least, largest))[seen].max(initial=0.0))
    return float(max(differences))


def describe(circuit: Circuit, kit: Kit, prototype: Prototype) -> str:
    return f"{circuit.topology}, {prototype.name}, {circuit.centre_hz / 1e6:.0f} MHz, {kit.name}"


@pytest.mark.external
def test_exported_netlists_have_the_response_as_built(tmp_path: Path):
    topologies, count = list(REGISTRY), FILTERS if is_long() else SAMPLE
    assert count >= len(topologies)
    worst, of_q = {}, []
    for index in range(count):
        rng = np.random.default_rng([SEED, index])
        _, prototype, circuit, kit = random_filter(rng, topologies[index % len(topologies)])
        found = measure(tmp_path, circuit, kit)
        label = f"{index:2d} {describe(circuit, kit, prototype)}"
        worst[label] = worst_db(circuit, kit, found)
        of_q.append(difference_of_q_db(circuit, kit, found.frequency_hz))
        sys.stdout.write(f"{label}: {worst[label]:.1e} dB; Q(f) {of_q[-1][0]:.2f} dB near f0, {of_q[-1][1]:.2f} dB\n")
    near, anywhere = np.array(of_q).T
    sys.stdout.write(
        f"worst of {count} against ngspice: {max(worst.values()):.1e} dB\n"
        f"Q(f) against Q frozen at f0: within 5 % of f0 median {np.median(near):.3f} dB, most {near.max():.2f} dB; "
        f"down to -{DEEPEST_DB:.0f} dB median {np.median(anywhere):.2f} dB, most {anywhere.max():.2f} dB\n"
    )
    assert {label: value for label, value in worst.items() if value > TOLERANCE_DB} == {}


def ladder(
    output: str, *parts: tuple[str, str, str, float], source_ohm: float = 50.0, load_ohm: float = 50.0
) -> Circuit:
    elements = tuple(Element(ref, ref[0], (a, b), value) for ref, a, b, value in parts)  # type: ignore[arg-type]
    return Circuit("hand", elements, centre_hz=300e6, source_ohm=source_ohm, load_ohm=load_ohm, output=output)


@pytest.mark.external
def test_a_filter_without_a_series_part_has_two_ports_too(tmp_path: Path):
    # the wire between the ports is a resistance of 1e-6 ohm: 1e-7 dB
    circuit = ladder("in", ("L1", "in", "0", 5e-9), ("C1", "in", "0", 56e-12))
    assert worst_db(circuit, KIT, measure(tmp_path, circuit, KIT)) < 1e-4


@pytest.mark.external
def test_between_unequal_resistances(tmp_path: Path):
    parts = (("L1", "in", "m", 30e-9), ("C1", "m", "0", 10e-12), ("L2", "m", "out", 20e-9))
    circuit = ladder("out", *parts, source_ohm=20.0, load_ohm=120.0)
    assert worst_db(circuit, KIT, measure(tmp_path, circuit, KIT)) < 1e-4


@pytest.mark.external
@pytest.mark.parametrize("title", NASTY)
def test_what_the_user_writes_does_nothing(tmp_path: Path, title: str):
    circuit = ladder("out", ("L1", "in", "out", 30e-9))
    kit = replace(KIT, name=title, title=title)
    found = measure(tmp_path, circuit, kit, title=title)
    assert found.s21_db == pytest.approx(measure(tmp_path, circuit, KIT).s21_db, abs=1e-9)
    assert {path.name for path in tmp_path.rglob("*")} == {"07_random.cir", "07_random_bench.cir", "elsewhere"}
