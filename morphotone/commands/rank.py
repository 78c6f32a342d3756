"""`morphotone rank`: which synapses are electrotonically far or weak, in what order."""

import argparse
import os
import sys
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import fields, replace
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from morphotone.cable.assumptions import Assumptions
from morphotone.commands.options import (
    add_assumption_options,
    add_farthest,
    add_keep_unfit,
    assumptions_of,
)
from morphotone.commands.vet import files_of
from morphotone.errors import MorphotoneError, ReadingError, ResultsError
from morphotone.night.folder import Found
from morphotone.night.ledger import FILE as LEDGER
from morphotone.night.progress import Progress, Silent, Step, progress_on
from morphotone.night.record import record_of, write_record
from morphotone.night.results import atomic, atomic_bytes
from morphotone.questions.collected import Ranking, collected
from morphotone.questions.matching import matched
from morphotone.questions.placing import FARTHEST_UM
from morphotone.questions.ranking import BY, TEXT_COLUMNS, numeric
from morphotone.questions.site_answers import (
    FileOfCell,
    SiteAnswer,
    SiteRequest,
    all_turned_away,
    headers,
    site_answers,
)
from morphotone.questions.synapses import with_course, with_synapse
from morphotone.reading.sites import Sites, read_sites
from morphotone.reading.swc import read_bytes
from morphotone.showing.pairs import pairs_file
from morphotone.showing.tables import csv_table

Paths = str | os.PathLike[str] | Sequence[str | os.PathLike[str]]

NAME = "rank"
PAIRS = ("csv", "npy")
_HZ = (100.0,)  # where nobody says which: the orders at rest and at 100 Hz differ
_BATCH_BYTES = 2_000_000  # of files solved together

_EPILOG = """\
SITES.csv has the columns cell (file name, with or without folder and ending), site (a label, unique in its
cell), and a place in one of three ways: sample with or without fraction toward its parent; x_um, y_um, z_um;
branch (as in branches.csv) with along_um. It may have g_peak_nS, driving_force_mV, rise_ms, decay_ms, group,
and further columns, which are carried through.

what is written into RESULTS:
  ranking.csv            one row per site, cell by cell, in order: rank 1 has the greatest value
  orders.csv             how far orders by path, X, attenuation, peak at the soma agree (Kendall's tau-b)
  movers.csv             which sites change place most between two orders, from where to where
  pairs.csv, pairs.npz   with --pairs: transfer resistance, attenuation, delay between all sites of a cell
  together.csv           with --together: the synapses of each group of a cell active at once
  clamp.csv              with --clamp-MOhm: what a clamp at the soma (or at a site) sees of each site
  turned_away_sites.csv  one row per site not ranked, with the reason
  assumptions.toml       what was assumed, whole
  run.json               the record: versions, assumptions, counts, SHA-256 of the inputs, times

units: um, MOhm, nS, mV, ms, Hz; every column is explained in the README

example:
  morphotone rank --synapses sample_morphologies/sites.csv sample_morphologies --into ranked --together

exit code: 0 all ranked, 1 some site was turned away (turned_away_sites.csv says why), 2 wrong usage or
unusable assumptions, sites or results folder, 130 interrupted
"""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Add the command's arguments to its parser."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = _EPILOG
    parser.add_argument(
        "paths", metavar="FOLDER_OR_FILE", type=Path, nargs="+", help="the cells; folders at any depth"
    )
    parser.add_argument("--synapses", metavar="SITES.csv", type=Path, required=True, help="the sites")
    parser.add_argument("--into", metavar="RESULTS", type=Path, required=True, help="results folder")
    parser.add_argument(
        "--by", metavar="COLUMN", default=BY, help="numeric column to rank by (default: %(default)s)"
    )
    add_assumption_options(parser)
    parser.add_argument(
        "--hz",
        metavar="HZ",
        type=float,
        nargs="+",
        help="frequencies besides 0 Hz, in Hz (default: those of the assumptions file, else 100)",
    )
    add_farthest(parser)
    parser.add_argument("--pairs", choices=PAIRS, help="write all pairs of sites of each cell")
    parser.add_argument(
        "--between", metavar="GROUP", nargs=2, help="with --pairs: only from sites of one group to another's"
    )
    parser.add_argument(
        "--together", action="store_true", help="write what each group does when active at once"
    )
    parser.add_argument(
        "--clamp-MOhm",
        metavar="R_S",
        type=float,
        help="write what a voltage clamp at the soma sees through this series resistance, in MOhm",
    )
    parser.add_argument(
        "--clamp-at",
        metavar="SITE",
        help="with --clamp-MOhm: the clamp is at the site of this label, in cells that have it",
    )
    add_keep_unfit(parser, "rank on")


