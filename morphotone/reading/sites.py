"""A file of synapse sites to columns: which cell, place and synapse; bad rows are turned away alone."""

from __future__ import annotations

import hashlib
import os
from collections.abc import Sequence
from dataclasses import dataclass, fields, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from morphotone.errors import ReadingError
from morphotone.reading.records import decoded, fitted, records, refuse_twice, shown
from morphotone.reading.site_rows import (
    COORDINATES,
    KNOWN,
    NEEDED,
    WHOLE,
    Floats,
    Rows,
    check_all,
)
from morphotone.reading.swc import read_bytes


@dataclass(frozen=True)
class TurnedAwaySite:
    """One row that is not ranked, and why."""

    line: int  #: line of the file, from 1
    cell: str  #: as read
    site: str  #: as read
    reason: str  #: short code
    sentence: str  #: file, line, what was read, what was expected, the way out


@dataclass(frozen=True, eq=False)
class Sites:
    """Rows of a file of sites, in file order; every number is finite, every place given in one way.

    Attributes
    ----------
    file : str
        The file's name.
    line : ndarray of int64, shape (rows,)
        Line of the file, from 1, on which the row starts.
    cell, site, group : ndarray of object, shape (rows,)
        Text as read, without white space around it; `group` is empty where none is given.
    way : ndarray of object, shape (rows,)
        How the place is given: "sample", "space" or "branch".
    sample : ndarray of int64, shape (rows,)
        Sample number; -1 unless that is the way.
    fraction : ndarray, shape (rows,)
        Share of the frustum from the sample toward its parent, 0 to 1; 0 where none is given.
    position : ndarray, shape (rows, 3)
        x, y, z, µm; NaN unless that is the way.
    branch : ndarray of int64, shape (rows,)
        Branch number as in ``branches.csv``; -1 unless that is the way.
    along_um : ndarray, shape (rows,)
        Path along the branch from its start, µm, not negative; NaN unless that is the way.
    g_peak_nS, driving_force_mV, rise_ms, decay_ms : ndarray, shape (rows,)
        The synapse; NaN where not given.
    others : dict of str to ndarray of object, shape (rows,)
        The file's further columns, text untouched.
    """

    file: str
    line: NDArray[np.int64]
    cell: NDArray[np.object_]
    site: NDArray[np.object_]
    group: NDArray[np.object_]
    way: NDArray[np.object_]
    sample: NDArray[np.int64]
    fraction: NDArray[np.float64]
    position: NDArray[np.float64]
    branch: NDArray[np.int64]
    along_um: NDArray[np.float64]
    g_peak_nS: NDArray[np.float64]
    driving_force_mV: NDArray[np.float64]
    rise_ms: NDArray[np.float64]
    decay_ms: NDArray[np.float64]
    others: dict[str, NDArray[np.object_]]

    def __len__(self) -> int:
        return len(self.line)

    def at(self, rows: NDArray[np.int64] | NDArray[np.bool_]) -> Sites:
        """Return some of the rows, by index or mask."""
        arrays = {
            f.name: getattr(self, f.name)[rows] for f in fields(self) if f.name not in ("file", "others")
        }
        return replace(self, **arrays, others={name: text[rows] for name, text in self.others.items()})

    def turned_away(self, reasons: Sequence[str], sentences: Sequence[str]) -> tuple[TurnedAwaySite, ...]:
        """Return these rows as turned away, each for its reason and with its sentence after file and line."""
        rows = zip(self.line.tolist(), self.cell, self.site, reasons, sentences, strict=True)
        return tuple(
            TurnedAwaySite(line, cell, site, reason, f"{self.file}: line {line}: {sentence}")
            for line, cell, site, reason, sentence in rows
        )


@dataclass(frozen=True, eq=False)
class SitesFile:
    """What a file of sites holds: each row is a site or turned away."""

    sites: Sites  #: rows that can be looked for in a cell
    turned_away: tuple[TurnedAwaySite, ...]  #: the others, in file order
    rows_in: int  #: both together
    sha256: str  #: of the file's bytes, hexadecimal


