"""Transients against closed forms, mode sums, two other inversions, a fine mesh, and their own bound."""

from dataclasses import fields
from itertools import pairwise

import numpy as np
import pytest
from mpmath import mp, mpf
from scipy.optimize import brentq, minimize_scalar
from scipy.sparse import csc_matrix
from scipy.sparse.linalg import splu

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.contour import contour
from morphotone.cable.delays import delays
from morphotone.cable.electrotonus import solve
from morphotone.cable.spectrum import MS_PER_S, forest_of, spectra
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.transients import Responses, Window, potentials, transients
from morphotone.cable.tree import build
from morphotone.errors import AssumptionError
from morphotone.reading.reconstruction import reconstruct
from tests import definitions, trees
from tests.cable.at_rate import AtRate
from tests.definitions import Choices

DEFAULTS = Assumptions()
TAU_MS = 20.0
ALPHA = SynapticCurrent(0.3, 0.3)
DOUBLE = SynapticCurrent(0.3, 4.0)
CURRENTS = [ALPHA, DOUBLE, SynapticCurrent(5.0, 5.0), SynapticCurrent(0.1, 25.0)]
PRECISION = 1e-6
"""Of the peak, from 0.02 of the rise time on; what is reached is better than 1e-8."""


def read(swc):
    return reconstruct(swc.encode(), file="tree.swc", cell="tree")


def cable(swc, assumptions=DEFAULTS):
    return build(read(swc), assumptions)


def times_for(current, count=80):
    return np.geomspace(0.02 * current.rise_ms, 10 * (TAU_MS + current.decay_ms), count)


def course(current, t):
    """Return the current of charge 1 at times t, 1/ms."""
    r, d = current.rise_ms, current.decay_ms
    if r == d:
        return t / r**2 * np.exp(-t / r)
    return (np.exp(-t / d) - np.exp(-t / r)) / (d - r)


def single_pole(current, a, t):
    """Return the current of charge 1 convolved with exp(-a t), by partial fractions."""
    b, c = 1 / current.rise_ms, 1 / current.decay_ms
    if b == c:
        return b**2 * ((np.exp(-a * t) - np.exp(-b * t)) / (b - a) ** 2 - t * np.exp(-b * t) / (b - a))
    return (
        b
        * c
        * (
            np.exp(-a * t) / ((b - a) * (c - a))
            + np.exp(-b * t) / ((a - b) * (c - b))
            + np.exp(-c * t) / ((a - c) * (b - c))
        )
    )


def times_at_half_and_more(V, t_peak, peak):
    """Return when a course passes shares of its peak on the way up, and half of it on the way down."""

    def less(t, share):
        return V(t) - share * peak

    times = {share: brentq(less, 1e-3 * t_peak, t_peak, (share,), xtol=1e-13) for share in (0.1, 0.5, 0.9)}
    return times | {"down": brentq(less, t_peak, 1000.0, (0.5,), xtol=1e-12)}


# ---------------------------------------------------------------- the current


@pytest.mark.parametrize("current", [*CURRENTS, SynapticCurrent(1.0, 1.0 + 1e-9)])
def test_peak_and_charge_of_the_current(current):
    t = np.linspace(0, 20 * current.decay_ms, 1_000_001)[1:]
    shape = course(current, t) if current.decay_ms != 1 + 1e-9 else course(SynapticCurrent(1.0, 1.0), t)
    assert abs(t[shape.argmax()] - current.peak_time_ms) <= t[0]
    assert np.isclose(1 / shape.max(), current.charge_fC, rtol=1e-5)
    assert np.isclose(shape.sum() * t[0], 1.0, rtol=1e-5)


def test_an_alpha_function_peaks_at_its_rise_time():
    assert ALPHA.peak_time_ms == 0.3
    assert np.isclose(ALPHA.charge_fC, np.e * 0.3, rtol=1e-15)


@pytest.mark.parametrize("value", [0.0, -1.0, np.nan, np.inf])
def test_times_of_a_current_that_are_none_are_refused(value):
    with pytest.raises(AssumptionError, match=r"rise time .* expected a number from 1e-06 to 1e\+06 ms"):
        SynapticCurrent(value, 5.0)
    with pytest.raises(AssumptionError, match=r"decay time .* expected a number from 1e-06 to 1e\+06 ms"):
        SynapticCurrent(1.0, value)


def test_a_rise_longer_than_the_decay_is_refused():
    with pytest.raises(AssumptionError, match=r"longer than the decay time .* exchange them"):
        SynapticCurrent(5.0, 0.5)


# ---------------------------------------------------------------- closed forms

