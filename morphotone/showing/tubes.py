"""Closed tubes around chains of frusta in space, all at once: rings, the faces between them, caps.

A tube follows frusta for as long as they bend gently. Its rings stand in the planes that halve the bends,
so that two neighbours share one ring, and are carried along without twist (parallel transport). Where the
cable branches, bends sharply or changes its radius in a step, the tube ends in a half ball about that place,
and what follows begins inside: ball and tubes overlap, nothing gapes, and every tube is closed by itself.

A regular n-gon stands for a circle; it is drawn with the circle's circumference, so that a cylinder's
lateral area is exact for any n, bent or not. With c(n) = (π/n)/tan(π/n) its sides lie c(n)·r from the axis,
so a straight frustum has the area π(r1 + r2)·sqrt(h² + c²(r1 − r2)²): too small by the share 1 − c at most,
in an all but flat disc.
"""

from dataclasses import dataclass, fields
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

Index = NDArray[np.int64]
Real = NDArray[np.float64]
Mask = NDArray[np.bool_]

# A side may lie this far inside the circle: a quarter of what light microscopy resolves (0.2 µm).
FACET_UM = 0.05
# Six sides look round enough where the rule would take fewer; 32 are enough for a radius of 10 µm, and
# thicker cable is rare or in another unit.
LEAST_SIDES, MOST_SIDES = 6, 32

# A bend is gentle up to 60 degrees, while the halving planes cut off less than this share of either frustum
# (two of them would meet at a half).
_GENTLE_COSINE, _GENTLE_SHARE = 0.5, 0.4
_SAME_RADIUS = 1e-9  # relative; what a sum of radii may be off by

HIDDEN, CABLE, SOMA = 0, 1, 2
"""Parts of the surface: ends and what lies inside others; the cable's membrane; the soma's membrane."""


@dataclass(frozen=True, eq=False)
class Frusta:
    """Frusta in space; each stands behind the one that it follows.

    Attributes
    ----------
    start, end : ndarray, shape (n, 3)
        Ends of the axis, µm.
    along : ndarray, shape (n, 3)
        Unit vector of the axis, from start to end.
    r_start, r_end, length : ndarray, shape (n,)
        µm.
    follows : ndarray of int64, shape (n,)
        The frustum at whose end this one starts; -1 for none.
    node_start, node_end : ndarray of int64, shape (n,)
        The nodes at the two ends.
    part : ndarray of int64, shape (n,)
        What the lateral surface is: `CABLE`, `SOMA` or `HIDDEN`.
    round_start, round_end : ndarray of bool, shape (n,)
        Ends that are rounded though no other frustum joins there.
    """

    start: Real
    end: Real
    along: Real
    r_start: Real
    r_end: Real
    length: Real
    follows: Index
    node_start: Index
    node_end: Index
    part: Index
    round_start: Mask
    round_end: Mask

    def __len__(self) -> int:
        return len(self.length)

    def take(self, rows: Any) -> Self:
        """Return some of them, in the order asked for; `follows` keeps its numbers."""
        return type(self)(*(getattr(self, field.name)[rows] for field in fields(self)))


@dataclass(frozen=True, eq=False)
class Surface:
    """Triangles.

    Attributes
    ----------
    vertices, normals : ndarray, shape (vertices, 3)
        µm; outward unit vectors of the smooth surface.
    node : ndarray of int64, shape (vertices,)
        The node each vertex belongs to.
    faces : ndarray of int64, shape (faces, 3)
        Counter-clockwise from outside.
    part : ndarray of int64, shape (faces,)
        `HIDDEN`, `CABLE` or `SOMA`.
    """

    vertices: Real
    normals: Real
    node: Index
    faces: Index
    part: Index


def sides(radius: Real) -> Index:
    """Return the even number of sides with which no side lies more than `FACET_UM` inside the circle.

    The gap is r(1 − cos(π/n)), so n = π/arccos(1 − gap/r); within `LEAST_SIDES` and `MOST_SIDES`.
    """
    half_turn = np.arccos(1.0 - np.minimum(FACET_UM / radius, 1.0))
    even = 2 * np.ceil(np.pi / (2.0 * half_turn))
    number: Index = np.clip(even, LEAST_SIDES, MOST_SIDES).astype(np.int64)
    return number


def inner_share(n: Index) -> Real:
    """Return c(n), how far from the axis the sides of a polygon with the circle's circumference lie."""
    quotient: Real = (np.pi / n) / np.tan(np.pi / n)
    return quotient


@dataclass(frozen=True, eq=False)
class _Runs:
    """Frusta in the order of their tubes, and the tubes.

    Attributes
    ----------
    frusta : Frusta
    first, count, sides : ndarray of int64, shape (tubes,)
        First frustum, number of frusta and of sides of each tube.
    round_start, round_end : ndarray of bool, shape (tubes,)
    """

    frusta: Frusta
    first: Index
    count: Index
    sides: Index
    round_start: Mask
    round_end: Mask


