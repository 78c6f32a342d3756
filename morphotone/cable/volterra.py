"""The Volterra equation of a brief conductance, solved on panels that double from one to the next.

A conductance g(t) with driving force E at a site draws f(t) = g(t)·(E − V(t)), and

    V(t) = ∫₀ᵗ K(t − u)·f(u) du,        K the impulse response at the site, Z_ii(s) its Laplace transform.

On a cable K grows like t^(−1/2) toward 0.  It is never sampled: on each panel f is a polynomial through Gauss
points, and its integrals with K come exactly, as integrals of e^{s(t−u)} times Legendre polynomials summed
along the hyperbola that the transients use (`morphotone.cable.contour`).  What has gone by is kept as one
number per complex frequency, H = ∫₀ᵃ e^{s(a−u)}·f(u) du, so that the work is linear in the panels (Lubich
& Schädle 2002, SIAM J Sci Comput 24:161–182, for convolutions along contours; from memory).  The hyperbola
serves t − u ≥ δ.  Over the last δ before t, a small part of the first panel, f is taken as linear: there
count ∫₀^δ K(v) dv = K₁(δ), the inverse transform of Z/s, and ∫₀^δ v·K(v) dv = δ·K₁(δ) − ∫₀^δ K₁(v) dv.
"""

from dataclasses import dataclass
from math import factorial

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from morphotone.cable.contour import Complex, Contour, by_rows, contour

Real = NDArray[np.float64]

POINTS = 8
"""Gauss points on a panel."""

_X, _ = legendre.leggauss(POINTS)
_SHARES = 0.5 * (_X + 1.0)  # of a panel passed at its points
_COEFFICIENTS = np.linalg.inv(legendre.legvander(_X, POINTS - 1))  # Legendre's, from values at the points
_SLOPES = 2.0 * legendre.legval(_X, legendre.legder(_COEFFICIENTS)).T  # at the points, times the length
_NEAR = 0.2 * float(_SHARES[0])  # δ as a share of the first panel
# ∫₀¹ of the series through its values at 1, 2 and 4 that has the powers 1/2, 1 and 3/2.
_AT = np.array([1.0, 2.0, 4.0])
_MEAN = np.linalg.solve(_AT ** np.array([[0.5], [1.0], [1.5]]), 1.0 / np.array([1.5, 2.0, 2.5]))
_PRECISION = 1e-9  # of the hyperbola
_LARGE = 40.0  # |v| from where on a moment's closed form loses no digit
_RULE = legendre.leggauss(48)  # exact up to there


@dataclass(frozen=True, eq=False)
class Panels:
    """A grid of panels and all that turns transfer functions into responses on it.

    Attributes
    ----------
    line : Contour
        The hyperbola, nodes s in 1/ms.
    edges : ndarray, shape (panels + 1,)
        Ends of the panels, ms, from 0.
    times : ndarray, shape (panels, POINTS)
        Gauss points, ms.
    decay : ndarray of complex128, shape (panels, nodes)
        e^{s·length}, by which H changes over a panel without current.
    gain : ndarray, shape (panels, POINTS, 2·nodes)
        What f at the points adds to H, as pairs of real and imaginary parts.
    before : ndarray, shape (panels, 2·nodes, POINTS)
        Turns the pairs of Z·H at the panel's start into the response at its points.
    within : ndarray, shape (panels, 2·nodes, POINTS²)
        Turns the pairs of Z into the matrix from f to the response, both at the panel's points.
    """

    line: Contour
    edges: Real
    times: Real
    decay: Complex
    gain: Real
    before: Real
    within: Real

    def sampling(self, times: Real) -> Real:
        """Return the matrix from values at the points, flattened, to values at times, (points, times)."""
        panel = np.clip(np.searchsorted(self.edges, times) - 1, 0, len(self.edges) - 2)
        share = (times - self.edges[panel]) / np.diff(self.edges)[panel]
        matrix = np.zeros((len(times), len(self.edges) - 1, POINTS))
        matrix[np.arange(len(times)), panel] = _lagrange(share)
        return matrix.reshape(len(times), -1).T


def doublings(first: float, count: int, per_doubling: int) -> Real:
    """Return edges of panels from 0 to first·2^count, ms.

    Parameters
    ----------
    first : float
        End of the first doubling, ms, itself cut into ``per_doubling`` panels of equal length.
    count : int
        How often the time doubles after that.
    per_doubling : int
        Panels from one power of two to the next, each longer than the one before by the same factor.
    """
    later = first * 2.0 ** (np.arange(1, per_doubling * count + 1) / per_doubling)
    return np.append(np.linspace(0.0, first, per_doubling + 1), later)


def line_for(edges: Real) -> Contour:
    """Return the hyperbola for panels with these edges; panels that start later may share it."""
    return contour(_NEAR * float(edges[1]), float(edges[-1]), _PRECISION)


def panels(edges: Real, line: Contour) -> Panels:
    """Return panels with given edges (ms, from 0) on a given hyperbola; δ grows with the first panel."""
    lengths = np.diff(edges)
    near = _NEAR * float(lengths[0])
    parts = [_panel(line, length, near) for length in lengths.tolist()]
    decay, gain, before, within = (np.stack(values) for values in zip(*parts, strict=True))
    return Panels(line, edges, edges[:-1, None] + lengths[:, None] * _SHARES, decay, gain, before, within)


