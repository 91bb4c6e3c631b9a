"""Coupled resonators against the published design relations and coupling theory, measured from the circuit.

Sources: S. B. Cohn, "Direct-coupled-resonator filters", Proc. IRE 45, 1957, pp. 187-196; G. L. Matthaei, L. Young,
E. M. T. Jones, "Microwave Filters, Impedance-Matching Networks, and Coupling Structures", 1964, §8.02 (inverters) and
§8.11 (lumped shunt resonators, fig. 8.11-1); M. Dishal, "Design of dissipative band-pass filters producing desired
exact amplitude-frequency characteristics", Proc. IRE 37, 1949 (k and Q from g-values).
"""

import math

import numpy as np
import pytest

from harmonic_planner.filters.circuit import GROUND, INPUT, Circuit
from harmonic_planner.filters.response import nodal_sweep, sweep
from harmonic_planner.filters.topologies import capacitive, inductive, ladder_series, series_capacitive
from harmonic_planner.physics.prototypes import Prototype, bandpass_omega

pytestmark = pytest.mark.published

MODULES = (capacitive, inductive, series_capacitive)
F0, OHM = 600e6, 50.0
OMEGA0 = 2 * math.pi * F0
LINES_HZ = [200e6, 400e6, 800e6, 1200e6, 1800e6]


def spec(bandwidth: float) -> dict[str, float]:
    return {"centre_hz": F0, "bandwidth": bandwidth, "impedance_ohm": OHM}


def value(circuit: Circuit, ref: str) -> float:
    return next(element.value for element in circuit.elements if element.ref == ref)


# independent: design note, f0 = 600 MHz, Δ = 10 %, n = 3, Butterworth, ideal elements, 50 Ω, printed to 0.1 dB. The
# narrow-band equations as they stand, J01 end coupling with its shunt correction, give every printed digit. The solved
# form, with exact 3 dB points where these are 0.2 % off in frequency and 0.9 to 1.6 % wide, has 0.3 to 0.8 dB more.
@pytest.mark.parametrize(
    "make, resonator, printed",
    [
        (ladder_series.design, None, [85.6, 55.2, 46.0, 70.6, 85.6]),
        (capacitive.textbook, 8e-9, [122.3, 68.2, 36.2, 48.3, 52.1]),
        (inductive.textbook, 6e-12, [50.4, 41.4, 55.1, 93.7, 122.7]),
    ],
)
@pytest.mark.parametrize("method", [sweep, nodal_sweep])
def test_three_topologies_at_the_printed_digits(make, resonator, printed, method):
    circuit = make(Prototype("butterworth", 3), **spec(0.1), resonator=resonator)
    assert method(circuit, LINES_HZ).attenuation_db == pytest.approx(printed, abs=0.05)


@pytest.mark.parametrize(
    "module, resonator, printed",
    [
        (capacitive, 8e-9, [122.3, 68.2, 36.2, 48.3, 52.1]),
        (inductive, 6e-12, [50.4, 41.4, 55.1, 93.7, 122.7]),
    ],
)
def test_the_solved_form_is_up_to_0_8_db_above_them(module, resonator, printed):
    circuit = module.design(Prototype("butterworth", 3), **spec(0.1), resonator=resonator)
    more = sweep(circuit, LINES_HZ).attenuation_db - printed
    assert 0.3 < more.min() < more.max() < 0.81


