"""What of a reconstruction becomes cable: corrected coordinates, the soma, orphans, the axon."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from morphotone.cable.assumptions import Assumptions
from morphotone.errors import ReadingError
from morphotone.reading.reconstruction import Reconstruction, trees
from morphotone.reading.soma import Soma, find_soma, reroot, turn_round

AXON = 2  # type code of the SWC standard

# Far outside what any cable has, and inside what double precision holds when radii are squared.
_SMALLEST_UM, _LARGEST_UM = 1e-9, 1e6

# Rules whose soma ends at the sphere of its area; with the others it ends one radius from the parent sample.
SPHERES = ("sphere", "outline")

Index = NDArray[np.int64]
Real = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Traced:
    """The samples of one cell, corrected and hung from the soma.

    Attributes
    ----------
    position : ndarray, shape (n, 3)
        After shrinkage correction, µm.
    radius : ndarray, shape (n,)
        After diameter correction, µm, positive.
    kind, parent : ndarray of int64, shape (n,)
        Type codes; parents after re-hanging and joining, -1 at roots; in no particular order.
    soma : Soma
        Of the corrected coordinates.
    stem : ndarray of bool, shape (n,)
        Whether the sample's parent is a soma sample and it is none itself.
    length : ndarray, shape (n,)
        Axial length of the frustum that ends at each sample, before any cut, µm; a stem's counts from the
        soma's surface; 0 at roots and in the soma.
    root : int
        The sample the cell hangs from: the head of the soma, or without a soma the root sample.
    share : ndarray, shape (n,)
        How much of the frustum that ends at the sample is analysed, from its parent on: 1, or 0 for
        orphans and an axon left out, or between at the place where the axon is cut.
    re_hung : bool
        Whether the file's root was not the soma, so that the tree was hung from the soma instead.
    orphans, joined : int
        Trees left out, and trees joined across a gap.
    orphan_um : float
        Cable length of the trees left out, µm.
    """

    position: Real
    radius: Real
    kind: Index
    parent: Index
    soma: Soma
    stem: Mask
    length: Real
    root: int
    share: Real
    re_hung: bool
    orphans: int
    joined: int
    orphan_um: float


def trace(rec: Reconstruction, assumptions: Assumptions) -> Traced:
    """Correct a reconstruction's coordinates, hang it from its soma, and choose what is analysed.

    Parameters
    ----------
    rec : Reconstruction
        As read.
    assumptions : Assumptions
        Shrinkage, diameters, soma rule, orphans and axon are used here.

    Raises
    ------
    ReadingError
        When a radius is no cable's (reason ``radius_absurd``), when there are orphans and the
        assumptions refuse them (``orphans_refused``), or when nothing is left (``nothing_left``).
    """
    position = _corrected_position(rec, assumptions)
    radius = _corrected_radius(rec, assumptions)
    soma = find_soma(rec.kind, rec.parent, rec.position, rec.radius, assumptions.soma_rule)
    if position is not rec.position or radius is not rec.radius:
        # By the rule that fits the coordinates as traced: a correction must not make a chain of three points.
        soma = find_soma(rec.kind, rec.parent, position, radius, soma.rule)
    main = rec.tree[soma.members[0]] if len(soma.members) else _longest_tree(position, rec)
    root = int(soma.members[0]) if len(soma.members) else int(np.argmax(rec.tree == main))
    re_hung = bool(rec.parent[root] >= 0)
    parent = reroot(rec.parent, root) if re_hung else rec.parent
    tree, pieces = rec.tree, int(rec.tree.max())
    if pieces and assumptions.orphans == "refused":
        raise ReadingError(
            f"{rec.file}: read {pieces} pieces that are not connected to the analysed tree, expected none "
            'under orphans = "refused"; connect them, or leave them out or join them by the assumptions',
            "orphans_refused",
        )
    if pieces and assumptions.orphans == "joined":
        parent = _joined(position, parent, rec.tree, main, float(assumptions.orphan_gap_um or 0.0))
        tree = trees(parent)
    left = int(tree.max())
    ours = tree == tree[root]
    stem, length = _frustum_lengths(position, radius, parent, soma)
    share = np.where(ours, _share_of_axon(length, parent, rec.kind, assumptions), 0.0)
    if not len(soma.members) and np.count_nonzero(share) < 2:
        raise ReadingError(
            f"{rec.file}: nothing is left to analyse, since there is no soma and the assumptions leave out "
            "all cable; keep the axon or leave the file out",
            "nothing_left",
        )
    return Traced(
        position, radius, rec.kind, parent, soma, stem, length, root, share, re_hung,
        left, pieces - left, float(length[~ours].sum()),
    )  # fmt: skip


def _frustum_lengths(position: Real, radius: Real, parent: Index, soma: Soma) -> tuple[Mask, Real]:
    """Return which samples start a stem, and the axial length of every sample's frustum, µm."""
    length = step_lengths(position, parent)
    in_soma = np.zeros(len(parent), bool)
    in_soma[soma.members] = True
    stem = in_soma[parent] & (parent >= 0) & ~in_soma
    stems = np.flatnonzero(stem)
    if soma.rule in SPHERES:
        surface = np.linalg.norm(position[stems] - soma.centre, axis=1) - soma.radius
    else:
        surface = length[stems] - radius[parent[stems]]
    length[stems] = np.maximum(surface, 0.0)
    length[in_soma] = 0.0
    return stem, length


