"""`morphotone map`: what a person looks at of each cell: figure, thumbnail, mesh and table."""

import argparse
import hashlib
import os
import sys
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from functools import partial
from importlib.metadata import version
from pathlib import Path, PurePath
from typing import Any

import pandas as pd
from matplotlib.figure import Figure

from morphotone.cable.assumptions import Assumptions
from morphotone.commands.drawing import (
    SITES_TABLE,
    TABLE,
    TABLE_COLUMNS,
    Work,
    delete_stale,
    drawn,
    incomplete,
    outcomes,
)
from morphotone.commands.marked import sites_on
from morphotone.commands.options import (
    add_assumption_options,
    add_farthest,
    add_keep_unfit,
    add_pattern,
    add_time_options,
    assumptions_of,
    current_of,
)
from morphotone.commands.workers import add_worker_options, workers_for
from morphotone.errors import ReadingError
from morphotone.night.folder import PATTERNS, Found, find_files, written_name
from morphotone.night.ledger import Ledger
from morphotone.night.outcome import TURNED_AWAY, TURNED_AWAY_HEADER
from morphotone.night.progress import Progress, progress_on
from morphotone.night.record import run_record, write_record
from morphotone.night.results import atomic, atomic_bytes, export, file_names
from morphotone.night.runner import Tally
from morphotone.night.runner import run as run_night
from morphotone.night.sitting import Sitting
from morphotone.questions.placing import FARTHEST_UM
from morphotone.questions.portrait import COLOUR
from morphotone.questions.survey import SPECIMEN, Answer, Request
from morphotone.questions.time_axis import TimeRequest
from morphotone.reading.swc import read_bytes
from morphotone.showing.map_files import AREAS, MapRequest
from morphotone.showing.maps import WIDTHS_MM, map_figure
from morphotone.showing.mesh import BEND_ERROR, MESH_KINDS
from morphotone.showing.panels import PLANES, Plane
from morphotone.showing.sheet import FORMATS
from morphotone.showing.tables import csv_table

NAME = "map"
_PACKAGES = ("matplotlib", "pillow", "trimesh")  # which draw and write the files

_EPILOG = """\
the figure: the cell to scale, coloured by attenuation; attenuation against path and X, every branch a line,
over that of an endless cable like the thickest stem; the morphoelectrotonic transform (directions kept,
lengths replaced) by path, X, attenuation toward and from the soma; the same trees laid out flat.

what is written into MAPS, one of each per cell:
  figures/          the figure, 175 mm wide, or 85 mm without the trees laid out flat
  thumbnails/       the cell alone, 320 dots wide
  meshes/           with --mesh: the membrane in space, coloured, and its scale of colours as PNG
  samples/          the table by sample, as `morphotone survey --samples` writes it
and for all of them:
  maps.csv          one row per cell drawn, with the paths of its files and the mesh's area beside the cable's
  turned_away.csv   one row per file not drawn, with the reason
  turned_away_sites.csv  with --synapses: one row per site not marked, with the reason
  assumptions.toml, run.json, log.txt, ledger.sqlite  as of a survey: the same command again goes on

units: um, MOhm, ms, Hz

example:
  morphotone map sample_morphologies/spar_01.swc --into maps --synapses sample_morphologies/sites.csv

exit code: 0 all drawn, 1 a file or a site was turned away, 2 wrong usage, unusable assumptions, sites, column
or folder, 130 interrupted
"""


@dataclass(frozen=True, eq=False)
class Maps:
    """What `draw_maps` wrote.

    Attributes
    ----------
    maps : DataFrame
        One row per cell drawn, columns as in README; paths of files that there are none of are empty text,
        areas without a mesh NaN.
    turned_away : DataFrame
        One row per file not drawn.
    turned_away_sites : DataFrame
        One row per site not marked; empty without sites.
    sites : dict of str to int
        ``sites`` = ``marked`` + ``turned_away`` + ``elsewhere`` (of other cells than a single one drawn);
        empty without sites.
    tally : Tally
        Files found = drawn (``analysed``) + turned away.
    """

    maps: pd.DataFrame
    turned_away: pd.DataFrame
    turned_away_sites: pd.DataFrame
    sites: dict[str, int]
    tally: Tally