def run(args: argparse.Namespace) -> int:
    """Rank, write the tables, say how it went, and return the exit code."""
    ranking = rank(
        args.paths,
        args.synapses,
        args.into,
        assumptions=assumptions_of(args),
        by=args.by,
        farthest_um=args.farthest_um,
        pairs=args.pairs,
        between=args.between,
        together=args.together,
        clamp_MOhm=args.clamp_MOhm,
        clamp_at=args.clamp_at,
        keep_unfit=args.keep_unfit,
        progress=progress_on(sys.stderr) if sys.stderr.isatty() else None,
    )
    counts = ranking.counts
    print(
        f"{counts['sites']} sites = {counts['ranked']} ranked + {counts['turned_away']} turned away, "
        f"on {counts['cells']} of {counts['files']} files\nresults: {args.into}"
    )
    if counts["turned_away"]:
        print(f"why sites were turned away: {args.into / 'turned_away_sites.csv'}")
    return int(counts["turned_away"] > 0)


def rank(
    paths: Paths,
    synapses: str | os.PathLike[str],
    into: str | os.PathLike[str] | None = None,
    *,
    assumptions: Assumptions | None = None,
    by: str = BY,
    farthest_um: float = FARTHEST_UM,
    pairs: str | None = None,
    between: Sequence[str] | None = None,
    together: bool = False,
    clamp_MOhm: float | None = None,
    clamp_at: str | None = None,
    keep_unfit: bool = False,
    progress: Progress | None = None,
) -> Ranking:
    """Rank the sites of a file on the cells of files and folders.

    Parameters
    ----------
    paths : path or sequence of paths
        Files, whatever their names; folders are searched at any depth for SWC files.
    synapses : path
        The file of sites.
    into : path, optional
        Results folder; without one nothing is written.
    assumptions : Assumptions, optional
        The defaults unless given; where they have no frequency besides 0 Hz, 100 Hz is added.
    by : str
        Column to rank by, the greatest value first.
    farthest_um : float
        Sites in space farther than this from the cable's surface are turned away, µm.
    pairs : {"csv", "npy"}, optional
        Work out all pairs of sites of each cell; the name says what file is written.
    between : sequence of two str, optional
        Groups: pairs only from the sites of the first to those of the second.
    together : bool
        Work out what the synapses of each group of a cell do when all are active.
    clamp_MOhm : float, optional
        Work out what a voltage clamp at the soma sees through this series resistance, MΩ.
    clamp_at : str, optional
        With clamp_MOhm: label of a site; the clamp is there in every cell that has it.
    keep_unfit : bool
        Rank on files of grade unfit too.
    progress : Progress, optional
        Told about each batch of files.

    Raises
    ------
    ReadingError
        The file of sites cannot be read as such.
    MorphotoneError
        A path is not there, a folder holds no such file, or there is no such column to rank by.
    ResultsError
        The results folder holds a survey or cannot be written to.
    """
    started = datetime.now(UTC)
    chosen = assumptions or Assumptions()
    chosen = chosen if chosen.hz else replace(chosen, hz=_HZ)
    target = None if into is None else _free_folder(Path(into))
    file = read_sites(synapses)
    request = SiteRequest(
        chosen,
        farthest_um,
        keep_unfit,
        *_synapses(file.sites),
        pairs=pairs is not None,
        between=_groups_of(file.sites, pairs, between),
        together=together,
        clamp_MOhm=clamp_MOhm,
        clamp_at=_clamped_site(file.sites, clamp_MOhm, clamp_at),
    )
    header = _checked_header(request, file.sites, by)
    listed = [paths] if isinstance(paths, str | os.PathLike) else list(paths)
    found = _once(files_of(listed))
    per_file, unmatched = matched(file.sites, [(each.name, each.path) for each in found])
    answers = _kept(_answers(found, per_file, request, progress or Silent()), target, pairs)
    ranking = collected(file, len(found), answers, unmatched, by, header)
    if target is not None:
        _write(ranking, target)
        with atomic(target / "assumptions.toml") as stream:
            stream.write(chosen.to_toml())
        inputs = {str(synapses): file.sha256} | {answer.name: answer.sha256 for answer in answers}
        details = {"by": by, "pairs": pairs, **_details(listed, request)}
        record = record_of(started=started, counts=ranking.counts, inputs_sha256=inputs, details=details)
        write_record(target / "run.json", record)
    return ranking


def _once(files: Iterable[Found]) -> list[Found]:
    """Return the files, one that can be reached in several of the ways given only the first time."""
    by_place: dict[str, Found] = {}
    for file in files:
        by_place.setdefault(os.path.realpath(file.path), file)
    return list(by_place.values())


def _kept(answers: Iterator[SiteAnswer], into: Path | None, pairs: str | None) -> list[SiteAnswer]:
    """Return the answers; their pairs, which are large, go to a file as they come if there is one."""
    if into is None or pairs is None:
        return list(answers)
    kept = []
    with pairs_file(into, pairs) as write:
        for answer in answers:
            if answer.pairs is not None:
                write(answer.name, answer.pairs)
            kept.append(replace(answer, pairs=None))
    return kept


