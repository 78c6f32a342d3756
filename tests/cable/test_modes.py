"""Time constants and amplitudes: against a mesh, against 50 digits, and the laws they obey."""

from dataclasses import asdict, replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from mpmath import mp, mpf
from scipy.optimize import brentq

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.counting import chain_of, fold, line_up
from morphotone.cable.electrotonus import solve
from morphotone.cable.forest import Column, Forest
from morphotone.cable.frustum import Pi, pi_of_frusta
from morphotone.cable.modes import MOST, amplitudes_by_node, time_constants
from morphotone.cable.sweeps import schedule
from morphotone.cable.tree import build
from morphotone.errors import AssumptionError
from morphotone.reading.reconstruction import reconstruct
from tests import definitions, trees
from tests.cable import mesh
from tests.cable.test_against_definitions import choices_and_assumptions
from tests.definitions import Constants

modest = settings(deadline=None, max_examples=15, derandomize=True)
keys = st.integers(0, 10_000)
DEFAULTS = Assumptions()
TAU = 20.0
"""R_m C_m of the defaults, ms."""
US_UM2 = mpf("0.01")
"""uS/um2 in S/cm2."""
MIXED = {3: Constants(), 4: Constants(50000.0, 150.0, 0.8, 1.5), 1: Constants(10000.0, 100.0)}


def read(swc):
    return reconstruct(swc.encode(), file="tree.swc", cell="tree")


def cell(swc, assumptions=DEFAULTS):
    return build(read(swc), assumptions)


def modes_of(swc, assumptions=DEFAULTS, count=3):
    return time_constants([cell(swc, assumptions)], assumptions, count)[0]


def grown(key, samples=40, soma=True):
    """Branching at random, pieces of 3 to 300 um, radii between 0.2 and 3 um: what a mesh can follow."""
    rng = np.random.default_rng(key)
    tree = trees.Tree()
    first = tree.add((0, 0, 0), 7.0 if soma else 1.0, kind=trees.SOMA if soma else trees.BASAL)
    while len(tree.rows) < samples:
        n = len(tree.rows)
        parent = first if n < 4 else int(rng.integers(max(2, n - 5), n + 1))
        step = rng.normal(size=3)
        step *= 10 ** rng.uniform(0.5, 2.5) / np.linalg.norm(step) + (8.0 if parent == first else 0.0)
        r = float(np.clip(tree.row(parent).r * 3 ** rng.uniform(-1, 0.5), 0.2, 3.0))
        tree.grow(parent, step, r, int(rng.choice([trees.BASAL, trees.APICAL])))
    return tree.text()


LONE_SOMA = "1 1 0 0 0 10 -1\n2 2 30 0 0 1 1\n"
"""With the axon left out."""


# ---------------------------------------------------------------- against a mesh


CELLS = {
    **{f"grown {key}": (grown(key, soma=key % 2 == 0), "none" if key % 2 else "sphere") for key in range(6)},
    "star": (trees.star(), "none"),
    "comb": (trees.comb(), "none"),
    "caterpillar": (trees.caterpillar(), "none"),
    "ball and stick": (trees.ball_and_stick(), "sphere"),
    "one frustum": (trees.frustum(2000.0, 6.0, 0.5), "none"),
}


@pytest.mark.parametrize("name", CELLS)
@pytest.mark.parametrize(("domains", "shunt"), [({}, 0.0), (MIXED, 0.0), (MIXED, 2.0)])
def test_against_a_mesh(name, domains, shunt):
    swc, rule = CELLS[name]
    choices, assumptions = choices_and_assumptions(rule, domains=domains, soma_shunt_nS=shunt)
    cable = cell(swc, assumptions)
    modes = time_constants([cable], assumptions, 5)[0]
    reference = mesh.mesh(swc, choices, fastest=1.0 / modes.tau_ms[-1])
    expected = mesh.sparse_modes(reference, 5)
    np.testing.assert_array_equal(modes.multiplicity, 1)
    np.testing.assert_allclose(modes.tau_ms, 1.0 / expected.rate, rtol=2e-10, atol=0)
    assert_close(modes.amplitude_soma, expected.amplitude(0), 1e-8)
    amplitudes = amplitudes_by_node(cable, assumptions, modes)
    nodes = [reference.node[number] for number in sorted(reference.node)]
    transfer = np.array([expected.amplitude(node) for node in nodes])
    local = np.array([expected.amplitude(node, node) for node in nodes])
    assert_close(amplitudes.transfer[cable.node], transfer, 1e-8)
    assert_close(amplitudes.local[cable.node], local, 1e-8)


