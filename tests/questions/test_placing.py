"""Where sites lie on a cell: every way to give a place, and every kind of place that is none."""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.electrotonus import build_cases, cases_of, solve_cables
from morphotone.questions.branch_table import branch_table
from morphotone.questions.cell import Cell
from morphotone.questions.placing import placed_on
from morphotone.questions.survey import Prepared
from morphotone.reading.reconstruction import reconstruct
from morphotone.reading.sites import parse_sites
from morphotone.reading.vetting import Vetting
from tests import trees

DEFAULTS = Assumptions()
HEADER = "cell,site,sample,fraction,x_um,y_um,z_um,branch,along_um"

CELL = """\
10 1 0 0 0 10 -1
11 3 30 0 0 2 10
12 3 130 0 0 1 11
13 3 130 0 0 0.8 12
14 3 130 60 0 0.5 13
15 3 230 0 0 0.5 12
20 2 -20 0 0 1 10
21 2 -120 0 0 1 20
22 3 -120 50 0 1 21
30 3 500 0 0 1 -1
31 3 600 0 0 1 30
"""
"""Soma of radius 10; a stem of 20 µm; a branch point at 130 with a coincident twin; an axon with something
on it; an orphan."""


def prepared_of(swc, assumptions=DEFAULTS):
    rec = reconstruct(swc.encode(), file="rook.swc", cell="rook")
    return Prepared("rook.swc", rec, Vetting((), "sound"), build_cases(rec, [assumptions]))


def sites_of(*places):
    """Return sites from dicts of their fields."""
    lines = [
        ",".join(str({"cell": "rook", "site": f"s{k}", **place}.get(name, "")) for name in HEADER.split(","))
        for k, place in enumerate(places)
    ]
    file = parse_sites("\n".join([HEADER, *lines]).encode(), "sites.csv")
    assert not file.turned_away
    return file.sites


def at(sample, fraction=""):
    return {"sample": sample, "fraction": fraction}


def along(branch, um):
    return {"branch": branch, "along_um": um}


def space(x, y, z):
    return {"x_um": x, "y_um": y, "z_um": z}


def put(*places, swc=CELL, assumptions=DEFAULTS, **limit):
    return placed_on(prepared_of(swc, assumptions), sites_of(*places), assumptions, **limit)


def paths_of(placed, assumptions=DEFAULTS):
    """Return the path from the soma's surface to each site, µm."""
    solved = solve_cables([(placed.sited.cable,)], cases_of([assumptions]))[0]
    return solved.path_um[placed.sited.node, 0]


def one_turned_away(place, assumptions=DEFAULTS, swc=CELL, **limit):
    """Put one bad site between two good ones, and return why it was turned away."""
    placed, (away,) = put(at(11), place, at(12), swc=swc, assumptions=assumptions, **limit)
    assert placed.sites.site.tolist() == ["s0", "s2"]
    assert len(placed.sited.node) == len(placed.moved_um) == len(placed.straight_um) == 2
    assert (away.line, away.cell, away.site) == (3, "rook", "s1")
    assert away.sentence.startswith("sites.csv: line 3: read ")
    return away


# ---------------------------------------------------------------- by sample


def test_at_a_sample_and_between_it_and_its_parent():
    placed, away = put(at(11), at(12, 0.25), at(12, 0), at(12, 1), at(11, 0.5))
    assert away == ()
    np.testing.assert_allclose(paths_of(placed), [20, 95, 120, 20, 10], rtol=1e-14)
    np.testing.assert_allclose(placed.straight_um, [30, 105, 130, 30, 20], rtol=1e-14)
    assert placed.moved_um.tolist() == [0.0] * 5


def test_on_the_soma():
    placed, away = put(at(10), at(10, 0.5), at(11, 1), space(0, 0, 3), space(0, -12, 0))
    assert away == ()
    assert placed.sited.node.tolist() == [0] * 5
    np.testing.assert_allclose(placed.moved_um, [0, 0, 0, 0, 2])


def test_on_any_sample_of_a_soma_of_several():
    placed, away = put(at(1), at(2), at(3, 0.7), swc=trees.soma_three_points())
    assert away == ()
    assert placed.sited.node.tolist() == [0, 0, 0]


def test_coincident_samples_are_one_place():
    placed, away = put(at(12), at(13), at(13, 0.4), at(14, 1))
    assert away == ()
    assert len(set(placed.sited.node.tolist())) == 1
    np.testing.assert_allclose(paths_of(placed), 120, rtol=1e-14)


