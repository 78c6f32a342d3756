"""Steady synapses against dense solves of the whole cell, circuits solved by hand, and Rall's six trees."""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.circuit import alone, steady, veto
from morphotone.cable.pairs import coupling
from morphotone.cable.tree import build
from morphotone.errors import AssumptionError
from morphotone.reading.reconstruction import reconstruct
from tests import trees
from tests.cable.nodal import admittances

DEFAULTS = Assumptions()


def cable(swc, assumptions=DEFAULTS):
    return build(reconstruct(swc.encode(), file="tree.swc", cell="tree"), assumptions)


def circuit(cell, nodes, assumptions=DEFAULTS):
    """Return the resistances between sites, and to the soma."""
    R = coupling(cell, assumptions, np.append(nodes, 0)).Z
    return R[:-1, :-1], R[:-1, -1]


def dense(cell, nodes, g_nS, driving_mV, assumptions=DEFAULTS):
    """Return the potentials of all nodes, mV: every conductance stamped into the whole cell's matrix."""
    Y = admittances(cell, assumptions)
    current = np.zeros(len(Y))
    np.add.at(Y, (nodes, nodes), 1e-3 * g_nS)
    np.add.at(current, nodes, 1e-3 * g_nS * driving_mV)
    return np.linalg.solve(Y, current)


def drawn(cell, count, key, inhibitory=0.3, strongest=1.0):
    """Return random sites (some of them at one node), conductances over four decades and driving forces."""
    rng = np.random.default_rng(key)
    nodes = rng.integers(0, len(cell.parent), count)
    g = strongest * 10 ** rng.uniform(-3, 1, count)
    driving = np.where(rng.random(count) < inhibitory, rng.uniform(-20, 0, count), rng.uniform(20, 80, count))
    return nodes, g, driving


# ---------------------------------------------------------------- the whole cell at once


@pytest.mark.parametrize("key", range(6))
@pytest.mark.parametrize("strongest", [0.01, 1.0, 100.0])
def test_together_is_a_dense_solve_of_the_whole_cell(key, strongest):
    cell = cable(trees.irregular(250, key, soma=key % 2 == 0))
    nodes, g, driving = drawn(cell, 60, key, strongest=strongest)
    got = steady(*circuit(cell, nodes), g, driving)
    V = dense(cell, nodes, g, driving)
    np.testing.assert_allclose(got.local_mV, V[nodes], rtol=1e-9, atol=1e-9 * np.abs(V).max())
    np.testing.assert_allclose(got.soma_mV, V[0], rtol=1e-9, atol=1e-9 * np.abs(V).max())
    np.testing.assert_allclose(got.current_pA, g * (driving - V[nodes]), atol=1e-9 * (g * 80).max())


@pytest.mark.parametrize("key", range(3))
def test_alone_is_a_dense_solve_with_one_conductance(key):
    cell = cable(trees.irregular(150, key, soma=key % 2 == 0))
    nodes, g, driving = drawn(cell, 20, key)
    R, r = circuit(cell, nodes)
    got = alone(R, r, g, driving)
    for i in range(20):
        one = slice(i, i + 1)
        V = dense(cell, nodes[one], g[one], driving[one])
        np.testing.assert_allclose(got.local_mV[i], V[nodes[i]], rtol=1e-9)
        np.testing.assert_allclose(got.soma_mV[i], V[0], rtol=1e-9)
    np.testing.assert_allclose(got.current_pA, g * (driving - got.local_mV), rtol=1e-9)
    assert np.array_equal(alone(np.diagonal(R), r, g, driving).soma_mV, got.soma_mV)


@pytest.mark.parametrize("key", range(3))
def test_what_each_contributes_is_what_is_missing_without_it(key):
    cell = cable(trees.irregular(150, key, soma=key % 2 == 0))
    nodes, g, driving = drawn(cell, 15, key)
    g[3] = 0.0
    got = steady(*circuit(cell, nodes), g, driving)
    whole = dense(cell, nodes, g, driving)[0]
    for i in range(15):
        others = np.arange(15) != i
        without = dense(cell, nodes[others], g[others], driving[others])[0]
        np.testing.assert_allclose(got.contribution_mV[i], whole - without, rtol=0, atol=1e-9 * abs(whole))
    np.testing.assert_allclose(got.soma_lost_mV, got.alone.soma_mV - got.contribution_mV, rtol=1e-15)
    assert got.contribution_mV[3] == got.current_pA[3] == 0.0
    assert np.isnan(got.current_lost[3])


@pytest.mark.parametrize("key", range(3))
def test_veto_is_two_dense_solves(key):
    cell = cable(trees.irregular(150, key, soma=key % 2 == 0))
    nodes, g, driving = drawn(cell, 14, key)
    got = veto(*circuit(cell, nodes), g, driving)
    assert sorted([*got.inhibitory, *got.excitatory]) == list(range(14))
    assert (driving[got.inhibitory] <= 0).all()
    for row, i in enumerate(got.inhibitory):
        for column, e in enumerate(got.excitatory):
            single = dense(cell, nodes[[e]], g[[e]], driving[[e]])[0]
            for matrix, E_i in ((got.vetoed, driving[i]), (got.shunted, 0.0)):
                both = dense(cell, nodes[[e, i]], g[[e, i]], np.array([driving[e], E_i]))[0]
                np.testing.assert_allclose(matrix[row, column], 1 - both / single, rtol=1e-9, atol=1e-9)


