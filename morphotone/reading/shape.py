"""What the coordinates, the tree and the types show: unit, pieces, steps, depth, domains."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from morphotone.reading.findings import Finding, Severity
from morphotone.reading.measures import Floats, Integers, Mask, Measures
from morphotone.reading.thresholds import Thresholds
from morphotone.reading.wording import counted, number, percent

KNOWN_DOMAINS = range(1, 5)  # soma, axon, basal, apical
DEPTH = 2


def unit(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield unit_implausible where sizes occur that no neuron has; files too small to tell are let pass."""
    absurd, width = _absurd_sizes(measures, limits), float(measures.extent.max())
    if absurd:
        yield Finding(
            "unit_implausible",
            f"Read in units of {measures.rec.unit_um:g} µm the cell is {number(width)} µm wide, "
            f"{', '.join(absurd)}, which no neuron shows: say the file's unit with --unit-um (0.001 for "
            "nanometres, the edge in µm for voxels) or as unit_um in the assumptions file.",
        )


def _absurd_sizes(measures: Measures, limits: Thresholds) -> list[str]:
    """Describe what is too large or too small for any neuron, one phrase each."""
    radii, median, phrases = measures.neurite_radii, measures.neurite_radii.median, []
    if measures.extent.max() > limits.unit_extent_um:
        many, step = measures.step_count >= limits.few_samples, measures.median_step
        if many and step > limits.unit_step_um and measures.traced(limits):
            phrases.append(f"half of all steps are longer than {number(step)} µm")
        largest = float(measures.rec.radius.max())
        if largest > limits.unit_largest_radius_um:
            phrases.append(f"the largest radius is {number(largest)} µm")
    if radii.total >= limits.few_samples:
        half = f"half of the neurite samples have a radius of {number(median)} µm or"
        if median > limits.unit_typical_radius_um and measures.traced(limits):
            phrases.append(f"{half} more")
        if median < limits.unit_thinnest_radius_um:
            phrases.append(f"{half} less")
    return phrases


