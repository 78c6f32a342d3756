"""Groups in numbers: against the standard library, against known truths, and where there is nothing."""

import statistics

import numpy as np
import pandas as pd
import pytest

from morphotone.questions.summaries import FEW, SUMMARY_COLUMNS, Bootstrap, bootstrap_interval, summary

RNG = np.random.default_rng(20)
VALUES = RNG.lognormal(3, 0.8, 23)


def table(**groups):
    """Return units of made-up groups: a list of values each."""
    rows = [(name, value) for name, values in groups.items() for value in values]
    found = pd.DataFrame(rows, columns=["class", "x"]).assign(cells=1)
    found["class"] = pd.Categorical(found["class"], list(groups), ordered=True)
    found["sources"] = [(f"animal {i % 3}",) for i in range(len(found))]
    return found


def only_row(values, **how):
    (row,) = summary(table(a=values), ["class"], ["x"], Bootstrap(**how)).to_dict("records")
    return row


def test_numbers_are_those_of_the_standard_library():
    """`statistics.quantiles` with "inclusive" is type 7 of Hyndman & Fan, as its documentation says."""
    row = only_row(VALUES)
    expected = {
        "n": 23,
        "cells": 23,
        "sources": 3,
        "mean": statistics.fmean(VALUES),
        "sd": statistics.stdev(VALUES),
        "median": statistics.median(VALUES),
        "least": min(VALUES),
        "greatest": max(VALUES),
    }
    expected["q1"], _, expected["q3"] = statistics.quantiles(VALUES, n=4, method="inclusive")
    for name, value in expected.items():
        assert row[name] == pytest.approx(value, rel=1e-13), name


def test_rows_run_by_column_then_group_in_the_order_of_the_categories():
    found = summary(table(z=VALUES, a=VALUES[:5]).assign(y=1.0), ["class"], ["y", "x"])
    assert list(found) == ["class", *SUMMARY_COLUMNS]
    assert list(zip(found["column"], found["class"], strict=True)) == [
        *(("y", "z"), ("y", "a")),
        *(("x", "z"), ("x", "a")),
    ]


def test_an_interval_holds_its_statistic_and_is_the_same_for_any_order_and_company():
    alone = only_row(VALUES)
    assert alone["mean_interval"] == "BCa"
    assert alone["mean_low"] < alone["mean"] < alone["mean_high"]
    assert alone["median_low"] <= alone["median"] <= alone["median_high"]
    beside = summary(table(a=VALUES[::-1], b=VALUES[:7]), ["class"], ["x"]).to_dict("records")
    assert beside[0] == alone


@pytest.mark.parametrize("statistic", [np.mean, np.median])
def test_an_interval_moves_and_stretches_with_the_values(statistic):
    """BCa respects transformations (Efron 1987); shifts and scales by powers of two do not even round."""
    values = RNG.integers(1, 1000, 20).astype(float)
    low, high, _ = bootstrap_interval(values, statistic, Bootstrap())
    assert bootstrap_interval(4 * values, statistic, Bootstrap())[:2] == pytest.approx((4 * low, 4 * high))
    mirrored = bootstrap_interval(-values, statistic, Bootstrap())
    assert mirrored[:2] == pytest.approx((-high, -low), rel=0.05)


@pytest.mark.slow
@pytest.mark.parametrize(("n", "least", "most"), [(4, 0.75, 0.84), (8, 0.85, 0.92), (40, 0.92, 0.96)])
def test_how_often_an_interval_holds_the_mean_of_normal_values(n, least, most):
    """What FEW and its comment say; 1,000 samples tell a share to about 0.01."""
    rng = np.random.default_rng(n)
    held = 0
    for _ in range(1000):
        low, high, _ = bootstrap_interval(rng.normal(size=n), np.mean, Bootstrap(resamples=999))
        held += low <= 0 <= high
    assert least <= held / 1000 <= most


def test_one_value_has_no_spread_and_no_interval():
    row = only_row([7.5])
    assert (row["n"], row["mean"], row["median"], row["q1"]) == (1, 7.5, 7.5, 7.5)
    assert np.isnan([row["sd"], row["mean_low"], row["median_high"]]).all()
    assert row["note"] == "one value: no SD, no interval"


def test_equal_values_have_no_interval():
    row = only_row([0.1] * 6)  # whose mean rounds to 0.09999999999999999
    assert row["sd"] == 0
    assert np.isnan(row["mean_low"])
    assert (row["mean_interval"], row["note"]) == ("", "all values equal: no interval")


def test_what_has_no_value_is_counted():
    row = only_row([1.0, np.nan, 3.0, np.inf])
    assert (row["n"], row["cells"], row["mean"]) == (2, 2, 2.0)
    assert row["note"] == "2 without a value; fewer than 4 values: no interval"
    row = only_row([1.0, 2.0, 3.0, 5.0])
    assert row["note"] == f"fewer than {FEW} values: intervals too narrow"
    row = only_row([np.nan, np.nan])
    assert (row["n"], row["note"]) == (0, "2 without a value")
    assert np.isnan(row["mean"])


def test_percentiles_serve_where_bca_does_not_exist():
    """Leaving one out never changes this median, so the acceleration is 0/0."""
    row = only_row([5.0, 5.0, 5.0, 6.0])
    assert (row["mean_interval"], row["median_interval"]) == ("BCa", "percentile")
    assert (row["median_low"], row["median_high"]) == (5.0, 6.0)


def test_the_state_drawn_from_is_the_one_recorded():
    first, second = (only_row(VALUES, seed=seed)["mean_low"] for seed in (1, 2))
    assert first != second
    assert first == pytest.approx(second, rel=0.02)
