"""What is handed to a worker, and what it hands back."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

LINE_END = "\r\n"  # RFC 4180, section 2: each record ends with CRLF
_END = LINE_END.encode()
_QUOTED = re.compile('[",\r\n]')
_FORMULA = frozenset("=+-@\t\r")
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)(e[+-]?\d+)?", re.ASCII | re.IGNORECASE)
TURNED_AWAY = "turned_away"
TURNED_AWAY_HEADER = "file,reason,sentence"

Status = Literal["analysed", "turned away", "unchanged"]


@dataclass(frozen=True)
class Item:
    """One file to be worked on."""

    name: str  #: what tells it apart
    path: Path  #: where it is
    known_sha256: str | None  #: hash of the bytes whose outcome the ledger holds, None if it holds none


@dataclass(frozen=True)
class Outcome:
    r"""What became of one file.

    A file whose bytes have the hash `Item.known_sha256` needs no work: its outcome is "unchanged",
    and the ledger keeps what it holds.
    """

    name: str  #: the item's
    status: Status
    sha256: str = (
        ""  #: of the file's bytes, hexadecimal; empty if unknown: the file is then taken up next time
    )
    samples: int = 0  #: how many samples the file holds
    parts: Mapping[str, bytes] = field(default_factory=dict)
    """Table name to CSV lines in UTF-8 without header, each ended by "\r\n"."""
    reason: str = ""  #: short code, only for a file turned away
    sentence: str = ""  #: why, for a person, only for a file turned away

    def __post_init__(self) -> None:
        """Refuse what would spoil a table later on, far from its cause."""
        for table, text in self.parts.items():
            if text and not text.endswith(_END):
                raise ValueError(f"{self.name}: part {table!r} ends with {text[-2:]!r}, expected {_END!r}")
        if (self.status == "turned away") != bool(self.reason and self.sentence):
            raise ValueError(
                f"{self.name}: {self.status!r} with reason {self.reason!r} and {self.sentence!r}"
            )

    def rows(self) -> dict[str, bytes]:
        """Return the parts, with the line of turned_away.csv if there is one."""
        if self.status != "turned away":
            return dict(self.parts)
        return {**self.parts, TURNED_AWAY: csv_line(self.name, self.reason, self.sentence).encode()}


#: Works on a batch and returns one outcome per item; what is wrong with a file it says in the outcome.
BatchFunction = Callable[[list[Item]], list[Outcome]]


def csv_line(*fields: str) -> str:
    """Return texts as one CSV record."""
    return ",".join(map(csv_cell, fields)) + LINE_END


def csv_cell(text: str) -> str:
    """Return text as one cell of a CSV record, quoted where needed.

    What a spreadsheet would run as a formula gets an apostrophe before it; numbers stay numbers.
    """
    if text and unicodedata.normalize("NFKC", text[0]) in _FORMULA and not _NUMBER.fullmatch(text):
        text = f"'{text}"
    return '"' + text.replace('"', '""') + '"' if _QUOTED.search(text) else text
