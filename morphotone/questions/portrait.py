"""One cell as what a figure draws: lines in space, distances measured four ways, values to colour by.

Symbols: l axial length of a frustum, λ space constant, X electrotonic distance, V voltage, q = sqrt(1 + iωτ).
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.electrotonus import Electrotonus
from morphotone.cable.nearest import positions
from morphotone.errors import MorphotoneError, ReadingError
from morphotone.questions.cell import Cell
from morphotone.questions.columns import Columns, hz_suffix
from morphotone.questions.samples import sample_table
from morphotone.reading.reconstruction import domain_name

Index = NDArray[np.int64]
Real = NDArray[np.float64]

COLOUR = "log_attenuation_to_soma"
# The order of the domains in a tree laid out flat, from the top; every other code stands before the axon.
_FROM_THE_TOP = ("apical", "basal", "other", "axon")


class Distances(NamedTuple):
    """How far from the soma, in four measures; arrays of one shape.

    Attributes
    ----------
    path_um : ndarray
        Along the cable, µm.
    X : ndarray
        The same in space constants, each frustum in its own, at 0 Hz.
    to_soma, from_soma : ndarray
        Log attenuation: ln|V_site/V_soma| for current at the site, ln|V_soma/V_site| for current at the
        soma.
    """

    path_um: Real
    X: Real
    to_soma: Real
    from_soma: Real


class Run(NamedTuple):
    """Nodes of one branch and one domain in a row, as one line.

    Attributes
    ----------
    domain : str
        Its name as in the tables.
    nodes : ndarray of int64, shape (n,)
        The node it starts from and those along it, two at least.
    leads : bool
        Whether it is the first of its branch.
    """

    domain: str
    nodes: Index
    leads: bool


@dataclass(frozen=True, eq=False)
class Marks:
    """Sites of the cell; arrays by site, shape (sites,).

    Attributes
    ----------
    label : ndarray of object
        As in the file of sites.
    rank : ndarray of int64
        In the cell, 1 has the greatest attenuation toward the soma.
    position : ndarray, shape (sites, 3)
        On the axis, µm.
    distances : Distances
        Of the site itself.
    """

    label: NDArray[np.object_]
    rank: Index
    position: Real
    distances: Distances


@dataclass(frozen=True, eq=False)
class Portrait:
    """One cell, ready to be drawn; arrays are by node unless said otherwise.

    Attributes
    ----------
    cell : Cell
        As analysed.
    hz : float
        The frequency shown, one of the cell's cases.
    table : dict of str to sequence
        Its table by sample.
    column : str
        The column of that table that colours.
    ends : (ndarray, ndarray), shape (nodes, 3) each
        Where the frustum that ends at each node starts and ends, µm.
    values : ndarray, shape (nodes,)
        What colours it; NaN where the table has an empty cell.
    marks : Marks or None
        Its sites.
    """

    cell: Cell
    hz: float
    table: Columns
    column: str
    ends: tuple[Real, Real]
    values: Real
    marks: Marks | None = None

    @cached_property
    def distances(self) -> Distances:
        """How far each node is from the soma, shape (nodes,)."""
        return distances_of(self.cell.electrotonus, self.hz)

    @cached_property
    def runs(self) -> list[Run]:
        """The cable as lines, none across a branch point or from one domain to another."""
        return runs_of(self.cell)

    @cached_property
    def level(self) -> Real:
        """At which height each node stands in a tree laid out flat: tips at whole numbers from the top."""
        levels = levels_of(self.cell)
        return np.append(levels, _middle(levels[self.cell.branches.parent < 0]))[self.cell.branches.of_node]

    def transformed(self, measure: str) -> Real:
        """Return the morphoelectrotonic transform: where each node comes to lie, shape (nodes, 3).

        Parameters
        ----------
        measure : {"path_um", "X", "to_soma", "from_soma"}
            One of `Distances`; what a frustum's length is replaced by.
        """
        return transform(*self.ends, self.cell.cable.parent, getattr(self.distances, measure))

    @cached_property
    def endless(self) -> "Endless":
        """The endless cable like the thickest stem: a dendrite's if there is one."""
        branches, cable, membrane = self.cell.branches, self.cell.cable, self.cell.membrane
        heads = branches.head[branches.parent < 0]
        dendritic = heads[self.cell.dendritic[heads]]
        heads = dendritic if len(dendritic) else heads
        if not len(heads):
            return Endless(float("nan"), float("nan"))
        stem = heads[np.argmax(cable.r_start[heads])]
        tau = membrane.capacity[stem] / membrane.leak[stem]
        return Endless(
            float(self.cell.lambdas[1][stem]), float(np.sqrt(1.0 + 2j * np.pi * self.hz * tau).real)
        )


