"""The slow look at an SWC text that the fast parser would not take: read its oddities or name its faults."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.errors import Fault, ReadingError
from morphotone.reading.findings import Finding

COLUMNS = ("sample number", "type", "x", "y", "z", "radius", "parent")
SAMPLE_LINE = "seven columns (number, type, x, y, z, radius, parent)"
WHOLE_COLUMNS = ("sample number", "type", "parent")
LARGEST_LENGTH = 1e100  # beyond any neuron in any unit; squares and products of such lengths stay finite
LARGEST_WHOLE = 2.0**53  # above it a float64 no longer tells neighbouring whole numbers apart
FAULTS_SHOWN = 20  # enough to see a pattern, few enough for one cell of a table
TEXT_SHOWN = 80  # characters of a line that an error quotes: a sample fits, a page of binary does not

# Each digit can be matched in one way only, so that a megabyte of digits does not take quadratic time.
NUMBER = rb"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_NUMBER = re.compile(NUMBER)
_NOT_FINITE = re.compile(rb"[+-]?(?:na|n/a|nan|inf|infinity|null|none)", re.IGNORECASE)
_CONTROL_CHARACTER = re.compile(rb"[\x00-\x08\x0e-\x1f]")

_SIGNATURES = (
    (b"%PDF", "a PDF document"),
    (b"<", "HTML or XML"),
    (b"{", "JSON"),
    (b"PK\x03\x04", "a zip archive"),
    (b"\x89PNG", "a picture"),
    (b"\x89HDF", "an HDF5 file"),
)


class Row(NamedTuple):
    """One line that holds data."""

    line: int  # 1-based
    text: bytes  # without comment and padding
    fields: list[bytes]
    odd: bool  # commas or semicolons between the columns


class Flaw(NamedTuple):
    """One fault and the code of its kind."""

    reason: str
    fault: Fault


class Diagnosis(NamedTuple):
    """What the slow look read from a text without faults."""

    values: NDArray[np.float64]  # (n, 7), the seven columns
    line: NDArray[np.int64]  # (n,), 1-based line of each row
    findings: tuple[Finding, ...]


def diagnose(text: bytes, name: str) -> Diagnosis:
    """Read a text line by line, whatever its separators; name every fault if it has any.

    Parameters
    ----------
    text : bytes
        The file's text, decompressed and without byte-order mark.
    name : str
        The file's name for messages.

    Returns
    -------
    Diagnosis
        Seven columns per sample, with lines and findings.

    Raises
    ------
    ReadingError
        No sample, no SWC text at all, or faults in single lines or between lines.
    """
    rows = [
        Row(line, content, *_split(content))
        for line, raw in enumerate(text.splitlines(), start=1)
        if (content := raw.split(b"#", 1)[0].strip())
    ]
    if not rows:
        found = "only comments and blank lines" if text else "an empty file"
        raise ReadingError(f"{name}: read {found}, expected samples; leave the file out", "empty")
    flaws = [flaw for row in rows if (flaw := _flaw_in(row))]
    broken = {flaw.fault.line for flaw in flaws}
    flaws += _flaws_between([row for row in rows if row.line not in broken], complete=not broken)
    if flaws:
        _refuse_other_formats(rows, name)
        raise refusal(name, flaws)
    values = np.array([[float(field) for field in row.fields[:7]] for row in rows])
    lines = np.array([row.line for row in rows], dtype=np.int64)
    return Diagnosis(values, lines, _findings(rows))


def refusal(name: str, flaws: Iterable[Flaw]) -> ReadingError:
    """Put faults in line order and make one sentence of them.

    Parameters
    ----------
    name : str
        The file's name.
    flaws : iterable of Flaw
        At least one.

    Returns
    -------
    ReadingError
        Its reason is that of the first fault; it carries the first `FAULTS_SHOWN` faults.
    """
    ordered = sorted(flaws, key=lambda flaw: flaw.fault.line or 0)
    reason, first = ordered[0]
    message = f"{name}: {first}; mend the line or leave the file out"
    if len(ordered) > 1:
        alike = all(flaw.reason == reason for flaw in ordered)
        shown = ", ".join(str(flaw.fault.line) for flaw in ordered[:FAULTS_SHOWN])
        which = f", the first {FAULTS_SHOWN}" if len(ordered) > FAULTS_SHOWN else ""
        message += f" ({len(ordered)} {'such' if alike else 'faulty'} lines{which}: {shown})"
    return ReadingError(message, reason, [flaw.fault for flaw in ordered[:FAULTS_SHOWN]])


def quote(text: bytes) -> str:
    """Decode a line for an error message, without padding and shortened to `TEXT_SHOWN` characters."""
    shown = b" ".join(text[: 4 * TEXT_SHOWN].split()).decode("utf-8", "replace")
    return shown if len(shown) <= TEXT_SHOWN else shown[:TEXT_SHOWN] + "…"


def _split(content: bytes) -> tuple[list[bytes], bool]:
    """Split a line into fields, and say whether commas or semicolons separated them.

    Semicolons go first: where both occur, the commas are decimal points of a spreadsheet.
    A line whose commas do not separate seven fields is split at white space, so that a decimal
    comma is reported and never taken for a separator.
    """
    for mark in (b";", b","):
        if mark in content:
            fields = [field.strip() for field in content.rstrip(b" \t;,").split(mark)]
            if len(fields) >= len(COLUMNS):
                return fields, True
    return content.split(), False


def _refuse_other_formats(rows: Sequence[Row], name: str) -> None:
    """Say in one sentence that a file is something else, instead of listing a fault for each line."""
    first = rows[0].text
    kind = next((kind for signature, kind in _SIGNATURES if first.startswith(signature)), None)
    if kind is None and 2 * sum(map(_resembles_sample, rows)) < len(rows):
        binary = any(_CONTROL_CHARACTER.search(row.text) for row in rows)
        kind = "a binary file" if binary else "another format"
    if kind:
        expected = f"{SAMPLE_LINE}, but this looks like {kind}"
        fault = Fault(rows[0].line, quote(first), expected)
        raise ReadingError(f"{name}: {fault}; export it as SWC or leave the file out", "not_swc", [fault])


def _resembles_sample(row: Row) -> bool:
    """Tell a line of mostly numbers, which a faulty sample still is, from prose and markup."""
    fields = row.fields[: len(COLUMNS)]
    return 2 * sum(bool(_NUMBER.fullmatch(f) or _NOT_FINITE.fullmatch(f)) for f in fields) >= len(fields)


def _flaw_in(row: Row) -> Flaw | None:
    """Return the first fault that a line has by itself."""
    is_remark = not any(map(_NUMBER.fullmatch, row.fields))
    way_out = ", or # in front of a comment" if is_remark else ""
    if len(row.fields) < len(COLUMNS):
        return _flaw(row, "fields_missing", SAMPLE_LINE + way_out)
    for column, field in zip(COLUMNS, row.fields, strict=False):
        wrong = _wrong_with(column, field)
        if wrong:
            reason, expected = wrong
            return _flaw(row, reason, expected + way_out)
    return None


def _wrong_with(column: str, field: bytes) -> tuple[str, str] | None:
    """Return reason and expectation if a field cannot be what its column says."""
    is_number = _NUMBER.fullmatch(field) is not None
    if not is_number and not _NOT_FINITE.fullmatch(field):
        point = ", with a decimal point" if b"," in field else ""
        return "not_a_number", f"a number as {column}{point}"
    value = float(field) if is_number else math.nan
    if column not in WHOLE_COLUMNS:
        bound = f" below {LARGEST_LENGTH:g}" if is_number else ""
        return None if abs(value) < LARGEST_LENGTH else ("not_finite", f"a finite {column}{bound}")
    if not value.is_integer():
        return "not_whole", f"a whole number as {column}"
    if abs(value) >= LARGEST_WHOLE:
        return "not_whole", f"a whole number below 2^53 as {column}"
    if column == "sample number" and value < 0:
        return "not_whole", "a sample number of 0 or more (a negative parent marks a root)"
    return None


def _flaws_between(rows: Sequence[Row], *, complete: bool) -> list[Flaw]:
    """Return repeated numbers, samples that are their own parents, and absent parents.

    With `complete` false some lines could not be read, and a parent may be absent for that reason only.
    """
    flaws = []
    pairs = [(int(float(row.fields[0])), int(float(row.fields[6]))) for row in rows]
    first_line = {number: row.line for row, (number, _) in zip(reversed(rows), reversed(pairs), strict=True)}
    for row, (number, parent) in zip(rows, pairs, strict=True):
        if first_line[number] != row.line:
            expected = f"a sample number of its own ({number} stands on line {first_line[number]} already)"
            flaws.append(_flaw(row, "number_repeated", expected))
        elif parent == number:
            flaws.append(_flaw(row, "parent_self", "another sample as parent, or -1 for a root"))
        elif complete and parent >= 0 and parent not in first_line:
            flaws.append(_flaw(row, "parent_absent", f"sample {parent} in the file, or parent -1 for a root"))
    return flaws


def _flaw(row: Row, reason: str, expected: str) -> Flaw:
    return Flaw(reason, Fault(row.line, quote(row.text), expected))


def _findings(rows: Sequence[Row]) -> tuple[Finding, ...]:
    """Return what was read although the standard does not have it."""
    odd = [row for row in rows if row.odd]
    extra = [row for row in rows if len(row.fields) > len(COLUMNS)]
    kinds = (
        ("separator_odd", odd, "commas or semicolons stand between the columns and were read as separators"),
        ("columns_extra", extra, "there are more than seven columns; the first seven were read"),
    )
    return tuple(
        Finding(
            code,
            f"On {len(places)} of {len(rows)} lines {what}.",
            line=places[0].line,
            sample=int(float(places[0].fields[0])),
            count=len(places),
        )
        for code, places, what in kinds
        if places
    )
