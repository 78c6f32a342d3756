"""A cell as lines: directions kept, lengths replaced, branches laid out flat, sites at their distances."""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.errors import MorphotoneError
from morphotone.questions.portrait import transform
from morphotone.reading.reconstruction import domain_name
from morphotone.reading.sites import read_sites
from tests import trees
from tests.commands.folders import STUDY
from tests.showing.drawn import portrait

MEASURES = ("path_um", "X", "to_soma", "from_soma")
CELLS = {
    "irregular": trees.irregular(60, 5, soma=True),
    "all domains": trees.with_axon(),
    "three points": trees.soma_three_points(),
    "outline": trees.soma_outline(),
    "chain": trees.soma_chain(),
    "no soma": trees.comb(),
    "joints of no length": trees.zero_length_joints(),
    "spar": (STUDY / "spar_01.swc").read_bytes(),
}
ASSUMPTIONS = Assumptions(membrane=Membrane(R_m_ohm_cm2=9000.0), hz=(50.0,))


@pytest.fixture(scope="module", params=CELLS)
def drawn(request):
    return portrait(CELLS[request.param], ASSUMPTIONS, hz=50.0)


# ---------------------------------------------------------------- the morphoelectrotonic transform


@pytest.mark.parametrize("measure", MEASURES)
def test_lengths_become_what_the_distance_grows_by(drawn, measure):
    """Zador, Agmon-Snir & Segev 1995: every segment as long as its log attenuation."""
    place, parent = drawn.transformed(measure), drawn.cell.cable.parent
    distance = getattr(drawn.distances, measure)
    lengths = np.linalg.norm(place - place[parent], axis=1)[1:]
    np.testing.assert_allclose(lengths, np.abs(distance - distance[parent])[1:], rtol=1e-9, atol=1e-12)
    np.testing.assert_array_equal(place[0], 0.0)


@pytest.mark.parametrize("measure", MEASURES)
def test_directions_are_those_of_the_frusta(drawn, measure):
    place, parent = drawn.transformed(measure), drawn.cell.cable.parent
    start, end = drawn.ends
    step, axis = (place - place[parent])[1:], (end - start)[1:]
    along = np.einsum("ij,ij->i", step, axis)
    np.testing.assert_allclose(along, np.linalg.norm(step, axis=1) * np.linalg.norm(axis, axis=1), rtol=1e-9)


def test_attenuation_adds_up_along_a_path_in_steps_that_are_never_negative(drawn):
    """At rest every frustum attenuates; at a frequency magnitudes do too in a passive cable."""
    parent = drawn.cell.cable.parent
    for distance in drawn.distances[2:]:
        assert (distance - distance[parent])[1:].min() >= 0.0


def test_in_a_straight_cable_the_transform_by_path_is_the_cable():
    drawn = portrait(trees.cylinder(pieces=7))
    np.testing.assert_allclose(drawn.transformed("path_um"), drawn.ends[1] - drawn.ends[1][0], atol=1e-9)


def test_the_transform_by_hand():
    """Two frusta in a row and one aside, lengthened, shortened and left."""
    start = np.array([[0, 0, 0], [0, 0, 0], [3, 0, 0], [3, 0, 0]], float)
    end = np.array([[0, 0, 0], [3, 0, 0], [3, 4, 0], [3, 0, -2]], float)
    place = transform(start, end, np.array([-1, 0, 1, 1]), np.array([0.0, 6.0, 7.0, 8.0]))
    np.testing.assert_allclose(place, [[0, 0, 0], [6, 0, 0], [6, 1, 0], [6, 0, -2]])


def test_a_long_chain_is_summed_whole():
    n = 5000
    end = np.stack((np.arange(n, dtype=float), np.zeros(n), np.zeros(n)), axis=1)
    start = np.concatenate((end[:1], end[:-1]))
    place = transform(start, end, np.arange(-1, n - 1), 0.5 * np.arange(n))
    np.testing.assert_allclose(place[:, 0], 0.5 * np.arange(n))


# ---------------------------------------------------------------- distances, values, lines


def test_distances_are_the_tables(drawn):
    table, cell = drawn.table, drawn.cell
    in_file = np.argsort(cell.rec.line, kind="stable")
    row = np.empty_like(in_file)
    row[in_file] = np.arange(len(in_file))
    columns = ("path_um", "X", "log_attenuation_to_soma_50Hz", "log_attenuation_from_soma_50Hz")
    for column, distance in zip(columns, drawn.distances, strict=True):
        np.testing.assert_array_equal(np.asarray(table[column], float)[row[cell.cable.sample]], distance)
    np.testing.assert_array_equal(drawn.values, drawn.distances.to_soma)


def test_samples_out_of_order_have_their_own_values():
    swc = trees.text_of(trees.rows_of(trees.irregular(40, 2, soma=True))[::-1])
    drawn = portrait(swc, colour="diameter_um")
    traced = drawn.cell.cable.traced
    np.testing.assert_array_equal(drawn.values, 2.0 * traced.radius[drawn.cell.cable.sample])


