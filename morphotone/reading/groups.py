"""A table of groups: which class, animal, age … each cell is of, as its author wrote it."""

import os

import pandas as pd

from morphotone.errors import ReadingError
from morphotone.reading.records import decoded, fitted, records, refuse_twice, shown
from morphotone.reading.swc import read_bytes

#: Columns that may say which cell a row is about; the first of them that is there does.
CELL_COLUMNS = ("cell", "file")


def read_groups(path: str | os.PathLike[str]) -> pd.DataFrame:
    """Read a table of groups.

    Parameters
    ----------
    path : path-like
        A CSV with the column ``cell``, or else ``file``, and any others.

    Returns
    -------
    DataFrame
        As `parse_groups` gives it.

    Raises
    ------
    ReadingError
        As `parse_groups`, or when the file cannot be read at all (reason ``unreadable``).
    """
    return parse_groups(read_bytes(path), os.fspath(path))


def groups_of(frame: pd.DataFrame) -> pd.DataFrame:
    """Return a table of groups that is a DataFrame already as `parse_groups` returns one.

    Raises
    ------
    ReadingError
        No column is named for the cell (reason ``columns_missing``).
    """
    names = [str(name).strip() for name in frame]
    _check_columns(names, "the table of groups")
    text = frame.map(lambda value: "" if pd.isna(value) else str(value).strip()).astype(object)
    return text.set_axis(names, axis=1).set_axis(pd.RangeIndex(1, len(frame) + 1, name="line"))


def parse_groups(data: bytes, file: str) -> pd.DataFrame:
    """Turn the bytes of a table of groups into text by column.

    Parameters
    ----------
    data : bytes
        Content of the file: CSV (RFC 4180) in UTF-8, with or without byte-order mark.
    file : str
        Its name, for messages.

    Returns
    -------
    DataFrame
        The file's columns as text without white space around it, empty where nothing stands; the index
        ``line`` is the line of the file, from 1, on which the row starts.

    Raises
    ------
    ReadingError
        When the file is no such table: not UTF-8 (reason ``not_utf8``), a quotation mark without its pair
        (``quotes``), empty (``empty``), without a column for the cell (``columns_missing``), a column twice
        (``columns_twice``), a row with more fields than the header (``fields_extra``).
    """
    header, lines, found = records(decoded(data, file), file)
    first = lines.pop(0)
    _check_columns(header, f"{file}: line {first}")
    refuse_twice(header, first, file)
    for line, record in zip(lines, found, strict=True):
        if any(field.strip() for field in record[len(header) :]):
            raise ReadingError(
                f"{file}: line {line}: read more than {len(header)} fields, expected {len(header)} as in the "
                "header; put quotation marks around text with commas",
                "fields_extra",
            )
    rows = [[field.strip() for field in fitted(record, len(header))] for record in found]
    return pd.DataFrame(rows, columns=header, index=pd.Index(lines, name="line", dtype="int64"), dtype=object)


def _check_columns(header: list[str], where: str) -> None:
    if not any(name in header for name in CELL_COLUMNS):
        raise ReadingError(
            f"{where}: read the columns {shown(header)!r}, expected one named cell or file, and the groups, "
            "separated by commas; name the columns so in the first line with text",
            "columns_missing",
        )
