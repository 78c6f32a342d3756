"""Rall and Rinzel's branched neuron: identical trees by the 3/2 rule, input at one tip."""

from math import pi

import pytest

from tests import trees
from tests.outside.cells import lambda_um, pi_of, solved
from tests.outside.published import (
    DERIVED,
    LOOKED_UP_FORMULA,
    MEMORY,
    RALL_RINZEL,
    assert_published,
    rows,
)

THREE = (0.25, 0.5, 0.75)
REDERIVED = "from memory: attribution of the formula; re-derived by superposition"
MODELS = rows(  # given: N trees, electrotonic distance of the branch points, L, what
    RALL_RINZEL,
    REDERIVED,
    1e-8,
    ("RR_ratio_N6_M0_L1", (6, (), 1.0, "ratio"), 3.900128292),
    ("RR_att_N6_M0_L1", (6, (), 1.0, "attenuation"), 6.018212441),
    ("RR_ratio_N6_M1_L1", (6, (0.5,), 1.0, "ratio"), 6.01180265),
    ("RR_att_N6_M1_L1", (6, (0.5,), 1.0, "attenuation"), 9.276696249),
    ("RR_ratio_N6_M2_L1", (6, (0.25, 0.5), 1.0, "ratio"), 11.02583139),
    ("RR_att_N6_M2_L1", (6, (0.25, 0.5), 1.0, "attenuation"), 17.0137469),
    ("RR_ratio_N1_M3_L1", (1, THREE, 1.0, "ratio"), 2.933731671),
    ("RR_att_N1_M3_L1", (1, THREE, 1.0, "attenuation"), 4.526984529),
    ("RR_ratio_N10_M3_L1", (10, THREE, 1.0, "ratio"), 25.55754763),
    ("RR_att_N10_M3_L1", (10, THREE, 1.0, "attenuation"), 39.43735683),
    ("RR_ratio_N6_M3_L1.5", (6, (0.375, 0.75, 1.125), 1.5, "ratio"), 24.17533685),
    ("RR_att_N6_M3_L1.5", (6, (0.375, 0.75, 1.125), 1.5, "attenuation"), 56.87029485),
) + rows(
    RALL_RINZEL,
    DERIVED,
    1e-8,
    ("RR_ratio_N6_M3_L1", (6, THREE, 1.0, "ratio"), 15.50251832),
    ("RR_att_N6_M3_L1", (6, THREE, 1.0, "attenuation"), 23.92163581),
)


@pytest.mark.parametrize("row", MODELS)
def test_input_at_one_tip(row):
    N, branch_points, L, what = row.given
    swc = trees.rall_neuron(N, len(branch_points), L, branch_points=list(branch_points))
    result = solved(swc)
    tip = -1  # the last sample ends the last branch
    assert abs(result.X[tip, 0] - L) < 1e-12
    ratio = result.R_in_MOhm[tip, 0] / result.R_in_MOhm[0, 0]
    assert_published(ratio if what == "ratio" else result.attenuation_to_soma[tip, 0], row)


def test_the_published_diameters_and_lengths_are_those_of_the_tree():
    # d = 4, 2.51984210, 1.58740105, 1.0 um; lengths 250, 198.4251315, 157.4901312, 125 um.
    rows_ = trees.rows_of(trees.rall_neuron())
    path, row = [], rows_[-1]
    while row.parent != -1:
        path.append(row)
        row = rows_[row.parent - 1]
    ends = path[::-1][1::2]
    assert [round(2 * end.r, 8) for end in ends] == [4.0, 2.5198421, 1.58740105, 1.0]
    for end, length in zip(ends, (250, 198.4251315, 157.4901312, 125), strict=True):
        start = rows_[end.parent - 1]
        h = sum((a - b) ** 2 for a, b in zip(end.at, start.at, strict=True)) ** 0.5
        assert abs(h - length) < 1e-7


