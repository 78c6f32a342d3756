"""The engine against networks of plain resistors, by networkx and scipy."""

from dataclasses import replace

import networkx as nx
import numpy as np
import pytest
from scipy.sparse import csc_array, diags_array
from scipy.sparse.linalg import splu

from tests import trees
from tests.outside.cells import solved

R_M, R_I = 20000.0, 150.0
FAMILIES = ("star", "caterpillar", "comb", "irregular 1", "irregular 2")


def edges_of(swc):
    """Yield (parent, child, r_parent, r_child, h) of every frustum of a tree without soma."""
    rows = trees.rows_of(swc)
    for row in rows:
        if row.parent != -1:
            parent = rows[row.parent - 1]
            yield (
                parent.number,
                row.number,
                parent.r,
                row.r,
                float(np.linalg.norm(np.subtract(row.at, parent.at))),
            )


@pytest.mark.parametrize("family", FAMILIES)
def test_without_membrane_only_axial_resistances_remain(family):
    # With a tight membrane and one leak, a soma's shunt G, the cell is a tree of resistors R_i h/(pi r1 r2):
    # R_in(i) = 1/G + resistance distance to the soma, R_transfer = 1/G.
    swc = trees.FAMILIES[family][0]()
    rows = trees.rows_of(swc)
    rows = [replace(row, number=row.number + 1, parent=max(row.parent, 0) + 1) for row in rows]
    soma = trees.Row(1, trees.SOMA, (-5.0, 0.0, 0.0), 5.0, -1)  # the old root lies on its surface
    result = solved(trees.text_of([soma, *rows]), 1e22, R_I, soma_shunt_nS=20.0)
    graph = nx.Graph()
    for a, b, r1, r2, h in edges_of(swc):
        graph.add_edge(a, b, resistance=R_I * 1e-2 * h / (np.pi * r1 * r2))
    R_in = result.R_in_MOhm[:, 0]
    assert np.isclose(R_in[0], 50.0, rtol=1e-12, atol=0)
    for node in graph:
        axial = nx.resistance_distance(graph, 1, node, weight="resistance", invert_weight=True)
        assert np.isclose(R_in[node], 50.0 + axial, rtol=1e-9, atol=0)
        assert np.isclose(result.R_transfer_MOhm[node, 0], 50.0, rtol=1e-12, atol=0)


def by_compartments(swc, parts):
    """Return R_in and transfer resistance to the root (MOhm) with every frustum cut into ladder rungs.

    Each rung: the exact axial resistance of its taper, half of its exact mantle at either end; steep tapers
    are cut at equal radius ratios. The error falls as 1/parts^2.
    """
    graph = nx.Graph()
    leak = {}
    for a, b, r1, r2, h in edges_of(swc):
        n = parts if h > 5.0 else parts // 10  # thinner rungs would only add rounding
        steep = max(r1, r2) > 1.2 * min(r1, r2)
        radii = (np.geomspace if steep else np.linspace)(r1, r2, n + 1)
        x = h * (radii - r1) / (r2 - r1) if steep else np.linspace(0.0, h, n + 1)
        nodes = [a, *((b, k) for k in range(1, n)), b]
        for k in range(n):
            p, q = nodes[k], nodes[k + 1]
            graph.add_edge(p, q, G=np.pi * radii[k] * radii[k + 1] / (R_I * 1e-2 * (x[k + 1] - x[k])))
            mantle = np.pi * (radii[k] + radii[k + 1]) * np.hypot(x[k + 1] - x[k], radii[k + 1] - radii[k])
            for node in (p, q):
                leak[node] = leak.get(node, 0.0) + mantle / 2 / (R_M * 1e2)
    order = list(graph)
    laplacian = nx.laplacian_matrix(graph, nodelist=order, weight="G")
    system = splu(csc_array(laplacian + diags_array([leak[node] for node in order])))
    place = {node: k for k, node in enumerate(order)}
    samples = [row.number for row in trees.rows_of(swc)]
    R_in = []
    for number in samples:
        injected = np.zeros(len(order))
        injected[place[number]] = 1.0
        V = system.solve(injected)
        R_in.append((V[place[number]], V[place[1]]))
    return np.array(R_in)


@pytest.mark.parametrize("family", FAMILIES)
def test_fine_ladder_extrapolated_to_no_rungs(family):
    # Richardson: errors in 1/n^2 and 1/n^4 removed from n, 2n, 4n rungs per frustum; what remains is 5e-9,
    # mostly the rounding of the linear solver where frusta of 5 nm lie beside others of 500 um.
    swc = trees.FAMILIES[family][0]()
    coarse, middle, fine = (by_compartments(swc, parts) for parts in (20, 40, 80))
    once = (4 * middle - coarse) / 3, (4 * fine - middle) / 3
    limit = (16 * once[1] - once[0]) / 15
    result = solved(swc, R_M, R_I)
    np.testing.assert_allclose(result.R_in_MOhm[:, 0], limit[:, 0], rtol=2e-8)
    np.testing.assert_allclose(result.R_transfer_MOhm[:, 0], limit[:, 1], rtol=2e-8)
    assert np.abs(fine / limit - 1).max() < np.abs(coarse / limit - 1).max()


def test_leak_as_a_resistor_to_earth():
    # The same as one resistance distance: from a sample to a node called earth, through every rung.
    swc = trees.cylinder(300.0, 2.0)
    parts = 400
    graph = nx.path_graph(parts + 1)
    axial = R_I * 1e-2 * (300.0 / parts) / np.pi
    leak = 2 * np.pi * (300.0 / parts) / (R_M * 1e2)
    for a, b in graph.edges:
        graph.edges[a, b]["R"] = axial
    for node in range(parts + 1):
        graph.add_edge(node, "earth", R=1 / (leak if 0 < node < parts else leak / 2))
    R_in = nx.resistance_distance(graph, 0, "earth", weight="R", invert_weight=True)
    assert np.isclose(solved(swc, R_M, R_I).R_in_MOhm[0, 0], R_in, rtol=1e-6, atol=0)