def respond(grid: Panels, Z_in: Complex, Z_out: Complex, g_uS: Real, driving_mV: Real) -> tuple[Real, Real]:
    """Return the potential at each site for a conductance there, and the response elsewhere.

    Parameters
    ----------
    grid : Panels
        On which the conductances are given.
    Z_in, Z_out : ndarray of complex128, shape (sites, nodes)
        At the grid's complex frequencies: impedance at the site, and the transfer function from current
        (nA) at the site to whatever is asked for elsewhere.
    g_uS : ndarray, shape (sites, panels, POINTS)
        Conductance, µS.
    driving_mV : ndarray, shape (sites,)
        Driving force from rest.

    Returns
    -------
    local, elsewhere : ndarray, shape (sites, panels, POINTS)
        mV; and the unit of Z_out times nA.
    """
    local, elsewhere = np.empty_like(g_uS), np.empty_like(g_uS)
    past = np.zeros_like(Z_in)
    for k in range(g_uS.shape[1]):
        g = g_uS[:, k]
        A, A_out = (by_rows(Z, grid.within[k]).reshape(-1, POINTS, POINTS) for Z in (Z_in, Z_out))
        so_far, so_far_out = (by_rows(Z * past, grid.before[k]) for Z in (Z_in, Z_out))
        ahead = so_far + np.einsum("mnj,mj->mn", A, g * driving_mV[:, None])
        V = np.linalg.solve(np.eye(POINTS) + A * g[:, None, :], ahead[:, :, None])[:, :, 0]
        f = g * (driving_mV[:, None] - V)
        local[:, k], elsewhere[:, k] = V, so_far_out + np.einsum("mnj,mj->mn", A_out, f)
        past = past * grid.decay[k] + by_rows(f, grid.gain[k]).view(np.complex128)
    return local, elsewhere


def _panel(line: Contour, length: float, near: float) -> tuple[Complex, Real, Real, Real]:
    """Return decay, gain, before and within of one panel."""
    gain = length * _COEFFICIENTS.T @ _moments(line.s * length)
    before = line.weight[:, None] * np.exp(line.s[:, None] * length * _SHARES)
    end = (line.weight * np.exp(line.s * near))[:, None]
    K_1, moment = _last_bit(line, near)
    within = np.empty((len(line.s), POINTS, POINTS), np.complex128)
    for n, share in enumerate(_SHARES.tolist()):
        until = length * share - near  # the hyperbola's part of the way to this point
        basis = _COEFFICIENTS @ _lagrange(until / length * _SHARES)
        within[:, n] = end * (until * _moments(line.s * until).T @ basis)
        within[:, n, n] += K_1
        within[:, n] -= moment[:, None] * (_SLOPES[n] / length)
    flat = within.reshape(len(line.s), -1)
    return np.exp(line.s * length), np.ascontiguousarray(gain).view(np.float64), _rows(before), _rows(flat)


def _last_bit(line: Contour, near: float) -> tuple[Complex, Complex]:
    """Return what turns Z into ∫ K dv and ∫ v·K dv from 0 to δ, each of shape (nodes,).

    K₁(v) is a series in √v that begins with √v; three terms of it follow from K₁ at δ, 2δ and 4δ.
    """
    K_1 = line.weight / line.s * np.exp(line.s * near * _AT[:, None])
    return K_1[0], near * (K_1[0] - _MEAN @ K_1)


def _rows(wave: Complex) -> Real:
    """Return the matrix that takes pairs of F to Im Σ wave·F, as `Contour.kernel` does."""
    return np.stack((wave.imag, wave.real), axis=1).reshape(-1, wave.shape[1])


def _lagrange(share: Real) -> Real:
    """Return the value at shares of a panel of the polynomials that are 1 at one point, (shares, POINTS)."""
    values: Real = legendre.legvander(2.0 * share - 1.0, POINTS - 1) @ _COEFFICIENTS
    return values


def _moments(w: Complex) -> Complex:
    """Return ∫₀¹ e^{w(1−x)}·P_q(2x − 1) dx for q < POINTS, shape (POINTS, len(w)).

    It is e^{−v}·i_q(v) with v = −w/2 and the modified spherical Bessel function i_q (DLMF 10.47, 10.54.2; the
    finite sum 10.49.8): by Gauss's rule where |v| is small, and by the sum where it is large.
    """
    v = -0.5 * w
    out = np.empty((POINTS, len(v)), np.complex128)
    small = np.abs(v) < _LARGE
    x, weight = _RULE
    out[:, small] = (
        0.5 * (legendre.legvander(x, POINTS - 1).T * weight) @ np.exp(-v[small] * (1.0 - x[:, None]))
    )
    inverse = 0.5 / v[~small]
    for q in range(POINTS):
        terms = [factorial(q + k) // (factorial(k) * factorial(q - k)) for k in range(q, -1, -1)]
        there, back = np.polyval(terms, -inverse), np.polyval(terms, inverse)
        out[q, ~small] = inverse * (there - (-1) ** q * np.exp(-2.0 * v[~small]) * back)
    return out