PHYSICAL = rows(  # six trees, three orders; given: Hz, what
    RALL_RINZEL,
    DERIVED,
    1e-8,
    ("RRp_RN", (0, "soma"), 17.41467135),
    ("RRp_RBL", (0, "tip"), 269.9712615),
    ("RRp_Rtr", (0, "transfer"), 11.28565219),
    ("RRp_ZBL_100", (100, "tip"), 202.9248502),
    ("RRp_att_100", (100, "attenuation"), 134.246491),
) + rows(
    RALL_RINZEL + " (AC: L, X become qL, qX and resistances R/q, q = sqrt(1 + j omega tau))",
    MEMORY,
    1e-8,
    ("RRp_Zsoma_10", (10, "soma"), 14.9649329),
    ("RRp_ZBL_10", (10, "tip"), 265.1686644),
    ("RRp_att_10", (10, "attenuation"), 27.79987704),
    ("RRp_Zsoma_50", (50, "soma"), 6.89509777),
    ("RRp_ZBL_50", (50, "tip"), 234.0782888),
    ("RRp_att_50", (50, "attenuation"), 71.46533746),
    ("RRp_Zsoma_100", (100, "soma"), 5.038205148),
    ("RRp_Zsoma_500", (500, "soma"), 2.365747972),
    ("RRp_ZBL_500", (500, "tip"), 119.0338272),
    ("RRp_att_500", (500, "attenuation"), 1411.040201),
)


@pytest.mark.parametrize("row", PHYSICAL)
def test_six_trees_in_megohms(row):
    hz, what = row.given
    result = solved(trees.rall_neuron(), hz=(hz,) if hz else ())
    got = {
        "soma": result.R_in_MOhm[0, -1],
        "tip": result.R_in_MOhm[-1, -1],
        "transfer": result.R_transfer_MOhm[-1, -1],
        "attenuation": result.attenuation_to_soma[-1, -1],
    }[what]
    assert_published(got, row)


CORE = rows(
    RALL_RINZEL + ", abstract: the excess of R_BL over R_N stays below the path's core resistance",
    LOOKED_UP_FORMULA,
    1e-8,
    ("RRp_core", (), 298.4155183),
)


@pytest.mark.parametrize("row", CORE)
def test_core_resistance_bounds_the_excess_at_the_tip(row):
    diameters = [4 / 2 ** (2 * k / 3) for k in range(4)]
    lengths = [0.25 * lambda_um(1e4, 100, d) for d in diameters]
    core = sum(1 / pi_of(d / 2, d / 2, h, 100.0, 1e-18)[0] for d, h in zip(diameters, lengths, strict=True))
    assert_published(core, row)
    R = solved(trees.rall_neuron()).R_in_MOhm[:, 0]
    assert R[-1] - R[0] < core


CHARGE = rows(
    "Rinzel & Rall 1974 Biophys J 14:759-790, abstract ('about one-half'): (1 - 1/N)/cosh L",
    LOOKED_UP_FORMULA,
    1e-8,
    ("RRp_charge", (6,), 0.5400452281),
)


@pytest.mark.parametrize("row", CHARGE)
def test_charge_that_leaves_the_input_tree(row):
    (N,) = row.given
    result = solved(trees.rall_neuron(trees=N))
    V_soma, G_soma = result.R_transfer_MOhm[-1, 0], 1 / result.R_in_MOhm[0, 0]
    assert_published(V_soma * G_soma * (1 - 1 / N), row)


def test_the_soma_sees_all_trees_as_one_cylinder():
    # Summed stems' d^(3/2): six of 4 um make one of 4 * 6^(2/3) um; R_N = R_inf coth 1 (Rall 1962).
    d = 4 * 6 ** (2 / 3)
    cylinder = solved(trees.cylinder(lambda_um(1e4, 100, d), d), hz=(100.0,))
    tree = solved(trees.rall_neuron(), hz=(100.0,))
    assert abs(tree.Z_in[0] / cylinder.Z_in[0] - 1).max() < 1e-12
    assert abs(cylinder.R_in_MOhm[0, 0] / (2e3 / (pi * (d * 1e-4) ** 1.5) / 1e6) - 1.313035285) < 1e-9
