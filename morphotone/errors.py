"""The one family of errors a user can meet; each message is a sentence with the way out."""

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True)
class Fault:
    """One thing wrong at one place of an input file.

    Attributes
    ----------
    line : int or None
        Line number, from 1; None when the fault has no line.
    read : str
        The text that was read there.
    expected : str
        What should have stood there.
    """

    line: int | None
    read: str
    expected: str

    def __str__(self) -> str:
        place = "" if self.line is None else f"line {self.line}: "
        return f"{place}read {self.read!r}, expected {self.expected}"


class MorphotoneError(Exception):
    """Base of every error that is the input's or the call's, not the program's."""


class TurnedAwayError(MorphotoneError):
    """A file was turned away, and the run was told to stop at the first."""


class ReadingError(MorphotoneError):
    """A file that cannot be read as a reconstruction.

    Parameters
    ----------
    message : str
        One sentence: what was read, what was expected, the way out.
    reason : str
        Short code for ``turned_away.csv``.
    faults : sequence of Fault
        The first faults of that kind, in line order.
    """

    def __init__(self, message: str, reason: str, faults: Sequence[Fault] = ()) -> None:
        super().__init__(message)
        self.reason = reason
        self.faults = tuple(faults)


class AssumptionError(MorphotoneError):
    """Assumptions that cannot be used: unknown key, wrong type, sign or unit."""


class ResultsError(MorphotoneError):
    """A results folder that cannot be written to, or that belongs to another run."""