def assert_close(got, expected, share):
    """Compare amplitudes, which may vanish, relative to the largest of each mode and of the cell."""
    assert np.abs(got - expected).max() <= share * np.abs(expected).max()


@pytest.mark.parametrize("trees_", [2, 3, 6])
def test_multiplicities_against_a_mesh(trees_):
    swc = trees.rall_neuron(trees_, 2)
    choices, assumptions = choices_and_assumptions("none", Constants(1e4, 100.0))
    modes = modes_of(swc, assumptions, 5)
    tau = 1.0 / mesh.dense_modes(mesh.mesh(swc, choices, 0.15)).rate
    first = np.concatenate(([0], np.cumsum(modes.multiplicity)))
    for k in range(5):
        np.testing.assert_allclose(tau[first[k] : first[k + 1]], modes.tau_ms[k], rtol=1e-9, atol=0)
        assert tau[first[k + 1]] < modes.tau_ms[k] * (1 - 1e-6)


def test_counts_against_a_mesh_at_any_rate():
    # Frusta of up to several lambda, at rates at which they resonate many times over with both ends held.
    choices, assumptions = choices_and_assumptions("sphere", domains=MIXED, soma_shunt_nS=1.0)
    swc = grown(3, 20)
    rate = np.geomspace(0.01, 2000.0, 40)
    expected = mesh.dense_modes(mesh.mesh(swc, choices, 2.0, fastest=2000.0)).rate
    counted = line_up([cell(swc, assumptions)], assumptions, [2e6]).counted(1e3 * rate[None])
    np.testing.assert_array_equal(counted.slower[0], np.searchsorted(expected, rate))
    assert counted.slower[0, -1] > 40


@pytest.mark.parametrize(
    "parent", [[-1, 0], [-1, 0, 1, 2, 3], [-1, 0, 1, 1, 3, 3], [-1, 0, 0, 2, 2, 3, 5, 6, 7, 7]]
)
def test_counts_of_small_matrices(parent):
    # Admittances of either sign, and small whole numbers, so that pivots of exactly zero come up.
    plan, n = schedule(np.array(parent)), len(parent)
    rng = np.random.default_rng(n)
    load, start, end = rng.integers(-2, 3, (3, n, 1000)).astype(float)
    axial = rng.choice([1.0, 2.0], (n, 1000))
    Y = np.zeros((1000, n, n))
    Y[:, range(n), range(n)] += load.T
    for i in range(1, n):
        Y[:, i, i] += axial[i] + end[i]
        Y[:, parent[i], parent[i]] += axial[i] + start[i]
        Y[:, i, parent[i]] = Y[:, parent[i], i] = -axial[i]
    by_place = [part[plan.order] for part in (axial, start, end, load)]
    folded = fold(plan, chain_of(Pi(*(part[: n - 1] for part in by_place[:3]))), by_place[3])
    eigenvalues = np.linalg.eigvalsh(Y)
    regular = np.abs(eigenvalues).min(axis=1) > 1e-9
    assert regular.sum() > 200
    np.testing.assert_array_equal(
        folded.negative.sum(axis=0)[regular], (eigenvalues < 0).sum(axis=1)[regular]
    )
    det = np.exp(folded.log_factor.sum(axis=0)) * axial[1:].prod(axis=0)
    np.testing.assert_allclose(det[regular], np.abs(np.linalg.det(Y))[regular], rtol=1e-9)


# ---------------------------------------------------------------- against 50 digits


class AtRealS(Constants):
    """Constants whose "frequency" is a real s, 1/s."""

    def g(self, hz):
        per_cm2 = mpf(self.F) * (1 / mpf(self.R_m) + mpf(hz) * mpf(self.C_m) * mpf("1e-6"))
        return per_cm2 * definitions.US_UM2_PER_S_CM2


