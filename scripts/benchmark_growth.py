"""How the benchmark's times grow: with samples in a cell, cells in a folder, cases solved at once."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from functools import partial
from pathlib import Path

import numpy as np
from benchmark_measures import (
    AT_REST,
    SMALL_CELL,
    Bench,
    Row,
    ratios,
    read_barely,
    row,
    seconds_of,
    survey_seconds,
)

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.electrotonus import build_cases, cases_of, solve_cables
from morphotone.commands.survey import outcomes
from morphotone.night.outcome import Item
from morphotone.reading.reconstruction import Reconstruction, read

CELLS_OF_CASES = 8  # solved together where the number of cases grows


def measure_growth(bench: Bench) -> Iterator[Row]:
    """Measure how time grows with samples, cells and cases."""
    yield from _growth_with_samples(bench)
    most = bench.sizes.most_cells
    folders = {count: bench.drawn(count, SMALL_CELL) for count in steps(most // 10, most, 3)}
    timers = {count: partial(survey_seconds, folder) for count, folder in folders.items()}
    yield from grown(f"surveyed cells of {SMALL_CELL} samples", bench.repeated(timers), 1.02)
    yield from _growth_with_cases(bench)


def steps(least: int, most: int, count: int) -> list[int]:
    """Return up to `count` whole numbers, evenly spaced in their logarithm."""
    return sorted({round(value) for value in np.geomspace(max(least, 1), most, count).tolist()})


def _growth_with_samples(bench: Bench) -> Iterator[Row]:
    most = bench.sizes.most_samples
    cells = {count: next(bench.drawn(1, count).iterdir()) for count in steps(max(most // 100, 2), most, 5)}
    seconds = bench.repeated({count: partial(_cell_seconds, path) for count, path in cells.items()})
    yield from grown("samples in one cell", seconds, 1.05)
    bare = bench.repeated({most: partial(seconds_of, read_barely, [cells[most]])})
    yield row("growth", f"samples in one cell: {most:,}", "x bare", ratios(seconds[most], bare[most]), 8)


def _cell_seconds(path: Path) -> float:
    """Return how long one cell takes without ledger and tables' files, which have a price of their own."""
    return seconds_of(outcomes, [Item(path.name, path, None)], AT_REST)


def _growth_with_cases(bench: Bench) -> Iterator[Row]:
    """Measure solving alone: by assumptions in real arithmetic, by frequency in complex."""
    folder = bench.drawn(CELLS_OF_CASES, bench.sizes.samples)
    recs = [read(path) for path in sorted(folder.iterdir())]
    counts = steps(1, bench.sizes.most_cases, 5)
    timers = {count: partial(_solving_seconds, recs, _membranes(count), []) for count in counts}
    yield from grown("solving at 0 Hz, assumptions", bench.repeated(timers))
    timers = {count: partial(_solving_seconds, recs, _membranes(1), _frequencies(count)) for count in counts}
    yield from grown("solving, frequencies besides 0 Hz", bench.repeated(timers))


def _membranes(count: int) -> list[Assumptions]:
    R_m = np.geomspace(1e4, 4e4, count).tolist()
    return [Assumptions(membrane=Membrane(R_m_ohm_cm2=each)) for each in R_m]


def _frequencies(count: int) -> list[float]:
    hz: list[float] = np.geomspace(1.0, 1000.0, count).tolist()
    return hz


def _solving_seconds(
    recs: Sequence[Reconstruction], many: Sequence[Assumptions], hz: Sequence[float]
) -> float:
    cells = [build_cases(rec, many) for rec in recs]
    return seconds_of(solve_cables, cells, cases_of(many, hz))


def grown(what: str, seconds: Mapping[int, Sequence[float]], target: float | None = None) -> Iterator[Row]:
    """Give the seconds for each size, and the exponent by least squares of the logarithms."""
    for size, values in seconds.items():
        yield row("growth", f"{what}: {size:,}", "s", values)
    sizes = np.log(list(seconds))
    slopes = [np.polyfit(sizes, np.log(each), 1)[0] for each in zip(*seconds.values(), strict=True)]
    yield row("growth", f"{what}: exponent", "", slopes, target)
