"""What the benchmark times: the commands, their stages, the time axis, workers, growth, start and memory.

Everything that is timed is what the commands call. Every repetition goes through all runs of a part in turn
and a ratio is taken within one repetition, so that what slows the machine for a while slows both sides.
"""

from __future__ import annotations

import json
import subprocess
import sys
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any, TypeVar

import numpy as np
import pandas as pd
from benchmark_cells import draw_folder

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.delays import delays
from morphotone.cable.forest import Column, Forest
from morphotone.cable.modes import time_constants
from morphotone.cable.response import frequency_response, half_power_hz
from morphotone.cable.spectrum import forest_of
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.transients import transients
from morphotone.cable.tree import build
from morphotone.commands.rank import rank
from morphotone.commands.survey import write_survey
from morphotone.commands.vet import vet
from morphotone.commands.workers import workers_for
from morphotone.errors import ReadingError
from morphotone.night.folder import PATTERNS, find_files
from morphotone.night.runner import Tally
from morphotone.questions.survey import Request
from morphotone.questions.time_axis import TimeRequest
from morphotone.reading.reconstruction import read

Key = TypeVar("Key")
Timer = Callable[[], float]

MEMORY_SCRIPT = Path(__file__).resolve().with_name("benchmark_memory.py")
COLUMNS = ["number", "type", "x", "y", "z", "radius", "parent"]
AT_REST = Request(Assumptions())
TWO_FREQUENCIES = Request(Assumptions(hz=(10.0, 100.0)))
BY_SAMPLE = Request(Assumptions(), samples=True)
WITH_DELAYS = replace(TWO_FREQUENCIES, time=TimeRequest(delays=True))
SMALL_CELL = 500  # samples; of the cells whose number grows
SITES_A_CELL = 200
SWEEPS = 5  # of one case, whose median is the unit of the time axis
CURRENT = SynapticCurrent(0.5, 3.0)
#: What each run should cost at most, in bare readings: for drawn cells, and for a folder that was given,
#: whose files are as a rule smaller.
RUN_TARGETS: dict[str, tuple[float, float]] = {
    "vet": (2, 3),
    "survey at 0 Hz": (4, 6),
    "survey at 0 Hz with two frequencies and delays": (6, 8),
    "survey at 0 Hz with tables by sample": (10, 12),
}
GRID_HZ: list[float] = np.geomspace(1.0, 1e4, 41).tolist()

REST = "rest"  # of a sitting, outside its stages


@dataclass(frozen=True)
class Row:
    """One line of the table: the median of the repetitions, with the least and the greatest.

    ``target`` is what the median should not exceed, where something was set.
    """

    part: str
    name: str
    unit: str
    median: float
    least: float
    greatest: float
    target: float | None = None


@dataclass(frozen=True)
class Sizes:
    """How much is measured, and how often."""

    repeats: int
    workers: tuple[int, ...]
    cells: int  #: drawn unless a folder is given
    samples: int  #: of each of them
    most_samples: int
    most_cells: int
    most_cases: int


@dataclass(frozen=True)
class Bench:
    """What is measured on: a folder of reconstructions, and room for cells drawn besides."""

    folder: Path
    scratch: Path
    sizes: Sizes
    given: bool = False  #: the folder was given, not drawn

    @property
    def paths(self) -> list[Path]:
        """The reconstructions in the folder."""
        return [file.path for file in find_files(self.folder)]

    def drawn(self, cells: int, samples: int) -> Path:
        """Return a folder of drawn cells, drawn when first asked for."""
        folder = self.scratch / f"{cells}_of_{samples}"
        return folder if folder.exists() else draw_folder(folder, cells, samples)

    def repeated(self, timers: Mapping[Key, Timer]) -> dict[Key, list[float]]:
        """Go through all timers in turn, as often as asked; return what each gave."""
        rounds = [[timer() for timer in timers.values()] for _ in range(self.sizes.repeats)]
        return {name: list(given) for name, given in zip(timers, zip(*rounds, strict=True), strict=True)}


def row(part: str, name: str, unit: str, values: Sequence[float], target: float | None = None) -> Row:
    """Summarise repetitions."""
    return Row(part, name, unit, float(np.median(values)), min(values), max(values), target)


def ratios(values: Sequence[float], to: Sequence[float]) -> list[float]:
    """Return the ratio within each repetition."""
    return [value / reference for value, reference in zip(values, to, strict=True)]


def seconds_of(work: Callable[..., object], *args: object) -> float:
    """Return how long a call takes."""
    start = time.perf_counter()
    work(*args)
    return time.perf_counter() - start


