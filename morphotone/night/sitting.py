"""One sitting at a results folder, from a command's start to its end in whatever way: log and history."""

from __future__ import annotations

import platform
import sys
from collections import Counter
from collections.abc import Mapping, Sequence
from contextlib import suppress
from datetime import UTC, datetime
from importlib.metadata import version
from time import perf_counter
from types import TracebackType
from typing import Any, Protocol, Self

from morphotone.errors import ResultsError
from morphotone.night.ledger import Ledger
from morphotone.night.outcome import Outcome
from morphotone.stages import timed

LOG = "log.txt"


class Witness(Protocol):
    """What a run tells besides its progress."""

    def say(self, sentence: str) -> None:
        """Take note of something that happened."""

    def enter(self, outcomes: Sequence[Outcome], seconds: Mapping[str, float]) -> None:
        """Take note of outcomes that the ledger has now, and of the time by stage they took."""


class Nobody:
    """A witness who takes no notes."""

    def say(self, sentence: str) -> None:
        """Take note of something that happened."""

    def enter(self, outcomes: Sequence[Outcome], seconds: Mapping[str, float]) -> None:
        """Take note of outcomes."""


class Sitting:
    """A witness who keeps the log, log.txt, and the history that the ledger holds; a context manager.

    The history is brought up to date with every batch, so that a sitting which ended by a kill or a power
    cut is in it too: as one without an end.

    Parameters
    ----------
    ledger : Ledger
        Of the results folder, open.
    assumptions_sha256 : str
        What tells the assumptions apart, for the log.
    """

    def __init__(self, ledger: Ledger, assumptions_sha256: str) -> None:
        self._ledger = ledger
        self._path = ledger.folder / LOG
        self._number = len(ledger.sittings())
        self._begun = perf_counter()
        self._worked: Counter[str] = Counter()
        self._counts: Counter[str] = Counter()
        self._facts: dict[str, Any] = {
            "started": _now(),
            "ended": None,
            "how": "no end was noted: killed, or the machine went down",
            "host": platform.node(),
            "morphotone": version("morphotone"),
            "python": platform.python_version(),
        }
        self.say(
            f"sitting {self._number + 1} begins on {platform.node()}: morphotone {version('morphotone')}, "
            f"Python {platform.python_version()}, numpy {version('numpy')}; command: {' '.join(sys.argv)}; "
            f"assumptions' SHA-256 {assumptions_sha256}"
        )

    def __enter__(self) -> Self:
        self._timed = timed()
        self._here = self._timed.__enter__()
        self._note()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if error is not None:
            with suppress(ResultsError):  # the first error is the one to tell
                self.end(_how(error))
        self._timed.__exit__(kind, error, trace)

    def say(self, sentence: str) -> None:
        """Write a line, with the time, to the log."""
        try:
            with self._path.open("a", encoding="utf-8", newline="\n") as stream:
                stream.write(f"{_now()}  {' '.join(sentence.split())}\n")
        except OSError as error:
            raise ResultsError(
                f"{self._path}: cannot be written ({error.strerror}); make room, start again"
            ) from error

    def enter(self, outcomes: Sequence[Outcome], seconds: Mapping[str, float]) -> None:
        """Count outcomes and seconds, and write files turned away to the log."""
        for outcome in outcomes:
            self._counts[outcome.status.replace(" ", "_")] += 1
            if outcome.status == "turned away":
                sentence = outcome.sentence.removeprefix(f"{outcome.name}: ")
                sentence = sentence.removeprefix(f"{outcome.reason}: ")
                self.say(f"turned away: {outcome.name}: {outcome.reason}: {sentence}")
        self._worked.update(seconds)
        self._note()

    def seconds(self) -> dict[str, float]:
        """Return the seconds by stage so far, of all workers and of this process."""
        return {stage: round(value, 3) for stage, value in (self._worked + Counter(self._here)).items()}

    def end(self, how: str) -> None:
        """Note the end: in the log with counts and times."""
        self._facts |= {"ended": _now(), "how": how}
        self._note()
        counts = ", ".join(f"{count} {what.replace('_', ' ')}" for what, count in self._counts.items())
        stages = ", ".join(f"{stage} {value:.1f}" for stage, value in self.seconds().items())
        self.say(f"{how}: {counts or 'nothing entered'}; seconds by stage, all workers: {stages or 'none'}")

    def _note(self) -> None:
        passed = round(perf_counter() - self._begun, 3)
        times = {"seconds": passed, "seconds_by_stage": self.seconds()}
        self._ledger.note_sitting(self._number, {**self._facts, "entered": dict(self._counts), **times})


def _how(error: BaseException) -> str:
    if isinstance(error, KeyboardInterrupt):
        return f"interrupted by {error}" if str(error) else "interrupted"
    return f"stopped: {type(error).__name__}: {error}"


def _now() -> str:
    return datetime.now(UTC).isoformat(timespec="seconds")
