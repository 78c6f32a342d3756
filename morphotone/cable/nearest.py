"""The place of the cable nearest to a point in space: on the lateral surface of the frusta, or the soma."""

from collections.abc import Iterator
from itertools import chain
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree

from morphotone.cable.traced import SPHERES, Traced
from morphotone.cable.tree import Cable

Index = NDArray[np.int64]
Real = NDArray[np.float64]
Mask = NDArray[np.bool_]

_POINTS_AT_ONCE = 1024
_CANDIDATES_AT_ONCE = 500_000  # bounds the memory: thousands of frusta may be about equally far
_ROUNDING = 1e-9  # share by which a search radius is widened, so that rounding loses no candidate


class Nearest(NamedTuple):
    """Where points in space lie on a cell, shape (points,) each.

    Attributes
    ----------
    node : ndarray of int64
        The node at the end of the frustum, 0 for the soma.
    fraction : ndarray
        Share of the frustum's axial length from the node toward its parent.
    moved_um : ndarray
        Distance to that place on the surface, µm, also from inside the cable; 0 inside the soma.
    in_soma : ndarray of bool
        Whether that is the soma.
    """

    node: Index
    fraction: Real
    moved_um: Real
    in_soma: Mask


class _Cones(NamedTuple):
    """Truncated cones in space: where their axes start and end, and the radii there, µm."""

    start: Real  # (n, 3)
    end: Real  # (n, 3)
    r_start: Real  # (n,)
    r_end: Real  # (n,)


def nearest_places(cable: Cable, points: Real) -> Nearest:
    """Put points in space on the nearest point of a cell's surface.

    Parameters
    ----------
    cable : Cable
        As `morphotone.cable.tree.build` makes it, before any cut at sites.
    points : ndarray, shape (points, 3)
        µm, finite, in the frame of ``cable.traced``: after shrinkage correction.

    Notes
    -----
    The surface is the lateral surface of every frustum, and the soma: its sphere, or where a chain of
    samples makes the soma, the spheres of the samples and the frusta between them.  A point inside the
    soma belongs to it.  In the half-plane through a frustum's axis and the point the surface is a line
    segment, so that the nearest point is that of a segment; what lies where is exact, only the choice of
    candidates uses an index.
    """
    points = np.asarray(points, np.float64).reshape(-1, 3)
    node, fraction, moved = _on_frusta(_cones(cable), points)
    to_soma = _distance_to_soma(cable.traced, points)
    in_soma = to_soma <= moved
    node[in_soma], fraction[in_soma] = 0, 0.0
    return Nearest(node, fraction, np.minimum(to_soma, moved), in_soma)


def positions(cable: Cable, node: Index, fraction: Real) -> Real:
    """Return where on the cable's axis places lie, µm, shape (places, 3), in the frame of ``cable.traced``.

    Parameters
    ----------
    cable : Cable
        As `morphotone.cable.tree.build` makes it, before any cut at sites.
    node, fraction : ndarray, shape (places,)
        As `morphotone.cable.sites.with_sites` takes them.
    """
    cones = _cones(cable)
    origin = cable.traced.position[cable.sample[:1]]
    end, start = (np.concatenate((origin, ends)) for ends in (cones.end, cones.start))
    share = np.asarray(fraction)[:, None]
    return (1.0 - share) * end[node] + share * start[node]


def _cones(cable: Cable) -> _Cones:
    """Return where the frustum that ends at each node but the first lies; a stem's starts at the soma."""
    traced, ends = cable.traced, cable.sample[1:]
    position, above = traced.position, traced.parent[ends]
    tip = position[ends]
    origin = np.where(
        traced.stem[ends, None] & (traced.soma.rule in SPHERES), traced.soma.centre, position[above]
    )
    whole, span = traced.length[ends], np.linalg.norm(origin - tip, axis=1)
    start = np.where(traced.stem[ends, None], tip + (origin - tip) * (whole / span)[:, None], origin)
    end = start + (tip - start) * traced.share[ends, None]
    return _Cones(start, end, cable.r_start[1:], cable.r_end[1:])


def _on_frusta(cones: _Cones, points: Real) -> tuple[Index, Real, Real]:
    """Return for each point node, fraction and distance of the nearest frustum; infinite without any."""
    found = np.zeros(len(points), np.int64), np.zeros(len(points)), np.full(len(points), np.inf)
    if not len(cones.r_end):
        return found
    balls = _balls(cones)
    for first in range(0, len(points), _POINTS_AT_ONCE):
        some = slice(first, first + _POINTS_AT_ONCE)
        for whole, part in zip(found, _search(cones, balls, points[some]), strict=True):
            whole[some] = part
    return found


class _Balls(NamedTuple):
    """Balls of about one size that together hold some of the frusta."""

    tree: cKDTree  # of their centres
    radius: float  # of the largest, µm
    of: Index  # (balls,) the cone each one holds a part of


