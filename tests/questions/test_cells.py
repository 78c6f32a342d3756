"""The row of a cell against slow definitions, cells worked by hand, and cells that hardly are any."""

from math import cosh, nan, pi, sinh, sqrt, tanh

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.questions.cells import share_beyond
from morphotone.reading.findings import Finding
from morphotone.reading.vetting import Vetting
from tests import trees
from tests.outside.cells import R_infinity, lambda_um
from tests.questions.walking import (
    cell_by_definition,
    differing,
    share_beyond_by_integration,
    tables_of,
    walk,
)

HZ = (0.5, 100.0)
ASSUMPTIONS = {
    "defaults": Assumptions(hz=HZ),
    "own radius and a shunt": Assumptions(hz=HZ, branch_start="own radius", soma_shunt_nS=2.0),
    "domains": Assumptions(
        Membrane(9000.0, 120.0, 0.8, 1.4),
        {1: Membrane(4000.0), 2: Membrane(9000.0, 70.0), 4: Membrane(12000.0, 80.0, 0.7, 1.9)},
        hz=HZ,
    ),
    "axon left out": Assumptions(hz=HZ, axon="left out"),
}
SHARES = {"share_beyond_X0.5", "share_beyond_X1"}


@pytest.mark.parametrize("assumed", ASSUMPTIONS)
@pytest.mark.parametrize("family", trees.FAMILIES)
def test_every_column_against_its_definition(family, assumed):
    build, rule = trees.FAMILIES[family]
    tables = tables_of(build(), ASSUMPTIONS[assumed])
    expected = cell_by_definition(walk(build(), ASSUMPTIONS[assumed], rule), tables.rec)
    # Slices of a 4,000th see a share no better than that; the standard deviation of equal values is rounding.
    loose = {name: expected.pop(name) for name in SHARES}
    got = dict(tables.cell_row)
    assert differing({name: got.pop(name) for name in SHARES}, loose, absolute=3e-4) == {}
    assert differing(got, expected) == {}


@pytest.mark.parametrize("limit", [0.0, 0.03, 0.1, 0.2, 0.37, 0.8, 1.5])
@pytest.mark.parametrize(
    "family", ["frustum", "star", "irregular 1", "irregular with soma", "extremes", "with axon"]
)
def test_share_beyond_X_against_thin_slices(family, limit):
    build, rule = trees.FAMILIES[family]
    cell = tables_of(build()).cell
    dendritic = ~np.isin(cell.cable.kind, (1, 2))
    expected = share_beyond_by_integration(walk(build(), Assumptions(), rule), limit)
    assert share_beyond(cell, limit, dendritic) == pytest.approx(expected, abs=3e-4)


def test_share_beyond_X_is_exact_where_the_limit_meets_a_cylinder_or_the_end_of_a_piece():
    lam = lambda_um(20000, 150, 4.0)
    cell = tables_of(trees.cylinder(2 * lam, 4.0, 4)).cell
    everywhere = np.ones(5, bool)
    got = [share_beyond(cell, limit, everywhere) for limit in (0.0, 0.25, 0.5, 1.9, 2.5)]
    assert got == pytest.approx([1.0, 0.875, 0.75, 0.05, 0.0], abs=1e-12)
    assert np.isnan(share_beyond(cell, 1.0, np.zeros(5, bool)))


def test_share_beyond_X_of_a_cone_in_closed_form():
    """X grows with sqrt(r), membrane with r^2: halfway in X from radius 4 to 1 lies r = 2.25."""
    cell = tables_of(trees.frustum(300.0, 8.0, 2.0)).cell
    limit = cell.electrotonus.X[1, 0] / 2
    assert share_beyond(cell, limit, np.ones(2, bool)) == pytest.approx((2.25**2 - 1) / (4**2 - 1))


