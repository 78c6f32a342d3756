"""The morning after a survey as one HTML page that needs nothing but itself.

The template, the style and the script stand in ``page_parts``. Everything that is not our own text is escaped
by the template, the page's policy lets no other script run, and nothing is fetched from anywhere; pictures
of cells are files beside the page, which a row that is opened asks for.
"""

import base64
import hashlib
import json
import re
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import datetime
from math import isfinite, isinf
from typing import Any

import numpy as np
import pandas as pd
from jinja2 import Environment, PackageLoader, StrictUndefined

from morphotone.cable.assumptions import Assumptions
from morphotone.questions.groups import Missing
from morphotone.questions.outliers import FAR, Distances, Notable, distances, notable, rounded
from morphotone.reading.findings import CATALOGUE
from morphotone.showing.colours import PALETTE
from morphotone.showing.page_assumed import assumed, doubts, limits, outside
from morphotone.showing.page_figures import WIDTH, Spread, spread
from morphotone.showing.titles import plain, title

#: Numeric columns of ``cells.csv`` that are drawn and stand in the table.
NUMBERS = (
    "R_in_MOhm",
    "lambda_um",
    "X_tips_mean",
    "attenuation_to_soma_farthest",
    "attenuation_from_soma_farthest",
)
#: Columns of the tables without which there is no page.
NEEDED = {
    "cells": ("file", "cell", "grade", *NUMBERS),
    "findings": ("file", "code", "severity", "sentence", "effect"),
    "turned_away": ("file", "reason", "sentence"),
}
GRADES = ("sound", "doubtful", "unfit")
_SEVERITIES = ("unfit", "doubtful", "note")
_SHOWN = 25  # links, or cells to look at, before the rest is counted
_FURTHER = re.compile(r"(attenuation_to_soma_farthest_.+Hz|tau0_ms|delay_total_farthest_ms)")
_DIGITS = 4
_SLICE = 250  # rows shown until more are asked for: browsers lay out thousands slowly


@dataclass(frozen=True)
class Picture:
    """What was drawn of a cell: links as they stand on the page, empty where there is none."""

    figure: str = ""
    thumbnail: str = ""
    mesh: str = ""
    table: str = ""


@dataclass(frozen=True, eq=False)
class Morning:
    """All that a page tells.

    Attributes
    ----------
    record : mapping
        The run's ``run.json``.
    assumptions : Assumptions
        Those of the run.
    cells, findings, turned_away : DataFrame
        The survey's tables.
    remarks : sequence of str
        What is odd about the results or the call, a sentence each.
    by : str
        Name of the column of groups; empty where there are none.
    groups : sequence of str or None
        Group of each cell, "" for none.
    missing : sequence of Missing
        Cells and rows without a partner.
    pictures : mapping of str to Picture
        By file.
    tables : mapping of str to str
        Links to the survey's files, by name.
    made_by : str
        Version of the program.
    """

    record: Mapping[str, Any]
    assumptions: Assumptions
    cells: pd.DataFrame
    findings: pd.DataFrame
    turned_away: pd.DataFrame
    remarks: Sequence[str] = ()
    by: str = ""
    groups: Sequence[str] | None = None
    missing: Sequence[Missing] = ()
    pictures: Mapping[str, Picture] = field(default_factory=dict)
    tables: Mapping[str, str] = field(default_factory=dict)
    made_by: str = ""


