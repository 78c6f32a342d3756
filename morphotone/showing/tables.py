"""Tables to CSV: RFC 4180, numbers with enough digits to be read back equal."""

import csv
import io
from collections.abc import Sequence
from itertools import chain
from typing import Any

import numpy as np
import pandas as pd

from morphotone.questions.columns import Columns

LINE_END = "\r\n"


def csv_texts(tables: Sequence[Columns], names: Sequence[Sequence[str]]) -> list[str]:
    """Return the rows of each table as CSV text without header, each row led by the table's own names.

    All tables must have the same columns; they are written in one go, which is what makes many small
    tables cheap.

    Parameters
    ----------
    tables : sequence of dict of str to sequence
        Column by column; None is an empty cell. Cells must not hold line breaks.
    names : sequence of sequence of str
        Per table the leading cells of its rows.
    """
    if not tables:
        return []
    together = pd.DataFrame({column: _together([table[column] for table in tables]) for column in tables[0]})
    lines = together.to_csv(header=False, index=False, lineterminator=LINE_END).split(LINE_END)
    texts = []
    first = 0
    for table, leading in zip(tables, names, strict=True):
        prefix = csv_line(leading).removesuffix(LINE_END)
        last = first + len(next(iter(table.values())))
        texts.append("".join(f"{prefix},{line}{LINE_END}" for line in lines[first:last]))
        first = last
    return texts


def csv_line(cells: Sequence[str]) -> str:
    """Return one CSV record, line end included."""
    text = io.StringIO(newline="")
    csv.writer(text, lineterminator=LINE_END).writerow(cells)
    return text.getvalue()


def _together(columns: Sequence[Any]) -> Any:
    """Return one column of many tables as one; lists stay objects, so that 3 beside None stays 3."""
    if all(isinstance(column, np.ndarray) for column in columns):
        return np.concatenate(columns)
    return pd.Series(list(chain.from_iterable(columns)), dtype=object)
