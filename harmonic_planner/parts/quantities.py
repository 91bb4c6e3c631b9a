"""Text with units to SI numbers and back, for kit files and for what a person reads of a part."""

from __future__ import annotations

import math
from typing import Literal

from quantiphy import QuantiPhyError, Quantity

Unit = Literal["H", "F", "Hz", "ohm", "%", "A", "V", "ppm/K"]

EXAMPLES: dict[Unit, str] = {"H": "10 nH", "F": "2.2 pF", "Hz": "250 MHz", "ohm": "0.1 ohm", "%": "5 %"}
EXAMPLES |= {"A": "0.6 A", "V": "50 V", "ppm/K": "30 ppm/K"}
_SPELLINGS: dict[Unit, tuple[str, ...]] = {
    "H": ("H",),
    "F": ("F",),
    "Hz": ("Hz",),
    "ohm": ("ohm", "Ohm", "Ω", "Ω"),  # the Greek letter and the ohm sign
    "%": ("%",),
    "A": ("A",),
    "V": ("V",),
}
_STEPS: dict[str, tuple[tuple[float, str], ...]] = {
    "H": ((1e-3, "mH"), (1e-6, "µH"), (0.0, "nH")),
    "F": ((1e-6, "µF"), (1e-9, "nF"), (0.0, "pF")),
    "Hz": ((1e9, "GHz"), (1e6, "MHz"), (1e3, "kHz"), (0.0, "Hz")),
}
_SIZES = {"mH": 1e-3, "µH": 1e-6, "nH": 1e-9, "µF": 1e-6, "nF": 1e-9, "pF": 1e-12}
_SIZES |= {"GHz": 1e9, "MHz": 1e6, "kHz": 1e3, "Hz": 1.0}


def quantity(text: object, unit: Unit) -> float:
    """Read a text with a unit as an SI number.

    Parameters
    ----------
    text : object
        What stands in the file; only a text such as ``"10 nH"`` is taken.
    unit : {"H", "F", "Hz", "ohm", "%", "A", "V", "ppm/K"}
        The unit it must have.

    Returns
    -------
    float
        SI value, finite; per cent as a fraction, ppm/K as a fraction per kelvin.

    Raises
    ------
    ValueError
        For anything else, saying what is expected.

    Notes
    -----
    The unit is compared letter by letter: ``600 mhz`` reads as 0.6 of an unknown unit *hz* and is refused. Zero and
    negative numbers pass here; their limits belong to the key.

    Examples
    --------
    >>> quantity("10 nH", "H"), quantity("2 %", "%")
    (1e-08, 0.02)
    """
    expected = f"expected a text with the unit {unit}, such as {EXAMPLES[unit]!r}"
    if not isinstance(text, str):
        raise ValueError(expected)
    if unit == "ppm/K":
        return _per_million_per_kelvin(text, expected)
    try:
        parsed = Quantity(text)
    except QuantiPhyError as error:
        raise ValueError(expected) from error
    if parsed.name or parsed.units not in _SPELLINGS[unit]:
        raise ValueError(expected)
    value = float(parsed)
    if not math.isfinite(value):
        raise ValueError(f"expected a finite number with the unit {unit}")
    return value / 100 if unit == "%" else value


def _per_million_per_kelvin(text: str, expected: str) -> float:
    """Read ``30 ppm/K``; the first p would be a scale factor to the general reader."""
    number = text.strip().removesuffix("ppm/K")
    try:
        value = float(number) if number != text.strip() else math.nan
    except ValueError as error:
        raise ValueError(expected) from error
    if not math.isfinite(value):
        raise ValueError(expected)
    return value * 1e-6


def readable(value: float, unit: Literal["H", "F", "Hz"], digits: int = 3) -> str:
    """Write a value as the trade does: inductors from nH up, capacitors from pF up.

    Parameters
    ----------
    value : float
        SI value, not negative [henry, farad or hertz].
    unit : {"H", "F", "Hz"}
        Its unit.
    digits : int
        Significant digits.

    Returns
    -------
    str
        For example ``0.33 nH``.

    Examples
    --------
    >>> readable(0.33e-9, "H"), readable(1.07e9, "Hz"), readable(65e-12, "F")
    ('0.33 nH', '1.07 GHz', '65 pF')
    """
    if value == math.inf:
        return f"unlimited {unit}"
    name = next(name for least, name in _STEPS[unit] if value >= least)
    number = value / _SIZES[name]
    whole_digits = math.floor(math.log10(number)) + 1 if number > 0 else 1
    text = f"{number:.{max(digits - whole_digits, 0)}f}"
    if "." in text:
        text = text.rstrip("0").rstrip(".")
    return f"{text} {name}"