@pytest.mark.parametrize(
    "prototype", [Prototype("butterworth", 3), Prototype("chebyshev", 4, 0.2)], ids=lambda p: p.name
)
def test_capacitive_elements_are_those_of_figure_8_11_1(prototype):
    # published: fig. 8.11-1, written out for resonators alike of slope parameter b = ω0·Cr = 1/(ω0·L)
    g, n, width, inductance = prototype.g_values(), prototype.order, 0.05, 12e-9
    circuit = capacitive.textbook(prototype, **spec(width), resonator=inductance)
    conductance, slope = 1 / OHM, 1 / (OMEGA0 * inductance)
    j_first = math.sqrt(conductance * slope * width / (g[0] * g[1]))
    c_first = j_first / (OMEGA0 * math.sqrt(1 - (j_first / conductance) ** 2))
    c_first_effective = c_first / (1 + (OMEGA0 * c_first / conductance) ** 2)
    assert value(circuit, "C01") == pytest.approx(c_first, rel=1e-12)
    assert value(circuit, f"C{n}{n + 1}") == pytest.approx(c_first, rel=1e-9)  # both families are symmetric in k and Q
    between = [width * slope / math.sqrt(g[j] * g[j + 1]) / OMEGA0 for j in range(1, n)]
    for j, coupling in enumerate(between, start=1):
        assert value(circuit, f"C{j}{j + 1}") == pytest.approx(coupling, rel=1e-12)
    whole = slope / OMEGA0
    assert value(circuit, "C1") == pytest.approx(whole - c_first_effective - between[0], rel=1e-12)
    assert value(circuit, "C2") == pytest.approx(whole - between[0] - between[1], rel=1e-12)


def immittance_matrices(circuit: Circuit) -> tuple[np.ndarray, np.ndarray, list[str]]:
    """Nodal capacitance and inverse inductance of a circuit with its ports left out (shunt resonators)."""
    nodes = [node for node in circuit.nodes if node.startswith("r")]
    capacitance, stiffness = np.zeros((len(nodes),) * 2), np.zeros((len(nodes),) * 2)
    for element in circuit.elements:
        if INPUT in element.nodes or circuit.output in element.nodes:
            continue
        matrix, amount = (capacitance, element.value) if element.kind == "C" else (stiffness, 1 / element.value)
        ends = [nodes.index(node) for node in element.nodes if node != GROUND]
        for end in ends:
            matrix[end, end] += amount
        if len(ends) == 2:
            matrix[ends[0], ends[1]] -= amount
            matrix[ends[1], ends[0]] -= amount
    return capacitance, stiffness, nodes


@pytest.mark.parametrize("module", [capacitive, inductive])
@pytest.mark.parametrize("make", ["textbook", "design"])
@pytest.mark.parametrize(
    "prototype", [Prototype("chebyshev", 5, 0.1), Prototype("chebyshev", 6, 0.05)], ids=lambda p: p.name
)
def test_coupling_coefficients_from_the_two_resonances_of_a_pair(module, make, prototype):
    # published: k_ij = Δ/sqrt(g_i·g_j); two resonators with the others shorted resonate at f1 and f2 with
    # k = (f2² - f1²)/(f2² + f1²) (Dishal). Inner pairs: the ports load the outer ones.
    width = 0.01
    g = prototype.g_values()
    circuit = getattr(module, make)(prototype, **spec(width))
    capacitance, stiffness, _ = immittance_matrices(circuit)
    for i in range(1, prototype.order - 2):
        pair = np.ix_([i, i + 1], [i, i + 1])
        low, high = np.sort(np.linalg.eigvals(np.linalg.solve(capacitance[pair], stiffness[pair])).real)
        k = (high - low) / (high + low)
        assert k == pytest.approx(width / math.sqrt(g[i + 1] * g[i + 2]), rel=1e-3)
        # synchronous: the middle of the pair is the centre
        assert math.sqrt(2 / (1 / low + 1 / high)) / OMEGA0 == pytest.approx(1.0, abs=2e-4)


@pytest.mark.parametrize("make", ["textbook", "design"])
@pytest.mark.parametrize("width, tolerance", [(0.01, 0.01), (0.002, 0.002)])
def test_external_q_from_the_decay_of_the_first_resonator(make, width, tolerance):
    # published: Q_e = g0·g1/Δ (Dishal; MYJ §8.02); measured as |s|/(-2 Re s) of the natural frequency of the first
    # resonator with the second shorted and the port closed with 50 Ω, which deviates by a term of order Δ
    prototype = Prototype("chebyshev", 5, 0.1)
    circuit = getattr(capacitive, make)(prototype, **spec(width), resonator=8e-9)
    end, inductance = value(circuit, "C01"), value(circuit, "L1")
    shunt = value(circuit, "C1") + value(circuit, "C12")
    # (s·Cs + 1/(s·L))·(1 + s·Ce·R) + s·Ce = 0, times s·L
    natural = np.roots([inductance * shunt * end * OHM, inductance * (shunt + end), end * OHM, 1.0])
    s = natural[np.argmax(natural.imag)]
    assert abs(s) / OMEGA0 == pytest.approx(1.0, abs=width * 0.2)
    assert abs(s) / (-2 * s.real) == pytest.approx(prototype.g_values()[1] / width, rel=tolerance)


