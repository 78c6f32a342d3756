"""The two sweeps: from the tips to the soma, and back, over a whole forest and all cases at once.

A sweep node by node would need as many numpy calls as the tree is deep.  Instead nodes are eliminated
in an order that needs about log2 of that: the tree is taken apart into *streams* (paths on which the
Horton–Strahler order stays the same), a stream is folded by joining every second pair of neighbouring
pieces, and a folded stream is hung on its parent node as one admittance.  Going back, the same steps
are undone.  It is THEORY's two sweeps, associated differently: at 0 Hz still only sums, products and
quotients of positive terms, hence no cancellation, and 100,000 nodes in a row are no deeper than
seventeen.  What happens to a cell depends on that cell alone, not on its neighbours in the forest.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.frustum import Pi, Values

Index = NDArray[np.int64]


class Step(NamedTuple):
    """Nodes ``first:last`` that are eliminated together.

    ``parent`` holds for each the node it then hangs on.  In a folding step ``child`` holds the one
    node below it; in a hanging step ``child`` is None and ``parent`` is sorted, with the positions in
    ``groups`` at which a new parent begins (empty in a folding step).
    """

    first: int
    last: int
    parent: Index
    child: Index | None
    groups: Index


@dataclass(frozen=True)
class Schedule:
    """In which order the nodes of a forest are eliminated.

    Attributes
    ----------
    order : ndarray of int64, shape (nodes,)
        The nodes (as the caller numbers them) in order of elimination; the roots come last.
    place : ndarray of int64, shape (nodes,)
        Inverse of ``order``: where each node stands in it.
    steps : tuple of Step
        Steps, in terms of places.
    roots : int
        Number of roots, which are never eliminated.
    """

    order: Index
    place: Index
    steps: tuple[Step, ...]
    roots: int

    def hanging(self) -> Iterator[Step]:
        """Yield the steps in which folded streams are hung on their parent nodes."""
        return (step for step in self.steps if step.child is None)


class Runs(NamedTuple):
    """Maximal stretches of nodes i, i + 1, … each the only child of the one before."""

    first: Index
    last: Index
    of_node: Index


class Streams(NamedTuple):
    """Paths of runs on which the Horton–Strahler order stays the same; a root is a stream of its own.

    ``order``, ``length`` (nodes) and ``hangs_on`` (the node above, -1 for a root) are per stream; ``of_run``
    and ``below``, the nodes of the stream that lie farther out than the run, per run.
    """

    order: Index
    length: Index
    hangs_on: Index
    of_run: Index
    below: Index


_HANG = 63  # stands behind every possible number of foldings in the sorting key of a stream's nodes
_LAST = 64 * (_HANG + 1)  # stands behind every order: a root's


def schedule(parent: Index) -> Schedule:
    """Return the order of elimination for a forest.

    Parameters
    ----------
    parent : ndarray of int64, shape (nodes,)
        Parent of each node, smaller than the node's own number; -1 at roots.

    Notes
    -----
    Linear in the nodes.  Only the tree of *runs* is walked in Python, tens of times smaller than the
    tree of nodes in files that list branches one after the other.  Indices are found at *positions*: stream
    by stream, each from its tip end, where what comes next in a stream is next in memory.
    """
    runs = _runs(parent)
    streams = _streams(runs, parent)
    nodes = np.arange(len(parent))
    start = np.cumsum(streams.length) - streams.length
    position = (start[streams.of_run] + streams.below + runs.last).take(runs.of_node) - nodes
    member = np.empty_like(position)
    member[position] = nodes

    rank = nodes - np.repeat(start, streams.length)
    lowest = rank & -rank  # 2^level: the stride at which the node is folded away
    level = np.frexp(lowest.astype(np.float64))[1] - 1
    level[start] = _HANG
    inside = rank + lowest < np.repeat(streams.length, streams.length)
    inside[start] = False
    up = np.where(inside, nodes + lowest, np.repeat(position[streams.hangs_on], streams.length))
    key = (np.repeat(streams.order * (_HANG + 1), streams.length) + level).astype(np.int16)
    roots = position[parent < 0]
    key[roots] = _LAST
    sequence = np.argsort(key, kind="stable")
    hanging = np.flatnonzero(key.take(sequence) % (_HANG + 1) == _HANG)
    by_parent = np.lexsort((member[start], streams.hangs_on, key[start]))
    sequence[hanging] = start[by_parent[: len(hanging)]]  # roots come last
    place = np.empty_like(sequence)
    place[sequence] = nodes
    steps = _steps(
        key.take(sequence), place.take(up.take(sequence)), place.take((nodes - lowest).take(sequence))
    )
    return Schedule(member.take(sequence), place.take(position), steps, len(roots))


def _runs(parent: Index) -> Runs:
    children = np.bincount(parent[parent >= 0], minlength=len(parent))
    is_root = parent < 0
    onward = np.zeros(len(parent), bool)
    onward[1:] = parent[1:] == np.arange(len(parent) - 1)
    onward &= (children[parent] == 1) & ~is_root[parent]
    first = np.flatnonzero(~onward)
    last = np.append(first[1:], len(parent)) - 1
    return Runs(first, last, np.cumsum(~onward) - 1)


def _streams(runs: Runs, parent: Index) -> Streams:
    """Return the streams of a forest.

    Horton–Strahler order as in Strahler 1957, Trans Am Geophys Union 38:913–920: a tip has order 1; where
    two or more streams of the highest order meet the order grows by one, else the highest flows on.
    """
    count = len(runs.first)
    hook = parent[runs.first]
    parent_run = np.where(hook >= 0, runs.of_node[hook], -1)
    order, highest, ties, heir = [1] * count, [0] * count, [2] * count, [-1] * count
    upward = parent_run.tolist()
    for run in range(count - 1, -1, -1):
        own = order[run] = highest[run] + (ties[run] > 1)
        up = upward[run]
        if up >= 0:
            if own > highest[up]:
                highest[up], ties[up], heir[up] = own, 1, run
            elif own == highest[up]:
                ties[up] += 1
    flows_on = np.where(
        np.array(ties) == 1, heir, -1
    )  # the run in which a run's stream comes from farther out
    flows_on[parent_run < 0] = -1
    each = np.arange(count)
    top = np.where((parent_run >= 0) & (flows_on[parent_run] == each), parent_run, each)
    while not np.array_equal(further := top[top], top):  # doubles the stretch of stream seen each time
        top = further
    tops, of_run = np.unique(top, return_inverse=True)
    from_tip = np.lexsort((-each, of_run))  # stream by stream, each from its tip end
    size = (runs.last - runs.first + 1)[from_tip]
    length = np.bincount(of_run, runs.last - runs.first + 1).astype(np.int64)
    below = np.empty(count, np.int64)
    below[from_tip] = np.cumsum(size) - size - np.repeat(np.cumsum(length) - length, np.bincount(of_run))
    return Streams(np.array(order)[tops], length, hook[tops], of_run, below)


def _steps(key: NDArray[np.int16], parent: Index, child: Index) -> tuple[Step, ...]:
    """Cut places in order of elimination where the key changes; roots are in no step."""
    edges = [0, *(np.flatnonzero(np.diff(key)) + 1).tolist(), len(key)]
    steps = []
    for first, last in pairwise(edges):
        if key[first] == _LAST:
            break
        if key[first] % (_HANG + 1) == _HANG:
            groups = np.flatnonzero(np.diff(parent[first:last], prepend=-1))
            steps.append(Step(first, last, parent[first:last], None, groups))
        else:
            steps.append(Step(first, last, parent[first:last], child[first:last], parent[:0]))
    return tuple(steps)


class Looks(NamedTuple):
    """Admittances seen in a tree, µS, by place, shape (nodes, cases).

    Attributes
    ----------
    away : ndarray
        At the node, looking away from the soma, the node's own load included.
    beyond : ndarray
        At the node's parent, everything but the piece between the two; 0 at roots.
    """

    away: Values
    beyond: Values


def sweep(plan: Schedule, pieces: Pi, load: Values) -> Looks:
    """Return what every node sees away from and toward the root.

    Parameters
    ----------
    plan : Schedule
        Of the forest.
    pieces : Pi, each (nodes, cases)
        By place: the piece from the node's parent (start) to the node (end), µS; the roots' rows are
        not used.
    load : ndarray, shape (nodes, cases)
        By place: admittance from the node to ground that is no piece's, e.g. the soma, µS.

    Notes
    -----
    Sum over series and parallel admittances as in Rall 1959 (Exp Neurol 1:491–527), tips to soma; the
    way back gives each node the admittance of the rest of the tree.
    """
    pieces = Pi(*(part.copy() for part in pieces))
    total = load.copy()
    looked_into = np.empty_like(load)  # by hung stream, at its parent node
    lower = _fold_and_hang(plan, pieces, total, looked_into)
    others = _others(plan, load, looked_into)
    return _undo(plan, pieces, lower, total, others)


def _behind(axial: Values, shunt: Values, beyond: Values, near: Values) -> Values:
    """Return near + axial in series with (shunt + beyond): a piece seen from one end."""
    far = shunt + beyond
    seen: Values = near + axial * (far / (axial + far))
    return seen


def _fold_and_hang(plan: Schedule, pieces: Pi, total: Values, looked_into: Values) -> list[Pi | None]:
    """Eliminate all nodes but the roots; return for each folding the lower pieces that went into it.

    A piece stays as it was when its node was eliminated.
    """
    axial, start, end = pieces
    lower: list[Pi | None] = []
    for first, last, parent, child, groups in plan.steps:
        at = slice(first, last)
        if child is None:
            looked_into[at] = _behind(axial[at], end[at], total[at], start[at])
            total[parent[groups]] += np.add.reduceat(looked_into[at], groups, axis=0)
            lower.append(None)
            continue
        below = Pi(*(part.take(child, axis=0) for part in pieces))
        lower.append(below)
        middle = end[at] + total[at] + below.start
        inverse = 1.0 / (axial[at] + below.axial + middle)  # one division, which is dear for complex numbers
        share = below.axial * inverse
        axial[child] = axial[at] * share
        start[child] = start[at] + middle * (axial[at] * inverse)
        end[child] = below.end + middle * share
    return lower


def _others(plan: Schedule, load: Values, looked_into: Values) -> Values:
    """Return for each hung stream the load of its parent node and the other streams hung on it.

    "The sum without me" is taken as (sum of all but the largest) + (the largest − me): the first term
    is at least as large as what the difference may have lost, so nothing cancels.
    """
    others = np.empty_like(load)
    if not plan.steps:
        return others
    hung = np.concatenate([np.arange(step.first, step.last) for step in plan.hanging()])
    parent = np.concatenate([step.parent for step in plan.hanging()])
    by_parent = np.argsort(parent, kind="stable")
    hung, parent = hung[by_parent], parent[by_parent]
    starts = np.flatnonzero(np.diff(parent, prepend=-1))
    group = np.repeat(np.arange(len(starts)), np.diff(np.append(starts, len(hung))))
    mine = looked_into[hung]
    size = np.abs(mine)
    largest = size == np.maximum.reduceat(size, starts, axis=0)[group]
    small = np.add.reduceat(np.where(largest, 0.0, mine), starts, axis=0)
    large = np.add.reduceat(np.where(largest, mine, 0.0), starts, axis=0)
    others[hung] = load[parent] + (small[group] + (large[group] - mine))
    return others


def _undo(plan: Schedule, pieces: Pi, lower: list[Pi | None], total: Values, others: Values) -> Looks:
    """Undo the eliminations from the roots on, filling in what each node sees on either side."""
    axial, start, end = pieces
    away, beyond = total, np.empty_like(total)
    through = np.empty_like(total)  # at a node, its own stream both ways, without load and side streams
    for at_roots in (beyond, through):
        at_roots[len(total) - plan.roots :] = 0.0
    for (first, last, parent, child, _), below in zip(reversed(plan.steps), reversed(lower), strict=True):
        at = slice(first, last)
        if child is None or below is None:
            beyond[at] = through.take(parent, axis=0) + others[at]
            through[at] = _behind(axial[at], start[at], beyond[at], end[at])
            continue
        beyond[at] = beyond.take(child, axis=0)
        toward = _behind(axial[at], start[at], beyond[at], end[at])
        down = _behind(below.axial, below.end, away.take(child, axis=0), below.start)
        beyond[child] = toward + total[at]
        through[at] = toward + down
        away[at] += down
    return Looks(away, beyond)


def path_sums(plan: Schedule, amount: Values) -> Values:
    """Return for each node the sum of an amount over the pieces between it and its root.

    Parameters
    ----------
    plan : Schedule
        Of the forest.
    amount : ndarray, shape (nodes, columns)
        By place: the amount of the piece that ends at the node; the roots' rows are not used.
    """
    amount = amount.copy()
    for first, last, _, child, _ in plan.steps:
        if child is not None:
            amount[child] = amount.take(child, axis=0) + amount[first:last]
    amount[len(amount) - plan.roots :] = 0.0
    for first, last, parent, _, _ in reversed(plan.steps):
        amount[first:last] += amount.take(parent, axis=0)
    return amount
