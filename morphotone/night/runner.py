"""The run: batches to workers, outcomes to the ledger as they come, and the count at the end.

A batch is made up from the list of files alone, never from the number of workers or from what the ledger
knows, so that the same list gives the same batches and the same bytes.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Generator, Iterable, Iterator, Mapping, Sequence
from contextlib import closing, suppress
from dataclasses import dataclass
from functools import partial
from itertools import chain

from morphotone.errors import TurnedAwayError
from morphotone.night.attempt import Worked, attempt, turned_away
from morphotone.night.folder import Found
from morphotone.night.ledger import Entry, Ledger
from morphotone.night.limits import NO_LIMITS, Limits
from morphotone.night.outcome import TURNED_AWAY, BatchFunction, Item, Outcome
from morphotone.night.pool import Batch, Pool, WorkerDiedError, in_this_process
from morphotone.night.progress import Progress, Silent, Step
from morphotone.night.sitting import Nobody, Witness
from morphotone.stages import stage

# Bytes of files in a batch: a second or so of work at most, so that little is lost when a run is stopped; in
# a small folder less, so that several workers have work and end together, but not much less: steps of a sweep
# are as many for one cell as for eight.
_LEAST_BYTES, _MOST_BYTES = 600_000, 2_000_000
_USUAL_BATCHES = 16
_FILE_COST = 4_000  # bytes: what opening a file costs, as if it were that much longer
_TRIES_ALONE = 2  # a worker may also be ended by somebody else, whatever it works on


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
    pool: Pool = in_this_process,
    limits: Limits = NO_LIMITS,
    witness: Witness | None = None,
    meanwhile: Callable[[], None] = lambda: None,
    batch_bytes: int | None = None,
    strict: bool = False,
) -> Tally:
    """Work through files in batches, entering each finished batch in the ledger.

    An exception in `function` costs one file, not its batch: the batch is gone through again one file at
    a time, and the file that fails is turned away with the reason "program_error". With a pool of workers,
    a file at which one dies (no memory left) is found likewise: "worker_died". None of
    these leaves a hash behind, so that the next run tries the file again.

    Parameters
    ----------
    found : sequence of Found
        All that must be accounted for, names told apart; one with a `problem` is turned away unopened.
    function : callable
        Takes a list of Item, returns one Outcome for each. With workers it must be picklable.
    ledger : Ledger
        What is finished, and where outcomes go.
    progress : Progress, optional
        Told about each finished batch.
    pool : Pool
        Who works on the batches.
    limits : Limits
        For one cell: a file beyond them is turned away with the reason "too_long" or "too_large". In this
        process, work that does not come back at all cannot be ended.
    witness : Witness, optional
        Told what happens.
    meanwhile : callable
        Called after each batch, and each second without one, unless the work is in this process.
    batch_bytes : int, optional
        A batch is closed when its files on disk reach this size, bytes; unless given, a size that suits
        the whole.
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
    sound = [file for file in found if not file.problem]
    batches = _batches(sound, known, batch_bytes or _suitable_bytes(sound))
    closed = [turned_away(file.name, "unreadable", file.problem) for file in found if file.problem]
    progress, witness = progress or Silent(), witness or Nobody()
    work = partial(attempt, function=function, limits=limits, ends_process=pool is not in_this_process)
    progress.begin(len(found), sum(sizes.values()))
    try:
        # Closed here, whatever ends the loop: workers must not go on, and their pool may be used anew.
        with closing(finished(batches, work, pool, limits, witness)) as rest:
            for worked in chain([Worked(closed)], rest):
                outcomes = worked.outcomes
                with stage("ledger"):
                    ledger.record([outcome for outcome in outcomes if outcome.status != "unchanged"])
                witness.enter(outcomes, worked.seconds)
                meanwhile()
                unchanged += sum(outcome.status == "unchanged" for outcome in outcomes)
                entries = {outcome.name: _entry(outcome, known) for outcome in outcomes}
                progress.advance(_step(entries, sizes))
                if strict:
                    _refuse(entries, ledger)
    finally:
        progress.end()
    return _count(list(sizes), ledger.known(), unchanged)


def _suitable_bytes(found: Sequence[Found]) -> int:
    whole = sum(file.size + _FILE_COST for file in found)
    return min(max(whole // _USUAL_BATCHES, _LEAST_BYTES), _MOST_BYTES)


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


def finished(
    batches: Iterable[Batch],
    function: Callable[[Batch], Worked],
    pool: Pool,
    limits: Limits,
    witness: Witness,
) -> Generator[Worked, None, None]:
    """Yield what came of each batch as it is finished, in any order; nothing worked now and then meanwhile.

    When a worker dies, all that was under way is lost. The batches that had been handed out are the
    suspects: each of their files gets a worker of its own. Then the others go on.
    """
    waiting = dict(enumerate(batches))
    while waiting:
        handed_out: list[int] = []
        try:
            for done in pool(waiting, handed_out, function):
                if done is None:
                    yield Worked([])
                    continue
                index, worked = done
                del waiting[index]
                yield worked
        except WorkerDiedError as death:
            suspects = [item for index in handed_out for item in waiting.pop(index, [])]
            witness.say(f"a worker died; {len(suspects)} files under way are tried one by one ({death})")
            yield from (_alone(item, function, pool, limits) for item in suspects)


def _alone(item: Item, function: Callable[[Batch], Worked], pool: Pool, limits: Limits) -> Worked:
    """Work on one file in a worker that may die of it; only one that dies again is held against the file."""
    for _ in range(_TRIES_ALONE):
        begun = time.monotonic()
        with suppress(WorkerDiedError):
            # To its end: leaving a pool early kills its workers, and the next file waits for others.
            ((_, worked),) = [done for done in pool({0: [item]}, [], function) if done is not None]
            return worked
        if limits.seconds is not None and time.monotonic() - begun > limits.seconds:
            return Worked([turned_away(item.name, "too_long", limits.too_long())])
    sentence = (
        "the process that worked on this file was ended by the system, as happens when memory runs out; "
        "try again with fewer workers, or on a machine with more memory"
    )
    return Worked([turned_away(item.name, "worker_died", sentence)])


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