def read_barely(paths: Sequence[Path]) -> None:
    """Read the numbers in files as pandas does it, and do nothing with them."""
    for path in paths:
        try:
            pd.read_csv(
                path,
                sep=r"\s+",
                comment="#",
                header=None,
                names=COLUMNS,
                dtype="float64",
                engine="c",
                encoding_errors="replace",
            )
        except ValueError:
            continue  # a file with a fault, in a folder that was given: read as far as the fault


def surveyed(folder: Path, results: Path, request: Request = AT_REST, workers: int = 1) -> Tally:
    """Survey as the command does, with nobody looking on."""
    with workers_for(workers) as who:
        return write_survey(
            folder, results, request, patterns=PATTERNS, workers=who, strict=False, progress=None
        )


def survey_seconds(folder: Path, request: Request = AT_REST, workers: int = 1) -> float:
    """Return how long a survey into a new results folder takes."""
    with TemporaryDirectory() as results:
        return seconds_of(surveyed, folder, Path(results), request, workers)


def measure_runs(bench: Bench) -> Iterator[Row]:
    """Measure the commands on the folder."""
    bare, folder = "bare reading", bench.folder
    seconds = bench.repeated(
        {
            bare: partial(seconds_of, read_barely, bench.paths),
            "vet": partial(seconds_of, vet, folder),
            "survey at 0 Hz": partial(survey_seconds, folder),
            "survey at 0 Hz and two frequencies": partial(survey_seconds, folder, TWO_FREQUENCIES),
            "survey at 0 Hz with two frequencies and delays": partial(survey_seconds, folder, WITH_DELAYS),
            "survey at 0 Hz with tables by sample": partial(survey_seconds, folder, BY_SAMPLE),
        }
    )
    reference = seconds.pop(bare)
    yield row("runs", bare, "s", reference)
    for name, values in seconds.items():
        target = RUN_TARGETS[name][bench.given] if name in RUN_TARGETS else None
        yield row("runs", name, "x bare", ratios(values, reference), target)


def measure_stages(bench: Bench) -> Iterator[Row]:
    """Measure where the time of a survey goes, with tables by branch and by cell only."""
    shares = []
    for _ in range(bench.sizes.repeats):
        bare = seconds_of(read_barely, bench.paths)
        with TemporaryDirectory() as results:
            surveyed(bench.folder, Path(results))
            sitting = json.loads((Path(results) / "run.json").read_text(encoding="utf-8"))["sittings"][-1]
        stages = sitting["seconds_by_stage"]
        stages[REST] = sitting["seconds"] - sum(stages.values())
        shares.append({name: seconds / bare for name, seconds in stages.items()})
    for name in shares[0]:
        yield row("stages", name, "x bare", [each[name] for each in shares])


def measure_time(bench: Bench) -> Iterator[Row]:
    """Measure the time axis of one drawn cell in units of one sweep of one case, at 0 Hz."""
    (path,) = bench.drawn(1, bench.sizes.samples).iterdir()
    cell = [build(read(path), Assumptions())]
    sweep = partial(_sweep_seconds, forest_of(cell, Assumptions()))
    targets: dict[str, tuple[Callable[..., object], tuple[Any, ...], float | None]] = {
        "all delays": (delays, (), 2.0),
        "three time constants": (time_constants, (3,), 60.0),
        "peak and half-width, all samples": (transients, (CURRENT,), 150.0),
        "peak and half-width, soma only": (transients, (CURRENT, [np.zeros(1, np.int64)]), None),
        f"{len(GRID_HZ)} frequencies": (frequency_response, (GRID_HZ,), None),
        "half-power frequency of the attenuation": (half_power_hz, (), None),
    }
    timers: dict[str, Timer] = {
        name: partial(seconds_of, work, cell, Assumptions(), *more)
        for name, (work, more, _) in targets.items()
    }
    seconds = bench.repeated({"one case": sweep, **timers})
    reference = seconds.pop("one case")
    yield row("time", "one case, at 0 Hz", "ms", [1e3 * value for value in reference])
    for name, values in seconds.items():
        yield row("time", name, "sweeps", ratios(values, reference), targets[name][2])


def _sweep_seconds(forest: Forest) -> float:
    """Return how long one case takes to solve: the median of a few, each too short to be timed alone."""
    return float(np.median([seconds_of(forest.solved, [Column(0, 0.0)]) for _ in range(SWEEPS)]))