def test_2000_synapses():
    cell = cable(trees.irregular(4000, 5, soma=True))
    nodes, g, driving = drawn(cell, 2000, 5, strongest=0.01)
    got = steady(*circuit(cell, nodes), g, driving)
    # Kirchhoff at the sites: what flows in at V is what the resistances turn into V.
    np.testing.assert_allclose(got.current_pA, g * (driving - got.local_mV), atol=1e-9 * (g * 80).max())


# ---------------------------------------------------------------- laws


def test_a_weak_synapse_is_a_current():
    cell = cable(trees.irregular(100, 4, soma=True))
    nodes, g, driving = drawn(cell, 10, 4, inhibitory=0.0)
    R, r = circuit(cell, nodes)
    weak = steady(R, r, 1e-9 * g, driving)
    np.testing.assert_allclose(weak.soma_mV, 1e-12 * (r * g * driving).sum(), rtol=1e-6)
    np.testing.assert_allclose(weak.soma_ratio, 1.0, rtol=1e-6)
    np.testing.assert_allclose(weak.local_ratio, 1.0, rtol=1e-6)
    np.testing.assert_allclose(weak.current_lost, 0.0, atol=1e-6)


def test_a_strong_synapse_holds_its_site_at_the_driving_force():
    cell = cable(trees.comb())
    nodes = np.array([3, 9])
    got = steady(*circuit(cell, nodes), np.array([1e9, 1e-3]), np.array([60.0, 60.0]))
    np.testing.assert_allclose(got.local_mV[0], 60.0, rtol=1e-6)
    assert (got.local_mV <= 60.0).all()


def test_excitation_never_adds_up_to_more_than_its_parts():
    cell = cable(trees.irregular(120, 6, soma=True))
    nodes, g, _ = drawn(cell, 30, 6)
    got = steady(*circuit(cell, nodes), g, np.full(30, 70.0))
    assert 0 < got.soma_ratio < 1
    assert ((got.local_ratio > 0) & (got.local_ratio < 1)).all()
    assert ((got.current_lost > 0) & (got.current_lost < 1)).all()
    assert (got.soma_lost_mV > 0).all()
    assert got.soma_mV < 70.0


def test_no_synapses_and_silent_ones_leave_the_cell_at_rest():
    nobody = np.array([])
    empty = steady(np.zeros((0, 0)), nobody, nobody, nobody)
    assert empty.soma_mV == empty.soma_sum_mV == 0.0
    assert np.isnan(empty.soma_ratio)
    R, r = circuit(cable(trees.comb()), np.array([2, 5]))
    silent = steady(R, r, np.array([0.0, 5.0]), np.array([60.0, 0.0]))
    assert silent.soma_mV == 0.0
    assert np.isnan(silent.local_ratio).all()
    assert np.isnan(veto(R, r, np.array([0.0, 5.0]), np.array([60.0, 0.0])).vetoed).all()


@pytest.mark.parametrize("g", [-1.0, np.nan, np.inf])
def test_a_conductance_that_is_none_is_refused(g):
    one = np.ones(1)
    for ask in (alone, steady, veto):
        with pytest.raises(AssumptionError, match=rf"conductance {g} nS, expected a number of 0 nS or more"):
            ask(one[:, None], one, np.array([g]), one)


def test_a_driving_force_that_is_none_is_refused():
    one = np.ones(1)
    with pytest.raises(AssumptionError, match="driving force nan mV, expected a number: the reversal"):
        steady(one[:, None], one, one, np.array([np.nan]))


# ---------------------------------------------------------------- two synapses by hand


def test_two_synapses_on_one_isopotential_cell_by_hand():
    """A sphere of 500 MOhm: V = (g1 E1 + g2 E2)/(G + g1 + g2) with G = 2 nS."""
    R, r = np.full((2, 2), 500.0), np.full(2, 500.0)
    got = steady(R, r, np.array([1.0, 3.0]), np.array([60.0, -10.0]))
    np.testing.assert_allclose(got.soma_mV, (60 - 30) / 6, rtol=1e-14)
    np.testing.assert_allclose(got.local_mV, 5.0, rtol=1e-14)
    np.testing.assert_allclose(got.current_pA, [55, -45], rtol=1e-14)
    np.testing.assert_allclose(got.alone.soma_mV, [60 / 3, -30 / 5], rtol=1e-14)
    np.testing.assert_allclose(got.soma_sum_mV, 14.0, rtol=1e-14)
    np.testing.assert_allclose(got.soma_ratio, 5 / 14, rtol=1e-14)
    np.testing.assert_allclose(got.contribution_mV, [5 + 6, 5 - 20], rtol=1e-13)
    np.testing.assert_allclose(got.current_lost, [1 - 55 / 40, 1 - 45 / 12], rtol=1e-12)
    of_pair = veto(R, r, np.array([1.0, 3.0]), np.array([60.0, -10.0]))
    np.testing.assert_allclose(of_pair.vetoed, [[1 - 5 / 20]], rtol=1e-14)
    np.testing.assert_allclose(of_pair.shunted, [[1 - 10 / 20]], rtol=1e-14)