def test_two_sites_at_one_place_share_a_node_whatever_the_way():
    placed, away = put(at(12, 0.5), at(12, 0.5), along(1, 70), space(80, 1.5, 0))
    assert away == ()
    assert placed.sited.node[0] == placed.sited.node[1] == placed.sited.node[2]
    np.testing.assert_allclose(paths_of(placed)[:3], 70, rtol=1e-14)
    assert paths_of(placed)[3] == pytest.approx(70, rel=1e-12)
    assert placed.moved_um[3] < 1e-12


def test_a_sample_of_another_file():
    away = one_turned_away(at(99))
    assert away.reason == "sample_unknown"
    assert "read sample 99, expected the number of one of the 11 samples of rook.swc" in away.sentence


def test_a_root_without_soma_has_no_parent():
    placed, (away,) = put(at(1), at(1, 0.5), at(2, 1), swc=trees.cylinder())
    assert placed.sited.node.tolist() == [0, 0]
    assert away.reason == "no_parent"
    assert "read sample 1 with fraction 0.5, expected none" in away.sentence


def test_toward_the_parent_in_the_file_where_the_tree_is_hung_from_its_soma():
    """The file's root is a tip: its child is its parent in the cable; fractions count as written."""
    swc = "1 3 100 0 0 1 -1\n2 3 40 0 0 1 1\n3 1 0 0 0 10 2\n4 3 -40 0 0 1 3\n"
    placed, (away,) = put(at(2, 0.25), at(2, 1), at(3, 0.5), at(4, 0.5), at(1), at(1, 0.5), swc=swc)
    assert away.reason == "no_parent"
    # The frustum between samples 3 and 2 is a stem of 30 µm; sample 3 lies in the soma.
    np.testing.assert_allclose(paths_of(placed), [45, 90, 15, 15, 90], rtol=1e-14)
    np.testing.assert_allclose(placed.straight_um, [55, 100, 25, 25, 100], rtol=1e-14)


# ---------------------------------------------------------------- axon and orphans


@pytest.mark.parametrize("place", [at(20), at(21, 0.5), at(22), at(22, 1)])
def test_on_an_axon_left_out(place):
    away = one_turned_away(place, Assumptions(axon="left out"))
    assert away.reason == "axon_left_out"
    assert f"read sample {place['sample']} with fraction" in away.sentence
    assert 'axon = "kept"' in away.sentence


def test_before_at_and_beyond_an_axon_cut():
    """The axon starts at the soma's surface: 10 µm to sample 20, 110 µm to sample 21, cut at 60 µm."""
    cut = Assumptions(axon="cut", axon_cut_um=60.0)
    placed, away = put(at(20), at(21, 0.75), at(21, 0.5), at(21, 0.49), at(21), at(22, 1), assumptions=cut)
    np.testing.assert_allclose(paths_of(placed, cut), [10, 35, 60], rtol=1e-14)
    np.testing.assert_allclose(placed.straight_um, [20, 45, 70], rtol=1e-14)
    assert [each.reason for each in away] == ["beyond_axon_cut"] * 3
    assert "read sample 21 with fraction 0.49, beyond 60 um of axon, where it is cut" in away[0].sentence


@pytest.mark.parametrize("place", [at(30), at(31), at(31, 0.5)])
def test_on_an_orphan(place):
    away = one_turned_away(place, Assumptions(orphans="left out"))
    assert away.reason == "orphan"
    assert "on a piece that is not connected to the analysed tree" in away.sentence


def test_on_an_orphan_that_is_joined():
    joined = Assumptions(orphans="joined", orphan_gap_um=400.0)
    placed, away = put(at(30), at(31, 0.5), assumptions=joined)
    assert away == ()
    np.testing.assert_allclose(paths_of(placed, joined), [220 + 270, 220 + 270 + 50], rtol=1e-14)


# ---------------------------------------------------------------- in space


def test_near_the_cable_and_too_far_from_it():
    placed, (away,) = put(space(80, 4, 0), space(80, 8, 0), space(30, -2, 0.0))
    assert placed.sites.site.tolist() == ["s0", "s2"]
    assert placed.moved_um[0] == pytest.approx(2.5 * 100 / np.hypot(100, 1), rel=1e-12)
    assert away.reason == "too_far"
    assert (
        "read x, y, z 80, 8, 0, which is 6.5 um from the nearest cable, expected at most 5 um"
        in away.sentence
    )


