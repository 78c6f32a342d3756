"""From traced samples to cable: electrical nodes joined by frusta, one cell or a forest of many."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.traced import Traced, trace
from morphotone.reading.reconstruction import Reconstruction, parents_first

Index = NDArray[np.int64]
Real = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Cable:
    """One cell as frusta between electrical nodes; node 0 is the soma, or the root sample.

    Attributes
    ----------
    parent : ndarray of int64, shape (nodes,)
        Parent node, smaller than the node's own number; -1 at node 0.
    kind : ndarray of int64, shape (nodes,)
        Type code of the sample at the end of the frustum.
    r_start, r_end, length : ndarray, shape (nodes,)
        The frustum from the parent node to the node: radii and axial length, µm; 1, 1, 0 at node 0.
    sample : ndarray of int64, shape (nodes,)
        The sample at the node; the head of the soma, or the root sample, at node 0.
    node : ndarray of int64, shape (samples,)
        The node of each sample; -1 for samples that are not analysed.
    traced : Traced
        What the cable was built from.
    """

    parent: Index
    kind: Index
    r_start: Real
    r_end: Real
    length: Real
    sample: Index
    node: Index
    traced: Traced

    def areas(self) -> tuple[Real, Real]:
        """Return the membrane of each frustum in two parts, µm2, that stand for its start and its end.

        π·σ·h·r_start and π·σ·h·r_end with the slant factor σ: the first moments of the membrane about the
        two ends, measured in axial resistance, which are the shunts of a frustum far shorter than λ; their
        sum is the lateral area π(r1 + r2)·sqrt(h² + (r1 − r2)²).
        """
        step = self.r_end - self.r_start
        slant = np.pi * np.sqrt(self.length * self.length + step * step)  # ten times as fast as np.hypot
        slant[0] = 0.0
        return slant * self.r_start, slant * self.r_end


def build(rec: Reconstruction, assumptions: Assumptions) -> Cable:
    """Return the cable of one reconstruction under given assumptions.

    Parameters
    ----------
    rec : Reconstruction
        As read.
    assumptions : Assumptions
        Geometry, soma, axon, orphans and branch starts are used here; the membrane is not.

    Raises
    ------
    ReadingError
        As `morphotone.cable.traced.trace` does.

    Notes
    -----
    A stem is a cylinder of its sample's own radius from the soma's surface on; any other frustum runs
    from its parent sample; samples at no distance share a node.
    """
    traced = trace(rec, assumptions)
    r_start = _start_radius(traced, assumptions.branch_start)
    length = traced.length * traced.share
    node, sample = _nodes(traced, length)
    ends = sample[1:]
    parent = node[traced.parent[ends]]
    cut = (traced.share > 0) & (traced.share < 1)
    node[cut] = -1  # the cable ends before these samples
    grown = traced.share[ends] * (traced.radius[ends] - r_start[ends])
    return Cable(
        parent=np.append(-1, parent),
        kind=traced.kind[sample],
        r_start=np.append(1.0, r_start[ends]),
        r_end=np.append(1.0, r_start[ends] + grown),
        length=np.append(0.0, length[ends]),
        sample=sample,
        node=node,
        traced=traced,
    )


def _start_radius(traced: Traced, branch_start: str) -> Real:
    """Return the radius at which each sample's frustum starts, µm."""
    own = traced.stem
    if branch_start == "own radius":
        children = np.bincount(traced.parent[traced.parent >= 0], minlength=len(traced.parent))
        own = own | (children[traced.parent] > 1)
    return np.where(own, traced.radius, traced.radius[traced.parent])


def _nodes(traced: Traced, length: Real) -> tuple[Index, Index]:
    """Return the node of every sample, -1 where it is left out, and the sample at every node.

    A sample at no distance from its parent has its parent's node; the soma's samples have node 0.
    """
    parent = traced.parent
    rows = np.arange(len(parent))
    kept = traced.share > 0
    kept[traced.root] = True
    own = kept & (length > 0)
    shares_with = np.where(own, rows, parent)
    shares_with[traced.soma.members] = traced.root
    shares_with[traced.root] = traced.root
    shares_with[~kept] = traced.root
    while not np.array_equal(shares_with, shares_with[shares_with]):
        shares_with = shares_with[shares_with]
    order = rows if (parent < rows).all() else parents_first(parent)
    sample = np.append(traced.root, order[own[order]])
    number = np.zeros(len(parent), np.int64)
    number[sample] = np.arange(len(sample))
    return np.where(kept, number[shares_with], -1), sample
