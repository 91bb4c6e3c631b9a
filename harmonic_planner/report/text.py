"""Numbers and names as people read them."""

import math
from fractions import Fraction

_PREFIXES = ((1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"), (1e-12, "p"))


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


def quantity(value: float, unit: str, digits: int = 4) -> str:
    """Write a quantity with an engineering prefix.

    Parameters
    ----------
    value : float
        In SI units.
    unit : str
        The unit's symbol.
    digits : int
        Significant digits.

    Returns
    -------
    str
        For instance ``61.2 MHz``; ``–`` for a value that is not finite.

    Examples
    --------
    >>> quantity(61.2e6, "Hz"), quantity(0.199e-12, "F", 3)
    ('61.2 MHz', '0.199 pF')
    """
    if not math.isfinite(value):
        return "–"
    if value == 0:
        return f"0 {unit}"
    smallest = 1.0 if unit == "Hz" else 1e-12
    usable = [pair for pair in _PREFIXES if pair[0] >= smallest]
    scale, prefix = next((pair for pair in usable if abs(value) >= pair[0]), usable[-1])
    return f"{number_text(value / scale, digits)} {prefix}{unit}"


def number_text(value: float, digits: int = 4) -> str:
    """Round to significant digits, without an exponent and without trailing zeros.

    Parameters
    ----------
    value : float
        A finite number.
    digits : int
        Significant digits.

    Returns
    -------
    str
        For instance ``61.2``.
    """
    decimals = max(0, digits - 1 - math.floor(math.log10(abs(value)))) if value else 0
    text = f"{value:.{decimals}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


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


def frequency_scale(highest_hz: float) -> tuple[float, str]:
    """Choose the unit of a frequency axis or a column.

    Parameters
    ----------
    highest_hz : float
        The highest frequency to be written [Hz].

    Returns
    -------
    tuple
        What to divide by [Hz] and the unit's symbol.
    """
    return next(((scale, f"{prefix}Hz") for scale, prefix in _PREFIXES if highest_hz >= scale), (1.0, "Hz"))


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