def read_sites(path: str | os.PathLike[str]) -> SitesFile:
    """Read a file of synapse sites.

    Parameters
    ----------
    path : path-like
        A CSV with the columns ``cell`` and ``site`` and those of at least one way to give a place.

    Raises
    ------
    ReadingError
        As `parse_sites`, or when the file cannot be read at all (reason ``unreadable``).
    """
    return parse_sites(read_bytes(path), os.fspath(path))


def parse_sites(data: bytes, file: str) -> SitesFile:
    """Turn the bytes of a file of sites into columns; a row that cannot be used is turned away alone.

    Parameters
    ----------
    data : bytes
        Content of the file: CSV (RFC 4180) in UTF-8, with or without byte-order mark.
    file : str
        Its name, for messages.

    Raises
    ------
    ReadingError
        When the file is no such table: not UTF-8 (reason ``not_utf8``), a quotation mark without its pair
        (``quotes``), empty (``empty``), a column missing (``columns_missing``) or twice (``columns_twice``).

    Notes
    -----
    Lines without any text between their commas are no rows.
    """
    header, lines, found = records(decoded(data, file), file)
    _check_header(header, lines.pop(0), file)
    width = len(header)
    rows = Rows(pd.DataFrame([fitted(record, width) for record in found], columns=header, dtype=object))
    rows.turn_away(
        [i for i, record in enumerate(found) if any(field.strip() for field in record[width:])],
        "fields_extra",
        f"more than {width} fields",
        f"{width} as in the header; put quotation marks around text with commas",
    )
    way, numbers = check_all(rows)
    sites = _sites(file, np.array(lines, np.int64), rows, way, numbers)
    away = np.array(sorted(rows.verdicts), np.int64)
    verdicts = [rows.verdicts[row] for row in away.tolist()]
    turned_away = sites.at(away).turned_away([v.reason for v in verdicts], [v.sentence for v in verdicts])
    good = np.setdiff1d(np.arange(len(lines)), away)
    return SitesFile(sites.at(good), turned_away, len(lines), hashlib.sha256(data).hexdigest())


def _sites(
    file: str, line: NDArray[np.int64], rows: Rows, way: NDArray[np.object_], numbers: dict[str, Floats]
) -> Sites:
    """Return all rows as columns, those to be turned away too."""
    whole = {name: np.where(np.isnan(numbers[name]), -1, numbers[name]).astype(np.int64) for name in WHOLE}
    others = [name for name in rows.text.columns.tolist() if name not in KNOWN]
    return Sites(
        file=file,
        line=line,
        cell=rows.known("cell"),
        site=rows.known("site"),
        group=rows.known("group"),
        way=way,
        sample=whole["sample"],
        fraction=np.nan_to_num(numbers["fraction"]),
        position=np.stack([numbers[name] for name in COORDINATES], axis=1),
        branch=whole["branch"],
        along_um=numbers["along_um"],
        g_peak_nS=numbers["g_peak_nS"],
        driving_force_mV=numbers["driving_force_mV"],
        rise_ms=numbers["rise_ms"],
        decay_ms=numbers["decay_ms"],
        others={name: rows.text[name].to_numpy(object) for name in others},
    )


def _check_header(header: list[str], line: int, file: str) -> None:
    missing = [name for name in ("cell", "site") if name not in header]
    given = any(set(columns) <= set(header) for columns in NEEDED.values())
    if missing or not given:
        expected = "cell, site, and sample, or x_um, y_um and z_um, or branch and along_um"
        raise ReadingError(
            f"{file}: line {line}: read the columns {shown(header)!r}, expected {expected}, separated by "
            "commas; name the columns so in the first line with text",
            "columns_missing",
        )
    refuse_twice(header, line, file)
