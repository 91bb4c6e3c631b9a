"""Flags: shares, self-resonance and range, each against hand arithmetic on a kit of round numbers."""

import dataclasses
import math
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from harmonic_planner.filters import topologies
from harmonic_planner.filters.circuit import Circuit, CircuitError, Element
from harmonic_planner.filters.flags import judge, worst
from harmonic_planner.model import VERDICT_RANK
from harmonic_planner.parts.kits import load_kit
from harmonic_planner.physics.prototypes import Prototype

# 0.35 nH of via and mounting, 0.10 pF a pad, 0.15 nH mounting, 0.5 nH capacitor, 1.0 to 390 nH, 0.5 pF to 1 nF
KIT = load_kit("chip-0603", Path())


def one(element: Element, *others: Element, centre_hz: float = 100e6, **keywords):
    circuit = Circuit("test", (element, *others), centre_hz=centre_hz, source_ohm=50.0, load_ohm=50.0)
    return judge(circuit, KIT, centre_hz=centre_hz, **keywords)[0]


# independent: by hand, 0.35 nH over L
@pytest.mark.parametrize(
    "inductance_h, share, verdict",
    [
        (10e-9, 0.035, "ok"),
        (3.51e-9, 0.35 / 3.51, "ok"),
        (3.49e-9, 0.35 / 3.49, "marginal"),
        (1.41e-9, 0.35 / 1.41, "marginal"),
        (1.39e-9, 0.35 / 1.39, "swamped"),
    ],
)
def test_shunt_inductor_is_weighed_against_via_and_mounting(inductance_h, share, verdict):
    report = one(Element("L1", "L", ("in", "0"), inductance_h))
    assert report.stray_share == pytest.approx(share)
    assert report.verdict == verdict
    assert report.reason.startswith(f"strays {share * 100:.3g} % (0.35 nH of via and mounting in ")


def test_series_inductor_is_weighed_against_mounting():
    report = one(Element("L1", "L", ("in", "out"), 1.2e-9))
    assert report.stray_share == pytest.approx(0.15 / 1.2)
    assert report.verdict == "marginal"
    assert report.reason == "strays 12.5 % (0.15 nH of mounting in 1.2 nH)"


def test_shunt_capacitor_is_weighed_against_all_pads_and_the_inductors_own_capacitance():
    inductor = Element("L1", "L", ("in", "0"), 100e-9)
    series = Element("L2", "L", ("in", "out"), 100e-9)
    report = one(Element("C1", "C", ("in", "0"), 5e-12), inductor, series)
    across = 1 / ((2 * math.pi * 1.4e9) ** 2 * 100e-9)
    assert report.stray_share == pytest.approx((3 * 0.1e-12 + across) / 5e-12)
    assert report.verdict == "ok"


def test_series_capacitor_is_weighed_against_the_pads_of_its_inner_node():
    inductor = Element("L1", "L", ("in", "n1"), 100e-9)
    report = one(Element("C1", "C", ("n1", "out"), 1e-12), inductor)
    assert report.stray_share == pytest.approx(0.2)
    assert report.reason == "strays 20 % (0.2 pF of pads in 1 pF)"


def test_pads_beside_a_shunt_capacitor_are_that_capacitors_strays():
    held = Element("C2", "C", ("n1", "0"), 20e-12)
    report = one(Element("C1", "C", ("n1", "out"), 1e-12), Element("L1", "L", ("in", "n1"), 100e-9), held)
    assert report.stray_share == 0.0
    assert report.verdict == "ok"


# independent: by hand, f = 1/(2π sqrt(0.7 nH · C)) of the capacitor with its via
@pytest.mark.parametrize("ratio, verdict", [(3.01, "ok"), (2.99, "marginal"), (1.51, "marginal"), (1.49, "swamped")])
def test_self_resonance_of_a_shunt_capacitor_counts_its_via(ratio, verdict):
    capacitance_f = 1 / ((2 * math.pi * ratio * 240e6) ** 2 * 0.7e-9)
    report = one(Element("C1", "C", ("in", "0"), capacitance_f), centre_hz=240e6)
    assert report.self_resonance_hz == pytest.approx(ratio * 240e6)
    assert report.verdict == verdict
    assert f"is {ratio:.3g} × the centre" in report.reason


