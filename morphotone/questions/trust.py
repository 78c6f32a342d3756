"""Which reconstructions can be trusted: findings and grades as tables."""

from collections.abc import Sequence

from morphotone.questions.columns import Columns
from morphotone.reading.findings import CATALOGUE, Finding
from morphotone.reading.vetting import Vetting

FINDINGS_COLUMNS = ("grade", "code", "severity", "line", "sample", "count", "sentence", "effect")


def findings_table(findings: Sequence[Finding], grade: str) -> Columns:
    """Return the columns of ``findings.csv``, one row per finding of a file.

    Columns: the file's grade, the finding's code and severity, the line and sample number of its first
    place (empty where it has none), the number of places, what was seen, and what that does to electrotonus.
    """
    rows = [
        (grade, f.code, f.severity, f.line, f.sample, f.count, f.sentence, CATALOGUE[f.code].effect)
        for f in findings
    ]
    columns = zip(*rows, strict=True) if rows else [()] * len(FINDINGS_COLUMNS)
    return {name: list(values) for name, values in zip(FINDINGS_COLUMNS, columns, strict=True)}


def unfit_sentence(file: str, vetting: Vetting) -> str:
    """Say why a file of grade unfit is turned away, and what to do about it."""
    reasons = [f"{f.sentence} ({f.code})" for f in vetting.findings if f.severity == "unfit"]
    return (
        f"{file}: unfit: {' '.join(reasons)} Mend the file, settle it in the assumptions, or analyse it "
        "all the same with --keep-unfit."
    )
