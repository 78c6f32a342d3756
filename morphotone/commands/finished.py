"""What a survey left, read back by the commands that go on from it."""

import json
import os
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

import pandas as pd

from morphotone.cable.assumptions import Assumptions
from morphotone.commands.survey import read_table
from morphotone.errors import AssumptionError, ResultsError
from morphotone.night.ledger import FILE as LEDGER

#: Columns that every survey's tables have, and those who go on from them need.
_COLUMNS = {
    "cells": (
        "file",
        "grade",
        "soma_rule",
        "length_axon_um",
        "orphans_joined",
        "orphans_left_out",
        "orphans_um",
    ),
    "findings": ("file", "grade", "code", "severity"),
    "turned_away": ("file", "reason", "sentence"),
}
_KEYS = {
    **dict.fromkeys(("morphotone", "python", "folder", "assumptions", "warnings"), ()),
    **dict.fromkeys(("delays", "time_constants", "transient_ms"), ()),
    "packages": ("numpy", "scipy"),
    "counts": ("found",),
}


@dataclass(frozen=True, eq=False)
class Finished:
    """A survey's results.

    Attributes
    ----------
    folder : Path
        Where they are.
    record : mapping
        ``run.json``.
    assumptions : Assumptions
        Those in the record.
    cells, findings, turned_away : DataFrame
        The tables, columns as in README.
    doubts : tuple of str
        One sentence for each thing odd about them: another version's, not all files worked on.
    """

    folder: Path
    record: Mapping[str, Any]
    assumptions: Assumptions
    cells: pd.DataFrame
    findings: pd.DataFrame
    turned_away: pd.DataFrame
    doubts: tuple[str, ...]


def read_finished(results: str | os.PathLike[str]) -> Finished:
    """Read what a survey left.

    Parameters
    ----------
    results : path
        Its results folder.

    Raises
    ------
    ResultsError
        The folder holds no survey's results, or those of a version whose record or tables cannot be used.
    """
    folder = Path(results)
    record = _record(folder)
    tables = {name: _table(folder, name, record) for name in _COLUMNS}
    try:
        assumptions = Assumptions.from_dict(record["assumptions"])
    except AssumptionError as error:
        raise _unusable(folder, record, f"its assumptions ({error})") from error
    return Finished(folder, record, assumptions, **tables, doubts=tuple(_doubts(folder, record, tables)))


def _record(folder: Path) -> dict[str, Any]:
    path = folder / "run.json"
    way_out = "expected a folder that `morphotone survey FOLDER --into RESULTS` has written"
    try:
        record = json.loads(path.read_bytes())
    except OSError as error:
        if isinstance(error, FileNotFoundError) and (folder / LEDGER).exists():
            raise ResultsError(
                f"{folder}: the survey there is not finished, so there is no run.json yet; give its command "
                "again, which goes on from where it stopped"
            ) from error
        raise ResultsError(f"{path}: cannot be read ({error.strerror}); {way_out}") from error
    except ValueError as error:
        raise ResultsError(f"{path}: no JSON ({error}); {way_out}") from error
    missing = _missing(record, _KEYS) or [
        f"{key}.{inner}" for key, needed in _KEYS.items() for inner in _missing(record[key], needed)
    ]
    if missing:
        raise ResultsError(f"{path}: is no survey's record, {missing[0]!r} is not in it; {way_out}")
    return dict(record)


def _missing(found: object, keys: Iterable[str]) -> list[str]:
    return [key for key in keys if not isinstance(found, dict) or key not in found]


def _table(folder: Path, name: str, record: Mapping[str, Any]) -> pd.DataFrame:
    path = folder / f"{name}.csv"
    try:
        table = read_table(path)
    except OSError as error:
        raise ResultsError(
            f"{path}: cannot be read ({error.strerror}); run the survey again, which keeps what is finished"
        ) from error
    except ValueError as error:  # pandas' parser errors are of this kind
        raise _unusable(folder, record, f"{path.name} ({error})") from error
    missing = [column for column in _COLUMNS[name] if column not in table]
    if missing:
        raise _unusable(folder, record, f"{path.name}, which has no column {missing[0]!r}")
    return table


def _unusable(folder: Path, record: Mapping[str, Any], what: str) -> ResultsError:
    return ResultsError(
        f"{folder}: written by Morphotone {record['morphotone']}, and Morphotone {version('morphotone')} "
        f"cannot use {what}; run the survey again into another folder"
    )


def _doubts(folder: Path, record: Mapping[str, Any], tables: Mapping[str, pd.DataFrame]) -> list[str]:
    doubts = []
    if record["morphotone"] != version("morphotone"):
        doubts.append(
            f"{folder} was written by Morphotone {record['morphotone']}, this is {version('morphotone')}"
        )
    found = record["counts"]["found"]
    rows = len(tables["cells"]) + len(tables["turned_away"])
    if rows != found:
        doubts.append(
            f"{folder} has rows for {rows} of {found} files: the survey is not finished, so run it again "
            "first"
        )
    return doubts