def measure_workers(bench: Bench) -> Iterator[Row]:
    """Measure a survey by several processes against the same by one."""
    for workers in bench.sizes.workers:
        first = survey_seconds(bench.folder, workers=workers)
        seconds = bench.repeated(
            {count: partial(survey_seconds, bench.folder, workers=count) for count in (1, workers)}
        )
        yield row("workers", f"survey at 0 Hz, {workers} workers", "s", seconds[workers])
        yield row("workers", f"the first by {workers}, with their start", "s", [first])
        share = ratios(seconds[workers], seconds[1])
        yield row("workers", f"{workers} workers' time over 1's", "x", share, 1 / (0.9 * workers))


def measure_sites(bench: Bench) -> Iterator[Row]:
    """Measure a ranking of sites on every cell against the survey of the same cells."""
    sites = _sites_drawn(bench)
    seconds = bench.repeated(
        {"survey": partial(survey_seconds, bench.folder), "rank": partial(_rank_seconds, bench.folder, sites)}
    )
    name = f"rank {SITES_A_CELL} sites a cell"
    yield row("sites", name, "s", seconds["rank"])
    yield row("sites", f"{name}, over a survey at 0 Hz", "x", ratios(seconds["rank"], seconds["survey"]), 2.0)


def _sites_drawn(bench: Bench) -> Path:
    """Write a file of sites: samples drawn from each cell, each with a fraction toward its parent."""
    rng = np.random.default_rng(SITES_A_CELL)
    lines = ["cell,site,sample,fraction"]
    for file in find_files(bench.folder):
        try:
            rec = read(file.path)
        except ReadingError:
            continue  # in a folder that was given
        within = rec.number[rec.parent >= 0]
        drawn = zip(rng.choice(within, SITES_A_CELL), rng.uniform(size=SITES_A_CELL), strict=True)
        lines += [f"{file.name},s{n},{sample},{share:.3f}" for n, (sample, share) in enumerate(drawn)]
    path = bench.scratch / "sites.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def _rank_seconds(folder: Path, sites: Path) -> float:
    with TemporaryDirectory() as results:
        return seconds_of(rank, folder, sites, results)


def measure_start(bench: Bench) -> Iterator[Row]:
    """Measure what a person waits for before anything happens."""
    small = bench.drawn(1, SMALL_CELL)
    timers: dict[str, Timer] = {
        "morphotone --help": _help_seconds,
        "survey of one small cell": partial(_shell_seconds, small),
    }
    for (name, values), target in zip(bench.repeated(timers).items(), (0.3, 2), strict=True):
        yield row("start", name, "s", values, target)


def _help_seconds() -> float:
    return seconds_of(_said_by, [sys.executable, "-m", "morphotone", "--help"])


def _shell_seconds(folder: Path) -> float:
    survey = [sys.executable, "-m", "morphotone", "survey", str(folder), "--workers", "1", "--into"]
    with TemporaryDirectory() as results:
        return seconds_of(_said_by, [*survey, results])


def measure_memory(bench: Bench) -> Iterator[Row]:
    """Measure the most memory of a survey's own process, a new one each time."""
    sizes, workers = bench.sizes, max(bench.sizes.workers)
    few, many = (bench.drawn(count, SMALL_CELL) for count in (sizes.most_cells // 10, sizes.most_cells))
    peaks = bench.repeated(
        {
            "one small cell": partial(_peak_mb, bench.drawn(1, SMALL_CELL), 1),
            f"one cell of {sizes.most_samples:,} samples": partial(
                _peak_mb, bench.drawn(1, sizes.most_samples), 1
            ),
            f"main process of {workers} workers": partial(_peak_mb, few, workers),
            f"the same, {sizes.most_cells:,} cells": partial(_peak_mb, many, workers),
        }
    )
    for (name, values), target in zip(peaks.items(), (None, 1500, None, None), strict=True):
        yield row("memory", name, "MB", values, target)
    *_, before, after = peaks.values()
    more = [one - other for one, other in zip(after, before, strict=True)]
    yield row("memory", f"{sizes.most_cells:,} cells more than a tenth of them", "MB", more, 50)


def _peak_mb(folder: Path, workers: int) -> float:
    survey = [sys.executable, str(MEMORY_SCRIPT), "survey", str(folder), "--workers", str(workers), "--into"]
    with TemporaryDirectory() as results:
        return float(_said_by([*survey, results]).splitlines()[-1])


def _said_by(command: Sequence[str]) -> str:
    return subprocess.run(command, check=True, capture_output=True, text=True).stdout


PARTS: dict[str, Callable[[Bench], Iterator[Row]]] = {
    "runs": measure_runs,
    "stages": measure_stages,
    "time": measure_time,
    "sites": measure_sites,
    "workers": measure_workers,
    "start": measure_start,
    "memory": measure_memory,
}