def step_lengths(position: Real, parent: Index) -> Real:
    """Return the distance of each sample from its parent, µm, 0 at roots."""
    steps = position - position.take(parent, axis=0)  # a root's parent -1 gives any row
    steps[np.flatnonzero(parent < 0)] = 0.0
    lengths: Real = np.sqrt(np.einsum("ij,ij->i", steps, steps))
    return lengths


def _corrected_position(rec: Reconstruction, assumptions: Assumptions) -> Real:
    if assumptions.shrinkage == (1.0, 1.0, 1.0):
        return rec.position
    corrected: Real = rec.position * np.asarray(assumptions.shrinkage)
    return corrected


def _corrected_radius(rec: Reconstruction, assumptions: Assumptions) -> Real:
    radius = rec.radius
    if (assumptions.diameter_factor, assumptions.diameter_offset_um) != (1.0, 0.0):
        radius = assumptions.diameter_factor * rec.radius + assumptions.diameter_offset_um / 2.0
    if radius.min() < _SMALLEST_UM or radius.max() > _LARGEST_UM:
        wrong = np.flatnonzero((radius < _SMALLEST_UM) | (radius > _LARGEST_UM))
        at = wrong[0]
        same = radius[at] == rec.radius[at]
        corrected = "" if same else f", {radius[at]:g} um after the correction of diameters,"
        raise ReadingError(
            f"{rec.file}: line {rec.line[at]}: radius {rec.radius[at]:g} um{corrected} of sample "
            f"{rec.number[at]}, expected {_SMALLEST_UM:g} to {_LARGEST_UM:g} um ({len(wrong)} such samples); "
            "mend the radii, or change the unit or the correction",
            "radius_absurd",
        )
    return radius


def _longest_tree(position: Real, rec: Reconstruction) -> int:
    """Return the tree with the most cable; the first root's where that is equal."""
    if not rec.tree.any():
        return 0
    lengths = np.bincount(rec.tree, weights=step_lengths(position, rec.parent))
    return int(np.argmax(lengths))


def _joined(position: Real, parent: Index, tree: Index, main: int, gap: float) -> Index:
    """Join to the main tree every piece within the gap of it, then those within the gap of the joined.

    A piece is hung from its sample nearest to what is joined already; one frustum bridges the gap.
    """
    parent = parent.copy()
    ours, waiting = np.flatnonzero(tree == main), np.flatnonzero(tree != main)
    while len(ours) and len(waiting):
        distance, neighbour = map(np.asarray, cKDTree(position[ours]).query(position[waiting]))
        piece = tree[waiting]
        order = np.lexsort((distance, piece))
        best = order[np.flatnonzero(np.diff(piece[order], prepend=-1))]  # of each piece, in samples' order
        best = best[distance[best] <= gap]
        for sample, onto in zip(waiting[best].tolist(), ours[neighbour[best]].tolist(), strict=True):
            turn_round(parent, sample)
            parent[sample] = onto
        newly = np.isin(piece, piece[best])
        ours, waiting = waiting[newly], waiting[~newly]
    return parent


def _share_of_axon(length: Real, parent: Index, kind: Index, assumptions: Assumptions) -> Real:
    """Return per sample the share of its frustum that the axon rule leaves, 1 outside the axon.

    What hangs on the axon goes with it.
    """
    if assumptions.axon == "kept":
        return np.ones(len(parent))
    axon = kind == AXON
    length = np.where(axon, length, 0.0)
    depth, length_to = axon.astype(np.int64), length
    above = parent.copy()
    while (above >= 0).any():  # sums over ancestors by doubling the stretch seen
        hung = above >= 0
        depth = depth + np.where(hung, depth[above], 0)
        length_to = length_to + np.where(hung, length_to[above], 0.0)
        above = np.where(hung, above[above], -1)
    if assumptions.axon == "left out":
        return np.where(depth > 0, 0.0, 1.0)
    remains = float(assumptions.axon_cut_um or 0.0) - (length_to - length)
    reached = np.divide(remains, length, out=np.where(remains >= 0, 1.0, 0.0), where=axon & (length > 0))
    return np.where(depth > 0, np.clip(reached, 0.0, 1.0), 1.0)
