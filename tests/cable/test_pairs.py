"""Pairs of sites against the literal definitions, a dense inverse, networkx's common ancestors, by hand."""

from itertools import product

import networkx as nx
import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.delays import delays
from morphotone.cable.electrotonus import cases_of, solve_cables
from morphotone.cable.pairs import common_nodes, coupling, pair_delays
from morphotone.cable.tree import build
from morphotone.reading.reconstruction import reconstruct
from tests import definitions, trees
from tests.cable.nodal import impedances
from tests.definitions import Choices

DEFAULTS = Assumptions()


def cable(swc, assumptions=DEFAULTS):
    return build(reconstruct(swc.encode(), file="tree.swc", cell="tree"), assumptions)


def some_nodes(cell, count, key=1):
    return np.random.default_rng(key).integers(0, len(cell.parent), count)


# ---------------------------------------------------------------- common nodes


@pytest.mark.parametrize("key", range(5))
def test_common_nodes_are_networkx_lowest_common_ancestors(key):
    cell = cable(trees.irregular(60, key, soma=key % 2 == 0))
    graph = nx.DiGraph(zip(cell.parent[1:].tolist(), range(1, len(cell.parent)), strict=True))
    nodes = some_nodes(cell, 25, key)
    expected = dict(nx.all_pairs_lowest_common_ancestor(graph))
    got = common_nodes(cell.parent, nodes, nodes)
    for (i, a), (j, b) in product(enumerate(nodes.tolist()), repeat=2):
        assert got[i, j] == (expected[a, b] if (a, b) in expected else expected[b, a])


def test_common_nodes_of_two_groups_are_a_part_of_those_of_all():
    cell = cable(trees.irregular(80, 3, soma=True))
    nodes = some_nodes(cell, 30)
    whole = common_nodes(cell.parent, nodes, nodes)
    assert np.array_equal(common_nodes(cell.parent, nodes[:12], nodes[20:]), whole[:12, 20:])


def test_common_nodes_of_a_tree_that_does_not_list_branches_one_after_the_other():
    parent = np.array([-1, 0, 0, 1, 2, 1, 2, 3])
    nodes = np.arange(8)
    assert common_nodes(parent, np.array([7]), nodes).tolist() == [[0, 1, 0, 3, 0, 1, 0, 7]]


def test_a_single_node_is_its_own_common_node():
    assert common_nodes(np.array([-1]), np.array([0, 0]), np.array([0])).tolist() == [[0], [0]]


def test_no_sites_give_an_empty_matrix():
    nobody = np.array([], np.int64)
    got = coupling(cable(trees.star()), DEFAULTS, nobody)
    assert got.Z.shape == got.log_attenuation.shape == (0, 0)


# ---------------------------------------------------------------- impedances


@pytest.mark.parametrize("family", ["star", "comb", "irregular with soma", "extremes", "soma chain"])
@pytest.mark.parametrize("hz", [0.0, 100.0, 10000.0])
def test_every_pair_is_that_of_the_literal_definitions(family, hz):
    make, rule = trees.FAMILIES[family]
    swc = make()
    literal = definitions.cable_of(swc, Choices(rule))
    Z = definitions.impedance_matrix(literal, hz)
    cell = cable(swc)
    numbers = sorted(literal.node)
    nodes = cell.node[np.array(numbers) - 1]
    got = coupling(cell, DEFAULTS, nodes, hz)
    at = [literal.node[n] for n in numbers]
    expected = np.array([[complex(Z[i, j]) for j in at] for i in at])
    np.testing.assert_allclose(got.Z, expected, rtol=1e-11, atol=0)
    ratio = np.array([[float(abs(Z[i, i] / Z[i, j])) for j in at] for i in at])
    np.testing.assert_allclose(got.attenuation, ratio, rtol=1e-11, atol=0)


@pytest.mark.parametrize("key", range(4))
@pytest.mark.parametrize("hz", [0.0, 300.0])
def test_pairs_of_larger_irregular_trees_are_the_dense_inverse(key, hz):
    cell = cable(trees.irregular(300, key, soma=key % 2 == 0))
    nodes = np.arange(len(cell.parent))
    got = coupling(cell, DEFAULTS, nodes, hz)
    # The dense matrix has condition numbers up to 2e9: it is the inverse that is off by 1e-9.
    np.testing.assert_allclose(got.Z, impedances(cell, DEFAULTS, hz), rtol=1e-8, atol=0)


