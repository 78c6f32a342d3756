"""Space clamp against dense nodal solves with the electrode in them, closed forms, and a mesh."""

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import minimize_scalar

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.clamp import clamp, clamped_brief, clamped_steady, clamped_synapses
from morphotone.cable.electrotonus import cases_of, solve_cables
from morphotone.cable.pairs import coupling
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.tree import build
from morphotone.errors import AssumptionError
from morphotone.reading.reconstruction import reconstruct
from tests import trees
from tests.cable.mesh import mesh
from tests.cable.nodal import admittances
from tests.definitions import Choices

DEFAULTS = Assumptions()
SPHERE = "1 1 0 0 0 10 -1\n2 3 5 0 0 1 1\n"
R_SPHERE = 20000 / (4 * np.pi * 100e-8) / 1e6
"""MOhm: R_m over 4 pi r^2."""


def cable(swc):
    return build(reconstruct(swc.encode(), file="tree.swc", cell="tree"), DEFAULTS)


def dense(cell, electrode, series, hz):
    """Return fraction and escape (MOhm) at all nodes, the electrode in the matrix or its node held."""
    Y = admittances(cell, DEFAULTS, hz)
    nodes = np.arange(len(Y))
    if series:
        Y[electrode, electrode] += 1 / series
        Z = np.linalg.inv(Y)
        return Z[electrode] / series, np.diagonal(Z)
    free = nodes != electrode
    fraction, escape = np.ones(len(Y), Y.dtype), np.zeros(len(Y), Y.dtype)
    Z = np.linalg.inv(Y[np.ix_(free, free)])
    fraction[free], escape[free] = -Y[electrode, free] @ Z, np.diagonal(Z)
    return fraction, escape


@pytest.mark.parametrize("electrode", [0, 17])
@pytest.mark.parametrize("series", [0.0, 5.0, 100.0])
def test_fraction_and_escape_are_those_of_a_dense_solve(electrode, series):
    cell = cable(trees.irregular(120, 6, soma=True))
    nodes = np.arange(len(cell.parent))
    hz = [0.0, 100.0, 2000.0]
    got = clamp(cell, DEFAULTS, nodes, hz, series, electrode)
    for column, f in enumerate(hz):
        fraction, escape = dense(cell, electrode, series, f)
        np.testing.assert_allclose(got.fraction[:, column], fraction, rtol=1e-8, atol=1e-13)
        np.testing.assert_allclose(got.escape_MOhm[:, column], escape, rtol=1e-8, atol=1e-12)
    assert (got.fraction[:, 0].imag == 0).all()


def test_at_the_electrode_a_perfect_clamp_sees_all_and_nothing_escapes():
    got = clamp(cable(trees.comb()), DEFAULTS, np.array([4]), [0.0, 500.0], electrode=4)
    assert got.fraction.tolist() == [[1.0, 1.0]]
    assert got.escape_MOhm.tolist() == [[0.0, 0.0]]


def test_at_rest_the_fraction_is_the_charge_that_reaches_a_clamped_soma():
    cell = cable(trees.irregular(80, 3, soma=True))
    nodes = np.arange(len(cell.parent))
    (whole,) = solve_cables([(cell,)], cases_of([DEFAULTS]))
    got = clamp(cell, DEFAULTS, nodes, [0.0])
    np.testing.assert_allclose(got.fraction[:, 0].real, 1 / whole.attenuation_from_soma[:, 0], rtol=1e-12)


def test_an_endless_series_resistance_is_no_clamp():
    cell = cable(trees.comb())
    nodes = np.arange(len(cell.parent))
    got = clamp(cell, DEFAULTS, nodes, [0.0], 1e12)
    np.testing.assert_allclose(
        got.escape_MOhm[:, 0].real, np.diagonal(coupling(cell, DEFAULTS, nodes).Z), rtol=1e-8
    )
    assert (np.abs(got.fraction) < 1e-8).all()