def exact_pole(cable, s):
    """Return the pole next to s at 50 digits, by the secant rule on the determinant of the literal matrix."""

    def det(s):
        return mp.det(definitions.admittance_matrix(cable, s).apply(mp.re))

    here, there = s * (1 + mpf("1e-9")), s * (1 - mpf("1e-9"))
    values = det(here), det(there)
    while abs(there / here - 1) > mpf("1e-25"):
        here, there = there, there - values[1] * (there - here) / (values[1] - values[0])
        values = values[1], det(there)
    return there


@pytest.mark.parametrize("key", [1, 2, 3, 4])
def test_against_50_digits(key):
    # Pieces from 5 nm on, 20-fold tapers.
    soma = key % 2 == 1
    swc = trees.irregular(14, key, soma)
    domains = {kind: AtRealS(c.R_m, c.R_i, c.C_m, c.F) for kind, c in MIXED.items()}
    choices, assumptions = choices_and_assumptions(
        "sphere" if soma else "none", AtRealS(), domains=domains, soma_shunt_nS=1.0
    )
    modes = modes_of(swc, assumptions)
    cable = definitions.cable_of(swc, choices)
    for tau, amplitude in zip(modes.tau_ms, modes.amplitude_soma, strict=True):
        pole = exact_pole(cable, mpf(-1000 / tau))
        assert abs(-pole * mpf(tau) / 1000 - 1) < 1e-13
        step = pole * mpf("1e-12")
        Z = [mp.re(definitions.impedance_matrix(cable, pole + d)[0, 0]) for d in (step, -step)]
        assert abs((Z[0] - Z[1]) * step / 2000 / amplitude - 1) < 1e-9


@pytest.mark.parametrize("ratio", [1.0, 1.0 + 1e-9, 1.3, 5.0])
@pytest.mark.parametrize("theta", [1e-5, 0.01, 0.5, 1.0, 2.0])
def test_one_frustum_on_the_negative_axis(ratio, theta):
    # As long as it does not resonate, from 50 digits: axial admittance and both shunts, each as such.
    r1, r2 = 0.7, 0.7 * ratio
    h = theta * (np.sqrt(r1) + np.sqrt(r2)) / 2 * np.sqrt(2000.0 * 1e4 / (2 * 150.0))
    exact = definitions.two_port(r1, r2, h, 150.0, -US_UM2 / 2000)
    for start, end, (y11, y12, y22) in ((r1, r2, exact), (r2, r1, exact[::-1])):
        got = pi_of_frusta(*(np.array([[value]]) for value in (start, end, h, 150.0, -1.0 / 2000.0)))
        for one, other in zip(got, (-y12, y11 + y12, y22 + y12), strict=True):
            assert abs(one[0, 0] / mp.re(other) - 1) < 1e-13


def test_a_cylinder_on_the_negative_axis_at_g_of_both_signs_and_none():
    g = np.array([[1.0, 0.0, -1.0]]) / 20000.0
    radius, length = np.array([[1.0]]), np.array([[200.0]])
    axial, start, end = pi_of_frusta(radius, radius, length, np.full((1, 1), 150.0), g)
    A, theta = 1e2 * np.pi / (150.0 * 200.0), 200.0 * np.sqrt(2e-4 * 150.0 / 20000.0)
    expected = A * np.array([[theta / np.sinh(theta), 1.0, theta / np.sin(theta)]])
    np.testing.assert_allclose(axial, expected, rtol=1e-14)
    shunt = A * theta * np.array([[np.tanh(theta / 2), 0.0, -np.tan(theta / 2)]])
    np.testing.assert_allclose(start, shunt, rtol=1e-13)
    np.testing.assert_allclose(end, shunt, rtol=1e-13)


