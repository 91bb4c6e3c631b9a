"""The three files of a filter together."""

import io
import re
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
import skrf

from harmonic_planner.export.filter_files import filter_files, filter_names
from harmonic_planner.filters import topologies
from harmonic_planner.filters.built_response import sweep_built
from harmonic_planner.filters.circuit import CircuitError
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.physics.prototypes import Prototype

KIT = load_kit("chip-0603", Path())
CIRCUIT = topologies.design(
    "ladder-series", Prototype("butterworth", 3), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
)
SPANS = {
    "carrier_hz": (237e6, 243e6),
    "passband_hz": (216e6, 264e6),
    "lines_hz": {Fraction(1): (118.5e6, 121.5e6), Fraction(3): (355.5e6, 364.5e6)},
}


def test_names_are_beside_each_other():
    names = filter_names("02_second_tripler")
    assert names.netlist == "filters/02_second_tripler.cir"
    assert names.bench == "filters/02_second_tripler_bench.cir"
    assert names.touchstone == "filters/02_second_tripler.s2p"


def test_the_files_belong_together():
    files = filter_files("01_x", "First doubler", CIRCUIT, KIT, **SPANS)  # type: ignore[arg-type]
    assert list(files) == ["filters/01_x.cir", "filters/01_x_bench.cir", "filters/01_x.s2p"]
    assert files == filter_files("01_x", "First doubler", CIRCUIT, KIT, **SPANS)  # type: ignore[arg-type]
    assert all("First doubler" in text.splitlines()[0] for text in files.values())
    subcircuit, deck, network = files.values()
    assert ".include 01_x.cir" in deck
    assert re.findall(r"^X1 in out (\w+)$", deck, re.MULTILINE) == re.findall(
        r"^\.subckt (\w+)", subcircuit, re.MULTILINE
    )
    # losses at the geometric middle of the carrier's span
    assert f"{np.sqrt(237e6 * 243e6):.11e} Hz" in subcircuit
    file = io.StringIO(network)
    file.name = "x.s2p"
    found = skrf.Network(file)
    assert {237e6, 243e6, 118.5e6, 121.5e6, 355.5e6, 364.5e6} <= set(found.f.tolist())
    assert found.f[[0, -1]] == pytest.approx([59.25e6, 729e6])
    wanted = sweep_built(CIRCUIT, found.f, kit=KIT)
    assert np.abs(found.s[:, 1, 0] - wanted.s21).max() < 1e-12
    assert np.abs(found.s[:, 0, 0] - wanted.s11).max() < 1e-12


def test_the_network_file_covers_every_line_that_is_there_finely():
    files = filter_files("01_x", "x", CIRCUIT, KIT, **SPANS, present_hz=(20e6, 960e6))  # type: ignore[arg-type]
    file = io.StringIO(files["filters/01_x.s2p"])
    file.name = "x.s2p"
    frequency = skrf.Network(file).f
    # the largest drift a scenario may have, 20 %, reads a response at up to 1/0.8 of a line's frequency
    assert frequency[[0, -1]] == pytest.approx([20e6 / 1.25, 960e6 / 0.8])
    assert np.max(frequency[1:] / frequency[:-1]) <= 1.0041
    assert "59250000" in files["filters/01_x_bench.cir"] or "5.925" in files["filters/01_x_bench.cir"]


def test_a_network_file_has_one_resistance():
    with pytest.raises(CircuitError, match="50 ohm and 80 ohm"):
        filter_files("01_x", "x", replace(CIRCUIT, load_ohm=80.0), KIT, **SPANS)  # type: ignore[arg-type]
