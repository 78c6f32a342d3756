"""The reconstruction of one cell: samples in micrometres, parents before children, every repair on record."""

from __future__ import annotations

import hashlib
import math
import os
import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from morphotone.errors import AssumptionError, Fault, ReadingError
from morphotone.reading.findings import Finding
from morphotone.reading.swc import SwcTable, parse, read_bytes

DOMAIN_NAMES = {1: "soma", 2: "axon", 3: "basal", 4: "apical"}
LOOP_SHOWN = 10  # samples of a loop that an error names

_ENDING = re.compile(r"\.swc(\.gz)?\Z", re.IGNORECASE)


@dataclass(frozen=True, eq=False)
class Reconstruction:
    """One cell as traced; arrays are read-only."""

    cell: str  #: name of the cell
    file: str  #: name of the file
    sha256: str  #: of the file's bytes as on disk, hexadecimal
    number: NDArray[np.int64]  #: (n,) sample numbers as in the file
    kind: NDArray[np.int64]  #: (n,) type codes: 1 soma, 2 axon, 3 basal, 4 apical, others
    position: NDArray[np.float64]  #: (n, 3) um
    radius: NDArray[np.float64]  #: (n,) um
    parent: NDArray[np.int64]  #: (n,) index of the parent, less than the sample's own; -1 at a root
    line: NDArray[np.int64]  #: (n,) 1-based line in the file
    tree: NDArray[np.int64]  #: (n,) connected piece, numbered from 0 in the order of the roots
    comments: tuple[str, ...]  #: comments of the file, without "#"
    findings: tuple[Finding, ...]  #: what the reading noticed
    unit_um: float  #: length in um that the file's unit was taken for

    def __post_init__(self) -> None:
        """Make the arrays read-only."""
        for value in vars(self).values():
            if isinstance(value, np.ndarray):
                value.flags.writeable = False


def read(path: str | os.PathLike[str], *, unit_um: float = 1.0, cell: str | None = None) -> Reconstruction:
    """Read one SWC file, plain or gzipped.

    Parameters
    ----------
    path : path-like
        The file.
    unit_um : float, optional
        Length of the file's unit in um; the standard says 1.
    cell : str, optional
        Name of the cell; by default the file's name without its ending.

    Returns
    -------
    Reconstruction

    Raises
    ------
    ReadingError
        The file cannot be read as a reconstruction; the message names line, text and expectation.
    AssumptionError
        `unit_um` is not a positive number.
    """
    cell = _ENDING.sub("", Path(path).name) if cell is None else cell
    return reconstruct(read_bytes(path), file=os.fspath(path), cell=cell, unit_um=unit_um)


def reconstruct(
    data: bytes, *, file: str, cell: str, unit_um: float = 1.0, sha256: str | None = None
) -> Reconstruction:
    """Build a reconstruction from the bytes of an SWC file.

    Parameters
    ----------
    data : bytes
        Content of the file, plain or gzipped.
    file, cell : str
        Names of the file (for messages) and of the cell.
    unit_um : float, optional
        Length of the file's unit in um; positions and radii are multiplied with it.
    sha256 : str, optional
        Of the data, hexadecimal, where it is known already.

    Returns
    -------
    Reconstruction
        In file order if every parent stands before its children there, else in `parents_first` order.

    Raises
    ------
    ReadingError, AssumptionError
        As for `read`.
    """
    if not (math.isfinite(unit_um) and unit_um > 0):
        raise AssumptionError(f"read unit_um = {unit_um!r}, expected a positive length in um such as 0.001")
    table = parse(data, file)
    order, parent = _ordered(table, file)
    return Reconstruction(
        cell=cell,
        file=file,
        sha256=hashlib.sha256(data).hexdigest() if sha256 is None else sha256,
        number=table.number[order],
        kind=table.kind[order],
        position=table.position[order] * unit_um,
        radius=table.radius[order] * unit_um,
        parent=parent,
        line=table.line[order],
        tree=trees(parent),
        comments=table.comments,
        findings=table.findings,
        unit_um=float(unit_um),
    )


def domain_name(kind: int) -> str:
    """Return the name of a type code: soma, axon, basal, apical, else the number as text."""
    return DOMAIN_NAMES.get(int(kind), str(int(kind)))


def parents_first(parent: NDArray[np.int64]) -> NDArray[np.int64]:
    """Order rows so that parents precede children, and otherwise as they stand.

    A row waits for the latest of its ancestors and comes directly after it; rows that wait for the
    same one follow by their distance from the root, then as they stand.

    Parameters
    ----------
    parent : (n,) int64
        Row of the parent, -1 at a root.

    Returns
    -------
    (n,) int64
        Row at each new place; rows on a loop or behind one are left out.

    Notes
    -----
    Path maxima and depths by pointer doubling: every round doubles the stretch of ancestors that a
    row has seen, so that n rows need at most log2(n) + 1 rounds, whatever the shape of the tree.
    """
    n = len(parent)
    above = np.append(np.where(parent < 0, n, parent), n)  # row n lies above all roots
    latest = np.append(np.arange(n), -1)
    depth = np.append(np.ones(n, dtype=np.int64), 0)
    for _ in range(n.bit_length() + 1):
        latest = np.maximum(latest, latest[above])
        depth += depth[above]
        above = above[above]
    rooted = np.flatnonzero(above[:n] == n)
    return rooted[np.lexsort((rooted, depth[rooted], latest[rooted]))]


def trees(parent: NDArray[np.int64]) -> NDArray[np.int64]:
    """Give each connected piece a number, in the order of the roots.

    Parameters
    ----------
    parent : (n,) int64
        Index of the parent, -1 at a root; a forest, in any order.

    Returns
    -------
    (n,) int64
        Number of each sample's piece, from 0.
    """
    root = parent < 0
    if np.count_nonzero(root) == 1:
        return np.zeros(len(parent), dtype=np.int64)
    top = np.where(root, np.arange(len(parent)), parent)
    while not root[top].all():
        top = top[top]
    return (np.cumsum(root) - 1)[top]


def _ordered(table: SwcTable, file: str) -> tuple[NDArray[np.int64] | slice, NDArray[np.int64]]:
    """Return the order of the rows and the parents' indices in that order."""
    n = len(table.parent)
    if (table.parent < np.arange(n)).all():
        return slice(None), table.parent
    order = parents_first(table.parent)
    if len(order) < n:
        raise _loop_error(table, order, file)
    place = np.empty(n + 1, dtype=np.int64)
    place[order] = np.arange(n)
    place[n] = -1  # where the parent -1 of a root points
    return order, place[table.parent[order]]


def _loop_error(table: SwcTable, rooted: NDArray[np.int64], file: str) -> ReadingError:
    """Name the samples of the first loop in the file."""
    lost = np.ones(len(table.parent), dtype=bool)
    lost[rooted] = False
    row, seen = int(np.argmax(lost)), dict[int, int]()
    while row not in seen:
        seen[row] = len(seen)
        row = int(table.parent[row])
    loop = list(seen)[seen[row] :]
    numbers = [str(table.number[i]) for i in [*loop, row]]
    if len(loop) > LOOP_SHOWN:
        numbers[LOOP_SHOWN:-1] = [f"{len(loop) - LOOP_SHOWN} more"]
    fault = Fault(int(table.line[row]), " -> ".join(numbers), "parents that lead to a root")
    return ReadingError(
        f"{file}: {fault}: {len(loop)} samples are their own ancestors, {int(lost.sum())} reach no root; "
        "mend a parent or leave the file out",
        "loop",
        [fault],
    )
