"""Named families of trees as SWC text, and what can be done to a file without changing the neuron.

Every family is deterministic. Coordinates and radii are written with all digits of a double.
"""

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from math import cos, pi, sin, sqrt

import numpy as np

SOMA, AXON, BASAL, APICAL = 1, 2, 3, 4


@dataclass(frozen=True)
class Row:
    """One sample of a file: number, domain, position, radius and parent's number (um)."""

    number: int
    kind: int
    at: tuple[float, float, float]
    r: float
    parent: int


@dataclass
class Tree:
    """Rows in file order, grown one sample at a time."""

    rows: list[Row] = field(default_factory=list)

    def add(self, at, r, parent=-1, kind=BASAL):
        """Append a sample and return its number."""
        number = 1 + max([0, *(row.number for row in self.rows[-1:])])
        self.rows.append(Row(number, kind, tuple(float(c) for c in at), float(r), parent))
        return number

    def grow(self, parent, step, r, kind=BASAL):
        """Append a sample at a step (dx, dy, dz) from its parent."""
        origin = self.row(parent).at
        return self.add([o + s for o, s in zip(origin, step, strict=True)], r, parent, kind)

    def row(self, number):
        """Return the row of a number, in a file that counts from 1."""
        return self.rows[number - 1]

    def text(self):
        """Return the file."""
        return text_of(self.rows)


def text_of(rows):
    """Return the SWC text of rows."""
    return "".join(
        f"{row.number} {row.kind} {row.at[0]!r} {row.at[1]!r} {row.at[2]!r} {row.r!r} {row.parent}\n"
        for row in rows
    )


def rows_of(swc):
    """Return the rows of SWC text, by splitting at blanks."""
    fields = [line.split() for line in swc.splitlines()]
    return [
        Row(int(n), int(k), (float(x), float(y), float(z)), float(r), int(p))
        for n, k, x, y, z, r, p in fields
    ]


# ---------------------------------------------------------------- families without a soma


def cylinder(length=1000.0, diameter=4.0, pieces=1):
    """An untapered cable along x."""
    tree = Tree()
    last = tree.add((0, 0, 0), diameter / 2)
    for k in range(1, pieces + 1):
        last = tree.add((length * k / pieces, 0, 0), diameter / 2, last)
    return tree.text()


def frustum(length=200.0, d_start=4.0, d_end=1.0):
    """One linear taper along x."""
    tree = Tree()
    tree.add((0, 0, 0), d_start / 2)
    tree.add((length, 0, 0), d_end / 2, 1)
    return tree.text()


def unequal_cylinders(lengths=(500.0, 800.0, 1200.0), diameters=(2.0, 1.0, 1.5)):
    """Cylinders of different size from one point; each starts at a sample of its own radius."""
    tree = Tree()
    root = tree.add((0, 0, 0), max(diameters) / 2)
    for k, (length, d) in enumerate(zip(lengths, diameters, strict=True)):
        start = tree.grow(root, (0, 0, 0), d / 2)
        angle = 2 * pi * k / len(lengths)
        tree.grow(start, (length * cos(angle), length * sin(angle), 0), d / 2)
    return tree.text()


def star(arms=7):
    """Many tapering arms from one point, the literal radius of the centre at every start."""
    rng = np.random.default_rng(11)
    tree = Tree()
    centre = tree.add((0, 0, 0), 3.0)
    for k in range(arms):
        at = centre
        for r in (1.5, 0.8, 0.3):
            length = rng.uniform(20, 200)
            at = tree.grow(at, (length * cos(k), length * sin(k), 10.0), r * rng.uniform(0.7, 1.4))
    return tree.text()


def caterpillar(legs=8):
    """A trunk with one short twig at every sample."""
    tree = Tree()
    trunk = tree.add((0, 0, 0), 2.0)
    for k in range(legs):
        trunk = tree.grow(trunk, (40, 0, 0), 2.0 - 0.2 * k, APICAL)
        tree.grow(trunk, (0, 15 + k, 0), 0.3)
    return tree.text()