def test_self_resonance_of_a_series_capacitor_counts_no_via():
    report = one(Element("C1", "C", ("in", "out"), 100e-12))
    assert report.self_resonance_hz == pytest.approx(1 / (2 * math.pi * math.sqrt(0.5e-9 * 100e-12)))


@pytest.mark.parametrize("ratio, verdict", [(3.01, "ok"), (2.99, "marginal"), (1.51, "marginal"), (1.49, "swamped")])
def test_self_resonance_of_an_inductor(ratio, verdict):
    inductance_h = 100e-9
    report = one(Element("L1", "L", ("in", "out"), inductance_h), centre_hz=1.4e9 / ratio)
    assert report.self_resonance_hz == pytest.approx(1.4e9)
    assert report.verdict == verdict


def test_the_highest_line_is_named_and_leaves_the_verdict():
    element = Element("L1", "L", ("in", "out"), 100e-9)
    above = one(element, highest_line_hz=1.2e9)
    below = one(element, highest_line_hz=2e9)
    assert "highest line" not in above.reason
    assert below.reason.endswith("self-resonance 1.4 GHz is 14 × the centre, below the highest line to reject, 2 GHz")
    assert above.verdict == below.verdict == "ok"


def test_the_highest_line_is_named_beside_a_worse_count_too():
    report = one(Element("L1", "L", ("in", "out"), 400e-9), highest_line_hz=2e9)
    assert report.verdict == "swamped"
    assert report.reason == (
        "not available: 400 nH is above the kit's 390 nH; "
        "self-resonance 667 MHz is 6.67 × the centre, below the highest line to reject, 2 GHz"
    )


@pytest.mark.parametrize(
    "element, words",
    [
        (Element("L1", "L", ("in", "0"), 0.33e-9), "not available: 0.33 nH is below the kit's 1 nH; strays 106 %"),
        (Element("L1", "L", ("in", "out"), 684e-9), "not available: 684 nH is above the kit's 390 nH"),
        (Element("C1", "C", ("in", "out"), 0.23e-12), "not available: 0.23 pF is below the kit's 0.5 pF"),
        (Element("C1", "C", ("in", "0"), 2.2e-9), "not available: 2.2 nF is above the kit's 1 nF"),
    ],
)
def test_what_the_kit_does_not_sell_is_swamped(element: Element, words: str):
    report = one(element, centre_hz=20e6)
    assert report.verdict == "swamped"
    assert report.reason.startswith(words)


def test_a_report_carries_the_element_and_its_q():
    report = one(Element("C7", "C", ("in", "0"), 65e-12), centre_hz=240e6)
    assert (report.ref, report.kind, report.placement, report.unit) == ("C7", "C", "shunt", "F")
    assert report.ideal == report.nominal == 65e-12
    # independent: by hand, X = 10.2 Ω, R = 0.0003 X + 0.1 sqrt(240/500)
    reactance = 1 / (2 * math.pi * 240e6 * 65e-12)
    assert report.q == pytest.approx(reactance / (0.0003 * reactance + 0.1 * math.sqrt(0.48)), rel=1e-9)


# independent: by hand, 30 % of 0.35 nH over L
@pytest.mark.parametrize(
    "inductance_h, left, verdict",
    [(1.06e-9, 0.105 / 1.06, "ok"), (1.04e-9, 0.105 / 1.04, "marginal"), (0.41e-9, 0.105 / 0.41, "swamped")],
)
def test_an_absorbed_stray_counts_by_its_own_tolerance(inductance_h, left, verdict):
    ideal = Circuit("test", (Element("L1", "L", ("in", "0"), inductance_h),), 100e6, 50.0, 50.0)
    bought = dataclasses.replace(ideal, elements=(Element("L1", "L", ("in", "0"), 1.2e-9),))
    (report,) = judge(ideal, KIT, nominal=bought)
    assert report.stray_share == pytest.approx(left)
    assert report.verdict == verdict
    assert (report.ideal, report.nominal) == (inductance_h, 1.2e-9)
    assert report.reason.startswith(f"strays {0.35e-7 / inductance_h:.3g} % (0.35 nH of via and mounting in ")
    assert report.reason.split("; ")[0].endswith(f"absorbed to {left * 100:.3g} %")


