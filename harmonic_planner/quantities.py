"""Quantities of a scenario file: text with a unit, turned into SI at this one place.

A quantity is text, a number followed by its unit ("612 MHz", "-60 dBc", "1.5 %"), and the unit must be one that the
rule expects, upper and lower case included: read freely, "600 mhz" would be 0.6 of an unknown unit "hz" and "3 mdB"
three thousandths of a decibel. What comes out is SI: hertz, ohm, radian, a fraction for per cent; dB, dBc, dBm stay.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, replace
from typing import Any, Literal

from quantiphy import Quantity

from harmonic_planner.rules import RefusedError, Rule, inside, range_text

_NUMBER = r"[+\-−]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+\-]?[0-9]+)?"
_SPLIT = re.compile(rf"\s*({_NUMBER})\s*(.*?)\s*", re.DOTALL)


def _number(digits: str, unit: str) -> float:
    """Return the number with its prefix put in; behind an exponent, as in 1e3 MHz, quantiphy would not see one."""
    if "e" in digits.lower():
        return float(Quantity(digits)) * float(Quantity(f"1 {unit}"))
    return float(Quantity(f"{digits} {unit}"))


@dataclass(frozen=True)
class Kind(Rule):
    """A quantity: text with a unit.

    Notes
    -----
    `low` and `high` are in the written unit without prefix (hertz, per cent, degrees), so that the ends of a range
    are not moved by the conversion. `divisor` is the written unit's count in one SI unit: 100 for per cent.
    """

    noun: str
    unit: str
    example: str
    low: float
    high: float
    above: bool = False
    """`low` itself is excluded."""
    below: bool = False
    """`high` itself is excluded."""
    prefixes: tuple[str, ...] = ()
    aliases: tuple[str, ...] = ()
    prefix_aliases: tuple[str, ...] = ()
    """Other spellings of a prefix, read but not named in a message."""
    divisor: float = 1.0

    @property
    def units(self) -> tuple[str, ...]:
        """Every spelling of the unit that is allowed, with its prefixes."""
        prefixes = ("", *self.prefixes, *self.prefix_aliases)
        return tuple(p + u for u in (self.unit, *self.aliases) for p in prefixes)

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        ends = range_text(self._written(self.low), self._written(self.high), above=self.above, below=self.below)
        return f'{self.noun} {ends}, such as "{self.example}"'

    def between(self, low: float, high: float, *, above: bool = False, below: bool = False, example: str = "") -> Kind:
        """Return the same kind of quantity with another range, in the written unit.

        Parameters
        ----------
        low, high : float
            Ends of the range, in the written unit without prefix.
        above, below : bool
            Whether the lower and the upper end are excluded.
        example : str
            A value inside the range, for the message; the present one if empty.

        Returns
        -------
        Kind
        """
        return replace(self, low=low, high=high, above=above, below=below, example=example or self.example)

    def parse(self, value: object) -> float:
        """Read a quantity.

        Parameters
        ----------
        value : object
            What the file holds; only text is allowed.

        Returns
        -------
        float
            In SI (dB, dBc, dBm and dBc/Hz as they are).

        Raises
        ------
        ValueError
            With what is allowed and what is wrong.
        """
        if isinstance(value, int | float) and not isinstance(value, bool):
            raise self.refuse("write it as text with its unit")
        if not isinstance(value, str):
            raise self.refuse()
        split = _SPLIT.fullmatch(value)
        if split is None:
            raise self.refuse("not a number followed by a unit")
        digits, unit = split.groups()
        if not unit:
            raise self.refuse("the unit is missing")
        if unit not in self.units:
            known = self.units[: 1 + len(self.prefixes)]
            raise self.refuse(f'the unit "{unit}" is not {" or ".join(known)}, upper and lower case count')
        number = _number(digits, unit)
        if not math.isfinite(number) or not inside(number, self.low, self.high, above=self.above, below=self.below):
            raise self.refuse()
        return number / self.divisor

    def write(self, value: float) -> str:
        """Write an SI value as text with its unit, to twelve digits."""
        return self._written(value * self.divisor)

    def _written(self, number: float) -> str:
        if self.prefixes:
            text = str(Quantity(number, self.unit).render(prec="full"))
            if text.rpartition(" ")[2] in self.units:  # and not with a prefix that is not read, as in mHz
                return text
        return f"{number:.12g} {self.unit}"

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        units = "|".join(re.escape(u) for u in self.units)
        return {"type": "string", "pattern": rf"^\s*{_NUMBER}\s*(?:{units})\s*$", "examples": [self.example]}


@dataclass(frozen=True)
class Pair(Rule):
    """Two quantities of one kind, the lower first; with `single`, one alone stands for both."""

    kind: Kind
    example: tuple[str, str]
    single: bool = False
    equal: bool = False
    """Both ends may be the same."""

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        low, high = self.example
        pair = f'["{low}", "{high}"], the lower first'
        if self.single:
            return f"{self.kind.allowed}, or a span {pair}"
        return f"two levels {pair}, each {self.kind.allowed}"

    def parse(self, value: object) -> tuple[float, float]:
        """Read the value, in SI."""
        if self.single and not isinstance(value, list):
            try:
                return (self.kind.parse(value),) * 2
            except RefusedError as error:
                raise self.refuse(error.reason) from None
        if not isinstance(value, list) or len(value) != 2:
            raise self.refuse()
        try:
            low, high = (self.kind.parse(end) for end in value)
        except RefusedError as error:
            raise self.refuse(error.reason) from None
        if low > high:
            raise self.refuse("the first is above the second")
        if low == high and not self.equal:
            raise self.refuse("both are the same")
        return low, high

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        one = self.kind.schema()
        pair = {"type": "array", "items": one, "minItems": 2, "maxItems": 2}
        return {"anyOf": [one, pair]} if self.single else pair


@dataclass(frozen=True)
class Either(Rule):
    """A rule, or a word that stands for a value of its own."""

    word: str
    meaning: float | None
    rule: Rule

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return f'"{self.word}" or {self.rule.allowed}'

    def parse(self, value: object) -> Any:
        """Read the value, in SI."""
        if value == self.word:
            return self.meaning
        try:
            return self.rule.parse(value)
        except RefusedError as error:
            raise self.refuse(error.reason) from None

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"anyOf": [{"const": self.word}, self.rule.schema()]}


@dataclass(frozen=True)
class Width:
    """A bandwidth as it was given: in hertz, or as a fraction of the centre."""

    value: float
    relative: bool

    def hz(self, centre_hz: float) -> float:
        """Return the bandwidth [Hz] around `centre_hz` [Hz]."""
        return self.value * centre_hz if self.relative else self.value


@dataclass(frozen=True)
class WidthRule(Rule):
    """A bandwidth: a frequency, or a percentage of the centre."""

    absolute: Kind
    share: Kind

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return f"{self.absolute.allowed}, or {self.share.allowed}"

    def parse(self, value: object) -> Width:
        """Read the value, in SI."""
        relative = isinstance(value, str) and value.rstrip().endswith(self.share.unit)
        kind = self.share if relative else self.absolute
        try:
            return Width(kind.parse(value), relative)
        except RefusedError as error:
            raise self.refuse(error.reason) from None

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"anyOf": [self.absolute.schema(), self.share.schema()]}


@dataclass(frozen=True)
class Reactance:
    """The value of a resonator's free element: an inductance [H] or a capacitance [F]."""

    value: float
    unit: Literal["H", "F"]