def pieces(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield piece_apart, one for each piece not connected to the soma, the longest first."""
    tree = measures.rec.tree
    if tree.max() == 0:
        return
    length: Floats = np.bincount(tree, weights=measures.cable).astype(np.float64)
    samples = np.bincount(tree)
    main = _main_tree(measures, length)
    apart = np.delete(np.arange(len(length)), main)
    apart = apart[np.argsort(-length[apart], kind="stable")]
    severity = _severity_apart(length, main, limits)
    listed = len(apart) if len(apart) <= limits.apart_listed else limits.apart_listed - 1
    for piece in apart[:listed]:
        place = measures.first(tree == piece)
        yield Finding(
            "piece_apart",
            f"A piece of {counted(int(samples[piece]), 'sample')} and {number(float(length[piece]))} "
            f"µm of cable, from {place}, is not connected to {_anchor(measures)}.",
            place.line,
            place.sample,
            severity=severity,
        )
    rest = apart[listed:]
    if len(rest):
        place = measures.first(np.isin(tree, rest))
        yield Finding(
            "piece_apart",
            f"{len(rest):,} shorter pieces of together {number(float(length[rest].sum()))} µm of "
            f"cable are not connected to {_anchor(measures)} either (first at {place}).",
            place.line,
            place.sample,
            len(rest),
            severity,
        )


def _main_tree(measures: Measures, length: Floats) -> int:
    """Return the tree that is analysed: the soma's, else the one with the most cable (um, by tree)."""
    members = measures.lump.members
    return int(measures.rec.tree[members[0]]) if len(members) else int(length.argmax())


def _anchor(measures: Measures) -> str:
    return "the soma" if measures.soma.any() else "the longest piece"


def _severity_apart(length: Floats, main: int, limits: Thresholds) -> Severity:
    """Weigh the cable (um, by tree) that lies outside the main tree."""
    whole = float(length.sum())
    share = 1 - float(length[main]) / whole if whole > 0 else 0.0
    if share > limits.apart_most:
        return "unfit"
    return "doubtful" if share > limits.apart_share else "note"


def coincident(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield samples_coincident: neurite samples at the very place of their parent."""
    mask = measures.inner & (measures.distance == 0)
    if mask.any():
        place = measures.first(mask)
        verb = "lies" if place.count == 1 else "lie"
        yield Finding(
            "samples_coincident",
            f"{counted(place.count, 'neurite sample')} {verb} exactly where the parent sample does "
            f"(first at {place}).",
            place.line,
            place.sample,
            place.count,
        )


def long_steps(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield step_long: steps that stand out of the file's own."""
    if measures.step_count < limits.few_samples or measures.distance.max() <= limits.step_least_um:
        return
    limit = max(limits.step_ratio * measures.median_step, limits.step_least_um)
    mask = measures.inner & (measures.distance > limit)
    if not mask.any():
        return
    place, share = measures.first(mask), measures.cable_share(mask)
    verb = "is" if place.count == 1 else "are"
    yield Finding(
        "step_long",
        f"{counted(place.count, 'step')} {verb} longer than {number(limit)} µm, where the median step "
        f"is {number(measures.median_step)} µm (first at {place}; longest "
        f"{number(float(measures.steps.max()))} µm; {percent(share)} of the cable).",
        place.line,
        place.sample,
        place.count,
        "doubtful" if share > limits.step_share else "note",
    )


def flat(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield flat: a tracing without depth."""
    depth, width = float(measures.extent[DEPTH]), float(measures.extent.max())
    if len(measures.soma) < limits.flat_samples or depth >= limits.flat_ratio * width:
        return
    yield Finding(
        "flat",
        f"The cell is {number(width)} µm wide and {number(depth)} µm deep: the depth was not traced, "
        "or was lost.",
    )


def depth_zigzag(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield depth_zigzag: paths that turn back steeply in z far more often than in x and y."""
    if measures.step_count < limits.zigzag_samples:
        return
    paths = [_paths(measures, stride) for stride in (1, limits.zigzag_stride)]
    shares = [path.turning_back(DEPTH) for path in paths]
    deep = max(shares)
    if deep < limits.zigzag_share:
        return
    path = paths[shares.index(deep)]
    lateral = max(path.turning_back(axis) for axis in range(DEPTH))
    if deep >= limits.zigzag_ratio * lateral:
        yield Finding(
            "depth_zigzag",
            f"Over {counted(path.stride, 'sample')} to either side the depth turns back steeply at "
            f"{percent(deep)} of the samples, against {percent(lateral)} in x or y.",
        )


@dataclass(frozen=True)
class _Paths:
    """All pairs of legs, of some samples each, that meet on the path from a sample toward the root.

    Attributes
    ----------
    stride : int
        Length of each leg, samples.
    middle : (n,) int64
        Where the leg that ends at the sample starts, and the one before it ends.
    inside : (n,) bool
        Whether both legs lie in neurites; those that reach into the soma or past the root are left out.
    leg : (3, n) float64
        The leg that ends at the sample, um.
    square : (n,) float64
        Its length squared, um2.
    """

    stride: int
    middle: Integers
    inside: Mask
    leg: Floats
    square: Floats

    def turning_back(self, axis: int) -> float:
        """Return the share of the pairs that turn back: both within 45° of the axis, in opposite senses."""
        leg = self.leg[axis]
        steep = 2 * (leg * leg) > self.square
        onward, back = steep & (leg > 0), steep & (leg < 0)
        turns = (onward & back[self.middle]) | (back & onward[self.middle])
        return int(np.count_nonzero(turns & self.inside)) / max(int(np.count_nonzero(self.inside)), 1)


def _paths(measures: Measures, stride: int) -> _Paths:
    """Return the pairs of legs of a stride."""
    middle = measures.parent
    for _ in range(stride - 1):
        middle = measures.parent[middle]
    start = middle[middle]
    inside = measures.neurite & measures.neurite[start] & (start != middle)
    leg = measures.leg if stride == 1 else measures.axes - measures.axes.take(middle, axis=1)
    x, y, z = leg
    return _Paths(stride, middle, inside, leg, x * x + y * y + z * z)


def domains(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield domain_unknown and axon_only."""
    kind = measures.rec.kind
    unknown = (kind < KNOWN_DOMAINS[0]) | (kind > KNOWN_DOMAINS[-1])
    if unknown.any():
        codes, counts = np.unique(kind[unknown], return_counts=True)
        shown = ", ".join(
            f"{code} ({counted(int(count), 'sample')})"
            for code, count in zip(codes[:5], counts[:5], strict=True)
        )
        place = measures.first(unknown)
        yield Finding(
            "domain_unknown",
            f"{place.count:,} of {counted(len(kind), 'sample')} have a type other than soma 1, axon "
            f"2, basal 3 and apical 4 (first at {place}): {shown}{', ...' if len(codes) > 5 else ''}.",
            place.line,
            place.sample,
            place.count,
        )
    if measures.axon.any() and (measures.axon | measures.soma).all():
        place = measures.first(measures.axon)
        yield Finding(
            "axon_only",
            f"All {counted(place.count, 'neurite sample')} are axon (type 2); there is no dendrite.",
            place.line,
            place.sample,
            place.count,
        )
