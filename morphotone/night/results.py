"""What a run leaves for people: tables, each file whole or not there at all."""

from __future__ import annotations

import hashlib
import os
import re
import unicodedata
from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import ExitStack, contextmanager, suppress
from functools import partial
from pathlib import Path
from typing import Any, BinaryIO, TextIO

from morphotone.errors import ResultsError
from morphotone.night.ledger import Ledger
from morphotone.night.outcome import LINE_END

# Names that Windows gives to devices, whatever ending follows.
_DEVICE = re.compile(r"(con|prn|aux|nul|com\d|lpt\d)(\.|$)", re.IGNORECASE)
_PLAIN = frozenset("-_.,+=@#()[]{} '!&$;")  # besides letters and digits; allowed on every common disk
_LONGEST = 200  # bytes of one part of a path; the usual limit is 255, and endings are added


@contextmanager
def atomic(path: Path) -> Iterator[TextIO]:
    """Open a text file (UTF-8, line ends as written) that takes its place only when all is written.

    Until then, and if anything fails, the file that was there stays as it was.

    Raises
    ------
    ResultsError
        The disk refuses.
    """
    with _in_place_when_whole(path, partial(open, mode="w", encoding="utf-8", newline="")) as stream:
        yield stream


@contextmanager
def atomic_bytes(path: Path, *, wait: bool = True) -> Iterator[BinaryIO]:
    """Open a binary file that takes its place as a text file does with `atomic`.

    Without `wait` it may still be on its way to the disk then, and a power cut may take it.
    """
    with _in_place_when_whole(path, partial(open, mode="wb"), wait) as stream:
        yield stream


@contextmanager
def _in_place_when_whole(path: Path, opened: Callable[[Path], Any], wait: bool = True) -> Iterator[Any]:
    unfinished = path.with_name(f".{path.name}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        with opened(unfinished) as stream:
            yield stream
            if wait:
                stream.flush()
                os.fsync(stream.fileno())
        unfinished.replace(path)
    except OSError as error:
        raise ResultsError(
            f"{path}: cannot be written ({error.strerror}); make room or close the program that has it open, "
            "then start again: what is finished is kept"
        ) from error
    finally:
        # Where the disk refused to make the file it may refuse this too; the first error is the one to tell.
        with suppress(OSError):
            unfinished.unlink(missing_ok=True)


def export(ledger: Ledger, names: Sequence[str], tables: Mapping[str, str]) -> None:
    """Write tables from the ledger into its folder: all of them, or none if anything fails before the last.

    Parameters
    ----------
    ledger : Ledger
        Where the rows are.
    names : sequence of str
        The files whose rows are written, in this order: those found in this run. Rows of files that are
        gone from the input stay in the ledger and out of the tables.
    tables : mapping of str to str
        Table name to header line, without line end. "cells" becomes cells.csv.
    """
    with ExitStack() as unfinished:
        for table, header in tables.items():
            stream = unfinished.enter_context(atomic_bytes(ledger.folder / f"{table}.csv"))
            _write(stream, header, (text for _, text in ledger.rows(table, names)))


def export_each(ledger: Ledger, names: Sequence[str], table: str, header: str) -> None:
    """Write one table as a folder with one file per item, subfolders as in the input.

    "sub/x.swc" becomes "sub/x.swc.csv" below the table's folder; see `file_names`. The file of an item
    that the ledger knows but that has no rows now (gone from the input, turned away) is deleted; files
    that the ledger knows nothing of are left alone. The disk is not waited for, file by file: what a power
    cut takes can be exported again.

    Parameters
    ----------
    ledger, names
        As in `export`.
    table : str
        Name of the table and of the folder.
    header : str
        First line of each file, without line end.
    """
    folder = ledger.folder / table
    places = {name: folder / f"{file}.csv" for name, file in file_names(ledger.known()).items()}
    written = set()
    for name, text in ledger.rows(table, names):
        with atomic_bytes(places[name], wait=False) as stream:
            _write(stream, header, [text])
        written.add(places[name])
    for name in places:
        for file in spellings(name):
            stale = folder / f"{file}.csv"
            if stale not in written:
                stale.unlink(missing_ok=True)


def file_names(names: Iterable[str]) -> dict[str, str]:
    """Return, for each name, a relative path that every common disk takes and that no other name has.

    The name itself, where that will do. Characters that some disk refuses, and whatever could lead out of
    the folder, are written as %NN (the bytes in UTF-8); very long parts are cut; names that a disk which
    ignores case would hold for the same all get a mark, "~" and the start of their SHA-256.

    Parameters
    ----------
    names : iterable of str
        POSIX paths, in any order.
    """
    plain = {name: _plain_file(name) for name in names}
    often = Counter(file.casefold() for file in plain.values())
    return {name: file if often[file.casefold()] == 1 else _marked_file(name) for name, file in plain.items()}


def spellings(name: str) -> tuple[str, str]:
    """Return the paths that `file_names` may give a name, without and with a mark."""
    return _plain_file(name), _marked_file(name)


def _write(stream: BinaryIO, header: str, texts: Iterable[bytes]) -> None:
    stream.write((header + LINE_END).encode())
    stream.writelines(texts)


def _plain_file(name: str) -> str:
    return "/".join(_safe(part) for part in name.split("/"))


def _marked_file(name: str) -> str:
    return _plain_file(name) + _mark(name)


def _mark(text: str) -> str:
    # "~" is not among the plain characters, so that no unmarked name ends like this.
    return "~" + hashlib.sha256(text.encode()).hexdigest()[:12]


def _safe(part: str) -> str:
    """Return one part of a path, between slashes, as every disk takes it."""
    # macOS takes a letter with its accent apart and holds both spellings for the same: keep one of them.
    letters = part.isascii() or unicodedata.is_normalized("NFC", part)
    kept = [c in _PLAIN or (c.isalnum() and (letters or c.isascii())) for c in part]
    if part and (part[0] in ". " or _DEVICE.match(part)):
        kept[0] = False
    # A folder called x.csv would stand in the way of the file x.csv.
    if part and (part[-1] in ". " or part.lower().endswith(".csv")):
        kept[-1] = False
    safe = "".join(c if keep else _percent(c) for c, keep in zip(part, kept, strict=True)) or "%"
    if len(safe.encode()) <= _LONGEST:
        return safe
    return safe.encode()[: _LONGEST - 20].decode(errors="ignore") + _mark(part)


def _percent(character: str) -> str:
    return "".join(f"%{byte:02X}" for byte in character.encode())