@dataclass(frozen=True)
class ReactanceRule(Rule):
    """An inductance or a capacitance, told apart by the unit."""

    inductance: Kind
    capacitance: Kind

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return f"{self.inductance.allowed}, or {self.capacitance.allowed}"

    def parse(self, value: object) -> Reactance:
        """Read the value, in SI."""
        farad = isinstance(value, str) and value.rstrip()[-1:] in ("F", "f")  # "6 pf" is a misspelt capacitance
        try:
            if farad:
                return Reactance(self.capacitance.parse(value), "F")
            return Reactance(self.inductance.parse(value), "H")
        except RefusedError as error:
            raise self.refuse(error.reason) from None

    def write(self, reactance: Reactance) -> str:
        """Write the value as text with its unit."""
        return (self.inductance if reactance.unit == "H" else self.capacitance).write(reactance.value)

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"anyOf": [self.inductance.schema(), self.capacitance.schema()]}


_HERTZ = ("k", "M", "G", "T")
_MICRO = ("u", "\u03bc")
"""The letter that stands for it, and the Greek one; messages show the micro sign."""
FREQUENCY = Kind("a frequency", "Hz", "600 MHz", 1e3, 1e12, prefixes=_HERTZ)
OFFSET = Kind("an offset", "Hz", "10 kHz", 0.0, 1e10, above=True, prefixes=_HERTZ)
RESISTANCE = Kind("a resistance", "ohm", "50 ohm", 1.0, 1e3, prefixes=("k",), aliases=("Ω", "\u2126"))
INDUCTANCE = Kind("an inductance", "H", "8 nH", 1e-11, 0.1, prefixes=("p", "n", "\u00b5", "m"), prefix_aliases=_MICRO)
CAPACITANCE = Kind("a capacitance", "F", "6 pF", 1e-14, 1e-4, prefixes=("f", "p", "n", "\u00b5"), prefix_aliases=_MICRO)
REACTANCE = ReactanceRule(INDUCTANCE, CAPACITANCE)
LEVEL_DBM = Kind("a level", "dBm", "10 dBm", -150.0, 80.0)
LINE_DBC = Kind("a level", "dBc", "-60 dBc", -250.0, 0.0, below=True)
RATIO_DB = Kind("a ratio", "dB", "3 dB", 0.0, 60.0)
NOISE_DBC_HZ = Kind("a noise level", "dBc/Hz", "-150 dBc/Hz", -250.0, 0.0)
PERCENT = Kind("a percentage", "%", "10 %", 0.0, 100.0, divisor=100.0)
ANGLE = Kind("an angle", "deg", "70 deg", 0.0, 180.0, above=True, aliases=("°",), divisor=180.0 / math.pi)
