"""`morphotone survey`: the night's run over a folder, to CSV tables."""

import argparse
import hashlib
import os
import sys
from collections.abc import Sequence
from contextlib import ExitStack
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import partial
from importlib.metadata import version
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import pandas as pd

from morphotone.cable.assumptions import Assumptions
from morphotone.commands.contents import content_of, is_known
from morphotone.commands.options import (
    add_assumption_options,
    add_keep_unfit,
    add_pattern,
    add_time_options,
    assumptions_of,
    current_of,
    time_of,
)
from morphotone.commands.tables_now import tables_if_asked, tables_now, write_tables
from morphotone.commands.workers import Workers, add_worker_options, workers_for
from morphotone.night.folder import PATTERNS, find_files
from morphotone.night.ledger import Ledger
from morphotone.night.outcome import Item, Outcome, Status
from morphotone.night.progress import Progress, progress_on
from morphotone.night.record import run_record, write_record
from morphotone.night.request import tables_given
from morphotone.night.results import atomic
from morphotone.night.runner import Tally
from morphotone.night.runner import run as run_night
from morphotone.night.sitting import Sitting
from morphotone.questions.survey import Answer, Request, answers, cell_name
from morphotone.questions.time_axis import TimeRequest
from morphotone.reading.swc import EXACT
from morphotone.showing.tables import csv_rows, csv_texts
from morphotone.stages import stage

NAME = "survey"
_TYPES = dict.fromkeys(
    ("file", "cell", "domain", "domains_differ", "peeling_warnings", "reason", "sentence"), "str"
) | dict.fromkeys(("line", "sample", "count"), "Int64")

_EPILOG = """\
what is written into RESULTS:
  cells.csv         one row per analysed reconstruction
  branches.csv      one row per unbranched run of cable
  samples/          with --samples: one CSV per cell, one row per SWC sample
  findings.csv      one row per observation about a file
  turned_away.csv   one row per file not analysed, with the reason
  assumptions.toml  what was assumed, whole
  run.json          the record: versions, assumptions, counts, SHA-256 of the inputs, sittings, times
  log.txt           what happened, when, to what, over all sittings
  ledger.sqlite     what is finished: the same command again goes on from there

units: um, MOhm, nS, Hz; every column is explained in the README

example:
  morphotone survey sample_morphologies --into results --hz 100

exit code: 0 all analysed, 1 something was turned away (turned_away.csv says why), 2 wrong usage or unusable
assumptions or results folder, 130 interrupted
"""


@dataclass(frozen=True, eq=False)
class Survey:
    """The tables of a survey, as read back from what it wrote.

    Attributes
    ----------
    cells, branches, findings, turned_away : DataFrame
        Columns as in README.
    samples : dict of str to DataFrame
        By file; empty unless asked for.
    tally : Tally
        Files found = analysed + turned away.
    """

    cells: pd.DataFrame
    branches: pd.DataFrame
    findings: pd.DataFrame
    turned_away: pd.DataFrame
    samples: dict[str, pd.DataFrame]
    tally: Tally


