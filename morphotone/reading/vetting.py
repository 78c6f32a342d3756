"""Can a reconstruction be trusted for cable work? Every check in turn, and the grade that follows."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Literal

from morphotone.reading import header, radii, shape, somata
from morphotone.reading.findings import Finding, Severity
from morphotone.reading.measures import Measures
from morphotone.reading.reconstruction import Reconstruction
from morphotone.reading.thresholds import DEFAULTS, Thresholds

__all__ = ["Grade", "Thresholds", "Vetting", "grade_of", "vet_reconstruction"]

Grade = Literal["sound", "doubtful", "unfit"]
Check = Callable[[Measures, Thresholds], Iterator[Finding]]

GRADE_OF_WORST: dict[Severity, Grade] = {"note": "sound", "doubtful": "doubtful", "unfit": "unfit"}
SEVERITIES: tuple[Severity, ...] = ("note", "doubtful", "unfit")

# In the order of the report: what spoils everything comes first.
CHECKS: tuple[Check, ...] = (
    shape.unit,
    header.header,
    radii.unusable,
    radii.constant,
    radii.placeholder,
    radii.below_optics,
    radii.quantised,
    radii.jumps,
    somata.somata,
    shape.pieces,
    shape.domains,
    shape.coincident,
    shape.long_steps,
    shape.flat,
    shape.depth_zigzag,
)


@dataclass(frozen=True)
class Vetting:
    """What was seen in one reconstruction, and the grade that follows."""

    findings: tuple[Finding, ...]  #: the reader's own first, then by check
    grade: Grade  #: "sound", "doubtful" or "unfit"


def vet_reconstruction(rec: Reconstruction, thresholds: Thresholds = DEFAULTS) -> Vetting:
    """Look at a reconstruction with every check there is.

    Vet a reconstruction before its radii are mended (`repair.mend_radii`): afterwards the radii that were
    zero or negative cannot be seen any more.

    Parameters
    ----------
    rec : Reconstruction
        As read; nothing in it is changed.
    thresholds : Thresholds
        Limits of the checks.

    Returns
    -------
    Vetting
        The findings, those of the reading included, and the grade: the worst severity among them, where a
        note does not lower the grade.
    """
    measures = Measures(rec)
    seen = [finding for check in CHECKS for finding in check(measures, thresholds)]
    findings = (*rec.findings, *seen)
    return Vetting(findings, grade_of(findings))


def grade_of(findings: tuple[Finding, ...]) -> Grade:
    """Return the grade that follows from a file's findings."""
    worst = max((SEVERITIES.index(finding.severity) for finding in findings), default=0)
    return GRADE_OF_WORST[SEVERITIES[worst]]
