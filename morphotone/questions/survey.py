"""A batch of files to the tables they give: read, vet, build, solve as one forest, tabulate."""

import hashlib
import re
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.electrotonus import build_cases, cases_of, solve_forest
from morphotone.cable.forest import Forest
from morphotone.cable.tree import Cable
from morphotone.errors import ReadingError
from morphotone.questions.branch_table import branch_table
from morphotone.questions.cell import Cell
from morphotone.questions.cells import cell_row
from morphotone.questions.columns import Columns
from morphotone.questions.samples import sample_table
from morphotone.questions.time_axis import TimeRequest, time_axes
from morphotone.questions.trust import findings_table, unfit_sentence
from morphotone.reading.reconstruction import Reconstruction, reconstruct
from morphotone.reading.repair import mend_radii
from morphotone.reading.vetting import Vetting, grade_of, vet_reconstruction
from morphotone.stages import stage

_ENDING = re.compile(r"\.swc(\.gz)?\Z", re.IGNORECASE)
# The least that has every column: from it the headers of tables without rows are known.
SPECIMEN = b"1 1 0 0 0 5 -1\n2 3 50 0 0 1 1\n"


@dataclass(frozen=True)
class Request:
    """What is asked of every file.

    Attributes
    ----------
    assumptions : Assumptions
        One choice; its frequencies are cases besides 0 Hz.
    keep_unfit : bool
        Analyse files of grade unfit too, flagged, instead of turning them away.
    samples : bool
        Give the table by sample too.
    time : TimeRequest
        Delays, time constants and transients that are asked for.
    """

    assumptions: Assumptions
    keep_unfit: bool = False
    samples: bool = False
    time: TimeRequest = field(default_factory=TimeRequest)


@dataclass(frozen=True, eq=False)
class Answer:
    """What one file gave.

    Attributes
    ----------
    name : str
        The file's, as asked.
    sha256 : str
        Of its bytes; empty if they could not be read.
    samples : int
        How many samples it holds; 0 if it is no reconstruction.
    findings : dict of str to sequence
        Column by column, one row per finding.
    cell : dict or None
        The row of the cells table; None if the file was turned away.
    branches, by_sample : dict of str to sequence, or None
        The cell's own tables; the second only on request.
    reason, sentence : str
        Why it was turned away; empty if it was not.
    """

    name: str
    sha256: str
    samples: int
    findings: Columns
    cell: dict[str, Any] | None = None
    branches: Columns | None = None
    by_sample: Columns | None = None
    reason: str = ""
    sentence: str = ""


@dataclass(frozen=True, eq=False)
class Prepared:
    """A file that will be solved.

    Attributes
    ----------
    name : str
        The file's, as asked.
    rec : Reconstruction
        As analysed, its radii mended.
    vetting : Vetting
        Its grade and findings.
    cables : tuple of Cable
        One, under the assumptions asked.
    """

    name: str
    rec: Reconstruction
    vetting: Vetting
    cables: tuple[Cable, ...]


def cell_name(name: str) -> str:
    """Return the cell's name: the file's path below the folder without its ending."""
    return _ENDING.sub("", name)


def answers(files: Sequence[tuple[str, bytes | ReadingError]], request: Request) -> list[Answer]:
    """Analyse files together; one that fails costs nobody else anything.

    Parameters
    ----------
    files : sequence of (str, bytes or ReadingError)
        Name and content of each, or why it could not be opened.
    request : Request
        What is asked.

    Returns
    -------
    list of Answer
        One per file, in the same order; each is the same whatever files it is in company with.
    """
    prepared = [prepare(name, content, request) for name, content in files]
    ready = [each for each in prepared if isinstance(each, Prepared)]
    # Absurd files (kept although unfit) may overflow; their infinities stand in the table for what they are.
    with np.errstate(over="ignore", under="ignore", divide="ignore", invalid="ignore"):
        with stage("solve"):
            cells = iter(cells_of(ready, request))
        with stage("tables"):
            return [
                _tabulated(each.name, next(cells), request) if isinstance(each, Prepared) else each
                for each in prepared
            ]


def headers(request: Request) -> dict[str, list[str]]:
    """Return the columns of the tables that `answers` gives to a request, without the leading names."""
    # Of the assumptions only the frequencies have columns; the others might turn the specimen away.
    plain = replace(request, assumptions=Assumptions(hz=request.assumptions.hz), keep_unfit=True)
    (answer,) = answers([("specimen", SPECIMEN)], plain)
    tables = {"branches": answer.branches, "samples": answer.by_sample, "findings": answer.findings}
    columns = {name: list(table) for name, table in tables.items() if table is not None}
    return {"cells": list(answer.cell or {}), **columns}


def prepare(name: str, content: bytes | ReadingError, request: Request) -> Prepared | Answer:
    """Read, vet, mend and build; an Answer means that the file is turned away."""
    assumptions = request.assumptions
    nothing = findings_table((), "")
    if isinstance(content, ReadingError):
        return Answer(name, "", 0, nothing, reason=content.reason, sentence=str(content))
    sha256 = hashlib.sha256(content).hexdigest()
    try:
        with stage("read"):
            rec = reconstruct(
                content, file=name, cell=cell_name(name), unit_um=assumptions.unit_um, sha256=sha256
            )
    except ReadingError as error:
        return Answer(name, sha256, 0, nothing, reason=error.reason, sentence=str(error))
    with stage("vet"):
        vetting = _in_view_of(assumptions, vet_reconstruction(rec, assumptions.thresholds))
    try:
        if vetting.grade == "unfit" and not request.keep_unfit:
            raise ReadingError(unfit_sentence(name, vetting), "unfit")
        mended = mend_radii(rec, assumptions.thresholds)
        findings = vetting.findings + mended.findings[len(rec.findings) :]
        vetting = Vetting(findings, grade_of(findings))
        with stage("build"):
            return Prepared(name, mended, vetting, build_cases(mended, [assumptions]))
    except ReadingError as error:
        table = findings_table(vetting.findings, vetting.grade)
        return Answer(name, sha256, len(rec.number), table, reason=error.reason, sentence=str(error))


def _in_view_of(assumptions: Assumptions, vetting: Vetting) -> Vetting:
    """Weigh what the assumptions settle no more than doubtful: pieces apart, when they are joined."""
    if assumptions.orphans != "joined":
        return vetting
    findings = tuple(
        replace(finding, severity="doubtful")
        if finding.code == "piece_apart" and finding.severity == "unfit"
        else finding
        for finding in vetting.findings
    )
    return Vetting(findings, grade_of(findings))


def cells_of(ready: Sequence[Prepared], request: Request) -> list[Cell]:
    """Solve prepared files as one forest, the time axis too where it is asked for."""
    if not ready:
        return []
    forest = Forest([each.cables for each in ready], [request.assumptions])
    solved = solve_forest(forest, cases_of([request.assumptions]))
    cells = [Cell(each.rec, each.vetting, one) for each, one in zip(ready, solved, strict=True)]
    if request.time == TimeRequest():
        return cells
    tips = [cell.farthest_tip for cell in cells]
    axes = time_axes(forest, tips, request.time, everywhere=request.samples)
    return [replace(cell, time=axis) for cell, axis in zip(cells, axes, strict=True)]


def _tabulated(name: str, cell: Cell, request: Request) -> Answer:
    return Answer(
        name=name,
        sha256=cell.rec.sha256,
        samples=len(cell.rec.number),
        findings=findings_table(cell.vetting.findings, cell.vetting.grade),
        cell=cell_row(cell, request.time.time_constants),
        branches=branch_table(cell),
        by_sample=sample_table(cell) if request.samples else None,
    )
