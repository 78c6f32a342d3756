"""What a key of an assumptions file accepts: a bounded number, a word, three factors, frequencies."""

import difflib
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from itertools import pairwise
from numbers import Real
from typing import Protocol

from morphotone.errors import AssumptionError


def shown(value: object) -> str:
    """Return a received value as TOML would write it, shortened for a sentence."""
    text = str(value).lower() if isinstance(value, bool) else repr(value)
    return text if len(text) <= 60 else f"{text[:57]}..."


class Kind(Protocol):
    """What a key accepts."""

    def accept(self, value: object, where: str) -> object:
        """Return the value in its settled type, or raise AssumptionError naming ``where``."""


@dataclass(frozen=True)
class Number:
    """A finite number, bounded below.

    Attributes
    ----------
    unit : str
        Unit of the number; empty for a ratio or a count.
    above : float
        The number must be greater; minus infinity for no bound.
    least : float
        The number must not be smaller; minus infinity for no bound.
    example : float
        A usable value for the refusal.
    whole : bool
        Whether it must be an integer.
    """

    unit: str = ""
    above: float = -math.inf
    least: float = -math.inf
    example: float = 1.0
    whole: bool = False

    @property
    def expected(self) -> str:
        """What is accepted, in words."""
        words = "a whole number" if self.whole else "a finite number"
        words += f" above {self.above:g}" if self.above > -math.inf else ""
        words += f" of {self.least:g} or more" if self.least > -math.inf else ""
        words += f" in {self.unit}" if self.unit else ""
        return f"{words}, such as {self.example!r}"

    def accept(self, value: object, where: str) -> float | int:
        """Return the value as float (int where whole)."""
        number = _finite(value)
        if number is None or not (number > self.above and number >= self.least):
            raise AssumptionError(f"{where} = {shown(value)}: expected {self.expected}.")
        if not self.whole:
            return number
        if number != int(number):
            raise AssumptionError(f"{where} = {shown(value)}: expected {self.expected}.")
        return int(number)


@dataclass(frozen=True)
class Word:
    """One of a few words."""

    choices: tuple[str, ...]

    def accept(self, value: object, where: str) -> str:
        """Return the word."""
        if isinstance(value, str) and value in self.choices:
            return value
        choices = ", ".join(f'"{word}"' for word in self.choices)
        raise AssumptionError(
            f"{where} = {shown(value)}: expected one of {choices}{nearest(value, self.choices)}."
        )


@dataclass(frozen=True)
class Triple:
    """Three numbers, for x, y and z."""

    number: Number

    def accept(self, value: object, where: str) -> tuple[float, ...]:
        """Return the three numbers."""
        items = _items(value)
        if items is None or len(items) != 3:
            raise AssumptionError(
                f"{where} = {shown(value)}: expected three numbers above 0, for x, y and z, "
                "such as [1.0, 1.0, 1.4]."
            )
        return tuple(
            self.number.accept(item, f"{where}, {axis}") for axis, item in zip("xyz", items, strict=True)
        )


@dataclass(frozen=True)
class Ascending:
    """Distinct numbers, kept in ascending order."""

    number: Number

    def accept(self, value: object, where: str) -> tuple[float, ...]:
        """Return the numbers, sorted."""
        items = _items(value)
        if items is None:
            raise AssumptionError(
                f"{where} = {shown(value)}: expected a list of numbers in {self.number.unit}, "
                "such as [10.0, 100.0], or [] for none."
            )
        numbers = sorted(self.number.accept(item, f"{where}, entry {i}") for i, item in enumerate(items, 1))
        for smaller, larger in pairwise(numbers):
            if smaller == larger:
                raise AssumptionError(
                    f"{where} gives {smaller!r} {self.number.unit} more than once: "
                    "expected each frequency once, so delete the repetition."
                )
        return tuple(numbers)


def _finite(value: object) -> float | None:
    """Return a real number as float; None for booleans, text, NaN, infinity and what overflows."""
    if isinstance(value, bool) or not isinstance(value, Real):
        return None
    try:
        number = float(value)
    except OverflowError:
        return None
    return number if math.isfinite(number) else None


def _items(value: object) -> tuple[object, ...] | None:
    """Return the items of a list, tuple or array; None for text, tables and single values."""
    return tuple(value) if isinstance(value, Iterable) and not isinstance(value, str | Mapping) else None


def nearest(word: object, known: Iterable[str]) -> str:
    """Return a phrase with the known word most like ``word``, or nothing."""
    close = difflib.get_close_matches(str(word), list(known), n=1)
    return f"; the nearest is {close[0]}" if close else ""