def survey(
    folder: str | os.PathLike[str],
    into: str | os.PathLike[str] | None = None,
    *,
    assumptions: Assumptions | None = None,
    samples: bool = False,
    keep_unfit: bool = False,
    delays: bool = False,
    time_constants: int = 0,
    transient_ms: tuple[float, float] | None = None,
    patterns: Sequence[str] = PATTERNS,
    workers: int = 1,
    cluster: str | None = None,
    minutes_per_cell: float | None = None,
    GB_per_cell: float | None = None,
    strict: bool = False,
) -> Survey:
    """Survey a folder of reconstructions.

    Parameters
    ----------
    folder : path
        Searched at any depth.
    into : path, optional
        Results folder; without one nothing is kept on disk.
    assumptions : Assumptions, optional
        The defaults unless given; their frequencies are cases besides 0 Hz.
    samples : bool
        Give the tables by sample too.
    keep_unfit : bool
        Analyse files of grade unfit too, flagged.
    delays : bool
        Give delays too.
    time_constants : int
        How many of each cell's own time constants to give too, up to 20.
    transient_ms : (float, float), optional
        Rise and decay of a synaptic current, ms, whose responses to give too; equal for an alpha function.
    patterns : sequence of str
        Which file names count.
    workers : int
        Number of processes; 0 for one per processor.
    cluster : str, optional
        Address of a Dask scheduler, whose workers do the work instead.
    minutes_per_cell, GB_per_cell : float, optional
        Time and memory after which a file is turned away; unless given, what suits the machine.
    strict : bool
        Stop at the first file turned away.

    Raises
    ------
    MorphotoneError
        The folder is missing or holds no such file.
    TurnedAwayError
        In strict mode, the first file turned away.
    ResultsError
        The results folder belongs to another run or cannot be written to.
    """
    time = TimeRequest(delays, time_constants, current_of(transient_ms))
    request = Request(assumptions or Assumptions(), keep_unfit, samples, time)
    with ExitStack() as stack:
        target = Path(into if into is not None else stack.enter_context(TemporaryDirectory()))
        who = stack.enter_context(workers_for(workers, cluster, minutes_per_cell, GB_per_cell))
        tally = write_survey(
            folder, target, request, patterns=patterns, workers=who, strict=strict, progress=None
        )
        return read_survey(target, tally)


def write_survey(
    folder: str | os.PathLike[str],
    into: Path,
    request: Request,
    *,
    patterns: Sequence[str],
    workers: Workers,
    strict: bool,
    progress: Progress | None,
) -> Tally:
    """Survey a folder and write the tables; parameters and errors as for `survey`."""
    started = datetime.now(UTC)
    found = find_files(folder, patterns, exclude=into)
    names = [file.name for file in found]
    conditions = _fingerprint(request)
    text = request.assumptions.to_toml()
    with (
        Ledger(into, conditions) as ledger,
        Sitting(ledger, hashlib.sha256(text.encode()).hexdigest()) as sitting,
    ):
        known = sum(name in ledger.known() for name in names)
        sitting.say(
            f"{len(names)} files found, {known} of them known from earlier sittings; {workers.said}; "
            f"{workers.limits.described()}"
        )
        tally = run_night(
            found,
            partial(outcomes, request=request),
            ledger=ledger,
            progress=progress,
            pool=workers.pool,
            limits=workers.limits,
            witness=sitting,
            meanwhile=partial(tables_if_asked, ledger, names, request, sitting),
            strict=strict,
        )
        with stage("export"):
            write_tables(ledger, names, request)
        tables_given(into)
        with atomic(into / "assumptions.toml") as stream:
            stream.write(text)
        sitting.end("ended")
        details = {
            "folder": str(folder),
            "patterns": list(patterns),
            **conditions,
            "warnings": list(request.assumptions.warnings),
            **workers.to_dict(),
            "sittings": ledger.sittings(),
        }
        record = run_record(started=started, tally=tally, ledger=ledger, names=names, details=details)
        write_record(into / "run.json", record)
    return tally


def outcomes(items: list[Item], request: Request) -> list[Outcome]:
    """Work on a batch of the night's items; a file whose bytes are known is left as it is."""
    with stage("read"):
        contents = {item.name: content_of(item) for item in items}
        unchanged = {item.name for item in items if is_known(contents[item.name], item.known_sha256)}
    given = answers([(name, content) for name, content in contents.items() if name not in unchanged], request)
    with stage("tables"):
        parts = _parts(given)
    worked = {answer.name: _outcome(answer, parts[answer.name]) for answer in given}
    return [
        Outcome(item.name, "unchanged", sha256=item.known_sha256 or "")
        if item.name in unchanged
        else worked[item.name]
        for item in items
    ]


