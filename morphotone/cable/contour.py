"""Inverse Laplace transform over a window of times, with one set of complex frequencies for all of them.

All singularities of a passive cell's transfer functions, and those of synaptic currents, lie on the
negative real axis.  V(t) = 1/(2πi)·∫ e^{st} F(s) ds may therefore be taken along a hyperbola that opens to
the left, where e^{st} falls off, and the trapezoidal rule converges exponentially on it (Weideman &
Trefethen 2007, Math Comp 76:1341–1356; López-Fernández, Palencia & Schädle 2006, SIAM J Numer Anal
44:1332–1350).  A fixed hyperbola serves a whole window of times; the number of nodes grows with the
logarithm of last/first only, so that one window over five decades is cheaper than five over one each.

=========  ============  ==========================================================
symbol     variable      meaning
=========  ============  ==========================================================
s(u)       ``s``         μ(1 + sin(iu − α)), real u: the hyperbola, 1/ms
μ, α       ``mu, alpha`` its scale (1/ms) and its half-angle, seen from the vertical
h, N       ``h, nodes``  spacing in u and number of nodes with u > 0
D          ``digits``    natural logarithm of the precision asked for
=========  ============  ==========================================================

With real V, the nodes with u < 0 are the conjugates of those with u > 0 and are never solved.
"""

from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
Complex = NDArray[np.complex128]

# e^{μt} at the last time: the larger, the fewer nodes, and the more digits are lost to cancellation.
_GROWTH = 2.0
# Near the negative real axis F is large: up to a threefold pole (two of the current and one of the cell)
# costs this much more than the D of a bounded F.
_POLES = 7.0


@dataclass(frozen=True, eq=False)
class Contour:
    """Nodes in the upper half plane, and weights: V(t) = Im Σ weight·e^{st}·F(s).

    Attributes
    ----------
    first, last : float
        The window of times in which the precision holds, ms.
    s : ndarray of complex128, shape (nodes,)
        Complex frequencies, 1/ms, outermost last.
    weight : ndarray of complex128, shape (nodes,)
        h/π·ds/du, 1/ms.
    """

    first: float
    last: float
    s: Complex
    weight: Complex

    def kernel(self, times: Real, transform: Any = 1.0) -> Real:
        """Return the matrix that turns transfer functions into responses.

        Parameters
        ----------
        times : ndarray, shape (times,)
            Inside the window, ms.
        transform : ndarray of complex128, shape (nodes,), or number
            The input's Laplace transform at ``s``; a factor s differentiates.

        Returns
        -------
        ndarray, shape (2·nodes, times)
            Its product with F(s) of shape (rows, nodes), viewed as pairs of real and imaginary parts, is
            the response of shape (rows, times).
        """
        wave = (self.weight * transform)[:, None] * np.exp(self.s[:, None] * times)
        return np.stack((wave.imag, wave.real), axis=1).reshape(-1, len(times))


@lru_cache(maxsize=64)
def contour(first: float, last: float, precision: float) -> Contour:
    """Return the hyperbola for a window of times.

    Parameters
    ----------
    first, last : float
        Ends of the window, ms, 0 < first <= last.
    precision : float
        Relative to a bounded F, between 1e-12 and 1e-2.

    Notes
    -----
    Three errors are set equal, each e^{−D}: of the trapezoidal rule toward the negative axis,
    e^{−2π(π/2 − α)/h}, where F grows; toward the right, e^{μt − 2πα/h}, where e^{st} grows; and of
    leaving out |u| > Nh, where e^{st} < e^{−D} from the first time on (Weideman & Trefethen 2007, section 4,
    who take F as bounded on the axis and so have no term for its poles).
    """
    digits = -np.log(precision)
    h = np.pi**2 / (2.0 * digits + _POLES + _GROWTH)
    alpha = h * (digits + _GROWTH) / (2.0 * np.pi)
    mu = _GROWTH / last
    farthest = np.arccosh((digits / (mu * first) + 1.0) / np.sin(alpha))
    u = h * (np.arange(int(np.ceil(farthest / h))) + 0.5)
    return Contour(
        first,
        last,
        mu * (1.0 + np.sin(1j * u - alpha)),
        h / np.pi * 1j * mu * np.cos(1j * u - alpha),
    )


def by_rows(rows: Real | Complex, matrix: Real, at_once: int = 2) -> Real:
    """Return rows (complex ones as pairs) times a matrix, the same bits for any number of threads.

    Threads share out the rows of a large product, and the last rows of each share are rounded differently:
    ``at_once`` rows are too few to be shared.
    """
    flat = np.ascontiguousarray(rows).view(np.float64)
    missing = -len(flat) % at_once
    whole = np.concatenate((flat, np.zeros((missing, flat.shape[1])))) if missing else flat
    stacks = whole.reshape(len(whole) // at_once, at_once, flat.shape[1])
    product: Real = (stacks @ matrix).reshape(len(whole), matrix.shape[1])[: len(flat)]
    return np.ascontiguousarray(product)
