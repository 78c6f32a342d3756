"""Tests of groups against worked examples that others printed."""

import numpy as np
import pytest

from morphotone.questions.comparisons import comparisons, holm
from tests.questions.test_summaries import table

# Hollander & Wolfe 1973, Nonparametric Statistical Methods, p. 115: half-time of mucociliary clearance in
# normal subjects and those with obstructive airway disease and with asbestosis; H = 0.771, p = 0.68.
CLEARANCE = {
    "normal": [2.9, 3.0, 2.5, 2.6, 3.2],
    "obstructive": [3.8, 2.7, 4.0, 2.4],
    "asbestosis": [2.8, 3.4, 3.7, 2.2, 2.0],
}
# The same, p. 69: permeability of the human chorioamnion at term and at 12 to 26 weeks; U = 35, and one-sided
# p = 0.1272, of which the two-sided is twice.
PERMEABILITY = {
    "term": [0.80, 0.83, 1.89, 1.04, 1.45, 1.38, 1.91, 1.64, 0.73, 1.46],
    "earlier": [1.15, 0.88, 0.90, 0.74, 1.21],
}
# The worked example of scipy.stats.mannwhitneyu's documentation: ages at which diabetes was found.
AGES = {"males": [19, 22, 16, 29, 24], "females": [20, 11, 17, 12]}


@pytest.mark.parametrize("provenance", ["from memory"])
def test_kruskal_wallis_of_a_textbook(provenance):
    every = comparisons(table(**CLEARANCE), ["class"], ["x"]).iloc[0]
    assert every["statistic"] == pytest.approx(0.77143, abs=5e-6)
    # The book's p is that of χ² with two degrees of freedom; here, with four values in a group, permuted.
    assert np.exp(-every["statistic"] / 2) == pytest.approx(0.68, abs=0.0005)
    assert every["p"] == pytest.approx(0.68, abs=0.04)
    assert every["p_by"] == "permutation"


@pytest.mark.parametrize("provenance", ["from memory"])
def test_mann_whitney_of_a_textbook(provenance):
    (row,) = comparisons(table(**PERMEABILITY), ["class"], ["x"]).to_dict("records")
    assert row["statistic"] == 35
    assert row["p"] == pytest.approx(2 * 0.1272, abs=1e-4)
    assert row["size"] == pytest.approx(2 * 35 / 50 - 1)


def test_mann_whitney_of_scipys_documentation():
    (row,) = comparisons(table(**AGES), ["class"], ["x"]).to_dict("records")
    assert row["statistic"] == 17
    assert row["p"] == pytest.approx(0.1111111111111111, rel=1e-12)


@pytest.mark.parametrize("provenance", ["from memory"])
def test_holm_of_a_published_example(provenance):
    """Holm 1979 for p = 0.01, 0.02, …, 0.05, as R's documentation of p.adjust has it computed."""
    assert holm([0.01, 0.02, 0.03, 0.04, 0.05]).tolist() == pytest.approx([0.05, 0.08, 0.09, 0.09, 0.09])
