"""How fast the kernel is beside a product of 2×2 matrices and beside C; only the agreement of the three is asserted.

``python -m pytest -n 0 -s tests/benchmarks`` shows the times; HARMONIC_PLANNER_LONG=1 takes 10,000 trials instead of
500. Times are of the processor, the least of several runs, all in one process.
"""

from __future__ import annotations

import ctypes
import shutil
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from harmonic_planner.filters import topologies
from harmonic_planner.filters.circuit import Circuit
from harmonic_planner.filters.kernel import LadderKernel
from harmonic_planner.filters.strays import series_inductance_h, stations
from harmonic_planner.parts.kits import Kit, load_kit
from harmonic_planner.physics.prototypes import Prototype

KIT = load_kit("chip-0603", Path())
CIRCUIT = topologies.design(
    "ladder-shunt", Prototype("butterworth", 5), centre_hz=240e6, bandwidth=0.2, impedance_ohm=50.0
)
FREQUENCY_HZ = 240e6 * np.geomspace(0.3, 4.0, 201)

Form = Callable[[np.ndarray], np.ndarray]


def matrix_form(circuit: Circuit, kit: Kit, frequency_hz: np.ndarray) -> Form:
    """The plain way: a chain matrix of every arm for every trial and frequency, multiplied up."""
    s = 2j * np.pi * frequency_hz

    def impedance(place: int, value: np.ndarray) -> np.ndarray:
        element, value = circuit.elements[place], value[:, np.newaxis]
        mounting = s * series_inductance_h(element, kit)
        if element.kind == "C":
            return 1 / (s * value) + kit.capacitor.resistance_ohm(value, frequency_hz) + mounting
        inductor = kit.inductor
        winding = s * value + 2 * np.pi * frequency_hz * value / inductor.q(frequency_hz)
        resonance = inductor.self_resonance_hz(1.0) * value**-inductor.self_resonance_exponent
        across = 1 / ((2 * np.pi * resonance) ** 2 * value)
        return winding / (1 + s * across * winding) + mounting

    def run(values: np.ndarray) -> np.ndarray:
        def in_parallel(places: tuple[int, ...]) -> np.ndarray:
            return 1 / sum(1 / impedance(place, values[:, place]) for place in places)

        def arm(row: int, column: int, immittance: np.ndarray) -> np.ndarray:
            matrix = np.zeros((*shape, 2, 2), dtype=complex)
            matrix[..., 0, 0] = matrix[..., 1, 1] = 1
            matrix[..., row, column] = immittance
            return matrix

        shape = (len(values), frequency_hz.size)
        total = arm(0, 1, np.zeros(shape))
        for station in stations(circuit):
            admittance = s * station.pads * kit.board.pad_f
            if station.shunt:
                group = in_parallel(station.shunt) + (len(station.shunt) > 1) * s * kit.board.shared_via_h
                admittance = admittance + 1 / group
            total = total @ arm(1, 0, admittance)
            if station.onward:
                total = total @ arm(0, 1, in_parallel(station.onward))
        (a, b), (c, d) = total[..., 0, :].transpose(2, 0, 1), total[..., 1, :].transpose(2, 0, 1)
        r1, r2 = circuit.source_ohm, circuit.load_ohm
        return 20 * np.log10(np.abs((a * r2 + b + c * r1 * r2 + d * r1) / (2 * np.sqrt(r1 * r2))))

    return run


C_SOURCE = r"""
#include <complex.h>
#include <math.h>
typedef double complex cplx;

/* kind of each element (1: inductor), its series inductance; per station: pads, first and number of shunt and onward
   elements in `order`; per frequency: omega, Q, capacitor's conductor resistance. */
void ladder(long trials, long points, long elements, long stations,
            const double *values, const int *inductor, const double *series_h, const int *order, const int *station,
            const double *omega, const double *q, const double *conductor, double dissipation,
            double resonance, double exponent, double pad_f, double shared_h, double source, double load, double *out)
{
    double across[64];
    for (long t = 0; t < trials; t++) {
        const double *value = values + t * elements;
        for (long e = 0; e < elements; e++) {
            double w = resonance * pow(value[e], -exponent);
            across[e] = 1 / (w * w * value[e]);
        }
        for (long f = 0; f < points; f++) {
            double w = omega[f];
            cplx v = 1, i = 1 / load;
            for (long k = stations - 1; k >= 0; k--) {
                const int *row = station + 5 * k;
                for (int side = 1; side >= 0; side--) {
                    int first = row[1 + 2 * side], count = row[2 + 2 * side];
                    if (side == 0) i += I * (w * pad_f * row[0]) * v;
                    if (count == 0) continue;
                    cplx y = 0;
                    for (int n = first; n < first + count; n++) {
                        int e = order[n];
                        cplx z;
                        if (inductor[e]) {
                            z = w * value[e] / q[f] + I * (w * value[e]);
                            z = z / (1 + I * (w * across[e]) * z);
                        } else {
                            double x = 1 / (w * value[e]);
                            z = dissipation * x + conductor[f] - I * x;
                        }
                        y += 1 / (z + I * (w * series_h[e]));
                    }
                    if (side == 1) v += i / y;
                    else if (count > 1) i += v / (1 / y + I * (w * shared_h));
                    else i += v * y;
                }
            }
            v += source * i;
            out[t * points + f] = 10 * log10((creal(v) * creal(v) + cimag(v) * cimag(v)) * load / (4 * source));
        }
    }
}
"""