def test_two_resistors_by_hand():
    """A sphere of R beside R_s: the clamp sees R/(R + R_s); with a conductance g, three in parallel."""
    steady = clamp(cable(SPHERE), DEFAULTS, np.array([0]), [0.0], 100.0)
    np.testing.assert_allclose(steady.fraction, [[R_SPHERE / (R_SPHERE + 100)]], rtol=1e-13)
    np.testing.assert_allclose(steady.escape_MOhm, [[1 / (1 / R_SPHERE + 1 / 100)]], rtol=1e-13)
    got = clamped_steady(steady, np.array([5.0]), np.array([60.0]))
    V = 60 * 5e-3 / (5e-3 + 1 / R_SPHERE + 1 / 100)
    np.testing.assert_allclose(got.escape_mV, V, rtol=1e-13)
    np.testing.assert_allclose(got.seen_pA, V / 100 * 1e3, rtol=1e-13)
    np.testing.assert_allclose(got.current_pA, 5 * (60 - V), rtol=1e-13)
    np.testing.assert_allclose(got.fraction, V / 100 * 1e3 / 300, rtol=1e-13)


def test_steady_conductances_are_a_dense_solve():
    cell = cable(trees.irregular(100, 8, soma=True))
    rng = np.random.default_rng(1)
    nodes = rng.integers(0, len(cell.parent), 12)
    g, E = rng.uniform(0, 20, 12), rng.uniform(-20, 80, 12)
    got = clamped_steady(clamp(cell, DEFAULTS, nodes, [0.0], 12.0), g, E)
    for k, node in enumerate(nodes):
        Y, current = admittances(cell, DEFAULTS), np.zeros(len(cell.parent))
        Y[0, 0] += 1 / 12
        Y[node, node] += 1e-3 * g[k]
        current[node] = 1e-3 * g[k] * E[k]
        V = np.linalg.solve(Y, current)
        np.testing.assert_allclose(got.escape_mV[k], V[node], rtol=1e-9)
        np.testing.assert_allclose(got.seen_pA[k], V[0] / 12 * 1e3, rtol=1e-9)
        np.testing.assert_allclose(got.current_pA[k], g[k] * (E[k] - V[node]), rtol=1e-9)


def test_no_conductance_has_no_fraction():
    got = clamped_steady(clamp(cable(SPHERE), DEFAULTS, np.array([0]), [0.0]), np.zeros(1), np.ones(1))
    assert np.isnan(got.fraction[0])
    assert got.seen_pA[0] == got.escape_mV[0] == 0.0


# ---------------------------------------------------------------- brief currents


@pytest.mark.parametrize("times", [(0.3, 0.3), (0.3, 4.0)])
@pytest.mark.parametrize("series", [5.0, 200.0])
def test_brief_current_into_an_isopotential_cell(times, series):
    """One exponential of tau = C/(1/R + 1/R_s), convolved with the current by partial fractions."""
    current = SynapticCurrent(*times)
    C_nF = 4 * np.pi * 100 * 1e-5
    a, b, c = (1 / R_SPHERE + 1 / series) / C_nF, 1 / times[0], 1 / times[1]

    def V(t):  # mV for 1 fC
        if b == c:
            shape = b**2 * ((np.exp(-a * t) - np.exp(-b * t)) / (b - a) ** 2 - t * np.exp(-b * t) / (b - a))
        else:
            poles = ((a, b, c), (b, a, c), (c, a, b))
            shape = b * c * sum(np.exp(-p * t) / ((q - p) * (r - p)) for p, q, r in poles)
        return 1e-3 * shape / C_nF

    top = minimize_scalar(lambda t: -V(t), bounds=(0, 30), method="bounded", options={"xatol": 1e-10})
    got = clamped_brief(cable(SPHERE), DEFAULTS, np.array([0]), current, series)
    peak = -top.fun * current.charge_fC
    np.testing.assert_allclose(got.escape_mV_per_pA, peak, rtol=1e-7)
    np.testing.assert_allclose(got.peak_fraction, 1e3 * peak / series, rtol=1e-7)
    np.testing.assert_allclose(got.time_to_peak_ms, top.x, rtol=1e-5)


