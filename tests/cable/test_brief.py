"""Brief conductances against one equation by solve_ivp, a fine mesh, and the transients of weak ones."""

import numpy as np
import pytest
from mpmath import mp
from scipy.integrate import quad, solve_ivp
from scipy.interpolate import CubicSpline
from scipy.optimize import brentq, minimize_scalar

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.brief import brief, conductance
from morphotone.cable.circuit import alone
from morphotone.cable.contour import by_rows
from morphotone.cable.pairs import coupling
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.transients import transients
from morphotone.cable.tree import build
from morphotone.cable.volterra import POINTS, doublings, line_for, panels
from morphotone.errors import AssumptionError
from morphotone.reading.reconstruction import reconstruct
from tests import trees
from tests.cable.mesh import mesh
from tests.definitions import Choices

DEFAULTS = Assumptions()
SPHERE = "1 1 0 0 0 10 -1\n2 3 5 0 0 1 1\n"
"""A soma and a stem that ends within it."""


def cable(swc):
    return build(reconstruct(swc.encode(), file="tree.swc", cell="tree"), DEFAULTS)


def one(cell, node, *synapse):
    return brief(cell, DEFAULTS, np.array([node]), *(np.array([float(value)]) for value in synapse))


def course(t, rise, decay):
    """Return the conductance by its formula, peak 1."""
    shape = (
        (lambda x: x * np.exp(-x / rise))
        if rise == decay
        else (lambda x: np.exp(-x / decay) - np.exp(-x / rise))
    )
    return shape(t) / shape(SynapticCurrent(rise, decay).peak_time_ms)


def read_off(t, V):
    """Return peak, time to peak and half-width of a solved course, through a spline."""
    spline, sign = CubicSpline(t, V), np.sign(V[np.abs(V).argmax()])
    k = (sign * V).argmax()
    top = minimize_scalar(
        lambda x: -sign * spline(x), bounds=(t[k - 1], t[k + 1]), method="bounded", options={"xatol": 1e-9}
    )
    half = 0.5 * spline(top.x)
    rise, fall = (brentq(lambda x: spline(x) - half, a, b) for a, b in ((t[1], top.x), (top.x, t[-1])))
    return spline(top.x), top.x, fall - rise


def assert_within_its_error(got, error, expected, floor=2e-7):
    """Compare with what is stated, and a floor for the reference's own error."""
    for name, value, slack, true in zip(got._fields, got, error, expected, strict=True):
        assert abs(value[0] - true) <= slack[0] + floor * max(abs(true), 10.0), name


# ---------------------------------------------------------------- the isopotential cell

SYNAPSES = [  # g nS, E mV, rise ms, decay ms
    (1.0, 60.0, 0.3, 0.3),
    (10.0, 60.0, 0.3, 4.0),
    (100.0, 60.0, 0.5, 5.0),
    (5.0, -10.0, 0.1, 25.0),
    (0.01, 80.0, 2.0, 2.0),
]


@pytest.mark.parametrize("synapse", SYNAPSES)
def test_isopotential_cell_is_one_equation(synapse):
    """C dV/dt = −V/R + g(t)(E − V), by scipy; 4 pi r^2 of membrane."""
    g, E, rise, decay = synapse
    C_pF = 4 * np.pi * 100 * 1e-2
    solution = solve_ivp(
        lambda t, V: -V / 20 + g * course(t, rise, decay) * (E - V) / C_pF,
        (0, 150), [0.0], method="DOP853", rtol=1e-11, atol=1e-12, max_step=0.05,
    )  # fmt: skip
    expected = read_off(solution.t, solution.y[0])
    got = one(cable(SPHERE), 0, *synapse)
    assert_within_its_error(got.at_site, got.at_site_error, expected)
    assert_within_its_error(got.at_soma, got.at_soma_error, expected)
    assert got.at_site_error.peak_mV[0] < 1e-6 * abs(E)


# ---------------------------------------------------------------- a fine mesh


