"""The whole list of sites: rank within cell, group and set, and how far orders by other keys differ."""

import re
from collections.abc import Iterator

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from morphotone.errors import MorphotoneError
from morphotone.questions.order import MOST_MOVERS, agreements, ranks

Real = NDArray[np.float64]

BY = "attenuation_to_soma"
TEXT_COLUMNS = ("site", "group", "domain")  # of the table of sites; nothing to rank by
_SCOPES = ("cell", "group", "set")
_OF_RANKS = ("rank", "tied", "percentile")
#: What `in_order` adds to the table of sites.
ADDED_COLUMNS = ("ranked_by", *(f"{name}_in_{scope}" for scope in _SCOPES for name in _OF_RANKS))
_KEYS = re.compile(r"path_um|X|attenuation_to_soma(_[\d.e+-]+Hz)?|peak_soma_mV")
#: Weak sites come first in every order: those are the ones with a small peak.
_WEAK_IF_SMALL = "peak_soma_mV"

ORDERS_COLUMNS = ("within", "file", "cell", "by_first", "by_second", "sites", "tau_b")
MOVERS_COLUMNS = (
    *("within", "file", "cell", "site", "by_first", "by_second"),
    *("rank_first", "rank_second", "places_moved"),
)


def numeric(table: pd.DataFrame, column: str) -> Real:
    """Return a column as numbers, NaN where a cell is empty.

    Raises
    ------
    MorphotoneError
        There is no such column, or it holds something that is no number.
    """
    if column not in table:
        usable = ", ".join(str(name) for name in table if pd.api.types.is_numeric_dtype(table[name]))
        raise MorphotoneError(
            f"there is no column {column!r} to rank by; numeric columns here are {usable}, and whatever "
            "the sites' own file adds"
        )
    numbers = pd.to_numeric(table[column], errors="coerce")
    wrong = np.flatnonzero(numbers.isna() & table[column].notna() & (table[column] != ""))
    if len(wrong):
        raise MorphotoneError(
            f"column {column!r} cannot be ranked by: read {table[column].iloc[wrong[0]]!r}, expected a "
            "number; choose a numeric column"
        )
    return numbers.to_numpy(np.float64, na_value=np.nan)


def in_order(table: pd.DataFrame, by: str) -> pd.DataFrame:
    """Return the sites cell by cell, in order within each, with their ranks and percentiles.

    Parameters
    ----------
    table : DataFrame
        One row per site: ``file``, ``line``, ``group`` and numeric columns.
    by : str
        The column to rank by, the greatest value first.

    Raises
    ------
    MorphotoneError
        As `numeric` does.
    """
    values = numeric(table, by)
    ranked = table.assign(ranked_by=by)
    for scope in _SCOPES:
        names = None if scope == "set" else table["file" if scope == "cell" else "group"]
        columns = ranks(values, None if names is None else names.mask(names == "").to_numpy(object))
        ranked[[f"{name}_in_{scope}" for name in _OF_RANKS]] = columns[list(_OF_RANKS)].set_axis(table.index)
    return ranked.sort_values(["file", "rank_in_cell", "line"], kind="stable", ignore_index=True)


def orders(ranked: pd.DataFrame, by: str) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Return how far orders by different keys agree, and which sites change place most.

    The keys are path, X, attenuation toward the soma at each frequency, the peak at the soma where there
    is one, and the column ranked by. All orders run from the farthest or weakest site on: the greatest
    value first, with the peak at the soma the smallest.

    Parameters
    ----------
    ranked : DataFrame
        As `in_order` gives it.
    by : str
        The column ranked by.

    Returns
    -------
    orders, movers : DataFrame
        One row per two keys for each cell and for the whole set; one row per site told. Columns as in README.
    """
    keys = [name for name in map(str, ranked) if name == by or _KEYS.fullmatch(name)]
    values = {name: _weak_first(ranked, name) for name in keys}
    scopes = [("set", np.arange(len(ranked)))]
    scopes += [("cell", np.asarray(rows)) for rows in ranked.groupby("file").indices.values()]
    agreed: list[tuple[object, ...]] = []
    moved: list[tuple[object, ...]] = []
    names = ranked[["file", "cell", "site"]].to_numpy(object)
    for within, rows in scopes:
        who = names[rows]
        where = who[0, :2] if within == "cell" else ("", "")
        for first, second, both in agreements({name: column[rows] for name, column in values.items()}):
            agreed.append((within, *where, first, second, both.sites, both.tau_b))
            moved += [
                (within, *who[both.at[i]], first, second, both.first[i], both.second[i], steps)
                for i, steps in _told(both.movers(MOST_MOVERS), both.second - both.first)
            ]
    return pd.DataFrame(agreed, columns=list(ORDERS_COLUMNS)), pd.DataFrame(
        moved, columns=list(MOVERS_COLUMNS)
    )


def _weak_first(ranked: pd.DataFrame, name: str) -> Real:
    values = numeric(ranked, name)
    return -np.abs(values) if name == _WEAK_IF_SMALL else values


def _told(movers: NDArray[np.int64], steps: NDArray[np.int64]) -> Iterator[tuple[int, int]]:
    yield from zip(movers.tolist(), steps[movers].tolist(), strict=True)
