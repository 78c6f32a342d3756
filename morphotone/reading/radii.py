"""Radii that were not measured, or not finely enough."""

from collections.abc import Iterator

import numpy as np

from morphotone.reading.findings import Finding, Severity
from morphotone.reading.measures import Mask, Measures
from morphotone.reading.thresholds import Thresholds
from morphotone.reading.wording import counted, number, percent


def unusable(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield radius_zero, radius_minus_one and radius_negative; the commonest bears the weight of them all."""
    radius = measures.rec.radius
    if radius.min() > 0:
        return
    minus_one = radius == -measures.rec.unit_um
    negative = (radius < 0) & ~minus_one
    kinds = (
        ("radius_zero", radius == 0, "radius 0"),
        ("radius_minus_one", minus_one, "radius -1, the mark of a radius that was not measured"),
        ("radius_negative", negative, f"a negative radius, down to {number(float(radius.min()))} µm"),
    )
    most = max(np.count_nonzero(mask) for _, mask, _ in kinds)
    for code, mask, words in kinds:
        if mask.any():
            place = measures.first(mask)
            verb = "has" if place.count == 1 else "have"
            sentence = (
                f"{place.count:,} of {counted(len(radius), 'sample')} {verb} {words} (first at {place})."
            )
            share = float(np.mean(radius <= 0)) if place.count == most else place.count / len(radius)
            yield Finding(
                code, sentence, place.line, place.sample, place.count, unusable_severity(share, limits)
            )


def unusable_severity(share: float, limits: Thresholds) -> Severity:
    """Weigh a share of radii that are zero or below."""
    if share > limits.mended_share:
        return "unfit"
    return "doubtful" if share > limits.mended_few else "note"


def constant(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield radius_constant: unfit in a branched tracing of some size, doubtful in less."""
    radii = measures.neurite_radii
    if not _is_constant(measures, limits):
        return
    radius, _ = radii.commonest
    place = measures.first(measures.neurite & (measures.rec.radius == radius))
    tracing = radii.total > limits.constant_samples and measures.traced(limits)
    which = "All" if radii.share == 1 else f"{place.count:,} of"
    yield Finding(
        "radius_constant",
        f"{which} {counted(radii.total, 'neurite sample')} have the same radius, {number(radius)} µm "
        f"(first at {place}).",
        place.line,
        place.sample,
        place.count,
        "unfit" if tracing else "doubtful",
    )


def placeholder(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield radius_placeholder: one radius for nearly all of the axon, or of the other neurites."""
    most = measures.neurite_radii.commonest[1]  # so many at least must be a group's share of its samples
    if most / max(limits.placeholder_samples, 1) < limits.placeholder_share or _is_constant(measures, limits):
        return
    marked: Mask = np.zeros(len(measures.soma), dtype=bool)
    seen = []
    groups = (
        ("axon", measures.axon, measures.axon_radii),
        ("dendrite", measures.neurite & ~measures.axon, measures.dendrite_radii),
    )
    for name, group, radii in groups:
        if radii.total >= limits.placeholder_samples and radii.share >= limits.placeholder_share:
            radius, _ = radii.commonest
            marked |= group & (measures.rec.radius == radius)
            seen.append(f"{percent(radii.share)} of the {name}'s samples have radius {number(radius)} µm")
    if not seen:
        return
    place, weight = measures.first(marked), measures.membrane_share(marked)
    yield Finding(
        "radius_placeholder",
        f"{' and '.join(seen)} (first at {place}); {percent(weight)} of the neurites' membrane rests "
        "on that.",
        place.line,
        place.sample,
        place.count,
        "doubtful" if weight >= limits.placeholder_membrane else "note",
    )


def below_optics(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield diameter_below_optics."""
    radius = measures.rec.radius
    thin = measures.neurite & (radius > 0) & (2 * radius < limits.optics_diameter_um)
    if not thin.any():
        return
    place, weight = measures.first(thin), measures.membrane_share(thin)
    yield Finding(
        "diameter_below_optics",
        f"{place.count:,} of {counted(int(measures.neurite.sum()), 'neurite sample')}, with "
        f"{percent(weight)} of the membrane, are thinner than {limits.optics_diameter_um:g} µm, which "
        f"light microscopy does not resolve (first at {place}); this matters if the cell was traced "
        "from light microscopy, for electron microscopy set optics_diameter_um.",
        place.line,
        place.sample,
        place.count,
        "doubtful" if weight >= limits.optics_membrane else "note",
    )


def quantised(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield diameter_quantised: few different diameters in a large tree."""
    radii = measures.neurite_radii
    different = len(radii.radius)
    if (
        radii.total < limits.quantised_samples
        or different > limits.quantised_diameters
        or _is_constant(measures, limits)
    ):
        return
    shown = ", ".join(number(2 * radius) for radius in radii.radius[:4]) + (", ..." if different > 4 else "")
    yield Finding(
        "diameter_quantised",
        f"{counted(radii.total, 'neurite sample')} have only {different} different diameters ({shown} µm).",
        count=different,
        severity="doubtful" if different <= limits.quantised_classes else "note",
    )


def jumps(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield diameter_jump: neighbours within a branch whose diameters differ severalfold."""
    radius, parent = measures.rec.radius, measures.parent
    within = measures.inner & (measures.children[parent] == 1)
    near, far = radius[parent], radius
    thin, thick = np.minimum(near, far), np.maximum(near, far)
    jump = within & (thin > 0) & (thick > limits.jump_ratio * thin)
    if not jump.any():
        return
    place = measures.first(jump)
    share = place.count / int(measures.inner.sum())
    with np.errstate(over="ignore"):  # radii no cable has; the finding is there all the same
        greatest = float((thick[jump] / thin[jump]).max())
    yield Finding(
        "diameter_jump",
        f"The diameter changes more than {limits.jump_ratio:g}-fold from one sample to the next "
        f"within a branch at {counted(place.count, 'place')} (first at {place}; greatest change "
        f"{number(greatest)}-fold).",
        place.line,
        place.sample,
        place.count,
        "doubtful" if share > limits.jump_share and place.count >= limits.jump_count else "note",
    )


def _is_constant(measures: Measures, limits: Thresholds) -> bool:
    """Whether one radius holds nearly everywhere in a file large enough to tell."""
    radii = measures.neurite_radii
    return radii.total >= limits.few_samples and radii.share >= limits.constant_share
