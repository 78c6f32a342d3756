"""Groups compared: against literal definitions, known truths, and what cannot be compared."""

from itertools import combinations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from morphotone.questions.comparisons import (
    COMPARISON_COLUMNS,
    cliffs_delta,
    comparisons,
    delta_interval,
    epsilon_interval,
    holm,
)
from tests.questions.test_summaries import table

FEW_VALUES = st.lists(st.integers(-5, 5).map(float), min_size=1, max_size=12)
RNG = np.random.default_rng(7)


def test_holms_step_down_by_hand():
    """0.01 × 4; then 0.02 × 3, and 0.03 × 2 which is not smaller; 0.04 × 1 may not fall below: by hand."""
    assert holm([0.03, 0.01, 0.04, 0.02]).tolist() == pytest.approx([0.06, 0.04, 0.06, 0.06])


def test_holm_leaves_out_what_is_no_test_and_stops_at_1():
    assert holm([0.5, np.nan, 0.9]).tolist() == pytest.approx([1.0, np.nan, 1.0], nan_ok=True)
    assert holm([np.nan]).tolist() == pytest.approx([np.nan], nan_ok=True)
    assert holm([]).shape == (0,)


@given(st.lists(st.floats(0, 1), min_size=1, max_size=8))
def test_holm_rejects_what_the_step_down_rejects(p):
    """The definition: in order, go on rejecting while p_(i) ≤ α/(m − i + 1) (Holm 1979)."""
    corrected = holm(p)
    for alpha in (0.013, 0.05, 0.4):
        rejected = set()
        for step, index in enumerate(sorted(range(len(p)), key=lambda i: p[i])):
            if p[index] * (len(p) - step) > alpha:
                break
            rejected.add(index)
        assert {int(i) for i in np.flatnonzero(corrected <= alpha)} == rejected


@given(FEW_VALUES, FEW_VALUES)
def test_cliffs_delta_is_the_double_loop(x, y):
    pairs = [(a > b) - (a < b) for a in x for b in y]
    assert cliffs_delta(x, y) == pytest.approx(sum(pairs) / len(pairs), abs=1e-15)


@given(FEW_VALUES, FEW_VALUES)
def test_cliffs_delta_is_that_of_u(x, y):
    U = stats.mannwhitneyu(x, y, method="asymptotic").statistic if len({*x, *y}) > 1 else len(x) * len(y) / 2
    assert cliffs_delta(x, y) == pytest.approx(2 * U / (len(x) * len(y)) - 1, abs=1e-12)


@pytest.mark.parametrize("delta", [-1.0, -0.4, 0.0, 0.7, 1.0])
def test_the_interval_of_delta_holds_it_mirrors_and_solves_its_equation(delta):
    low, high, _ = delta_interval(delta, 6, 11)
    assert -1 <= low <= delta <= high <= 1
    assert low < high
    assert delta_interval(-delta, 6, 11)[:2] == pytest.approx((-high, -low), abs=1e-9)
    seen = (delta + 1) / 2
    for end in (low, high):
        t = (end + 1) / 2
        if 0 < t < 1:  # beyond the ends of the scale there is nothing to solve
            others = (6 + 11) / 2 - 1
            variance = t * (1 - t) * (1 + others * ((1 - t) / (2 - t) + t / (1 + t))) / (6 * 11)
            assert (seen - t) ** 2 == pytest.approx(1.959963984540054**2 * variance, rel=1e-6)


@pytest.mark.slow
@pytest.mark.parametrize("n", [4, 9, 30])
@pytest.mark.parametrize("theta", [0.5, 0.9, 0.98])
def test_the_interval_of_delta_keeps_its_coverage(n, theta):
    """Truth known in advance: of two normal groups √2·Φ⁻¹(θ) apart, P(x > y) = θ."""
    rng = np.random.default_rng(n)
    apart = np.sqrt(2) * stats.norm.ppf(theta)
    held = 0
    for _ in range(1000):
        delta = cliffs_delta(rng.normal(apart, 1, n), rng.normal(0, 1, n))
        low, high, _ = delta_interval(delta, n, n)
        held += low <= 2 * theta - 1 <= high
    assert 0.92 <= held / 1000 <= 0.995


