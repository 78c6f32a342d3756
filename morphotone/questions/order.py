"""Sites in order: ranks with their ties, percentiles, and how far two orders agree.

Everything is counted on `levels`: whole numbers, the same for values that differ by no more than the engine
promises, so that two sites at one place, or on mirrored branches, are tied whatever their last bits.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import combinations

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray
from scipy import stats

Index = NDArray[np.int64]
Real = NDArray[np.float64]

_EQUAL = 1e-12  # relative; what the engine's results are good for
MOST_MOVERS = 3  # sites told for each two orders of a cell; more where they are tied


@dataclass(frozen=True, eq=False)
class Agreement:
    """How two orders of the same sites differ.

    Attributes
    ----------
    sites : int
        How many have both values.
    tau_b : float
        Kendall's τ_b: 1 for the same order, -1 for the reverse; NaN with fewer than two sites or all tied.
    first, second : ndarray of int64, shape (sites,)
        Rank of each site in the two orders, 1 for the greatest value, ties sharing the smallest number.
    at : ndarray of int64, shape (sites,)
        Which of the values given they are.
    """

    sites: int
    tau_b: float
    first: Index
    second: Index
    at: Index

    def movers(self, most: int = MOST_MOVERS) -> Index:
        """Return positions in `at` of the sites that change place most, the farthest first.

        Those that do not move are never told; those tied with the last one are told with it.
        """
        moved = np.abs(self.second - self.first)
        if not most or not moved.any():
            return np.empty(0, np.int64)
        least = max(np.sort(moved)[::-1][:most][-1], 1)
        order = np.argsort(-moved, kind="stable")
        movers: Index = order[moved[order] >= least]
        return movers


def levels(values: ArrayLike) -> Real:
    """Return 1 for the least value, 2 for the next, and so on; tied values share one, NaN stays NaN.

    Parameters
    ----------
    values : array_like, shape (n,)
        Any unit. Neighbours in order closer than 1e-12, relative to the greater magnitude, are tied.
    """
    given = np.asarray(values, np.float64)
    order = np.argsort(given, kind="stable")  # NaN last
    line = given[order][: np.count_nonzero(~np.isnan(given))]
    with np.errstate(invalid="ignore"):  # infinity less infinity
        gap = np.diff(line)
        near = np.isfinite(gap) & (gap <= _EQUAL * np.maximum(np.abs(line[1:]), np.abs(line[:-1])))
    new = ~(near | (line[1:] == line[:-1]))
    level = np.full(len(given), np.nan)
    level[order[: len(line)]] = np.cumsum(np.append(np.ones(min(len(line), 1), np.bool_), new))
    return level


def ranks(values: ArrayLike, within: ArrayLike | None = None) -> pd.DataFrame:
    """Return rank, number of other sites that share it, and percentile, of all values or within each group.

    Parameters
    ----------
    values : array_like, shape (n,)
        Any unit; NaN has no rank.
    within : array_like of object, shape (n,), optional
        The group each value is ranked in; a missing one has no rank.

    Returns
    -------
    DataFrame, shape (n, 3)
        ``rank``: 1 for the greatest value, ties sharing the smallest number (Int64, missing where there is
        none); ``tied``: how many others share it, 0 for no tie (Int64); ``percentile``: share of the sites
        that lie below, tied ones counted half, in percent (`scipy.stats.percentileofscore`, kind "mean").
    """
    level = pd.Series(levels(values))
    if within is not None:
        group = pd.Series(pd.factorize(np.asarray(within, object))[0])  # -1 where it is missing
        level[group < 0] = np.nan
    else:
        group = pd.Series(np.zeros(len(level), np.int64))
    inside = level.groupby(group)
    rank = inside.rank(method="min", ascending=False)
    middle = inside.rank(method="average")
    tied = level.groupby([group, level]).transform("size") - 1
    return pd.DataFrame(
        {
            "rank": rank.astype("Int64"),
            "tied": tied.astype("Int64"),
            "percentile": 100.0 * (middle - 0.5) / inside.transform("count"),
        }
    )


def agreement(first: ArrayLike, second: ArrayLike) -> Agreement:
    """Return how two orders of the same sites differ; sites without both values are left out.

    Parameters
    ----------
    first, second : array_like, shape (n,)
        What the sites are ordered by, any units.

    Notes
    -----
    Kendall 1945, Biometrika 33:239–251: the ties' correction that is called τ_b.
    """
    return _agreement(levels(first), levels(second))


def _agreement(one: Real, other: Real) -> Agreement:
    """Return how two orders differ, given as levels."""
    at = np.flatnonzero(~(np.isnan(one) | np.isnan(other)))
    one, other = one[at], other[at]
    unordered = any(not len(values) or (values == values[0]).all() for values in (one, other))
    tau_b = np.nan if unordered else float(stats.kendalltau(one, other).statistic)
    return Agreement(len(at), tau_b, _from_the_top(one), _from_the_top(other), at)


def _from_the_top(level: Real) -> Index:
    """Return the rank of each level, 1 for the highest: one more than there are values above it."""
    whole = level.astype(np.int64)
    upto = np.cumsum(np.bincount(whole))
    ranked: Index = 1 + len(whole) - upto[whole]
    return ranked


def agreements(keys: Mapping[str, ArrayLike]) -> Iterator[tuple[str, str, Agreement]]:
    """Yield how every two of several orders of the same sites differ, with the orders' names."""
    at_level = {name: levels(values) for name, values in keys.items()}
    for first, second in combinations(keys, 2):
        yield first, second, _agreement(at_level[first], at_level[second])