@pytest.mark.parametrize(
    ("number", "synapse"),
    [
        (5, (2.0, 60.0, 0.3, 1.5)),
        (3, (20.0, 60.0, 0.5, 0.5)),
        (5, (5.0, -10.0, 0.4, 8.0)),
        (1, (8.0, 60.0, 0.3, 2.0)),
    ],
)
def test_ball_and_stick_is_a_fine_mesh(number, synapse):
    """Finite elements of degree 5 and an implicit solver (Radau) with the conductance in its matrix."""
    g, E, rise, decay = synapse
    swc = trees.ball_and_stick()
    fine = mesh(swc, Choices("sphere"), step=1.0, fastest=50.0)
    inverse = np.linalg.inv(fine.capacity.toarray())
    at, leak = fine.node[number], -1e3 * inverse @ fine.conductance.toarray()

    def jacobian(t, V):
        matrix = leak.copy()
        matrix[:, at] -= g * course(t, rise, decay) * inverse[:, at]
        return matrix

    solution = solve_ivp(
        lambda t, V: leak @ V + inverse[:, at] * g * course(t, rise, decay) * (E - V[at]),
        (0, 80), np.zeros(len(leak)), method="Radau", jac=jacobian, rtol=1e-8, atol=1e-10, max_step=0.5,
    )  # fmt: skip
    cell = cable(swc)
    got = one(cell, cell.node[number - 1], *synapse)
    for node, values, error in ((at, got.at_site, got.at_site_error), (0, got.at_soma, got.at_soma_error)):
        peak, time, width = read_off(solution.t, solution.y[node])
        assert abs(values.peak_mV[0] - peak) <= error.peak_mV[0] + 1e-7 * abs(peak)
        assert abs(values.time_to_peak_ms[0] - time) <= error.time_to_peak_ms[0] + 2e-4 * time
        assert abs(values.half_width_ms[0] - width) <= error.half_width_ms[0] + 2e-5 * width


# ---------------------------------------------------------------- limits


@pytest.mark.parametrize("current", [(0.3, 0.3), (0.3, 4.0), (1.0, 20.0)])
@pytest.mark.parametrize("key", [3, 4])
def test_a_weak_conductance_is_a_current(current, key):
    cell = cable(trees.irregular(40, key, soma=True))
    nodes = np.arange(len(cell.parent))
    ones = np.ones(len(nodes))
    got = brief(cell, DEFAULTS, nodes, 1e-11 * ones, 60 * ones, *(time * ones for time in current))
    (expected,) = transients([cell], DEFAULTS, SynapticCurrent(*current), [nodes])
    for values, error, true in (
        (got.at_site, got.at_site_error, expected.at_site),
        (got.at_soma, got.at_soma_error, expected.at_soma),
    ):
        peak = 60e-11 * true.peak_mV_per_pA
        known = ~np.isnan(values.peak_mV)
        assert known.sum() > 20
        assert (np.abs(values.peak_mV - peak) <= error.peak_mV + 1e-8 * peak)[known].all()
        np.testing.assert_allclose(values.time_to_peak_ms[known], true.time_to_peak_ms[known], rtol=1e-5)
        np.testing.assert_allclose(values.half_width_ms[known], true.half_width_ms[known], rtol=1e-5)


def test_a_conductance_far_slower_than_the_cell_is_steady():
    cell = cable(trees.ball_and_stick())
    nodes = np.array([1, 3])
    synapse = np.array([2.0, 5.0]), np.array([60.0, -10.0])
    got = brief(cell, DEFAULTS, nodes, *synapse, np.full(2, 1e5), np.full(2, 1e5))
    R = coupling(cell, DEFAULTS, np.append(nodes, 0)).Z
    expected = alone(R[:2, :2], R[:2, 2], *synapse)
    np.testing.assert_allclose(got.at_site.peak_mV, expected.local_mV, rtol=1e-6)
    np.testing.assert_allclose(got.at_soma.peak_mV, expected.soma_mV, rtol=1e-6)


def test_halving_the_steps_changes_no_more_than_is_stated():
    """A site among others with a far shorter rise is solved in far shorter steps."""
    cell = cable(trees.comb())
    node = np.array([7, 7])
    both = brief(
        cell, DEFAULTS, node, np.full(2, 3.0), np.full(2, 60.0), np.array([0.8, 0.05]), np.full(2, 6.0)
    )
    single = one(cell, 7, 3.0, 60.0, 0.8, 6.0)
    for name in ("at_site", "at_soma"):
        for value, error, finer in zip(
            getattr(single, name), getattr(single, f"{name}_error"), getattr(both, name), strict=True
        ):
            assert abs(value[0] - finer[0]) <= error[0] + 1e-6 * abs(value[0])


