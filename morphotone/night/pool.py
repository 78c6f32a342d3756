"""Who works on the batches: this process, or several of this machine; the same to the run.

A pool takes batches and a function, and yields what the function returned for each as it comes, in any
order. Trying again after a death is the run's business, not the pool's: a pool says `WorkerDiedError` and
which batches it had handed out until then.
"""

from __future__ import annotations

import os
import signal
import threading
import time
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from itertools import islice
from typing import Any, Protocol, TypeVar

from joblib.externals.loky import FIRST_COMPLETED, BrokenProcessPool, Future, get_reusable_executor, wait

from morphotone.night.outcome import Item

Result = TypeVar("Result")
Batch = list[Item]

_IDLE_SECONDS = 30  # after which a worker without work ends
_LOOK_ROUND_SECONDS = 1.0
# The workers are as many as the processors already; one thread of linear algebra each, whatever the library.
ONE_THREAD = {
    "OMP_NUM_THREADS": "1",
    "OPENBLAS_NUM_THREADS": "1",
    "MKL_NUM_THREADS": "1",
    "BLIS_NUM_THREADS": "1",
    "VECLIB_MAXIMUM_THREADS": "1",
}


class WorkerDiedError(Exception):
    """A worker ended before it had handed over its work; what was under way is lost."""


class Pool(Protocol):
    """Works on batches."""

    def __call__(
        self, waiting: Mapping[int, Batch], handed_out: list[int], function: Callable[[Batch], Result]
    ) -> Iterator[tuple[int, Result] | None]:
        """Yield index and result of batches as they are finished; None now and then while none is.

        Parameters
        ----------
        waiting : mapping of int to list of Item
            The batches by index; read once, at the beginning.
        handed_out : list of int
            Each index is appended when its batch is handed to a worker.
        function : callable
            Turns a batch into a result; picklable. What it raises comes through.

        Raises
        ------
        WorkerDiedError
            A worker is gone. Batches handed out and not yielded are lost; the pool can be called anew.
        KeyboardInterrupt
            As it comes, after what was finished by then has been yielded.
        """


def in_this_process(
    waiting: Mapping[int, Batch], handed_out: list[int], function: Callable[[Batch], Result]
) -> Iterator[tuple[int, Result] | None]:
    """Work in this process, one batch after the other; a `Pool`."""
    for index, batch in list(waiting.items()):
        handed_out.append(index)
        yield index, function(batch)


def pool_of(workers: int) -> Pool:
    """Return so many processes of this machine; for 1 it is this process."""
    return in_this_process if workers == 1 else in_processes(workers)


def in_processes(workers: int) -> Pool:
    """Return a pool of so many worker processes of this machine.

    `joblib.Parallel` would hand out work without regard to how fast the results are taken from it, and
    pile them up in memory where the ledger's disk is slow; hence the executor below it, and a short queue.
    """

    def pool(
        waiting: Mapping[int, Batch], handed_out: list[int], function: Callable[[Batch], Result]
    ) -> Iterator[tuple[int, Result] | None]:
        executor = get_reusable_executor(
            max_workers=workers,
            timeout=_IDLE_SECONDS,
            env=ONE_THREAD,
            initializer=_begin_worker,
            initargs=(os.getpid(),),
        )
        rest = iter(list(waiting.items()))
        running: dict[Future[Result], int] = {}
        try:
            while True:
                for index, batch in islice(rest, 2 * workers - len(running)):
                    handed_out.append(index)
                    with _interrupts_held():
                        running[executor.submit(function, batch)] = index
                if not running:
                    return
                # Now and then a look round: on Windows, Ctrl-C does not wake what waits without limit.
                done, _ = wait(running, timeout=_LOOK_ROUND_SECONDS, return_when=FIRST_COMPLETED)
                if not done:
                    _check_workers(executor)
                    yield None
                for future in done:
                    yield running.pop(future), future.result()
        except BaseException as error:
            finished: list[tuple[int, Result]] = (
                _finished(running) if isinstance(error, KeyboardInterrupt) else []
            )
            executor.shutdown(wait=True, kill_workers=True)
            if isinstance(error, BrokenProcessPool):
                raise WorkerDiedError(str(error)) from error
            yield from finished
            raise

    return pool


def _check_workers(executor: Any) -> None:
    """Raise if a worker is gone and the executor has not noticed, as when it was killed while handing over.

    The executor then waits without end for the rest of the result, since other processes could still write
    it: they are ended, this process lets go of its end, and the executor finds that nothing will come.
    """
    try:
        workers = list((executor._processes or {}).values())
        flags, own_end = executor._flags, executor._result_queue._writer
    except AttributeError:  # another joblib calls them otherwise: a night without this help, but a night
        return
    if all(worker.exitcode in (None, 0) for worker in workers):
        return
    time.sleep(_LOOK_ROUND_SECONDS)  # it may be about to notice
    if flags.broken is None:
        for worker in workers:
            worker.terminate()  # there is no kill() in them
        own_end.close()
    raise WorkerDiedError("a worker was ended while it handed over its result")


def _finished(running: Mapping[Future[Result], int]) -> list[tuple[int, Result]]:
    """Return what is finished already among what is under way."""
    return [(index, future.result()) for future, index in running.items() if _is_well(future)]


def _is_well(future: Future[Result]) -> bool:
    return future.done() and not future.cancelled() and future.exception() is None


@contextmanager
def _interrupts_held() -> Iterator[None]:
    """Hold Ctrl-C back while workers may be started, who inherit that: it is for the process of the run."""
    if not hasattr(signal, "pthread_sigmask"):  # Windows
        yield
        return
    before = signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGINT})
    try:
        yield
    finally:
        signal.pthread_sigmask(signal.SIG_SETMASK, before)


def _begin_worker(run: int) -> None:
    """Have this worker leave Ctrl-C to the process of the run, and end with it.

    A run that is killed cannot tell its workers, which then wait for ever to hand over their results.
    """
    signal.signal(signal.SIGINT, signal.SIG_IGN)

    def watch() -> None:
        while os.getppid() == run:
            time.sleep(1.0)
        os._exit(1)

    threading.Thread(target=watch, daemon=True).start()
