"""Rules of a scenario's own kinds of value: lines, circuits, limits, and the ranges that several keys share."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from harmonic_planner.filters import topologies
from harmonic_planner.quantities import LEVEL_DBM, LINE_DBC, OFFSET, PERCENT, RATIO_DB, Kind
from harmonic_planner.rules import Choice, Number, RefusedError, Rule, Text, nearest

LAST_LINE = 100
LARGEST_FACTOR = 12
LARGEST_DENOMINATOR = 12


@dataclass(frozen=True)
class LineKey(Rule):
    """A key of `lines`: a harmonic number, not the wanted line itself."""

    fractions: bool
    first: int

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        if self.fractions:
            return f'a line such as "2" or "1/2" in lowest terms, up to {LAST_LINE}, and not "1", the carrier'
        return f"a harmonic number, a whole number from {self.first} to {LAST_LINE}"

    def parse(self, value: object) -> Fraction | int:
        """Read a line's name."""
        if not isinstance(value, str) or re.fullmatch(r"[1-9][0-9]{0,2}(/[1-9][0-9]?)?", value) is None:
            raise self.refuse()
        line = Fraction(value)
        if str(line) != value or line > LAST_LINE or line.denominator > LARGEST_DENOMINATOR:
            raise self.refuse()
        if line == 1 if self.fractions else line.denominator > 1 or line < self.first:
            raise self.refuse()
        return line if self.fractions else int(line)

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"type": "string", "pattern": "^[1-9][0-9]*(/[1-9][0-9]*)?$" if self.fractions else "^[1-9][0-9]*$"}


@dataclass(frozen=True)
class TopologyRule(Rule):
    """A circuit's name; with `several` also "auto", the name of a group of circuits, or a list of names."""

    several: bool

    @property
    def words(self) -> tuple[str, ...]:
        """Names that may stand here or in a list."""
        groups = tuple(name for name in topologies.ALIASES if name != "auto") if self.several else ()
        return (*topologies.REGISTRY, *groups)

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        if self.several:
            return '"auto", ' + ", ".join(f'"{w}"' for w in self.words) + ", or a list of these names"
        return Choice(self.words).allowed

    def parse(self, value: object) -> Any:
        """Read a name, or a list of names."""
        names = value if self.several and isinstance(value, list) else [value]
        if self.several and value == "auto":
            return ("auto",)
        for name in names:
            if name not in self.words:
                near = nearest(name, self.words) if isinstance(name, str) else None
                raise self.refuse(f'did you mean "{near}"?' if near else "")
        if not names or len(set(names)) != len(names):
            raise self.refuse("each once")
        return tuple(names) if self.several else value

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        one = Choice(self.words).schema()
        if not self.several:
            return one
        return {"anyOf": [{"const": "auto"}, one, {"type": "array", "items": one, "minItems": 1, "uniqueItems": True}]}


@dataclass(frozen=True)
class FilterWord(Choice):
    """The words that stand in place of a given filter's table."""

    words: tuple[str, ...] = ("plan", "none")

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return '"plan", "none" or a table { family, order, centre, bandwidth }, { touchstone } or { table }'


@dataclass(frozen=True)
class LimitRule(Rule):
    """A limit relative to the carrier, or the name of a rule that makes one of the carrier's power."""

    level: Kind
    word: str

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return f'{self.level.allowed}, or "{self.word}"'

    def parse(self, value: object) -> Any:
        """Read the value: dBc, or the word itself."""
        if value == self.word:
            return self.word
        try:
            return self.level.parse(value)
        except RefusedError as error:
            raise self.refuse(error.reason) from None

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"anyOf": [self.level.schema(), {"const": self.word}]}


GAIN = Kind("a gain", "dB", "-9 dB", -80.0, 40.0)
RIPPLE = RATIO_DB.between(0.01, 0.5, example="0.1 dB")
REFLECTION = Number(0, 1, below=True)
QUALITY = Number(1, 1e6)
ORDER = Number(1, 9, whole=True)
SHARE = PERCENT.between(0, 100, above=True)
FILE = Text("the path of a file", 300)
LIMIT = LINE_DBC.between(-250, 0, below=True, example="-60 dBc")
SM329 = "SM.329 category A"
ANY_LIMIT = LimitRule(LIMIT, SM329)
LIMIT_DBM = LEVEL_DBM.between(-150, 80, example="-30 dBm")
SEPARATION = OFFSET.between(0, 1e12, example="10 MHz")
SOURCE_LINE = LineKey(fractions=True, first=1)
DEVICE_LINE = LineKey(fractions=False, first=1)
AMPLIFIER_LINE = LineKey(fractions=False, first=2)
