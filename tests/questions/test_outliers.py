"""Cells to look at first: worked by hand, then what few or strange cells do."""

import numpy as np
import pandas as pd
import pytest

from morphotone.questions.outliers import FAR, LEAST_GROUP, distances, notable, rounded

NONE = pd.DataFrame(columns=["file", "code", "severity"])


def cells(**columns):
    count = len(next(iter(columns.values())))
    table = {"file": [f"c{row}.swc" for row in range(count)], "grade": "sound", "R_in_MOhm": 100.0}
    return pd.DataFrame({**table, **columns}, index=range(count))


def test_the_distance_by_hand():
    """Logarithms to base 2: 0 1 2 3 4 10; median 2.5, deviations 2.5 1.5 .5 .5 1.5 7.5, their median 1.5."""
    far = distances(cells(R_in_MOhm=[1.0, 2.0, 4.0, 8.0, 16.0, 1024.0]))
    few = (6 - 4) / (6 + 3)
    expected = np.array([2.5, 1.5, 0.5, 0.5, 1.5, 7.5]) / (1.4826 * 1.5) * few
    np.testing.assert_allclose(far.robust[:, 0], expected, rtol=1e-12)
    np.testing.assert_allclose(far.median[:, 0], 2**2.5, rtol=1e-12)
    np.testing.assert_allclose(far.greatest, expected, rtol=1e-12)


def test_a_cell_is_held_against_its_own_group():
    values = [100.0 + row for row in range(10)] + [1000.0 + row for row in range(10)]
    values[0] = 1000.0  # usual in the other group
    groups = ["a"] * 10 + ["b"] * 10
    found = notable(table := cells(R_in_MOhm=values), NONE, distances(table, groups))
    assert [one.row for one in found] == [0]
    assert found[0].reasons == ("R_in 9.5 times the median of its group (1000 MΩ against 105 MΩ)",)
    assert notable(table, NONE, distances(table)) == []


@pytest.mark.parametrize(("size", "own"), [(LEAST_GROUP - 1, False), (LEAST_GROUP, True)])
def test_a_small_group_is_held_against_all_cells(size, own):
    groups = ["small"] * size + ["large"] * 20 + [""]
    far = distances(cells(R_in_MOhm=np.linspace(50, 200, size + 21)), groups)
    assert far.own_group[:size].tolist() == [own] * size
    assert far.own_group[size:-1].all()
    assert not far.own_group[-1]


def test_fewer_than_five_cells_have_no_distance():
    few = cells(R_in_MOhm=[1.0, 1.0, 1.0, 1e6])
    assert np.isnan(distances(few).robust).all()
    assert distances(few).greatest.tolist() == [0.0] * 4
    assert notable(few, NONE, distances(few)) == []
    assert distances(cells(R_in_MOhm=[])).greatest.shape == (0,)


def test_of_constant_columns_only_what_differs_much_is_named():
    table = cells(R_in_MOhm=[100.0] * 30 + [104.0, 300.0])
    assert [one.row for one in notable(table, NONE, distances(table))] == [31]


@pytest.mark.parametrize("odd", [0.0, -3.0, np.nan, np.inf])
def test_what_has_no_logarithm_has_no_distance_and_disturbs_nobody(odd):
    values = np.linspace(90, 110, 12)
    alone = distances(cells(R_in_MOhm=values)).robust[:, 0]
    far = distances(cells(R_in_MOhm=[*values, odd]))
    np.testing.assert_array_equal(far.robust[:-1, 0], alone)
    assert np.isnan(far.robust[-1, 0])


def test_scaling_a_column_changes_no_distance():
    values = np.exp(np.random.default_rng(3).normal(size=40))
    np.testing.assert_allclose(
        distances(cells(R_in_MOhm=values)).robust, distances(cells(R_in_MOhm=values * 1e3)).robust, rtol=1e-9
    )


@pytest.mark.parametrize("count", [5, 9, 20, 100])
def test_of_normal_values_about_one_in_a_thousand_is_far(count):
    draw = np.random.default_rng(count)
    table = cells(R_in_MOhm=np.exp(draw.normal(0, 20, 40_000)))
    groups = np.repeat(np.arange(40_000 // count).astype(str), count)
    groups = [*groups, *[""] * (40_000 - len(groups))]
    far = distances(table, groups)
    share = (far.robust[far.own_group, 0] > FAR).mean()
    assert 5e-5 < share < 2.5e-3


def test_order_and_reasons():
    values = np.linspace(95, 105, 12)
    values[3], values[4] = 1000.0, np.inf
    table = cells(R_in_MOhm=values, lambda_um=[*[300.0] * 11, 30.0])
    table.loc[6, "grade"], table.loc[[7, 8], "grade"] = "unfit", "doubtful"
    findings = pd.DataFrame(
        [
            ("c6.swc", "flat", "unfit"),
            ("c7.swc", "flat", "doubtful"),
            ("c7.swc", "flat", "doubtful"),
            ("c8.swc", "flat", "doubtful"),
            ("c8.swc", "soma_odd", "doubtful"),
            ("c8.swc", "columns_extra", "note"),
        ],
        columns=NONE.columns,
    )
    found = notable(table, findings, distances(table))
    assert {one.row: one.reasons for one in found} == {
        6: ("unfit, kept all the same: no depth",),
        4: ("R_in is no finite number",),
        3: ("R_in 9.9 times the median of all cells (1000 MΩ against 101 MΩ)",),
        11: ("λ 0.1 times the median of all cells (30 µm against 300 µm)",),
        8: ("doubtful for 2 reasons: no depth; a soma of unlikely size",),
    }
    rows = [one.row for one in found]
    assert set(rows[:2]) == {4, 6}
    assert set(rows[2:4]) == {3, 11}
    assert rows[4] == 8


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        (1249.18, 3, "1250"),
        (0.012345, 2, "0.012"),
        (0.0, 3, "0"),
        (-7.0, 2, "-7"),
        (9.96, 2, "10"),
        (1.5e9, 3, "1.50e+09"),
        (2.5e-7, 2, "2.5e-07"),
        (1e6, 4, "1000000"),
    ],
)
def test_rounded(value, digits, text):
    assert rounded(value, digits) == text