def test_sites_do_not_feel_each_other():
    cell = cable(trees.irregular(24, 6, soma=True))
    nodes = np.array([5, 12, 12, 20, 0, 3, 9])
    synapses = [np.linspace(0.1, 3, 7), np.full(7, 60.0), np.full(7, 0.5), np.full(7, 3.0)]
    many = brief(cell, DEFAULTS, nodes, *synapses)
    for k, node in enumerate(nodes):
        got = one(cell, node, *(values[k] for values in synapses))
        np.testing.assert_allclose(got.at_site.peak_mV[0], many.at_site.peak_mV[k], rtol=1e-12)
        np.testing.assert_allclose(got.at_soma.peak_mV[0], many.at_soma.peak_mV[k], rtol=1e-12)


def test_a_synapse_at_the_soma_is_seen_alike_twice():
    got = one(cable(trees.comb()), 0, 2.0, 60.0, 0.5, 3.0)
    np.testing.assert_allclose(got.at_site, got.at_soma, rtol=1e-12)


def test_nothing_happens_without_conductance_or_driving_force():
    got = brief(
        cable(trees.comb()), DEFAULTS, np.array([3, 3]), *np.array([[0.0, 2], [60, 0], [1, 1], [2, 2]])
    )
    for response in (got.at_site, got.at_soma):
        assert response.peak_mV.tolist() == [0.0, 0.0]
        assert np.isnan(response[1:]).all()


def test_no_sites():
    nobody = np.array([])
    got = brief(cable(trees.comb()), DEFAULTS, np.array([], np.int64), *[nobody] * 4)
    assert got.at_soma.half_width_ms.shape == (0,)


def test_times_that_are_none_are_refused():
    with pytest.raises(AssumptionError, match="rise time nan ms"):
        one(cable(SPHERE), 0, 1.0, 60.0, np.nan, 2.0)
    with pytest.raises(AssumptionError, match=r"exchange them"):
        one(cable(SPHERE), 0, 1.0, 60.0, 3.0, 2.0)
    with pytest.raises(AssumptionError, match=r"conductance -1\.0 nS"):
        one(cable(SPHERE), 0, -1.0, 60.0, 1.0, 2.0)


# ---------------------------------------------------------------- the pieces


@pytest.mark.parametrize("times", [(0.3, 0.3), (0.3, 4.0), (1.0, 1.0 + 1e-12), (1.0, 1.0001)])
def test_the_course_of_a_conductance(times):
    t = np.linspace(0, 30, 100)
    rise, decay = (mp.mpf(value) for value in times)
    exact = [
        float(mp.exp(-x / decay) - mp.exp(-x / rise)) if rise != decay else float(x * mp.exp(-x / rise))
        for x in map(mp.mpf, t)
    ]
    top = mp.mpf(SynapticCurrent(*times).peak_time_ms)
    peak = float(mp.exp(-top / decay) - mp.exp(-top / rise) if rise != decay else top * mp.exp(-1))
    got = conductance(np.array(times[:1]), np.array(times[1:]), t)[0]
    np.testing.assert_allclose(got, np.array(exact) / peak, rtol=1e-11, atol=1e-15)


def test_panels_convolve_with_the_kernel_of_an_endless_cable():
    """Z = s^(−1/2), so K = (pi t)^(−1/2): its convolution with u·e^(−u) by scipy's quad, in √(t − u)."""
    edges = doublings(0.1, 8, 2)
    grid = panels(edges, line_for(edges))
    Z, H = grid.line.s[None] ** -0.5, np.zeros_like(grid.line.s)[None]
    for k, times in enumerate(grid.times):
        f = times * np.exp(-times)
        here = by_rows(Z, grid.within[k]).reshape(POINTS, POINTS) @ f
        got = by_rows(Z * H, grid.before[k])[0] + here
        for t, value in zip(times[::3], got[::3], strict=True):
            exact = quad(
                lambda w, t=t: 2 / np.sqrt(np.pi) * (t - w * w) * np.exp(w * w - t),
                0,
                np.sqrt(t),
                epsabs=1e-13,
            )
            assert abs(value - exact[0]) < 3e-7
        H = H * grid.decay[k] + by_rows(f[None], grid.gain[k]).view(np.complex128)


def test_products_by_rows_are_products():
    rng = np.random.default_rng(4)
    rows, matrix = rng.normal(size=(7, 12)), rng.normal(size=(12, 5))
    np.testing.assert_allclose(by_rows(rows, matrix), rows @ matrix, rtol=1e-13)
    assert by_rows(rows[:0], matrix).shape == (0, 5)
