"""How sites are coupled: transfer impedance, attenuation, delay between all pairs, without a solve per pair.

Two sites i and j of a tree meet at their common node c, the last that both paths from the soma pass.  Seen
from c either site is away from the soma, and what reaches it from c does not depend on where c's potential
comes from.  Hence, with ln A(c→i) the sum along the path of the logarithms that the two sweeps give,

    ln Z_ij = ln Z_cc − ln A(c→i) − ln A(c→j)        the same for Z_ji, to the last bit
    ln V_i/V_j = ln A(i→c) + ln A(c→j)               for current at i, A(i→c) toward the soma

(reciprocity and the product rule along the path: Koch, Poggio & Torre 1982, Phil Trans R Soc B 298:227–264,
K_ij = K_ic·K_cj/K_cc; log-attenuations add up: Zador, Agmon-Snir & Segev 1995, J Neurosci 15:1669–1682).

Common nodes come from one walk through the tree.  Let nodes be counted as a depth-first walk enters them:
of the nodes entered after i and up to j, one is the child of c that leads to j, and none has a parent entered
before c.  So c is the least number of those parents: a minimum over a stretch, and minima over neighbouring
stretches give all pairs (Bender & Farach-Colton 2000, LATIN, LNCS 1776:88–94, for range minima; from memory).
"""

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.frustum import Values
from morphotone.cable.spectrum import forest_of, slowest_ms, spectra
from morphotone.cable.tree import Cable
from morphotone.units import MS_PER_S

Index = NDArray[np.int64]
Real = NDArray[np.float64]

_STEP = 1e-10  # of the complex step, times the slowest membrane time constant: see delays.py


@dataclass(frozen=True, eq=False)
class Coupling:
    """How current at some sites is felt at others, at one frequency.

    Attributes
    ----------
    nodes, seen : ndarray of int64, shape (sites,) and (others,)
        Nodes of the cable: where the current is, and where the potential is looked at.
    hz : float
        Frequency, Hz.
    common : ndarray of int64, shape (sites, others)
        Where the paths from the soma to the two part; a site itself where it lies on the other's path.
    Z : ndarray, shape (sites, others)
        Transfer impedance, MΩ; complex128 unless ``hz`` is 0.
    log_attenuation : ndarray, shape (sites, others)
        ln|V_site/V_other| for current at the site; 0 or more at 0 Hz.
    """

    nodes: Index
    seen: Index
    hz: float
    common: Index
    Z: Values
    log_attenuation: Real

    @property
    def attenuation(self) -> Real:
        """|V_site/V_other| for current at the site, shape (sites, others)."""
        return np.exp(self.log_attenuation)

    @property
    def on_path(self) -> NDArray[np.bool_]:
        """Whether the site lies on the path from the other to the soma, shape (sites, others)."""
        inside: NDArray[np.bool_] = self.common == self.nodes[:, None]
        return inside


@dataclass(frozen=True, eq=False)
class PairDelays:
    """Delays between sites (Agmon-Snir & Segev 1993, J Neurophysiol 70:2066–2085), ms.

    Attributes
    ----------
    total_ms : ndarray, shape (sites, others)
        Centroid of the potential at the other behind that of the current at the site: −d ln Z_ij/ds.
    propagation_ms : ndarray, shape (sites, others)
        Behind that of the potential at the site: the total delay less the site's local delay.
    """

    total_ms: Real
    propagation_ms: Real


def coupling(
    cable: Cable, assumptions: Assumptions, nodes: Index, hz: float = 0.0, seen: Index | None = None
) -> Coupling:
    """Return how sites of one cell are coupled.

    Parameters
    ----------
    cable : Cable
        As `morphotone.cable.tree.build` makes it under these assumptions.
    assumptions : Assumptions
        Passive constants and shunt; their own frequencies are not used.
    nodes : ndarray of int64, shape (sites,)
        Nodes with current; equal ones may repeat, and 0 is the soma.
    hz : float, optional
        Frequency, Hz.
    seen : ndarray of int64, shape (others,), optional
        Nodes looked at; the same unless given.

    Notes
    -----
    One solve of one case, then about 50 ns a pair: 2,000 sites of 100,000 samples take below a second.
    """
    looked = nodes if seen is None else seen
    common = common_nodes(cable.parent, nodes, looked)
    along = _along(cable, assumptions, 2j * np.pi * hz if hz else 0.0)
    outward_i, outward_j = _outward(along, common, nodes, looked)
    Z = along.Z_in[common] * np.exp(-(outward_i + outward_j))
    log = (_inward(along, common, nodes) + outward_j).real
    return Coupling(nodes, looked, hz, common, Z, log)


