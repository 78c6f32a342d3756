"""Where a cell's frusta lie in space: its cable, its soma, and what joins the two."""

from dataclasses import fields, replace

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.traced import SPHERES
from morphotone.cable.tree import Cable
from morphotone.reading.reconstruction import parents_first
from morphotone.showing.tubes import CABLE, HIDDEN, SOMA, Frusta

Index = NDArray[np.int64]
Real = NDArray[np.float64]


def frusta_of(cable: Cable) -> Frusta:
    """Return the frusta of a cell: those of a chain soma, links from the soma to its cable, the cable's own.

    Notes
    -----
    Cable begins at the soma's surface. So that nothing gapes there, a link of its first radius leads to it
    from the soma's centre, or in a chain from the soma sample that it hangs from; it is no membrane. The ends
    of a chain are rounded, since its stems begin one radius away; that is no membrane either.
    """
    own = _cable(cable)
    if not len(cable.traced.soma.members):
        return own
    chain = _chain(cable) if cable.traced.soma.rule == "chain" else own.take(slice(0))
    links, linked = _links(cable, own)
    follows = np.where(own.follows >= 0, own.follows + len(chain) + len(links), -1)
    follows[linked] = len(chain) + np.arange(len(linked))
    parts = chain, links, replace(own, follows=follows)
    return Frusta(*(np.concatenate([getattr(part, f.name) for part in parts]) for f in fields(Frusta)))


def _cable(cable: Cable) -> Frusta:
    """Return the cable's frusta; the row of each is its node less one."""
    traced = cable.traced
    sample = cable.sample[1:]
    above = traced.parent[sample]
    origin = np.where(_from_centre(cable)[sample, None], traced.soma.centre, traced.position[above])
    along = traced.position[sample] - origin
    reach = np.linalg.norm(along, axis=1)
    along /= reach[:, None]
    # A stem starts at the soma's surface, and a frustum where an axon is cut ends before its sample.
    start = np.where(
        traced.stem[sample, None],
        traced.position[sample] - traced.length[sample, None] * along,
        traced.position[above],
    )
    end = np.where(
        traced.share[sample, None] < 1.0,
        start + cable.length[1:, None] * along,
        traced.position[sample],
    )
    alone = np.count_nonzero(cable.parent == 0) == 1
    at_root = cable.parent[1:] == 0
    no = np.zeros(len(sample), bool)
    return Frusta(
        start, end, along, cable.r_start[1:], cable.r_end[1:], cable.length[1:],
        cable.parent[1:] - 1, cable.parent[1:], np.arange(1, len(cable.parent)),
        np.full(len(sample), CABLE), no if alone else at_root, no,
    )  # fmt: skip


def _from_centre(cable: Cable) -> NDArray[np.bool_]:
    """Return which samples' frusta point away from the soma's centre instead of the parent sample."""
    return cable.traced.stem & (cable.traced.soma.rule in SPHERES)


def _links(cable: Cable, own: Frusta) -> tuple[Frusta, Index]:
    """Return what leads through the soma to the cable, and the rows of the cable's frusta led to."""
    traced = cable.traced
    rows = np.flatnonzero(cable.parent[1:] == 0)
    if traced.soma.rule == "chain":
        in_soma = np.zeros(len(traced.parent), bool)
        in_soma[traced.soma.members] = True
        above = traced.parent[cable.sample[rows + 1]]
        while not in_soma[above].all():
            above = np.where(in_soma[above], above, traced.parent[above])
        origin = traced.position[above]
    else:
        origin = np.broadcast_to(traced.soma.centre, (len(rows), 3))
    far = np.linalg.norm(own.start[rows] - origin, axis=1) > 0
    rows, origin = rows[far], origin[far]
    radius = own.r_start[rows]
    return _in_soma(origin, own.start[rows], radius, radius, np.full(len(rows), -1), HIDDEN), rows


def _chain(cable: Cable) -> Frusta:
    """Return the frusta of a chain soma; samples in one place have none between them."""
    traced = cable.traced
    members = traced.soma.members
    place = np.full(len(traced.parent) + 1, -1)
    place[members] = np.arange(len(members))
    local = place[traced.parent[members]]
    order = parents_first(local)
    order = order[local[order] >= 0]
    start, end = traced.position[members[local[order]]], traced.position[members[order]]
    long = np.linalg.norm(end - start, axis=1) > 0
    number = np.full(len(members), -1)
    for row, member in enumerate(order[long]):
        number[member] = row
    for member in order[~long]:
        number[member] = number[local[member]]
    ends = members[order[long]]
    radii = traced.radius[traced.parent[ends]], traced.radius[ends]
    chain = _in_soma(start[long], end[long], *radii, number[local[order[long]]], SOMA)
    return replace(chain, round_start=chain.follows < 0, round_end=np.ones(len(chain), bool))


def _in_soma(start: Real, end: Real, r_start: Real, r_end: Real, follows: Index, part: int) -> Frusta:
    """Return frusta at node 0."""
    along = end - start
    length = np.linalg.norm(along, axis=1)
    at_soma, no = np.zeros(len(length), np.int64), np.zeros(len(length), bool)
    return Frusta(
        start, end, along / length[:, None], r_start, r_end, length,
        follows, at_soma, at_soma, np.full(len(length), part), no, no,
    )  # fmt: skip
