"""Comment lines that bear on lengths: scale, shrinkage, units in words. They are reported, never applied."""

import re
from collections.abc import Iterator

from morphotone.reading.findings import Finding
from morphotone.reading.measures import Measures
from morphotone.reading.thresholds import Thresholds

SCALE = re.compile(r"^[ \t#]*SCALE\b[ \t:=]*(.*)$", re.IGNORECASE | re.MULTILINE)
SHRINKAGE = re.compile(r"^[ \t#]*SHRINKAGE_CORRECTION\b[ \t:=]*(.*)$", re.IGNORECASE | re.MULTILINE)
NUMBER = re.compile(r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?")
# "550 nm" in a header is a wavelength or a pixel's size; a unit without a number before it may be the file's.
FOREIGN = re.compile(
    r"^.*?(?<![\d.])(?<![\d.][ \t])\b((?i:nanomet(?:er|re)s?|millimet(?:er|re)s?|voxels?|pixels?)|nm)\b.*$",
    re.MULTILINE,
)
MICROMETRES = re.compile(r"\b(?:um|microns?|micromet(?:er|re)s?)\b|[µμ]m\b", re.IGNORECASE)


def header(measures: Measures, limits: Thresholds) -> Iterator[Finding]:
    """Yield header_scale, header_shrinkage and header_units."""
    text = "\n".join(measures.rec.comments)
    if not text:
        return
    yield from _scale(text)
    yield from _shrinkage(text)
    yield from _units(text, measures.rec.unit_um)


def _scale(text: str) -> Iterator[Finding]:
    found = SCALE.search(text)
    if found and any(factor != 1 for factor in _factors(found[1])):
        yield Finding(
            "header_scale",
            f"The header says SCALE {_quoted(found[1])}; the coordinates were read as they stand.",
        )


def _shrinkage(text: str) -> Iterator[Finding]:
    found = SHRINKAGE.search(text)
    said = _quoted(found[1]) if found else ""
    if not found or not said:
        return
    factors = _factors(said)
    if factors and all(factor == 1 for factor in factors):
        return
    yield Finding(
        "header_shrinkage",
        f"The header says SHRINKAGE_CORRECTION {said}; no correction was applied.",
        severity="doubtful" if factors else "note",
    )


def _units(text: str, unit_um: float) -> Iterator[Finding]:
    found = FOREIGN.search(text)
    if not found:
        return
    settled = unit_um != 1 or MICROMETRES.search(found[0]) is not None
    yield Finding(
        "header_units",
        f"The header speaks of {found[1]} ({_quoted(found[0])!r}); lengths were read in units of "
        f"{unit_um:g} µm.",
        severity="note" if settled else "doubtful",
    )


def _factors(text: str) -> list[float]:
    return [float(factor) for factor in NUMBER.findall(text)]


def _quoted(text: str) -> str:
    """Return a header's words on one line, at most 60 characters of them."""
    words = " ".join(text.split())
    return words if len(words) <= 60 else f"{words[:57]}..."
