"""Ranks, ties and agreement of orders, against scipy.stats and by hand."""

import numpy as np
import pytest
from scipy import stats

from morphotone.questions.order import agreement, agreements, levels, ranks

RNG = np.random.default_rng(20)
#: Many ties, none, one value, two equal.
FAMILIES = {
    "many ties": RNG.integers(0, 12, 200).astype(float),
    "no ties": RNG.normal(size=200),
    "one": np.array([3.0]),
    "two tied": np.array([2.0, 2.0]),
    "negative": -RNG.exponential(size=50),
    "with infinity": np.array([1.0, np.inf, np.inf, -np.inf, 0.0]),
}


@pytest.fixture(params=FAMILIES, ids=list(FAMILIES))
def values(request):
    return FAMILIES[request.param]


def test_ranks_are_those_of_scipy_from_the_greatest_down(values):
    table = ranks(values)
    assert table["rank"].tolist() == stats.rankdata(-values, method="min").astype(int).tolist()


def test_percentiles_are_those_of_scipy(values):
    expected = [stats.percentileofscore(values, value, kind="mean") for value in values]
    np.testing.assert_allclose(ranks(values)["percentile"], expected, rtol=1e-13)


def test_tied_counts_the_others_of_a_rank(values):
    assert ranks(values)["tied"].tolist() == [int((values == value).sum()) - 1 for value in values]


def test_by_hand_with_a_tie_and_a_value_that_is_not_there():
    table = ranks([5.0, 7.0, np.nan, 5.0, 1.0])
    assert table["rank"].tolist()[:2] == [2, 1]
    assert table["rank"].isna().tolist() == [False, False, True, False, False]
    assert table["rank"].tolist()[3:] == [2, 4]
    assert table["tied"].dropna().tolist() == [1, 0, 1, 0]
    np.testing.assert_allclose(table["percentile"], [50.0, 87.5, np.nan, 50.0, 12.5])


def test_within_groups_each_group_is_ranked_by_itself():
    values = RNG.integers(0, 6, 90).astype(float)
    within = RNG.choice(["ferry", "heron", None], 90)
    table = ranks(values, within)
    for group in ("ferry", "heron"):
        rows = np.flatnonzero(within == group)
        assert table["rank"][rows].tolist() == stats.rankdata(-values[rows], method="min").tolist()
        assert table["tied"][rows].tolist() == [int((values[rows] == v).sum()) - 1 for v in values[rows]]
    outside = within == np.array(None)
    assert outside.any()
    assert table[outside].isna().all(axis=None)


def test_values_apart_by_rounding_only_are_tied():
    third = 1.0 / 3.0
    assert levels([third, third * (1 + 4e-16), 0.5, third * (1 + 1e-9)]).tolist() == [1, 1, 3, 2]
    assert levels([0.0, -0.0, 5e-324]).tolist() == [1, 1, 2]
    assert levels([]).tolist() == []
    assert levels([np.nan, np.nan]).tolist() == pytest.approx([np.nan, np.nan], nan_ok=True)


@pytest.mark.parametrize("n", [2, 3, 40])
def test_tau_b_by_its_definition(n):
    """(concordant - discordant)/sqrt((pairs - ties of one)(pairs - ties of the other))."""
    rng = np.random.default_rng(n)
    one, other = np.append(rng.integers(0, 9, n - 1), 20), rng.normal(size=n)
    pairs = [(i, j) for i in range(n) for j in range(i)]
    signs = np.array([(np.sign(one[i] - one[j]), np.sign(other[i] - other[j])) for i, j in pairs])
    expected = signs.prod(axis=1).sum() / np.sqrt((signs[:, 0] ** 2).sum() * (signs[:, 1] ** 2).sum())
    assert agreement(one, other).tau_b == pytest.approx(expected, rel=1e-12)
    assert agreement(other, one).tau_b == pytest.approx(expected, rel=1e-12)


def test_the_same_order_agrees_wholly_and_the_reverse_not_at_all():
    values = RNG.normal(size=30)
    assert agreement(values, np.exp(values)).tau_b == pytest.approx(1.0)
    assert agreement(values, -values).tau_b == pytest.approx(-1.0)


@pytest.mark.parametrize("one", [[], [1.0], [2.0, 2.0, 2.0], [1.0, np.nan, np.nan]])
def test_what_has_no_order_has_no_tau(one):
    assert np.isnan(agreement(one, np.arange(float(len(one)))).tau_b)


def test_movers_by_hand():
    """Six sites; d goes from the last place to the first, a and b each give way by one."""
    both = agreement([6.0, 5.0, 4.0, 3.0, 2.0, np.nan, 1.0], [5.0, 4.0, 3.0, 2.0, 1.0, 9.0, 6.0])
    assert both.sites == 6
    assert both.at.tolist() == [0, 1, 2, 3, 4, 6]
    assert both.first.tolist() == [1, 2, 3, 4, 5, 6]
    assert both.second.tolist() == [2, 3, 4, 5, 6, 1]
    assert both.movers(1).tolist() == [5]
    assert both.movers(2).tolist() == [5, 0, 1, 2, 3, 4]  # those tied with the last are told with it
    assert both.movers(0).tolist() == []


def test_who_does_not_move_is_no_mover():
    both = agreement([4.0, 3.0, 2.0, 1.0], [9.0, 3.0, 1.0, 2.0])
    assert both.movers(4).tolist() == [2, 3]
    assert agreement([2.0, 1.0], [5.0, 4.0]).movers().tolist() == []


def test_every_two_orders_are_compared_once():
    keys = {"path": [1.0, 2.0, 3.0], "X": [1.0, 3.0, 2.0], "peak": [1.0, np.nan, 2.0]}
    found = {(one, other): both for one, other, both in agreements(keys)}
    assert list(found) == [("path", "X"), ("path", "peak"), ("X", "peak")]
    assert found["path", "X"].tau_b == pytest.approx(1 / 3)
    assert found["X", "peak"].sites == 2
