"""Long frusta cut for drawing: the same cell, its lines bent as the voltage bends."""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.questions.refined import refined
from tests import trees
from tests.commands.folders import STUDY
from tests.showing.drawn import portrait

MEASURES = ("path_um", "X", "to_soma", "from_soma")
CELLS = {
    "ball and stick": trees.ball_and_stick(),
    "all domains": trees.with_axon(),
    "chain": trees.soma_chain(),
    "no soma": trees.comb(),
}


@pytest.fixture(params=CELLS)
def pair(request):
    coarse = portrait(CELLS[request.param], Assumptions(hz=(100.0,)), hz=100.0)
    return coarse, refined(coarse)


def test_every_old_node_is_among_the_new_ones_unmoved(pair):
    coarse, fine = pair
    new = {tuple(place): row for row, place in enumerate(np.round(fine.ends[1], 6).tolist())}
    rows = [new[tuple(place)] for place in np.round(coarse.ends[1], 6).tolist()]
    assert len(fine.values) > len(coarse.values)
    for measure in MEASURES:
        here, there = getattr(fine.distances, measure)[rows], getattr(coarse.distances, measure)
        np.testing.assert_allclose(here, there, rtol=1e-9, atol=1e-12)
        np.testing.assert_allclose(fine.transformed(measure)[rows], coarse.transformed(measure), atol=1e-9)
    np.testing.assert_allclose(fine.values[rows], coarse.values, rtol=1e-9, atol=1e-12)


def test_pieces_are_short_and_follow_each_other(pair):
    coarse, fine = pair
    assert fine.cell.L.max() < 0.1  # tapers are cut by length, along which X does not grow evenly
    assert coarse.cell.L.max() > 0.1
    start, end = fine.ends
    inside = (
        np.flatnonzero(fine.cell.cable.sample[1:] == fine.cell.cable.sample[fine.cell.cable.parent[1:]]) + 1
    )
    assert len(inside) > 0
    np.testing.assert_allclose(start[inside], end[fine.cell.cable.parent[inside]], atol=1e-9)
    lengths = np.linalg.norm(end - start, axis=1)[1:]
    np.testing.assert_allclose(lengths, fine.cell.cable.length[1:], rtol=1e-9)
    assert len(fine.runs) == len(coarse.runs)


def test_a_sealed_cylinder_bends_as_cosh():
    """V(X)/V(L) = cosh(L − X) in a sealed cylinder (Rall 1959, Exp Neurol 1:491–527)."""
    fine = refined(portrait(trees.cylinder(length=1500.0)))
    X = fine.distances.X
    expected = np.log(np.cosh(X.max())) - np.log(np.cosh(X.max() - X))
    assert len(X) > 20
    np.testing.assert_allclose(fine.distances.from_soma, expected, rtol=1e-9, atol=1e-12)


def test_a_densely_traced_cell_is_left_as_it_is():
    dense = portrait((STUDY / "spar_01.swc").read_bytes())
    assert refined(dense) is dense


def test_other_values_stand_for_whole_frusta():
    coarse = portrait(trees.ball_and_stick(), colour="diameter_um")
    assert set(refined(coarse).values.tolist()) == set(coarse.values.tolist())
