"""`morphotone tabulate`: tables of groups for a paper, and its methods."""

import argparse
import hashlib
import os
import sys
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path

import pandas as pd

from morphotone.commands.finished import Finished, read_finished
from morphotone.errors import ResultsError
from morphotone.night.ledger import FILE as LEDGER
from morphotone.night.record import record_of, write_record
from morphotone.night.results import atomic, atomic_bytes
from morphotone.questions.comparisons import FAMILIES, Family, comparisons
from morphotone.questions.groups import Missing, grouped
from morphotone.questions.summaries import Bootstrap, summary
from morphotone.questions.units import REPORTED, Units, units
from morphotone.reading.groups import groups_of, parse_groups
from morphotone.reading.swc import read_bytes
from morphotone.showing.methods import Source, electrotonus, reconstructions, software
from morphotone.showing.paper import paper_tables
from morphotone.showing.references import bibtex, cited
from morphotone.showing.statistics import statistics
from morphotone.showing.tables import csv_table
from morphotone.showing.typeset import (
    Paragraphs,
    paragraphs_latex,
    paragraphs_markdown,
    tables_latex,
    tables_markdown,
)

NAME = "tabulate"
FOLDER = "paper"  # below the results, unless --into says otherwise
_SHOWN = 5  # missing cells that the screen names

_EPILOG = """\
CELLS.csv has a column cell (file name, with or without folder and ending; or file) and the groups: class,
animal, layer, age ...

what is written:
  summary.csv      one row per column and group: n, mean, SD, median, quartiles, intervals; full digits
  comparisons.csv  one row per test: statistic, p, p by Holm's method, effect size with interval
  missing.csv      one row per cell or line of CELLS.csv that is in no group, with the reason
  tables.md .tex   the same for a paper, in Markdown and LaTeX (booktabs)
  methods.md .tex  the methods in words, from the survey's record
  references.bib   what they cite
  run.json         the record: versions, options, SHA-256 of the inputs, times

example:
  morphotone survey sample_morphologies --into results
  morphotone tabulate results --groups sample_morphologies/cells.csv --by class

exit code: 0 all well, 1 a cell or a line of CELLS.csv is in no group (missing.csv says why), 2 wrong usage or
unusable groups or results
"""


@dataclass(frozen=True, eq=False)
class Tabulated:
    """Groups of cells, summarised and compared.

    Attributes
    ----------
    summary, comparisons, missing : DataFrame
        Columns as in README.
    tables_markdown, tables_latex : str
        The tables of a paper.
    methods, methods_latex : str
        The methods in words: Markdown with citations as [@key], LaTeX.
    bibtex : str
        What they cite.
    remarks : tuple of str
        What the authors should know: cells that are not independent, odd results, unusual assumptions.
    """

    summary: pd.DataFrame
    comparisons: pd.DataFrame
    missing: pd.DataFrame
    tables_markdown: str
    tables_latex: str
    methods: str
    methods_latex: str
    bibtex: str
    remarks: tuple[str, ...]


def tabulate(
    results: str | os.PathLike[str],
    groups: str | os.PathLike[str] | pd.DataFrame,
    by: str | Sequence[str],
    into: str | os.PathLike[str] | None = None,
    *,
    columns: Sequence[str] = REPORTED,
    nested: str | None = None,
    mean_over: str | None = None,
    family: Family = "table",
) -> Tabulated:
    """Summarise and compare groups of a survey's cells.

    Parameters
    ----------
    results : path
        A survey's results folder.
    groups : path or DataFrame
        The table of groups, with a column ``cell`` or ``file``.
    by : str or sequence of str
        Its columns that make the groups.
    into : path, optional
        Folder for the tables; without one nothing is written.
    columns : sequence of str
        Numeric columns of ``cells.csv``; the ten that papers report unless given.
    nested : str, optional
        Column of the table of groups that says which cells are of one animal; one called animal, subject,
        donor, mouse or rat unless given.
    mean_over : str, optional
        The same, and the mean over each animal's cells in a group is one value.
    family : {"table", "quantity"}
        What Holm's correction counts together: the tests of all quantities, or those of each.

    Raises
    ------
    MorphotoneError
        A column is not there or cannot be used, or no cell has a group.
    ReadingError
        The table of groups cannot be read as such.
    ResultsError
        The folder holds no survey's results, or the tables cannot be written.
    """
    started = datetime.now(UTC)
    survey = read_finished(results)
    target = None if into is None else _free_folder(Path(into))
    data = b"" if isinstance(groups, pd.DataFrame) else read_bytes(groups)
    table = groups_of(groups) if isinstance(groups, pd.DataFrame) else parse_groups(data, os.fspath(groups))
    found = grouped(survey.cells, table, survey.turned_away, str(survey.record["folder"]))
    by = [by] if isinstance(by, str) else list(by)
    counted = units(survey.cells, found, by, columns, nested=nested, mean_over=mean_over)
    how = Bootstrap()
    made = _made(survey, counted, how, family)
    if target is not None:
        _write(made, target)
        inputs = {"run.json": survey.folder / "run.json", "cells.csv": survey.folder / "cells.csv"}
        hashes = {name: _sha256(read_bytes(path)) for name, path in inputs.items()}
        details = {
            "morphotone": version("morphotone"),
            "results": str(results),
            "by": by,
            "columns": list(columns),
            "source": counted.source,
            "mean_over": mean_over,
            "family": family,
            "bootstrap": asdict(how),
        }
        record = record_of(
            started=started,
            counts={"cells": len(survey.cells), "used": len(counted.files), "missing": len(counted.missing)},
            inputs_sha256=hashes | ({str(groups): _sha256(data)} if data else {}),
            details=details,
        )
        write_record(target / "run.json", record)
    return made