def draw_map(
    path: str | os.PathLike[str],
    assumptions: Assumptions | None = None,
    *,
    synapses: str | os.PathLike[str] | None = None,
    hz: float = 0.0,
    colour: str | None = None,
    width_mm: int = 175,
    plane: Plane = "xy",
    keep_unfit: bool = False,
) -> Figure:
    """Draw the map of one cell.

    Parameters
    ----------
    path : path
        The cell's file.
    assumptions : Assumptions, optional
        The defaults unless given.
    synapses : path, optional
        A file of sites, of which those of this cell are marked.
    hz : float
        The frequency to show.
    colour : str, optional
        The column of the table by sample that colours; log attenuation toward the soma unless given.
    width_mm : {175, 85}
        Two columns of a journal, or one.
    plane : {"xy", "xz", "yz"}
        Coordinates that go across and up.
    keep_unfit : bool
        Draw a file of grade unfit too.

    Returns
    -------
    matplotlib.figure.Figure
        Bound to no window; its ``savefig`` writes it.

    Raises
    ------
    ReadingError
        The file, or that of the sites, cannot be read, or the cell is turned away.
    MorphotoneError
        There is no such numeric column.
    """
    content = read_bytes(path)
    file = _one_file(Path(path))
    shown = MapRequest(width_mm=width_mm, plane=plane, hz=hz, colour=colour)
    request = Request(_with_hz(assumptions or Assumptions(), hz), keep_unfit)
    work = Work(Path(), request, shown, {}, sites_on([file], synapses, alone=True).per_file)
    portrait, _ = drawn(file.name, content, work)
    if isinstance(portrait, Answer):
        raise ReadingError(portrait.sentence, portrait.reason)
    return map_figure(portrait, width_mm, plane)


def draw_maps(
    path: str | os.PathLike[str],
    into: str | os.PathLike[str],
    *,
    assumptions: Assumptions | None = None,
    synapses: str | os.PathLike[str] | None = None,
    shown: MapRequest | None = None,
    keep_unfit: bool = False,
    delays: bool = False,
    transient_ms: tuple[float, float] | None = None,
    farthest_um: float = FARTHEST_UM,
    patterns: Sequence[str] = PATTERNS,
    workers: int = 1,
    minutes_per_cell: float | None = None,
    GB_per_cell: float | None = None,
    strict: bool = False,
    progress: Progress | None = None,
) -> Maps:
    """Draw the maps of a file or of all files of a folder, and write them.

    Parameters
    ----------
    path : path
        A file, or a folder that is searched at any depth.
    into : path
        The maps' folder. What an earlier run of the same kind drew there is kept where the cell's bytes are
        the same and its files are still there; those of a single file stand beside the others.
    assumptions : Assumptions, optional
        The defaults unless given.
    synapses : path, optional
        A file of sites to be marked.
    shown : MapRequest, optional
        Formats, width, plane, frequency, colour and mesh.
    keep_unfit : bool
        Draw files of grade unfit too.
    delays : bool
        Give delays by sample too, which may colour then.
    transient_ms : (float, float), optional
        Rise and decay of a synaptic current, ms, whose responses to give too, from every sample.
    farthest_um : float
        Sites in space farther than this from the cable are turned away, µm.
    patterns : sequence of str
        Which file names of a folder count.
    workers : int
        Number of processes; 0 for one per processor.
    minutes_per_cell, GB_per_cell : float, optional
        Time and memory after which a file is turned away; unless given, what suits the machine.
    strict : bool
        Stop at the first file turned away.
    progress : Progress, optional
        Told about each cell.

    Raises
    ------
    MorphotoneError
        There is no such path, no such file in it, or no such column to colour by.
    ReadingError
        The file of sites cannot be read as such.
    TurnedAwayError
        In strict mode, the first file turned away.
    ResultsError
        The folder holds something else or maps drawn otherwise, or cannot be written to.
    """
    started = datetime.now(UTC)
    into, shown, alone = Path(into), shown or MapRequest(), Path(path).is_file()
    time = TimeRequest(delays, current=current_of(transient_ms))
    request = Request(_with_hz(assumptions or Assumptions(), shown.hz), keep_unfit, samples=True, time=time)
    _check(request, shown)
    found = [_one_file(Path(path))] if alone else find_files(path, patterns, exclude=into)
    sites = sites_on(found, synapses, alone)
    asked = {**_fingerprint(request, shown), "farthest_um": farthest_um, "sites_sha256": sites.sha256}
    with (
        workers_for(workers, None, minutes_per_cell, GB_per_cell) as who,
        Ledger(into, asked) as ledger,
        Sitting(ledger, hashlib.sha256(request.assumptions.to_toml().encode()).hexdigest()) as sitting,
    ):
        sitting.say(f"files found: {len(found)}; {who.said}; {who.limits.described()}")
        before = ledger.known()
        names = file_names({*before, *(file.name for file in found)})
        work = Work(into, request, shown, names, sites.per_file, farthest_um)
        ledger.forget(incomplete(_drawn_of(ledger, before), work))
        tally = run_night(
            found,
            partial(outcomes, work=work),
            ledger=ledger,
            progress=progress,
            pool=who.pool,
            limits=who.limits,
            witness=sitting,
            batch_bytes=1,  # one cell at a time: drawing it takes as long as a survey of many
            strict=strict,
        )
        # A single file stands beside those drawn before; a folder is all there is.
        listed = sorted({*before, *names} if alone else {file.name for file in found}, key=str.encode)
        delete_stale(names, _drawn_of(ledger, listed), work)
        away = sites.turned_away(ledger, listed)
        _write(ledger, listed, request, away if sites.file else None)
        sitting.end("ended")
        called = {"path": str(path), "patterns": list(patterns), **who.to_dict()}
        details = {**called, **asked, **_course(ledger, request), "sites": sites.counts(away)}
        record = run_record(
            started=started, tally=tally, ledger=ledger, names=listed, details=details, packages=_PACKAGES
        )
        write_record(into / "run.json", record)
    return Maps(_read_maps(into), _read(into / f"{TURNED_AWAY}.csv"), away, sites.counts(away), tally)


