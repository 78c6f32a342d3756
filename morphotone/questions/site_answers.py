"""A batch of files with their sites to the tables they give: read, place, solve as one forest, tabulate."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from morphotone.cable.assumptions import Assumptions
from morphotone.errors import AssumptionError, ReadingError
from morphotone.questions.clamp_table import clamp_table
from morphotone.questions.columns import Columns
from morphotone.questions.pair_table import Pairs, pairs_of
from morphotone.questions.placing import FARTHEST_UM, placed_on
from morphotone.questions.ranking import ADDED_COLUMNS
from morphotone.questions.survey import SPECIMEN, Answer, Request, prepare
from morphotone.questions.synapses import (
    Placed,
    Solved,
    brief_columns,
    site_table,
    solved,
    steady_columns,
    with_synapse,
)
from morphotone.questions.together import together_table, veto_table, with_soma
from morphotone.reading.sites import Sites, TurnedAwaySite

LEADING = ("file", "cell")  # columns that say whose row it is


@dataclass(frozen=True)
class SiteRequest:
    """What is asked of every cell with sites.

    Attributes
    ----------
    assumptions : Assumptions
        One choice; its frequencies are cases besides 0 Hz.
    farthest_um : float
        A site in space farther than this from the cable's surface is turned away, µm.
    keep_unfit : bool
        Rank on files of grade unfit too.
    synapses, brief : bool
        Give what each synapse does, steadily; as a brief conductance too.
    pairs, together : bool
        Give pairs of sites; what groups of synapses do at once.
    between : (str, str) or None
        The two groups whose pairs are given; those of all sites if None.
    clamp_MOhm : float or None
        Series resistance of the voltage clamp whose view of each site is asked for, MΩ.
    clamp_at : str or None
        Label of the site at which the clamp is, in cells that have it; else it is at the soma.
    """

    assumptions: Assumptions
    farthest_um: float = FARTHEST_UM
    keep_unfit: bool = False
    synapses: bool = False
    brief: bool = False
    pairs: bool = False
    together: bool = False
    between: tuple[str, str] | None = None
    clamp_MOhm: float | None = None
    clamp_at: str | None = None

    def __post_init__(self) -> None:
        for value, name, option in (
            (self.farthest_um, "greatest distance from the cable", "µm"),
            (self.clamp_MOhm or 0.0, "series resistance", "MΩ"),
        ):
            if not 0.0 <= value < np.inf:  # NaN fails too
                raise AssumptionError(f"{name} {value!r} {option}, expected a number of 0 {option} or more")


@dataclass(frozen=True, eq=False)
class SiteAnswer:
    """What the sites of one file gave; each is ranked or turned away.

    Attributes
    ----------
    name, sha256 : str
        The file's name as asked; of its bytes, empty if they could not be read.
    tables : dict of str to Columns
        ``ranking``, and on request ``together``, ``veto``, ``clamp``; empty if no site has a place.
    pairs : Pairs or None
        On request.
    turned_away : tuple of TurnedAwaySite
        Why the others are not in it.
    """

    name: str
    sha256: str
    tables: dict[str, Columns] = field(default_factory=dict)
    pairs: Pairs | None = None
    turned_away: tuple[TurnedAwaySite, ...] = ()


@dataclass(frozen=True, eq=False)
class FileOfCell:
    """A file and the sites on its cell."""

    name: str
    content: bytes | ReadingError
    sites: Sites


def site_answers(files: Sequence[FileOfCell], request: SiteRequest) -> list[SiteAnswer]:
    """Work out the sites of several files together; one that fails costs nobody else anything."""
    begun = [_begin(file, request) for file in files]
    ready = [placed for _, placed in begun if placed is not None]
    with np.errstate(over="ignore", under="ignore", divide="ignore", invalid="ignore"):
        cells = iter(solved(ready, request.assumptions))
        return [
            answer if placed is None else _filled(answer, next(cells), request) for answer, placed in begun
        ]


def headers(request: SiteRequest, others: Sequence[str]) -> dict[str, list[str]]:
    """Return the columns of the tables that `site_answers` gives to a request, without the leading names."""
    nothing = np.full(2, np.nan)
    text, count = np.full(2, "", object), np.array([2, 2])
    sites = Sites(
        "specimen", count, text, text, text, np.full(2, "sample", object), count, np.zeros(2),
        np.full((2, 3), np.nan), count, nothing, np.ones(2), np.array([70.0, -8.0]), np.ones(2), np.ones(2),
        dict.fromkeys(others, text),
    )  # fmt: skip
    file = FileOfCell("specimen", SPECIMEN, sites)
    # Of the assumptions only the frequencies have columns; the others might turn the specimen away.
    plain = replace(request, assumptions=Assumptions(hz=request.assumptions.hz), keep_unfit=True)
    (answer,) = site_answers([file], plain)
    return {name: list(table) for name, table in answer.tables.items()}


def _filled(answer: SiteAnswer, cell: Solved, request: SiteRequest) -> SiteAnswer:
    """Return the answer with its tables."""
    placed, assumptions = cell.placed, request.assumptions
    table = site_table(cell)
    if request.synapses:
        table |= steady_columns(cell)
    if request.brief:
        table |= brief_columns(cell, assumptions)
    table |= _carried(placed.sites.others, {*table, *LEADING, *ADDED_COLUMNS})
    tables = {"ranking": table}
    if request.together and with_synapse(placed.sites).any():
        between = with_soma(placed, assumptions)
        tables |= {"together": together_table(placed, between), "veto": veto_table(placed, between)}
    if request.clamp_MOhm is not None:
        tables["clamp"] = clamp_table(
            placed, assumptions, request.clamp_MOhm, request.clamp_at, request.synapses, request.brief
        )
    pairs = pairs_of(placed, assumptions, request.between) if request.pairs else None
    return replace(answer, tables=tables, pairs=pairs)


def _carried(others: Mapping[str, Any], taken: set[str]) -> Columns:
    """Return the further columns of the file of sites, under names that hide none of ours."""
    columns: Columns = {}
    for name, text in others.items():
        free = name
        while free in taken or (free != name and free in others):
            free += "_as_given"
        columns[free] = text
    return columns


def all_turned_away(name: str, sites: Sites, reason: str, sentence: str, sha256: str = "") -> SiteAnswer:
    """Return the answer for a file none of whose sites can be ranked."""
    count = len(sites)
    return SiteAnswer(name, sha256, turned_away=sites.turned_away([reason] * count, [sentence] * count))


def _begin(file: FileOfCell, request: SiteRequest) -> tuple[SiteAnswer, Placed | None]:
    """Read a file and find its sites' places; no Placed means that all sites are turned away."""
    wanted = Request(request.assumptions, request.keep_unfit)
    prepared = prepare(file.name, file.content, wanted)
    if isinstance(prepared, Answer):
        answer = all_turned_away(file.name, file.sites, prepared.reason, prepared.sentence, prepared.sha256)
        return answer, None
    placed, turned_away = placed_on(prepared, file.sites, request.assumptions, request.farthest_um)
    answer = SiteAnswer(file.name, prepared.rec.sha256, turned_away=turned_away)
    return answer, placed if len(placed.sites) else None