def test_ball_and_stick_worked_by_hand():
    """Rall 1959: G_in = G_soma + G_inf tanh L. Sphere of 10 um radius, stick 600 um long, 2 um thick."""
    R_m, R_i, hz = 20000.0, 150.0, 100.0
    row = tables_of(trees.ball_and_stick(10.0, 600.0, 2.0), Assumptions(hz=(hz,))).cell_row
    lam = lambda_um(R_m, R_i, 2.0)
    L, G_inf = 600 / lam, 1 / R_infinity(R_m, R_i, 2.0)  # uS
    sphere, stick = 400 * pi, 1200 * pi
    assert row["soma_rule"] == "sphere"
    assert (row["samples"], row["samples_analysed"], row["soma_samples"]) == (5, 5, 1)
    assert (row["branches"], row["stems"], row["tips"], row["branch_points"]) == (1, 1, 1, 0)
    assert (row["soma_area_um2"], row["area_um2"]) == pytest.approx((sphere, sphere + stick))
    assert (row["length_um"], row["length_basal_um"], row["length_apical_um"]) == pytest.approx((600, 600, 0))
    assert row["capacitance_pF"] == pytest.approx((sphere + stick) / 100)
    assert row["G_inf_stems_nS"] == pytest.approx(1e3 * G_inf)
    assert (row["X_tips_mean"], row["X_tips_least"], row["X_tips_greatest"]) == pytest.approx((L, L, L))
    assert np.isnan([row["X_tips_sd"], row["rall_ratio_mean"], row["rall_ratio_sd"]]).all()
    assert (row["farthest_tip_sample"], row["farthest_tip_path_um"]) == (5, 600.0)
    G_soma = sphere * 1e-8 / R_m * 1e6
    assert row["R_in_MOhm"] == pytest.approx(1 / (G_soma + G_inf * tanh(L)))
    assert row["attenuation_from_soma_farthest"] == pytest.approx(cosh(L))
    # Toward the soma the cylinder ends in the soma's conductance: cosh L + (G_soma/G_inf) sinh L.
    assert row["attenuation_to_soma_farthest"] == pytest.approx(cosh(L) + G_soma / G_inf * sinh(L))
    # At 100 Hz with 1 + i w tau in the place of 1: q = sqrt(1 + i w tau).
    q = np.sqrt(1 + 2j * pi * hz * R_m * 1e-6)
    assert row["R_in_MOhm_100Hz"] == pytest.approx(abs(1 / (G_soma * q**2 + G_inf * q * np.tanh(q * L))))
    assert row["attenuation_from_soma_farthest_100Hz"] == pytest.approx(abs(np.cosh(q * L)))


def test_the_mean_attenuation_tends_to_its_integral_over_the_membrane():
    """Along a sealed stick alone, from its end: cosh L / cosh(L - X), whose mean over X is an integral."""
    lam = lambda_um(20000, 150, 4.0)
    row = tables_of(trees.cylinder(lam, 4.0, 400)).cell_row
    X = (np.arange(100_000) + 0.5) / 100_000
    assert row["attenuation_from_soma_mean"] == pytest.approx((cosh(1) / np.cosh(1 - X)).mean(), rel=1e-6)


def test_six_trees_are_one_equivalent_cylinder():
    """Rall 1962: six trees of L = 1 that obey the 3/2 rule have six times a cylinder's input conductance."""
    row = tables_of(trees.rall_neuron(6, 3, 1.0, 4.0), Assumptions(Membrane(10000.0, 100.0))).cell_row
    # Seven branch points in each tree, and the root.
    assert (row["branches"], row["stems"], row["branch_points"], row["tips"]) == (90, 6, 43, 48)
    assert (row["order_greatest"], row["soma_rule"], row["soma_samples"]) == (4, "none", 0)
    assert (row["rall_ratio_mean"], row["rall_ratio_sd"]) == pytest.approx((1.0, 0.0), abs=1e-12)
    X = [row[f"X_tips_{name}"] for name in ("mean", "least", "greatest", "sd")]
    assert pytest.approx([1.0, 1.0, 1.0, 0.0], abs=1e-12) == X
    assert row["trunk_diameter_um"] == pytest.approx(4.0 * 6 ** (2 / 3))
    assert row["G_inf_stems_nS"] == pytest.approx(6e3 / R_infinity(10000, 100, 4.0))
    assert row["R_in_MOhm"] == pytest.approx(R_infinity(10000, 100, 4.0) / 6 / tanh(1))
    assert row["attenuation_from_soma_farthest"] == pytest.approx(cosh(1))
    assert (row["share_beyond_X0.5"], row["share_beyond_X1"]) == pytest.approx((0.5, 0.0), abs=1e-12)
    # One order lasts L/4; each has half the diameter^1.5 of the one before, and lambda as sqrt(d).
    lambdas = [lambda_um(10000, 100, 4.0 / 2 ** (2 * k / 3)) for k in range(4)]
    lengths = [6 * 2**k * lam / 4 for k, lam in enumerate(lambdas)]
    assert row["length_um"] == pytest.approx(sum(lengths))
    assert row["lambda_um"] == pytest.approx(sum(lengths) / 22.5)
    assert (row["lambda_greatest_um"], row["lambda_least_um"]) == pytest.approx((lambdas[0], lambdas[3]))


