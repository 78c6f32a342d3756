"""Where on a cell's cable the sites of a file lie: by sample, by point in space, by path along a branch."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.nearest import nearest_places, positions
from morphotone.cable.sites import with_sites
from morphotone.cable.tree import Cable
from morphotone.questions.branches import branches_of
from morphotone.questions.survey import Prepared
from morphotone.questions.synapses import Placed
from morphotone.reading.reconstruction import Reconstruction, trees
from morphotone.reading.sites import Sites, TurnedAwaySite

Index = NDArray[np.int64]
Real = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: How far from the cable's surface a site in space may lie unless told otherwise, µm: a long spine, or the
#: error of a tracing (our choice).
FARTHEST_UM = 5.0

# Share of a branch by which a path along it may end beyond it: tables round lengths.
_ROUNDED = 1e-6


@dataclass(frozen=True, eq=False)
class Places:
    """Where sites of one cell lie; the arrays are filled in way by way.

    Attributes
    ----------
    node : ndarray of int64, shape (sites,)
    fraction : ndarray, shape (sites,)
        As `morphotone.cable.sites.with_sites` takes them; 0 and 0 for a site that has no place.
    moved_um : ndarray, shape (sites,)
        How far a site in space was moved to the cable's surface, µm; 0 for the others.
    refused : dict of int to (str, str)
        Reason and sentence of each site that has no place.
    """

    node: Index
    fraction: Real
    moved_um: Real
    refused: dict[int, tuple[str, str]]

    def refuse(self, rows: Index, reason: str, sentence: Callable[[int], str]) -> None:
        """Note why sites have no place: a code, and the sentence for each row."""
        self.node[rows], self.fraction[rows] = 0, 0.0
        self.refused.update({row: (reason, sentence(row)) for row in rows.tolist()})


def placed_on(
    prepared: Prepared, sites: Sites, assumptions: Assumptions, farthest_um: float = FARTHEST_UM
) -> tuple[Placed, tuple[TurnedAwaySite, ...]]:
    """Return the sites that have a place on a cell, with a node at each, and those turned away.

    Parameters
    ----------
    prepared : Prepared
        The cell, built under the assumptions.
    sites : Sites
        Rows of this cell.
    assumptions : Assumptions
        Sites in space are given as the file's samples are, and corrected for shrinkage as they are.
    farthest_um : float
        A site in space farther than this from the cable's surface is turned away, µm.
    """
    cable = prepared.cables[0]
    places = find_places(prepared.rec, cable, sites, assumptions, farthest_um)
    away = np.array(sorted(places.refused), np.int64)
    reasons, sentences = ([places.refused[row][part] for row in away.tolist()] for part in (0, 1))
    kept = np.setdiff1d(np.arange(len(sites)), away)
    node, fraction = places.node[kept], places.fraction[kept]
    traced = cable.traced
    centre = traced.soma.centre if len(traced.soma.members) else traced.position[traced.root]
    position = positions(cable, node, fraction)
    straight = np.linalg.norm(position - centre, axis=1)
    sited = with_sites(cable, node, fraction)
    placed = Placed(sites.at(kept), sited, places.moved_um[kept], straight, position)
    return placed, sites.at(away).turned_away(reasons, sentences)


def find_places(
    rec: Reconstruction,
    cable: Cable,
    sites: Sites,
    assumptions: Assumptions,
    farthest_um: float = FARTHEST_UM,
) -> Places:
    """Find the place of each site on a cell, as `placed_on` does."""
    n = len(sites)
    places = Places(np.zeros(n, np.int64), np.zeros(n), np.zeros(n), {})
    _put_samples(places, np.flatnonzero(sites.way == "sample"), sites, rec, cable, assumptions)
    _put_points(places, np.flatnonzero(sites.way == "space"), sites, cable, assumptions, farthest_um)
    _put_along(places, np.flatnonzero(sites.way == "branch"), sites, cable)
    return places


def _put_points(
    places: Places, rows: Index, sites: Sites, cable: Cable, assumptions: Assumptions, farthest_um: float
) -> None:
    """Put sites in space on the nearest point of the surface."""
    if not len(rows):
        return  # the index of the surface is worth its cost only for someone
    near = nearest_places(cable, sites.position[rows] * np.asarray(assumptions.shrinkage))
    places.node[rows], places.fraction[rows], places.moved_um[rows] = near[:3]
    far = rows[near.moved_um > farthest_um]
    places.refuse(
        far,
        "too_far",
        lambda row: (
            f"read x, y, z {', '.join(f'{value:g}' for value in sites.position[row])}, which is "
            f"{places.moved_um[row]:.4g} um from the nearest cable, expected at most {farthest_um:g} um; "
            "check the coordinates and their unit, or allow more"
        ),
    )


def _put_along(places: Places, rows: Index, sites: Sites, cable: Cable) -> None:
    """Put sites given by branch and path where they are along it."""
    branches = branches_of(cable.parent)
    count = len(branches.head)
    known = sites.branch[rows] <= count
    places.refuse(
        rows[~known],
        "branch_unknown",
        lambda row: (
            f"read branch {sites.branch[row]}, expected the number of one of the {count:,} branches in "
            "branches.csv; check the number, and that axon and orphans are treated as they were there"
        ),
    )
    rows = rows[known]
    in_order = np.argsort(branches.of_node[1:], kind="stable") + 1  # along each branch, one after the other
    firsts = np.searchsorted(branches.of_node[in_order], np.arange(count + 1))
    for branch in np.unique(sites.branch[rows]).tolist():
        nodes = in_order[firsts[branch - 1] : firsts[branch]]
        _put_on_branch(places, rows[sites.branch[rows] == branch], sites, cable, nodes)


def _put_on_branch(places: Places, rows: Index, sites: Sites, cable: Cable, nodes: Index) -> None:
    """Put sites on one branch, given its nodes from start to end."""
    ends = np.cumsum(cable.length[nodes])
    along, whole = sites.along_um[rows], float(ends[-1])
    at = np.minimum(np.searchsorted(ends, along), len(nodes) - 1)
    places.node[rows] = nodes[at]
    places.fraction[rows] = np.clip((ends[at] - along) / cable.length[nodes[at]], 0.0, 1.0)
    beyond = rows[along > whole * (1.0 + _ROUNDED)]
    places.refuse(
        beyond,
        "beyond_branch",
        lambda row: (
            f"read along_um {sites.along_um[row]:g} on branch {sites.branch[row]}, expected at most its "
            f"length of {whole:.6g} um; count from the branch's start, or name the branch that follows"
        ),
    )


def _put_samples(
    places: Places, rows: Index, sites: Sites, rec: Reconstruction, cable: Cable, assumptions: Assumptions
) -> None:
    """Put sites given by sample and fraction on the frustum between the sample and its parent."""
    by_number = np.argsort(rec.number, kind="stable")
    at = np.minimum(np.searchsorted(rec.number[by_number], sites.sample[rows]), len(rec.number) - 1)
    sample = by_number[at]
    known = rec.number[sample] == sites.sample[rows]
    places.refuse(
        rows[~known],
        "sample_unknown",
        lambda row: (
            f"read sample {sites.sample[row]}, expected the number of one of the {len(rec.number):,} samples "
            f"of {rec.file}; check the number, or that this is the file the sites were marked in"
        ),
    )
    rows, sample = rows[known], sample[known]
    fraction = sites.fraction[rows]
    at_sample = (fraction == 0) & (cable.node[sample] >= 0)
    rootless = (rec.parent[sample] < 0) & (fraction > 0) & ~np.isin(sample, cable.traced.soma.members)
    places.node[rows[at_sample]] = cable.node[sample[at_sample]]
    places.refuse(
        rows[rootless],
        "no_parent",
        lambda row: (
            f"read sample {sites.sample[row]} with fraction {sites.fraction[row]:g}, expected none, as the "
            "sample has no parent; leave the fraction out"
        ),
    )
    inside = ~(at_sample | rootless)
    _put_inside(places, rows[inside], sites, sample[inside], rec, cable, assumptions)


def _put_inside(
    places: Places,
    rows: Index,
    sites: Sites,
    sample: Index,
    rec: Reconstruction,
    cable: Cable,
    assumptions: Assumptions,
) -> None:
    """Put sites between a sample and its parent in the file, whichever hangs from the other now."""
    traced, fraction = cable.traced, sites.fraction[rows]
    parent = rec.parent[sample]
    turned = (parent >= 0) & (traced.parent[parent] == sample)
    below, up = np.where(turned, parent, sample), np.where(turned, 1.0 - fraction, fraction)
    share = traced.share[below]
    own = np.full(len(rec.number), -1)
    own[cable.sample] = np.arange(len(cable.sample))
    # Samples that share a node, with each other or in the soma, have no frustum between them.
    joint = (traced.length[below] == 0) & (cable.node[below] >= 0)
    reached = ~joint & (share > 0) & (1.0 - up <= share)
    node = np.where(joint, cable.node[below], own[below])
    cut = np.divide(share - (1.0 - up), share, out=np.zeros(len(rows)), where=reached)
    places.node[rows] = node
    places.fraction[rows] = np.where(joint, 0.0, np.where(share == 1, up, cut))
    lost = ~(joint | reached)
    if lost.any():
        tree = trees(traced.parent)
        _refuse_absent(places, rows[lost], sites, tree[below[lost]] != tree[traced.root], assumptions)


def _refuse_absent(places: Places, rows: Index, sites: Sites, apart: Mask, assumptions: Assumptions) -> None:
    """Refuse sites on samples not analysed, since their piece stands apart or the axon was left out."""

    def read(row: int) -> str:
        return f"read sample {sites.sample[row]} with fraction {sites.fraction[row]:g}"

    places.refuse(
        rows[apart],
        "orphan",
        lambda row: (
            f"{read(row)}, on a piece that is not connected to the analysed tree, expected a place on that "
            'tree; connect the piece in the file, or join it by the assumptions (orphans = "joined")'
        ),
    )
    cut = assumptions.axon == "cut"
    where = (
        f"beyond {assumptions.axon_cut_um:g} um of axon, where it is cut" if cut else "on an axon left out"
    )
    places.refuse(
        rows[~apart],
        "beyond_axon_cut" if cut else "axon_left_out",
        lambda row: (
            f"{read(row)}, {where}, or on what hangs there, expected a place on analysed cable; keep the "
            'axon by the assumptions (axon = "kept")'
        ),
    )
