"""Plain values of a scenario file: numbers, words, true or false; each rule says what it allows.

A rule stands in the annotation of a pydantic field, ``Annotated[int, Number(1, 9, whole=True)]``, and serves for three
things: it reads the value, words the error and writes the JSON Schema.
"""

from __future__ import annotations

import difflib
from abc import ABC, abstractmethod
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Any

from pydantic_core import core_schema


class RefusedError(ValueError):
    """A value that a rule does not allow: what it allows and, behind it, what is wrong."""

    def __init__(self, allowed: str, reason: str) -> None:
        super().__init__(f"must be {allowed}" + (f"; {reason}" if reason else ""))
        self.reason = reason


class Rule(ABC):
    """What one key of a scenario may be."""

    @property
    @abstractmethod
    def allowed(self) -> str:
        """What is allowed, in words that follow "must be"."""

    @abstractmethod
    def parse(self, value: object) -> Any:
        """Return the value in SI; raise RefusedError with what is allowed."""

    @abstractmethod
    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of what is allowed."""

    def refuse(self, reason: str = "") -> RefusedError:
        """Return the error to raise for a value that this rule does not allow."""
        return RefusedError(self.allowed, reason)

    def __get_pydantic_core_schema__(self, _source: object, _handler: object) -> core_schema.CoreSchema:
        return core_schema.no_info_plain_validator_function(self.parse)

    def __get_pydantic_json_schema__(self, _schema: object, _handler: object) -> dict[str, Any]:
        return self.schema()


def range_text(low: str, high: str, *, above: bool, below: bool) -> str:
    """Write a range in words; `above` and `below` exclude its ends."""
    return (f"above {low} up to " if above else f"from {low} to ") + ("below " if below else "") + high


def inside(number: float, low: float, high: float, *, above: bool, below: bool) -> bool:
    """Whether `number` lies in a range; `above` and `below` exclude its ends."""
    return (low < number if above else low <= number) and (number < high if below else number <= high)


@dataclass(frozen=True)
class Number(Rule):
    """A plain number, or a whole one."""

    low: float
    high: float
    whole: bool = False
    above: bool = False
    below: bool = False

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        ends = range_text(f"{self.low:.12g}", f"{self.high:.12g}", above=self.above, below=self.below)
        return f"a {'whole' if self.whole else 'plain'} number {ends}"

    def parse(self, value: object) -> float:
        """Read the value."""
        if isinstance(value, str):
            raise self.refuse("write it without quotes")
        if isinstance(value, bool) or not isinstance(value, int if self.whole else int | float):
            raise self.refuse()
        if not inside(value, self.low, self.high, above=self.above, below=self.below):  # NaN is inside nothing
            raise self.refuse()
        return value if self.whole else float(value)

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        low, high = "exclusiveMinimum" if self.above else "minimum", "exclusiveMaximum" if self.below else "maximum"
        return {"type": "integer" if self.whole else "number", low: self.low, high: self.high}


@dataclass(frozen=True)
class Flag(Rule):
    """True or false."""

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return "true or false, without quotes"

    def parse(self, value: object) -> bool:
        """Read the value."""
        if not isinstance(value, bool):
            raise self.refuse()
        return value

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"type": "boolean"}


@dataclass(frozen=True)
class Text(Rule):
    """One line of text."""

    noun: str
    longest: int

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return f"{self.noun}: one line of text of 1 to {self.longest} characters"

    def parse(self, value: object) -> str:
        """Read the value."""
        if not isinstance(value, str) or not value.isprintable() or not 1 <= len(value.strip()) <= self.longest:
            raise self.refuse()
        return value.strip()

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"type": "string", "minLength": 1, "maxLength": self.longest}


@dataclass(frozen=True)
class Names(Rule):
    """One line of text, or a list of such, each at most once."""

    text: Text

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return f"{self.text.allowed}, or a list of such, each at most once"

    def parse(self, value: object) -> tuple[str, ...]:
        """Read the value; one name alone is a list of one."""
        try:
            names = tuple(self.text.parse(name) for name in (value if isinstance(value, list) else [value]))
        except RefusedError as error:
            raise self.refuse(error.reason) from None
        if not names or len(set(names)) != len(names):
            raise self.refuse()
        return names

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        one = self.text.schema()
        return {"anyOf": [one, {"type": "array", "items": one, "minItems": 1, "uniqueItems": True}]}


@dataclass(frozen=True)
class Choice(Rule):
    """One of some words."""

    words: tuple[str, ...]

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return "one of " + ", ".join(f'"{w}"' for w in self.words)

    def parse(self, value: object) -> str:
        """Read the value."""
        if value not in self.words:
            near = nearest(value, self.words) if isinstance(value, str) else None
            raise self.refuse(f'did you mean "{near}"?' if near else "")
        return str(value)

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"enum": list(self.words)}


@dataclass(frozen=True)
class Several(Rule):
    """A list of words, each at most once."""

    choice: Choice

    @property
    def allowed(self) -> str:
        """Words that follow "must be"."""
        return f"a list of {self.choice.allowed.replace('one of', 'one or more of')}, each at most once"

    def parse(self, value: object) -> tuple[str, ...]:
        """Read the value."""
        if not isinstance(value, list) or not value or any(word not in self.choice.words for word in value):
            raise self.refuse()
        if len(set(value)) != len(value):
            raise self.refuse()
        return tuple(value)

    def schema(self) -> dict[str, Any]:
        """Return the JSON Schema of it."""
        return {"type": "array", "items": self.choice.schema(), "minItems": 1, "uniqueItems": True}


def nearest(word: str, known: Iterable[str]) -> str | None:
    """Return the known word that `word` was probably meant to be, or None.

    Parameters
    ----------
    word : str
        What was written.
    known : iterable of str
        What there is.

    Returns
    -------
    str or None
    """
    plain = {k.lower().replace("_", "-"): k for k in known}
    match = difflib.get_close_matches(word.lower().replace("_", "-").replace(" ", "-"), plain, n=1, cutoff=0.7)
    return plain[match[0]] if match else None
