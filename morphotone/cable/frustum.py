"""One frustum, exactly: the π of a tapering piece of passive cable, with no mesh to choose.

Symbols
-------
=========  =============================  ==============================================
symbol     variable                       meaning
=========  =============================  ==============================================
R_i        ``R_i``                        axial (cytoplasmic) resistivity, ohm cm
g          ``g``                          membrane admittance density, S/cm2
h          ``length``                     length along the axis, µm
R, r       ``thick``, ``thin``            the radii of the two ends, µm
ρ, δ       ``ratio``, ``taper``           r/R and 1 − r/R
σ          ``slant``                      sqrt(1 + r'²), membrane per unit of axis
Θ²         ``theta2``                     2·R_i·g·σ·h²/R; Θ = h/λ for a cylinder
A          ``conductance``                π·R²/(R_i·h), the axial conductance at radius R
=========  =============================  ==============================================

With r(x) linear, V of the cable obeys (r² V')' = 2 R_i g σ r V (Rall 1959, Exp Neurol 1:491–527;
the tapering case is the conical fin of Gardner 1945, Trans ASME 67:621).  Since (r² V')' = r (r V)'',
the product W = (1 − δu)·V, u = x/h counted from the thick end, obeys

    (1 − δu) W'' = Θ² W,    W = Σ w_k u^k,    w_{k+2} = Θ² w_k/((k+1)(k+2)) + δ k/(k+2)·w_{k+1}.

Every coefficient is a sum of positive terms at 0 Hz, so nothing cancels, however short the piece and
however slight the taper: one form serves both "nearly a cylinder" and "strongly tapered", and there is
no seam between a Bessel form and a safe form.  The series converges like δ^k; a piece that is long
(Θ > 1) or halves its radius is cut into pieces of equal radius ratio, whose πs are joined exactly.
A true cylinder has its closed form.  Short frusta of slight taper, nearly all there are, take the same
solution as a series of the π itself (`morphotone.cable.short`).  The Bessel functions I1, K1 of THEORY are
what the sum is equal to; the tests compare with them at 50 digits.
"""

from collections.abc import Iterator
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.short import OTHER, class_of, coefficients, factors
from morphotone.units import MICROSIEMENS_PER_S_CM2_UM2, MICROSIEMENS_PER_UM_OHM_CM, PER_UM_PER_CM

Real = NDArray[np.float64]
Values = NDArray[Any]  # float64 at 0 Hz, complex128 at a frequency
Rows = slice | NDArray[np.int64]


class Pi(NamedTuple):
    """A two-port as one axial admittance and a shunt at each end, µS, each of shape (n, cases)."""

    axial: Values
    start: Values
    end: Values


class Shape(NamedTuple):
    """How frusta taper, both (n, cases): ρ = r/R and δ = 1 − ρ, each exact where the other rounds."""

    ratio: Real
    taper: Real

    def rows(self, which: "Rows") -> "Shape":
        """Return the chosen rows."""
        return Shape(self.ratio[which], self.taper[which])

    def falls(self) -> Real:
        """Return ln(1/ρ)."""
        return -np.where(self.ratio < 0.5, np.log(self.ratio), np.log1p(-self.taper))


# A row's series has as many terms as the corner of its class needs for 1e-17 of the sums (a test finds the
# numbers again): the class is the first bound of taper and the first bound of |Θ²| that the row stays below.
# It depends on that row alone, and so does the result.
_TAPERS = (0.1, 0.2, 0.35, 0.5)
_THETAS2 = (1e-2, 1.0)
_TERMS = (15, 21, 20, 25, 29, 35, 43, 50)  # taper by taper
_WIDEST_TAPER, _LARGEST_THETA = _TAPERS[-1], _THETAS2[-1] ** 0.5
_ROWS_AT_ONCE = 4096  # as many as stay in the processor's nearest cache
_MOST_PIECES = 4096  # beyond, exp(-X) is zero in double precision and the two ends do not see each other


