"""A cell's branches: unbranched runs of cable between the soma, branch points and tips."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.electrotonus import Electrotonus
from morphotone.cable.forest import membrane_of
from morphotone.cable.frustum import electrotonic_lengths
from morphotone.questions.columns import Columns, case_suffixes
from morphotone.reading.reconstruction import Reconstruction, domain_name
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
    leads = np.where(heads, np.arange(len(parent)), parent)
    leads[0] = 0
    while not np.array_equal(leads, leads[leads]):  # doubles the stretch of cable seen each time
        leads = leads[leads]
    number = np.full(len(parent), -1)
    number[head] = np.arange(len(head))
    of_node = number[leads]
    ends = np.flatnonzero(starts[1:]) + 1
    end = np.empty_like(head)
    end[of_node[ends]] = ends
    above = of_node[parent[head]]
    order = [1] * len(head)
    for branch, up in enumerate(above.tolist()):
        if up >= 0:
            order[branch] = order[up] + 1
    return Branches(of_node, head, end, above, np.array(order, np.int64), daughters[end])


def branch_table(rec: Reconstruction, electrotonus: Electrotonus, branches: Branches) -> Columns:
    """Return the columns of ``branches.csv``, one row per branch; README explains them.

    Parameters
    ----------
    rec : Reconstruction
        For sample numbers and domains.
    electrotonus : Electrotonus
        By node, its first case at 0 Hz.
    branches : Branches
        Of the same nodes.

    Notes
    -----
    G∞ = (π/2)·d^(3/2)/sqrt(R_m·R_i), the input conductance of an endless cylinder, and the 3/2 power
    ratio at branch points: Rall 1959, Exp Neurol 1:491–527.
    """
    cable = electrotonus.cable
    membrane = membrane_of(cable.kind, electrotonus.cases[0].assumptions)
    R_i, leak = (np.broadcast_to(values, cable.length.shape) for values in membrane[:2])
    L = electrotonic_lengths(cable.r_start, cable.r_end, cable.length, R_i, leak)
    length = branches.total(cable.length)
    d_first, d_end = 2.0 * cable.r_end[branches.head], 2.0 * cable.r_end[branches.end]
    mean = branches.total(cable.length * (cable.r_start + cable.r_end)) / length
    total_L = branches.total(L)
    lambda_start, lambda_end = (
        np.sqrt(UM_PER_CM * radius / (2.0 * R_i * leak)) for radius in (cable.r_start, cable.r_end)
    )
    head, end = branches.head, branches.end
    columns: Columns = {
        "branch": np.arange(1, len(head) + 1),
        "parent_branch": branches.parent + 1,
        "order": branches.order,
        "domain": [domain_name(kind) for kind in cable.kind[end].tolist()],
        "sample_start": rec.number[cable.sample[cable.parent[head]]],
        "sample_end": rec.number[cable.sample[end]],
        "children": branches.children,
        "length_um": length,
        "diameter_first_um": d_first,
        "diameter_mean_um": mean,
        "diameter_end_um": d_end,
        "area_um2": branches.total(sum(cable.areas(), start=np.zeros(1))),
        "L": total_L,
        "lambda_um": length / total_L,
        "lambda_least_um": branches.least(np.minimum(lambda_start, lambda_end)),
        "lambda_greatest_um": -branches.least(-np.maximum(lambda_start, lambda_end)),
        "G_inf_start_nS": endless_conductance(d_first, R_i[head], leak[head]),
        "G_inf_end_nS": endless_conductance(d_end, R_i[end], leak[end]),
        "rall_ratio_end": rall_ratios(branches, d_first, d_end),
        "path_end_um": electrotonus.path_um[end, 0],
        "X_end": electrotonus.X[end, 0],
    }
    for case, suffix in enumerate(case_suffixes(electrotonus)):
        columns[f"R_in_end_MOhm{suffix}"] = np.abs(electrotonus.Z_in[end, case])
        columns[f"attenuation_to_soma_end{suffix}"] = np.exp(electrotonus.log_attenuation_to_soma[end, case])
        columns[f"attenuation_from_soma_end{suffix}"] = np.exp(
            electrotonus.log_attenuation_from_soma[end, case]
        )
    return columns


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
