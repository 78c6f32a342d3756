"""A cell's branches: unbranched runs of cable between the soma, branch points and tips."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.units import NANOSIEMENS_PER_MICROSIEMENS, UM_PER_CM

Index = NDArray[np.int64]
Real = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Branches:
    """How a cell's nodes form branches.

    Attributes
    ----------
    of_node : ndarray of int64, shape (nodes,)
        The branch on which each node lies, from 0; -1 at node 0. A branch point belongs to the branch
        that ends there.
    head, end : ndarray of int64, shape (branches,)
        First and last node of each branch.
    parent : ndarray of int64, shape (branches,)
        The branch that this one leaves, -1 for stems.
    order : ndarray of int64, shape (branches,)
        1 for stems, one more after every branch point.
    children : ndarray of int64, shape (branches,)
        Number of branches that leave the end; 0 at a tip.
    """

    of_node: Index
    head: Index
    end: Index
    parent: Index
    order: Index
    children: Index

    def total(self, per_node: Real) -> Real:
        """Return the sum of an amount per frustum over each branch."""
        total = np.bincount(self.of_node[1:], weights=per_node[1:], minlength=len(self.head))
        return total.astype(np.float64)

    def least(self, per_node: Real) -> Real:
        """Return the least of an amount per frustum over each branch."""
        least = np.full(len(self.head), np.inf)
        np.minimum.at(least, self.of_node[1:], per_node[1:])
        return least

    @property
    def tips(self) -> Index:
        """Branches that end at a tip."""
        return np.flatnonzero(self.children == 0)


def branches_of(parent: Index) -> Branches:
    """Return the branches of a tree of nodes.

    Parameters
    ----------
    parent : ndarray of int64, shape (nodes,)
        Parent of each node, smaller than its own number; -1 at node 0.
    """
    daughters = np.bincount(parent[1:], minlength=len(parent))
    starts = daughters != 1
    starts[0] = True
    heads = starts[parent]
    heads[0] = False
    head = np.flatnonzero(heads)
    # By stretches of nodes i, i + 1, … each the child of the one before, far fewer than the nodes.
    broken = heads.copy()
    broken[1:] |= parent[1:] != np.arange(len(parent) - 1)
    broken[0] = True
    stretch = np.cumsum(broken) - 1
    first = np.flatnonzero(broken)
    leads = np.where(heads[first], np.arange(len(first)), stretch[parent[first]])
    leads[0] = 0
    while not np.array_equal(further := leads[leads], leads):  # doubles the stretch of cable seen each time
        leads = further
    number = np.full(len(first), -1)
    number[heads[first]] = np.arange(len(head))
    of_node = number[leads].take(stretch)
    ends = np.flatnonzero(starts[1:]) + 1
    end = np.empty_like(head)
    end[of_node[ends]] = ends
    above = of_node[parent[head]]
    order = [1] * len(head)
    for branch, up in enumerate(above.tolist()):
        if up >= 0:
            order[branch] = order[up] + 1
    return Branches(of_node, head, end, above, np.array(order, np.int64), daughters[end])


def endless_conductance(diameter: Real, R_i: Real, leak: Real) -> Real:
    """Return G∞ of cylinders, nS, from diameters (µm), R_i (ohm cm) and F/R_m (S/cm2)."""
    um_to_1_5 = UM_PER_CM**-1.5
    siemens: Real = 0.5 * np.pi * um_to_1_5 * diameter**1.5 * np.sqrt(leak / R_i)
    return np.asarray(siemens * 1e6 * NANOSIEMENS_PER_MICROSIEMENS)


def rall_ratios(branches: Branches, d_first: Real, d_end: Real) -> Real:
    """Return Σ d^(3/2) of the children over the parent's d^(3/2) at each branch's far end; NaN at tips.

    A child's d is that of its first sample, whatever radius its cable starts from.
    """
    has_parent = branches.parent >= 0
    total = np.bincount(
        branches.parent[has_parent], weights=d_first[has_parent] ** 1.5, minlength=len(branches.parent)
    )
    return np.where(branches.children > 0, total / d_end**1.5, np.nan)
