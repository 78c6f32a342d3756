"""The run: batches to workers, outcomes to the ledger as they come, and the count at the end.

A batch is made up from the list of files alone, never from the number of workers or from what the ledger
knows, so that the same list gives the same batches and the same bytes.
"""

from __future__ import annotations

import os
import threading
import time
import traceback
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import chain, islice
from pathlib import Path

from joblib.externals.loky import FIRST_COMPLETED, Future, get_reusable_executor, wait
from joblib.externals.loky.process_executor import TerminatedWorkerError

from morphotone.errors import TurnedAwayError
from morphotone.night.folder import Found
from morphotone.night.ledger import Entry, Ledger
from morphotone.night.outcome import TURNED_AWAY, BatchFunction, Item, Outcome
from morphotone.night.progress import Progress, Silent, Step

BATCH_BYTES = 2_000_000  # of files: a second or so of work, so that little is lost when a run is stopped
_FILE_COST = 4_000  # bytes: what opening a file costs, as if it were that much longer
_IDLE_SECONDS = 30  # after which a worker without work ends
# The workers are as many as the processors already; one thread of linear algebra each, whatever the library.
_ONE_THREAD = {
    "OMP_NUM_THREADS": "1",
    "OPENBLAS_NUM_THREADS": "1",
    "MKL_NUM_THREADS": "1",
    "BLIS_NUM_THREADS": "1",
    "VECLIB_MAXIMUM_THREADS": "1",
}


@dataclass(frozen=True)
class Tally:
    """How a run ended; found = analysed + turned_away."""

    found: int
    analysed: int
    turned_away: int
    unchanged: int  #: of the found: neither read nor computed anew beyond their hash
    samples: int  #: in all files found


def run(
    found: Sequence[Found],
    function: BatchFunction,
    *,
    ledger: Ledger,
    progress: Progress | None = None,
    workers: int = 1,
    batch_bytes: int = BATCH_BYTES,
    strict: bool = False,
) -> Tally:
    """Work through files in batches, entering each finished batch in the ledger.

    An exception in `function` costs one file, not its batch: the batch is gone through again one file at
    a time, and the file that fails is turned away with the reason "program_error". With several workers,
    a file at which the process itself dies (no memory left) is found likewise: "worker_died". Neither
    leaves a hash behind, so that the next run tries these files again.

    Parameters
    ----------
    found : sequence of Found
        All that must be accounted for, names told apart; one with a `problem` is turned away unopened.
    function : callable
        Takes a list of Item, returns one Outcome for each. With several workers it must be picklable.
    ledger : Ledger
        What is finished, and where outcomes go.
    progress : Progress, optional
        Told about each finished batch.
    workers : int
        Number of processes; 1 works in this one.
    batch_bytes : int
        A batch is closed when its files on disk reach this size, bytes.
    strict : bool
        Stop at the first file that is turned away.

    Returns
    -------
    Tally

    Raises
    ------
    TurnedAwayError
        In strict mode, with the file and its sentence. Batches finished until then are in the ledger.
    KeyboardInterrupt
        As it comes; batches finished until then are in the ledger.
    """
    sizes = {file.name: file.size for file in found}
    if len(sizes) < len(found):
        raise ValueError("two of the files found have the same name")
    known, unchanged = ledger.known(), 0
    batches = _batches((file for file in found if not file.problem), known, batch_bytes)
    closed = [_turned_away(file.name, "unreadable", file.problem) for file in found if file.problem]
    progress = progress or Silent()
    progress.begin(len(found), sum(sizes.values()))
    try:
        for outcomes in chain([closed], _finished(batches, function, workers)):
            ledger.record([outcome for outcome in outcomes if outcome.status != "unchanged"])
            unchanged += sum(outcome.status == "unchanged" for outcome in outcomes)
            entries = {outcome.name: _entry(outcome, known) for outcome in outcomes}
            progress.advance(_step(entries, sizes))
            if strict:
                _refuse(entries, ledger)
    finally:
        progress.end()
    return _count(list(sizes), ledger.known(), unchanged)


def _batches(found: Iterable[Found], known: Mapping[str, Entry], batch_bytes: int) -> Iterator[list[Item]]:
    """Cut the list of files into consecutive batches of about equal work."""
    batch: list[Item] = []
    weight = 0
    for file in found:
        sha256 = known[file.name].sha256 if file.name in known else ""
        batch.append(Item(file.name, file.path, sha256 or None))
        weight += file.size + _FILE_COST
        if weight >= batch_bytes:
            yield batch
            batch, weight = [], 0
    if batch:
        yield batch


def _finished(
    batches: Iterable[list[Item]], function: BatchFunction, workers: int
) -> Iterator[list[Outcome]]:
    """Yield the outcomes of each batch as it is finished, in any order.

    When a worker dies, all that was under way is lost. The batches that had been handed out are the
    suspects: each of their files gets a worker of its own. Then the others go on.
    """
    if workers == 1:
        yield from (_attempt(batch, function) for batch in batches)
        return
    waiting = dict(enumerate(batches))
    while waiting:
        handed_out: list[int] = []
        try:
            for index, outcomes in _in_pool(waiting, handed_out, function, workers):
                del waiting[index]
                yield outcomes
        except TerminatedWorkerError:
            for index in handed_out:
                yield from (_alone(item, function) for item in waiting.pop(index, []))