def page(morning: Morning) -> str:
    """Return the page as HTML, whole."""
    environment = Environment(
        loader=PackageLoader("morphotone.showing", "page_parts"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    script = environment.get_template("page.js").render()
    far = distances(morning.cells, morning.groups)
    looks = notable(morning.cells, morning.findings, far)
    columns = _columns(morning.cells)
    rows = _rows(morning, columns, far)
    rows_of = {cell: row for row, cell in enumerate(morning.cells["cell"])}
    return environment.get_template("page.html").render(
        morning=morning,
        script=script,
        script_hash=base64.b64encode(hashlib.sha256(script.encode()).digest()).decode(),
        palette=[style.colour for style in PALETTE],
        width=WIDTH,
        far=FAR,
        shown=_SHOWN,
        slice=_SLICE,
        grades=_grades(morning),
        run=_run(morning),
        sittings=_sittings(morning.record),
        stages=_stages(morning.record),
        looks=looks,
        alone=[(rows_of[one.cell], one.cell) for one in morning.missing if one.line is None],
        idle=[one for one in morning.missing if one.line is not None],
        spreads=_spreads(morning, columns),
        columns=[(column, plain(title(column))) for column in columns],
        rows=rows,
        details=_details(morning, looks),
        kinds=_kinds(morning),
        away=_away(morning.turned_away),
        assumed=assumed(morning.assumptions),
        limits=limits(morning.assumptions),
        outside=outside(morning.assumptions),
        doubts=doubts(morning.assumptions, _median(morning.cells["R_in_MOhm"])),
    )


def _columns(cells: pd.DataFrame) -> list[str]:
    """Return the numeric columns of the table, and of the drawings."""
    return [*NUMBERS, *filter(_FURTHER.fullmatch, map(str, cells))]


def _median(values: pd.Series) -> float:
    finite = values[np.isfinite(values.to_numpy(np.float64))]
    return float(finite.median()) if len(finite) else float("nan")


def _grades(morning: Morning) -> list[tuple[str, int]]:
    """Return how many files there are of each grade, those turned away last, without the empty ones."""
    counts = morning.cells["grade"].value_counts()
    told = [(grade, int(counts.get(grade, 0))) for grade in GRADES]
    return [(name, count) for name, count in [*told, ("turned away", len(morning.turned_away))] if count]


def _run(morning: Morning) -> list[tuple[str, str]]:
    """Return what ran, as terms and their values."""
    record = morning.record
    counts = record["counts"]
    versions = {"Python": record["python"], **record["packages"]}
    told = {
        "Folder": record["folder"],
        "Started": _moment(record.get("started")),
        "Ended": _moment(record.get("ended")),
        "Took": _took(record.get("started"), record.get("ended")),
        "Unchanged files": f"{counts['unchanged']}, taken over from an earlier run"
        if counts.get("unchanged")
        else "",
        "Samples": f"{counts.get('samples', 0):,}",
        "Frequencies": ", ".join(f"{hz:g} Hz" for hz in (0.0, *morning.assumptions.hz)),
        "Files of grade unfit": "analysed all the same" if record.get("keep_unfit") else "turned away",
        "Workers": str(record.get("workers", "")),
        "Machine": ", ".join(map(str, record.get("machine", {}).values())),
        "Versions": ", ".join(f"{name} {number}" for name, number in versions.items()),
        "Command": " ".join(str(word) for word in record.get("command", ())),
    }
    return [(term, str(value)) for term, value in told.items() if value]


def _moment(text: object) -> str:
    moment = _parsed(text)
    return f"{moment:%A} {moment.day} {moment:%B %Y, %H:%M:%S} UTC" if moment else str(text or "")


def _took(started: object, ended: object) -> str:
    first, last = _parsed(started), _parsed(ended)
    if first is None or last is None:
        return ""
    seconds = int((last - first).total_seconds())
    parts = {"h": seconds // 3600, "min": seconds // 60 % 60, "s": seconds % 60}
    return " ".join(f"{count} {unit}" for unit, count in parts.items() if count) or "less than a second"


def _parsed(text: object) -> datetime | None:
    try:
        return datetime.fromisoformat(str(text))
    except ValueError:
        return None


def _sittings(record: Mapping[str, Any]) -> list[dict[str, str]]:
    """Return the sittings of the run, as words by key; empty in older records."""
    return [{_plain(key): _word(value) for key, value in each.items()} for each in _entries(record)]


def _entries(record: Mapping[str, Any]) -> list[dict[str, Any]]:
    return [sitting for sitting in record.get("sittings") or [] if isinstance(sitting, dict)]


def _word(value: object) -> str:
    if isinstance(value, dict):
        return ", ".join(f"{_plain(key)} {_word(one)}" for key, one in value.items()) or "none"
    if isinstance(value, float):
        return rounded(value, 3)
    return _moment(value) if isinstance(value, str) and _parsed(value) else str(value)


def _plain(key: object) -> str:
    return str(key).replace("_", " ")


def _stages(record: Mapping[str, Any]) -> list[tuple[str, str]]:
    """Return the seconds of all workers by stage of the work, over all sittings; empty in older records."""
    total: Counter[str] = Counter()
    for sitting in _entries(record):
        total.update(sitting.get("seconds_by_stage") or {})
    return [(stage, rounded(seconds, 3)) for stage, seconds in total.items()]


def _spreads(morning: Morning, columns: Sequence[str]) -> list[Spread]:
    return [
        spread(plain(title(column)), morning.cells[column].to_numpy(np.float64), morning.groups)
        for column in columns
    ]


def _rows(morning: Morning, columns: Sequence[str], far: Distances) -> Iterator[dict[str, Any]]:
    counts = morning.findings["file"].value_counts()
    cells, greatest = morning.cells, far.greatest
    numbers = [[_number(value) for value in cells[column].tolist()] for column in columns]
    for row, (file, cell, grade) in enumerate(zip(cells["file"], cells["cell"], cells["grade"], strict=True)):
        folder, _, name = str(cell).rpartition("/")
        yield {
            "name": name,
            "folder": folder,
            "group": morning.groups[row] if morning.groups is not None else "",
            "grade": grade,
            "findings": int(counts.get(file, 0)),
            "numbers": [column[row] for column in numbers],
            "distance": f"{greatest[row]:.1f}" if np.isfinite(far.robust[row]).any() else "",
        }


def _number(value: float) -> str:
    """Return a number for the table; empty where there is none."""
    if isfinite(value):
        return rounded(value, _DIGITS)
    return ("-Infinity" if value < 0 else "Infinity") if isinf(value) else ""


def _details(morning: Morning, looks: Sequence[Notable]) -> str:
    """Return what an opened row tells, as JSON for the script."""
    findings: dict[str, list[list[str]]] = {}
    columns = morning.findings[["file", "severity", "code", "sentence"]].astype(str)
    for file, *told in sorted(columns.itertuples(index=False), key=lambda row: _weight(str(row.severity))):
        findings.setdefault(file, []).append(told)
    why = {look.row: list(look.reasons) for look in looks}
    cells = []
    for row, file in enumerate(morning.cells["file"].astype(str)):
        picture = morning.pictures.get(file, Picture())
        links = [picture.figure, picture.thumbnail, picture.mesh, picture.table]
        cells.append([file, links if any(links) else [], findings.get(file, []), why.get(row, [])])
    texts = {kind.code: [kind.title, kind.effect] for kind in _kinds(morning)}
    text = json.dumps({"cells": cells, "kinds": texts}, ensure_ascii=False, separators=(",", ":"))
    # Nothing inside may look like the end of the script element or the start of a comment.
    return text.replace("<", "\\u003c").replace(">", "\\u003e").replace("&", "\\u0026")


@dataclass(frozen=True)
class Seen:
    """One kind of finding, as often as it was seen."""

    code: str
    severity: str  #: the weightiest it was given
    title: str
    effect: str
    places: int
    analysed: tuple[tuple[int, str], ...]  #: row and file of analysed cells
    away: tuple[tuple[int, str], ...]  #: the same of files turned away


def _kinds(morning: Morning) -> list[Seen]:
    """Return the kinds of findings that were seen, the weightiest and commonest first."""
    rows = {file: row for row, file in enumerate(morning.cells["file"].astype(str))}
    away = {file: row for row, file in enumerate(morning.turned_away["file"].astype(str))}
    kinds = []
    for code, table in morning.findings.groupby("code", sort=False):
        files = list(dict.fromkeys(table["file"].astype(str)))
        known = CATALOGUE.get(str(code))
        severities = set(table["severity"])
        kinds.append(
            Seen(
                code=str(code),
                severity=next((one for one in _SEVERITIES if one in severities), ""),
                title=known.title if known else "a kind of finding this version does not know",
                effect=known.effect if known else str(table["effect"].iloc[0]),
                places=int(table["count"].sum()) if "count" in table else len(table),
                analysed=tuple((rows[file], file) for file in files if file in rows),
                away=tuple((away[file], file) for file in files if file in away),
            )
        )
    return sorted(kinds, key=lambda one: (_weight(one.severity), -len(one.analysed) - len(one.away)))


def _weight(severity: str) -> int:
    return _SEVERITIES.index(severity) if severity in _SEVERITIES else len(_SEVERITIES)


def _away(turned_away: pd.DataFrame) -> list[tuple[str, list[tuple[int, str, str]]]]:
    """Return reasons, the commonest first, each with number, file and sentence of its files."""
    reasons: dict[str, list[tuple[int, str, str]]] = {}
    texts = turned_away[["file", "reason", "sentence"]].fillna("").astype(str)
    for number, (file, reason, sentence) in enumerate(texts.itertuples(index=False)):
        told = sentence.removeprefix(f"{file}: ").removeprefix(f"{reason}: ")
        reasons.setdefault(reason, []).append((number, file, told))
    return sorted(reasons.items(), key=lambda one: -len(one[1]))