def test_a_Y_that_breaks_the_three_halves_rule():
    swc = "1 1 0 0 0 5 -1\n2 3 55 0 0 1 1\n3 3 55 40 0 1 2\n4 3 55 0 30 0.5 2\n5 3 0 60 0 0.5 1\n"
    row = tables_of(swc).cell_row
    assert row["rall_ratio_mean"] == pytest.approx(1.0 + 0.5**1.5)
    assert np.isnan(row["rall_ratio_sd"])
    assert row["trunk_diameter_um"] == pytest.approx((2.0**1.5 + 1.0) ** (2 / 3))
    assert (row["farthest_tip_sample"], row["path_greatest_um"]) == (3, 90.0)


def test_the_farthest_tip_is_dendritic_however_long_the_axon():
    swc = "1 1 0 0 0 5 -1\n2 3 55 0 0 1 1\n3 2 0 905 0 0.5 1\n"
    row = tables_of(swc).cell_row
    assert (row["farthest_tip_sample"], row["farthest_tip_path_um"]) == (2, 50.0)
    assert row["path_greatest_um"] == 900.0
    assert (row["tips"], row["X_tips_mean"]) == (2, pytest.approx(50 / lambda_um(20000, 150, 2.0)))
    assert (row["length_axon_um"], row["area_axon_um2"]) == pytest.approx((900.0, 900.0 * pi))


def test_an_axon_alone_has_a_farthest_tip_but_no_dendritic_membrane():
    row = tables_of("1 2 0 0 0 0.5 -1\n2 2 500 0 0 0.5 1\n", Assumptions(hz=(100.0,))).cell_row
    assert (row["farthest_tip_sample"], row["farthest_tip_path_um"]) == (2, 500.0)
    assert row["attenuation_from_soma_farthest"] == pytest.approx(cosh(500 / lambda_um(20000, 150, 1.0)))
    empty = [name for name, value in row.items() if isinstance(value, float) and value != value]
    assert empty == [
        *(f"lambda_{domain}{which}_um" for domain in ("basal", "apical", "other") for which in _RANGE),
        *("rall_ratio_mean", "rall_ratio_sd"),
        *(f"X_tips_{which}" for which in ("mean", "sd", "least", "greatest")),
        *("share_beyond_X0.5", "share_beyond_X1"),
        *(f"attenuation_{way}_soma_mean{hz}" for hz in ("", "_100Hz") for way in ("to", "from")),
    ]


_RANGE = ("", "_least", "_greatest")


def test_a_soma_alone_is_a_sphere_that_leaks():
    """Its stem ends inside it, so that nothing is left to be cable: R_in = R_m/(4 pi r^2)."""
    row = tables_of("1 1 0 0 0 5 -1\n2 3 3 0 0 1 1\n", Assumptions(soma_shunt_nS=3.0)).cell_row
    assert (row["samples"], row["samples_analysed"]) == (2, 2)
    counts = ("branches", "stems", "branch_points", "tips", "order_greatest")
    assert [row[name] for name in counts] == [0] * 5
    assert row["area_um2"] == row["soma_area_um2"] == pytest.approx(100 * pi)
    assert row["R_in_MOhm"] == pytest.approx(1 / (100 * pi * 1e-2 / 20000 + 3e-3))
    assert (row["length_um"], row["path_greatest_um"], row["farthest_tip_path_um"]) == (0.0, 0.0, 0.0)
    assert (row["farthest_tip_sample"], row["farthest_tip_X"]) == (1, 0.0)
    assert (row["attenuation_to_soma_farthest"], row["attenuation_from_soma_farthest"]) == (1.0, 1.0)
    assert (row["G_inf_stems_nS"], row["trunk_diameter_um"]) == (0.0, 0.0)
    assert [row[name] for name in ("lambda_um", "X_tips_mean", "share_beyond_X1")] == pytest.approx(
        [nan] * 3, nan_ok=True
    )


APART = """\
1 1 0 0 0 5 -1
2 3 55 0 0 1 1
3 3 60 0 0 1 -1
4 3 90 0 0 1 3
5 3 0 900 0 1 -1
6 3 0 950 0 1 5
"""


