"""A CSV table that a person made to its header and records, each with the line it starts on."""

import csv
import io
from collections.abc import Sequence

from morphotone.errors import ReadingError
from morphotone.reading.diagnosis import quote


def decoded(data: bytes, file: str) -> str:
    """Return the text of a table in UTF-8, with or without byte-order mark.

    Raises
    ------
    ReadingError
        It is not UTF-8 (reason ``not_utf8``).
    """
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise ReadingError(
            f"{file}: line {line}: read the byte {data[error.start]:#04x}, expected text in UTF-8; save the "
            "table as CSV in UTF-8",
            "not_utf8",
        ) from error


def records(text: str, file: str) -> tuple[list[str], list[int], list[list[str]]]:
    """Return the header's names, the lines on which header and rows start, and the rows' fields.

    Lines without any text between their commas are no rows.

    Raises
    ------
    ReadingError
        A quotation mark without its pair (reason ``quotes``), or no text at all (``empty``).
    """
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    lines, found, starts = [], [], 1
    try:
        for record in reader:
            if any(field.strip() for field in record):
                lines.append(starts)
                found.append(record)
            starts = reader.line_num + 1
    except csv.Error as error:
        raise ReadingError(
            f"{file}: line {starts}: read fields that cannot be told apart ({error}), expected quotation "
            'marks in pairs around a field, "" for one inside it; mend the line',
            "quotes",
        ) from error
    if not found:
        raise ReadingError(f"{file}: read no line with text, expected a header and rows", "empty")
    header = [name.strip() for name in found[0]]
    while header and not header[-1]:
        header.pop()
    return header, lines, found[1:]


def refuse_twice(header: Sequence[str], line: int, file: str) -> None:
    """Raise ReadingError (reason ``columns_twice``) unless every column has a name of its own."""
    twice = [name or "without a name" for name in dict.fromkeys(header) if header.count(name) > 1 or not name]
    if twice:
        raise ReadingError(
            f"{file}: line {line}: read the columns {shown(header)!r}, expected each under its own name; "
            f"rename the column {twice[0]}",
            "columns_twice",
        )


def shown(header: Sequence[str]) -> str:
    """Return the names of the columns for a sentence, shortened."""
    return quote(",".join(header).encode())


def fitted(record: Sequence[str], width: int) -> list[str]:
    """Return as many fields as the header has; a short row ends in empty ones."""
    return [*record[:width], *[""] * (width - len(record))]