def comb(teeth=6):
    """A thin back with long teeth of three samples each."""
    tree = Tree()
    back = tree.add((0, 0, 0), 0.6)
    for _ in range(teeth):
        back = tree.grow(back, (60, 0, 0), 0.6)
        tooth = back
        for _ in range(3):
            tooth = tree.grow(tooth, (0, 70, 5), 0.4)
    return tree.text()


def rall_neuron(trees=6, orders=3, L=1.0, d=4.0, R_m=1e4, R_i=100.0, branch_points=None):
    """Trees with symmetric branching and the 3/2 rule, all tips at the electrotonic distance L (Rall 1962).

    Every branch starts with a coincident sample of its own radius, so that all pieces are cylinders.
    """
    shares = branch_points or [L * (k + 1) / (orders + 1) for k in range(orders)]
    ends = [0.0, *shares, L]
    tree = Tree()
    root = tree.add((0, 0, 0), d / 2)
    for k in range(trees):
        fork(tree, root, d, ends, 2 * pi * k / trees, pi / trees, R_m / R_i)
    return tree.text()


def fork(tree, parent, d, ends, angle, spread, ratio):
    """Grow one branch between the first two electrotonic ends, then both its daughters; d' = d/2^(2/3)."""
    length = (ends[1] - ends[0]) * 1e4 * sqrt(ratio * d * 1e-4 / 4)
    start = tree.grow(parent, (0, 0, 0), d / 2)
    end = tree.grow(start, (length * cos(angle), length * sin(angle), 0), d / 2)
    if len(ends) > 2:
        for side in (-1, 1):
            fork(tree, end, d / 2 ** (2 / 3), ends[1:], angle + side * spread / 2, spread / 2, ratio)


def irregular(samples=18, key=1, soma=False):
    """Random branching, tapers up to a radius ratio of 20, pieces from 5 nm to many hundreds of um."""
    rng = np.random.default_rng(key)
    tree = Tree()
    first = tree.add((0, 0, 0), 6.0 if soma else 1.0, kind=SOMA if soma else BASAL)
    if soma:
        tree.grow(first, (8.0, 0, 0), 1.0)
        tree.grow(first, (-7.0, 3.0, 0), 0.7, APICAL)
    while len(tree.rows) < samples:
        first_parent = 2 if soma else 1
        parent = int(rng.integers(max(first_parent, len(tree.rows) - 6), len(tree.rows) + 1))
        length = float(10 ** rng.uniform(-2.3, 2.9))
        direction = rng.normal(size=3)
        step = direction / np.linalg.norm(direction) * length
        r = float(np.clip(tree.row(parent).r * 20 ** rng.uniform(-1, 1), 0.05, 5.0))
        if rng.random() < 0.3:
            r = tree.row(parent).r
        tree.grow(parent, step, r, int(rng.choice([BASAL, APICAL])))
    return tree.text()


def extremes():
    """Neighbours as different as files hold: 1 nm beside 5 mm, 20-fold tapers both ways, hair and trunk."""
    tree = Tree()
    last = tree.add((0, 0, 0), 1.0)
    for step, r in ((0.001, 1.0), (5000.0, 1.0), (0.002, 1.0001), (1.0, 20.0), (3.0, 1.0), (300.0, 0.05)):
        last = tree.grow(last, (0, step, 0), r)
    tree.grow(3, (0.004, 0, 0), 0.05)
    tree.grow(3, (900.0, 0, 0), 1.0 + 1e-12)
    return tree.text()


def zero_length_joints():
    """Coincident samples on the way, at a branch point, at a tip and at the root, radii equal or not."""
    tree = Tree()
    root = tree.add((0, 0, 0), 2.0)
    twin = tree.grow(root, (0, 0, 0), 1.0)
    a = tree.grow(twin, (100, 0, 0), 1.0)
    b = tree.grow(a, (0, 0, 0), 0.5)
    c = tree.grow(a, (0, 0, 0), 0.25)
    tree.grow(b, (0, 120, 0), 0.5)
    tip = tree.grow(c, (0, -90, 0), 0.2)
    tree.grow(tip, (0, 0, 0), 0.2)
    tree.grow(root, (-50, 10, 0), 0.8)
    return tree.text()