@pytest.mark.parametrize("module", MODULES)
@pytest.mark.parametrize(
    "prototype",
    [Prototype("butterworth", 5), Prototype("chebyshev", 5, 0.1), Prototype("chebyshev", 4, 0.5)],
    ids=lambda p: p.name,
)
@pytest.mark.parametrize("width", [0.02, 0.1, 0.3])
def test_inverters_are_exact_at_the_centre(module, prototype, width):
    # published: at ω0 every inverter has its J, so the narrow-band form has the prototype's value at Ω = 0 exactly
    found = sweep(module.textbook(prototype, **spec(width)), F0).attenuation_db[0]
    assert found == pytest.approx(float(prototype.attenuation_db(0.0)), abs=1e-9)


@pytest.mark.parametrize("module", MODULES)
@pytest.mark.parametrize("make", ["textbook", "design"])
@pytest.mark.parametrize(
    "prototype", [Prototype("butterworth", 3), Prototype("chebyshev", 4, 0.1)], ids=lambda p: p.name
)
def test_narrow_band_response_tends_to_the_prototype(module, make, prototype):
    # published: MYJ §8.02, the low-pass to band-pass mapping holds for Δ -> 0
    width = 1e-4
    omega = np.array([0.5, 1.0, 2.0, 3.0])
    frequency = F0 * (omega * width / 2 + np.hypot(1, omega * width / 2))
    found = sweep(getattr(module, make)(prototype, **spec(width)), frequency).attenuation_db
    assert found == pytest.approx(prototype.attenuation_db(omega), abs=0.01)


def skew_error(module, make: str, prototype: Prototype, width: float) -> float:
    """Largest difference of the circuit from prototype plus rule, 0.5-1.5 f0, where the prototype has 20 dB or more."""
    ratio = np.linspace(0.5, 1.5, 401)
    ideal = prototype.attenuation_db(bandpass_omega(F0 * ratio, centre_hz=F0, bandwidth=width))
    found = sweep(getattr(module, make)(prototype, **spec(width)), F0 * ratio).attenuation_db
    error = np.abs(found - ideal - module.skew_db(prototype.order, ratio))
    return float(error[ideal >= 20].max())


@pytest.mark.parametrize("module", MODULES)
@pytest.mark.parametrize("make", ["textbook", "design"])
@pytest.mark.parametrize("width", [0.03, 0.05, 0.1])
@pytest.mark.parametrize("family", ["butterworth", "chebyshev"])
@pytest.mark.parametrize("order", [3, 4, 5])
def test_skew_rule_within_2_3_db(module, make, width, family, order):
    # independent: the rule's stated accuracy for Δ up to 10 %, 0.5-1.5 f0
    assert skew_error(module, make, Prototype(family, order, 0.1), width) <= 2.3


@pytest.mark.parametrize(
    "module, order, decibel", [(capacitive, 7, 2.6), (capacitive, 9, 3.45), (inductive, 2, 2.9), (inductive, 9, 3.5)]
)
def test_where_the_skew_rule_is_off_by_more(module, order, decibel):
    """Regression, unconfirmed: beyond order 6, and inductive at order 2, the 2.3 dB do not hold at Δ = 10 %."""
    ripples = (0.01, 0.1)
    errors = [skew_error(module, "design", Prototype("chebyshev", order, ripple), 0.1) for ripple in ripples]
    errors.append(skew_error(module, "design", Prototype("butterworth", order), 0.1))
    assert max(errors) == pytest.approx(decibel, abs=0.1)