@pytest.mark.parametrize("number", [1, 3, 5])
def test_brief_current_on_a_ball_and_stick_is_a_fine_mesh(number):
    swc, series, rise = trees.ball_and_stick(), 10.0, 0.5
    fine = mesh(swc, Choices("sphere"), step=1.0, fastest=50.0)
    conductance, at = fine.conductance.toarray(), fine.node[number]
    conductance[0, 0] += 1 / series
    inverse = np.linalg.inv(fine.capacity.toarray())
    leak = -1e3 * inverse @ conductance
    solution = solve_ivp(
        lambda t, V: leak @ V + inverse[:, at] * (t / rise) * np.exp(1 - t / rise),
        (0, 15), np.zeros(len(leak)), method="Radau", jac=leak, rtol=1e-8, atol=1e-12, max_step=0.02,
    )  # fmt: skip
    cell = cable(swc)
    got = clamped_brief(cell, DEFAULTS, cell.node[[number - 1]], SynapticCurrent(rise, rise), series)
    np.testing.assert_allclose(got.peak_fraction, 1e3 * solution.y[0].max() / series, rtol=1e-4)
    np.testing.assert_allclose(got.escape_mV_per_pA, solution.y[at].max(), rtol=1e-4)


def test_a_perfect_clamp_sees_the_very_current_at_its_electrode():
    current = SynapticCurrent(0.3, 4.0)
    got = clamped_brief(cable(trees.comb()), DEFAULTS, np.array([4, 12]), current, electrode=4)
    np.testing.assert_allclose(got.peak_fraction[0], 1.0, rtol=1e-8)
    np.testing.assert_allclose(got.time_to_peak_ms[0], current.peak_time_ms, rtol=1e-5)
    assert got.escape_mV_per_pA[0] == 0.0
    assert 0 < got.peak_fraction[1] < 1


def test_where_nothing_arrives_nothing_is_read_off():
    cell = cable(trees.cylinder(30_000.0, 1.0, 30))
    got = clamped_brief(cell, DEFAULTS, np.array([30]), SynapticCurrent(0.3, 0.3))
    assert np.isnan(got.peak_fraction[0])
    assert np.isnan(got.time_to_peak_ms[0])
    assert got.escape_mV_per_pA[0] > 0


# ---------------------------------------------------------------- brief conductances


def alpha(t, rise):
    return t / rise * np.exp(1 - t / rise)


def one(*values):
    return tuple(np.array([value]) for value in values)


@pytest.mark.parametrize("synapse", [(2.0, 60.0, 0.5), (50.0, 60.0, 0.5), (5.0, -10.0, 2.0)])
def test_brief_conductance_on_a_clamped_isopotential_cell(synapse):
    """C dV/dt = −V/R − V/R_s + g(t)(E − V), by scipy."""
    g, E, rise = synapse
    C_pF, series = 4 * np.pi * 100 * 1e-2, 20.0
    leak = (1 / R_SPHERE + 1 / series) * 1e3  # nS
    solution = solve_ivp(
        lambda t, V: (-leak * V + g * alpha(t, rise) * (E - V)) / C_pF,
        (0, 30), [0.0], method="DOP853", rtol=1e-11, atol=1e-12, max_step=0.005,
    )  # fmt: skip
    k = np.abs(solution.y[0]).argmax()
    V = solution.y[0, k]
    got = clamped_synapses(cable(SPHERE), DEFAULTS, np.array([0]), one(g, E, rise, rise), series)
    np.testing.assert_allclose(got.escape_mV, V, rtol=1e-5)
    np.testing.assert_allclose(got.peak_seen_pA, 1e3 * V / series, rtol=1e-5)
    np.testing.assert_allclose(got.peak_fraction, 1e3 * V / series / (g * E), rtol=1e-5)
    np.testing.assert_allclose(got.time_to_peak_ms, solution.t[k], atol=0.006)
    assert got.escape_error_mV[0] < 1e-5 * abs(V)