def _made(survey: Finished, counted: Units, how: Bootstrap, family: Family) -> Tabulated:
    numbers = summary(counted.table, counted.by, counted.columns, how)
    tests = comparisons(counted.table, counted.by, counted.columns, how, family)
    tables = paper_tables(counted, numbers, tests)
    source = Source(
        survey.record, survey.assumptions, survey.cells, survey.findings, survey.turned_away, counted
    )
    paragraphs: Paragraphs = {
        "Reconstructions": reconstructions(source),
        "Electrotonic analysis": electrotonus(source),
        "Statistics": statistics(counted, numbers, tests, how, family),
        "Software": software(source),
    }
    remarks = (*survey.doubts, *counted.doubts, *_grades(source), *map(str, survey.record["warnings"]))
    return Tabulated(
        numbers,
        tests,
        pd.DataFrame(counted.missing, columns=list(Missing._fields)).astype({"line": "Int64"}),
        tables_markdown(tables),
        tables_latex(tables),
        paragraphs_markdown(paragraphs, remarks),
        paragraphs_latex(paragraphs, remarks),
        bibtex(cited(paragraphs.values()), str(survey.record["morphotone"])),
        remarks,
    )


def _grades(source: Source) -> list[str]:
    grades = source.used["grade"].value_counts()
    return [
        f"{grades[grade]} of {len(source.used)} cells {'is' if grades[grade] == 1 else 'are'} of grade "
        f"{grade}; findings.csv says why"
        for grade in ("doubtful", "unfit")
        if grade in grades
    ]


def _free_folder(into: Path) -> Path:
    """Return the folder unless it holds a survey, whose record would be lost."""
    if (into / LEDGER).exists():
        raise ResultsError(f"{into} holds a survey, whose run.json would be lost; choose another --into")
    return into


def _sha256(data: bytes) -> str:
    return hashlib.sha256(data).hexdigest()


def _write(made: Tabulated, into: Path) -> None:
    for name in ("summary", "comparisons", "missing"):
        with atomic_bytes(into / f"{name}.csv") as binary:
            binary.write(csv_table(getattr(made, name)))
    texts = {
        "tables.md": made.tables_markdown,
        "tables.tex": made.tables_latex,
        "methods.md": made.methods,
        "methods.tex": made.methods_latex,
        "references.bib": made.bibtex,
    }
    for name, text in texts.items():
        with atomic(into / name) as stream:
            stream.write(text)


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Add the command's arguments to its parser."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = _EPILOG
    parser.add_argument("results", metavar="RESULTS", type=Path, help="results folder of a survey")
    parser.add_argument("--groups", metavar="CELLS.csv", type=Path, required=True, help="the table of groups")
    parser.add_argument(
        "--by", metavar="COLUMN", nargs="+", required=True, help="columns of it that make the groups"
    )
    parser.add_argument("--into", metavar="FOLDER", type=Path, help=f"default: RESULTS/{FOLDER}")
    parser.add_argument(
        "--columns",
        metavar="COLUMN",
        nargs="+",
        default=list(REPORTED),
        help=f"numeric columns of cells.csv (default: {' '.join(REPORTED)})",
    )
    parser.add_argument(
        "--nested",
        metavar="COLUMN",
        help="column of CELLS.csv that says which cells are of one animal (default: animal, subject, donor, "
        "mouse or rat, if there is one)",
    )
    parser.add_argument(
        "--mean-over",
        metavar="COLUMN",
        help="the same, and the mean over each animal's cells in a group is one value",
    )
    parser.add_argument(
        "--family",
        choices=FAMILIES,
        default="table",
        help="what Holm's correction counts together: tests of the whole table or of each quantity "
        "(default: %(default)s)",
    )


def run(args: argparse.Namespace) -> int:
    """Tabulate, say what was found, and return the exit code."""
    into = args.into or args.results / FOLDER
    made = tabulate(
        args.results,
        args.groups,
        args.by,
        into,
        columns=args.columns,
        nested=args.nested,
        mean_over=args.mean_over,
        family=args.family,
    )
    for remark in made.remarks:
        print(f"note: {remark}", file=sys.stderr)
    groups = made.summary[made.summary["column"] == made.summary["column"].iloc[0]]
    cells = int(groups["cells"].sum())
    print(
        f"{cells} {'cell' if cells == 1 else 'cells'} in {len(groups)} "
        f"{'group' if len(groups) == 1 else 'groups'} by {', '.join(args.by)}\ntables: {into}"
    )
    if len(made.missing):
        print(f"not in the tables: {len(made.missing)} ({into / 'missing.csv'} says why)")
        for sentence in made.missing["sentence"].head(_SHOWN):
            print(f"  {sentence}")
        if len(made.missing) > _SHOWN:
            print("  …")
    return int(len(made.missing) > 0)
