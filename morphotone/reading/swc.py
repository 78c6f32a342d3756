"""SWC bytes to arrays: a C parser where the text is healthy, a slow diagnosis where it is not.

The order of things: bytes of the file (perhaps compressed) -> plain text -> header and body ->
seven columns by the C parser -> checks on whole columns -> row of each parent. Whatever fails on
the way sends the text to `morphotone.reading.diagnosis`, which reads oddities and names faults.
"""

from __future__ import annotations

import csv
import gzip
import io
import os
import re
import zlib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from morphotone.errors import Fault, ReadingError
from morphotone.reading.diagnosis import (
    COLUMNS,
    LARGEST_LENGTH,
    LARGEST_WHOLE,
    NUMBER,
    WHOLE_COLUMNS,
    diagnose,
    quote,
)
from morphotone.reading.findings import Finding

# The largest reconstructions hold some million samples, about 100 MB of text. Twenty times that is no
# neuron, and a compressed file that grows beyond it would take the memory of a whole night's run.
SIZE_LIMIT_BYTES = 2 * 1024**3

# Columns of numbers shrink three- to tenfold; the most that gzip can do is 1,032-fold.
_MOST_SHRUNK = 100
_ANY_SMALL_FILE = 10_000_000  # bytes; may have shrunk as it likes, since it harms nobody

_GZIP_SIGNATURE = b"\x1f\x8b"
_UTF8_MARK = b"\xef\xbb\xbf"
_DOS_END = b"\x1a"  # end-of-file character that programs of the DOS age wrote
_UTF16_MARKS = (b"\xff\xfe", b"\xfe\xff")

# From here on the C parser goes piece by piece, which then saves more than the pieces cost.
_LARGE_TEXT = 8_000_000  # bytes

# Numbers are read as Python reads them. From 3.1 on pandas does so by itself, and warns who asks for it.
_PANDAS = tuple(int(part) for part in pd.__version__.split(".")[:2])
EXACT: dict[str, Any] = {"float_precision": "round_trip"} if _PANDAS < (3, 1) else {}

_WHOLE = [COLUMNS.index(name) for name in WHOLE_COLUMNS]

_HEADER = re.compile(rb"(?:[ \t]*(?:#[^\r\n]*)?(?:\r\n|\r|\n))*")
_COMMENT = re.compile(rb"#([^\r\n]*)")
_FIRST_SAMPLE = re.compile(rb"[ \t]*" + NUMBER + rb"(?:[ \t]+" + NUMBER + rb"){6}[ \t]*(?=[#\r\n]|\Z)")


@dataclass(frozen=True, eq=False)
class SwcTable:
    """The samples of one file, in file order."""

    number: NDArray[np.int64]  #: (n,) sample numbers as in the file
    kind: NDArray[np.int64]  #: (n,) type codes
    position: NDArray[np.float64]  #: (n, 3) in the file's unit
    radius: NDArray[np.float64]  #: (n,) in the file's unit
    parent: NDArray[np.int64]  #: (n,) row of the parent, -1 at a root
    line: NDArray[np.int64]  #: (n,) 1-based line in the file
    comments: tuple[str, ...]  #: comments in file order, without "#"
    findings: tuple[Finding, ...]  #: odd separators, extra columns


def read_bytes(path: str | os.PathLike[str], name: str | None = None) -> bytes:
    """Read the bytes of a file as they are on disk (`parse` decompresses them).

    Parameters
    ----------
    path : path-like
        The file.
    name : str, optional
        Its name for messages; the path if not given.

    Returns
    -------
    bytes

    Raises
    ------
    ReadingError
        Reason "unreadable": absent, forbidden, no ordinary file, or larger than `SIZE_LIMIT_BYTES`.
    """
    place = Path(path)
    name = name or str(path)
    try:
        if place.exists() and not place.is_file():  # a pipe would keep the night waiting for ever
            raise _unreadable(name, "it is a folder or device")
        if place.stat().st_size > SIZE_LIMIT_BYTES:
            raise _unreadable(name, f"it is larger than {SIZE_LIMIT_BYTES:,} bytes")
        return place.read_bytes()
    except OSError as error:
        raise _unreadable(name, error.strerror or str(error)) from error


