"""The whole list in order: ranks per cell, group and set, agreement of keys, who moves where."""

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from morphotone.errors import MorphotoneError
from morphotone.questions.ranking import MOVERS_COLUMNS, ORDERS_COLUMNS, in_order, numeric, orders


@pytest.fixture
def table():
    """Two cells by hand; the sites p and q of cell a lie at one place, and r has no group."""
    return pd.DataFrame(
        {
            "file": ["b.swc", "a.swc", "a.swc", "a.swc", "b.swc"],
            "cell": ["b", "a", "a", "a", "b"],
            "site": ["s", "p", "q", "r", "t"],
            "line": [2, 3, 4, 5, 6],
            "group": ["ferry", "ferry", "ferry", "", "heron"],
            "path_um": [10.0, 20.0, 20.0, 30.0, 5.0],
            "X": [0.1, 0.3, 0.3, 0.2, 0.4],
            "attenuation_to_soma": [1.5, 4.0, 4.0, 3.0, 2.0],
            "peak_soma_mV": [0.5, 0.1, 0.1, -0.4, np.nan],
            "depth": ["7", "", "2", "5", "1"],
        }
    )


def test_sites_stand_cell_by_cell_in_order(table):
    ranked = in_order(table, "attenuation_to_soma")
    assert ranked["site"].tolist() == ["p", "q", "r", "t", "s"]
    assert ranked["rank_in_cell"].tolist() == [1, 1, 3, 1, 2]
    assert ranked["tied_in_cell"].tolist() == [1, 1, 0, 0, 0]
    assert ranked["rank_in_set"].tolist() == [1, 1, 3, 4, 5]
    assert ranked["percentile_in_set"].tolist() == pytest.approx([80.0, 80.0, 50.0, 30.0, 10.0])
    assert ranked["rank_in_group"].tolist()[:2] == [1, 1]
    assert ranked["rank_in_group"].isna().tolist() == [False, False, True, False, False]
    assert ranked["rank_in_group"].tolist()[3:] == [1, 3]
    assert (ranked["ranked_by"] == "attenuation_to_soma").all()


def test_any_numeric_column_will_do_and_what_has_none_comes_last(table):
    ranked = in_order(table, "depth")
    assert ranked["site"].tolist() == ["r", "q", "p", "s", "t"]
    assert ranked["rank_in_cell"].tolist()[:2] == [1, 2]
    assert pd.isna(ranked["rank_in_cell"][2])


def test_orders_of_the_cells_and_of_the_set(table):
    agreed, moved = orders(in_order(table, "attenuation_to_soma"), "attenuation_to_soma")
    assert tuple(agreed) == ORDERS_COLUMNS
    assert tuple(moved) == MOVERS_COLUMNS
    assert agreed["within"].tolist() == ["set"] * 6 + ["cell"] * 12
    of_set = agreed[agreed["within"] == "set"].set_index(["by_first", "by_second"])["tau_b"]
    paths, attenuation = table["path_um"], table["attenuation_to_soma"]
    assert of_set["path_um", "attenuation_to_soma"] == stats.kendalltau(paths, attenuation).statistic
    weak = -table["peak_soma_mV"].abs()[:4]
    assert of_set["X", "peak_soma_mV"] == stats.kendalltau(table["X"][:4], weak).statistic
    of_a = moved[(moved["within"] == "cell") & (moved["by_first"] == "path_um") & (moved["by_second"] == "X")]
    a = of_a[of_a["cell"] == "a"]
    assert a[["site", "rank_first", "rank_second", "places_moved"]].to_numpy().tolist() == [
        ["r", 1, 3, 2],
        ["p", 2, 1, -1],
        ["q", 2, 1, -1],
    ]


def test_a_key_of_ones_own_is_compared_too(table):
    agreed, _ = orders(in_order(table, "depth"), "depth")
    assert "depth" in set(agreed["by_second"])
    assert "depth" not in set(orders(in_order(table, "X"), "X")[0]["by_second"])


def test_what_cannot_be_ranked_by_is_named(table):
    with pytest.raises(
        MorphotoneError, match=r"no column 'length' to rank by; numeric columns here are line, pa"
    ):
        numeric(table, "length")
    with pytest.raises(MorphotoneError, match=r"'site' cannot be ranked by: read 's', expected a number"):
        numeric(table, "site")


def test_no_site_at_all_still_has_every_column(table):
    nothing = table[:0]
    agreed, moved = orders(in_order(nothing, "X"), "X")
    assert agreed["tau_b"].isna().all()
    assert tuple(moved) == MOVERS_COLUMNS
