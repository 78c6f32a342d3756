"""Branches against a walk from piece to piece, hand-worked cells, and cells that have hardly any cable."""

from math import cosh, pi, sqrt, tanh

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.questions.branches import branches_of, endless_conductance
from tests import trees
from tests.outside.cells import solved
from tests.questions.walking import branches_by_definition, differing, tables_of, walk

HZ = (100.0,)
OTHER = Membrane(12000.0, 80.0, 0.7, 1.9)
ASSUMPTIONS = {
    "defaults": Assumptions(hz=HZ),
    "own radius": Assumptions(hz=HZ, branch_start="own radius"),
    "domains": Assumptions(Membrane(spine_factor=1.4), {2: Membrane(9000.0, 70.0), 4: OTHER}, hz=HZ),
}


def rows(table):
    """Return the rows of a table of columns, one dict each."""
    columns = [np.asarray(values).tolist() for values in table.values()]
    return [dict(zip(table, cells, strict=True)) for cells in zip(*columns, strict=True)]


def by_end(table):
    """Return sample_end -> row, with the sample at the parent branch's end in the place of its number."""
    end = {row["branch"]: row["sample_end"] for row in rows(table)}
    out = {}
    for row in rows(table):
        del row["branch"]
        row["parent_end"] = end.get(row.pop("parent_branch"))
        out[row["sample_end"]] = row
    return out


@pytest.mark.parametrize("assumed", ASSUMPTIONS)
@pytest.mark.parametrize("family", trees.FAMILIES)
def test_every_column_against_a_walk(family, assumed):
    build, rule = trees.FAMILIES[family]
    assumptions = ASSUMPTIONS[assumed]
    expected = branches_by_definition(walk(build(), assumptions, rule))
    got = by_end(tables_of(build(), assumptions).branch_table)
    assert got.keys() == expected.keys()
    assert {end: wrong for end in got if (wrong := differing(got[end], expected[end]))} == {}


@pytest.mark.parametrize("key", range(6))
def test_random_trees_against_a_walk(key):
    swc = trees.irregular(120, key, soma=bool(key % 2))
    expected = branches_by_definition(walk(swc, Assumptions(), "sphere" if key % 2 else "none"))
    got = by_end(tables_of(swc).branch_table)
    assert got.keys() == expected.keys()
    assert {end: wrong for end in got if (wrong := differing(got[end], expected[end]))} == {}


def literal_branches(parent):
    """Return the branches as lists of nodes, by following each from its first node."""
    children = {node: [k for k, p in enumerate(parent) if p == node] for node in range(len(parent))}
    found, waiting = [], [[node] for node in children[0]]
    while waiting:
        run = waiting.pop()
        while len(children[run[-1]]) == 1:
            run += children[run[-1]]
        waiting += [[node] for node in children[run[-1]]]
        found.append(run)
    return sorted(found)


@pytest.mark.parametrize("key", range(20))
def test_random_parents_give_the_runs_that_following_them_gives(key):
    rng = np.random.default_rng(key)
    size, reach = int(rng.integers(2, 60)), int(rng.integers(1, 8))
    parent = np.array([-1, *(int(rng.integers(max(0, node - reach), node)) for node in range(1, size))])
    branches = branches_of(parent)
    runs = [np.flatnonzero(branches.of_node == branch).tolist() for branch in range(len(branches.head))]
    assert runs == literal_branches(parent)
    assert branches.head.tolist() == [run[0] for run in runs]
    assert branches.end.tolist() == [run[-1] for run in runs]
    assert branches.parent.tolist() == [branches.of_node[parent[run[0]]] for run in runs]
    assert branches.children.tolist() == [int((parent == run[-1]).sum()) for run in runs]
    for branch, up in enumerate(branches.parent):
        assert branches.order[branch] == (1 if up < 0 else branches.order[up] + 1)


def test_amounts_are_added_up_and_compared_branch_by_branch():
    branches = branches_of(np.array([-1, 0, 1, 1, 3, 0]))  # 0-1, 1-2, 1-3-4, 0-5
    amounts = np.array([100.0, 1.0, 2.0, 4.0, 8.0, 16.0])
    assert branches.total(amounts).tolist() == [1.0, 2.0, 12.0, 16.0]
    assert branches.least(amounts).tolist() == [1.0, 2.0, 4.0, 16.0]
    assert branches.tips.tolist() == [1, 2, 3]


