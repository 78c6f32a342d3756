"""The soma: which samples form it, its membrane area and its centre."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.errors import AssumptionError

SOMA_RULES = ("auto", "sphere", "three-point", "chain", "outline", "none")
SOMA = 1  # type code of the SWC standard

# Every number below is our choice, as a share that makes it independent of the cell's size.
# The convention writes one radius three times, and files round it: a hundredth is rounding of a small soma.
EQUAL_RADII_SHARE = 0.01
# "About one radius": within a tenth, sphere and chain agree to a tenth as well, so that little hangs on it.
OFFSET_SHARE = 0.1
# Samples of a contour carry the width of a pen or nothing; radii of a traced cell body are of the order of
# its spread. A tenth keeps slender chains chains.
OUTLINE_RADIUS_SHARE = 0.1
# A contour goes around: its second extent is a fair share of its first. A straight slender chain's is not.
OUTLINE_ROUNDNESS = 0.2
OUTLINE_LEAST_SAMPLES = 4  # three samples are the convention, or enclose nothing
# Samples closer together than this share of the largest radius are one place; their frusta would be a coin.
COINCIDENT_SHARE = 0.1


@dataclass(frozen=True, eq=False)
class Soma:
    """The isopotential lump at the heart of a cell."""

    rule: str  #: the rule that was used, never "auto"; "none" without a soma
    members: NDArray[
        np.int64
    ]  #: (m,) indices of its samples, the first is nearest the root; empty for "none"
    area: float  #: membrane area, um2
    centre: NDArray[np.float64]  #: (3,) um; without a soma the first root's position
    radius: float  #: radius of the sphere with that area, um


def find_soma(
    kind: NDArray[np.int64],
    parent: NDArray[np.int64],
    position: NDArray[np.float64],
    radius: NDArray[np.float64],
    rule: str = "auto",
) -> Soma:
    """Find the soma of a cell and its membrane area.

    Parameters
    ----------
    kind, parent : (n,) int64
        Type codes; index of the parent, -1 at a root.
    position : (n, 3) float64
        um
    radius : (n,) float64
        um; one below zero counts as zero.
    rule : str, optional
        One of `SOMA_RULES`. "auto" takes the first of these that fits: sphere (one sample, or samples
        in one place: the largest radius), three-point, outline, chain.

    Returns
    -------
    Soma
        Its `rule` is the one used: a forced rule that needs several samples in different places falls back
        to "sphere" where there is only one place, and any rule to "none" where there is no type-1 sample.

    Raises
    ------
    AssumptionError
        An unknown rule.

    Notes
    -----
    sphere: 4πr² of the largest radius, centred there. three-point: 4πr² of the first sample (INCF
    swc-specification, docs/source/swc.rst). chain: lateral area of the frusta, π(r1+r2)·sqrt(h²+(r1−r2)²),
    without end caps, centred at the centroid of that surface. outline: sphere of the mean distance
    from the samples' centroid. Several separate lumps: the largest with a root, else the largest.
    """
    if rule not in SOMA_RULES:
        raise AssumptionError(f"read soma rule {rule!r}, expected one of {', '.join(SOMA_RULES)}")
    members = _main_lump(kind, parent) if rule != "none" else np.empty(0, dtype=np.int64)
    if not len(members):
        return Soma("none", members, 0.0, position[int(np.argmax(parent < 0))].copy(), 0.0)
    local = _local_parents(members, parent) if len(members) > 1 else np.array([-1])
    place, size = position[members], np.maximum(radius[members], 0.0)
    used = _fitting_rule(local, place, size, rule)
    area, centre = _SHAPES[used](local, place, size)
    return Soma(used, members, area, centre, float(np.sqrt(area / (4 * np.pi))))


def reroot(parent: NDArray[np.int64], new_root: int) -> NDArray[np.int64]:
    """Hang a tree from another of its samples.

    Parameters
    ----------
    parent : (n,) int64
        Index of the parent, -1 at a root.
    new_root : int
        Index of the sample to become the root of its tree.

    Returns
    -------
    (n,) int64
        A new array; only the path from `new_root` to its old root is turned round, so that
        parents need no longer stand before their children.
    """
    turned = parent.copy()
    turn_round(turned, new_root)
    return turned


def turn_round(parent: NDArray[np.int64], new_root: int) -> None:
    """Hang a tree from another of its samples as `reroot` does, in the array itself."""
    below, row = -1, int(new_root)
    while row >= 0:
        above = int(parent[row])
        parent[row] = below
        below, row = row, above


def _main_lump(kind: NDArray[np.int64], parent: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the samples of the main group of connected type-1 samples, its head first."""
    soma = np.flatnonzero(kind == SOMA)
    if len(soma) < 2:
        return soma
    local = _local_parents(soma, parent)
    head = np.where(local < 0, np.arange(len(soma)), local)
    while (local[head] >= 0).any():
        head = head[head]
    heads, size = np.unique(head, return_counts=True)
    rooted = parent[soma[heads]] < 0
    main = heads[np.lexsort((-size, ~rooted))[0]]
    rest = np.flatnonzero(head == main)
    lump: NDArray[np.int64] = soma[np.concatenate(([main], rest[rest != main]))]
    return lump