class Endless(NamedTuple):
    """A cylinder without end, along which V falls as exp(-q·x/λ), q = sqrt(1 + iωτ) (q = 1 at 0 Hz).

    Attributes
    ----------
    lambda_um : float
        λ, µm; NaN of a cell without cable.
    q : float
        The real part of q: how fast the voltage's magnitude falls per λ.
    """

    lambda_um: float
    q: float


def distances_of(known: Electrotonus, hz: float) -> Distances:
    """Return how far each node is from the soma, at one of the frequencies that are known."""
    case = int(np.flatnonzero(known.hz == hz)[0])
    return Distances(
        known.path_um[:, 0],
        known.X[:, 0],
        known.log_attenuation_to_soma[:, case],
        known.log_attenuation_from_soma[:, case],
    )


def directions(start: Real, end: Real) -> Real:
    """Return the unit vector from start to end of each frustum, shape (n, 3); 0 where both are one."""
    steps = end - start
    lengths = np.linalg.norm(steps, axis=1, keepdims=True)
    unit: Real = np.divide(steps, lengths, out=np.zeros_like(steps), where=lengths > 0)
    return unit


def transform(start: Real, end: Real, parent: Index, distance: Real) -> Real:
    """Return where nodes lie when every frustum keeps its direction and has another length.

    The morphoelectrotonic transform of Zador, Agmon-Snir & Segev (1995, J Neurosci 15:1669–1682) where the
    distance is a log attenuation; node 0, the soma, lies at 0.

    Parameters
    ----------
    start, end : ndarray, shape (nodes, 3)
        Where the frustum that ends at each node starts and ends.
    parent : ndarray of int64, shape (nodes,)
        Parent node, smaller than the node's own number; -1 at node 0.
    distance : ndarray, shape (nodes,)
        From the soma; a frustum's length becomes what it adds to its parent's.

    Returns
    -------
    ndarray, shape (nodes, 3)
        In the distance's unit.
    """
    place = directions(start, end) * (distance - distance[parent])[:, None]
    place[0] = 0.0
    above = np.maximum(parent, 0)
    while above.any():  # sums over ancestors by doubling the stretch seen
        place += place[above]
        above = above[above]
    return place


def runs_of(cell: Cell) -> list[Run]:
    """Return the cable as lines, none across a branch point or from one domain to another, by branch."""
    branches, cable = cell.branches, cell.cable
    order = np.argsort(branches.of_node[1:], kind="stable") + 1  # along each branch, one after the other
    if not len(order):
        return []
    branch, kind = branches.of_node[order], cable.kind[order]
    leads = np.append(True, branch[1:] != branch[:-1])
    cuts = np.flatnonzero(leads | np.append(True, kind[1:] != kind[:-1]))
    return [
        Run(domain_name(cable.kind[nodes[0]]), np.append(cable.parent[nodes[0]], nodes), bool(leads[first]))
        for first, nodes in zip(cuts.tolist(), np.split(order, cuts[1:]), strict=True)
    ]


