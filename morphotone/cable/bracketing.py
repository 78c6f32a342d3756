"""Finding poles from counts: brackets that a count proves, closed by interpolating the determinant.

One `Search` is one cell.  It says at which points it wants to be evaluated, is told the counts and the
size of the determinant there, and goes on until its poles are found.  It knows neither cable nor time:
points are w ≥ 0 with the rate q = q_slow·(1 + w), so that the poles of a uniform cell start at w = 0, and
those of a sealed cylinder are w = (nπ/L)² (Rall 1969, Biophys J 9:1483–1508).

Counts alone would halve brackets, thirty times and more.  But the determinant is an entire function of w,
and close to a pole of multiplicity m its m-th root, with the sign that the count gives, crosses zero like
a straight line.  A polynomial through the samples between the two neighbouring poles finds the crossing;
the next points stand close to either side of it, for the count to prove, and one in the middle of the
bracket, so that no bracket ever does worse than halving.
"""

from collections.abc import Iterator
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

Index = NDArray[np.int64]
Real = NDArray[np.float64]

_REACH = 300.0  # of the first points, where the modes of dendrites of L from 0.2 on start
_SPAN = 1e4  # highest over lowest of the first points
_FARTHER = 100.0  # how far a search goes on when it has not found enough
_FARTHEST = 1e14  # a lone soma with a shunt has one mode only, however far one looks
_CLOSED = 1e-10  # relative width in 1 + w of a bracket that is closed
_NODES = 7  # of the interpolating polynomial
_FEWEST = 3
_APART = 0.01  # relative distance in 1 + w at which the next pole is far enough from the last one wanted


class Pole(NamedTuple):
    """Where a pole is, how many modes share it, and how far any other is at the least, in w."""

    w: float
    multiplicity: int
    separation: float


class _Bracket(NamedTuple):
    """Poles between two neighbouring samples: positions of the samples among all."""

    low: int
    high: int