def _synapses(sites: Sites) -> tuple[bool, bool]:
    """Return whether any site has a conductance, and whether any has one with a course in time."""
    return bool(with_synapse(sites).any()), bool(with_course(sites).any())


def _clamped_site(sites: Sites, clamp_MOhm: float | None, at: str | None) -> str | None:
    """Return the label of the site to clamp, or refuse one that no cell has."""
    if at is None:
        return None
    if clamp_MOhm is None:
        raise MorphotoneError(f"a clamp at site {at!r} without a series resistance; give --clamp-MOhm too")
    if at not in sites.site.tolist():
        raise MorphotoneError(f"there is no site {at!r} to clamp; expected a label of the file of sites")
    return at


def _groups_of(sites: Sites, pairs: str | None, between: Sequence[str] | None) -> tuple[str, str] | None:
    """Return the two groups whose pairs are asked for, which must be there."""
    if pairs not in (None, *PAIRS):
        raise MorphotoneError(f"read pairs = {pairs!r}, expected {' or '.join(PAIRS)}")
    if between is None:
        return None
    if pairs is None or len(between) != 2:
        raise MorphotoneError(
            f"read the groups {' and '.join(between)}, expected two, together with pairs; ask for pairs too"
        )
    first, second = between
    for group in (first, second):
        if group not in sites.group:
            known = ", ".join(sorted(set(sites.group) - {""})) or "none"
            raise MorphotoneError(f"no site is of the group {group!r}; the groups are {known}")
    return first, second


def _checked_header(request: SiteRequest, sites: Sites, by: str) -> dict[str, list[str]]:
    """Return the columns of the tables, having seen before any work that the sites can be ranked as asked."""
    header = headers(request, list(sites.others))
    names = header["ranking"]
    carried = dict(zip(names[len(names) - len(sites.others) :], sites.others.values(), strict=True))
    numbers = {name: np.zeros(len(sites)) for name in names if name not in TEXT_COLUMNS}
    numeric(pd.DataFrame(numbers | carried), by)
    return header


def _details(paths: Sequence[Any], request: SiteRequest) -> dict[str, Any]:
    """Return what was asked, as JSON types."""
    asked = {field.name: getattr(request, field.name) for field in fields(SiteRequest)[1:]}
    return {
        "paths": [str(path) for path in paths],
        **asked,
        "morphotone": version("morphotone"),
        "assumptions": request.assumptions.to_dict(),
        "warnings": list(request.assumptions.warnings),
    }


def _free_folder(into: Path) -> Path:
    """Return the folder unless it holds a survey, whose record would be lost."""
    if (into / LEDGER).exists():
        raise ResultsError(f"{into} holds a survey, whose run.json would be lost; choose another --into")
    return into


def _answers(
    found: Sequence[Found], per_file: dict[str, Sites], request: SiteRequest, progress: Progress
) -> Iterator[SiteAnswer]:
    """Yield what the sites of each file with sites gave, solving some files at a time."""
    wanted = [file for file in found if file.name in per_file]
    progress.begin(len(wanted), sum(file.size for file in wanted))
    try:
        for batch in _batches(wanted):
            files = [FileOfCell(file.name, _content(file), per_file[file.name]) for file in batch]
            answers = _attempt(files, request)
            yield from answers
            failed = sum(not answer.tables for answer in answers)
            progress.advance(Step(len(batch), sum(file.size for file in batch), 0, failed))
    finally:
        progress.end()


def _batches(files: Sequence[Found]) -> Iterator[list[Found]]:
    """Yield files together until they reach a size; which ones depends on the list alone."""
    batch: list[Found] = []
    for file in files:
        batch.append(file)
        if sum(each.size for each in batch) >= _BATCH_BYTES:
            yield batch
            batch = []
    if batch:
        yield batch


def _content(file: Found) -> bytes | ReadingError:
    """Return a file's bytes, or the error that says why they cannot be had."""
    if file.problem:
        return ReadingError(f"{file.name}: {file.problem}", "unreadable")
    try:
        return read_bytes(file.path, name=file.name)
    except ReadingError as error:
        return error


def _attempt(files: list[FileOfCell], request: SiteRequest) -> list[SiteAnswer]:
    """Work on a batch; if that fails, on each of its files, so that only the one that fails is lost."""
    try:
        return site_answers(files, request)
    except Exception as error:
        if len(files) > 1:
            return [answer for file in files for answer in _attempt([file], request)]
        text = f"{files[0].name}: {type(error).__name__}: {' '.join(str(error).split())}"
        sentence = f"{text}: a fault of the program, not of the file; please report it"
        return [all_turned_away(files[0].name, files[0].sites, "program_error", sentence)]


def _write(ranking: Ranking, into: Path) -> None:
    """Write every table, each whole or not at all."""
    names = {"turned_away": "turned_away_sites"}
    for field in fields(Ranking):
        table = getattr(ranking, field.name)
        if isinstance(table, pd.DataFrame):
            with atomic_bytes(into / f"{names.get(field.name, field.name)}.csv") as stream:
                stream.write(csv_table(table))