def pi_of_frusta(r_start: Values, r_end: Values, length: Values, R_i: Values, g: Values) -> Pi:
    """Return the exact π of each frustum in each case.

    Parameters
    ----------
    r_start, r_end : ndarray, shape (n, 1) or (n, cases)
        Radii of the two ends, µm, positive.
    length : ndarray, shape (n, 1) or (n, cases)
        Length along the axis, µm, positive.
    R_i : ndarray, shape (1 or n, 1 or cases)
        Axial resistivity, ohm cm.
    g : ndarray, shape (1 or n, 1 or cases)
        Membrane admittance density, S/cm2, 1/R_m + s·C_m with the spine factor in it; real or complex.

    Returns
    -------
    Pi
        Axial admittance and the two shunts, µS, each of shape (n, cases).

    Notes
    -----
    Relative error below 1e-13 against the Bessel form at 50 digits for L from 1e-6 to 5, radius ratios
    to 20, 0 Hz to 10 kHz (tests/cable/test_against_definitions.py).
    """
    cases = np.broadcast_shapes(r_start.shape, R_i.shape, g.shape)[1]
    R_i, g = (np.broadcast_to(values, (len(values), cases)) for values in (R_i, g))
    if r_start.shape[1] > 1:  # a geometry for each case
        each = [
            pi_of_frusta(*(v[:, c : c + 1] for v in (r_start, r_end, length, R_i, g))) for c in range(cases)
        ]
        return Pi(*(np.concatenate(parts, axis=1) for parts in zip(*each, strict=True)))
    out = Pi(*(np.empty((len(length), cases), g.dtype) for _ in range(3)))
    geometry = _geometry(r_start[:, 0], r_end[:, 0], length[:, 0])
    kind = class_of(geometry.stretch * np.abs(R_i * g).max(axis=1), np.abs(geometry.taper))
    for which in np.flatnonzero(np.bincount(kind - OTHER)) + OTHER:
        mask = kind == which
        if which != OTHER:
            for block in _blocks(mask):
                _put_short(out, block, geometry, int(which), R_i, g)
            continue
        rows = _rows(mask)
        constants = (values if len(values) == 1 else values[rows] for values in (R_i, g))
        _put(out, rows, _pi_of_others(r_start[rows], r_end[rows], length[rows], *constants))
    return out


class _Geometry(NamedTuple):
    """What the shape of frusta gives to their series in Q (`morphotone.cable.short`), shape (n,)."""

    taper: Real  # ε
    stretch: Real  # Q over R_i·g
    conductance: Real  # what 1 + Σ a_j·Q^j is multiplied with, times R_i
    at_start: Real  # what 1 + Σ b_j·Q^j is multiplied with, over g
    at_end: Real


def _geometry(r_start: Real, r_end: Real, length: Real) -> _Geometry:
    both, step = r_start + r_end, r_end - r_start
    slant = np.sqrt(length * length + step * step)  # h·σ
    area = (MICROSIEMENS_PER_S_CM2_UM2 * np.pi) * slant
    return _Geometry(
        step / both,
        (4.0 * PER_UM_PER_CM) * slant * length / both,
        (MICROSIEMENS_PER_UM_OHM_CM * np.pi) * r_start * r_end / length,
        area * r_start,
        area * r_end,
    )


def _put_short(out: Pi, rows: Rows, geometry: _Geometry, kind: int, R_i: Values, g: Values) -> None:
    """Put the πs of short frusta of one class into their rows (`morphotone.cable.short`)."""
    here = _Geometry(*(values[rows] for values in geometry))
    powers = coefficients(here.taper, kind)
    for case in range(out.axial.shape[1]):
        resistivity, density = (
            values[0, case] if len(values) == 1 else values[rows, case] for values in (R_i, g)
        )
        axial, start, end = factors(powers, here.stretch * (resistivity * density))
        # [:, case][rows] writes twice as fast as [rows, case]. Products are not taken in place: of two
        # complex arrays, numpy then multiplies a single row to other last bits than the same row among
        # others.
        out.axial[:, case][rows] = here.conductance / resistivity * axial
        out.start[:, case][rows] = here.at_start * density * start
        out.end[:, case][rows] = here.at_end * density * end


def _pi_of_others(r_start: Real, r_end: Real, length: Real, R_i: Values, g: Values) -> Pi:
    """Return the πs of frusta of any length and taper."""
    thick = np.maximum(r_start, r_end)
    taper = np.abs(r_start - r_end) / thick
    slant = np.hypot(1.0, (r_start - r_end) / length)
    theta2 = 2.0 * PER_UM_PER_CM * R_i * g * slant * length**2 / thick
    conductance = MICROSIEMENS_PER_UM_OHM_CM * np.pi * thick**2 / (R_i * length) + np.zeros(theta2.shape)
    shape = Shape(
        *(np.broadcast_to(part, theta2.shape) for part in (np.minimum(r_start, r_end) / thick, taper))
    )

    out = Pi(*(np.empty(theta2.shape, theta2.dtype) for _ in range(3)))
    kind = _kind_of_rows(shape, theta2)
    for which in np.flatnonzero(np.bincount(kind)):
        rows = _rows(kind == which)
        _put(out, rows, _pi_of_kind(int(which), conductance[rows], shape.rows(rows), theta2[rows]))
    backwards = r_end > r_start
    return Pi(
        out.axial,
        np.where(backwards, out.end, out.start),
        np.where(backwards, out.start, out.end),
    )


