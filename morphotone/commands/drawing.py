"""What a worker does for `morphotone map`: from a file to the files of its cell's map."""

from collections.abc import Iterable, Iterator, Mapping
from contextlib import suppress
from dataclasses import astuple, dataclass, field
from pathlib import Path

import numpy as np

from morphotone.commands.contents import content_of, is_known
from morphotone.errors import ReadingError, ResultsError
from morphotone.night.outcome import Item, Outcome, csv_line
from morphotone.night.results import atomic_bytes, spellings
from morphotone.questions.marks import marks_of
from morphotone.questions.placing import FARTHEST_UM
from morphotone.questions.portrait import Marks, Portrait, check_drawable, portrait_of
from morphotone.questions.survey import Answer, Request, cells_of, prepare
from morphotone.reading.sites import Sites, TurnedAwaySite
from morphotone.showing.map_files import COLUMNS, MapRequest, contents, places

TABLE, SITES_TABLE = "maps", "turned_away_sites"
TABLE_COLUMNS = ("file", "cell", *COLUMNS)
# The sizes in files kept although unfit may overflow; what cannot be drawn is turned away.
_ABSURD = np.errstate(over="ignore", under="ignore", divide="ignore", invalid="ignore")


@dataclass(frozen=True, eq=False)
class Work:
    """What a worker needs to know.

    Attributes
    ----------
    into : Path
        The maps' folder.
    request : Request
        How a file becomes a cell.
    shown : MapRequest
        What is drawn of it.
    names : dict of str to str
        By file, the safe relative path that its files' names start from.
    sites : dict of str to Sites
        By file, where there are any.
    farthest_um : float
        A site in space farther than this from the cable is turned away, µm.
    """

    into: Path
    request: Request
    shown: MapRequest
    names: Mapping[str, str] = field(default_factory=dict)
    sites: Mapping[str, Sites] = field(default_factory=dict)
    farthest_um: float = FARTHEST_UM


def outcomes(items: list[Item], work: Work) -> list[Outcome]:
    """Draw a batch of the night's items; a file whose bytes are known is left as it is."""
    return [_outcome(item, work) for item in items]


@_ABSURD
def _outcome(item: Item, work: Work) -> Outcome:
    content = content_of(item)
    if is_known(content, item.known_sha256):
        return Outcome(item.name, "unchanged", sha256=item.known_sha256 or "")
    portrait, away = drawn(item.name, content, work)
    if isinstance(portrait, Answer):
        return _turned_away(portrait, work)
    rec, paths = portrait.cell.rec, places(work.names[item.name], work.shown)
    made = contents(portrait, item.name, work.shown)
    try:
        _write(work.into, paths, made.files)
    except ResultsError as error:  # without a hash, so that the next run draws it
        return _turned_away(Answer(item.name, "", 0, {}, reason="not_written", sentence=str(error)), work)
    fields = {column: some[0] for column, some in paths.items() if some} | made.areas()
    row = csv_line(item.name, rec.cell, *(fields.get(column, "") for column in COLUMNS))
    parts = {TABLE: row.encode(), SITES_TABLE: site_lines(away)}
    return Outcome(item.name, "analysed", rec.sha256, len(rec.number), parts)


def _write(into: Path, paths: Mapping[str, list[str]], made: Mapping[str, list[bytes]]) -> None:
    for column, files in made.items():
        for path, data in zip(paths[column], files, strict=True):
            with atomic_bytes(into / path) as stream:
                stream.write(data)


@_ABSURD
def drawn(
    name: str, content: bytes | ReadingError, work: Work
) -> tuple[Portrait | Answer, tuple[TurnedAwaySite, ...]]:
    """Return a cell ready to be drawn and its sites that have no place; an Answer is a file turned away.

    Raises
    ------
    MorphotoneError
        There is no such column to colour by.
    """
    prepared = prepare(name, content, work.request)
    if isinstance(prepared, Answer):
        return prepared, ()
    assumptions, hz = work.request.assumptions, work.shown.hz
    (cell,) = cells_of([prepared], work.request)
    marks: Marks | None = None
    away: tuple[TurnedAwaySite, ...] = ()
    if name in work.sites:
        marks, away = marks_of(prepared, work.sites[name], assumptions, hz, work.farthest_um)
    portrait = portrait_of(cell, hz, work.shown.colour, marks)
    try:
        check_drawable(portrait)
    except ReadingError as error:
        rec = cell.rec
        return Answer(name, rec.sha256, len(rec.number), {}, reason=error.reason, sentence=str(error)), ()
    return portrait, away


def _turned_away(answer: Answer, work: Work) -> Outcome:
    """Return a file as turned away, its sites with it."""
    parts = {}
    if answer.name in work.sites:
        sites = work.sites[answer.name]
        away = sites.turned_away([answer.reason] * len(sites), [answer.sentence] * len(sites))
        parts[SITES_TABLE] = site_lines(away)
    return Outcome(
        answer.name, "turned away", answer.sha256, answer.samples, parts, answer.reason, answer.sentence
    )


def site_lines(away: Iterable[TurnedAwaySite]) -> bytes:
    """Return sites turned away as CSV lines."""
    return "".join(csv_line(*map(str, astuple(site))) for site in away).encode()


def incomplete(names: Iterable[str], work: Work) -> list[str]:
    """Return those of the cells drawn before of whose files one is missing."""
    return [name for name in names if not all((work.into / path).exists() for path in _paths(name, work))]


def delete_stale(names: Iterable[str], kept: Iterable[str], work: Work) -> None:
    """Delete the files of cells that are not drawn now; files that no run of this folder made stay.

    Parameters
    ----------
    names : iterable of str
        All files that the ledger knows or knew.
    kept : iterable of str
        Those of them that are drawn.
    work : Work
        What was asked.
    """
    needed = {path for name in kept for path in _paths(name, work)}
    for name in names:
        for spelling in spellings(name):
            for path in _flat(places(spelling, work.shown)):
                if path not in needed:
                    with suppress(OSError):  # what stays behind, no table names
                        (work.into / path).unlink(missing_ok=True)


def _paths(name: str, work: Work) -> Iterator[str]:
    yield from _flat(places(work.names[name], work.shown))


def _flat(paths: Mapping[str, list[str]]) -> Iterator[str]:
    for some in paths.values():
        yield from some
