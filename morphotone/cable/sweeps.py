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


_HANG = 63  # stands behind every possible number of foldings in the sorting key of a stream's nodes
_LAST = 64 * (_HANG + 1)  # stands behind every order: a root's; keys leave 51 bits for two node numbers


def schedule(parent: Index) -> Schedule:
    """Return the order of elimination for a forest.

    Parameters
    ----------
    parent : ndarray of int64, shape (nodes,)
        Parent of each node, smaller than the node's own number; -1 at roots.

    Notes
    -----
    Linear in the nodes.  Only the tree of *runs* is walked in Python, tens of times smaller than the
    tree of nodes in files that list branches one after the other.
    """
    runs = _runs(parent)
    order, above, stream, hangs_on = _streams(runs, parent)
    nodes = np.arange(len(parent))
    rank = above[runs.of_node] + runs.last[runs.of_node] - nodes  # from the stream's tip end, 0 1 2 …
    stream_of = stream[runs.of_node]
    length = np.bincount(stream_of, minlength=len(hangs_on))
    start = np.concatenate(([0], np.cumsum(length)[:-1]))
    member = np.empty(len(parent), np.int64)  # nodes, stream by stream from the tip end
    member[start[stream_of] + rank] = nodes

    lowest = rank & -rank  # 2^level: the stride at which the node is folded away
    level = np.where(rank > 0, np.frexp(np.maximum(lowest, 1).astype(np.float64))[1] - 1, _HANG)
    above_rank = rank + lowest
    inside = (rank > 0) & (above_rank < length[stream_of])
    up = np.where(inside, member[np.where(inside, start[stream_of] + above_rank, 0)], hangs_on[stream_of])
    key = order[runs.of_node] * (_HANG + 1) + level
    is_root = parent < 0
    key[is_root] = _LAST
    # By step, then (for hanging) by parent, then by node: one sort of whole numbers that are all different.
    together = (key * len(nodes) + np.where(level == _HANG, up, 0)) * len(nodes) + nodes
    sequence = np.argsort(together)
    place = np.empty_like(sequence)
    place[sequence] = nodes
    down = member[start[stream_of] + rank - lowest]
    return Schedule(sequence, place, _steps(key, sequence, place, up, down), int(is_root.sum()))


def _runs(parent: Index) -> Runs:
    children = np.bincount(parent[parent >= 0], minlength=len(parent))
    is_root = parent < 0
    onward = np.zeros(len(parent), bool)
    onward[1:] = parent[1:] == np.arange(len(parent) - 1)
    onward &= (children[parent] == 1) & ~is_root[parent]
    first = np.flatnonzero(~onward)
    last = np.append(first[1:], len(parent)) - 1
    return Runs(first, last, np.cumsum(~onward) - 1)


def _streams(runs: Runs, parent: Index) -> tuple[Index, Index, Index, Index]:
    """Return per run its order, the nodes below it in its stream, its stream; per stream where it hangs.

    Horton–Strahler order as in Strahler 1957, Trans Am Geophys Union 38:913–920: a tip has order 1; where
    two or more streams of the highest order meet the order grows by one, else the highest flows on.
    """
    count = len(runs.first)
    hook = parent[runs.first]
    parent_run = np.where(hook >= 0, runs.of_node[hook], -1).tolist()
    size = (runs.last - runs.first + 1).tolist()
    highest, ties, heir = [0] * count, [0] * count, [-1] * count
    order, below = [1] * count, [0] * count
    for run in range(count - 1, -1, -1):
        if highest[run]:
            if ties[run] > 1:
                order[run], heir[run] = highest[run] + 1, -1
            else:
                order[run] = highest[run]
                below[run] = below[heir[run]] + size[heir[run]]
        up = parent_run[run]
        if up >= 0:
            if order[run] > highest[up]:
                highest[up], ties[up], heir[up] = order[run], 1, run
            elif order[run] == highest[up]:
                ties[up] += 1
    is_root = [up < 0 for up in parent_run]
    stream = [0] * count
    hangs_on: list[int] = []
    for run in range(count):
        up = parent_run[run]
        if up >= 0 and not is_root[up] and heir[up] == run:
            stream[run] = stream[up]
        else:
            stream[run] = len(hangs_on)
            hangs_on.append(int(hook[run]))
    below = [0 if root else nodes for root, nodes in zip(is_root, below, strict=True)]
    return np.array(order), np.array(below), np.array(stream), np.array(hangs_on)


def _steps(key: Index, sequence: Index, place: Index, up: Index, down: Index) -> tuple[Step, ...]:
    keys = key[sequence]
    edges = np.flatnonzero(np.diff(keys)) + 1
    steps = []
    for first, last in zip([0, *edges.tolist()], [*edges.tolist(), len(keys)], strict=True):
        if keys[first] == _LAST:
            break
        nodes = sequence[first:last]
        parent = place[up[nodes]]
        if keys[first] % (_HANG + 1) == _HANG:
            groups = np.flatnonzero(np.diff(parent, prepend=-1))
            steps.append(Step(first, last, parent, None, groups))
        else:
            steps.append(Step(first, last, parent, place[down[nodes]], parent[:0]))
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
    looked_into = np.zeros_like(load)  # by hung stream, at its parent node
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
        pivot = axial[at] + below.axial + middle
        share = below.axial / pivot
        axial[child] = axial[at] * share
        start[child] = start[at] + middle * (axial[at] / pivot)
        end[child] = below.end + middle * share
    return lower


def _others(plan: Schedule, load: Values, looked_into: Values) -> Values:
    """Return for each hung stream the load of its parent node and the other streams hung on it.

    "The sum without me" is taken as (sum of all but the largest) + (the largest − me): the first term
    is at least as large as what the difference may have lost, so nothing cancels.
    """
    others = np.zeros_like(load)
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
    away, beyond = total, np.zeros_like(total)
    through = np.zeros_like(total)  # at a node, its own stream both ways, without load and side streams
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