def _parts(given: Sequence[Answer]) -> dict[str, dict[str, bytes]]:
    """Return per file its CSV lines for each table."""
    tables = (
        ("cells", "cell", csv_rows),
        ("branches", "branches", csv_texts),
        ("samples", "by_sample", csv_texts),
        ("findings", "findings", csv_texts),
    )
    parts: dict[str, dict[str, bytes]] = {answer.name: {} for answer in given}
    for table, field, texts_of in tables:
        filled = {answer.name: getattr(answer, field) for answer in given}
        filled = {name: columns for name, columns in filled.items() if columns is not None}
        texts = texts_of(list(filled.values()), [[name, cell_name(name)] for name in filled])
        for name, text in zip(filled, texts, strict=True):
            parts[name][table] = text
    return parts


def _outcome(answer: Answer, parts: dict[str, bytes]) -> Outcome:
    status: Status = "turned away" if answer.reason else "analysed"
    return Outcome(answer.name, status, answer.sha256, answer.samples, parts, answer.reason, answer.sentence)


def _fingerprint(request: Request) -> dict[str, Any]:
    """Return all that the tables depend on besides the files."""
    return {
        "morphotone": version("morphotone"),
        "keep_unfit": request.keep_unfit,
        "samples": request.samples,
        **request.time.to_dict(),
        "assumptions": request.assumptions.to_dict(),
    }


def read_survey(folder: Path, tally: Tally) -> Survey:
    """Read back the tables that a survey wrote."""
    names = ("cells", "branches", "findings", "turned_away")  # the folder may hold other tables beside
    tables = {name: read_table(folder / f"{name}.csv") for name in names}
    samples = {}
    for path in sorted((folder / "samples").rglob("*.csv")):
        table = read_table(path)
        samples[str(table["file"].iloc[0])] = table
    return Survey(**tables, samples=samples, tally=tally)


def read_table(path: Path) -> pd.DataFrame:
    """Read a table back with equal numbers, and with names that look like missing values left alone."""
    table: pd.DataFrame = pd.read_csv(path, keep_default_na=False, na_values=[""], dtype=_TYPES, **EXACT)
    return table


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Add the command's arguments to its parser."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = _EPILOG
    parser.add_argument("folder", metavar="FOLDER", type=Path, help="searched at any depth")
    parser.add_argument("--into", metavar="RESULTS", type=Path, required=True, help="results folder")
    add_assumption_options(parser)
    parser.add_argument(
        "--hz",
        metavar="HZ",
        type=float,
        nargs="+",
        help="frequencies besides 0 Hz, in Hz; overrides the assumptions file",
    )
    parser.add_argument("--samples", action="store_true", help="write one CSV per cell with a row per sample")
    add_time_options(parser)
    parser.add_argument(
        "--time-constants",
        metavar="K",
        type=int,
        default=0,
        help="give the cell's own K slowest time constants too, in ms, 1 to 20",
    )
    add_keep_unfit(parser, "analyse")
    add_pattern(parser)
    add_worker_options(parser, cluster=True)
    parser.add_argument("--strict", action="store_true", help="stop at the first file turned away")
    parser.add_argument(
        "--tables-now",
        action="store_true",
        help="write the tables of what is finished by now, and stop; from another terminal while the same "
        "command is running, too",
    )


def run(args: argparse.Namespace) -> int:
    """Run the survey, say how it went, and return the exit code."""
    request = Request(assumptions_of(args), args.keep_unfit, args.samples, time_of(args))
    if args.tables_now:
        tables_now(args.folder, args.into, request, _fingerprint(request), args.pattern)
        print(f"tables of what is finished by now: {args.into}")
        return 0
    with workers_for(args.workers, args.cluster, args.minutes_per_cell, args.GB_per_cell) as workers:
        tally = write_survey(
            args.folder,
            args.into,
            request,
            patterns=args.pattern,
            workers=workers,
            strict=args.strict,
            progress=progress_on(sys.stderr),
        )
    again = f" ({tally.unchanged} of them unchanged since an earlier run)" if tally.unchanged else ""
    files = "file" if tally.found == 1 else "files"
    print(
        f"{tally.found} {files} found = {tally.analysed} analysed + {tally.turned_away} turned away{again}\n"
        f"results: {args.into}"
    )
    if tally.turned_away:
        print(f"why files were turned away: {args.into / 'turned_away.csv'}")
    return 1 if tally.turned_away else 0