RADIUS = 10.0
SPHERE = f"1 1 0 0 0 {RADIUS} -1\n2 3 5 0 0 1 1\n"
"""A soma and a stem that ends within it."""


@pytest.mark.parametrize("current", CURRENTS)
def test_isopotential_cell(current):
    times = times_for(current)
    got = potentials(cable(SPHERE), DEFAULTS, current, times)
    C_pF = 4 * np.pi * RADIUS**2 * 1e-2
    expected = current.charge_fC / C_pF * single_pole(current, 1 / TAU_MS, times)
    np.testing.assert_allclose(got.at_site[0], expected, rtol=0, atol=1e-9 * expected.max())
    np.testing.assert_allclose(got.at_soma[0], expected, rtol=0, atol=1e-9 * expected.max())


@pytest.mark.parametrize("current", CURRENTS)
def test_what_is_read_off_an_isopotential_cell(current):
    def V(t):
        return single_pole(current, 1 / TAU_MS, t)

    found = minimize_scalar(lambda t: -V(t), bounds=(0, 60), method="bounded", options={"xatol": 1e-10})
    t_peak, peak = found.x, -found.fun
    times = times_at_half_and_more(V, t_peak, peak)
    (result,) = transients([cable(SPHERE)], DEFAULTS, current)
    C_pF = 4 * np.pi * RADIUS**2 * 1e-2
    for responses in (result.at_site, result.at_soma):
        expected = {
            "peak_mV_per_pA": current.charge_fC * peak / C_pF,
            "peak_mV_per_pC": 1000 * peak / C_pF,
            "rise_ms": times[0.9] - times[0.1],
            "half_width_ms": times["down"] - times[0.5],
            "area_mV_ms_per_pA": current.charge_fC * TAU_MS / C_pF,
        }
        for name, value in expected.items():
            assert np.isclose(getattr(responses, name)[0], value, rtol=1e-8, atol=0), name
        assert np.isclose(responses.time_to_peak_ms[0], t_peak, rtol=2e-7, atol=0)


@pytest.mark.parametrize("current", CURRENTS)
@pytest.mark.parametrize("L", [0.5, 1.5])
def test_mode_sum_on_a_sealed_cylinder(current, L):
    # Rall 1969 Biophys J 9:1483-1508: C h(x, y, t) = Σ ε_n cos(nπx/l) cos(nπy/l) exp(-(1 + (nπ/L)²) t/τ).
    # The sum of the modes' responses, each less i(t)/a_n, of which the sum is Z(0) i(t), falls off as n^-4.
    d, pieces = 2.0, 4
    length = L * 1e4 * np.sqrt(20000.0 / 150.0 * d * 1e-4 / 4)
    one = cable(trees.cylinder(length, d, pieces))
    R = solve(read(trees.cylinder(length, d, pieces)))
    times = times_for(current)
    got = potentials(one, DEFAULTS, current, times)
    n = np.arange(3000)
    a = (1 + (n * np.pi / L) ** 2) / TAU_MS
    C_pF = np.pi * d * length * 1e-2
    excess = single_pole(current, a[:, None], times) - course(current, times) / a[:, None]
    for node in range(pieces + 1):
        for values, other, Z in ((got.at_site, node, R.Z_in), (got.at_soma, 0, R.Z_transfer)):
            weight = (
                np.where(n, 2, 1) * np.cos(n * np.pi * node / pieces) * np.cos(n * np.pi * other / pieces)
            )
            expected = current.charge_fC * (
                weight @ excess / C_pF + 1e-3 * Z[node, 0] * course(current, times)
            )
            np.testing.assert_allclose(values[node], expected, rtol=0, atol=1e-8 * expected.max())


# ---------------------------------------------------------------- other methods


def test_another_inversion_of_the_literal_definitions():
    # mpmath's Talbot inversion (Abate & Valkó 2004) of the node matrix: a tree with taper, soma, branches.
    swc = trees.soma_three_points()
    literal = definitions.cable_of(swc, Choices("three-point", AtRate()))
    times = np.array([0.02 * DOUBLE.rise_ms, 0.5, 3.0, 40.0])
    got = potentials(cable(swc), DEFAULTS, DOUBLE, times)
    (seen,) = transients([cable(swc)], DEFAULTS, DOUBLE)
    site = int(cable(swc).node[4])
    i = literal.node[5]

    def transform(j):
        def of(s):  # s in 1/ms
            Z = definitions.impedance_matrix(literal, s * 1000)[i, j]
            return Z / ((1 + s * mpf(DOUBLE.rise_ms)) * (1 + s * mpf(DOUBLE.decay_ms)))

        return of

    for values, responses, j in ((got.at_site, seen.at_site, i), (got.at_soma, seen.at_soma, 0)):
        peak = responses.peak_mV_per_pA[site]
        for t, value in zip(times, values[site], strict=True):
            with mp.workdps(25):
                wanted = mp.invertlaplace(transform(j), mpf(float(t)), method="talbot", degree=24)
            assert abs(value - float(wanted) * DOUBLE.charge_fC * 1e-3) <= 1e-8 * peak