def deep_chain(samples=100_000, length=10_000.0, diameter=2.0):
    """One unbranched cylinder of very many samples; path depth equals the number of samples."""
    x = np.linspace(0.0, length, samples)
    return "".join(
        f"{k} 3 {v!r} 0 0 {diameter / 2!r} {k - 1 if k > 1 else -1}\n" for k, v in enumerate(x.tolist(), 1)
    )


# ---------------------------------------------------------------- families with a soma


def ball_and_stick(soma_radius=10.0, length=600.0, diameter=2.0, pieces=3):
    """One spherical soma and one cylinder; the first sample lies on the sphere."""
    tree = Tree()
    last = tree.add((0, 0, 0), soma_radius, kind=SOMA)
    for k in range(pieces + 1):
        last = tree.add((soma_radius + length * k / pieces, 0, 0), diameter / 2, last)
    return tree.text()


def stem_within_the_soma(radius=5.0):
    """One sphere; the stem's first samples lie inside it, so that cable starts at the third."""
    tree = Tree()
    last = tree.add((0, 0, 0), radius, kind=SOMA)
    for x in (0.4 * radius, 0.4 * radius + 50.0):
        last = tree.add((x, 0, 0), 0.7, last)
    tree.grow(1, (0, radius, 0), 0.5)  # nothing but a point on the surface
    return tree.text()


def soma_three_points(r=5.0):
    """The three-sample convention: second and third sample one radius from the first, equal radii."""
    tree = Tree()
    tree.add((0, 0, 0), r, kind=SOMA)
    tree.add((0, -r, 0), r, 1, SOMA)
    tree.add((0, r, 0), r, 1, SOMA)
    a = tree.grow(1, (12.0, 0, 0), 1.0)
    tree.grow(a, (150.0, 0, 0), 0.5)
    tree.grow(1, (-9.0, 4.0, 0), 0.8, APICAL)
    return tree.text()


def soma_chain():
    """A row of soma samples with stems from the first, a middle and the last of them."""
    tree = Tree()
    last = tree.add((0, 0, 0), 2.0, kind=SOMA)
    for r in (5.0, 6.5, 4.0, 1.5):
        last = tree.grow(last, (3.5, 1.0, 0), r, SOMA)
    for soma, step in ((1, (-30.0, 0, 0)), (3, (0, 40.0, 0)), (5, (25.0, 5.0, 0))):
        stem = tree.grow(soma, step, 0.9)
        tree.grow(stem, [4 * s for s in step], 0.4)
    return tree.text()