@pytest.mark.slow
@pytest.mark.parametrize(("shifts", "least"), [((0, 0, 0), 0.93), ((0, 0.5, 1), 0.96), ((0, 1, 2), 0.98)])
def test_the_interval_of_epsilon_squared_covers(shifts, least):
    """The truth is that of samples so large that chance plays no part."""
    rng = np.random.default_rng(1)
    truth = stats.kruskal(*(rng.normal(d, 1, 100_000) for d in shifts)).statistic / (300_000 - 1)
    held = 0
    for _ in range(1000):
        H = stats.kruskal(*(rng.normal(d, 1, 9) for d in shifts)).statistic
        low, high, _ = epsilon_interval(H, 3, 27)
        held += low <= truth <= high
    assert held / 1000 >= least


def test_the_interval_of_epsilon_squared_ends_where_h_is_in_the_tails():
    low, high, method = epsilon_interval(9.0, 3, 60)
    assert method == "noncentral χ²"
    assert stats.ncx2.sf(9.0, 2, low * 59) == pytest.approx(0.025)
    assert stats.ncx2.cdf(9.0, 2, high * 59) == pytest.approx(0.025)
    assert epsilon_interval(0.0, 3, 60)[:2] == (0.0, 0.0)
    assert epsilon_interval(11.0, 3, 12).high == 1.0


def test_two_groups_are_compared_by_mann_whitney():
    x, y = RNG.normal(0, 1, 12), RNG.normal(1, 1, 9)
    (row,) = comparisons(table(a=x, b=y), ["class"], ["x"]).to_dict("records")
    expected = stats.mannwhitneyu(x, y, method="exact")
    assert list(row) == list(COMPARISON_COLUMNS)
    assert (row["test"], row["group"], row["other_group"]) == ("Mann–Whitney", "a", "b")
    assert (row["n"], row["n_other"], row["tests"], row["p_by"]) == (12, 9, 1, "exact")
    assert row["statistic"] == expected.statistic
    assert row["p"] == row["p_holm"] == expected.pvalue
    assert (row["effect"], row["size"]) == ("Cliff's δ", cliffs_delta(x, y))


def test_more_groups_are_compared_by_kruskal_wallis_and_then_in_pairs():
    groups = {name: RNG.normal(shift, 1, 8) for name, shift in (("a", 0), ("b", 1), ("c", 3))}
    found = comparisons(table(**groups).assign(y=lambda t: t["x"] ** 3), ["class"], ["x", "y"])
    assert found["test"].tolist() == ["Kruskal–Wallis", *["Mann–Whitney"] * 3] * 2
    assert found["group"].tolist() == ["", "a", "a", "b"] * 2
    assert found["other_group"].tolist() == ["", "b", "c", "c"] * 2
    assert found["tests"].tolist() == [2, 6, 6, 6] * 2
    every = found.iloc[0]
    expected = stats.kruskal(*groups.values())
    assert (every["statistic"], every["p"], every["p_by"]) == (*expected, "χ²")
    assert every["size"] == expected.statistic / 23
    pairs = found[found["test"] == "Mann–Whitney"]
    assert pairs["p_holm"].tolist() == holm(pairs["p"]).tolist()
    # Ranks do not change when values are cubed, and so nothing here may.
    same = ["statistic", "p", "p_holm", "size", "size_low", "size_high"]
    assert found.loc[:3, same].to_numpy().tolist() == found.loc[4:, same].to_numpy().tolist()


def test_the_family_may_be_each_quantity():
    found = comparisons(
        table(a=RNG.normal(0, 1, 9), b=RNG.normal(1, 1, 9), c=RNG.normal(2, 1, 9)).assign(
            y=lambda t: -t["x"]
        ),
        ["class"],
        ["x", "y"],
        family="quantity",
    )
    assert found["tests"].tolist() == [1, 3, 3, 3] * 2
    assert found.loc[1:3, "p_holm"].tolist() == holm(found.loc[1:3, "p"]).tolist()


def test_tied_values_are_tested_exactly_while_they_are_few():
    """All ways to deal these seven values into three and four, by hand: 35, of which 5 are as extreme."""
    x, y = [1.0, 1.0, 2.0], [2.0, 3.0, 3.0, 3.0]
    (row,) = comparisons(table(a=x, b=y), ["class"], ["x"]).to_dict("records")
    assert row["p_by"] == "exact"
    assert row["p"] == pytest.approx(dealt(x, y))


def dealt(x, y):
    """Return the two-sided p: twice the share of all deals with U at or beyond the one seen, at most 1."""
    pooled = np.array([*x, *y])
    Us = []
    for chosen in combinations(range(len(pooled)), len(x)):
        rest = np.delete(pooled, chosen)
        Us.append(sum((a > b) + 0.5 * (a == b) for a in pooled[list(chosen)] for b in rest))
    seen = sum((a > b) + 0.5 * (a == b) for a in x for b in y)
    return min(1.0, 2 * min(np.mean(np.array(Us) <= seen), np.mean(np.array(Us) >= seen)))


