"""One batch in a worker: within its limits, and so that a file that fails costs only itself."""

from __future__ import annotations

import traceback
from collections import Counter
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from morphotone.night.heap import keep_freed_memory
from morphotone.night.limits import Limits, TooLongError, held
from morphotone.night.outcome import BatchFunction, Item, Outcome
from morphotone.night.pool import Batch
from morphotone.stages import timed


@dataclass(frozen=True)
class Worked:
    """What came of a batch."""

    outcomes: list[Outcome]
    seconds: Mapping[str, float] = field(default_factory=dict)  #: by stage


def attempt(batch: Batch, function: BatchFunction, limits: Limits, ends_process: bool) -> Worked:
    """Work on a batch; if that fails, on each of its files, so that only the one that fails is lost.

    Parameters
    ----------
    batch : list of Item
        The files.
    function : callable
        Turns them into outcomes; its stages are timed.
    limits : Limits
        For the batch, then for each file: a batch that one cell's limits do are no cell's trouble.
    ends_process : bool
        Whether work that does not come back may end its process.
    """
    keep_freed_memory()
    with timed() as seconds:
        try:
            with held(limits, ends_process=ends_process):
                return Worked(_checked(function(batch), batch), seconds)
        except TooLongError:
            failed = turned_away(batch[0].name, "too_long", limits.too_long())
        except MemoryError:
            failed = turned_away(batch[0].name, "too_large", limits.too_large())
        except Exception as error:
            failed = _program_error(batch[0], error)
    if len(batch) == 1:
        return Worked([failed], seconds)
    # Not in the clauses above, where the error holds on to the memory that the batch took.
    each = (attempt([item], function, limits, ends_process) for item in batch)
    return together([Worked([], seconds), *each])


def together(parts: Iterable[Worked]) -> Worked:
    """Return what came of several batches as if they had been one."""
    outcomes: list[Outcome] = []
    seconds: Counter[str] = Counter()
    for part in parts:
        outcomes += part.outcomes
        seconds.update(part.seconds)
    return Worked(outcomes, seconds)


def turned_away(name: str, reason: str, sentence: str) -> Outcome:
    """Return the outcome of a file that could not be worked on; without a hash, so that it is tried again."""
    return Outcome(name, "turned away", reason=reason, sentence=sentence)


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
    return turned_away(item.name, "program_error", sentence)
