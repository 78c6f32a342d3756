"""The soma as the file draws it: absent, in pieces, misplaced, of an unlikely size."""

from collections.abc import Iterator

import numpy as np

from morphotone.reading.findings import Finding
from morphotone.reading.measures import Mask, Measures
from morphotone.reading.soma import Soma
from morphotone.reading.thresholds import Thresholds
from morphotone.reading.wording import counted, number


def somata(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield the findings about the soma, or the one that there is none."""
    if not measures.soma.any():
        place = measures.first(~measures.hung)
        yield Finding(
            "soma_absent",
            f"No sample has type 1 (soma); the root at {place} is the reference site.",
            place.line,
            place.sample,
        )
        return
    soma = measures.lump
    yield from _root(measures, soma)
    yield from _size(measures, soma, limits)
    yield from _outline(measures, soma)
    yield from _coincident(measures)
    yield from _several(measures, soma)


def _root(measures: Measures, soma: Soma) -> Iterator[Finding]:
    if measures.hung[soma.members].all():
        place = measures.first(_marked(measures, soma))
        yield Finding(
            "soma_not_root",
            f"The soma ({place}) is not the root of its tree.",
            place.line,
            place.sample,
        )


def _size(measures: Measures, soma: Soma, limits: Thresholds) -> Iterator[Finding]:
    if limits.soma_least_um <= soma.radius <= limits.soma_most_um:
        return
    place = measures.first(_marked(measures, soma))
    yield Finding(
        "soma_odd",
        f"The soma ({place}) has the membrane of a sphere of {number(soma.radius)} µm radius; somata "
        f"measure {limits.soma_least_um:g} to {limits.soma_most_um:g} µm.",
        place.line,
        place.sample,
    )


def _outline(measures: Measures, soma: Soma) -> Iterator[Finding]:
    if soma.rule == "outline":
        place = measures.first(_marked(measures, soma))
        yield Finding(
            "soma_outline",
            f"The soma is drawn as an outline of {counted(place.count, 'sample')} (from {place}); it "
            f"is taken as a sphere of {number(soma.radius)} µm radius.",
            place.line,
            place.sample,
        )


def _coincident(measures: Measures) -> Iterator[Finding]:
    same = measures.hung & measures.soma & measures.soma[measures.parent] & (measures.distance == 0)
    if same.any():
        place = measures.first(same)
        verb = "lies" if place.count == 1 else "lie"
        yield Finding(
            "soma_coincident",
            f"{counted(place.count, 'soma sample')} {verb} exactly where another does (first at {place}).",
            place.line,
            place.sample,
            place.count,
        )


def _several(measures: Measures, soma: Soma) -> Iterator[Finding]:
    heads = measures.soma & ~(measures.hung & measures.soma[measures.parent])
    others = heads & ~_marked(measures, soma)
    if others.any():
        place = measures.first(others)
        verb = "stands" if place.count == 1 else "stand"
        yield Finding(
            "soma_several",
            f"Besides the soma {counted(place.count, 'more group')} of type-1 samples {verb} apart "
            f"from it (first at {place}).",
            place.line,
            place.sample,
            place.count,
        )


def _marked(measures: Measures, soma: Soma) -> Mask:
    """Return a mask (n,) of the soma's own samples."""
    mask = np.zeros(len(measures.soma), dtype=bool)
    mask[soma.members] = True
    return mask
