"""Numbers and names as people read them."""

import math
from fractions import Fraction

from harmonic_planner.export.values import frequency_scale, number_text, quantity
from harmonic_planner.filters.topologies import REGISTRY


def printable(text: str) -> str:
    """Replace what would move a cursor or colour a screen: control and unprintable characters.

    Parameters
    ----------
    text : str
        Text from a scenario, a kit or an error.

    Returns
    -------
    str
        The text on one line, every such character shown as ``?``.
    """
    return "".join(character if character.isprintable() else "?" for character in text.replace("\n", " "))


def span(frequency_hz: tuple[float, float], digits: int = 4) -> str:
    """Write a line's span with its unit.

    Parameters
    ----------
    frequency_hz : tuple of float
        Lowest and highest frequency [Hz].
    digits : int
        Significant digits of each end.

    Returns
    -------
    str
        For instance ``59.4–60.6 MHz``, or one frequency where both ends are the same.
    """
    scale, unit = frequency_scale(frequency_hz[1])
    return f"{span_of(frequency_hz, scale, digits)} {unit}"


def span_of(frequency_hz: tuple[float, float], scale: float, digits: int = 4) -> str:
    """Write a line's span in a unit that stands elsewhere.

    Parameters
    ----------
    frequency_hz : tuple of float
        Lowest and highest frequency [Hz].
    scale : float
        The unit [Hz].
    digits : int
        Significant digits of each end.

    Returns
    -------
    str
        For instance ``59.4–60.6``, or one number where both ends are the same.
    """
    low, high = (number_text(edge / scale, digits) for edge in frequency_hz)
    return high if low == high else f"{low}–{high}"


def decibels(value: float | None, *, signed: bool = False) -> str:
    """Write a level, a loss or a margin to a tenth of a decibel.

    Parameters
    ----------
    value : float or None
        The number [dB, dBc or dBm].
    signed : bool
        Write a plus sign, as for a margin.

    Returns
    -------
    str
        For instance ``-61.5`` or ``+3.2``; ``–`` for none, ``inf`` where there is no bound.
    """
    if value is None or math.isnan(value):
        return "–"
    if math.isinf(value):
        return "inf" if value > 0 else "-inf"
    rounded = round(value, 1) + 0.0  # adding zero takes the sign off -0.0
    return f"{rounded:+.1f}" if signed else f"{rounded:.1f}"


def line_name(line: Fraction) -> str:
    """Write a line's harmonic number: ``3`` or ``1/2``."""
    return str(line)


def filter_name(family: str | None, order: int | None) -> str:
    """Write family and order in a narrow column.

    Parameters
    ----------
    family : str or None
        ``butterworth``, ``chebyshev`` or None.
    order : int or None
        Number of resonators.

    Returns
    -------
    str
        For instance ``Cheb 5``; ``none`` without a filter.
    """
    if family is None or order is None:
        return "none"
    return f"{ {'butterworth': 'Butter', 'chebyshev': 'Cheb'}.get(family, family) } {order}"


def is_one_sided(topology: str | None) -> bool:
    """Tell a low-pass or high-pass, whose centre is its cut-off and whose bandwidth says nothing."""
    found = REGISTRY.get(topology or "")
    return found is not None and found.passes != "band"


def band_words(topology: str | None, *, bandwidth_hz: float, centre_hz: float) -> str:
    """Say where a filter passes.

    Parameters
    ----------
    topology : str or None
        Its circuit.
    bandwidth_hz, centre_hz : float
        Of a low-pass or high-pass the centre is the cut-off [Hz].

    Returns
    -------
    str
        For instance ``20.8 % at 219 MHz``, or ``cut-off 260 MHz``.
    """
    if is_one_sided(topology):
        return f"cut-off {quantity(centre_hz, 'Hz')}"
    return f"{100 * bandwidth_hz / centre_hz:.1f} % at {quantity(centre_hz, 'Hz')}"


def circuit_words(family: str, order: int, topology: str | None, resonator: float | None) -> str:
    """Name a filter's circuit.

    Parameters
    ----------
    family : str
    order : int
    topology : str or None
        None for the prototype itself.
    resonator : float or None
        What the topology leaves free: inductance [H] or capacitance [F].

    Returns
    -------
    str
        For instance ``Cheb 4 capacitive with 27 nH``.
    """
    words = f"{filter_name(family, order)} {topology or 'prototype'}"
    found = REGISTRY.get(topology or "")
    if resonator is None or found is None or found.free is None:
        return words
    return f"{words} with {quantity(resonator, 'H' if found.free == 'L' else 'F', 3)}"