def parse(data: bytes, name: str) -> SwcTable:
    """Turn the bytes of an SWC file, plain or gzipped, into arrays.

    Parameters
    ----------
    data : bytes
        Content of the file.
    name : str
        The file's name, for messages.

    Returns
    -------
    SwcTable
        At least two samples; numbers are unique, every parent exists and is another sample.

    Raises
    ------
    ReadingError
        With the line, the text read and what was expected, for everything that is no such table.

    Notes
    -----
    Any negative parent marks a root, also where sample numbers start at 0.
    """
    text = _plain_text(data, name)
    start = _end_of_header(text)
    table = _healthy_table(text, start) or _diagnosed_table(text, start, name)
    if len(table.number) == 1:
        row = text.splitlines()[int(table.line[0]) - 1].strip()
        fault = Fault(int(table.line[0]), quote(row), "at least two samples, as one is a soma without cable")
        raise ReadingError(f"{name}: {fault}; leave the file out", "single_sample", [fault])
    return table


def _unreadable(name: str, why: str) -> ReadingError:
    return ReadingError(
        f"{name}: could not be read: {why[:1].lower() + why[1:]}; check the file or leave it out",
        "unreadable",
    )


def _plain_text(data: bytes, name: str) -> bytes:
    """Decompress, and take off a byte-order mark and a DOS end of file."""
    if data.startswith(_GZIP_SIGNATURE) or name.lower().endswith(".gz"):
        data = _decompress(data, name)
    if data.startswith(_UTF16_MARKS):
        data = data.decode("utf-16", "replace").encode()
    return data.removeprefix(_UTF8_MARK).removesuffix(_DOS_END)


def _decompress(data: bytes, name: str) -> bytes:
    limit = min(SIZE_LIMIT_BYTES, max(_MOST_SHRUNK * len(data), _ANY_SMALL_FILE))
    try:
        with gzip.GzipFile(fileobj=io.BytesIO(data)) as stream:
            text = stream.read(limit + 1)
    except (OSError, EOFError, zlib.error) as error:
        raise _unreadable(name, f"broken gzip data ({error})") from error
    if len(text) > limit:
        raise _unreadable(
            name,
            f"it decompresses to more than {limit:,} bytes, which no reconstruction compressed to "
            f"{len(data):,} bytes does; decompress it and look",
        )
    return text


def _end_of_header(text: bytes) -> int:
    """Return where the comments and blank lines before the first sample end."""
    header = _HEADER.match(text)
    return header.end() if header else 0


def _healthy_table(text: bytes, start: int) -> SwcTable | None:
    """Read a text that follows the standard; None if it does not."""
    columns = _columns(text, start)
    if columns is None or not _columns_make_sense(columns):
        return None
    number, kind, parent_number = columns[_WHOLE].astype(np.int64)
    parent = _rows_of_parents(number, parent_number)
    line = _lines(text, start, len(number))
    if parent is None or line is None:
        return None
    return SwcTable(
        number=number,
        kind=kind,
        position=np.ascontiguousarray(columns[2:5].T),
        radius=columns[5].copy(),  # a view would hold all seven columns in memory
        parent=parent,
        line=line,
        comments=_comments(text, start),
        findings=(),
    )


def _diagnosed_table(text: bytes, start: int, name: str) -> SwcTable:
    """Read a text that has oddities; a ReadingError names its faults."""
    diagnosis = diagnose(text, name)
    values = diagnosis.values
    number, parent_number = values[:, 0].astype(np.int64), values[:, 6].astype(np.int64)
    parent = _rows_of_parents(number, parent_number)
    assert parent is not None, "diagnose() lets no broken parent through"
    return SwcTable(
        number=number,
        kind=values[:, 1].astype(np.int64),
        position=values[:, 2:5].copy(),
        radius=values[:, 5].copy(),
        parent=parent,
        line=diagnosis.line,
        comments=_comments(text, start),
        findings=diagnosis.findings,
    )