def tubes(frusta: Frusta) -> tuple[Surface, Real]:
    """Return the closed tubes around frusta, and the lateral area that each would have if it did not bend.

    Parameters
    ----------
    frusta : Frusta
        One or more, none of them without length and with equal radii.

    Returns
    -------
    Surface
        Tube by tube, ring by ring.
    ndarray, shape (n,)
        Lateral area of each straight frustum with its number of sides, µm2, in the order given.
    """
    goes_on, at_start, at_end = _joints(frusta)
    runs, order = _runs(frusta, goes_on, at_start | frusta.round_start, at_end | frusta.round_end)
    straight = np.empty(len(frusta))
    straight[order] = _straight_areas(runs)
    return _skin(runs, _rings(runs)), straight


def _joints(frusta: Frusta) -> tuple[Mask, Mask, Mask]:
    """Return which frusta go on the tube of the one they follow, and which starts and ends are rounded.

    A start no wider than the ball that ends the frustum before is a disc inside it.
    """
    above = frusta.follows
    follows = above >= 0
    followers = np.bincount(above[follows], minlength=len(frusta))
    cosine = np.einsum("ij,ij->i", frusta.along, frusta.along[above])
    cosine = np.clip(cosine, -1.0, 1.0)
    half_tangent = np.sqrt((1.0 - cosine) / np.maximum(1.0 + cosine, np.finfo(float).tiny))
    shorter = np.minimum(frusta.length, frusta.length[above])
    goes_on = follows & (followers[above] == 1) & (cosine >= _GENTLE_COSINE)
    wider = (frusta.r_start - frusta.r_end[above]) / frusta.r_start
    goes_on &= np.abs(wider) <= _SAME_RADIUS
    goes_on &= frusta.r_start * half_tangent <= _GENTLE_SHARE * shorter
    return goes_on, follows & (wider > _SAME_RADIUS), followers > 0


def _runs(frusta: Frusta, goes_on: Mask, round_start: Mask, round_end: Mask) -> tuple[_Runs, Index]:
    """Return the tubes, and the old places of the frusta in their order."""
    head = np.where(goes_on, frusta.follows, np.arange(len(frusta)))
    while not np.array_equal(head, head[head]):  # doubles the stretch of tube seen each time
        head = head[head]
    order = np.argsort(head, kind="stable")
    first = np.flatnonzero(~goes_on[order])
    count = np.diff(np.append(first, len(order)))
    ordered = frusta.take(order)
    thickest = np.maximum.reduceat(np.maximum(ordered.r_start, ordered.r_end), first)
    last = first + count - 1
    return _Runs(
        ordered, first, count, sides(thickest), round_start[order][first], round_end[order][last]
    ), order


def _straight_areas(runs: _Runs) -> Real:
    frusta = runs.frusta
    drop = inner_share(np.repeat(runs.sides, runs.count)) * (frusta.r_start - frusta.r_end)
    areas: Real = np.pi * (frusta.r_start + frusta.r_end) * np.hypot(frusta.length, drop)
    return areas


@dataclass(frozen=True, eq=False)
class _Rings:
    """Rings in the order of the tubes; the first and the last of a tube are single points.

    Attributes
    ----------
    tube : ndarray of int64, shape (rings,)
    frustum : ndarray of int64, shape (rings,)
        The one in whose frame the ring stands.
    centre, plane : ndarray, shape (rings, 3)
        µm; a vector at right angles to the ring's plane.
    node : ndarray of int64, shape (rings,)
    radius : ndarray, shape (rings,)
        Of the corners, µm; 0 of a point.
    size : ndarray of int64, shape (rings,)
        Number of corners; 1 of a point.
    lean : ndarray, shape (rings, 2)
        The outward normal's parts away from the axis and along it.
    part : ndarray of int64, shape (rings,)
        Of the surface from the ring to the next.
    """

    tube: Index
    frustum: Index
    centre: Real
    plane: Real
    node: Index
    radius: Real
    size: Index
    lean: Real
    part: Index