class Search:
    """The first poles of one cell.

    Parameters
    ----------
    wanted : int
        How many distinct poles.
    known : int
        How many poles are known to be at w = 0: 1 for a uniform cell, 0 for any other, which has none there.
    enough : float
        Below which w there are about as many modes as poles are wanted, or more; infinite if unknown.
    """

    def __init__(self, wanted: int, known: int, enough: float = np.inf) -> None:
        self._wanted = wanted
        self._known = known
        self._reach = min(_REACH, enough)
        self._w: Real = np.zeros(1)
        self._count: Index = np.full(1, known)
        self._log: Real = np.full(1, np.nan)  # not evaluated: a pole may be there

    @property
    def places(self) -> int:
        """At how many places one has to look at once, at the most: one per pole and one behind them."""
        return self._wanted + 1

    def add(self, w: Real, count: Index, log_det: Real) -> None:
        """Take in what was counted at some points, each of shape (points,)."""
        _, new = np.unique(w, return_index=True)
        order = np.argsort(np.concatenate((self._w, w[new])), kind="stable")
        self._w = np.concatenate((self._w, w[new]))[order]
        self._count = np.concatenate((self._count, count[new]))[order]
        self._log = np.concatenate((self._log, log_det[new]))[order]

    def points(self, n: int) -> Real:
        """Return n points at which to count next, ascending; none when all poles are found.

        n should be some four times ``places``.
        """
        places = list(self._places())
        if not places:
            return np.empty(0)
        each = [len(part) for part in np.array_split(np.arange(n), len(places))]
        chosen = [self._points_in(place, share) for place, share in zip(places, each, strict=True)]
        return np.sort(np.concatenate(chosen))

    def poles(self) -> list[Pole]:
        """Return the poles found, ascending: at most as many as were wanted."""
        at = [0.0] * self._known + [self._crossing(bracket) for bracket in self._brackets()]
        shares = [1] * self._known + [self._jump(bracket) for bracket in self._brackets()]
        edges = [-np.inf, *at, self._clear_until()]
        return [
            Pole(w, share, min(w - edges[i], edges[i + 2] - w))
            for i, (w, share) in enumerate(zip(at, shares, strict=True))
        ]

    def _brackets(self) -> list[_Bracket]:
        jumps = np.flatnonzero(np.diff(self._count) > 0)[: self._wanted - self._known]
        return [_Bracket(int(i), int(i) + 1) for i in jumps]

    def _jump(self, bracket: _Bracket) -> int:
        return int(self._count[bracket.high] - self._count[bracket.low])

    def _closed(self, bracket: _Bracket) -> bool:
        low, high = self._w[bracket.low], self._w[bracket.high]
        return bool(high - low <= _CLOSED * (1.0 + high))

    def _clear_until(self) -> float:
        """Return up to where there is certainly no pole beyond those found; infinite if there is none."""
        brackets = self._brackets()
        found = self._count[brackets[-1].high] if brackets else self._known
        clear = float(self._w[np.flatnonzero(self._count <= found)[-1]])
        return np.inf if clear >= _FARTHEST else clear

    def _places(self) -> Iterator[_Bracket]:
        """Yield where to look next: open brackets, and behind the last sample or the last pole."""
        brackets = self._brackets()
        yield from (bracket for bracket in brackets if not self._closed(bracket))
        last = len(self._w) - 1
        if len(brackets) < self._wanted - self._known:
            if self._w[last] < _FARTHEST:
                yield _Bracket(last, last + 1)
            return
        edge = brackets[-1].high if brackets else 0
        behind = np.flatnonzero(self._count <= self._count[edge])[-1]
        gap, pole = self._w[behind] - self._w[edge], self._w[edge]
        if gap < _APART * (1.0 + pole) and (behind == last or gap < (self._w[behind + 1] - pole) / 8.0):
            yield _Bracket(int(behind), int(behind) + 1)

    def _points_in(self, place: _Bracket, n: int) -> Real:
        if place.high == len(self._w):
            last = float(self._w[place.low])
            if last == 0.0:
                return np.geomspace(self._reach / _SPAN, self._reach, n)
            return np.geomspace(last * _FARTHER ** (1 / n), last * _FARTHER, n)
        low, high = self._w[place.low], self._w[place.high]
        spaced: Real = (np.sqrt(low) + (np.sqrt(high) - np.sqrt(low)) * np.arange(1, n + 1) / (n + 1)) ** 2
        model = self._model(place)
        if model is None:
            return spaced
        w, error = model
        error = max(4.0 * error, _CLOSED / 3.0 * (1.0 + w))
        near = [w - error, w + error, 0.5 * (low + high)]
        near += [w - np.sqrt(error * (w - low)), w + np.sqrt(error * (high - w))]
        chosen = np.array(near)[:n]
        inside = chosen[(chosen > low) & (chosen < high)]
        return np.concatenate((inside, spaced[: n - len(inside)]))

    def _model(self, bracket: _Bracket) -> tuple[float, float] | None:
        """Return where the interpolated determinant is zero, and about how wrong that is; None too early."""
        w, root = self._root_of_det(bracket)
        if len(w) <= _FEWEST or not (np.isfinite(root).all() and root[0] > 0.0 > root[-1]):
            return None
        low, high = self._w[bracket.low], self._w[bracket.high]
        middle = 0.5 * (low + high)
        nearest = np.argsort(np.abs(w - middle), kind="stable")
        full, less = (np.sort(nearest[: min(_NODES, len(w)) - drop]) for drop in (0, 1))
        ends = np.isin([low, high], w[less]).all()
        if not ends:
            return None
        one, other = (
            brentq(_polynomial, low, high, (w[use], root[use]), xtol=1e-300) for use in (full, less)
        )
        return one, abs(one - other)

    def _root_of_det(self, bracket: _Bracket) -> tuple[Real, Real]:
        """Return the samples between the poles next to a bracket's, and the determinant's m-th root there."""
        counts = self._count[bracket.low], self._count[bracket.high]
        use = np.flatnonzero(((self._count == counts[0]) | (self._count == counts[1])) & ~np.isnan(self._log))
        log, low = self._log[use], self._count[use] == counts[0]
        size = np.exp((log - log.max(initial=-np.inf)) / self._jump(bracket))
        return self._w[use], np.where(low, size, -size)

    def _crossing(self, bracket: _Bracket) -> float:
        """Return the pole in a closed bracket, on the straight line between its ends."""
        low, high = self._w[bracket.low], self._w[bracket.high]
        logs = self._log[[bracket.low, bracket.high]]
        if np.isnan(logs).any():
            return float(0.5 * (low + high))
        fall = np.exp((logs[0] - logs[1]) / self._jump(bracket))  # |det| at low over that at high
        return float(low + (high - low) * (fall / (1.0 + fall)))


def _polynomial(at: float, x: Real, y: Real) -> float:
    """Return the value of the polynomial through points (x, y), x ascending, by Neville's scheme."""
    for step in range(1, len(x)):
        y = ((at - x[:-step]) * y[1:] - (at - x[step:]) * y[:-1]) / (x[step:] - x[:-step])
    return float(y[0])
