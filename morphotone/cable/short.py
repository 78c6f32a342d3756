"""Short frusta of slight taper, which is what most of a traced cell is made of: their π as a power series.

With the mean radius m = (r_start + r_end)/2, the taper ε = (r_end − r_start)/(r_start + r_end) and
Q = 2·R_i·g·σ·h²/m (|Q| is about L² at 0 Hz), a frustum's π is

    axial = π·r_start·r_end/(R_i·h)·(1 + Σ a_j(ε)·Q^j),    start, end = π·σ·h·r·g·(1 + Σ b_j(±ε)·Q^j),

r being the radius of that end, and the lower sign the far end's.  The a_j are even in ε, the b_j have an even
and an odd part.  Their expansions in ε are rational numbers, found from the equation of
`morphotone.cable.frustum` by integrating it term by term in Q.  The series converge as far as |Q| = π²: where
they are used each term is less than 0.0012 of the one before it, so that the changing signs cost no digit.

The a_j and b_j are found once per frustum, in real arithmetic, and a case takes three polynomials of low
degree; the series for any taper takes ten terms and more for every case.
"""

from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Values = NDArray[Any]  # float64 at 0 Hz, complex128 at a frequency

# Per power of Q from the first on, the coefficients of 1, ε², ε⁴, …; of ε, ε³, … in the odd part.
AXIAL = (
    (-1 / 6, -1 / 30, -1 / 70, -1 / 126, -1 / 198, -1 / 286, -1 / 390),
    (7 / 360, 19 / 2520, 7 / 1800, 971 / 415800, 58367 / 37837800, 8233 / 7567560),
    (-31 / 15120, -11 / 9450, -83 / 118800, -1943 / 4299750),
    (127 / 604800, 1559 / 9979200, 970483 / 9081072000),
    (-73 / 3421440, -1068043 / 54486432000),
)
EVEN = (
    (-1 / 12, -1 / 60, -1 / 140, -1 / 252, -1 / 396, -1 / 572, -1 / 780),
    (1 / 120, 1 / 315, 61 / 37800, 199 / 207900, 23671 / 37837800, 827 / 1891890),
    (-17 / 20160, -71 / 151200, -79 / 285120, -1363 / 7722000),
    (31 / 362880, 1247 / 19958400, 10421 / 247665600),
    (-691 / 79833600,),
)
ODD = (
    (-1 / 60, -1 / 140, -1 / 252, -1 / 396, -1 / 572, -1 / 780),
    (1 / 504, 23 / 18900, 323 / 415800, 4999 / 9459450, 2867 / 7567560),
    (-1 / 4800, -823 / 4989600, -59971 / 504504000, -98057 / 1135134000),
    (17 / 798336, 561163 / 27243216000),
    (-21421 / 9906624000,),
)

# A class is a bound of |Q| with a bound of |ε|; a frustum has the first bounds that it does not exceed.
SIZES = (1e-4, 1e-3, 1e-2)
TAPERS = (0.0, 1 / 16, 1 / 8)
OTHER = -1  # beyond the last bounds: not for this series
_NEGLIGIBLE = 2e-17


def class_of(size: Real, taper: Real) -> NDArray[np.int8]:
    """Return the class of each frustum, which depends on that frustum alone.

    Parameters
    ----------
    size, taper : ndarray, shape (n,)
        The largest |Q| of any case, and |ε|.
    """
    kind = np.zeros(len(size), np.int8)
    for step, values, bounds in ((1, size, SIZES), (len(SIZES), taper, TAPERS)):
        for bound in bounds[:-1]:
            kind += np.int8(step) * (values > bound)
    kind[(size > SIZES[-1]) | (taper > TAPERS[-1])] = OTHER
    return kind


def _bounds(kind: int) -> tuple[float, float]:
    """Return the bounds of |Q| and |ε| of a class."""
    return SIZES[kind % len(SIZES)], TAPERS[kind // len(SIZES)]


@cache
def _corner(kind: int) -> tuple[Real, ...]:
    """Return per power of Q the coefficients that matter in a class: axial, even, odd; (3, powers of ε²)."""
    Q, taper = _bounds(kind)
    powers = []
    for j, rows in enumerate(zip(AXIAL, EVEN, ODD, strict=True), start=1):
        needed = [
            [c for k, c in enumerate(row) if abs(c) * Q**j * taper ** (2 * k + odd) > _NEGLIGIBLE]
            for row, odd in zip(rows, (0, 0, 1), strict=True)
        ]
        if any(needed):
            longest = max(map(len, needed))
            powers.append(np.array([row + [0.0] * (longest - len(row)) for row in needed]))
    return tuple(powers)


def coefficients(taper: Real, kind: int) -> list[Real]:
    """Return a_j, b_j(ε), b_j(−ε) for each power of Q that matters, shape (3, n), or (3, 1) for cylinders."""
    taper = taper if _bounds(kind)[1] else taper[:1]
    square, found = taper * taper, []
    for row in _corner(kind):
        polynomial = np.empty((3, len(taper)))
        polynomial[:] = row[:, -1:]  # far faster than np.repeat
        for column in range(row.shape[1] - 2, -1, -1):
            polynomial *= square
            polynomial += row[:, column : column + 1]
        odd = polynomial[2] * taper
        np.subtract(polynomial[1], odd, out=polynomial[2])
        polynomial[1] += odd
        found.append(polynomial)
    return found


def factors(powers: list[Real], Q: Values) -> Values:
    """Return 1 + Σ c_j·Q^j for the coefficients of axial, start and end, shape (3, n)."""
    total: Values = powers[-1] * Q
    for coefficient in reversed(powers[:-1]):
        total += coefficient
        total *= Q
    total += 1.0
    return total