def levels_of(cell: Cell) -> Real:
    """Return the height of each branch in a tree laid out flat, shape (branches,).

    Tips have whole numbers downward from 0, those of one subtree side by side; a branch with daughters
    stands in the middle between the first and the last of them. Stems go by domain, apical ones on top.
    """
    branches = cell.branches
    count = len(branches.head)
    names = [domain_name(kind) for kind in cell.cable.kind[branches.head].tolist()]
    place = [_FROM_THE_TOP.index(name if name in _FROM_THE_TOP else "other") for name in names]
    daughters: list[list[int]] = [[] for _ in range(count + 1)]  # the last list is the soma's
    for branch in sorted(
        range(count), key=lambda branch: place[branch] if branches.parent[branch] < 0 else 0
    ):
        daughters[branches.parent[branch]].append(branch)
    waiting, order = daughters[-1][::-1], []
    while waiting:
        order.append(waiting.pop())
        waiting.extend(reversed(daughters[order[-1]]))
    level = np.zeros(count)
    level[[branch for branch in order if not daughters[branch]]] = -np.arange(len(branches.tips))
    for branch in reversed(order):
        if daughters[branch]:
            level[branch] = (level[daughters[branch][0]] + level[daughters[branch][-1]]) / 2.0
    return level


def _middle(levels: Real) -> float:
    return float(levels.min() + levels.max()) / 2.0 if len(levels) else 0.0


def numeric_column(table: Columns, column: str) -> Real:
    """Return a column of a table by sample as numbers, NaN where a cell is empty.

    Raises
    ------
    MorphotoneError
        There is no such column, or it holds words.
    """
    numeric = [name for name, values in table.items() if _is_numeric(values)]
    if column not in numeric:
        raise MorphotoneError(
            f"there is no numeric column {column!r} to colour by; those of the table by sample are "
            f"{', '.join(numeric)}"
        )
    return np.asarray(table[column], np.float64)


def _is_numeric(values: Sequence[object] | NDArray[np.generic]) -> bool:
    return not any(isinstance(value, str) for value in np.asarray(values, object)[:1])


def check_drawable(portrait: Portrait) -> None:
    """See that there is something to draw, and that it has finite sizes.

    Raises
    ------
    ReadingError
        All samples lie in one place and there is no soma (reason ``nothing_to_draw``), or distances are no
        finite numbers (``not_drawable``), as in files kept although unfit.
    """
    file = portrait.cell.rec.file
    if not len(portrait.cell.cable.traced.soma.members) and not np.ptp(portrait.ends, axis=(0, 1)).any():
        raise ReadingError(
            f"{file}: read samples in one place and no soma, expected cable of some length or a soma to "
            "draw; leave the file out",
            "nothing_to_draw",
        )
    if not all(np.isfinite(values).all() for values in portrait.distances):
        raise ReadingError(
            f"{file}: read sizes for which attenuation is no finite number, expected those of a neuron; "
            "check the file's unit, and leave --keep-unfit out",
            "not_drawable",
        )


def values_by_node(cell: Cell, values: Real) -> Real:
    """Return values by sample, in file order, as values by node.

    A frustum at whose end the axon is cut has no sample there, and its parent's value.
    """
    in_order = np.empty(len(values))
    in_order[np.argsort(cell.rec.line, kind="stable")] = values
    cable = cell.cable
    by_node: Real = in_order[cable.sample]
    cut = np.flatnonzero(cable.node[cable.sample] != np.arange(len(cable.sample)))
    by_node[cut] = by_node[cable.parent[cut]]
    return by_node


def portrait_of(
    cell: Cell, hz: float = 0.0, colour: str | None = None, marks: Marks | None = None
) -> Portrait:
    """Return a cell ready to be drawn.

    Parameters
    ----------
    cell : Cell
        As analysed.
    hz : float
        The frequency to show, one of the cell's.
    colour : str, optional
        A numeric column of its table by sample; log attenuation toward the soma at `hz` unless given.
    marks : Marks, optional
        Its sites.

    Raises
    ------
    MorphotoneError
        There is no such frequency or numeric column.
    """
    known = cell.electrotonus.hz
    if hz not in known:
        raise MorphotoneError(
            f"read {hz:g} Hz to show, expected one of the cell's: {', '.join(f'{each:g}' for each in known)}"
        )
    table = sample_table(cell)
    column = colour or COLOUR + hz_suffix(hz)
    values = values_by_node(cell, numeric_column(table, column))
    nodes = np.arange(len(cell.cable.parent))
    start, end = (positions(cell.cable, nodes, np.full(len(nodes), share)) for share in (1.0, 0.0))
    return Portrait(cell, hz, table, column, (start, end), values, marks)