def _course(ledger: Ledger, request: Request) -> dict[str, Any]:
    """Return what the record says of how the run went."""
    return {"warnings": list(request.assumptions.warnings), "sittings": ledger.sittings()}


def _one_file(path: Path) -> Found:
    return Found(path, written_name(PurePath(path.name)), path.stat().st_size)


def _drawn_of(ledger: Ledger, names: Iterable[str]) -> list[str]:
    """Return those of the names whose cells are drawn."""
    known = ledger.known()
    return [name for name in names if name in known and known[name].status == "analysed"]


def _with_hz(assumptions: Assumptions, hz: float) -> Assumptions:
    """Return the assumptions with the frequency shown among theirs."""
    if hz == 0.0 or hz in assumptions.hz:
        return assumptions
    return replace(assumptions, hz=(*assumptions.hz, hz))


def _check(request: Request, shown: MapRequest) -> None:
    """See before any work that what is asked for can be drawn, on a ball and stick."""
    # Of the assumptions only the frequencies matter to that; the others might turn the specimen away.
    plain = replace(request, assumptions=Assumptions(hz=request.assumptions.hz), keep_unfit=True)
    drawn("specimen", SPECIMEN, Work(Path(), plain, shown))


def _fingerprint(request: Request, shown: MapRequest) -> dict[str, Any]:
    """Return all that the maps depend on besides the files of cells and of sites."""
    return {
        "morphotone": version("morphotone"),
        "matplotlib": version("matplotlib"),
        "keep_unfit": request.keep_unfit,
        **request.time.to_dict(),
        **shown.to_dict(),
        "assumptions": request.assumptions.to_dict(),
    }


def _write(ledger: Ledger, listed: Sequence[str], request: Request, away: pd.DataFrame | None) -> None:
    """Write what there is one of for all cells."""
    export(ledger, listed, {TABLE: ",".join(TABLE_COLUMNS), TURNED_AWAY: TURNED_AWAY_HEADER})
    if away is not None:
        with atomic_bytes(ledger.folder / f"{SITES_TABLE}.csv") as table:
            table.write(csv_table(away))
    with atomic(ledger.folder / "assumptions.toml") as stream:
        stream.write(request.assumptions.to_toml())


def _read_maps(into: Path) -> pd.DataFrame:
    table = _read(into / f"{TABLE}.csv")
    numbers = {column: pd.to_numeric(table[column]) for column in AREAS[:-1]}
    agrees = table[AREAS[-1]].map({"True": True, "False": False, "": pd.NA}).astype("boolean")
    return table.assign(**numbers, **{AREAS[-1]: agrees})