def c_form(circuit: Circuit, kit: Kit, frequency_hz: np.ndarray, folder: Path) -> Form:
    """The plain recursion with its divisions in C, at -O3, complex products and quotients without special cases."""
    (folder / "ladder.c").write_text(C_SOURCE, encoding="utf-8")
    command = ["gcc", "-O3", "-fcx-limited-range", "-shared", "-fPIC", "-o", "ladder.so", "ladder.c", "-lm"]
    subprocess.run(command, cwd=folder, check=True, timeout=120)
    function = ctypes.CDLL(str(folder / "ladder.so")).ladder
    function.restype = None
    order: list[int] = []
    rows: list[int] = []
    for found in stations(circuit):
        rows += [found.pads, len(order), len(found.shunt), len(order) + len(found.shunt), len(found.onward)]
        order += [*found.shunt, *found.onward]
    whole = [np.array(numbers, dtype=np.intc) for numbers in ([e.kind == "L" for e in circuit.elements], order, rows)]
    series = np.array([series_inductance_h(element, kit) for element in circuit.elements])
    omega, q = 2 * np.pi * frequency_hz, kit.inductor.q(frequency_hz)
    conductor = kit.capacitor.conductor_ohm(frequency_hz)
    resonance = 2 * np.pi * kit.inductor.self_resonance_hz(1.0)

    def pointer(array: np.ndarray) -> ctypes.c_void_p:
        return ctypes.c_void_p(array.ctypes.data)

    def run(values: np.ndarray) -> np.ndarray:
        values = np.ascontiguousarray(values)
        out = np.empty((len(values), frequency_hz.size))
        counts = (len(values), frequency_hz.size, values.shape[1], len(rows) // 5)
        function(
            *map(ctypes.c_long, counts),
            pointer(values), pointer(whole[0]), pointer(series), pointer(whole[1]), pointer(whole[2]),
            pointer(omega), pointer(q), pointer(conductor), ctypes.c_double(kit.capacitor.dissipation),
            *map(ctypes.c_double, (
                resonance, kit.inductor.self_resonance_exponent, kit.board.pad_f, kit.board.shared_via_h,
                circuit.source_ohm, circuit.load_ohm,
            )),
            pointer(out),
        )  # fmt: skip
        return out

    return run


def least_time_s(form: Form, values: np.ndarray, runs: int) -> float:
    times = []
    for _ in range(runs):
        start = time.process_time()
        form(values)
        times.append(time.process_time() - start)
    return min(times)


def test_kernel_matrices_and_c_agree_and_their_times_are_shown(tmp_path: Path, long_mode: bool):
    count = 10_000 if long_mode else 500
    spread = np.random.default_rng(1).uniform(0.9, 1.1, (count, len(CIRCUIT.elements)))
    values = np.array([element.value for element in CIRCUIT.elements]) * spread
    kernel = LadderKernel(CIRCUIT, FREQUENCY_HZ, kit=KIT)
    ideal = LadderKernel(CIRCUIT, FREQUENCY_HZ, kit=None)
    forms: dict[str, Form] = {"kernel": kernel.attenuation_db}
    forms["2×2 matrices"] = matrix_form(CIRCUIT, KIT, FREQUENCY_HZ)
    if shutil.which("gcc"):
        forms["C, -O3"] = c_form(CIRCUIT, KIT, FREQUENCY_HZ, tmp_path)
    # independent: the same model written three times
    some = values[:: max(1, count // 100)]
    expected = forms["kernel"](some)
    for name, form in forms.items():
        assert form(some) == pytest.approx(expected, abs=1e-7), name
    runs = 5 if count <= 1000 else 3
    times = {name: least_time_s(form, values, runs) for name, form in forms.items()}
    times["kernel, ideal parts"] = least_time_s(ideal.attenuation_db, values, runs)
    lines = [f"\n10 elements with losses and strays, {count} trials × {FREQUENCY_HZ.size} frequencies, dB out"]
    for name, seconds in times.items():
        lines.append(f"{name:20s} {seconds * 1e3:9.1f} ms   {seconds / times['kernel']:6.2f} × kernel")
    sys.stdout.write("\n".join(lines) + "\n")