def electrotonic_lengths(r_start: Real, r_end: Real, length: Real, R_i: Real, leak: Real) -> Real:
    """Return the L of each frustum at 0 Hz, exact for a linear taper; 0 for no length.

    L = 2h/(√r1 + √r2)·sqrt(2·R_i·g·σ), the integral of dx/λ with λ² = r/(2 R_i g σ).

    Parameters
    ----------
    r_start, r_end, length : ndarray
        Radii of the two ends and axial length, µm.
    R_i, leak : ndarray
        Axial resistivity, ohm cm; F/R_m, S/cm2; broadcast against the others.
    """
    step = r_end - r_start
    slant = np.sqrt(length * length + step * step)  # h·σ
    roots = np.sqrt(r_start) + np.sqrt(r_end)
    lengths: Real = 2.0 / roots * np.sqrt(2.0 * PER_UM_PER_CM * R_i * leak * slant * length)
    return lengths


def join(first: Pi, second: Pi) -> Pi:
    """Return the π of two pieces end to end (star–mesh transformation of the shared point).

    Only sums, products and quotients of positive terms at 0 Hz: no digits are lost.
    """
    middle = first.end + second.start
    pivot = first.axial + second.axial + middle
    return Pi(
        first.axial * (second.axial / pivot),
        first.start + middle * (first.axial / pivot),
        second.end + middle * (second.axial / pivot),
    )


_CYLINDER, _CUT, _ENDLESS, _FIRST_CLASS = 0, 1, 2, 3


def _kind_of_rows(shape: Shape, theta2: Values) -> NDArray[np.int64]:
    """Return for each row the class of its series, or that it is a cylinder, to be cut, or endless."""
    size, taper = np.abs(theta2).max(axis=1), shape.taper.max(axis=1)
    classes = np.searchsorted(_TAPERS, taper) * len(_THETAS2) + np.searchsorted(_THETAS2, size)
    kind: NDArray[np.int64] = _FIRST_CLASS + classes
    kind[(size > _THETAS2[-1]) | (taper > _WIDEST_TAPER)] = _CUT
    straight = taper == 0.0
    if not np.iscomplexobj(theta2):  # with g < 0 V oscillates: Θ is not real, and the series takes Θ²
        straight &= theta2.min(axis=1) > 0.0
    kind[straight] = _CYLINDER
    cut = np.flatnonzero(kind == _CUT)
    kind[cut[_pieces(shape.rows(cut), theta2[cut]) > _MOST_PIECES]] = _ENDLESS
    return kind


def _pi_of_kind(kind: int, conductance: Values, shape: Shape, theta2: Values) -> Pi:
    """Return the π, thick end first, of rows that are all of one kind."""
    if kind == _CYLINDER:
        return _cylinder(conductance, np.sqrt(theta2))
    if kind == _CUT:
        return _cut_and_joined(conductance, shape, theta2)
    if kind == _ENDLESS:
        return _endless(conductance, shape, np.sqrt(theta2))
    return _series(conductance, shape.taper, theta2, _TERMS[kind - _FIRST_CLASS])


def _cylinder(conductance: Values, theta: Values) -> Pi:
    """Return A·Θ/sinh Θ and A·Θ·tanh(Θ/2), without overflow for long and without loss for short pieces."""
    fall = -np.expm1(-theta)  # 1 - exp(-Θ)
    shunt = conductance * theta * fall / (2.0 - fall)
    return Pi(conductance * theta * 2.0 * np.exp(-theta) / (fall * (2.0 - fall)), shunt, shunt.copy())


def _series(conductance: Values, taper: Values, theta2: Values, terms: int) -> Pi:
    """Return the π, thick end first, from the power series of W (module docstring).

    With C, S the solutions that start as (V, V') = (1, 0) and (0, 1), at the thin end u = 1

        axial = A/S,   thick shunt = axial·(C − 1),   thin shunt = axial·(ρ²S' − 1),

    where ρ²S' = (1 + ρ²C'S)/C, since ρ²(CS' − C'S) keeps its value along the cable.  C starts with
    W = 1 − δu + Θ²u²/2 + 0·u³, S with W = u + 0·u² + Θ²u³/6; what follows is summed, of positive terms.
    """
    pi = Pi(*(np.empty(theta2.shape, theta2.dtype) for _ in range(3)))
    for first in range(0, len(theta2), _ROWS_AT_ONCE):
        rows = slice(first, first + _ROWS_AT_ONCE)
        rise, slope, delay = _sums(taper[rows], theta2[rows], terms)
        rho = 1.0 - taper[rows]
        axial = conductance[rows] * rho / (1.0 + delay)
        thick = rise / rho  # C - 1
        thin = ((slope + taper[rows] * thick) * (1.0 + delay) - thick) / (1.0 + thick)
        _put(pi, rows, Pi(axial, axial * thick, axial * thin))
    return pi


