"""Inversion of transforms known in closed form, what a window costs; polynomials between grid points."""

import numpy as np
import pytest

from morphotone.cable import neighbours
from morphotone.cable.contour import contour


def inverted(line, F, times):
    """Return the inverse of F(s) at times."""
    values = np.ascontiguousarray(np.broadcast_to(F(line.s), line.s.shape)).view(np.float64)
    return values @ line.kernel(times)


KNOWN = {
    # Transform, original; Abramowitz & Stegun 1964, section 29.3 (numbers from memory).
    "29.3.1 step": (lambda s: 1 / s, np.ones_like),
    "29.3.8 exponential": (lambda s: 1 / (s + 0.7), lambda t: np.exp(-0.7 * t)),
    "29.3.10 alpha, twofold pole": (lambda s: 1 / (s + 1) ** 2, lambda t: t * np.exp(-t)),
    "29.3.11 threefold pole": (lambda s: 1 / (s + 1) ** 3, lambda t: t**2 / 2 * np.exp(-t)),
    "29.3.4 1/√(πt)": (lambda s: 1 / np.sqrt(s), lambda t: 1 / np.sqrt(np.pi * t)),
    "29.3.82 diffusion": (
        lambda s: np.exp(-2 * np.sqrt(s)),
        lambda t: np.exp(-1 / t) / np.sqrt(np.pi * t**3),
    ),
}


@pytest.mark.parametrize("precision", [1e-4, 1e-7, 1e-10])
@pytest.mark.parametrize("decades", [0, 1, 5])
@pytest.mark.parametrize("name", KNOWN)
def test_transforms_of_the_tables(name, decades, precision):
    F, f = KNOWN[name]
    times = np.geomspace(0.01, 0.01 * 10**decades, 50) if decades else np.array([0.5])
    line = contour(times[0], times[-1], precision)
    expected = f(times)
    # Of the greatest value; toward t = 0 a bounded F weighs 1/t more.
    scale = max(abs(expected).max(), 1.0)
    np.testing.assert_allclose(inverted(line, F, times), expected, rtol=0, atol=300 * precision * scale)


def test_a_factor_s_differentiates():
    times = np.geomspace(0.1, 10, 20)
    line = contour(0.1, 10.0, 1e-10)
    values = np.ascontiguousarray(1 / (line.s + 1) ** 2).view(np.float64)
    np.testing.assert_allclose(values @ line.kernel(times, line.s), (1 - times) * np.exp(-times), atol=1e-7)


def test_nodes_grow_with_the_logarithm_of_the_window_and_of_the_precision():
    counts = [len(contour(1e-3, 1e-3 * 10**k, 1e-9).s) for k in range(7)]
    assert max(np.diff(counts)[2:]) - min(np.diff(counts)[2:]) <= 1
    digits = [len(contour(1e-3, 1e2, 10.0**-k).s) for k in range(4, 12)]
    assert max(np.diff(digits)) - min(np.diff(digits)) <= 2
    assert counts[5] < 5 * counts[1]


def test_all_nodes_lie_in_the_upper_half_plane_off_the_negative_axis():
    line = contour(1e-3, 1e3, 1e-11)
    assert (line.s.imag > 0).all()
    assert (np.abs(np.angle(line.s)) < 0.85 * np.pi).all()


# ---------------------------------------------------------------- polynomials between grid points


def test_a_polynomial_of_degree_seven_is_itself():
    rng = np.random.default_rng(5)
    exact = rng.normal(size=(6, 8))
    x = np.arange(12.0) - 5
    curves = np.array([np.polynomial.polynomial.polyval(x, row) for row in exact])
    near = neighbours.polynomials(curves, np.full(6, 5))
    np.testing.assert_allclose(near, exact, rtol=0, atol=1e-9)
    np.testing.assert_allclose(
        neighbours.values(near, np.full(6, 0.3)),
        [np.polynomial.polynomial.polyval(0.3, row) for row in exact],
        rtol=1e-9,
        atol=1e-9,
    )


def test_crossing_and_summit_of_a_sine():
    step = 0.05
    grid = step * np.arange(80)
    curves = np.stack((np.sin(grid), np.sin(grid + 0.013)))
    highest = curves.argmax(axis=1)
    near = neighbours.polynomials(curves, highest)
    x = neighbours.summits(near)
    np.testing.assert_allclose(step * (highest + x), np.pi / 2 - np.array([0, 0.013]), rtol=1e-9)
    np.testing.assert_allclose(neighbours.values(near, x), 1.0, rtol=1e-13)
    start = np.array([10, 10])
    level = np.sin(step * 10.4) * np.ones(2)
    x = neighbours.crossings(neighbours.polynomials(curves, start), level)
    np.testing.assert_allclose(x, [0.4, 0.4 - 0.013 / step], rtol=1e-9)