def _local_parents(members: NDArray[np.int64], parent: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the place of each member's parent among the members, -1 where it is none of them."""
    place = np.full(len(parent) + 1, -1, dtype=np.int64)
    place[members] = np.arange(len(members))
    return place[parent[members]]  # a root's parent -1 meets the extra last place


def _fitting_rule(
    local: NDArray[np.int64], place: NDArray[np.float64], size: NDArray[np.float64], rule: str
) -> str:
    """Return the rule to use; a forced one stands if the members lie in more than one place."""
    if len(place) == 1:
        return "sphere"
    extent = np.linalg.norm(place - place[0], axis=1).max()
    if extent <= (COINCIDENT_SHARE * size.max() if rule == "auto" else 0.0):
        return "sphere"
    if rule != "auto":
        return rule
    if _is_three_point(local, place, size):
        return "three-point"
    return "outline" if _is_outline(place, size) else "chain"


def _is_three_point(local: NDArray[np.int64], place: NDArray[np.float64], size: NDArray[np.float64]) -> bool:
    """Tell whether two samples hang from the first, with its radius and about one radius away."""
    if len(local) != 3 or local[1] != 0 or local[2] != 0:
        return False
    offset = np.linalg.norm(place[1:] - place[0], axis=1)
    equal = np.abs(size[1:] - size[0]) <= EQUAL_RADII_SHARE * size[0]
    one_radius_away = np.abs(offset - size[0]) <= OFFSET_SHARE * size[0]
    return bool(equal.all() and one_radius_away.all())


def _is_outline(place: NDArray[np.float64], size: NDArray[np.float64]) -> bool:
    """Tell whether samples with tiny radii go around something."""
    if len(place) < OUTLINE_LEAST_SAMPLES:
        return False
    from_centroid = place - place.mean(axis=0)
    spread = np.linalg.norm(from_centroid, axis=1).mean()
    extents = np.linalg.svd(from_centroid, compute_uv=False)
    return bool(
        np.median(size) <= OUTLINE_RADIUS_SHARE * spread and extents[1] >= OUTLINE_ROUNDNESS * extents[0]
    )


def _sphere(
    local: NDArray[np.int64], place: NDArray[np.float64], size: NDArray[np.float64]
) -> tuple[float, NDArray[np.float64]]:
    largest = int(np.argmax(size))
    return _sphere_area(size[largest]), place[largest].copy()


def _three_point(
    local: NDArray[np.int64], place: NDArray[np.float64], size: NDArray[np.float64]
) -> tuple[float, NDArray[np.float64]]:
    return _sphere_area(size[0]), place[0].copy()


def _outline(
    local: NDArray[np.int64], place: NDArray[np.float64], size: NDArray[np.float64]
) -> tuple[float, NDArray[np.float64]]:
    centroid = place.mean(axis=0)
    return _sphere_area(np.linalg.norm(place - centroid, axis=1).mean()), centroid


def _chain(
    local: NDArray[np.int64], place: NDArray[np.float64], size: NDArray[np.float64]
) -> tuple[float, NDArray[np.float64]]:
    """Return lateral area of the frusta and the centroid of that surface.

    The centroid of a frustum's lateral surface lies (r1 + 2 r2)/(3 (r1 + r2)) of the way from r1 to r2.
    """
    child = np.flatnonzero(local >= 0)
    start, end, r1, r2 = place[local[child]], place[child], size[local[child]], size[child]
    slant = np.hypot(np.linalg.norm(end - start, axis=1), r1 - r2)
    areas = np.pi * (r1 + r2) * slant
    total = float(areas.sum())
    if total == 0:  # no radius anywhere
        return 0.0, place.mean(axis=0)
    share = (r1 + 2 * r2) / np.maximum(3 * (r1 + r2), np.finfo(float).tiny)
    centroids = start + share[:, None] * (end - start)
    return total, areas @ centroids / total


def _sphere_area(radius: float) -> float:
    return float(4 * np.pi * radius**2)


_SHAPES = {"sphere": _sphere, "three-point": _three_point, "outline": _outline, "chain": _chain}