def test_impedance_at_the_soma_is_that_of_the_sweeps():
    s = np.array([[0.0, 300j, -20 + 5j, -300 + 100j]])
    cells = [cell(grown(0)), cell(trees.extremes())]
    forest = Forest([(cable,) for cable in cells], (DEFAULTS,))
    expected = forest.solved([Column(0, complex(one)) for one in s[0]]).Z_in[forest.at_root]
    lineup = line_up(cells, DEFAULTS, [400.0, 400.0])
    np.testing.assert_allclose(lineup.soma_impedance(np.repeat(s, 2, axis=0)), expected, rtol=1e-12)
    each = lineup.soma_impedance(np.stack([s[0], s[0, ::-1]]))  # every cell at values of its own
    np.testing.assert_allclose(each, [expected[0], expected[1, ::-1]], rtol=1e-12)


# ---------------------------------------------------------------- closed forms


@pytest.mark.parametrize("pieces", [1, 7, 3000])
@pytest.mark.parametrize("L", [0.2, 1.0, 12.0])
def test_sealed_cylinder_and_its_amplitudes(L, pieces):
    # Z(s) at the end of a sealed cylinder: residues 1/C, 2/C, 2/C, …; alternating at the far end.
    lam = 1e4 * np.sqrt(20000.0 / 150.0 * 4e-4 / 4)
    swc = trees.cylinder(L * lam, 4.0, pieces)
    cable = cell(swc)
    modes = time_constants([cable], DEFAULTS, MOST)[0]
    k = np.arange(MOST)
    np.testing.assert_allclose(modes.tau_ms, TAU / (1 + (k * np.pi / L) ** 2), rtol=1e-12, atol=0)
    capacity = np.pi * 4.0 * L * lam * 1e-2  # pF
    amplitude = np.where(k == 0, 1.0, 2.0) * 1e3 / capacity
    np.testing.assert_allclose(modes.amplitude_soma, amplitude, rtol=1e-9, atol=0)
    by_node = amplitudes_by_node(cable, DEFAULTS, modes)
    np.testing.assert_allclose(by_node.transfer[-1], amplitude * (-1.0) ** k, rtol=1e-8, atol=0)
    np.testing.assert_allclose(by_node.local[-1], amplitude, rtol=1e-8, atol=0)
    assert abs(modes.peeled.L / L - 1) < 1e-12
    assert abs(modes.peeled.X_tips / L - 1) < 1e-12
    assert modes.peeled.warnings == ()


def test_a_lone_soma_has_one_mode():
    area = 4 * np.pi * 100.0
    for shunt in (0.0, 5.0):
        assumptions = Assumptions(soma_shunt_nS=shunt, axon="left out")
        modes = modes_of(LONE_SOMA, assumptions)
        capacity, leak = area * 1e-2, area / 20000.0 * 1e-2 + shunt * 1e-3
        np.testing.assert_allclose(modes.tau_ms, [capacity / leak * 1e-3], rtol=1e-13)
        np.testing.assert_allclose(modes.amplitude_soma, [1e3 / capacity], rtol=1e-12)
        assert np.isnan(modes.peeled.L)
        assert np.isnan(modes.peeled.X_tips)
        by_node = amplitudes_by_node(cell(LONE_SOMA, assumptions), assumptions, modes)
        np.testing.assert_allclose(by_node.local, [[1e3 / capacity]], rtol=1e-12)


def test_cables_of_very_many_lambda():
    # 250,000 lambda: all modes crowd behind tau0, and none of the points is wasted on resonances far beyond.
    membrane = Assumptions(membrane=Membrane(1e4, 100.0))
    lam = 1e4 * np.sqrt(1e4 / 100.0 * 4e-4 / 4)
    for L in (250.0, 250_000.0):
        modes = modes_of(trees.cylinder(L * lam), membrane)
        w = (np.pi * np.arange(3) / L) ** 2
        np.testing.assert_allclose(modes.tau_ms, 10.0 / (1 + w), rtol=1e-10, atol=0)


def test_a_cell_without_membrane_has_no_modes():
    modes = modes_of("1 3 0 0 0 1 -1\n2 3 0 0 0 1 1\n")
    assert len(modes.tau_ms) == len(modes.multiplicity) == len(modes.amplitude_soma) == 0