def test_range_and_self_resonance_are_those_of_what_is_bought():
    ideal = Circuit("test", (Element("L1", "L", ("in", "0"), 1.3e-9),), 100e6, 50.0, 50.0)
    bought = dataclasses.replace(ideal, elements=(Element("L1", "L", ("in", "0"), 0.95e-9),))
    (report,) = judge(ideal, KIT, nominal=bought)
    assert report.reason.startswith("not available: 0.95 nH is below the kit's 1 nH")
    assert report.self_resonance_hz == pytest.approx(KIT.inductor.self_resonance_hz(0.95e-9))
    other = dataclasses.replace(ideal, elements=(Element("L2", "L", ("in", "0"), 1e-9),))
    with pytest.raises(CircuitError, match="L1 has no nominal value"):
        judge(ideal, KIT, nominal=other)


def test_without_a_centre_the_circuits_own_is_taken():
    circuit = topologies.design(
        "ladder-series", Prototype("butterworth", 3), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
    )
    assert judge(circuit, KIT) == judge(circuit, KIT, centre_hz=240e6)


# common practice, no source (memory): at these frequencies and bandwidths ladders are built from such parts
@pytest.mark.parametrize("name", ["ladder-series", "ladder-shunt"])
@pytest.mark.parametrize("kit, centre_hz", [("chip-1008", 60e6), ("chip-1008", 120e6), ("chip-0603", 240e6)])
@pytest.mark.parametrize("bandwidth", [0.18, 0.22])
def test_ladders_at_vhf_with_a_fifth_of_bandwidth_can_be_built(name, kit, centre_hz, bandwidth):
    prototype = Prototype("chebyshev", 3, 0.1)
    circuit = topologies.design(name, prototype, centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=50.0)
    assert worst(judge(circuit, load_kit(kit, Path()))).verdict in ("ok", "marginal")


@pytest.mark.parametrize("name", ["ladder-series", "ladder-shunt"])
def test_a_ladder_at_2p4_ghz_is_swamped(name):
    # common practice, no source (memory)
    circuit = topologies.design(
        name, Prototype("chebyshev", 3, 0.1), centre_hz=2.4e9, bandwidth=0.175, impedance_ohm=50.0
    )
    assert worst(judge(circuit, KIT)).verdict == "swamped"


@settings(deadline=None)
@given(st.floats(1.1, 4.0), st.floats(30e6, 3e9))
def test_wider_never_swamps_the_inductor_of_a_shunt_arm(factor: float, centre_hz: float):
    def reports(bandwidth: float):
        circuit = topologies.design(
            "ladder-shunt", Prototype("butterworth", 3), centre_hz=centre_hz, bandwidth=bandwidth, impedance_ohm=50.0
        )
        return {report.ref: report for report in judge(circuit, KIT)}

    narrow, wide = reports(0.15)["L1"], reports(0.15 * factor)["L1"]
    assert wide.stray_share == pytest.approx(narrow.stray_share / factor)


def test_worst_takes_the_verdict_first_and_then_the_share():
    base = one(Element("L1", "L", ("in", "0"), 10e-9))

    def report(ref: str, verdict, share: float):
        return dataclasses.replace(base, ref=ref, verdict=verdict, stray_share=share)

    rows = [
        report("a", "ok", 0.9),
        report("b", "marginal", 0.1),
        report("c", "marginal", 0.2),
        report("d", "marginal", 0.2),
    ]
    assert worst(rows).ref == "c"
    assert worst(rows[:1]).ref == "a"
    assert VERDICT_RANK[worst([*rows, report("e", "swamped", 0.0)]).verdict] == 2
    with pytest.raises(ValueError, match="no elements"):
        worst([])
