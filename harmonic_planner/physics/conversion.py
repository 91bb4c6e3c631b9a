"""Conversion of residuals: beside its carrier a multiplier is linear in whatever is small, and time-varying.

A residual r·cos(kφ/k0 + ψ) beside the carrier cos φ (line k0) makes f(cos φ) + f′(cos φ)·r·cos(…) + …, so it comes out
at |k + m·k0| for every integer m, with amplitude |G_m|/(2|F_N|) relative to the wanted line per unit of r.

Range of validity: third-order terms change path m by about (m·r/sin θ)²/8, θ the angle of the waveform's corner (90°
for a limiter), so 0.1 dB holds for m·r up to about sin θ/4: at −40 dBc up to m = 10 at θ = 24°, m = 25 at 90°. Beyond,
the difference stays within the second-order bound.

References
----------
H. C. Torrey, C. A. Whitmer, *Crystal Rectifiers*, MIT Radiation Laboratory Series 15, 1948, ch. 5 (conversion matrix).
S. A. Maas, *Nonlinear Microwave and RF Circuits*, ch. 3 (large-signal/small-signal analysis).
C. H. Page, "Frequency conversion with positive nonlinear resistors", J. Res. NBS 56, 1956, RP 2664.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from harmonic_planner.model import Device, PlannerError
from harmonic_planner.physics.waveforms import WEAKEST_DB, Spectrum, spectrum

Array = NDArray[np.float64]

SECOND_ORDER_LINES = 512
"""Paths m = 0 … this are searched for the largest |H_m|."""
UNMODELLED = 1e-9
"""A modelled line below this share of the wanted one gives no scale for its zone."""


def device_lines(device: Device, times: int, m_max: int) -> Array:
    """Return the lines a device makes of its carrier alone, relative to the wanted line.

    Parameters
    ----------
    device
        The multiplier; where ``lines_dbc`` gives a level, that level holds instead of the waveform's.
    times
        Factor N.
    m_max
        Largest harmonic of the device's input.

    Returns
    -------
    ndarray, shape (m_max + 1,)
        Amplitude of harmonic m relative to harmonic N; index 0 is 0 (no dc), index N is 1.

    Raises
    ------
    PlannerError
        If the device does not make the wanted line.
    """
    lines = _modelled_lines(_accepted(device, times, m_max), times)
    for m, level_dbc in device.lines_dbc.items():
        if m <= max(m_max, times) and m != times:
            lines[m] = 10 ** (level_dbc / 20)
    return lines[: m_max + 1]


def conversion_ratio(device: Device, times: int, m: ArrayLike) -> Array:
    """Return the amplitude of path m per unit of residual, relative to the wanted line: |G_m|/(2|F_N|).

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N.
    m
        Integers of either sign, any shape: the residual at line k comes out at |k + m·k0|.

    Returns
    -------
    ndarray
        Amplitude ratio, shape of `m`. Own side m = N−1, image side m = −(N+1).

    Raises
    ------
    PlannerError
        If the device does not make the wanted line.
    """
    paths = np.abs(np.asarray(m, dtype=np.int64))
    return _ratios(device, times, int(np.max(paths, initial=0)))[paths]


def conversion_matrix(device: Device, times: int, *, carrier_index: int, count: int, power: bool = False) -> Array:
    """Return what every input residual adds to every output line.

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N; the output carrier is at N·carrier_index.
    carrier_index
        Grid index of the input carrier, k0·q for lines j/q.
    count
        Number of grid lines, j = 1 … count, at input and output.
    power
        False: where several m meet in one line their amplitudes add (worst phase). True: their squares add, and the
        entries are power ratios (phase average).

    Returns
    -------
    ndarray, shape (count, count)
        Entry [out − 1, in − 1]: at line `out` relative to the output carrier, per unit at line `in` relative to the
        input carrier. Output at dc or beyond `count` is dropped. A residual at a multiple of the carrier also reaches
        the output carrier's own row: that is a change of the carrier and no spur.

    Raises
    ------
    PlannerError
        If the device does not make the wanted line.

    Notes
    -----
    `in` + m·k0 = ±`out` has the solutions m = (out − in)/k0 and m = −(out + in)/k0, so at most two paths meet, and they
    do where 2·in is a multiple of k0.

    With levels given in ``lines_dbc`` the paths stay the waveform's, but every output line is scaled by the given over
    the modelled level of the nearest multiple of k0, its zone. Halfway between two zones the larger scale is taken. The
    zone of the wanted line, that of dc, and zones without a given or a modelled line keep scale 1.
    """
    index = np.arange(1, count + 1)
    direct = index[:, np.newaxis] - index
    mirrored = index[:, np.newaxis] + index
    ratios = _ratios(device, times, 2 * count // carrier_index)
    scale = zone_scale(device, times, carrier_index=carrier_index, count=count)
    if power:
        ratios, scale = ratios**2, scale**2
    paths = np.zeros((count, count))
    for distance in (direct, mirrored):
        reached = distance % carrier_index == 0
        paths += np.where(reached, ratios[np.abs(distance) // carrier_index], 0.0)
    return np.asarray(scale[:, np.newaxis] * paths)


def zone_scale(device: Device, times: int, *, carrier_index: int, count: int) -> Array:
    """Return what levels given in ``lines_dbc`` multiply every output line by.

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N.
    carrier_index
        Grid index of the input carrier.
    count
        Number of grid lines, j = 1 … count.

    Returns
    -------
    ndarray, shape (count,)
        Given over modelled level of the nearest multiple of the carrier, the larger one halfway between two; 1 in the
        zone of the wanted line, in that of dc, and in zones without a given or a modelled line.
    """
    zones = count // carrier_index + 1
    by_zone = np.ones(zones + 1)
    if device.lines_dbc:
        modelled = _modelled_lines(_accepted(device, times, zones), times)
        for m, level_dbc in device.lines_dbc.items():
            if m <= zones and m != times and modelled[m] >= UNMODELLED:
                by_zone[m] = 10 ** (level_dbc / 20) / modelled[m]
    below, beyond = np.divmod(np.arange(1, count + 1), carrier_index)
    lower, upper = by_zone[below], by_zone[below + 1]
    return np.where(
        2 * beyond < carrier_index, lower, np.where(2 * beyond > carrier_index, upper, np.maximum(lower, upper))
    )


def am_slope(device: Device, times: int) -> float:
    """Return a = d ln A_out/d ln A_in at nominal drive, signed: (G_(N−1) + G_(N+1))/(2·F_N).

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N.

    Returns
    -------
    float
        AM slope a; the own side converts by |N + a|/2, the image side by |N − a|/2.

    Raises
    ------
    PlannerError
        If the device does not make the wanted line.
    """
    s = _accepted(device, times, times + 1)
    return float((s.G[times - 1] + s.G[times + 1]) / (2 * s.F[times]))


def second_order_db(device: Device, times: int) -> float:
    """Return c: residuals that sum to s dBc make second-order lines of at most 2s + c dB, by any path.

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N.

    Returns
    -------
    float
        c = 20 log10(max_m |H_m|/(8|F_N|)), m = 0 … `SECOND_ORDER_LINES` [dB]; −inf for a linear device.

    Raises
    ------
    PlannerError
        If the device does not make the wanted line.

    Notes
    -----
    With δ = Σ r_i cos ψ_i the second-order term ½·f″·δ² holds, for every ordered pair (i, j), the four terms
    (r_i·r_j/8)·e^(±j(ψ_i ± ψ_j)) times Σ H_m e^(jmφ). A line that each pair reaches by one path is therefore at most
    (Σ r_i)²·max|H_m|/(8|F_N|). What c alone does not cover:

    * ψ_i − ψ_i = 0, the steady part of δ², lands on the multiples of the carrier by two equal paths: 6 dB more;
    * a line that p paths of one pair meet (r1 + r2 and r1 − r2, or both signs where twice the sum is a multiple of the
      carrier) can be 20 log10 p higher.

    A fourth-order term adds to it less than 0.1 dB while the residual moves the corner of the waveform by little: at
    −40 dBc 0.01 dB for θ = 24°.
    """
    s = _accepted(device, times, SECOND_ORDER_LINES)
    return _db(float(np.max(np.abs(s.H))) / (8 * abs(float(s.F[times]))))


def second_order_near_db(device: Device, times: int) -> float:
    """Return the c of `second_order_db` for residuals around the carrier and output lines around the wanted one.

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N.

    Returns
    -------
    float
        c from the paths m = N−2 (sums), N (differences), N+2 (images of sums) alone [dB]; −inf where there is none.

    Raises
    ------
    PlannerError
        If the device does not make the wanted line.
    """
    s = _accepted(device, times, times + 2)
    largest = float(np.max(np.abs(s.H[[abs(times - 2), times, times + 2]])))
    return _db(largest / (8 * abs(float(s.F[times]))))


def check_device(device: Device, times: int) -> list[str]:
    """Refuse a device that cannot do the job; return warnings about claims that physics contradicts.

    Parameters
    ----------
    device
        The multiplier.
    times
        Factor N.

    Returns
    -------
    list of str
        Warnings; empty when there is nothing to say.

    Raises
    ------
    PlannerError
        If a parameter is out of range, a given line is not a harmonic or contradicts the wanted line, or the wanted
        line is more than 40 dB under the strongest line.

    Notes
    -----
    A positive nonlinear resistance gives harmonic N at most 1/N² of the power it takes at the fundamental.
    """
    for m, level_dbc in device.lines_dbc.items():
        if m < 1:
            raise PlannerError(f"device.lines: line {m}: allowed are harmonics of the device's input, from 1")
        if m == times and level_dbc != 0:
            raise PlannerError(
                f"device.lines: line {m} = {level_dbc:g} dBc: levels are relative to the wanted line, which is line "
                f"{times} itself; allowed: leave it out"
            )
        if level_dbc > WEAKEST_DB and m != times:
            raise PlannerError(
                f"device.lines: line {m} = {level_dbc:g} dBc leaves the wanted line too weak; allowed: up to "
                f"{WEAKEST_DB:g} dBc"
            )
    _accepted(device, times, times)
    limit_db = -20 * math.log10(times)
    if device.device_class == "resistive" and device.conversion_db > limit_db + 1e-9:
        return [
            f"device.conversion = {device.conversion_db:g} dB: a resistive ×{times} cannot exceed {limit_db:.2f} dB "
            "(Page 1956); check the number, or set device.class to active or reactive"
        ]
    return []


# ---------------------------------------------------------------------------------------------- inside


def _db(amplitude: float) -> float:
    return 20 * math.log10(amplitude) if amplitude > 0 else -math.inf


def _accepted(device: Device, times: int, m_max: int) -> Spectrum:
    """Return the spectrum up to at least m_max and the lines around N, or refuse the device."""
    s = spectrum(device, times, max(m_max, times + 2, 8))
    wanted = abs(float(s.F[times]))
    lines = np.abs(s.F[1:])
    strongest = float(np.max(lines))
    if wanted < 10 ** (-WEAKEST_DB / 20) * strongest:
        below = (
            f"{20 * math.log10(strongest / wanted):.1f} dB under" if wanted > 1e-12 * strongest else "missing beside"
        )
        raise PlannerError(
            f"device.type = {device.type}, times = {times}: its line {times} is {below} its line "
            f"{int(np.argmax(lines)) + 1}; allowed: up to {WEAKEST_DB:g} dB under; {_remedy(device)}"
        )
    return s


def _remedy(device: Device) -> str:
    """Say what would give a device its wanted line."""
    if device.type == "limiter":
        return f"a limiter makes odd lines, and high ones only above device.steepness = {device.steepness:g}"
    parity = {"push-push": "a push-push makes even lines; ", "push-pull": "a push-pull makes odd lines; "}
    return (
        f"{parity.get(device.type, '')}change device.type, or device.half_angle from "
        f"{math.degrees(device.half_angle_rad):g} deg"
    )


def _modelled_lines(s: Spectrum, times: int) -> Array:
    lines = np.abs(s.F / s.F[times])
    lines[0] = 0.0
    return np.asarray(lines)


def _ratios(device: Device, times: int, m_max: int) -> Array:
    s = _accepted(device, times, m_max)
    return np.asarray(np.abs(s.G[: m_max + 1]) / (2 * abs(float(s.F[times]))))