def test_a_tight_soma_on_an_endless_leaky_axon():
    # 2,700 lambda of axon, where exp leaves double precision: s C + G + G_inf sqrt(1 + s tau_axon) = 0.
    membrane = Membrane(R_m_ohm_cm2=100.0)
    tree = trees.Tree()
    last = tree.add((0, 0, 0), 10.0, kind=trees.SOMA)
    lam = 1e4 * np.sqrt(100.0 / 150.0 * 1e-4 / 4)
    for k in range(1, 301):
        last = tree.add((10.0 + k * 9.0 * lam, 0, 0), 0.5, last, trees.AXON)
    assumptions = Assumptions(domains={trees.AXON: membrane})
    modes = modes_of(tree.text(), assumptions, 1)
    area = 4 * np.pi * 100.0 * 1e-2
    G_inf = np.pi / 2 * 1e-4**1.5 / np.sqrt(100.0 * 150.0) * 1e6

    def seen(tau):
        return area / 20000.0 - area * 1e-3 / tau + G_inf * np.sqrt(1 - 0.1 / tau)

    np.testing.assert_allclose(modes.tau_ms, [brentq(seen, 0.101, 20.0, xtol=1e-15)], rtol=1e-12)


def test_nearly_equal_arms_have_their_own_modes():
    # Three arms that differ by parts in a million: sum of d^(3/2) tan(alpha L) = 0 between its own poles.
    lengths = 600.0 * (1 + 1e-6 * np.array([0.0, 1.0, 3.0]))
    swc = trees.unequal_cylinders(lengths, (2.0, 2.0, 2.0))
    modes = modes_of(swc)
    L = lengths / (1e4 * np.sqrt(20000.0 / 150.0 * 2e-4 / 4))
    held = np.sort(np.pi / 2 / L)
    alpha = [
        brentq(lambda a: np.tan(a * L).sum(), low * (1 + 1e-12), high * (1 - 1e-12), xtol=1e-16)
        for low, high in pairwise(held)
    ]
    np.testing.assert_array_equal(modes.multiplicity, 1)
    np.testing.assert_allclose(modes.tau_ms[1:], TAU / (1 + np.array(alpha) ** 2), rtol=1e-12, atol=0)


# ---------------------------------------------------------------- laws


@modest
@given(key=keys, R_m=st.floats(1e3, 1e6), C_m=st.floats(0.3, 3.0), spines=st.floats(1, 3), soma=st.booleans())
def test_tau0_of_a_uniform_cell_is_R_m_C_m_as_written(key, R_m, C_m, spines, soma):
    dendrite = Membrane(R_m_ohm_cm2=R_m, C_m_uF_cm2=C_m, spine_factor=spines, R_i_ohm_cm=90.0)
    assumptions = Assumptions(membrane=replace(dendrite, spine_factor=1.0), domains={trees.APICAL: dendrite})
    modes = modes_of(trees.irregular(20, key, soma), assumptions, 1)
    assert modes.tau_ms[0] == R_m * C_m / 1e3


def test_tau0_of_a_uniform_cell_by_search_is_the_same():
    # One domain's C_m off by 1e-9 makes the cell one to search; tau0 moves by less than that.
    swc = trees.irregular(30, 4, True)
    assumptions = Assumptions(domains={trees.APICAL: Membrane(C_m_uF_cm2=1.0 + 1e-9)})
    modes = modes_of(swc, assumptions)
    assert 0.0 < modes.tau_ms[0] / TAU - 1 < 1e-9
    np.testing.assert_allclose(modes.tau_ms, modes_of(swc).tau_ms, rtol=2e-9)
    np.testing.assert_allclose(modes.amplitude_soma, modes_of(swc).amplitude_soma, rtol=1e-7)


@modest
@given(key=keys, soma=st.booleans())
def test_amplitude_of_mode_0_is_one_over_the_cells_capacity(key, soma):
    swc = trees.irregular(25, key, soma)
    cable = cell(swc)
    area = sum(part.sum() for part in cable.areas()) + cable.traced.soma.area
    assert np.isclose(modes_of(swc).amplitude_soma[0], 1e5 / area, rtol=1e-9, atol=0)