def _columns(text: bytes, start: int) -> NDArray[np.float64] | None:
    """Parse seven columns of numbers in C, shape (7, n); None if the text is anything else.

    The first sample is looked at beforehand: seven numbers there exclude what the C parser would
    take in silence (an eighth column as row labels, a column of truth values as 1 and 0).
    """
    first = _FIRST_SAMPLE.match(text, start)
    if first is None:
        return None
    # Single spaces parse in two thirds of the time; if a later line differs, that parse fails.
    single_spaced = first.group().count(b" ") == len(COLUMNS) - 1
    for separator in (" ", r"\s+") if single_spaced else (r"\s+",):
        stream = io.BytesIO(text)  # the same memory until somebody writes to it
        stream.seek(start)
        try:
            frame: pd.DataFrame = pd.read_csv(
                stream,
                sep=separator,
                comment="#",
                header=None,
                names=range(len(COLUMNS)),
                dtype=float,
                na_filter=False,
                quoting=csv.QUOTE_NONE,
                engine="c",
                low_memory=len(text) > _LARGE_TEXT,
                encoding_errors="replace",
                **EXACT,
            )
        except ValueError:  # the parser's errors are ValueErrors too
            continue
        return frame.to_numpy().T  # the frame's own block: nothing is copied
    return None


def _columns_make_sense(columns: NDArray[np.float64]) -> bool:
    """Check that all is finite (NaN fails too) and that numbers, types and parents are whole."""
    whole = columns[_WHOLE]
    return bool(
        columns.min() > -LARGEST_LENGTH
        and columns.max() < LARGEST_LENGTH
        and whole.min() > -LARGEST_WHOLE
        and whole.max() < LARGEST_WHOLE
        and (np.rint(whole) == whole).all()
        and columns[0].min() >= 0
    )


def _rows_of_parents(number: NDArray[np.int64], parent_number: NDArray[np.int64]) -> NDArray[np.int64] | None:
    """Return the row of every parent, -1 for a root; None if numbers or parents are faulty."""
    rows = np.arange(len(number))
    root = parent_number < 0
    if (number == number[0] + rows).all():  # as nearly every file is numbered: no search is needed
        row, repeated = parent_number - number[0], False
        absent = ((row < 0) | (row >= len(rows))) & ~root
    else:
        order = np.argsort(number, kind="stable")
        ordered = number[order]
        row = order[np.minimum(np.searchsorted(ordered, parent_number), len(order) - 1)]
        repeated = bool((ordered[1:] == ordered[:-1]).any())
        absent = (number[row] != parent_number) & ~root
    itself = (parent_number == number).any()
    return None if repeated or absent.any() or itself else np.where(root, -1, row)


def _lines(text: bytes, start: int, samples: int) -> NDArray[np.int64] | None:
    """Return the 1-based line of every sample; None if lines and samples do not match."""
    before = len(text[:start].splitlines())
    codes = np.frombuffer(text, dtype=np.uint8, offset=start)
    ends = _line_ends(codes, returns=text.find(b"\r", start) >= 0)
    if np.count_nonzero(ends) + (not ends[-1]) == samples:  # every line of the body is a sample
        return np.arange(before + 1, before + 1 + samples)
    starts = np.concatenate(([0], np.flatnonzero(ends[:-1]) + 1))
    marks = np.flatnonzero(ends | (codes > ord(" ")))  # what is not padding
    first = np.append(codes[marks], ord("\n"))[np.searchsorted(marks, starts)]
    lines: NDArray[np.int64] = np.flatnonzero((first > ord(" ")) & (first != ord("#"))) + before + 1
    return lines if len(lines) == samples else None


def _line_ends(codes: NDArray[np.uint8], *, returns: bool) -> NDArray[np.bool_]:
    """Mark the last character of every line end: LF, and with `returns` CR LF or CR too."""
    ends: NDArray[np.bool_] = codes == ord("\n")
    if returns:
        alone = codes == ord("\r")
        alone[:-1] &= ~ends[1:]
        ends |= alone
    return ends


def _comments(text: bytes, start: int) -> tuple[str, ...]:
    """Return all comments in file order; a body without "#" is not searched twice."""
    found = _COMMENT.findall(text if text.find(b"#", start) >= 0 else text[:start])
    return tuple(_decode(comment).strip() for comment in found)


def _decode(comment: bytes) -> str:
    try:
        return comment.decode("utf-8")
    except UnicodeDecodeError:
        return comment.decode("latin-1")