def test_orphans_left_out_are_counted_and_measured():
    row = tables_of(APART).cell_row
    assert (row["samples"], row["samples_analysed"], row["branches"]) == (6, 2, 1)
    assert (row["orphans_left_out"], row["orphans_joined"], row["orphans_um"]) == (2, 0, 80.0)
    assert (row["length_um"], row["orphans"]) == (50.0, "left out")


def test_orphans_within_the_gap_are_joined():
    row = tables_of(APART, Assumptions(orphans="joined", orphan_gap_um=10.0)).cell_row
    assert (row["samples_analysed"], row["branches"]) == (4, 1)
    assert (row["orphans_left_out"], row["orphans_joined"], row["orphans_um"]) == (1, 1, 50.0)
    assert (row["length_um"], row["orphans"]) == (85.0, "joined")


def test_a_cell_hung_from_a_tip_is_the_same_cell_and_says_so():
    swc = trees.with_axon()
    row, turned = (tables_of(text).cell_row for text in (swc, trees.rerooted(swc, 4)))
    assert (row.pop("re_hung"), turned.pop("re_hung")) == (False, True)
    assert row.pop("sha256") != turned.pop("sha256")
    assert differing(turned, row) == {}


def test_other_domains_are_counted_together():
    row = tables_of("1 1 0 0 0 5 -1\n2 7 55 0 0 1 1\n3 0 0 35 0 1 1\n4 3 -15 0 0 1 1\n").cell_row
    assert (row["length_other_um"], row["length_basal_um"]) == pytest.approx((80.0, 10.0))
    assert row["area_other_um2"] == pytest.approx(160 * pi)


def test_grade_and_findings_are_those_of_the_vetting():
    findings = (
        Finding("columns_extra", "one", 1, 1),
        Finding("flat", "two"),
        Finding("soma_absent", "three"),
        Finding("radius_zero", "four", severity="unfit"),
    )
    row = tables_of(trees.with_axon(), vetting=Vetting(findings, "unfit")).cell_row
    assert row["grade"] == "unfit"
    assert [row[f"findings_{severity}"] for severity in ("note", "doubtful", "unfit")] == [1, 2, 1]


def test_what_was_assumed_stands_in_the_row():
    other = Membrane(9000.0)
    assumptions = Assumptions(
        Membrane(12000.0, 90.0, 0.9, 1.5),
        {7: other, 2: other},
        branch_start="own radius",
        soma_shunt_nS=1.5,
        axon="cut",
        axon_cut_um=50.0,
        orphans="refused",
    )
    row = tables_of(trees.with_axon(), assumptions).cell_row
    assert {name: row[name] for name in list(row)[-10:]} == {
        "R_m_ohm_cm2": 12000.0,
        "R_i_ohm_cm": 90.0,
        "C_m_uF_cm2": 0.9,
        "spine_factor": 1.5,
        "domains_differ": "axon 7",
        "soma_shunt_nS": 1.5,
        "unit_um": 1.0,
        "branch_start": "own radius",
        "axon": "cut",
        "orphans": "refused",
    }


def test_shrinkage_and_diameters_are_corrected_before_anything_is_measured():
    swc = "1 1 0 0 0 5 -1\n2 3 55 0 0 1 1\n"
    row = tables_of(
        swc, Assumptions(shrinkage=(2.0, 1.0, 1.0), diameter_factor=0.5, diameter_offset_um=1.0)
    ).cell_row
    assert row["soma_area_um2"] == pytest.approx(4 * pi * 3.0**2)  # d = 0.5 x 10 + 1
    assert row["length_um"] == pytest.approx(110 - 3)
    assert row["area_basal_um2"] == pytest.approx(2 * pi * 107)  # d = 0.5 x 2 + 1


def test_lambda_of_spiny_dendrites_is_that_of_R_m_over_F():
    row = tables_of(trees.with_axon(), Assumptions(domains={4: Membrane(spine_factor=4.0)})).cell_row
    assert row["lambda_apical_greatest_um"] == pytest.approx(lambda_um(5000, 150, 4.0))
    assert row["lambda_axon_greatest_um"] == pytest.approx(
        lambda_um(20000, 150, 2.4)
    )  # where one leaves a dendrite
    assert sqrt(4) * row["lambda_apical_greatest_um"] == pytest.approx(lambda_um(20000, 150, 4.0))
