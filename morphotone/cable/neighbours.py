"""Where smooth curves, known on a shared even grid, cross a level or peak: a polynomial through eight points.

The curves are analytic in the logarithm of time or frequency, and the grid is fine beside their features:
with spacing δ the polynomial is off by at most 1.1e-3·δ⁸ times the eighth derivative between the two
middle points (Lagrange's remainder), which is below 1e-9 where it is used.
"""

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.contour import by_rows

Index = NDArray[np.int64]
Real = NDArray[np.float64]

LEFT, RIGHT = 3, 4
"""How many grid points a place needs on either side."""

_OFFSETS = np.arange(-LEFT, RIGHT + 1)
_COEFFICIENTS = np.asarray(
    np.linalg.inv(np.vander(_OFFSETS.astype(np.float64), increasing=True)).T, np.float64
)
_NEWTON_STEPS = 6  # each doubles the digits, and the first guess has more than one


def polynomials(curves: Real, at: Index) -> Real:
    """Return coefficients, ascending, of the polynomials around grid points.

    Parameters
    ----------
    curves : ndarray, shape (rows, points)
    at : ndarray of int64, shape (rows,)
        A grid point of each row, `LEFT` to points − 1 − `RIGHT`; it is 0 of the polynomial's variable,
        which counts grid steps.
    """
    return by_rows(np.take_along_axis(curves, at[:, None] + _OFFSETS, axis=1), _COEFFICIENTS)


def values(coefficients: Real, x: Real) -> Real:
    """Return the polynomials at x, shape (rows,)."""
    total = coefficients[:, -1]
    for column in coefficients.T[-2::-1]:
        total = total * x + column
    return total


def slopes(coefficients: Real) -> Real:
    """Return the coefficients of the derivatives."""
    return coefficients[:, 1:] * np.arange(1, coefficients.shape[1])


def crossings(coefficients: Real, level: Real) -> Real:
    """Return where, between the grid points 0 and 1, each polynomial passes a level."""
    start, end = values(coefficients, np.zeros(len(level))), values(coefficients, np.ones(len(level)))
    x = (level - start) / (end - start)
    slope = slopes(coefficients)
    for _ in range(_NEWTON_STEPS):
        x = np.clip(x - (values(coefficients, x) - level) / values(slope, x), 0.0, 1.0)
    return x


def summits(coefficients: Real) -> Real:
    """Return where, within one step of the grid point 0, each polynomial has its maximum."""
    slope = slopes(coefficients)
    bend = slopes(slope)
    x = np.zeros(len(coefficients))
    for _ in range(_NEWTON_STEPS):
        x = np.clip(x - values(slope, x) / values(bend, x), -1.0, 1.0)
    return x
