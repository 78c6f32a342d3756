"""Which analysed cells to look at first: far from their group, unfit but kept, doubtful more than once.

How far a value lies is told on a scale that the odd cells themselves hardly move: the distance of its
logarithm from the median, over 1.4826 times the median absolute deviation, which is the standard deviation
where values are normal (Hampel 1974, J Am Stat Assoc 69:383-393: from memory), or over the distance of the
quartiles by 1.349 where that is more: what more than a quarter of the cells do is not odd. Beyond 3.5 a cell
is named (common practice).

The deviation of a few values is often far too small by chance. Distances among n cells are therefore
multiplied by (n − 4)/(n + 3): of normal values at most about one in a thousand then lies beyond 3.5, for any
n from 5 to 200 (found by drawing 1.6 million values for each n).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from morphotone.reading.findings import CATALOGUE

Real = NDArray[np.float64]

FAR = 3.5
#: Fewer cells than this have no median worth the name; they are held against all cells.
LEAST_GROUP = 5
_PER_DEVIATION, _PER_QUARTILES = 1.4826, 1.349  # to the standard deviation of normal values
# Groups that differ by less than a tenth count as differing by a tenth: 1 % in a constant column is no news.
_LEAST_SPREAD = float(np.log(1.1))

#: What is looked at, and how a sentence names it with its unit.
WATCHED = {
    "R_in_MOhm": ("R_in", "MΩ"),
    "lambda_um": ("λ", "µm"),
    "X_tips_mean": ("mean X of the tips", ""),
    "attenuation_to_soma_farthest": ("attenuation toward the soma", ""),
    "attenuation_from_soma_farthest": ("attenuation from the soma", ""),
    "length_um": ("cable length", "µm"),
    "area_um2": ("membrane", "µm²"),
    "soma_area_um2": ("membrane of the soma", "µm²"),
}


@dataclass(frozen=True)
class Notable:
    """A cell that deserves a look.

    Attributes
    ----------
    row : int
        Its place in the table of cells, from 0.
    distance : float
        The greatest robust distance among its columns; 0 where none could be told.
    reasons : tuple of str
        Why, in words, the weightiest first.
    """

    row: int
    distance: float
    reasons: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class Distances:
    """How far every cell lies from those it is compared with.

    Attributes
    ----------
    robust : ndarray, shape (cells, columns)
        Robust distance; NaN where the value has no logarithm or too few are there to compare.
    median : ndarray, shape (cells, columns)
        What the cell was compared with, in the column's unit.
    own_group : ndarray of bool, shape (cells,)
        Whether that was its group, not all cells.
    columns : tuple of str
        Those of `WATCHED` that the table has.
    """

    robust: Real
    median: Real
    own_group: NDArray[np.bool_]
    columns: tuple[str, ...]

    @property
    def greatest(self) -> Real:
        """The greatest distance of each cell, shape (cells,); 0 where none could be told."""
        known = np.nan_to_num(self.robust, nan=0.0)
        greatest: Real = known.max(axis=1, initial=0.0)
        return greatest


def distances(cells: pd.DataFrame, groups: Sequence[str] | None = None) -> Distances:
    """Compare each cell with the others of its group, or with all where its group is small.

    Parameters
    ----------
    cells : DataFrame
        A survey's ``cells.csv``.
    groups : sequence of str, optional
        Group of each cell, "" for none.
    """
    columns = tuple(column for column in WATCHED if column in cells)
    values = cells[list(columns)].to_numpy(np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        logs = np.where((values > 0) & np.isfinite(values), np.log(values), np.nan)
    everyone = np.ones(len(cells), bool)
    robust, median = _against(logs, everyone)
    own = np.zeros(len(cells), bool)
    names = np.asarray([""] * len(cells) if groups is None else groups, object)
    for name in dict.fromkeys(names.tolist()):
        members = names == name
        if name and members.sum() >= LEAST_GROUP:
            robust[members], median[members] = _against(logs, members)
            own |= members
    return Distances(robust, np.exp(median), own, columns)


def _against(logs: Real, members: NDArray[np.bool_]) -> tuple[Real, Real]:
    """Return distance and median of the members, by column."""
    some = logs[members]
    robust, median = np.full_like(some, np.nan), np.full_like(some, np.nan)
    for place in range(some.shape[1]):
        known = some[np.isfinite(some[:, place]), place]
        if len(known) < LEAST_GROUP:
            continue
        middle = np.median(known)
        spread = max(_spread(known, float(middle)), _LEAST_SPREAD)
        few = (len(known) - 4) / (len(known) + 3)
        robust[:, place] = np.abs(some[:, place] - middle) / spread * few
        median[:, place] = middle
    return robust, median


def _spread(values: Real, middle: float) -> float:
    first, third = np.quantile(values, [0.25, 0.75])
    deviation = float(np.median(np.abs(values - middle)))
    return max(_PER_DEVIATION * deviation, float(third - first) / _PER_QUARTILES)


def notable(cells: pd.DataFrame, findings: pd.DataFrame, far: Distances) -> list[Notable]:
    """Return the cells to look at first, the most pressing first.

    Unfit cells that were kept and cells whose R_in is no number come first, then those far from their group
    by their distance, then those that are doubtful for more than one reason.

    Parameters
    ----------
    cells, findings : DataFrame
        A survey's tables.
    far : Distances
        As `distances` gives them for the same cells.
    """
    weighty = findings[findings["severity"] != "note"].groupby("file")["code"].unique()
    codes: dict[str, list[str]] = {str(file): list(found) for file, found in weighty.items()}
    found = []
    greatest = far.greatest
    R_in = cells["R_in_MOhm"].to_numpy(np.float64)
    for row, (file, grade) in enumerate(zip(cells["file"], cells["grade"], strict=True)):
        of_file = codes.get(str(file), [])
        seen = "; ".join(CATALOGUE[code].title if code in CATALOGUE else code for code in of_file)
        pressing = [f"unfit, kept all the same: {seen}"] if grade == "unfit" else []
        pressing += [] if np.isfinite(R_in[row]) else ["R_in is no finite number"]
        reasons = pressing + _far_in_words(cells, far, row)
        if grade == "doubtful" and len(of_file) > 1:
            reasons.append(f"doubtful for {len(of_file)} reasons: {seen}")
        if reasons:
            rank = (not pressing, -greatest[row] if greatest[row] > FAR else 0.0, -len(of_file))
            found.append((rank, Notable(row, float(greatest[row]), tuple(reasons))))
    return [one for _, one in sorted(found, key=lambda pair: pair[0])]


def _far_in_words(cells: pd.DataFrame, far: Distances, row: int) -> list[str]:
    beyond = [place for place in range(len(far.columns)) if far.robust[row, place] > FAR]
    whose = "the median of its group" if far.own_group[row] else "the median of all cells"
    return [
        _times(far.columns[place], float(cells[far.columns[place]].iloc[row]), far.median[row, place], whose)
        for place in sorted(beyond, key=lambda place: -far.robust[row, place])
    ]


def _times(column: str, value: float, median: float, whose: str) -> str:
    name, unit = WATCHED[column]
    unit = f" {unit}" if unit else ""
    return (
        f"{name} {rounded(value / median, 2)} times {whose} ({rounded(value, 3)}{unit} against "
        f"{rounded(median, 3)}{unit})"
    )


def rounded(value: float, digits: int) -> str:
    """Return a number with so many significant digits, without an exponent where that can be read."""
    short = float(f"{value:.{digits - 1}e}")
    return f"{short:.12g}" if 1e-4 <= abs(short) < 1e7 or not short else f"{value:.{digits - 1}e}"