def pair_delays(
    cable: Cable, assumptions: Assumptions, nodes: Index, seen: Index | None = None
) -> PairDelays:
    """Return the delays between sites of one cell; parameters as for `coupling`.

    Derivatives by a complex step, as in `morphotone.cable.delays`; propagation is a sum of positive terms.
    """
    looked = nodes if seen is None else seen
    common = common_nodes(cable.parent, nodes, looked)
    step = _STEP / slowest_ms(assumptions)  # in 1/ms
    along = _along(cable, assumptions, 1j * MS_PER_S * step)
    outward_i, outward_j = _outward(along, common, nodes, looked)
    total = ((outward_i + outward_j).imag - np.angle(along.Z_in)[common]) / step
    return PairDelays(total, (_inward(along, common, nodes) + outward_j).imag / step)


def common_nodes(parent: Index, nodes: Index, seen: Index) -> Index:
    """Return the node at which the paths from the root to two nodes part, shape (nodes, seen).

    Parameters
    ----------
    parent : ndarray of int64
        Parent of each node of a tree, −1 at node 0.
    nodes, seen : ndarray of int64
        Any nodes.

    Notes
    -----
    Linear in the tree's nodes and in the pairs.
    """
    entered = _entered(parent)
    walk = np.empty_like(entered)
    walk[entered] = np.arange(len(entered))
    at, which = np.unique(entered[np.append(nodes, seen)], return_inverse=True)
    above = entered[parent[walk[: at[-1] + 1]]] if len(at) else at
    lowest = np.minimum.reduceat(above, at[:-1] + 1) if len(at) > 1 else at[:0]
    rows, row = np.unique(which[: len(nodes)], return_inverse=True)
    meets = np.empty((len(rows), len(at)), np.int64)
    for out, k in zip(meets, rows.tolist(), strict=True):
        out[:k] = np.minimum.accumulate(lowest[:k][::-1])[::-1]
        out[k] = at[k]
        out[k + 1 :] = np.minimum.accumulate(lowest[k:])
    return walk[meets[row[:, None], which[len(nodes) :]]]


def _entered(parent: Index) -> Index:
    """Return when a depth-first walk enters each node of a tree.

    A loop over the nodes: the library's walk goes through a node's children anew for each of them.
    """
    above = parent.tolist()
    size = [1] * len(above)  # of the tree that hangs on each node
    for node in range(len(above) - 1, 0, -1):
        size[above[node]] += size[node]
    entered, free = [0] * len(above), [1] * len(above)
    for node in range(1, len(above)):
        entered[node] = free[above[node]]
        free[above[node]] += size[node]
        free[node] = entered[node] + 1
    return np.array(entered, np.int64)


class _Along(NamedTuple):
    """Impedance and log-attenuations by node at one complex frequency (`morphotone.cable.solved`)."""

    Z_in: NDArray[Any]
    log_attenuation_to_soma: NDArray[Any]
    log_attenuation_from_soma: NDArray[Any]


def _along(cable: Cable, assumptions: Assumptions, s: complex) -> _Along:
    forest = forest_of([cable], assumptions)
    (fields,) = spectra(forest, [s], forest.nodes, _Along._fields)
    return _Along(*(values[:, 0] for values in fields))


def _outward(along: _Along, common: Index, nodes: Index, seen: Index) -> tuple[NDArray[Any], NDArray[Any]]:
    """Return ln A from the common node out to the one site and to the other, shape (sites, others)."""
    start = along.log_attenuation_from_soma[common]
    ends = along.log_attenuation_from_soma[nodes][:, None], along.log_attenuation_from_soma[seen]
    return ends[0] - start, ends[1] - start


def _inward(along: _Along, common: Index, nodes: Index) -> NDArray[Any]:
    """Return ln A from the site in to the common node, shape (sites, others)."""
    log = along.log_attenuation_to_soma
    inward: NDArray[Any] = log[nodes][:, None] - log[common]
    return inward
