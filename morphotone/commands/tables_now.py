"""The tables of a survey, from its ledger: at the end, or on request before."""

import os
import sys
from collections.abc import Mapping, Sequence
from pathlib import Path
from time import sleep
from typing import Any

from morphotone.errors import ResultsError
from morphotone.night.folder import find_files
from morphotone.night.ledger import FILE as LEDGER
from morphotone.night.ledger import Ledger, LedgerInUseError
from morphotone.night.outcome import TURNED_AWAY, TURNED_AWAY_HEADER
from morphotone.night.request import ask_for_tables, tables_asked_for, tables_given
from morphotone.night.results import export, export_each
from morphotone.night.sitting import Sitting
from morphotone.questions.survey import Request, headers
from morphotone.stages import stage

_LEADING = ["file", "cell"]  # columns that say whose row it is
_ASKING_SECONDS = 0.3  # between two looks whether the tables are there


def write_tables(ledger: Ledger, names: Sequence[str], request: Request) -> None:
    """Write the tables of what is finished of these files."""
    columns = {table: ",".join(_LEADING + rest) for table, rest in headers(request).items()}
    by_sample = columns.pop("samples", None)
    export(ledger, names, {**columns, TURNED_AWAY: TURNED_AWAY_HEADER})
    if by_sample is not None:
        export_each(ledger, names, "samples", by_sample)


def tables_if_asked(ledger: Ledger, names: Sequence[str], request: Request, sitting: Sitting) -> None:
    """Write the tables if another process asks for them, in the middle of a run."""
    if not tables_asked_for(ledger.folder):
        return
    with stage("export"):
        write_tables(ledger, names, request)
    tables_given(ledger.folder)
    known = ledger.known()
    sitting.say(
        f"tables written on request: {sum(name in known for name in names)} of {len(names)} files finished"
    )


def tables_now(
    folder: str | os.PathLike[str],
    into: Path,
    request: Request,
    conditions: Mapping[str, Any],
    patterns: Sequence[str],
) -> None:
    """Write the tables of what is finished by now: from the ledger, or by the run that is at work.

    Raises
    ------
    ResultsError
        There is no ledger yet, it belongs to another run, or the folder cannot be written to.
    """
    if not (into / LEDGER).exists():
        raise ResultsError(f"{into} holds no {LEDGER}: no survey has begun there; check --into")
    names = [file.name for file in find_files(folder, patterns, exclude=into)]
    asked = False
    while not asked or tables_asked_for(into):
        try:
            with Ledger(into, conditions) as ledger:
                write_tables(ledger, names, request)
                tables_given(into)
                return
        except LedgerInUseError:
            if not asked:
                ask_for_tables(into)
                asked = True
                print(
                    "a run is at work there and was asked for its tables; waiting",
                    file=sys.stderr,
                    flush=True,
                )
        sleep(_ASKING_SECONDS)