def test_many_tied_values_are_tested_by_the_normal_distribution():
    x, y = RNG.integers(0, 9, 40).astype(float), RNG.integers(2, 9, 30).astype(float)
    (row,) = comparisons(table(a=x, b=y), ["class"], ["x"]).to_dict("records")
    assert (row["p_by"], row["p"]) == ("normal", stats.mannwhitneyu(x, y, method="asymptotic").pvalue)


def test_few_values_a_group_are_permuted_since_h_is_not_chi_squared_then():
    """Six values can be dealt into three pairs in 6!/(2!)³ = 90 ways, 3! of them as far apart."""
    (every, *_) = comparisons(table(a=[1, 2], b=[3, 4], c=[5, 6.0]), ["class"], ["x"]).to_dict("records")
    assert every["p_by"] == "exact"
    assert every["p"] == pytest.approx(6 / 90)


def test_a_group_of_one_is_left_out_with_a_note():
    found = comparisons(table(a=RNG.normal(size=6), b=[3.0], c=RNG.normal(size=6)), ["class"], ["x"])
    (row,) = found.to_dict("records")
    assert (row["test"], row["group"], row["other_group"]) == ("Mann–Whitney", "a", "c")
    assert row["note"] == "fewer than 2 values, left out: b"


def test_a_note_does_not_name_hundreds_of_groups():
    groups = {f"g{i}": [float(i)] for i in range(200)} | {"a": [1.0, 2.0], "b": [2.0, 3.0]}
    (row,) = comparisons(table(**groups), ["class"], ["x"]).to_dict("records")
    assert row["note"] == "fewer than 2 values, left out: g0; g1; g2; g3; g4; g5; …"


def test_the_pairs_of_very_many_groups_are_not_compared():
    groups = {f"g{i}": [float(i), i + 0.5, i + 1, i + 2, i + 3] for i in range(51)} | {"alone": [1.0]}
    (row,) = comparisons(table(**groups), ["class"], ["x"]).to_dict("records")
    assert row["test"] == "Kruskal–Wallis"
    assert row["note"] == "fewer than 2 values, left out: alone; more than 50 groups, pairs not compared"


@pytest.mark.parametrize(
    ("groups", "note"),
    [
        ({"a": [1.0, 1.0], "b": [1.0, 1.0, 1.0]}, "all values equal: no test"),
        ({"a": [1.0, 1.0], "b": [1.0, 1.0], "c": [1.0] * 3}, "all values equal: no test"),
        ({"a": [1.0, 2.0], "b": [1.0]}, "fewer than two groups to test; fewer than 2 values, left out: b"),
        ({"a": [np.nan], "b": [1.0]}, "fewer than two groups to test; fewer than 2 values, left out: a; b"),
    ],
)
def test_what_cannot_be_tested_has_a_row_that_says_why(groups, note):
    (row,) = comparisons(table(**groups), ["class"], ["x"]).to_dict("records")
    assert row["note"] == note
    assert np.isnan([row["p"], row["p_holm"], row["size"]]).all()
    assert row["tests"] == 0


def test_equal_pairs_among_others_are_not_tested_and_do_not_count():
    found = comparisons(table(a=[1.0] * 5, b=[1.0] * 5, c=[2.0, 3, 4, 5, 6]), ["class"], ["x"])
    assert found["note"].tolist() == ["", "all values equal: no test", "", ""]
    assert found["tests"].tolist() == [1, 2, 2, 2]
    assert found.loc[1, "size"] == 0
    assert np.isnan(found.loc[1, "p_holm"])


def test_one_group_is_compared_with_nothing():
    found = comparisons(table(a=[1.0, 2.0]), ["class"], ["x"])
    assert found.empty
    assert list(found) == list(COMPARISON_COLUMNS)


def test_groups_whose_names_read_alike_are_still_two():
    found = table(a=[1.0, 2.0, 3.0], b=[4.0, 5.0, 6.0])
    found["first"] = found["class"].map({"a": "p, q", "b": "p"})
    found["second"] = found["class"].map({"a": "r", "b": "q, r"})
    (row,) = comparisons(found, ["first", "second"], ["x"]).to_dict("records")
    assert (row["n"], row["n_other"]) == (3, 3)
