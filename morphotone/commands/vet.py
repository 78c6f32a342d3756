"""`morphotone vet`: which reconstructions can be trusted, and what is wrong with the others."""

import argparse
import os
import sys
import textwrap
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import chain
from pathlib import Path
from typing import Any

import pandas as pd

from morphotone.cable.assumptions import Assumptions
from morphotone.commands.options import add_assumption_options, assumptions_of
from morphotone.errors import MorphotoneError, ReadingError, ResultsError
from morphotone.night.folder import Found, find_files, written_name
from morphotone.night.ledger import FILE as LEDGER
from morphotone.night.progress import Progress, Silent, Step, progress_on
from morphotone.night.results import atomic_bytes
from morphotone.questions.columns import Columns
from morphotone.questions.survey import cell_name
from morphotone.questions.trust import findings_table
from morphotone.reading.findings import CATALOGUE
from morphotone.reading.reconstruction import reconstruct
from morphotone.reading.swc import read_bytes
from morphotone.reading.vetting import vet_reconstruction
from morphotone.showing.tables import csv_table

NAME = "vet"
NOT_READ = "not read"
_WIDEST_NAME = 60

_EPILOG = """\
grades:
  sound     nothing seen that would mislead
  doubtful  analysed by survey, and flagged
  unfit     turned away by survey unless told otherwise (--keep-unfit)
  not read  no reconstruction; the sentence names line, text and expectation

example:
  morphotone vet sample_morphologies
  morphotone vet sample_morphologies/troubles --into vetted
  morphotone vet --explain radius_placeholder

exit code: 0 all sound or doubtful, 1 something unfit or not read, 2 wrong usage or unusable assumptions
"""


@dataclass(frozen=True, eq=False)
class Trust:
    """What vetting some files gave.

    Attributes
    ----------
    files : DataFrame
        One row per file: file, cell, grade, samples, findings (their codes), reason and sentence (why it
        could not be read).
    findings : DataFrame
        One row per finding: file, cell, grade, code, severity, line, sample, count, sentence, effect.
    """

    files: pd.DataFrame
    findings: pd.DataFrame


def vet(
    paths: str | os.PathLike[str] | Sequence[str | os.PathLike[str]],
    assumptions: Assumptions | None = None,
    progress: Progress | None = None,
) -> Trust:
    """Vet files, and all files in folders.

    Parameters
    ----------
    paths : path or sequence of paths
        Files, whatever their names; folders are searched at any depth for SWC files.
    assumptions : Assumptions, optional
        For the unit and the thresholds.
    progress : Progress, optional
        Told about each file.

    Raises
    ------
    MorphotoneError
        No path is given, one is not there, or a folder holds no such file.
    """
    chosen = assumptions or Assumptions()
    found = list(files_of([paths] if isinstance(paths, str | os.PathLike) else paths))
    if not found:
        raise MorphotoneError("nothing to vet: read no path, expected files or folders")
    progress = progress or Silent()
    progress.begin(len(found), sum(file.size for file in found))
    rows, tables = [], []
    try:
        for file in found:
            row, table = _vetted(file, chosen)
            rows.append(row)
            tables.append(table)
            bad = row["grade"] in ("unfit", NOT_READ)
            progress.advance(Step(1, file.size, int(str(row["samples"])), int(bad)))
    finally:
        progress.end()
    findings = {name: list(chain.from_iterable(table[name] for table in tables)) for name in tables[0]}
    whole = dict.fromkeys(("line", "sample", "count"), "Int64")
    return Trust(pd.DataFrame(rows), pd.DataFrame(findings).astype(whole))


def files_of(paths: Sequence[str | os.PathLike[str]]) -> Iterator[Found]:
    """Yield all files; those of one folder among several names are led by the folder's."""
    for path in map(Path, paths):
        if path.is_dir():
            for file in find_files(path):
                yield file if len(paths) == 1 else replace(file, name=f"{path.as_posix()}/{file.name}")
        elif path.exists():
            yield Found(path, written_name(path), path.stat().st_size)
        else:
            raise MorphotoneError(f"{path}: there is no such file or folder; check the spelling")