@modest
@given(key=keys, which=st.integers(5, 20), share=st.floats(0.01, 0.99))
def test_cutting_a_frustum_changes_nothing(key, which, share):
    swc = grown(key, 20)
    one, other = modes_of(swc), modes_of(trees.cut_frustum(swc, which, share))
    np.testing.assert_allclose(one.tau_ms, other.tau_ms, rtol=1e-11, atol=0)
    assert_close(one.amplitude_soma, other.amplitude_soma, 1e-9)


@modest
@given(key=keys, root=st.integers(1, 30))
def test_time_constants_are_the_cells_wherever_one_looks_from(key, root):
    swc = trees.irregular(30, key)
    turned = trees.rerooted(swc, root)
    one, other = modes_of(swc), modes_of(turned)
    np.testing.assert_allclose(one.tau_ms, other.tau_ms, rtol=1e-12, atol=0)
    by_node, rec = amplitudes_by_node(cell(swc), DEFAULTS, one), read(swc)
    at = cell(swc).node[int(np.flatnonzero(rec.number == root)[0])]
    assert_close(other.amplitude_soma, by_node.local[at], 1e-8)


@modest
@given(key=keys, k=st.floats(0.1, 10))
def test_capacity_by_k(key, k):
    swc = trees.irregular(20, key, True)
    mixed = {trees.APICAL: Membrane(R_m_ohm_cm2=5e4)}
    scaled = {trees.APICAL: Membrane(R_m_ohm_cm2=5e4, C_m_uF_cm2=k)}
    one = modes_of(swc, Assumptions(domains=mixed))
    other = modes_of(swc, Assumptions(membrane=Membrane(C_m_uF_cm2=k), domains=scaled))
    np.testing.assert_allclose(other.tau_ms, one.tau_ms * k, rtol=1e-12, atol=0)
    assert_close(other.amplitude_soma * k, one.amplitude_soma, 1e-9)


@modest
@given(key=keys, shunt=st.floats(0.01, 100))
def test_a_shunt_moves_each_mode_toward_the_next_and_not_past_it(key, shunt):
    # One more conductance at one node: eigenvalues interlace.
    swc = grown(key, 25)
    without, damaged = (modes_of(swc, Assumptions(soma_shunt_nS=g), 4).tau_ms for g in (0.0, shunt))
    assert (damaged < without).all()
    assert (damaged[:-1] > without[1:]).all()


