"""What several checks need of one reconstruction, derived once: steps, membrane, tips, places."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from morphotone.reading.reconstruction import Reconstruction
from morphotone.reading.soma import SOMA, Soma, find_soma
from morphotone.reading.thresholds import Thresholds

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Mask = NDArray[np.bool_]

AXON = 2


@dataclass(frozen=True)
class Place:
    """Where in the file the first of several samples stands, and how many there are."""

    line: int
    sample: int
    count: int

    def __str__(self) -> str:
        return f"line {self.line}, sample {self.sample}"


@dataclass(frozen=True)
class Tally:
    """How often each positive radius occurs among some samples.

    Attributes
    ----------
    ordered : (m,) float64
        The positive radii of the samples, ascending, um.
    """

    ordered: Floats

    @property
    def total(self) -> int:
        """Number of samples tallied."""
        return len(self.ordered)

    @cached_property
    def starts(self) -> Integers:
        """Where in `ordered` each of the k different radii first stands, shape (k,)."""
        return np.flatnonzero(np.diff(self.ordered, prepend=0.0))

    @property
    def radius(self) -> Floats:
        """The different radii, shape (k,), ascending, um."""
        return self.ordered[self.starts]

    @cached_property
    def count(self) -> Integers:
        """How often each of the different radii occurs, shape (k,)."""
        return np.diff(self.starts, append=self.total)

    @cached_property
    def commonest(self) -> tuple[float, int]:
        """The radius that occurs most often (um), the least of several; and how often. Zeros for none."""
        if not self.total:
            return 0.0, 0
        best = int(self.count.argmax())
        return float(self.ordered[self.starts[best]]), int(self.count[best])

    @property
    def share(self) -> float:
        """Share of the samples that have the commonest radius; 0 for none."""
        return self.commonest[1] / max(self.total, 1)

    @property
    def median(self) -> float:
        """The (lower) median radius, um; 0 for none."""
        return float(self.ordered[(self.total - 1) // 2]) if self.total else 0.0


def tally(radius: Floats) -> Tally:
    """Count the positive values of an array of radii, shape (n,), um."""
    ordered = np.sort(radius)
    return Tally(ordered[np.searchsorted(ordered, 0.0, "right") :])


@dataclass(frozen=True)
class Measures:
    """One reconstruction and what follows from it, each derived when first asked for.

    All arrays are by sample, shape (n,), in the order of the reconstruction.
    """

    rec: Reconstruction

    @cached_property
    def hung(self) -> Mask:
        """Whether the sample has a parent."""
        hung: Mask = self.rec.parent >= 0
        return hung

    @cached_property
    def parent(self) -> Integers:
        """Index of the parent; a root is its own."""
        return np.where(self.hung, self.rec.parent, np.arange(len(self.rec.parent)))

    @cached_property
    def soma(self) -> Mask:
        """Whether the sample is a soma's."""
        soma: Mask = self.rec.kind == SOMA
        return soma

    @cached_property
    def lump(self) -> Soma:
        """The soma that is analysed, by the rule that fits it."""
        return find_soma(self.rec.kind, self.rec.parent, self.rec.position, self.rec.radius)

    @cached_property
    def neurite(self) -> Mask:
        """Whether the sample is any other than a soma's."""
        return ~self.soma

    @cached_property
    def axon(self) -> Mask:
        """Whether the sample is an axon's."""
        axon: Mask = self.rec.kind == AXON
        return axon

    @cached_property
    def inner(self) -> Mask:
        """Whether the sample and its parent are both neurite."""
        return self.hung & self.neurite & self.neurite[self.parent]

    @cached_property
    def stem(self) -> Mask:
        """Whether the sample starts a stem: a neurite whose parent is a soma sample."""
        return self.neurite & self.soma[self.parent]

    @cached_property
    def axes(self) -> Floats:
        """Coordinates x, y and z in rows, shape (3, n), um: one axis lies together in memory."""
        return np.ascontiguousarray(self.rec.position.T)

    @cached_property
    def leg(self) -> Floats:
        """Vector from the parent, shape (3, n), um; zero at a root."""
        return self.axes - self.axes.take(self.parent, axis=1)

    @cached_property
    def distance(self) -> Floats:
        """Straight distance to the parent, um; zero at a root."""
        x, y, z = self.leg
        distance: Floats = np.sqrt(x * x + y * y + z * z)
        return distance

    @cached_property
    def cable(self) -> Floats:
        """Length of cable that ends at the sample, um: from the parent, at a stem from the soma."""
        covered = np.where(self.stem, np.maximum(self.rec.radius[self.parent], 0.0), 0.0)
        return np.where(self.neurite, np.maximum(self.distance - covered, 0.0), 0.0)

    @cached_property
    def membrane(self) -> Floats:
        """Lateral area that ends at the sample, um2; to weigh findings with, so without a taper's slant."""
        radius = np.maximum(self.rec.radius, 0.0)
        start = np.where(self.inner, radius[self.parent], radius)
        return np.pi * (start + radius) * self.cable

    @cached_property
    def children(self) -> Integers:
        """Number of children."""
        return np.bincount(self.parent[self.hung], minlength=len(self.parent))

    @cached_property
    def tips(self) -> int:
        """Number of neurite tips."""
        return int(np.count_nonzero(self.neurite & (self.children == 0)))

    @cached_property
    def moved(self) -> Mask:
        """Whether a step within a neurite ends at the sample that is not zero."""
        moved: Mask = self.inner & (self.distance > 0)
        return moved

    @cached_property
    def step_count(self) -> int:
        """Number of `steps`, m."""
        return int(np.count_nonzero(self.moved))

    @cached_property
    def steps(self) -> Floats:
        """Lengths of the steps within neurites that are not zero, shape (m,), um."""
        return self.distance[self.moved]

    @cached_property
    def median_step(self) -> float:
        """Median length of `steps`, um; 0 for none."""
        return float(np.median(self.steps)) if len(self.steps) else 0.0

    @cached_property
    def extent(self) -> Floats:
        """Size of the box around all samples, shape (3,), um."""
        extent: Floats = np.ptp(self.axes, axis=1)
        return extent

    @cached_property
    def winding(self) -> float:
        """Length of all steps within neurites over the diagonal of the box: 1 for a straight line."""
        diagonal = float(np.sqrt(self.extent @ self.extent))
        return float(self.steps.sum()) / diagonal if diagonal > 0 else 0.0

    def traced(self, limits: Thresholds) -> bool:
        """Whether the neurites branch or wind, as tracings do and cylinders drawn straight do not."""
        return self.winding > limits.drawn_winding or self.tips >= limits.branched_tips

    @cached_property
    def axon_radii(self) -> Tally:
        """Radii of the axon."""
        return tally(self.rec.radius[self.axon])

    @cached_property
    def dendrite_radii(self) -> Tally:
        """Radii of every neurite that is not axon."""
        return tally(self.rec.radius[self.neurite & ~self.axon])

    @cached_property
    def neurite_radii(self) -> Tally:
        """Radii of all neurites."""
        return tally(self.rec.radius[self.neurite])

    def first(self, mask: Mask) -> Place:
        """Return the place, in the order of the file, of the first of the samples that a mask (n,) marks."""
        marked = np.flatnonzero(mask)
        index = marked[self.rec.line[marked].argmin()]
        return Place(int(self.rec.line[index]), int(self.rec.number[index]), len(marked))

    def membrane_share(self, mask: Mask) -> float:
        """Return the share of the neurites' membrane on the samples that a mask (n,) marks; 0 if none."""
        return _share(self.membrane, mask)

    def cable_share(self, mask: Mask) -> float:
        """Return the share of the cable's length that ends at the samples a mask (n,) marks; 0 if none."""
        return _share(self.cable, mask)


def _share(weight: Floats, mask: Mask) -> float:
    """Return the part of a weight (n,) that a mask (n,) marks."""
    whole = float(weight.sum())
    return float(weight[mask].sum()) / whole if whole > 0 else 0.0