def test_the_limit_can_be_set():
    assert put(space(80, 8, 0), farthest_um=7.0)[1] == ()
    assert one_turned_away(space(80, 4, 0), farthest_um=2.0).reason == "too_far"


def test_points_shrink_and_grow_with_the_cell():
    """Coordinates are the file's; shrinkage correction applies to them as to the samples."""
    grown = Assumptions(shrinkage=(2.0, 2.0, 4.0))
    placed, away = put(space(80, 0.75, 0), assumptions=grown)
    assert away == ()
    assert placed.moved_um[0] < 0.01
    assert paths_of(placed, grown)[0] == pytest.approx(150, abs=0.01)  # 160 from the centre, radius 10


def test_a_point_on_left_out_cable_is_measured_from_what_is_analysed():
    assert one_turned_away(space(-80, 0, 1), Assumptions(axon="left out")).reason == "too_far"


# ---------------------------------------------------------------- along a branch


def test_along_branches_as_their_table_numbers_and_measures_them():
    prepared = prepared_of(trees.irregular(200, 12, soma=True))
    solved = solve_cables([prepared.cables], cases_of([DEFAULTS]))[0]
    table = branch_table(Cell(prepared.rec, prepared.vetting, solved))
    rng = np.random.default_rng(31)
    share = rng.random(len(table["branch"]))
    share[:4] = [0, 1, 0, 1]
    um = share * table["length_um"]
    sites = sites_of(*(along(*each) for each in zip(table["branch"].tolist(), um.tolist(), strict=True)))
    placed, away = placed_on(prepared, sites, DEFAULTS)
    assert away == ()
    start = table["path_end_um"] - table["length_um"]
    np.testing.assert_allclose(paths_of(placed), start + um, rtol=1e-9)
    cell = Cell(
        prepared.rec, prepared.vetting, solve_cables([(placed.sited.cable,)], cases_of([DEFAULTS]))[0]
    )
    inside = (share > 0) & (share < 1)
    np.testing.assert_array_equal(
        cell.branches.of_node[placed.sited.node[inside]] + 1, table["branch"][inside]
    )


def test_beyond_a_branch():
    away = one_turned_away(along(1, 120.2))
    assert away.reason == "beyond_branch"
    assert "read along_um 120.2 on branch 1, expected at most its length of 120 um" in away.sentence


def test_at_a_branch_s_end_as_a_table_rounds_it():
    placed, away = put(along(1, 120.00001))
    assert away == ()
    np.testing.assert_allclose(paths_of(placed), 120, rtol=1e-14)


def test_a_branch_that_is_not_there():
    away = one_turned_away(along(9, 1))
    assert away.reason == "branch_unknown"
    assert "read branch 9, expected the number of one of the 4 branches in branches.csv" in away.sentence


# ---------------------------------------------------------------- together


def test_a_soma_alone_takes_what_touches_it():
    alone = Assumptions(axon="left out")
    swc = "1 1 0 0 0 5 -1\n2 2 30 0 0 1 1\n"
    placed, away = put(at(1), space(0, 6, 0), along(1, 0), at(2), swc=swc, assumptions=alone)
    assert placed.sited.node.tolist() == [0, 0]
    assert [each.reason for each in away] == ["branch_unknown", "axon_left_out"]


def test_no_sites():
    placed, away = placed_on(prepared_of(CELL), sites_of(at(11)).at(np.empty(0, np.int64)), DEFAULTS)
    assert (len(placed.sites), len(placed.sited.node), away) == (0, 0, ())


def test_rows_in_are_placed_and_turned_away_in_order():
    rng = np.random.default_rng(32)
    ways = (
        lambda: at(rng.integers(9, 33), round(rng.random(), 2)),
        lambda: space(*rng.uniform(-150, 250, 3).round(1)),
        lambda: along(rng.integers(1, 8), round(rng.uniform(0, 150), 1)),
    )
    sites = sites_of(*(ways[rng.integers(3)]() for _ in range(400)))
    cut = Assumptions(axon="cut", axon_cut_um=60.0)
    placed, away = placed_on(prepared_of(CELL, cut), sites, cut)
    lines = [*placed.sites.line.tolist(), *(each.line for each in away)]
    assert sorted(lines) == sites.line.tolist()
    assert [each.line for each in away] == sorted(each.line for each in away)
    assert {each.reason for each in away} >= {"sample_unknown", "orphan", "too_far", "beyond_branch"}
    assert len(placed.sites) > 50