def _sums(taper: Values, theta2: Values, terms: int) -> tuple[Values, Values, Values]:
    """Return the sums of w_k and of k·w_k, k ≥ 2, for C, and of w_k, k ≥ 3, for S."""
    before = np.stack((theta2 / 2.0, np.zeros_like(theta2)))
    last = np.stack((np.zeros_like(theta2), theta2 / 6.0))
    total, slope = before + last, theta2.copy()
    for k in range(2, terms):
        before *= theta2
        before *= 1.0 / ((k + 1) * (k + 2))
        before += (k / (k + 2) * taper) * last
        total += before
        slope += (k + 2) * before[0]
        before, last = last, before
    return total[0], slope, total[1]


def _pieces(shape: Shape, theta2: Values) -> Real:
    """Return into how many pieces of equal radius ratio each row must be cut for the series.

    The thickest of m pieces has Θ·(1 − ρ^{1/m})/(1 − ρ) ≤ Θ·ln(1/ρ)/(m(1 − ρ)), ρ = r/R.
    """
    falls = shape.falls()
    stretch = np.divide(falls, shape.taper, out=np.ones_like(falls), where=shape.taper > 0)
    by_length = np.sqrt(np.abs(theta2)) * stretch / _LARGEST_THETA
    by_ratio = falls / -np.log1p(-_WIDEST_TAPER)
    pieces: Real = np.ceil(np.maximum(by_length, by_ratio).max(axis=1, initial=1.0))
    return pieces


def _cut_and_joined(conductance: Values, shape: Shape, theta2: Values) -> Pi:
    """Return the π of frusta cut into pieces of equal radius ratio, joined from the thick end on."""
    pieces = _pieces(shape, theta2)
    order = np.argsort(-pieces, kind="stable")
    pieces = pieces[order, None]
    conductance, shape, theta2 = conductance[order], shape.rows(order), theta2[order]
    falls = shape.falls() / pieces
    small = -np.expm1(-falls)
    tapers = shape.taper > 0
    share = np.where(tapers, small / np.where(tapers, shape.taper, 1.0), 1.0 / pieces)
    whole = Pi(*(np.empty_like(theta2) for _ in range(3)))
    for j in range(int(pieces[0, 0])):
        here = slice(0, int(np.searchsorted(-pieces[:, 0], -j, side="left")))
        scale = np.exp(-j * falls[here])
        piece = _series(
            conductance[here] * scale / share[here],
            small[here],
            theta2[here] * scale * share[here] ** 2,
            _TERMS[-1],
        )
        _put(whole, here, piece if j == 0 else join(Pi(*(part[here] for part in whole)), piece))
    back = np.argsort(order, kind="stable")
    return Pi(*(part[back] for part in whole))


def _endless(conductance: Values, shape: Shape, theta: Values) -> Pi:
    """Return the π of frusta so long that the ends do not see each other.

    The ends look into endless tapers: I2(z)/I1(z) at the thick, K2(z)/K1(z) at the thin end, with
    z = 2Θ·sqrt(r/R)/δ and the large-z expansions of the ratios (Abramowitz & Stegun 9.7.1–2).
    """
    root = np.sqrt(shape.ratio)

    def quotient(inverse: Values) -> Values:
        return 1.0 + inverse * (1.5 + inverse * (0.375 - inverse * 0.375))

    inverse = shape.taper / (2.0 * theta)
    thick = conductance * theta * quotient(-inverse)
    thin = conductance * theta * root**3 * quotient(inverse / root)
    return Pi(np.zeros_like(theta), thick, thin)


def _rows(mask: NDArray[np.bool_]) -> Rows:
    """Return the chosen rows as a slice when they are all of them, which spares copies."""
    return slice(None) if mask.all() else np.flatnonzero(mask)


def _blocks(mask: NDArray[np.bool_]) -> Iterator[Rows]:
    """Yield the chosen rows, as many at a time as stay in the processor's nearest cache."""
    rows = _rows(mask)
    for first in range(0, int(np.count_nonzero(mask)), _ROWS_AT_ONCE):
        block = slice(first, first + _ROWS_AT_ONCE)
        yield block if isinstance(rows, slice) else rows[block]


def _put(out: Pi, rows: Rows, values: Pi) -> None:
    for target, value in zip(out, values, strict=True):
        target[rows] = value