def _in_pool(
    waiting: Mapping[int, list[Item]], handed_out: list[int], function: BatchFunction, workers: int
) -> Iterator[tuple[int, list[Outcome]]]:
    """Yield index and outcomes of batches as they are finished, noting each that is handed to a worker.

    `joblib.Parallel` would hand out work without regard to how fast the outcomes are taken from it, and
    pile them up in memory where the ledger's disk is slow; hence its pool of workers, and a short queue.
    """
    pool = get_reusable_executor(
        max_workers=workers,
        timeout=_IDLE_SECONDS,
        env=_ONE_THREAD,
        initializer=_end_with,
        initargs=(os.getpid(),),
    )
    rest = iter(list(waiting.items()))
    running: set[Future[tuple[int, list[Outcome]]]] = set()
    try:
        while True:
            for index, batch in islice(rest, 2 * workers - len(running)):
                handed_out.append(index)
                running.add(pool.submit(_attempt_indexed, index, batch, function))
            if not running:
                return
            # Now and then a look round: on Windows, Ctrl-C does not wake what waits without limit.
            done, running = wait(running, timeout=1.0, return_when=FIRST_COMPLETED)
            yield from (future.result() for future in done)
    except BaseException:
        pool.shutdown(wait=True, kill_workers=True)
        raise


def _end_with(run: int) -> None:
    """Have this worker end with the process of the run.

    A run that is killed cannot tell its workers, which then wait for ever to hand over their outcomes.
    """

    def watch() -> None:
        while os.getppid() == run:
            time.sleep(1.0)
        os._exit(1)

    threading.Thread(target=watch, daemon=True).start()


def _attempt_indexed(index: int, batch: list[Item], function: BatchFunction) -> tuple[int, list[Outcome]]:
    return index, _attempt(batch, function)


def _attempt(batch: list[Item], function: BatchFunction) -> list[Outcome]:
    """Work on a batch; if that fails, on each of its files, so that only the one that fails is lost."""
    try:
        return _checked(function(batch), batch)
    except Exception as error:
        if len(batch) == 1:
            return [_program_error(batch[0], error)]
        return [outcome for item in batch for outcome in _attempt([item], function)]


def _alone(item: Item, function: BatchFunction) -> list[Outcome]:
    """Work on one file in a process that may die of it."""
    try:
        ((_, outcomes),) = _in_pool({0: [item]}, [], function, workers=1)
    except TerminatedWorkerError:
        sentence = (
            "the process that worked on this file was ended by the system, as happens when memory runs out; "
            "try again with fewer workers, or on a machine with more memory"
        )
        return [_turned_away(item.name, "worker_died", sentence)]
    return outcomes


def _checked(outcomes: list[Outcome], batch: list[Item]) -> list[Outcome]:
    """Hold the function to its word: one outcome per item, none unchanged that was not known."""
    asked, given = [item.name for item in batch], [outcome.name for outcome in outcomes]
    if asked != given:
        raise RuntimeError(f"outcomes are for {given}, expected {asked}")
    for item, outcome in zip(batch, outcomes, strict=True):
        if outcome.status == "unchanged" and outcome.sha256 != item.known_sha256:
            raise RuntimeError(f"{item.name} is called unchanged, but its hash is not the known one")
    return outcomes


def _program_error(item: Item, error: Exception) -> Outcome:
    """Turn a file away for a fault of the program, saying where in the program it was."""
    place = traceback.extract_tb(error.__traceback__)[-1]
    text = " ".join(str(error).split())
    sentence = (
        f"{type(error).__name__}: {text} ({Path(place.filename).name}, line {place.lineno}): a fault of the "
        "program, not of the file; please report it"
    )
    return _turned_away(item.name, "program_error", sentence)


def _turned_away(name: str, reason: str, sentence: str) -> Outcome:
    return Outcome(name, "turned away", reason=reason, sentence=sentence)


def _entry(outcome: Outcome, known: Mapping[str, Entry]) -> Entry:
    """Return what the ledger holds about the file now that its outcome is entered."""
    if outcome.status == "unchanged":
        return known[outcome.name]
    return Entry(outcome.status, outcome.sha256, outcome.samples)


def _step(entries: Mapping[str, Entry], sizes: Mapping[str, int]) -> Step:
    return Step(
        files=len(entries),
        size=sum(sizes[name] for name in entries),
        samples=sum(entry.samples for entry in entries.values()),
        turned_away=sum(entry.status == "turned away" for entry in entries.values()),
    )


def _refuse(entries: Mapping[str, Entry], ledger: Ledger) -> None:
    """Raise for the first file that was turned away, now or in an earlier run."""
    names = [name for name, entry in entries.items() if entry.status == "turned away"]
    for _, row in ledger.rows(TURNED_AWAY, names):
        raise TurnedAwayError(
            f"stopped at the first file turned away (file, reason, sentence): {row.decode().strip()}"
        )


def _count(names: Sequence[str], known: Mapping[str, Entry], unchanged: int) -> Tally:
    """Count from the ledger, and hold the count against the list of files."""
    status = [known[name].status for name in names if name in known]
    analysed, turned_away = status.count("analysed"), status.count("turned away")
    if len(names) != analysed + turned_away:
        raise RuntimeError(
            f"{len(names)} files were found, but {analysed} analysed and {turned_away} turned away: "
            "the run lost some, which is a fault of the program"
        )
    return Tally(len(names), analysed, turned_away, unchanged, sum(known[name].samples for name in names))
