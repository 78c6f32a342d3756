"""Radii that no cable can have are replaced by their neighbours', and the replacement is recorded."""

from dataclasses import replace

import numpy as np

from morphotone.errors import Fault, ReadingError
from morphotone.reading.findings import Finding
from morphotone.reading.measures import Floats, Mask, Measures
from morphotone.reading.radii import unusable_severity
from morphotone.reading.reconstruction import Reconstruction
from morphotone.reading.thresholds import DEFAULTS, Thresholds
from morphotone.reading.wording import counted, number


def mend_radii(rec: Reconstruction, thresholds: Thresholds = DEFAULTS) -> Reconstruction:
    """Give every sample whose radius is zero or negative the radius of a neighbour.

    It takes the nearest positive radius on its path toward the root; where there is none, the nearest
    below it by path length. Soma and neurites do not borrow from each other: a dendrite as thick as the
    soma would be worse than none. A neurite with nothing to borrow within reach takes the median of the
    cell's neurites, a soma without any radius of its own the nearest neurite's.

    Parameters
    ----------
    rec : Reconstruction
        As read, parents before their children.
    thresholds : Thresholds
        Limits that weigh the finding by the share of samples mended, as for the radii found.

    Returns
    -------
    Reconstruction
        The same object where nothing was to be mended; else a copy with the finding ``radius_mended``.

    Raises
    ------
    ReadingError
        Reason ``radius_unusable``: no neurite sample has a positive radius to borrow.
    """
    broken = rec.radius <= 0
    if not broken.any():
        return rec
    measures = Measures(rec)
    usable = ~broken & (measures.neurite if measures.neurite.any() else measures.soma)
    if not usable.any():
        raise _unusable(measures)
    radius = np.where(broken, 0.0, rec.radius)
    alike = measures.hung & (measures.soma == measures.soma[measures.parent])
    _borrow_toward_root(radius, measures, alike)
    _borrow_from_below(radius, measures, alike)
    _borrow_toward_root(radius, measures, alike)
    radius[(radius == 0) & measures.neurite] = np.median(rec.radius[usable])
    _borrow_from_below(radius, measures, measures.hung)
    _borrow_toward_root(radius, measures, measures.hung)
    return replace(
        rec, radius=radius, findings=(*rec.findings, _record(measures, broken, radius, thresholds))
    )


def _borrow_toward_root(radius: Floats, measures: Measures, link: Mask) -> None:
    """Fill zeros of a radius array (n,) from the parents, parents first, where the link is allowed (n,)."""
    parent = measures.parent
    for sample in np.flatnonzero((radius == 0) & link):
        radius[sample] = radius[parent[sample]]


def _borrow_from_below(radius: Floats, measures: Measures, link: Mask) -> None:
    """Fill zeros of a radius array (n,) with the nearest positive one below, where links allow (n,)."""
    empty = radius == 0
    reach = np.where(empty, np.inf, 0.0)
    for sample in np.flatnonzero(link & empty[measures.parent])[::-1]:
        parent = measures.parent[sample]
        length = reach[sample] + measures.distance[sample]
        if length <= reach[parent] and length < np.inf:
            reach[parent], radius[parent] = length, radius[sample]


def _record(measures: Measures, broken: Mask, radius: Floats, limits: Thresholds) -> Finding:
    place, given = measures.first(broken), radius[broken]
    verb = "was" if place.count == 1 else "were"
    span = number(float(given.min()))
    if given.max() > given.min():
        span += f" to {number(float(given.max()))}"
    return Finding(
        "radius_mended",
        f"{counted(place.count, 'radius', 'radii')} of zero or below {verb} replaced by a "
        f"neighbour's, {span} µm (first at {place}).",
        place.line,
        place.sample,
        place.count,
        unusable_severity(place.count / len(radius), limits),
    )


def _unusable(measures: Measures) -> ReadingError:
    rec = measures.rec
    index = int(measures.neurite.argmax())
    fault = Fault(int(rec.line[index]), f"{rec.radius[index] / rec.unit_um:g}", "a positive radius")
    return ReadingError(
        f"{rec.file}: {fault}: no sample of {len(rec.radius):,} has a neurite's radius to borrow; "
        "measure the radii or leave the file out",
        "radius_unusable",
        [fault],
    )