def test_two_synapses_on_the_ends_of_a_cylinder_by_hand():
    """L = 2 between them: R = R_inf [coth 2, 1/sinh 2]; Cramer's rule for the two currents."""
    R_inf = 2 * np.sqrt(20000 * 150) / (np.pi * 2e-4**1.5) / 1e6
    a, b = R_inf / np.tanh(2), R_inf / np.sinh(2)
    lam = 1e4 * np.sqrt(20000 / 150 * 2e-4 / 4)
    cell = cable(trees.cylinder(2 * lam, 2.0))
    g, E = np.array([2e-3, 5e-3]), np.array([60.0, 40.0])
    D = (1 + g[0] * a) * (1 + g[1] * a) - g[0] * g[1] * b * b
    through = g * (E * (1 + g[::-1] * a) - g[::-1] * E[::-1] * b) / D
    got = steady(*circuit(cell, np.array([0, 1])), 1e3 * g, E)
    np.testing.assert_allclose(got.current_pA, 1e3 * through, rtol=1e-12)
    np.testing.assert_allclose(got.local_mV, np.array([[a, b], [b, a]]) @ through, rtol=1e-12)


# ---------------------------------------------------------------- six trees

SIX = Assumptions(membrane=Membrane(1e4, 100.0, 1.0))


def tips(cell):
    return np.setdiff1d(np.arange(len(cell.parent)), cell.parent)


def test_sister_cousin_and_opposite_branches_of_the_six_tree_neuron():
    """The nearer their branches, the more two synapses take from each other."""
    cell = cable(trees.rall_neuron(), SIX)
    ends = tips(cell)  # 8 per tree, sisters side by side
    partners = ends[[0, 1, 2, 4, 8, 24]]  # itself, sister, cousin, second cousin, next tree, opposite tree
    ratios = []
    for partner in partners:
        nodes = np.array([ends[0], partner])
        got = steady(*circuit(cell, nodes, SIX), np.array([1.0, 1.0]), np.array([60.0, 60.0]))
        V = dense(cell, nodes, np.ones(2), np.full(2, 60.0), SIX)
        np.testing.assert_allclose(got.soma_mV, V[0], rtol=1e-9)
        np.testing.assert_allclose(got.alone.soma_mV[0], got.alone.soma_mV[1], rtol=1e-12)
        ratios.append(got.soma_ratio)
    assert ratios[:5] == sorted(ratios[:5])
    assert ratios[0] < ratios[1] < ratios[2] < ratios[3] < ratios[4] < 1
    np.testing.assert_allclose(ratios[5], ratios[4], rtol=1e-12)  # all other trees are the same


def test_equal_synapses_on_all_tips_are_one_on_the_equivalent_cylinder():
    """48 tips at equal potential: the cylinder of L = 1 with one synapse of 48 g at its end (Rall 1962)."""
    cell = cable(trees.rall_neuron(), SIX)
    ends = tips(cell)
    got = steady(*circuit(cell, ends, SIX), np.full(48, 0.5), np.full(48, 60.0))
    d = 6 ** (2 / 3) * 4e-4
    R_inf = 2 * np.sqrt(1e4 * 100) / (np.pi * d**1.5) / 1e6
    g, R = 48 * 0.5e-3, R_inf / np.tanh(1)
    np.testing.assert_allclose(got.local_mV, 60 * g * R / (1 + g * R), rtol=1e-11)
    np.testing.assert_allclose(got.soma_mV, 60 * g * R_inf / np.sinh(1) / (1 + g * R), rtol=1e-11)


def test_inhibition_vetoes_most_on_the_path_and_hardly_beyond_or_beside_it():
    """Koch, Poggio & Torre 1983: for a weak excitation no place beats one on its path to the soma."""
    cell = cable(trees.irregular(120, 8, soma=True))
    R, r = circuit(cell, np.arange(len(cell.parent)))
    on_path = coupling(cell, DEFAULTS, np.arange(len(cell.parent))).on_path
    e = 100
    g_i = 5.0
    for i in range(len(cell.parent)):
        pair = np.array([i, e])
        got = veto(R[np.ix_(pair, pair)], r[pair], np.array([g_i, 1e-9]), np.array([0.0, 60.0]))
        best = 1e-3 * g_i * R[i, i] / (1 + 1e-3 * g_i * R[i, i])
        if on_path[i, e]:
            np.testing.assert_allclose(got.shunted[0, 0], best, rtol=1e-9)
        else:
            assert got.shunted[0, 0] < best * (1 - 1e-12)
        assert np.array_equal(got.vetoed, got.shunted)
