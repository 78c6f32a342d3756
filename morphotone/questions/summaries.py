"""Groups of cells in numbers: n, mean, SD, median, quartiles, and how well a sample knows mean and median.

Quartiles are interpolated linearly between order statistics (type 7 of Hyndman & Fan 1996, Am Stat
50:361–365); SD is that of the sample, over n − 1. Intervals are bootstrap intervals, bias-corrected and
accelerated (BCa; Efron 1987, J Am Stat Assoc 82:171–185) where that exists, else of percentiles.
"""

import warnings
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy import stats

Real = NDArray[np.float64]

#: Values from which on an interval is drawn: two or three give little but the values themselves.
LEAST = 4
#: Fewer values than this are noted: of 600 samples of normal values the 95 % interval held the mean in
#: 0.80 with n = 4, 0.89 with 8, 0.92 with 10 (measured here; `tests/questions/test_summaries.py`).
FEW = 10
SUMMARY_COLUMNS = (
    *("column", "n", "cells", "sources", "mean", "sd", "median", "q1", "q3", "least", "greatest"),
    *("mean_low", "mean_high", "mean_interval", "median_low", "median_high", "median_interval", "note"),
)


@dataclass(frozen=True)
class Bootstrap:
    """How intervals are drawn; every interval starts from the same state, whatever its company.

    Attributes
    ----------
    level : float
        Coverage aimed at.
    resamples : int
        Draws for an interval.
    seed : int
        Of NumPy's PCG64.
    """

    level: float = 0.95
    resamples: int = 9999
    seed: int = 1


class Interval(NamedTuple):
    """Ends of a confidence interval, NaN where there is none, and how it was found."""

    low: float
    high: float
    method: str  #: "" where there is none


NO_INTERVAL = Interval(np.nan, np.nan, "")


def bootstrap_interval(values: Real, statistic: Callable[..., Any], how: Bootstrap) -> Interval:
    """Return a bootstrap interval, the same for any order of the values.

    BCa does not exist where leaving out one value never changes the statistic, or all draws lie on one side
    of it, as happens to the median of tied values; percentiles serve then.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Two or more, not all equal.
    statistic : callable
        Takes values and ``axis``.
    how : Bootstrap
        Level, draws, seed.
    """
    ordered = np.sort(values)
    for method in ("BCa", "percentile"):
        with warnings.catch_warnings(), np.errstate(all="ignore"):
            warnings.simplefilter("ignore", stats.DegenerateDataWarning)
            found = stats.bootstrap(
                (ordered,),
                statistic,
                n_resamples=how.resamples,
                confidence_level=how.level,
                method=method,
                vectorized=True,
                batch=max(1, 2_000_000 // len(ordered)),
                random_state=np.random.default_rng(how.seed),
            ).confidence_interval
        if np.isfinite([found.low, found.high]).all():
            return Interval(float(found.low), float(found.high), method)
    return NO_INTERVAL


def summary(
    table: pd.DataFrame, by: Sequence[str], columns: Sequence[str], how: Bootstrap | None = None
) -> pd.DataFrame:
    """Summarise columns by group.

    Parameters
    ----------
    table : DataFrame
        One row per unit (a cell, or the mean of an animal's cells), as `morphotone.questions.units.units`
        gives it: the columns of ``by``, ``cells``, ``sources`` and numbers, NaN where there is none.
    by : sequence of str
        Columns that make the groups; their categories give the order.
    columns : sequence of str
        What to summarise, in this order.
    how : Bootstrap, optional
        The intervals; the defaults unless given.

    Returns
    -------
    DataFrame
        One row per column and group: the columns of ``by``, then `SUMMARY_COLUMNS`.
    """
    how = how or Bootstrap()
    groups = list(groups_of(table, by))
    rows = [
        (*names, column, *_row(rows, column, how).values()) for column in columns for names, rows in groups
    ]
    return pd.DataFrame(rows, columns=[*by, *SUMMARY_COLUMNS])


def groups_of(table: pd.DataFrame, by: Sequence[str]) -> list[tuple[tuple[str, ...], pd.DataFrame]]:
    """Return each group's names and rows, in the order of the categories of ``by``."""
    return [
        (tuple(map(str, names)), rows) for names, rows in table.groupby(list(by), observed=True, sort=True)
    ]


def _row(rows: pd.DataFrame, column: str, how: Bootstrap) -> dict[str, Any]:
    """Return what `SUMMARY_COLUMNS` name after the column."""
    given = rows[np.isfinite(rows[column].to_numpy(np.float64))]
    values = np.sort(given[column].to_numpy(np.float64))
    lost = len(rows) - len(given)
    notes = [f"{lost} without a value"] if lost else []
    sources = {source for of_unit in given["sources"] for source in of_unit}
    row: dict[str, Any] = {"n": len(values), "cells": int(given["cells"].sum()), "sources": len(sources)}
    row |= _numbers(values)
    mean = median = NO_INTERVAL
    if len(values) < 2:
        notes += ["one value: no SD, no interval"] if len(values) else []
    elif values[0] == values[-1]:
        notes.append("all values equal: no interval")
    elif len(values) < LEAST:
        notes.append(f"fewer than {LEAST} values: no interval")
    else:
        mean = bootstrap_interval(values, np.mean, how)
        median = bootstrap_interval(values, np.median, how)
        notes += [f"fewer than {FEW} values: intervals too narrow"] if len(values) < FEW else []
    for name, interval in (("mean", mean), ("median", median)):
        row |= {f"{name}_low": interval.low, f"{name}_high": interval.high}
        row[f"{name}_interval"] = interval.method
    return row | {"note": "; ".join(notes)}


def _numbers(values: Real) -> dict[str, float]:
    """Return mean, SD and quantiles of values in ascending order; NaN where there are too few."""
    names = ("mean", "sd", "median", "q1", "q3", "least", "greatest")
    if not len(values):
        return dict.fromkeys(names, np.nan)
    q1, median, q3 = np.quantile(values, [0.25, 0.5, 0.75])
    sd = float(np.std(values, ddof=1)) if len(values) > 1 else np.nan
    if values[0] == values[-1]:
        sd = np.where(len(values) > 1, 0.0, np.nan).item()  # rounding of the mean is no spread
    found = (np.mean(values), sd, median, q1, q3, values[0], values[-1])
    return dict(zip(names, map(float, found), strict=True))
