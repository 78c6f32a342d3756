"""What a table is before it is text, and how a frequency is written in a column's name."""

from typing import Any

from morphotone.cable.electrotonus import Electrotonus

#: Column name to its values, arrays or lists of one length: cheap to make for thousands of small tables.
Columns = dict[str, Any]


def hz_suffix(hz: float) -> str:
    """Return "" at 0 Hz, else such as "_100Hz"."""
    return f"_{hz:.12g}Hz" if hz else ""


def case_suffixes(electrotonus: Electrotonus) -> list[str]:
    """Return the suffix of each case."""
    return [hz_suffix(case.hz) for case in electrotonus.cases]
