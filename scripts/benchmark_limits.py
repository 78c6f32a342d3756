"""What bounds a very large run, whatever the number of workers: measured with cells that are only pretended.

Every pretended cell hands over what one drawn cell really gave, under a name of its own and for no work.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from tempfile import TemporaryDirectory

from benchmark_measures import AT_REST, Bench, Row, row, seconds_of
from distributed import LocalCluster

from morphotone.commands.survey import outcomes
from morphotone.night.attempt import attempt
from morphotone.night.cluster import Cluster
from morphotone.night.ledger import Ledger
from morphotone.night.limits import NO_LIMITS
from morphotone.night.outcome import TURNED_AWAY, TURNED_AWAY_HEADER, Item, Outcome
from morphotone.night.results import export

CELLS_A_BATCH = 8  # of 6,500 samples, as in a survey
DASK_WORKERS = 2
SIZE = "ledger on disk, 1,000 cells"


@dataclass(frozen=True)
class Pretended:
    """Gives every item the same outcome but for its name."""

    outcome: Outcome

    def __call__(self, batch: list[Item]) -> list[Outcome]:
        """Return an outcome for each item."""
        return [replace(self.outcome, name=item.name) for item in batch]


def measure_limits(bench: Bench) -> Iterator[Row]:
    """Measure ledger, tables and scheduler, each by itself, in cells of the drawn size a second."""
    (path,) = bench.drawn(1, bench.sizes.samples).iterdir()
    (real,) = outcomes([Item(path.name, path, None)], AT_REST)
    items = [Item(f"{number:07}.swc", path, None) for number in range(bench.sizes.most_cells)]
    batches = [items[first : first + CELLS_A_BATCH] for first in range(0, len(items), CELLS_A_BATCH)]
    with (
        LocalCluster(DASK_WORKERS, threads_per_worker=1, dashboard_address=None) as local,
        Cluster(local.scheduler_address) as cluster,
    ):
        rounds = [_rates(batches, Pretended(real), cluster) for _ in range(bench.sizes.repeats)]
    for name in rounds[0]:
        unit = "MB" if name == SIZE else "cells/s"
        yield row("limits", name, unit, [each[name] for each in rounds])


def _rates(batches: list[list[Item]], pretended: Pretended, cluster: Cluster) -> dict[str, float]:
    """Return cells a second through each bottleneck, and what the ledger takes on disk, MB a 1,000 cells."""
    names = [item.name for batch in batches for item in batch]
    headers = dict.fromkeys(pretended.outcome.parts, "") | {TURNED_AWAY: TURNED_AWAY_HEADER}
    with TemporaryDirectory() as folder, Ledger(Path(folder), {}) as ledger:
        recording = sum(seconds_of(ledger.record, pretended(batch)) for batch in batches)
        writing = seconds_of(export, ledger, names, headers)
        size = ledger.path.stat().st_size / 1e6
    work = partial(attempt, function=pretended, limits=NO_LIMITS, ends_process=True)
    handing = seconds_of(deque, cluster.pool(dict(enumerate(batches)), [], work), 0)
    return {
        "taken up by the ledger": len(names) / recording,
        "written to tables": len(names) / writing,
        f"through a scheduler, {CELLS_A_BATCH} a batch": len(names) / handing,
        SIZE: 1000 * size / len(names),
    }
