"""`morphotone report`: the morning after a survey, as one HTML page."""

import argparse
import os
import sys
from collections.abc import Sequence
from dataclasses import dataclass, replace
from importlib.metadata import version
from pathlib import Path
from urllib.parse import quote

import pandas as pd

from morphotone.commands.finished import Finished, read_finished
from morphotone.commands.survey import read_table
from morphotone.errors import MorphotoneError, ResultsError
from morphotone.night.results import atomic
from morphotone.questions.groups import Grouped, Missing, grouped
from morphotone.questions.units import check_groups
from morphotone.reading.groups import groups_of, read_groups
from morphotone.showing.page import NEEDED, NUMBERS, Morning, Picture, page

NAME = "report"
FILE = "report.html"  # in the results, unless --into says otherwise
_MAPS = "maps"  # below the results, unless --maps says otherwise
_FILES = (
    *("cells.csv", "branches.csv", "findings.csv", "turned_away.csv"),
    *("assumptions.toml", "run.json", "log.txt"),
)
_PICTURES = ("figure", "thumbnail", "mesh", "table")

_EPILOG = """\
The page holds the cells to look at first, what was turned away and why, the findings, the spread of R_in, X
and attenuation, a table of all cells, the assumptions and what hangs on them. It needs no network; a cell's
figure is shown from the files beside the page when its row is opened.

units: um, MOhm, ms, Hz

example:
  morphotone survey sample_morphologies --into results
  morphotone report results --groups sample_morphologies/cells.csv --by class

exit code: 0 the page is written, 2 wrong usage or unusable groups or results
"""


@dataclass(frozen=True)
class Report:
    """The page of a survey.

    Attributes
    ----------
    html : str
        The page, whole. Links in it are relative to the folder it was made for.
    remarks : tuple of str
        What is odd about the results, the pictures or the groups, a sentence each; it stands on the page too.
    """

    html: str
    remarks: tuple[str, ...]


def report(
    results: str | os.PathLike[str],
    groups: str | os.PathLike[str] | pd.DataFrame | None = None,
    by: str | None = None,
    *,
    maps: str | os.PathLike[str] | None = None,
    into: str | os.PathLike[str] | None = None,
) -> Report:
    """Put what a survey found on one HTML page.

    Parameters
    ----------
    results : path
        A survey's results folder.
    groups : path or DataFrame, optional
        A table of groups, with a column ``cell`` or ``file``.
    by : str, optional
        Its column that makes the groups; required with `groups`.
    maps : path, optional
        Folder that `morphotone map` wrote; ``maps`` in the results, where it is there, unless given.
    into : path, optional
        Where the page is written; without it nothing is, and links are those of a page in the results.

    Raises
    ------
    MorphotoneError
        The column is not in the table of groups, or one of the two is given without the other.
    ReadingError
        The table of groups cannot be read as such.
    ResultsError
        The folder holds no survey's results, or the page cannot be written.
    """
    finished = read_finished(results)
    _check_columns(finished)
    target = Path(into) if into is not None else finished.folder / FILE
    pictures, remark = _pictures(finished.folder, maps, target.parent)
    found = None if groups is None else _grouped(finished, groups)
    if (by is None) != (found is None):
        raise MorphotoneError("--groups and --by belong together: give the table and its column")
    morning = Morning(
        record=finished.record,
        assumptions=finished.assumptions,
        cells=finished.cells,
        findings=finished.findings,
        turned_away=finished.turned_away,
        remarks=[*finished.doubts, *([remark] if remark else [])],
        pictures=pictures,
        tables=_tables(finished.folder, target.parent),
        made_by=version("morphotone"),
    )
    if found is not None and by is not None:
        names = _group_of_each(found, by)
        morning = replace(morning, by=by, groups=names, missing=found.missing)
    html = page(morning)
    if into is not None:
        with atomic(target) as stream:
            stream.write(html)
    return Report(html, (*morning.remarks, *_without_group(morning.missing)))