def mesh(pieces, per_piece, soma_area):
    """Return conductances (uS) and capacitances (nF) of a tree cut into short frusta, and its nodes.

    Between points a frustum's exact axial conductance pi r1 r2/(R_i h); at a point its half of the mantle.
    """
    at, areas, links, ends = 1, {0: soma_area}, [], [0]
    for parent, r1, r2, length in pieces:
        last = ends[parent]
        radii = np.linspace(r1, r2, per_piece + 1)
        h = length / per_piece
        for start, end in pairwise(radii):
            links.append((last, at, np.pi * start * end / (150.0 * h) * 1e2))
            slant = np.pi * np.hypot(h, end - start)
            areas[last] = areas.get(last, 0.0) + slant * (2 * start + end) / 3
            areas[at] = areas.get(at, 0.0) + slant * (start + 2 * end) / 3
            last, at = at, at + 1
        ends.append(last)
    G = np.zeros((at, at))
    for a, b, g in links:
        G[[a, b], [a, b]] += g
        G[[a, b], [b, a]] -= g
    area = np.array([areas[k] for k in range(at)])
    return G + np.diag(area / 20000.0 * 1e-2), area * 1e-5, ends


def integrated(pieces, soma_area, site, current, per_piece, dt, steps):
    """Return V (mV per pA) at the site and at the soma, by an L-stable method of order two.

    Two diagonally implicit stages, gamma = 1 - 1/√2 (Alexander 1977, SIAM J Numer Anal 14:1006-1021).
    """
    G, C, ends = mesh(pieces, per_piece, soma_area)
    gamma = 1 - np.sqrt(0.5)
    solver = splu(csc_matrix(np.diag(C) + gamma * dt * G))
    G = csc_matrix(G)
    t = dt * np.arange(steps + 1)
    drives = [course(current, t + stage * dt) * current.charge_fC * 1e-3 for stage in (gamma, 1.0)]

    def rate(V, current_now):
        right = -(G @ V)
        right[ends[site]] += current_now
        return solver.solve(right)

    V, out = np.zeros(G.shape[0]), np.zeros((2, steps + 1))
    for k in range(steps):
        first = rate(V, drives[0][k])
        second = rate(V + (1 - gamma) * dt * first, drives[1][k])
        V = V + dt * ((1 - gamma) * first + gamma * second)
        out[:, k + 1] = V[ends[site]], V[0]
    return t, out


@pytest.mark.parametrize("site", [2, 3])
def test_implicit_integration_on_a_fine_mesh(site):
    # A soma, a tapering trunk and two tapering daughters; (h, Δt) and (h/2, Δt/2) extrapolated (Richardson).
    current, soma_radius = SynapticCurrent(0.5, 2.0), 8.0
    tree = trees.Tree()
    soma = tree.add((0, 0, 0), soma_radius, kind=trees.SOMA)
    stem = tree.add((soma_radius, 0, 0), 1.5, soma)
    trunk = tree.grow(stem, (150.0, 0, 0), 1.0)
    tree.grow(trunk, (0, 200.0, 0), 0.4)
    tree.grow(trunk, (0, -120.0, 0), 0.7)
    pieces = [(0, 1.5, 1.0, 150.0), (1, 1.0, 0.4, 200.0), (1, 1.0, 0.7, 120.0)]
    area = 4 * np.pi * soma_radius**2
    coarse_t, coarse = integrated(pieces, area, site, current, 20, 0.02, 1000)
    _, fine = integrated(pieces, area, site, current, 40, 0.01, 2000)
    expected = (4 * fine[:, ::2] - coarse) / 3
    late = coarse_t > 0.2
    one = cable(tree.text())
    got = potentials(one, DEFAULTS, current, coarse_t[late], np.array([one.node[site + 1]]))
    for values, wanted in ((got.at_site[0], expected[0, late]), (got.at_soma[0], expected[1, late])):
        np.testing.assert_allclose(values, wanted, rtol=0, atol=PRECISION * wanted.max())


# ---------------------------------------------------------------- area, centroid


