"""Batches on a cluster: joblib's Dask backend hands them out, each worker does its own as one machine would.

A Dask worker works in a process of its own below it, so that limits, and the search for a file that ends
its process, are the same everywhere, and no file can cost the cluster a worker. A worker that dies all the
same, or leaves, has its batches done by another one.
"""

from __future__ import annotations

import multiprocessing
import threading
from collections.abc import Callable, Iterator, Mapping
from dataclasses import replace
from itertools import islice
from pathlib import Path
from tempfile import TemporaryDirectory
from types import TracebackType
from typing import Self

from distributed import Client
from joblib import Parallel, delayed, parallel_config

from morphotone.errors import MorphotoneError
from morphotone.night.attempt import Worked, together
from morphotone.night.limits import NO_LIMITS, Limits
from morphotone.night.outcome import Item
from morphotone.night.pool import Batch, WorkerDiedError, in_processes
from morphotone.night.record import package_versions
from morphotone.night.runner import finished
from morphotone.night.sitting import Nobody

Work = Callable[[Batch], Worked]

# joblib takes results in without regard to how fast the ledger takes them from it, so it gets this many
# batches for each processor at a time: few enough for the memory, many enough to keep the workers busy.
_ROUND = 16
_PATIENCE_SECONDS = 30  # for the scheduler's answer, and for a first worker
# joblib waits for ever for a batch that Dask has given up because several workers died with it.
_SILENCE_SECONDS = 3600
_one_at_a_time = threading.Lock()


class Cluster:
    """The workers of a Dask scheduler; a context manager that takes leave of them.

    Parameters
    ----------
    address : str
        The scheduler's, such as tcp://127.0.0.1:8786.
    limits : Limits
        For one cell.

    Raises
    ------
    MorphotoneError
        No scheduler answers there, it has no worker, or a worker has other versions than this machine.
    """

    def __init__(self, address: str, limits: Limits = NO_LIMITS) -> None:
        self._address, self._limits = address, limits
        try:
            self._client = Client(address, timeout=_PATIENCE_SECONDS, set_as_default=False)
        except (OSError, ValueError) as error:
            raise MorphotoneError(
                f"{address}: no scheduler answers there ({error}); start one with `dask scheduler`, "
                "or check the address"
            ) from error
        try:
            self._check_workers()
        except BaseException:
            self._client.close()
            raise

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._client.close()

    def pool(
        self, waiting: Mapping[int, Batch], handed_out: list[int], function: Work
    ) -> Iterator[tuple[int, Worked] | None]:
        """Yield index and result of batches as they are finished, as every `morphotone.night.pool.Pool`."""
        rest = iter([(index, _absolute(batch)) for index, batch in waiting.items()])
        with parallel_config(backend="dask", client=self._client):
            while batches := list(islice(rest, _ROUND * sum(self._client.ncores().values()))):
                handed_out.extend(index for index, _ in batches)
                send = self._must_send(batches[0][1][0].path)
                calls = (
                    delayed(_worked_on)(
                        index, batch, _contents(batch) if send else None, function, self._limits
                    )
                    for index, batch in batches
                )
                parallel = Parallel(
                    n_jobs=-1, batch_size=1, return_as="generator_unordered", timeout=_SILENCE_SECONDS
                )
                try:
                    yield from parallel(calls)
                except multiprocessing.TimeoutError as error:
                    raise WorkerDiedError("the cluster has given up a batch") from error

    def _check_workers(self) -> None:
        """Refuse workers whose versions might give other last digits."""
        try:
            self._client.wait_for_workers(1, timeout=_PATIENCE_SECONDS)
        except TimeoutError as error:
            raise MorphotoneError(
                f"{self._address}: the scheduler has no worker; start some with "
                f"`dask worker {self._address} --nthreads 1`"
            ) from error
        here = package_versions()
        try:
            workers = self._client.run(package_versions)
        except ModuleNotFoundError as error:
            raise MorphotoneError(
                f"{self._address}: a worker does not find {error.name}; install there what is installed here"
            ) from error
        for worker, there in workers.items():
            for name, version in here.items():
                if there[name] != version:
                    raise MorphotoneError(
                        f"{worker}: read {name} {there[name]}, expected {version} as on this machine, so "
                        "that results are the same bytes; install the same versions everywhere"
                    )

    def _must_send(self, path: Path) -> bool:
        """Whether some worker does not see a file as it is here, so that files are sent as bytes."""
        return any(size != _size_of(path) for size in self._client.run(_size_of, path).values())


def _absolute(batch: Batch) -> Batch:
    """Return items whose paths do not depend on where a process was started."""
    return [replace(item, path=item.path.absolute()) for item in batch]


def _size_of(path: Path) -> int:
    """Return a file's size, bytes; -1 where it cannot be seen."""
    try:
        return path.stat().st_size
    except OSError:
        return -1


def _contents(batch: Batch) -> list[bytes | None]:
    """Return the bytes of files as they are on disk; None for one that cannot be read."""
    contents: list[bytes | None] = []
    for item in batch:
        try:
            contents.append(item.path.read_bytes())
        except OSError:  # the worker will find that it is not there, and say so
            contents.append(None)
    return contents


def _worked_on(
    index: int, batch: Batch, contents: list[bytes | None] | None, function: Work, limits: Limits
) -> tuple[int, Worked]:
    """Work on a batch, on files of its own where their bytes were sent; runs in a Dask worker."""
    # Such a worker is a daemon, which Python lets start no process since that would outlive it. Ours watches
    # over its parent and ends with it.
    multiprocessing.current_process()._config["daemon"] = False  # type: ignore[attr-defined]
    with _one_at_a_time, TemporaryDirectory() as folder:
        items = batch if contents is None else _laid(batch, contents, Path(folder))
        return index, together(finished([items], function, in_processes(1), limits, Nobody()))


def _laid(batch: Batch, contents: list[bytes | None], folder: Path) -> list[Item]:
    """Write files into a folder and return the items that stand for them."""
    items = []
    for place, (item, content) in enumerate(zip(batch, contents, strict=True)):
        path = folder / str(place)
        if content is not None:
            path.write_bytes(content)
        items.append(replace(item, path=path))
    return items
