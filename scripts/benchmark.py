"""Measures how long morphotone takes, as ratios to the bare reading of the same files with pandas.

python scripts/benchmark.py [FOLDER] [--quick] [--json FILE]
"""

from __future__ import annotations

import argparse
import json
import os
import platform
import sys
from collections.abc import Iterator, Sequence
from dataclasses import asdict, fields
from importlib.metadata import version
from pathlib import Path
from tempfile import TemporaryDirectory

from benchmark_growth import measure_growth
from benchmark_limits import measure_limits
from benchmark_measures import PARTS as MEASURES
from benchmark_measures import Bench, Row, Sizes, surveyed

from morphotone.errors import MorphotoneError
from morphotone.night.results import atomic

PARTS = {**MEASURES, "growth": measure_growth, "limits": measure_limits}
USUAL = Sizes(
    repeats=5,
    workers=(2,),
    cells=60,
    samples=6_500,
    most_samples=1_000_000,
    most_cells=1_000,
    most_cases=16,
)
QUICK = Sizes(
    repeats=3,
    workers=(2,),
    cells=8,
    samples=6_500,
    most_samples=50_000,
    most_cells=100,
    most_cases=4,
)
#: Too few cells for several workers, too little time for new processes one after the other.
QUICK_PARTS = ("runs", "stages", "time", "sites", "growth")
_NAME_WIDTH = 46

_EPILOG = """\
parts:
  runs     bare reading (pandas.read_csv, files warm), vet, and survey in its usual forms, 1 worker
  stages   where the time of a survey at 0 Hz goes, by the stages of its own run.json
  time     the time axis of one cell, in units of one sweep of one case at 0 Hz
  sites    ranking 200 sites on every cell, with 0 and 100 Hz and delays, against the survey at 0 Hz
  workers  a survey by several processes that run already, against the same by one
  growth   exponent of time against samples (one cell, without ledger), cells (whole surveys) and cases
           (solving alone), by least squares of the logarithms
  start    commands from the shell, Python's own start included
  memory   the most that the process of a survey ever had in RAM
  limits   what bounds a very large run: ledger, tables, a Dask scheduler, with cells that are only pretended

each figure is the median of the repetitions, beside the least and the greatest; x bare is a ratio to the bare
reading in the same repetition, sweeps one to a single case; a target stands beside where one was set

examples:
  python scripts/benchmark.py --quick
  python scripts/benchmark.py --cells 500 --json benchmark.json
  python scripts/benchmark.py sample_morphologies --parts runs stages

exit code: 0 measured, 2 wrong usage or a folder without reconstructions
"""


def main(argv: Sequence[str] | None = None) -> int:
    """Measure, print each row as it comes, and return the exit code."""
    args = parser().parse_args(argv)
    chosen = QUICK if args.quick else USUAL
    given = {name: value for name, value in vars(args).items() if value is not None}
    sizes = Sizes(
        **{field.name: given.get(field.name, getattr(chosen, field.name)) for field in fields(Sizes)}
    )
    parts = args.parts or (QUICK_PARTS if args.quick else tuple(PARTS))
    try:
        with TemporaryDirectory() as scratch:
            measure(args.folder, Path(scratch), sizes, parts, args.json)
    except MorphotoneError as error:
        print(f"benchmark: {error}", file=sys.stderr)
        return 2
    return 0


def measure(
    folder: Path | None, scratch: Path, sizes: Sizes, parts: Sequence[str], json_file: Path | None
) -> None:
    """Measure the chosen parts, print them, and write them to a file if one is given."""
    bench = Bench(folder or scratch / "cells", scratch, sizes, given=folder is not None)
    if folder is None:
        bench.drawn(sizes.cells, sizes.samples).rename(bench.folder)
    about = {"machine": machine(), "material": material(bench, drawn=folder is None)}
    for line in about.values():
        print(line, flush=True)
    rows = list(printed(row for part in parts for row in PARTS[part](bench)))
    if json_file:
        with atomic(json_file) as stream:
            json.dump(
                {**about, "sizes": asdict(sizes), "rows": [asdict(row) for row in rows]}, stream, indent=1
            )


def machine() -> str:
    """Say what the figures hold for."""
    libraries = ", ".join(f"{name} {version(name)}" for name in ("morphotone", "numpy", "scipy", "pandas"))
    return (
        f"{platform.machine()}, {os.cpu_count()} processors, Python {platform.python_version()}, {libraries}"
    )


def material(bench: Bench, *, drawn: bool) -> str:
    """Say what is measured on, after a first survey that warms files and libraries."""
    with TemporaryDirectory() as results:
        tally = surveyed(bench.folder, Path(results))
    size = sum(path.stat().st_size for path in bench.paths) / 1e6
    return (
        f"{'drawn cells' if drawn else bench.folder}: {tally.found} files = {tally.analysed} analysed + "
        f"{tally.turned_away} turned away, {tally.samples:,} samples, {size:.1f} MB; "
        f"{bench.sizes.repeats} repetitions"
    )


def printed(rows: Iterator[Row]) -> Iterator[Row]:
    """Print each row as it comes, and hand it on."""
    part = ""
    for row in rows:
        if row.part != part:
            part = row.part
            print(f"\n{part:<{_NAME_WIDTH}} {'median':>9} {'least':>9} {'greatest':>9}")
        figures = " ".join(f"{_figure(value):>9}" for value in (row.median, row.least, row.greatest))
        target = "" if row.target is None else f" (target: at most {_figure(row.target)})"
        print(f"  {row.name:<{_NAME_WIDTH - 2}} {figures} {row.unit}{target}".rstrip(), flush=True)
        yield row


def _figure(value: float) -> str:
    return f"{value:.0f}" if abs(value) >= 100 else f"{value:.3g}"


def parser() -> argparse.ArgumentParser:
    """Return the command line's parser."""
    described = argparse.ArgumentParser(
        prog="benchmark.py",
        description="Measure morphotone in units of the bare reading of the same files.",
        epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    add = described.add_argument
    add(
        "folder",
        metavar="FOLDER",
        type=Path,
        nargs="?",
        help="reconstructions to measure on, instead of drawn",
    )
    add("--quick", action="store_true", help="small sizes, few repetitions: some 20 seconds")
    add(
        "--parts",
        nargs="+",
        choices=PARTS,
        help="what to measure (default: all, or with --quick runs, stages, time, growth)",
    )
    add("--json", metavar="FILE", type=Path, help="write the figures there too")
    add("--repeats", metavar="N", type=_positive, help=f"of everything (default: {USUAL.repeats})")
    add("--workers", metavar="N", type=_several, nargs="+", help="numbers of processes to try (default: 2)")
    add("--cells", metavar="N", type=_positive, help=f"to draw (default: {USUAL.cells})")
    add("--samples", metavar="N", type=_several, help=f"of each drawn cell (default: {USUAL.samples:,})")
    for what in ("samples", "cells", "cases"):
        most = getattr(USUAL, f"most_{what}")
        add(f"--most-{what}", metavar="N", type=_several, help=f"up to which to grow (default: {most:,})")
    return described


def _positive(text: str) -> int:
    return _at_least(1, text)


def _several(text: str) -> int:
    return _at_least(2, text)


def _at_least(least: int, text: str) -> int:
    if not (text.isdecimal() and int(text) >= least):
        raise argparse.ArgumentTypeError(f"read {text!r}, expected a whole number of at least {least}")
    return int(text)


if __name__ == "__main__":
    sys.exit(main())