@pytest.mark.parametrize("number", [3, 5])
def test_brief_conductance_on_a_clamped_ball_and_stick_is_a_fine_mesh(number):
    swc, series, (g, E, rise) = trees.ball_and_stick(), 10.0, (10.0, 60.0, 0.5)
    fine = mesh(swc, Choices("sphere"), step=1.0, fastest=50.0)
    conductance, at = fine.conductance.toarray(), fine.node[number]
    conductance[0, 0] += 1 / series
    inverse = np.linalg.inv(fine.capacity.toarray())
    leak = -1e3 * inverse @ conductance

    def jacobian(t, V):
        matrix = leak.copy()
        matrix[:, at] -= g * alpha(t, rise) * inverse[:, at]
        return matrix

    solution = solve_ivp(
        lambda t, V: leak @ V + inverse[:, at] * g * alpha(t, rise) * (E - V[at]),
        (0, 10), np.zeros(len(leak)), method="Radau", jac=jacobian, rtol=1e-7, atol=1e-9, max_step=0.02,
    )  # fmt: skip
    cell = cable(swc)
    got = clamped_synapses(cell, DEFAULTS, cell.node[[number - 1]], one(g, E, rise, rise), series)
    np.testing.assert_allclose(got.peak_seen_pA, 1e3 * solution.y[0].max() / series, rtol=1e-4)
    np.testing.assert_allclose(got.escape_mV, solution.y[at].max(), rtol=1e-4)


def test_a_weak_conductance_under_a_clamp_is_a_current():
    cell, nodes = cable(trees.comb()), np.array([1, 4, 9])
    weak = tuple(np.full(3, value) for value in (1e-9, 60.0, 0.3, 3.0))
    got = clamped_synapses(cell, DEFAULTS, nodes, weak, 5.0, 4)
    expected = clamped_brief(cell, DEFAULTS, nodes, SynapticCurrent(0.3, 3.0), 5.0, 4)
    np.testing.assert_allclose(got.peak_fraction, expected.peak_fraction, rtol=1e-5)
    np.testing.assert_allclose(got.escape_mV / 60e-9, expected.escape_mV_per_pA, rtol=1e-5)
    np.testing.assert_allclose(got.time_to_peak_ms, expected.time_to_peak_ms, rtol=1e-3)


def test_a_perfect_clamp_at_the_synapse_sees_the_very_conductance():
    got = clamped_synapses(cable(trees.comb()), DEFAULTS, np.array([4]), one(20.0, 60.0, 0.4, 3.0), 0.0, 4)
    np.testing.assert_allclose(got.peak_seen_pA, 1200.0, rtol=1e-5)
    assert got.escape_mV[0] == 0.0


def test_no_sites():
    nobody, nothing = np.array([], np.int64), np.array([])
    cell = cable(SPHERE)
    assert clamp(cell, DEFAULTS, nobody, [0.0]).fraction.shape == (0, 1)
    assert clamped_brief(cell, DEFAULTS, nobody, SynapticCurrent(1.0, 1.0)).peak_fraction.shape == (0,)
    assert clamped_synapses(cell, DEFAULTS, nobody, (nothing,) * 4).escape_mV.shape == (0,)


def test_no_conductance_is_not_seen():
    got = clamped_synapses(cable(SPHERE), DEFAULTS, np.array([0]), one(0.0, 60.0, 0.4, 3.0))
    assert got.peak_seen_pA[0] == 0.0
    assert np.isnan(got.peak_fraction[0])


# ---------------------------------------------------------------- refusals


@pytest.mark.parametrize("series", [-1.0, np.nan, np.inf])
def test_a_series_resistance_that_is_none_is_refused(series):
    with pytest.raises(AssumptionError, match=rf"series resistance {series} MOhm, expected a number of 0"):
        clamp(cable(SPHERE), DEFAULTS, np.array([0]), [0.0], series)


def test_a_frequency_that_is_none_is_refused():
    with pytest.raises(AssumptionError, match=r"frequency -5\.0 Hz, expected numbers of 0 Hz or more"):
        clamp(cable(SPHERE), DEFAULTS, np.array([0]), [0.0, -5.0])