def soma_outline(points=16, r=8.0):
    """A traced contour of tiny radii; stems leave from contour samples."""
    tree = Tree()
    for k in range(points):
        angle = 2 * pi * k / points
        at = (r * 1.2 * cos(angle), r * 0.8 * sin(angle), 0)
        tree.add(at, 0.1, k if k else -1, SOMA)
    for k in (1, points // 2):
        x, y, z = tree.row(k).at
        stem = tree.add((2.5 * x, 2.5 * y, z), 0.7, k)
        tree.grow(stem, (x * 5, y * 5 + 3, 20.0), 0.35)
    return tree.text()


def with_axon():
    """Soma, two dendrites and an axon that branches: constants by domain, axon left out or cut."""
    tree = Tree()
    soma = tree.add((0, 0, 0), 7.0, kind=SOMA)
    basal = tree.grow(soma, (0, -20, 0), 1.2)
    tree.grow(basal, (30, -80, 0), 0.6)
    tree.grow(basal, (-30, -90, 0), 0.5)
    apical = tree.grow(soma, (0, 15, 0), 2.0, APICAL)
    tree.grow(apical, (10, 200, 0), 0.7, APICAL)
    hillock = tree.grow(soma, (12, 0, 0), 1.0, AXON)
    first = tree.grow(hillock, (60, 0, 0), 0.5, AXON)
    tree.grow(first, (300, 0, 0), 0.3, AXON)
    tree.grow(first, (100, 80, 0), 0.25, AXON)
    collateral = tree.grow(basal, (50, 0, 0), 0.3, AXON)
    tree.grow(collateral, (200, 0, 0), 0.2, AXON)
    return tree.text()


FAMILIES: dict[str, tuple[Callable[[], str], str]] = {
    # name: (builder, soma rule that a reader would use)
    "cylinder": (lambda: cylinder(pieces=4), "none"),
    "frustum": (frustum, "none"),
    "unequal cylinders": (unequal_cylinders, "none"),
    "star": (star, "none"),
    "caterpillar": (caterpillar, "none"),
    "comb": (lambda: comb(4), "none"),
    "Rall, two trees": (lambda: rall_neuron(trees=2, orders=2), "none"),
    "irregular 1": (lambda: irregular(18, 1), "none"),
    "irregular 2": (lambda: irregular(18, 2), "none"),
    "irregular with soma": (lambda: irregular(18, 3, soma=True), "sphere"),
    "extremes": (extremes, "none"),
    "zero-length joints": (zero_length_joints, "none"),
    "ball and stick": (ball_and_stick, "sphere"),
    "stem within the soma": (stem_within_the_soma, "sphere"),
    "soma of three points": (soma_three_points, "three-point"),
    "soma chain": (soma_chain, "chain"),
    "soma outline": (soma_outline, "outline"),
    "with axon": (with_axon, "sphere"),
}
"""Small trees (at most 24 samples) for the slow reference; each name says what is special about it."""


# ---------------------------------------------------------------- the same neuron, written differently


def cut_frustum(swc, number, share):
    """Insert a sample on the frustum that ends at ``number``, its radius on the linear taper."""
    rows = rows_of(swc)
    by_number = {row.number: row for row in rows}
    end = by_number[number]
    start = by_number[end.parent]
    at = tuple(a + (b - a) * share for a, b in zip(start.at, end.at, strict=True))
    new = Row(max(by_number) + 1, end.kind, at, start.r + (end.r - start.r) * share, start.number)
    where = rows.index(end)
    rows[where : where + 1] = [new, replace(end, parent=new.number)]
    return text_of(rows)


def renumbered(swc, new_number):
    """Write other sample numbers; ``new_number`` maps old to new."""
    rows = rows_of(swc)
    return text_of(
        [replace(row, number=new_number[row.number], parent=new_number.get(row.parent, -1)) for row in rows]
    )


def reordered(swc, order):
    """Write the rows in another order (children may come before parents)."""
    rows = rows_of(swc)
    return text_of([rows[k] for k in order])


def moved(swc, matrix, shift):
    """Rotate or mirror by an orthogonal matrix, then translate (um)."""
    rows = rows_of(swc)
    positions = np.array([row.at for row in rows]) @ np.asarray(matrix).T + np.asarray(shift)
    return text_of([replace(row, at=tuple(at)) for row, at in zip(rows, positions.tolist(), strict=True)])


def scaled(swc, lengths, diameters):
    """Scale all coordinates and all radii."""
    return text_of(
        [replace(row, at=tuple(lengths * c for c in row.at), r=diameters * row.r) for row in rows_of(swc)]
    )


def rerooted(swc, number):
    """Hang the same tree from another sample; only the parents change."""
    rows = rows_of(swc)
    parent = {row.number: row.parent for row in rows}
    turned, above, here = dict(parent), -1, number
    while here != -1:
        turned[here], above, here = above, here, parent[here]
    return text_of([replace(row, parent=turned[row.number]) for row in rows])


def orthogonal(key, mirror=False):
    """Return a random rotation matrix, or a reflection."""
    rng = np.random.default_rng(key)
    q, _ = np.linalg.qr(rng.normal(size=(3, 3)))
    if (np.linalg.det(q) < 0) != mirror:
        q[:, 0] = -q[:, 0]
    return q