def test_every_frustum_is_on_one_line_of_its_branch_and_domain(drawn):
    nodes = np.concatenate([run.nodes[1:] for run in drawn.runs])
    assert sorted(nodes.tolist()) == list(range(1, len(drawn.cell.cable.parent)))
    branches = drawn.cell.branches
    for run in drawn.runs:
        np.testing.assert_array_equal(drawn.cell.cable.parent[run.nodes[1:]], run.nodes[:-1])
        assert len(set(branches.of_node[run.nodes[1:]].tolist())) == 1
        assert {domain_name(kind) for kind in drawn.cell.cable.kind[run.nodes[1:]]} == {run.domain}
        assert run.leads == (run.nodes[1] in branches.head)


def test_a_flat_tree_has_each_tip_on_a_row_and_each_branch_amid_its_daughters(drawn):
    branches, level = drawn.cell.branches, drawn.level
    of_branch = level[branches.end]
    tips = of_branch[branches.tips]
    assert sorted(tips.tolist()) == [float(-row) for row in range(len(tips))][::-1]
    for branch in np.flatnonzero(branches.children > 0).tolist():
        daughters = of_branch[branches.parent == branch]
        assert of_branch[branch] == (daughters.min() + daughters.max()) / 2.0
    assert level[0] == (of_branch[branches.parent < 0].min() + of_branch[branches.parent < 0].max()) / 2.0


def test_apical_stands_above_basal_above_the_axon():
    drawn = portrait(trees.with_axon())
    kinds, level = drawn.cell.cable.kind, drawn.level
    apical, basal, axon = (level[1:][kinds[1:] == code] for code in (4, 3, 2))
    assert apical.min() > basal.max()
    assert basal.min() > axon.max()


def test_a_stump_of_cut_axon_has_its_parents_value():
    assumptions = Assumptions(axon="cut", axon_cut_um=100.0)
    drawn = portrait(trees.with_axon(), assumptions, colour="X")
    cable = drawn.cell.cable
    stumps = np.flatnonzero(cable.node[cable.sample] != np.arange(len(cable.sample)))
    assert len(stumps) > 0
    np.testing.assert_array_equal(drawn.values[stumps], drawn.values[cable.parent[stumps]])
    assert np.isfinite(drawn.values).all()


@pytest.mark.parametrize("column", ["domain", "X_100Hz", ""])
def test_a_column_must_be_there_and_hold_numbers(column):
    if not column:
        assert portrait(trees.ball_and_stick(), colour=column).column == "log_attenuation_to_soma"
        return
    with pytest.raises(MorphotoneError, match=f"no numeric column '{column}'.*diameter_um, branch, order"):
        portrait(trees.ball_and_stick(), colour=column)


def test_a_frequency_must_be_one_of_the_cells():
    with pytest.raises(MorphotoneError, match=r"read 7 Hz to show, expected one of the cell's: 0, 50"):
        portrait(trees.ball_and_stick(), ASSUMPTIONS, hz=7.0)


# ---------------------------------------------------------------- sites


@pytest.fixture(scope="module")
def marked():
    sites = read_sites(STUDY / "sites.csv").sites
    return portrait(CELLS["spar"], ASSUMPTIONS, hz=50.0, sites=sites.at(sites.cell == "spar_01"))


@pytest.mark.parametrize("measure", MEASURES)
def test_sites_at_samples_are_as_far_as_these(tmp_path, measure):
    path = tmp_path / "sites.csv"
    path.write_text("cell,site,sample\ncell,a,4\ncell,b,1\ncell,c,3\n", encoding="utf-8")
    marked = portrait(trees.ball_and_stick(), ASSUMPTIONS, hz=50.0, sites=read_sites(path).sites)
    cell = marked.cell
    nodes = [int(np.flatnonzero(cell.rec.number[cell.cable.sample] == number)[0]) for number in (4, 1, 3)]
    expected = getattr(marked.distances, measure)[nodes]
    np.testing.assert_allclose(getattr(marked.marks.distances, measure), expected, rtol=1e-12)
    np.testing.assert_array_equal(marked.marks.position[[0, 2]], marked.ends[1][[nodes[0], nodes[2]]])


def test_ranks_are_by_attenuation_at_the_frequency_shown(marked):
    marks = marked.marks
    np.testing.assert_array_equal(np.argsort(marks.rank), np.argsort(-marks.distances.to_soma))
    at_rest = portrait(
        CELLS["spar"], ASSUMPTIONS, sites=read_sites(STUDY / "sites.csv").sites.at(slice(0, 10))
    ).marks
    assert not np.array_equal(at_rest.distances.to_soma, marks.distances.to_soma)


def test_a_site_at_the_soma_stays_there(tmp_path):
    path = tmp_path / "sites.csv"
    path.write_text("cell,site,sample\ncell,s,1\n", encoding="utf-8")
    drawn = portrait(trees.ball_and_stick(), sites=read_sites(path).sites)
    assert [values.tolist() for values in drawn.marks.distances] == [[0.0]] * 4
    assert drawn.marks.rank.tolist() == [1]
