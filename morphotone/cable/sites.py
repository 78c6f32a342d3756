"""Places on the cable: a node for each site, by cutting the frustum it lies in, which changes nothing else.

A place is a node and a fraction: on the frustum that ends at the node, the share of its axial length from
the node toward its parent.  0 is the node, 1 its parent; the soma is node 0 with fraction 0.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.tree import Cable

Index = NDArray[np.int64]
Real = NDArray[np.float64]

# Fractions count in steps of 2^-50: the pieces of a frustum are then exact, and none is lost in rounding.
_STEPS = 2.0**50


@dataclass(frozen=True, eq=False)
class Sited:
    """A cell with a node at every place asked for.

    Attributes
    ----------
    cable : Cable
        The same cell; ``cable.node`` still maps samples. A node made by a cut has the type code and the
        sample of the frustum that was cut.
    node : ndarray of int64, shape (sites,)
        The node of each place in `cable`; equal places share a node.
    """

    cable: Cable
    node: Index


def with_sites(cable: Cable, node: Index, fraction: Real) -> Sited:
    """Return a cell with a node at every place, frusta cut where a place lies inside one.

    Parameters
    ----------
    cable : Cable
        The cell.
    node : ndarray of int64, shape (sites,)
        The node at which the frustum of each place ends.
    fraction : ndarray, shape (sites,)
        Share of the frustum's axial length from the node toward its parent, 0 to 1; places within 2^-51 of
        a frustum of each other, or of an end, are one.

    Raises
    ------
    ValueError
        When a node does not exist or a fraction is not between 0 and 1; node 0 has no frustum.
    """
    node, fraction = np.asarray(node, np.int64), np.asarray(fraction, np.float64)
    _check(cable, node, fraction)
    steps = np.rint(fraction * _STEPS).astype(np.int64)
    at_start = steps == int(_STEPS)
    node, steps = np.where(at_start, cable.parent[node], node), np.where(at_start, 0, steps)
    inside = steps > 0
    # Along each frustum from its start to its end, as parents stand before their children.
    keys = np.stack((node[inside], -steps[inside]), axis=1)
    cuts, cut_of_site = np.unique(keys, axis=0, return_inverse=True)
    of, share = cuts[:, 0], -cuts[:, 1] / _STEPS
    added = np.bincount(of, minlength=len(cable.parent))
    moved = np.arange(len(cable.parent)) + np.cumsum(added)
    made = of + np.arange(len(of))
    place = moved[node]
    place[inside] = made[cut_of_site.reshape(-1)]
    return Sited(_cut(cable, share, made, moved, added), place)


def _check(cable: Cable, node: Index, fraction: Real) -> None:
    exists = (node >= 0) & (node < len(cable.parent))
    between = (fraction >= 0) & np.where(node == 0, fraction == 0, fraction <= 1)
    wrong = np.flatnonzero(~(exists & between))
    if len(wrong):
        at = wrong[0]
        raise ValueError(
            f"read node {node[at]} with fraction {fraction[at]:g}, expected a node from 0 to "
            f"{len(cable.parent) - 1} and a fraction from 0 to 1, which is 0 at node 0"
        )


def _cut(cable: Cable, share: Real, made: Index, moved: Index, added: Index) -> Cable:
    """Return the cell with cuts at shares of frusta.

    Parameters
    ----------
    cable : Cable
        The cell.
    share : ndarray, shape (cuts,)
        How far from the frustum's end toward its start each cut lies, in the order of the new nodes.
    made : ndarray of int64, shape (cuts,)
        Number of each new node.
    moved, added : ndarray of int64, shape (nodes,)
        New number of each old node, and how many cuts its frustum has.
    """
    first = moved - added  # the piece at the start of each old frustum
    of = np.repeat(np.arange(len(moved)), added + 1)
    until = np.zeros(len(of))
    until[made] = share
    since = np.roll(until, 1)
    since[first] = 1.0
    parent = np.arange(-1, len(of) - 1)
    parent[first[1:]] = moved[cable.parent[1:]]
    r_start, r_end = cable.r_start[of], cable.r_end[of]
    return replace(
        cable,
        parent=parent,
        kind=cable.kind[of],
        r_start=since * r_start + (1.0 - since) * r_end,
        r_end=until * r_start + (1.0 - until) * r_end,
        length=cable.length[of] * (since - until),
        sample=cable.sample[of],
        node=np.where(cable.node < 0, -1, moved[cable.node]),
    )