def _rings(runs: _Runs) -> _Rings:
    """Return the rings of all tubes: a cap, one ring at the start and one at each frustum's end, a cap."""
    frusta = runs.frusta
    quarter = (runs.sides + 3) // 4  # steps from the rim of a half ball to its pole, as long as a side
    cap_start, cap_end = np.where(runs.round_start, quarter, 1), np.where(runs.round_end, quarter, 1)
    count = cap_start + runs.count + 1 + cap_end
    tube = np.repeat(np.arange(len(count)), count)
    step = np.arange(len(tube)) - (np.cumsum(count) - count)[tube] - cap_start[tube]
    beyond = step - runs.count[tube]  # above 0 in the cap at the end, as step is below 0 in that at the start
    along = np.clip(step, 0, runs.count[tube])
    frustum = runs.first[tube] + np.maximum(along - 1, 0)
    after = np.minimum(frustum + 1, len(frusta) - 1)
    is_start, inner = along == 0, (step > 0) & (beyond < 0)
    raised = np.where(step < 0, step / cap_start[tube], np.maximum(beyond, 0) / cap_end[tube])
    point = np.abs(raised) == 1.0
    dome = np.where(step < 0, runs.round_start[tube], runs.round_end[tube])
    angle = np.where(dome, raised, 0.0) * (np.pi / 2)
    n = runs.sides[tube]
    radius = np.where(is_start, frusta.r_start[frustum], frusta.r_end[frustum])
    radius *= (np.pi / n) / np.sin(np.pi / n)
    centre = np.where(is_start[:, None], frusta.start[frustum], frusta.end[frustum])
    centre += (radius * np.sin(angle))[:, None] * frusta.along[frustum]
    slope = np.column_stack((frusta.length, frusta.r_start - frusta.r_end))
    slope /= np.linalg.norm(slope, axis=1, keepdims=True)
    lean = slope[frustum] + np.where(inner[:, None], slope[after], 0.0)
    lean[raised != 0] = np.column_stack((np.cos(angle), np.sin(angle)))[raised != 0]
    lean[point] = np.column_stack((np.zeros(len(step)), np.sign(raised)))[point]
    ahead = np.minimum(runs.first[tube] + along, len(frusta) - 1)
    return _Rings(
        tube,
        frustum,
        centre,
        frusta.along[frustum] + np.where(inner[:, None], frusta.along[after], 0.0),
        np.where(is_start, frusta.node_start[frustum], frusta.node_end[frustum]),
        np.where(point, 0.0, radius * np.cos(angle)),
        np.where(point, 1, n),
        lean,
        np.where((step >= 0) & (beyond < 0), frusta.part[ahead], HIDDEN),
    )


def _frames(runs: _Runs) -> tuple[Real, Real, Real]:
    """Return two vectors across each frustum's axis, and the angle of the first corner from the first.

    The vectors are those of Duff et al. 2017 (Building an orthonormal basis, revisited, JCGT 6(1):1–8); the
    angles undo what they turn by between neighbours of a tube when one is swung into the next (the least
    rotation that takes one axis to the other).
    """
    along = runs.frusta.along
    x, y, z = along.T
    sign = np.where(z < 0, -1.0, 1.0)
    a = -1.0 / (sign + z)
    b = x * y * a
    u = np.column_stack((1.0 + sign * x * x * a, sign * b, -sign * x))
    v = np.column_stack((b, sign + y * y * a, -y))
    before = np.arange(len(along)) - 1
    before[runs.first] = runs.first
    lost = np.einsum("ij,ij->i", u[before], along) / (1.0 + np.einsum("ij,ij->i", along[before], along))
    swung = u[before] - lost[:, None] * (along[before] + along)
    turn = np.arctan2(np.einsum("ij,ij->i", swung, v), np.einsum("ij,ij->i", swung, u))
    turn[runs.first] = 0.0
    total = np.cumsum(turn)
    return u, v, total - np.repeat(total[runs.first], runs.count)


def _skin(runs: _Runs, rings: _Rings) -> Surface:
    """Return the corners of all rings, and the triangles between each ring and the next of its tube."""
    u, v, phase = _frames(runs)
    start = np.cumsum(rings.size) - rings.size
    ring = np.repeat(np.arange(len(rings.size)), rings.size)
    corner = np.arange(len(ring)) - start[ring]
    frustum = rings.frustum[ring]
    angle = 2.0 * np.pi * corner / rings.size[ring] + phase[frustum]
    across = np.cos(angle)[:, None] * u[frustum] + np.sin(angle)[:, None] * v[frustum]
    axis, plane = runs.frusta.along[frustum], rings.plane[ring]
    shift = np.einsum("ij,ij->i", across, plane) / np.einsum("ij,ij->i", axis, plane)
    out = across - shift[:, None] * axis
    vertices = rings.centre[ring] + rings.radius[ring, None] * out
    away, ahead = rings.lean[ring].T
    normals = away[:, None] * out + ahead[:, None] * plane
    normals /= np.linalg.norm(normals, axis=1, keepdims=True)
    faces, of = _faces(runs, rings, start)
    return Surface(vertices, normals, rings.node[ring], faces, rings.part[of])


def _faces(runs: _Runs, rings: _Rings, start: Index) -> tuple[Index, Index]:
    """Return the triangles, two a side or one where a ring is a point, and the ring each begins at."""
    here = np.flatnonzero(rings.tube[:-1] == rings.tube[1:])
    n = runs.sides[rings.tube[here]]
    of = np.repeat(here, n)
    side = np.arange(len(of)) - np.repeat(np.cumsum(n) - n, n)
    a, next_a, b, next_b = (
        start[ring] + (side + step) % rings.size[ring] for ring in (of, of + 1) for step in (0, 1)
    )
    pairs = np.stack((np.column_stack((a, next_a, next_b)), np.column_stack((a, next_b, b))), axis=1)
    kept = np.column_stack((rings.size[of] > 1, rings.size[of + 1] > 1))
    return pairs[kept], np.repeat(of, 2)[kept.ravel()]