@pytest.mark.parametrize("key", [0, 2, 4])
def test_sum_of_amplitudes_times_time_constants_tends_to_R_in(key):
    assumptions = Assumptions(domains={trees.APICAL: Membrane(R_m_ohm_cm2=5e4)}, soma_shunt_nS=1.0)
    swc = grown(key)
    modes = modes_of(swc, assumptions, MOST)
    R_in = solve(read(swc), assumptions).R_in_MOhm[0, 0]
    missing = 1 - np.cumsum(modes.amplitude_soma * modes.tau_ms) / R_in
    assert (missing > 0.0).all()
    assert (np.diff(missing) < 1e-12).all()
    assert missing[-1] < 0.1
    # Beyond, as on any cable, modes weigh like 1/n²: what is missing falls like τ^(1/2).
    assert missing[-1] < 3.0 * missing[MOST // 2] * np.sqrt(modes.tau_ms[-1] / modes.tau_ms[MOST // 2])


@pytest.mark.parametrize("site", ["soma", "transfer", "local"])
def test_sum_of_modes_of_a_sealed_cylinder_is_its_resistance(site):
    # Σ A_k τ_k with the rest of the series known: Σ_{k≥K} 1/(L² + k²π²), alternating for the transfer.
    L, swc = 0.8, trees.cylinder(0.8 * 1e4 * np.sqrt(20000.0 / 150.0 * 4e-4 / 4))
    cable = cell(swc)
    modes = time_constants([cable], DEFAULTS, MOST)[0]
    result = solve(read(swc))
    by_node = amplitudes_by_node(cable, DEFAULTS, modes)
    amplitude, R = {
        "soma": (modes.amplitude_soma, result.R_in_MOhm[0, 0]),
        "transfer": (by_node.transfer[-1], result.R_transfer_MOhm[-1, 0]),
        "local": (by_node.local[-1], result.R_in_MOhm[-1, 0]),
    }[site]
    k = np.arange(MOST, 400_000)
    rest = 2 * modes.amplitude_soma[0] * TAU / (1 + (k * np.pi / L) ** 2)
    rest = (rest * (-1.0) ** k if site == "transfer" else rest).sum()
    assert abs((amplitude * modes.tau_ms).sum() + rest - R) < 1e-6 * R


def test_equal_trees_leave_the_soma_at_rest_in_their_odd_modes():
    swc = trees.rall_neuron(6, 1)
    membrane = Assumptions(membrane=Membrane(1e4, 100.0))
    cable = cell(swc, membrane)
    modes = time_constants([cable], membrane, 4)[0]
    assert modes.multiplicity[1] == 5
    by_node = amplitudes_by_node(cable, membrane, modes)
    assert np.abs(modes.amplitude_soma[1]) < 1e-10 * modes.amplitude_soma[0]
    assert np.abs(by_node.transfer[:, 1]).max() < 1e-10 * modes.amplitude_soma[0]
    assert by_node.local[-1, 1] > modes.amplitude_soma[0]


def test_a_cell_is_the_same_in_any_company_bit_for_bit():
    assumptions = Assumptions(domains={trees.APICAL: Membrane(R_m_ohm_cm2=5e4)}, axon="left out")
    swcs = [grown(0), trees.comb(), trees.extremes(), LONE_SOMA, trees.rall_neuron(), grown(5)]
    cells = [cell(swc, assumptions) for swc in swcs]
    together = time_constants(cells, assumptions, 4)
    for cable, mode in zip(cells, together, strict=True):
        alone = time_constants([cable], assumptions, 4)[0]
        for name in ("tau_ms", "multiplicity", "amplitude_soma", "separation_per_ms"):
            np.testing.assert_array_equal(getattr(alone, name), getattr(mode, name), err_msg=name)
        np.testing.assert_equal(asdict(alone.peeled), asdict(mode.peeled))  # NaN equals NaN here


def test_more_time_constants_change_none_of_the_first():
    swc = grown(2)
    few, many = modes_of(swc, count=2), modes_of(swc, count=12)
    np.testing.assert_allclose(many.tau_ms[:2], few.tau_ms, rtol=1e-12, atol=0)
    np.testing.assert_allclose(many.amplitude_soma[:2], few.amplitude_soma, rtol=1e-9)
    assert (np.diff(many.tau_ms) < 0.0).all()


def test_no_cells_no_modes():
    assert time_constants([], DEFAULTS) == []


# ---------------------------------------------------------------- peeling


def warned(swc, assumptions=DEFAULTS):
    return " | ".join(modes_of(swc, assumptions).peeled.warnings)


def two_domains():
    near, middle, far = trees.rows_of(trees.cylinder(pieces=2))
    return trees.text_of([near, middle, replace(far, kind=trees.APICAL)])


@pytest.mark.parametrize(
    ("swc", "assumptions", "match"),
    [
        (two_domains(), Assumptions(domains={4: Membrane(R_m_ohm_cm2=5e4)}), "one uniform membrane"),
        (trees.cylinder(), Assumptions(soma_shunt_nS=2.0), "a shunt of 2 nS"),
        (trees.ball_and_stick(), DEFAULTS, "the soma has 25 % of the membrane"),
        (trees.comb(), DEFAULTS, "tips lie from X = 0.49 to 0.96"),
        (trees.rall_neuron(), DEFAULTS, "leaves the soma at rest"),
    ],
)
def test_each_condition_of_peeling_that_does_not_hold_is_said(swc, assumptions, match):
    assert match in warned(swc, assumptions)
    assert warned(swc, assumptions).count(" | ") == 0


def test_a_domain_without_cable_is_no_breach_of_uniformity():
    assert warned(trees.cylinder(), Assumptions(domains={4: Membrane(R_m_ohm_cm2=5e4)})) == ""


# ---------------------------------------------------------------- refusals


@pytest.mark.parametrize("count", [0, -1, 21, 100, 2.5, True])
def test_refused_number_of_time_constants(count):
    with pytest.raises(AssumptionError, match=rf"{count!r} time constants .* from 1 to 20"):
        time_constants([cell(trees.cylinder())], DEFAULTS, count)
