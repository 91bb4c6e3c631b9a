"""Values as people read them, in tables of any kind: engineering prefixes, parts to buy, what a part bears."""

import math
from collections.abc import Sequence

from harmonic_planner.model import ElementReport

_PREFIXES = ((1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"), (1e-12, "p"))


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


def to_buy(bought: Sequence[float], unit: str) -> str:
    """Write what is bought for one element; several parts stand in parallel.

    Parameters
    ----------
    bought : sequence of float
        The parts' values in SI units.
    unit : str
        ``H`` or ``F``.

    Returns
    -------
    str
        Empty where nothing is known.

    Examples
    --------
    >>> to_buy([10e-12, 2.2e-12], "F"), to_buy([8.2e-9], "H"), to_buy([], "H")
    ('10 pF + 2.2 pF', '8.2 nH', '')
    """
    return " + ".join(quantity(value, unit) for value in bought)


def stress_share(part: ElementReport) -> float | None:
    """Return what a part bears over what it may, the larger of voltage and current.

    Parameters
    ----------
    part : ElementReport
        A part with its stress and ratings, as far as they are known.

    Returns
    -------
    float or None
        1 at a rating; None where no rating is known for what is known of the stress.
    """
    pairs = ((part.peak_v, part.rated_v), (part.rms_a, part.rated_a))
    return max((borne / rated for borne, rated in pairs if borne is not None and rated), default=None)
