"""Who does the work, and what one cell may take: processes of this machine, or a cluster's."""

import argparse
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from importlib import import_module
from typing import Any

import joblib

from morphotone.commands.options import positive, whole
from morphotone.errors import MorphotoneError
from morphotone.night.limits import USUAL_MINUTES, Limits, usual_limits
from morphotone.night.pool import Pool, pool_of


@dataclass(frozen=True)
class Workers:
    """Who works, under which limits.

    Attributes
    ----------
    pool : Pool
        What the run hands its batches to.
    said : str
        Who they are, in words.
    limits : Limits
        For one cell.
    """

    pool: Pool
    said: str
    limits: Limits

    def to_dict(self) -> dict[str, Any]:
        """Return what the record of a run says of them."""
        limits = {"minutes_per_cell": self.limits.minutes, "GB_per_cell": self.limits.gigabytes}
        return {"workers": self.said, "limits": limits}


def add_worker_options(parser: argparse.ArgumentParser, *, cluster: bool = False) -> None:
    """Add --workers, --cluster where it is of use, and the limits for one cell."""
    who = parser.add_mutually_exclusive_group()
    who.add_argument(
        "--workers", metavar="N", type=whole, default=0, help="processes (default: one per processor)"
    )
    if cluster:
        who.add_argument(
            "--cluster",
            metavar="tcp://HOST:PORT",
            help="a Dask scheduler whose workers do the work instead (pip install 'morphotone[cluster]')",
        )
    parser.add_argument(
        "--minutes-per-cell",
        metavar="MIN",
        type=positive,
        default=USUAL_MINUTES,
        help="time after which a file is turned away as too_long (default: %(default)g)",
    )
    parser.add_argument(
        "--GB-per-cell",
        metavar="GB",
        type=positive,
        help="memory beyond which a file is turned away as too_large (default: the free memory shared out "
        f"among the workers{'; of a cluster none' if cluster else ''})",
    )


@contextmanager
def workers_for(
    number: int = 1,
    cluster: str | None = None,
    minutes_per_cell: float | None = None,
    GB_per_cell: float | None = None,
) -> Iterator[Workers]:
    """Give the workers that are asked for.

    Parameters
    ----------
    number : int
        Processes of this machine; 0 for one per processor.
    cluster : str, optional
        Address of a Dask scheduler, whose workers do the work instead.
    minutes_per_cell, GB_per_cell : float, optional
        Limits for one cell; unless given, what suits the machine.

    Raises
    ------
    MorphotoneError
        The cluster cannot be used.
    """
    if cluster is None:
        number = number if number > 0 else joblib.cpu_count()
        limits = usual_limits(number, minutes_per_cell, GB_per_cell)
        yield Workers(pool_of(number), f"{number} worker{'s' if number > 1 else ''}", limits)
        return
    try:
        room = import_module("morphotone.night.cluster")  # takes a second: only who asks for it waits
    except ModuleNotFoundError as error:
        raise MorphotoneError(
            f"--cluster needs {error.name}, which is not installed; pip install 'morphotone[cluster]'"
        ) from error
    limits = usual_limits(None, minutes_per_cell, GB_per_cell)
    with room.Cluster(cluster, limits) as there:
        yield Workers(there.pool, f"the workers of {cluster}", limits)