def test_a_lone_node_has_no_branch():
    branches = branches_of(np.array([-1]))
    assert branches.of_node.tolist() == [-1]
    for values in (branches.head, branches.end, branches.parent, branches.order, branches.children):
        assert values.tolist() == []
        assert values.dtype == np.int64
    assert branches.tips.tolist() == []


def test_a_path_of_very_many_nodes_is_one_branch():
    branches = branches_of(np.arange(-1, 100_000))
    assert (branches.head.tolist(), branches.end.tolist()) == ([1], [100_000])
    assert branches.of_node.tolist() == [-1] + [0] * 100_000


def test_a_branching_chain_of_very_many_branches():
    many = 20_000
    parent = np.repeat(2 * np.arange(-1, many), 2)[1:]  # two nodes leave every second node
    parent[0] = -1
    branches = branches_of(parent)
    assert len(branches.head) == 2 * many
    assert branches.order.max() == many


Y = """\
1 3 0 0 0 1.0 -1
2 3 100 0 0 1.0 1
3 3 100 0 0 0.5 2
4 3 100 60 0 0.5 3
5 3 100 120 0 0.5 4
6 4 100 0 0 0.4 2
7 4 100 0 80 0.2 6
"""


def test_a_Y_worked_by_hand():
    """R_m 10,000 and R_i 100 make lambda = 1e4 sqrt(100 d/4 1e-4) = 500 sqrt(d) um with d in um."""
    parent, left, right = rows(tables_of(Y, Assumptions(Membrane(10000.0, 100.0))).branch_table)
    assert [parent["branch"], left["branch"], right["branch"]] == [1, 2, 3]
    assert [parent["parent_branch"], left["parent_branch"], right["parent_branch"]] == [0, 1, 1]
    assert [parent["order"], left["order"], right["order"]] == [1, 2, 2]
    assert [parent["children"], left["children"], right["children"]] == [2, 0, 0]
    assert [parent["domain"], left["domain"], right["domain"]] == ["basal", "basal", "apical"]
    assert [(each["sample_start"], each["sample_end"]) for each in (parent, left, right)] == [
        (1, 2),
        (2, 5),
        (2, 7),
    ]
    assert [parent["length_um"], left["length_um"], right["length_um"]] == pytest.approx([100, 120, 80])
    assert [right["diameter_first_um"], right["diameter_mean_um"], right["diameter_end_um"]] == pytest.approx(
        [0.4, 0.6, 0.4]  # the first sample that lies at a distance is its last
    )
    assert parent["area_um2"] == pytest.approx(2 * pi * 100)
    assert right["area_um2"] == pytest.approx(pi * 0.6 * sqrt(80**2 + 0.2**2))
    assert parent["lambda_um"] == pytest.approx(500 * sqrt(2))
    assert left["lambda_um"] == pytest.approx(500)
    assert (right["lambda_least_um"], right["lambda_greatest_um"]) == pytest.approx(
        (500 * sqrt(0.4), 500 * sqrt(0.8))
    )
    assert left["L"] == pytest.approx(120 / 500)
    assert left["X_end"] == pytest.approx(100 / (500 * sqrt(2)) + 120 / 500)
    assert (left["path_end_um"], right["path_end_um"]) == (220.0, 180.0)
    assert parent["rall_ratio_end"] == pytest.approx((1.0**1.5 + 0.4**1.5) / 2.0**1.5)
    assert np.isnan([left["rall_ratio_end"], right["rall_ratio_end"]]).all()
    # (pi/2) (2e-4 cm)^1.5 / sqrt(1e4 x 100) S = 4.4429 nS
    assert parent["G_inf_start_nS"] == pytest.approx(4.442882938158366)


def test_ball_and_stick_is_one_stem_from_the_soma():
    """A stem from the sphere's surface; its first sample lies on it and is the soma's node."""
    (stem,) = rows(tables_of(trees.ball_and_stick(10.0, 600.0, 2.0, 3)).branch_table)
    lam = 1e4 * sqrt(20000 / 150 * 2e-4 / 4)
    assert (stem["sample_start"], stem["sample_end"], stem["parent_branch"], stem["order"]) == (1, 5, 0, 1)
    assert (stem["length_um"], stem["diameter_mean_um"]) == pytest.approx((600.0, 2.0))
    assert (stem["lambda_um"], stem["L"]) == pytest.approx((lam, 600 / lam))
    # Rall 1959: voltage along a sealed cylinder falls by cosh L, whatever is at its start.
    assert stem["attenuation_from_soma_end"] == pytest.approx(cosh(600 / lam))