@pytest.mark.parametrize("current", [ALPHA, DOUBLE])
def test_area_is_impedance_times_charge_and_the_centroid_is_the_delay(current):
    swc = trees.irregular(25, 3, soma=True)
    one = cable(swc)
    (late,) = delays([one], DEFAULTS)
    (seen,) = transients([one], DEFAULTS, current)
    nodes, weights = np.polynomial.legendre.leggauss(160)
    first, last = np.log(1e-5 * current.rise_ms), np.log(50 * TAU_MS)
    times = np.exp((last - first) / 2 * nodes + (last + first) / 2)
    weights = weights * (last - first) / 2 * times
    got = potentials(one, DEFAULTS, current, times)
    charge = current.rise_ms + current.decay_ms
    for values, responses, delay in (
        (got.at_site, seen.at_site, late.local_ms),
        (got.at_soma, seen.at_soma, late.total_ms),
    ):
        area, moment = values @ weights, values @ (weights * times)
        np.testing.assert_allclose(area, responses.area_mV_ms_per_pA, rtol=1e-7)
        np.testing.assert_allclose(moment / area, delay + charge, rtol=1e-7)


# ---------------------------------------------------------------- the bound, and what is read off

CELLS = [trees.irregular(40, key, soma=key % 2 == 0) for key in range(4)] + [trees.with_axon(), trees.comb(5)]


def along(cells, line):
    """Return Z_in and Z_transfer of each cell along a contour, as pairs of real and imaginary parts."""
    forest = forest_of(cells, DEFAULTS)
    found = spectra(forest, list(MS_PER_S * line.s), forest.nodes, ("Z_in", "Z_transfer"))
    return [[np.ascontiguousarray(Z).view(np.float64) for Z in pair] for pair in found]


@pytest.mark.parametrize("current", CURRENTS)
def test_errors_stay_below_their_bound(current):
    cells = [cable(swc) for swc in CELLS]
    window = Window.of(current, TAU_MS)
    rough_line, fine_line = (
        contour(window.line.first, window.line.last, precision) for precision in (1e-10, 1e-13)
    )
    assert rough_line is window.line
    rough, fine = (
        [
            [Z @ line.kernel(window.times, current.transform(line.s)) for Z in pair]
            for pair in along(cells, line)
        ]
        for line in (rough_line, fine_line)
    )
    for seen, rough_pair, fine_pair in zip(transients(cells, DEFAULTS, current), rough, fine, strict=True):
        for got, wanted, responses in zip(rough_pair, fine_pair, (seen.at_site, seen.at_soma), strict=True):
            error = np.abs(got - wanted).max(axis=1) / wanted.max(axis=1)
            assert (error <= responses.error + 2e-12).all()
            assert error.max() < 1e-8


@pytest.mark.parametrize("current", CURRENTS)
def test_what_is_read_off_agrees_with_the_time_courses(current):
    one = cable(CELLS[0])
    (seen,) = transients([one], DEFAULTS, current)
    line = contour(1e-3 * current.rise_ms, 1000.0, 1e-13)
    for Z, responses in zip(along([one], line)[0], (seen.at_site, seen.at_soma), strict=True):
        for node in range(0, len(one.parent), 7):

            def V(t, row=Z[node]):
                return (
                    current.charge_fC
                    * 1e-3
                    * (row @ line.kernel(np.array([t]), current.transform(line.s)))[0]
                )

            peak, t_peak = responses.peak_mV_per_pA[node], responses.time_to_peak_ms[node]
            assert np.isclose(V(t_peak), peak, rtol=1e-8, atol=0)
            assert max(V(t_peak * 0.999), V(t_peak * 1.001)) < peak
            times = times_at_half_and_more(V, t_peak, peak)
            assert np.isclose(responses.rise_ms[node], times[0.9] - times[0.1], rtol=1e-7, atol=0)
            assert np.isclose(responses.half_width_ms[node], times["down"] - times[0.5], rtol=1e-7, atol=0)


def test_the_soma_answers_to_itself_alike_in_both_columns():
    (seen,) = transients([cable(CELLS[0])], DEFAULTS, ALPHA)
    for field in fields(Responses):
        assert getattr(seen.at_site, field.name)[0] == getattr(seen.at_soma, field.name)[0]


