"""A file of synapse sites to columns: which cell, place and synapse; bad rows are turned away alone."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Way = Literal["sample", "space", "branch"]
"""How a place is given."""


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


@dataclass(frozen=True, eq=False)
class SitesFile:
    """What a file of sites holds: rows in = rows of `sites` + `turned_away`."""

    sites: Sites
    turned_away: tuple[TurnedAwaySite, ...]
    rows_in: int
    sha256: str