def _check_columns(finished: Finished) -> None:
    for name, columns in NEEDED.items():
        table = getattr(finished, name)
        missing = [column for column in columns if column not in table]
        if name == "cells" and len(table):
            numbers = set(table.select_dtypes("number"))
            missing += [column for column in NUMBERS if column in table and column not in numbers]
        if missing:
            raise ResultsError(
                f"{finished.folder / name}.csv: written by Morphotone {finished.record['morphotone']}, and "
                f"Morphotone {version('morphotone')} finds no usable {', '.join(missing)} in it for a page; "
                "run the survey again into another folder"
            )


def _grouped(finished: Finished, groups: str | os.PathLike[str] | pd.DataFrame) -> Grouped:
    table = groups_of(groups) if isinstance(groups, pd.DataFrame) else read_groups(groups)
    return grouped(finished.cells, table, finished.turned_away, str(finished.record["folder"]))


def _group_of_each(found: Grouped, by: str) -> list[str]:
    check_groups([by], found.groups)
    return [" ".join(str(name).split()) for name in found.groups[by]]


def _without_group(missing: Sequence[Missing]) -> list[str]:
    """Return a sentence about analysed cells and rows of groups that do not meet; the page names them."""
    cells = sum(one.line is None for one in missing)
    counts = [(cells, "of the analysed cells"), (len(missing) - cells, "of the lines of the table of groups")]
    told = [f"{count} {what}" for count, what in counts if count]
    return [f"in no group: {' and '.join(told)}; the page says which"] if told else []


def _tables(folder: Path, page_folder: Path) -> dict[str, str]:
    return {name: _link(folder / name, page_folder) for name in _FILES if (folder / name).is_file()}


def _pictures(
    folder: Path, maps: str | os.PathLike[str] | None, page_folder: Path
) -> tuple[dict[str, Picture], str]:
    """Return the pictures of each file that are there, and a sentence about those that are not."""
    place = Path(maps) if maps is not None else folder / _MAPS
    listed = place / "maps.csv"
    if maps is None and not listed.is_file():
        return {}, ""
    try:
        table = read_table(listed).astype(object).fillna("")
    except OSError as error:
        raise ResultsError(
            f"{listed}: cannot be read ({error.strerror}); --maps is the folder that `morphotone map` wrote"
        ) from error
    except ValueError as error:  # pandas' parser errors are of this kind
        raise ResultsError(f"{listed}: no table ({error}); run `morphotone map` again") from error
    if "file" not in table:
        raise ResultsError(f"{listed}: has no column 'file'; run `morphotone map` again")
    gone = 0
    pictures = {}
    for row in table.to_dict("records"):
        given = {kind: str(row[kind]) for kind in _PICTURES if row.get(kind)}
        there = {kind: name for kind, name in given.items() if (place / name).is_file()}
        gone += len(given) - len(there)
        links = {kind: _link(place / name, page_folder) for kind, name in there.items()}
        pictures[str(row["file"])] = Picture(**links)
    told = f"{gone} files that {listed} names are not there; run `morphotone map` again" if gone else ""
    return pictures, told


def _link(path: Path, page_folder: Path) -> str:
    """Return a file's place as a page in that folder links it, quoted: never more than a path."""
    return quote(Path(os.path.relpath(path, page_folder)).as_posix())


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Add the command's arguments to its parser."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = _EPILOG
    parser.add_argument("results", metavar="RESULTS", type=Path, help="folder that a survey wrote")
    parser.add_argument(
        "--groups", metavar="CELLS.csv", type=Path, help="table with a column cell (or file) and the groups"
    )
    parser.add_argument("--by", metavar="COLUMN", help="column of CELLS.csv that makes the groups")
    parser.add_argument(
        "--maps",
        metavar="MAPS",
        type=Path,
        help="folder that `morphotone map` wrote (default: maps in RESULTS, where it is there)",
    )
    parser.add_argument(
        "--into", metavar="PAGE.html", type=Path, help=f"where to write (default: {FILE} in RESULTS)"
    )


def run(args: argparse.Namespace) -> int:
    """Write the page, say where, and return the exit code."""
    into = args.into or args.results / FILE
    made = report(args.results, args.groups, args.by, maps=args.maps, into=into)
    for remark in made.remarks:
        print(f"note: {remark}", file=sys.stderr)
    print(f"page: {into}")
    return 0