def test_a_response_too_small_beside_its_error_is_not_given():
    tree = trees.Tree()
    last = tree.add((0, 0, 0), 1.0)
    for _ in range(60):
        last = tree.grow(last, (577.0, 0, 0), 1.0)
    (seen,) = transients([cable(tree.text())], DEFAULTS, ALPHA)
    assert np.isnan(seen.at_soma.peak_mV_per_pA[-1])
    assert seen.at_soma.error[-1] > 1e-3
    assert np.isfinite(seen.at_soma.peak_mV_per_pA[:8]).all()
    assert np.isfinite(seen.at_site.half_width_ms).all()
    assert np.isfinite(seen.at_soma.area_mV_ms_per_pA).all()


def test_across_a_frustum_of_hundreds_of_wavelengths_of_the_fastest_frequency():
    swc = trees.cylinder(5 * 577.35, 2.0)
    (seen,) = transients([cable(swc)], DEFAULTS, SynapticCurrent(0.05, 0.05))
    (cut,) = transients([cable(trees.cylinder(5 * 577.35, 2.0, 50))], DEFAULTS, SynapticCurrent(0.05, 0.05))
    for name in ("peak_mV_per_pA", "half_width_ms"):
        for where in ("at_site", "at_soma"):
            got, wanted = (getattr(getattr(each, where), name)[-1] for each in (seen, cut))
            assert np.isclose(got, wanted, rtol=1e-6, atol=0)


# ---------------------------------------------------------------- sites, company, refusals


def test_a_forest_is_each_cell_alone_bit_for_bit():
    cells = [cable(builder()) for builder, _ in trees.FAMILIES.values()]
    for one, together in zip(cells, transients(cells, DEFAULTS, DOUBLE), strict=True):
        (alone,) = transients([one], DEFAULTS, DOUBLE)
        for where in ("at_site", "at_soma"):
            for field in fields(Responses):
                np.testing.assert_array_equal(
                    getattr(getattr(together, where), field.name), getattr(getattr(alone, where), field.name)
                )


def test_chosen_sites_and_rows_by_sample():
    one = cable(trees.with_axon(), Assumptions(axon="left out"))
    (every,) = transients([one], DEFAULTS, ALPHA)
    chosen = np.array([3, 1])
    (some,) = transients([one], DEFAULTS, ALPHA, [chosen])
    np.testing.assert_allclose(some.at_soma.peak_mV_per_pA, every.at_soma.peak_mV_per_pA[chosen], rtol=1e-13)
    by_sample = some.by_sample().at_soma.peak_mV_per_pA
    here = np.isin(one.node, chosen)
    np.testing.assert_array_equal(np.isfinite(by_sample), here)
    np.testing.assert_array_equal(by_sample[one.node == 3], some.at_soma.peak_mV_per_pA[0])
    np.testing.assert_array_equal(np.isnan(every.by_sample().at_site.error), one.node < 0)


def test_no_cells_no_transients():
    assert transients([], DEFAULTS, ALPHA) == []


@pytest.mark.parametrize("time", [0.0, -1.0, np.nan, np.inf])
def test_times_that_are_none_are_refused(time):
    with pytest.raises(AssumptionError, match="expected times after the current's start, above 0 ms"):
        potentials(cable(SPHERE), DEFAULTS, ALPHA, [1.0, time])


def test_no_times_are_refused():
    with pytest.raises(AssumptionError, match="expected at least one time"):
        potentials(cable(SPHERE), DEFAULTS, ALPHA, [])


def test_where_nothing_arrives_nothing_is_read_off():
    # 2,000 λ: the transfer impedance is 0 in double precision.
    swc = trees.cylinder(2000 * 577.35, 2.0, 20)
    (seen,) = transients([cable(swc)], DEFAULTS, ALPHA)
    for name in ("peak_mV_per_pA", "time_to_peak_ms", "half_width_ms"):
        assert np.isnan(getattr(seen.at_soma, name)[-1])
        assert np.isfinite(getattr(seen.at_site, name)).all()
    assert seen.at_soma.error[-1] == np.inf
    assert seen.at_soma.area_mV_ms_per_pA[-1] == 0.0


def test_domains_shunt_and_spines_are_in_the_response():
    # Slower membrane on the tree: a later peak at the soma; a shunt: a smaller one.
    swc = trees.ball_and_stick()

    def peak(**changed):
        assumptions = Assumptions(**changed)
        (seen,) = transients([cable(swc, assumptions)], assumptions, ALPHA, [np.array([2])])
        return seen.at_soma.peak_mV_per_pA[0], seen.at_soma.time_to_peak_ms[0]

    plain = peak()
    slow = peak(domains={3: Membrane(C_m_uF_cm2=2.0)})
    shunted = peak(soma_shunt_nS=20.0)
    assert slow[1] > plain[1]
    assert slow[0] < plain[0]
    assert shunted[0] < plain[0]
