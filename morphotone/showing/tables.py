"""Tables to CSV (RFC 4180, UTF-8): numbers that are read back equal, text that no spreadsheet runs."""

from collections.abc import Mapping, Sequence
from itertools import accumulate, chain, pairwise, repeat
from math import isfinite
from typing import Any

import numpy as np
import orjson
import pandas as pd
from numpy.typing import NDArray

from morphotone.night.outcome import LINE_END, csv_cell, csv_line
from morphotone.questions.columns import Columns

# Stands before every row until all is written; no byte of a text in UTF-8 has this value.
_ROW = b"\xff"
# Cells written at once: as many as the processor's cache holds.
_AT_ONCE = 100_000
_EMPTY = orjson.Fragment(b"")


def csv_texts(tables: Sequence[Columns], names: Sequence[Sequence[str]]) -> list[bytes]:
    """Return the rows of each table as CSV without header, each row led by the table's own names.

    Parameters
    ----------
    tables : sequence of dict of str to sequence
        Column by column; all tables have the same columns. None and NaN are empty cells.
    names : sequence of sequence of str
        Per table the leading cells of its rows.
    """
    if not tables:
        return []
    lengths = [len(next(iter(table.values()))) for table in tables]
    leading = list(chain.from_iterable(map(repeat, map(_names, names), lengths)))
    text, starts = _rows(leading, [_together([table[column] for table in tables]) for column in tables[0]])
    bounds = starts[list(accumulate(lengths, initial=0))].tolist()
    return [text[start:end] for start, end in pairwise(bounds)]


def csv_rows(rows: Sequence[Mapping[str, Any]], names: Sequence[Sequence[str]]) -> list[bytes]:
    """Return each row as CSV, led by its names; for tables of one row, as `csv_texts` writes them.

    Parameters
    ----------
    rows : sequence of mapping of str to value
        All with the same columns.
    names : sequence of sequence of str
        Per row its leading cells.
    """
    if not rows:
        return []
    columns = [[row[column] for row in rows] for column in rows[0]]
    text, starts = _rows(list(map(_names, names)), columns)
    return [text[start:end] for start, end in pairwise(starts.tolist())]


def csv_table(frame: pd.DataFrame) -> bytes:
    """Return a DataFrame as CSV with its header."""
    # Where pandas has a type of its own, its arrays would make whole numbers beside empty cells 3.0.
    columns = (
        column.to_numpy() if isinstance(column.dtype, np.dtype) else column.tolist()
        for _, column in frame.items()
    )
    first, *others = columns
    leading = [_leading(orjson.dumps([_cell(value)])[1:-1]) for value in _listed(first)]
    return csv_line(*map(str, frame.columns)).encode() + _rows(leading, others)[0]


def _rows(leading: Sequence[orjson.Fragment], columns: Sequence[Any]) -> tuple[bytes, NDArray[np.int64]]:
    """Write rows, some at a time.

    Parameters
    ----------
    leading : sequence of orjson.Fragment
        Per row what it starts with, as `_leading` gives it.
    columns : sequence of ndarray or list
        What follows.

    Returns
    -------
    text : bytes
        The rows, each ended by CRLF.
    starts : ndarray of int64, shape (rows + 1,)
        Where in the text each row starts, and where the last one ends.
    """
    height = _AT_ONCE // (1 + len(columns)) + 1
    texts, starts = [], [np.zeros(1, np.int64)]
    for row in range(0, len(leading), height):
        some = slice(row, row + height)
        text, ends = _written(leading[some], [_cells(column[some]) for column in columns])
        texts.append(text)
        starts.append(starts[-1][-1] + ends)
    return b"".join(texts), np.concatenate(starts)


def _written(
    leading: Sequence[orjson.Fragment], columns: Sequence[list[Any]]
) -> tuple[bytes, NDArray[np.int64]]:
    """Return rows as text, and where each ends.

    JSON's numbers are CSV's, and orjson writes them about twenty times as fast as `repr`; what JSON writes in
    another way than CSV comes as a fragment, which is copied as it is.
    """
    width = 1 + len(columns)
    cells: list[Any] = [None] * (len(leading) * width)
    cells[::width] = leading
    for place, column in enumerate(columns, 1):
        cells[place::width] = column
    cells.append(_leading(b""))
    text = np.frombuffer(bytearray(orjson.dumps(cells)), np.uint8)
    marks = np.flatnonzero(text == _ROW[0])
    # A comma and a mark stand between two rows: room for the line end.
    text[marks[1:] - 1], text[marks[1:]] = LINE_END.encode()
    return text[marks[0] + 1 : marks[-1] + 1].tobytes(), marks[1:] - marks[0]


def _names(names: Sequence[str]) -> orjson.Fragment:
    """Return what a row starts with: names, as CSV."""
    return _leading(csv_line(*names).removesuffix(LINE_END).encode())


def _leading(text: bytes) -> orjson.Fragment:
    """Return what a row starts with so that the row's place can be found."""
    return orjson.Fragment(_ROW + text)


def _together(columns: Sequence[Any]) -> Any:
    """Return one column of many tables as one; what is not of one kind becomes a list, so that 3 stays 3."""
    kinds = {column.dtype if isinstance(column, np.ndarray) else None for column in columns}
    if len(kinds) == 1 and kinds != {None}:
        return np.concatenate(columns)
    return list(chain.from_iterable(map(_listed, columns)))


def _listed(column: Any) -> Any:
    return column.tolist() if isinstance(column, np.ndarray) else column


def _cells(column: Any) -> list[Any]:
    """Return values as what orjson writes as CSV: numbers as they are, else fragments."""
    values: list[Any] = _listed(column)
    if isinstance(column, np.ndarray) and column.dtype.kind in "fiu":
        finite = np.isfinite(column)
        for place in () if finite.all() else np.flatnonzero(~finite).tolist():
            values[place] = _cell(values[place])
        return values
    if set(map(type, values)) == {str}:
        fragments = {text: _cell(text) for text in set(values)}
        return [fragments[text] for text in values]
    return [_cell(value) for value in values]


def _cell(value: Any) -> Any:
    """Return one value as what orjson writes as CSV."""
    if value is None or value is pd.NA or value != value:
        return _EMPTY
    if isinstance(value, str):
        return orjson.Fragment(csv_cell(value).encode())
    if type(value) is int and abs(value) < 2**63:
        return value
    if isinstance(value, float) and isfinite(value):
        return float(value)
    return orjson.Fragment(str(value).encode())