@pytest.mark.parametrize("hz", [0.0, 1000.0])
def test_impedances_are_symmetric_to_the_last_bit(hz):
    cell = cable(trees.irregular(500, 7, soma=True))
    nodes = some_nodes(cell, 200)
    got = coupling(cell, DEFAULTS, nodes, hz)
    assert np.array_equal(got.Z, got.Z.T)
    assert np.array_equal(got.common, got.common.T)


def test_pairs_with_the_soma_are_the_survey_s_own_numbers():
    cell = cable(trees.irregular(200, 4, soma=True))
    nodes = some_nodes(cell, 50)
    (whole,) = solve_cables([(cell,)], cases_of([DEFAULTS], (100.0,)))
    for case, hz in enumerate((0.0, 100.0)):
        to, back = (
            coupling(cell, DEFAULTS, a, hz, b) for a, b in ((nodes, np.array([0])), (np.array([0]), nodes))
        )
        np.testing.assert_allclose(to.Z[:, 0], whole.Z_transfer[nodes, case], rtol=1e-13)
        np.testing.assert_allclose(
            to.log_attenuation[:, 0], whole.log_attenuation_to_soma[nodes, case], rtol=1e-13
        )
        np.testing.assert_allclose(
            back.log_attenuation[0], whole.log_attenuation_from_soma[nodes, case], rtol=1e-13
        )


def test_a_site_with_itself():
    cell = cable(trees.comb())
    nodes = some_nodes(cell, 10)
    got = coupling(cell, DEFAULTS, np.append(nodes, nodes))
    assert np.array_equal(np.diagonal(got.log_attenuation, 10), np.zeros(10))
    assert np.array_equal(np.diagonal(got.Z, 10), np.diagonal(got.Z)[:10])


def test_on_path_is_ancestry():
    cell = cable(trees.irregular(60, 9, soma=True))
    nodes = np.arange(len(cell.parent))
    on_path = coupling(cell, DEFAULTS, nodes).on_path
    for j in nodes.tolist():
        above, here = {j}, j
        while here:
            here = int(cell.parent[here])
            above.add(here)
        assert set(np.flatnonzero(on_path[:, j]).tolist()) == above


def test_equal_arms_by_hand():
    """Two sealed cylinders of L = 1 from one point are one of L = 2: coth 2 at its end, 1/sinh 2 across."""
    lam = 1e4 * np.sqrt(20000 / 150 * 2e-4 / 4)
    tree = trees.Tree()
    root = tree.add((0, 0, 0), 1.0)
    for side in (-1, 1):
        tree.grow(root, (side * lam, 0, 0), 1.0)
    got = coupling(cable(tree.text()), DEFAULTS, np.array([1, 2]))
    R_inf = 2 * np.sqrt(20000 * 150) / (np.pi * 2e-4**1.5) / 1e6
    np.testing.assert_allclose(got.Z, R_inf / np.array([[np.tanh(2), np.sinh(2)], [np.sinh(2), np.tanh(2)]]))
    np.testing.assert_allclose(got.attenuation, [[1, np.cosh(2)], [np.cosh(2), 1]])


# ---------------------------------------------------------------- delays


@pytest.mark.parametrize("key", [2, 3])
def test_delays_are_the_slope_of_the_impedance_s_phase(key):
    """−d ln Z/ds at 0 from the imaginary part of Z at a low frequency, whose error falls with its square."""
    cell = cable(trees.irregular(120, key, soma=key == 3))
    nodes = some_nodes(cell, 30)
    got = pair_delays(cell, DEFAULTS, nodes)
    hz = 1e-3
    slope = -np.angle(coupling(cell, DEFAULTS, nodes, hz).Z) / (2 * np.pi * hz) * 1e3
    np.testing.assert_allclose(got.total_ms, slope, rtol=1e-7)
    assert np.array_equal(got.total_ms, got.total_ms.T)
    local = np.diagonal(got.total_ms)[:, None]
    np.testing.assert_allclose(got.propagation_ms, got.total_ms - local, rtol=0, atol=1e-12 * local.max())


def test_delays_to_the_soma_are_those_of_the_delays_table():
    cell = cable(trees.irregular(120, 3, soma=True))
    nodes, soma = some_nodes(cell, 40), np.array([0])
    (whole,) = delays([cell], DEFAULTS)
    to, back = pair_delays(cell, DEFAULTS, nodes, soma), pair_delays(cell, DEFAULTS, soma, nodes)
    np.testing.assert_allclose(to.total_ms[:, 0], whole.total_ms[nodes], rtol=1e-12)
    np.testing.assert_allclose(to.propagation_ms[:, 0], whole.propagation_ms[nodes], rtol=1e-12)
    np.testing.assert_allclose(back.propagation_ms[0], whole.net_ms[nodes], rtol=1e-12)