def _read(path: Path) -> pd.DataFrame:
    """Read a table of words back, an empty cell as no text."""
    table: pd.DataFrame = pd.read_csv(path, keep_default_na=False, dtype="str")
    return table


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Add the command's arguments to its parser."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = _EPILOG
    parser.add_argument(
        "path", metavar="FILE_OR_FOLDER", type=Path, help="a cell, or a folder searched at any depth"
    )
    parser.add_argument("--into", metavar="MAPS", type=Path, required=True, help="the maps' folder")
    add_assumption_options(parser)
    parser.add_argument(
        "--hz",
        metavar="HZ",
        type=float,
        nargs="+",
        help="frequencies besides 0 Hz for the table, in Hz; the figure shows the first (0 Hz unless given)",
    )
    add_time_options(parser)
    parser.add_argument(
        "--colour",
        metavar="COLUMN",
        help=f"numeric column of the table by sample that colours (default: {COLOUR})",
    )
    parser.add_argument("--synapses", metavar="SITES.csv", type=Path, help="mark these sites by rank")
    add_farthest(parser)
    parser.add_argument(
        "--figure",
        choices=FORMATS,
        nargs="+",
        default=["png"],
        help="formats of the figure (default: png)",
    )
    parser.add_argument(
        "--width",
        type=int,
        choices=WIDTHS_MM,
        default=WIDTHS_MM[-1],
        help="width of the figure, in mm (default: %(default)s)",
    )
    parser.add_argument(
        "--plane",
        choices=list(PLANES),
        default="xy",
        help="coordinates that go across and up (default: %(default)s)",
    )
    parser.add_argument(
        "--mesh", choices=MESH_KINDS, help="write the membrane in space too, in um, the value at every vertex"
    )
    add_keep_unfit(parser, "draw")
    add_pattern(parser)
    add_worker_options(parser)
    parser.add_argument("--strict", action="store_true", help="stop at the first file turned away")


def run(args: argparse.Namespace) -> int:
    """Draw, write, say how it went, and return the exit code."""
    shown = MapRequest(
        formats=tuple(dict.fromkeys(args.figure)),
        width_mm=args.width,
        plane=args.plane,
        hz=args.hz[0] if args.hz else 0.0,
        colour=args.colour,
        mesh=args.mesh,
    )
    made = draw_maps(
        args.path,
        args.into,
        assumptions=assumptions_of(args),
        synapses=args.synapses,
        shown=shown,
        keep_unfit=args.keep_unfit,
        delays=args.delays,
        transient_ms=args.transient,
        farthest_um=args.farthest_um,
        patterns=args.pattern,
        workers=args.workers,
        minutes_per_cell=args.minutes_per_cell,
        GB_per_cell=args.GB_per_cell,
        strict=args.strict,
        progress=progress_on(sys.stderr),
    )
    tally, sites = made.tally, made.sites
    again = f" ({tally.unchanged} of them unchanged since an earlier run)" if tally.unchanged else ""
    files = "file" if tally.found == 1 else "files"
    print(f"{tally.found} {files} found = {tally.analysed} drawn + {tally.turned_away} turned away{again}")
    if sites:
        other = f" + {sites['elsewhere']} of other cells" if sites["elsewhere"] else ""
        print(
            f"{sites['sites']} sites = {sites['marked']} marked + {sites['turned_away']} turned away{other}"
        )
    print(f"maps: {args.into}")
    odd = int((~made.maps["area_agrees"].fillna(True)).sum())
    if odd:
        print(
            f"note: {odd} {'mesh has' if odd == 1 else 'meshes have'} another area than the cable, by more "
            f"than facet_error and {BEND_ERROR:.1%} of it; area_agrees in {args.into / 'maps.csv'} says which"
        )
    if tally.turned_away and args.path.is_file():
        why = made.turned_away.set_index("file")["sentence"]
        print(f"  {why[_one_file(args.path).name]}")
    elif tally.turned_away:
        print(f"why files were turned away: {args.into / 'turned_away.csv'}")
    if sites and sites["turned_away"]:
        print(f"why sites were turned away: {args.into / 'turned_away_sites.csv'}")
    return int(tally.turned_away > 0 or bool(sites and sites["turned_away"]))