def _balls(cones: _Cones) -> list[_Balls]:
    """Cover the frusta with balls, in classes of size, so that a thick one widens no other's search.

    A frustum much longer than the mean or its own width is covered by several: at most three a frustum
    on average.
    """
    axis = cones.end - cones.start
    length, thick = np.linalg.norm(axis, axis=1), np.maximum(cones.r_start, cones.r_end)
    parts = np.maximum(np.ceil(length / np.maximum(2.0 * thick, 0.5 * length.mean())), 1.0).astype(np.int64)
    of = np.repeat(np.arange(len(parts)), parts)
    step = np.arange(len(of)) - (np.cumsum(parts) - parts)[of]
    centre = cones.start[of] + axis[of] * ((step + 0.5) / parts[of])[:, None]
    radius = np.hypot(0.5 * length / parts, thick)[of]
    size = np.floor(np.log2(radius))
    return [
        _Balls(cKDTree(centre[alike]), float(radius[alike].max()), of[alike])
        for alike in (size == each for each in np.unique(size))
    ]


def _search(cones: _Cones, classes: list[_Balls], points: Real) -> tuple[Index, Real, Real]:
    """Return node, fraction and distance of the nearest frustum, from all whose balls reach near enough."""
    guesses = [balls.of[balls.tree.query(points)[1]] for balls in classes]
    bound = np.min([_to_cones(cones, guess, points)[1] for guess in guesses], axis=0)
    reach = [(bound + balls.radius) * (1.0 + _ROUNDING) for balls in classes]
    counts = sum(
        balls.tree.query_ball_point(points, near, return_length=True)
        for balls, near in zip(classes, reach, strict=True)
    )
    portions = np.cumsum(counts) // _CANDIDATES_AT_ONCE
    parts = [
        _nearest_of(cones, classes, points[portion], [near[portion] for near in reach])
        for portion in np.split(np.arange(len(points)), np.flatnonzero(np.diff(portions)) + 1)
    ]
    node, fraction, distance = (np.concatenate(part) for part in zip(*parts, strict=True))
    return node, fraction, distance


def _nearest_of(
    cones: _Cones, classes: list[_Balls], points: Real, reach: list[Real]
) -> tuple[Index, Real, Real]:
    """Return node, fraction and distance of the nearest frustum among those with a ball within reach."""
    rows = np.arange(len(points))
    point, cone = [], []
    for balls, radius in zip(classes, reach, strict=True):
        near = balls.tree.query_ball_point(points, radius)
        counts = np.fromiter(map(len, near), np.int64, len(near))
        point.append(np.repeat(rows, counts))
        cone.append(balls.of[np.fromiter(chain.from_iterable(near), np.int64, counts.sum())])
    at, candidates = np.concatenate(point), np.concatenate(cone)
    share, distance = _to_cones(cones, candidates, points[at])
    order = np.lexsort((candidates, distance, at))
    best = order[np.searchsorted(at[order], rows)]
    return candidates[best] + 1, 1.0 - share[best], distance[best]


def _to_cones(cones: _Cones, which: Index, points: Real) -> tuple[Real, Real]:
    """Return the nearest point of one lateral surface to each point: share from the start, distance, µm."""
    offset, axis = points - cones.start[which], cones.end[which] - cones.start[which]
    length = np.linalg.norm(axis, axis=1)
    along = np.einsum("ij,ij->i", offset, axis) / length
    beside = np.linalg.norm(offset - axis * (along / length)[:, None], axis=1) - cones.r_start[which]
    grows = cones.r_end[which] - cones.r_start[which]
    share = np.clip((along * length + beside * grows) / (length**2 + grows**2), 0.0, 1.0)
    return share, np.hypot(along - share * length, beside - share * grows)


def _distance_to_soma(traced: Traced, points: Real) -> Real:
    """Return the distance of each point from the soma, µm: 0 inside, infinite where there is no soma."""
    distance = np.full(len(points), np.inf)
    for centre, radius in _soma_spheres(traced):
        distance = np.minimum(distance, np.linalg.norm(points - centre, axis=1) - radius)
    for cone in _soma_cones(traced):
        distance = np.minimum(distance, _outside(cone, points))
    outside: Real = np.maximum(distance, 0.0)
    return outside


def _soma_spheres(traced: Traced) -> Iterator[tuple[Real, float]]:
    """Yield centres and radii, µm: of the soma's sphere, or of the samples of a chain, where stems start."""
    soma = traced.soma
    if soma.rule == "chain":
        yield from zip(traced.position[soma.members], traced.radius[soma.members], strict=True)
    elif len(soma.members):
        yield soma.centre, soma.radius


def _soma_cones(traced: Traced) -> Iterator[_Cones]:
    """Yield the frusta between the samples of a chain, one by one."""
    if traced.soma.rule != "chain":
        return
    members = traced.soma.members
    for row in members[np.isin(traced.parent[members], members)]:
        ends = np.array([traced.parent[row], row])
        (start, end), (r_start, r_end) = traced.position[ends], traced.radius[ends]
        if (start != end).any():
            yield _Cones(start[None], end[None], r_start[None], r_end[None])


def _outside(cone: _Cones, points: Real) -> Real:
    """Return how far outside one solid frustum's lateral surface points lie, µm; 0 inside it."""
    axis = cone.end - cone.start
    along = (points - cone.start) @ axis[0] / (axis @ axis[0])
    beside = np.linalg.norm(points - cone.start - along[:, None] * axis, axis=1)
    within = (along >= 0) & (along <= 1) & (beside <= cone.r_start + along * (cone.r_end - cone.r_start))
    _, distance = _to_cones(cone, np.zeros(len(points), np.int64), points)
    distance[within] = 0.0
    return distance
