"""What was seen in a file: the record of one finding, and the catalogue of the kinds there are."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Severity = Literal["note", "doubtful", "unfit"]


@dataclass(frozen=True)
class Kind:
    """One kind of finding."""

    severity: Severity  #: what such a finding is worth, where no threshold says otherwise
    title: str  #: a few words for tables and headings
    effect: str  #: what it does to electrotonus, one sentence
    explanation: str  #: what it is, where it comes from and what to do about it


CATALOGUE: dict[str, Kind] = {
    "separator_odd": Kind(
        severity="note",
        title="commas or semicolons between columns",
        effect="None: the numbers are read as they stand.",
        explanation=(
            "The SWC standard separates columns by white space. This file uses commas or semicolons, "
            "as a spreadsheet does when it saves a table; every one of them was read as a separator. "
            "If commas were meant as decimal points, the columns are wrong and the file must be written anew."
        ),
    ),
    "columns_extra": Kind(
        severity="note",
        title="more than seven columns",
        effect="None: the first seven columns are read, the others are not.",
        explanation=(
            "An SWC sample has seven columns: number, type, x, y, z, radius, parent. Some programs add their "
            "own after these. They are left aside."
        ),
    ),
}


@dataclass(frozen=True)
class Finding:
    """One observation about a file, at the first place where it holds."""

    code: str  #: key of `CATALOGUE`
    sentence: str  #: what was seen, with numbers, in words a physiologist understands
    line: int | None = None  #: 1-based line of the first place
    sample: int | None = None  #: sample number, as in the file, of the first place
    count: int = 1  #: number of places in the file
    severity: Severity = ""  # type: ignore[assignment]  #: the catalogue's, unless a threshold says otherwise

    def __post_init__(self) -> None:
        """Fill the severity from the catalogue; an unknown code is a KeyError."""
        if not self.severity:
            object.__setattr__(self, "severity", CATALOGUE[self.code].severity)
