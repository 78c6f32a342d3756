"""Steady synapses as part of the circuit: alone, together, and one silencing another.

A synapse is a conductance g in series with a driving force E (from rest): it draws the current
I = g·(E − V) at its own depolarisation V, so that what it does depends on all the others.  With R the
matrix of input and transfer resistances between the sites, V = R·I, and a solve over the sites alone
gives what a solve of the whole cell would (Rall 1964, in Neural Theory and Modeling, 73–97, for
conductances in the membrane; Koch, Poggio & Torre 1982, Phil Trans R Soc B 298:227–264, for R; both from
memory).

With W = √g on the diagonal, I = W·A⁻¹·W·E where A = 1 + W·R·W is symmetric and, R being positive
definite, has no eigenvalue below 1: any g may be 0, and any may be large.

=======  ==================  ==================================================
symbol   variable            meaning
=======  ==================  ==================================================
R        ``R_MOhm``          resistances between sites, MΩ, symmetric
r        ``to_soma_MOhm``    transfer resistances to the soma (or to any place)
g        ``g_nS``            conductances, nS, 0 or more
E        ``driving_mV``      driving forces from rest, mV: 0 or less is inhibition
=======  ==================  ==================================================
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.contour import by_rows
from morphotone.errors import AssumptionError
from morphotone.units import MICROSIEMENS_PER_NANOSIEMENS

Index = NDArray[np.int64]
Real = NDArray[np.float64]

MV_PER_MOHM_PA = 1e-3
_BLOCK = 32  # rows eliminated at a time, too few for several threads to share


@dataclass(frozen=True, eq=False)
class Alone:
    """Each synapse as if there were no other, shape (sites,).

    Attributes
    ----------
    local_mV, soma_mV : ndarray
        Depolarisation at its own site, g·R·E/(1 + g·R), and at the soma.
    current_pA : ndarray
        What it draws: g·E/(1 + g·R).
    """

    local_mV: Real
    soma_mV: Real
    current_pA: Real


@dataclass(frozen=True, eq=False)
class Together:
    """All synapses at once, shape (sites,) unless stated.

    Attributes
    ----------
    local_mV : ndarray
        Depolarisation at each site.
    local_sum_mV : ndarray
        What the synapses, each alone, would add up to there.
    soma_mV, soma_sum_mV : float
        The same two at the soma.
    current_pA : ndarray
        What each draws.
    contribution_mV : ndarray
        How much less the soma would be depolarised if this synapse alone were missing.
    alone : Alone
        Each without the others.
    """

    local_mV: Real
    local_sum_mV: Real
    soma_mV: float
    soma_sum_mV: float
    current_pA: Real
    contribution_mV: Real
    alone: Alone

    @property
    def soma_ratio(self) -> float:
        """Depolarisation of the soma over the sum of each alone, below 1 if sublinear; NaN if that is 0."""
        return self.soma_mV / self.soma_sum_mV if self.soma_sum_mV else float("nan")

    @property
    def local_ratio(self) -> Real:
        """The same at each site, shape (sites,); NaN where the sum is 0."""
        return _ratio(self.local_mV, self.local_sum_mV)

    @property
    def current_lost(self) -> Real:
        """Share of its current alone that each synapse loses to the others; NaN where it has none."""
        return 1.0 - _ratio(self.current_pA, self.alone.current_pA)

    @property
    def soma_lost_mV(self) -> Real:
        """What each synapse does at the soma alone, less what it contributes among the others."""
        return self.alone.soma_mV - self.contribution_mV


@dataclass(frozen=True, eq=False)
class Veto:
    """One inhibitory conductance against one excitatory at a time, shape (inhibitory, excitatory).

    Attributes
    ----------
    vetoed : ndarray
        Share of the excitatory synapse's depolarisation of the soma that is missing when the inhibitory one
        is open too, 1 − V(e, i)/V(e) = 1 − 1/F with the F of Koch, Poggio & Torre 1983 (Proc Natl Acad Sci
        USA 80:2799–2802); above 1 where the soma ends up hyperpolarised.
    shunted : ndarray
        The same with the inhibition's driving force taken as 0, so that it shunts only: between 0 and 1.
        For a weak excitation it is at most g·R/(1 + g·R) of the inhibition, and that on its path to the soma.
    inhibitory, excitatory : ndarray of int64
        Which of the synapses given are the rows and the columns.
    """

    vetoed: Real
    shunted: Real
    inhibitory: Index
    excitatory: Index


def alone(R_MOhm: Real, to_soma_MOhm: Real, g_nS: Real, driving_mV: Real) -> Alone:
    """Return what each synapse does without the others.

    Parameters
    ----------
    R_MOhm : ndarray, shape (sites, sites), or (sites,) for its diagonal
        Resistances between the sites, as `morphotone.cable.pairs.coupling` gives them at 0 Hz.
    to_soma_MOhm : ndarray, shape (sites,)
        Transfer resistances between the sites and the soma.
    g_nS, driving_mV : ndarray, shape (sites,)
        Conductances and driving forces from rest.

    Raises
    ------
    AssumptionError
        When a conductance is negative or no number, or a driving force is no number.
    """
    check(g_nS, driving_mV)
    R = np.diagonal(R_MOhm) if R_MOhm.ndim == 2 else R_MOhm
    current = g_nS * driving_mV / (1.0 + MICROSIEMENS_PER_NANOSIEMENS * g_nS * R)
    return Alone(MV_PER_MOHM_PA * R * current, MV_PER_MOHM_PA * to_soma_MOhm * current, current)


def steady(R_MOhm: Real, to_soma_MOhm: Real, g_nS: Real, driving_mV: Real) -> Together:
    """Return the steady state with all conductances in the circuit at once.

    Parameters
    ----------
    R_MOhm : ndarray, shape (sites, sites)
        Resistances between the sites; sites may share a node.
    to_soma_MOhm, g_nS, driving_mV
        As for `alone`.

    Raises
    ------
    AssumptionError
        As for `alone`.

    Notes
    -----
    Leaving synapse i out changes the currents of the others by −M_ji·I_i/M_ii with M = W·A⁻¹·W (the inverse
    of a matrix without one row and column), so that its contribution is (M·r)_i·I_i/M_ii: one inverse for
    all.  2,000 synapses take some seconds.
    """
    single = alone(R_MOhm, to_soma_MOhm, g_nS, driving_mV)
    W = np.sqrt(MICROSIEMENS_PER_NANOSIEMENS * g_nS)
    inverse = _inverse(np.eye(len(W)) + W[:, None] * R_MOhm * W)
    drawn, weight = by_rows(inverse, W[:, None] * np.stack((driving_mV, to_soma_MOhm), axis=1)).T
    current = W * drawn / MV_PER_MOHM_PA
    contribution = weight * drawn / np.diagonal(inverse)
    at_sites = MV_PER_MOHM_PA * by_rows(R_MOhm, np.stack((current, single.current_pA), axis=1)).T
    return Together(
        local_mV=at_sites[0],
        local_sum_mV=at_sites[1],
        soma_mV=float((MV_PER_MOHM_PA * to_soma_MOhm * current).sum()),
        soma_sum_mV=float(single.soma_mV.sum()),
        current_pA=current,
        contribution_mV=contribution,
        alone=single,
    )


def veto(R_MOhm: Real, to_soma_MOhm: Real, g_nS: Real, driving_mV: Real) -> Veto:
    """Return which inhibitory sites (driving force 0 or less) silence which excitatory ones, pair by pair.

    Parameters
    ----------
    R_MOhm, to_soma_MOhm, g_nS, driving_mV
        As for `steady`.

    Raises
    ------
    AssumptionError
        As for `alone`.

    Notes
    -----
    Two equations by hand: with a = 1 + g_e·R_ee, b = 1 + g_i·R_ii and D = a·b − g_e·g_i·R_ei², the currents
    are I_e = g_e·(b·E_e − g_i·R_ei·E_i)/D and I_i = g_i·(a·E_i − g_e·R_ei·E_e)/D.  An excitation of 0 nS has
    nothing that could be vetoed: NaN.
    """
    check(g_nS, driving_mV)
    inhibitory, e = np.flatnonzero(driving_mV <= 0.0), np.flatnonzero(driving_mV > 0.0)
    i = inhibitory[:, None]
    g = MICROSIEMENS_PER_NANOSIEMENS * g_nS
    r, R, a, b = to_soma_MOhm, R_MOhm[i, e], (1.0 + g * np.diagonal(R_MOhm))[e], 1.0 + g[i] * R_MOhm[i, i]
    D = a * b - g[e] * g[i] * R**2
    before = g[e] * driving_mV[e] * r[e]  # at the soma, times a
    shunted = a * (b * r[e] - g[i] * R * r[i]) * g[e] * driving_mV[e] / D
    pulled = a * (a * r[i] - g[e] * R * r[e]) * g[i] * driving_mV[i] / D
    return Veto(1.0 - _ratio(shunted + pulled, before), 1.0 - _ratio(shunted, before), inhibitory, e)


def _inverse(A: Real) -> Real:
    """Return the inverse of a symmetric matrix whose eigenvalues are 1 or more.

    Gauss and Jordan's elimination in place, some rows at a time, none of which needs a pivot: unlike the
    library's it gives the same bits for any number of threads.
    """
    inverse = A.copy()
    for start in range(0, len(A), _BLOCK):
        rows = slice(start, start + _BLOCK)
        pivot = np.asarray(np.linalg.inv(inverse[rows, rows]), np.float64)
        column, row = by_rows(inverse[:, rows], pivot), by_rows(pivot, inverse[rows])
        inverse -= by_rows(column, inverse[rows])
        inverse[:, rows], inverse[rows] = -column, row
        inverse[rows, rows] = pivot
    return inverse


def check(g_nS: Real, driving_mV: Real) -> None:
    """Refuse conductances and driving forces that are none."""
    for value in g_nS[~((g_nS >= 0.0) & np.isfinite(g_nS))].tolist():
        raise AssumptionError(f"conductance {value!r} nS, expected a number of 0 nS or more")
    for value in driving_mV[~np.isfinite(driving_mV)].tolist():
        raise AssumptionError(
            f"driving force {value!r} mV, expected a number: the reversal potential less the resting one"
        )


def _ratio(part: Real, whole: Real) -> Real:
    """Return part/whole, NaN where the whole is 0."""
    ratio: Real = np.divide(part, whole, out=np.full(np.shape(part), np.nan), where=whole != 0.0)
    return ratio