def _vetted(file: Found, assumptions: Assumptions) -> tuple[dict[str, object], Columns]:
    """Return a file's row and its findings."""
    names = {"file": file.name, "cell": cell_name(file.name)}
    try:
        if file.problem:
            raise ReadingError(f"{file.name}: {file.problem}", "unreadable")
        content = read_bytes(file.path, name=file.name)
        rec = reconstruct(content, file=file.name, cell=names["cell"], unit_um=assumptions.unit_um)
    except ReadingError as error:
        row = {**names, "grade": NOT_READ, "samples": 0, "findings": ""}
        table = findings_table((), NOT_READ)
        return {**row, "reason": error.reason, "sentence": str(error)}, _led(table, names)
    vetting = vet_reconstruction(rec, assumptions.thresholds)
    codes = " ".join(dict.fromkeys(finding.code for finding in vetting.findings))
    row = {**names, "grade": vetting.grade, "samples": len(rec.number), "findings": codes}
    table = findings_table(vetting.findings, vetting.grade)
    return {**row, "reason": "", "sentence": ""}, _led(table, names)


def _led(table: Columns, names: dict[str, str]) -> Columns:
    """Put the names of the file before its findings."""
    rows = len(table["code"])
    return {**{column: [name] * rows for column, name in names.items()}, **table}


class _Explain(argparse.Action):
    """Explain a finding and stop, whatever else is asked, as --help does."""

    def __call__(
        self,
        parser: argparse.ArgumentParser,
        namespace: argparse.Namespace,
        values: str | Sequence[Any] | None,
        option_string: str | None = None,
    ) -> None:
        try:
            print(explanation(str(values)))
        except MorphotoneError as error:
            parser.error(str(error))
        parser.exit(0)


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Add the command's arguments to its parser."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = _EPILOG
    parser.add_argument("paths", metavar="FILE_OR_FOLDER", type=Path, nargs="+", help="what to vet")
    parser.add_argument("--into", metavar="DIR", type=Path, help="write findings.csv and grades.csv there")
    parser.add_argument(
        "--explain", metavar="CODE", action=_Explain, help="say what a finding is and does, and stop"
    )
    add_assumption_options(parser)


def run(args: argparse.Namespace) -> int:
    """Vet, print the table, and return the exit code."""
    progress = progress_on(sys.stderr) if sys.stderr.isatty() else Silent()
    trust = vet(args.paths, assumptions_of(args), progress)
    print(screen(trust))
    if args.into:
        if (args.into / LEDGER).exists():
            raise ResultsError(
                f"{args.into} holds a survey, whose findings.csv would be lost; choose another --into"
            )
        for name, table in (("findings", trust.findings), ("grades", trust.files)):
            with atomic_bytes(args.into / f"{name}.csv") as stream:
                stream.write(csv_table(table))
    return int(trust.files["grade"].isin(["unfit", NOT_READ]).any())


def screen(trust: Trust) -> str:
    """Return the table as it is printed: a line per file, then the count of each grade."""
    files: list[dict[Any, Any]] = trust.files.to_dict("records")
    width = min(max(len("file"), *(len(row["file"]) for row in files)), _WIDEST_NAME)
    lines = [f"{'file':<{width}}  {'grade':<8}  {'samples':>9}  findings"]
    for row in files:
        name = row["file"] if len(row["file"]) <= width else "…" + row["file"][-width + 1 :]
        seen = row["sentence"].removeprefix(f"{row['file']}: ") or row["findings"]
        lines.append(f"{name:<{width}}  {row['grade']:<8}  {row['samples']:>9,}  {seen}".rstrip())
    counts = trust.files["grade"].value_counts()
    told = ", ".join(f"{counts.get(grade, 0)} {grade}" for grade in ("sound", "doubtful", "unfit", NOT_READ))
    lines += ["", f"{len(trust.files)} {'file' if len(trust.files) == 1 else 'files'}: {told}"]
    if len(trust.findings):
        lines.append(f"morphotone vet --explain {trust.findings['code'].iloc[0]}: what such a finding means")
    return "\n".join(lines)


def explanation(code: str) -> str:
    """Return what a finding is, what it does to electrotonus, and the thresholds it depends on."""
    if code not in CATALOGUE:
        raise MorphotoneError(
            f"no finding has the code {code!r}; the codes are {', '.join(sorted(CATALOGUE))}"
        )
    kind = CATALOGUE[code]
    paragraphs = [
        f"{code}: {kind.title} (usually {kind.severity})",
        kind.explanation,
        f"Effect: {kind.effect}",
    ]
    # Not at hyphens: an option such as --unit-um is copied whole.
    return "\n\n".join(textwrap.fill(paragraph, 96, break_on_hyphens=False) for paragraph in paragraphs)