def test_G_inf_is_what_a_very_long_cylinder_takes():
    """The engine knows nothing of G_inf: 60 lambda of cable have that input conductance (Rall 1959)."""
    swc = trees.cylinder(length=60 * 500 * sqrt(3.0), diameter=3.0, pieces=100)
    R_in = solved(swc, R_m=10000.0, R_i=100.0).R_in_MOhm[0, 0]
    table = tables_of(swc, Assumptions(Membrane(10000.0, 100.0))).branch_table
    assert table["G_inf_start_nS"][0] == pytest.approx(1e3 / R_in, rel=1e-12)
    spiny = tables_of(swc, Assumptions(Membrane(10000.0, 100.0, spine_factor=4.0))).branch_table
    assert spiny["G_inf_start_nS"][0] == pytest.approx(2 * 1e3 / R_in)  # as R_m/4


def test_G_inf_of_arrays():
    got = endless_conductance(np.array([1.0, 4.0]), np.array([100.0, 100.0]), np.array([1e-4, 1e-4]))
    assert got == pytest.approx([pi / 2 * 1e-6 / 1e3 * 1e9, 8 * pi / 2 * 1e-6 / 1e3 * 1e9])


def test_six_trees_obey_the_three_halves_rule_at_every_branch_point():
    table = tables_of(trees.rall_neuron(6, 3, 1.0), Assumptions(Membrane(10000.0, 100.0))).branch_table
    assert len(table["branch"]) == 6 * (1 + 2 + 4 + 8)
    assert np.bincount(table["order"]).tolist() == [0, 6, 12, 24, 48]
    assert np.bincount(table["children"]).tolist() == [48, 0, 42]
    inner = np.asarray(table["children"]) > 0
    assert table["rall_ratio_end"][inner] == pytest.approx(1.0)
    assert table["L"] == pytest.approx(0.25)
    assert table["X_end"] == pytest.approx(0.25 * table["order"])
    # All of it is a cylinder of L = 1 seen from its middle: cosh 1 / cosh(1 - X) (Rall 1962).
    assert table["attenuation_from_soma_end"] == pytest.approx(np.cosh(1) / np.cosh(1 - table["X_end"]))
    assert table["G_inf_start_nS"][:1] * 6 * tanh(1) == pytest.approx(
        1e3 / solved(trees.rall_neuron(6, 3, 1.0)).R_in_MOhm[0, 0]
    )


def test_samples_at_no_distance_make_no_branch_of_their_own():
    table = tables_of(trees.zero_length_joints()).branch_table
    starts_ends = list(zip(table["sample_start"].tolist(), table["sample_end"].tolist(), strict=True))
    assert starts_ends == [(1, 3), (3, 6), (3, 7), (1, 9)]
    assert table["children"].tolist() == [2, 0, 0, 0]


def test_an_axon_left_out_ends_no_branch():
    """A branch point of the file where only the dendrite goes on is no branch point of the cable."""
    swc = "1 1 0 0 0 5 -1\n2 3 50 0 0 1 1\n3 3 90 0 0 1 2\n4 2 50 40 0 0.3 2\n"
    assert tables_of(swc).branch_table["sample_end"].tolist() == [2, 3, 4]
    assert tables_of(swc, Assumptions(axon="left out")).branch_table["sample_end"].tolist() == [3]


def test_a_cut_axon_ends_where_it_is_cut():
    """Cut at 25 um of a frustum of 40 um that tapers from 1 to 0.6 um: its end is 0.75 um thick."""
    swc = "1 1 0 0 0 5 -1\n2 3 50 0 0 1 1\n3 2 0 15 0 0.5 1\n4 2 0 55 0 0.3 3\n5 2 0 99 0 0.3 4\n"
    table = tables_of(swc, Assumptions(axon="cut", axon_cut_um=35.0)).branch_table
    assert table["length_um"].tolist() == pytest.approx([45.0, 35.0])
    assert table["diameter_end_um"].tolist() == pytest.approx([2.0, 0.75])
    assert table["path_end_um"].tolist() == pytest.approx([45.0, 35.0])


def test_no_branches_give_an_empty_table_with_every_column():
    empty = tables_of("1 1 0 0 0 5 -1\n2 3 3 0 0 1 1\n", Assumptions(hz=HZ)).branch_table
    whole = tables_of(trees.ball_and_stick(), Assumptions(hz=HZ)).branch_table
    assert list(empty) == list(whole)
    assert {len(values) for values in empty.values()} == {0}
