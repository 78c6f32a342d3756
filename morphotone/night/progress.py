"""How far a run has come: a bar on a terminal, a line a minute in a log, or nothing."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol, TextIO

from tqdm import tqdm


@dataclass(frozen=True)
class Step:
    """What has been done: by one batch, or in sum."""

    files: int = 0
    size: int = 0  #: bytes of these files on disk
    samples: int = 0
    turned_away: int = 0

    def __add__(self, other: Step) -> Step:
        return Step(
            self.files + other.files,
            self.size + other.size,
            self.samples + other.samples,
            self.turned_away + other.turned_away,
        )


class Progress(Protocol):
    """What a run tells about its course."""

    def begin(self, files: int, size: int) -> None:
        """Begin a run over so many files with so many bytes."""

    def advance(self, step: Step) -> None:
        """Take note of a finished batch."""

    def end(self) -> None:
        """End, finished or not."""


class Silent:
    """Says nothing."""

    def begin(self, files: int, size: int) -> None:
        """Begin a run."""

    def advance(self, step: Step) -> None:
        """Take note of a finished batch."""

    def end(self) -> None:
        """End the run."""


class Lines:
    """A line every so often, and one at the end: for logs.

    Parameters
    ----------
    stream : TextIO
        Where the lines go.
    interval : float
        Seconds between two lines; a batch that takes longer delays the next line until it is done.
    clock : callable
        Returns seconds.
    """

    def __init__(
        self, stream: TextIO, interval: float = 60.0, clock: Callable[[], float] = time.monotonic
    ) -> None:
        self._stream = stream
        self._interval = interval
        self._clock = clock

    def begin(self, files: int, size: int) -> None:
        """Begin a run over so many files with so many bytes."""
        self._whole = Step(files, size)
        self._done = Step()
        self._start = self._said = self._clock()

    def advance(self, step: Step) -> None:
        """Take note of a finished batch; say so if it is time."""
        self._done += step
        if self._clock() - self._said >= self._interval:
            self._say()

    def end(self) -> None:
        """Say how far the run came."""
        self._say()

    def _say(self) -> None:
        self._said = self._clock()
        line = describe(self._done, self._whole, self._said - self._start)
        print(line, file=self._stream, flush=True)


class Bar:
    """A bar that moves: for terminals. Its length counts bytes, for a file may hold 10 samples or 100 000."""

    def __init__(self, stream: TextIO) -> None:
        self._stream = stream

    def begin(self, files: int, size: int) -> None:
        """Draw the empty bar."""
        self._whole = Step(files, size)
        self._done = Step()
        self._bar = tqdm(
            total=max(size, 1),
            file=self._stream,
            bar_format="{percentage:3.0f}%|{bar}| {desc}",
            dynamic_ncols=True,
        )

    def advance(self, step: Step) -> None:
        """Move the bar."""
        self._done += step
        self._bar.set_description_str(self._line(), refresh=False)
        self._bar.update(step.size)

    def end(self) -> None:
        """Leave the bar as it stands, and the terminal on a new line."""
        self._bar.set_description_str(self._line(), refresh=True)
        self._bar.close()

    def _line(self) -> str:
        return describe(self._done, self._whole, float(self._bar.format_dict["elapsed"]))


def progress_on(stream: TextIO) -> Progress:
    """Return the kind of progress that suits the stream."""
    return Bar(stream) if stream.isatty() else Lines(stream)


def describe(done: Step, whole: Step, seconds: float) -> str:
    """Say in one line how far a run has come after so many seconds.

    The time left is reckoned from bytes, as if the rest went like what is done; there is none before
    anything is done.
    """
    rate = done.files / seconds if seconds > 0 else 0.0
    parts = [
        f"{done.files}/{whole.files} files",
        f"{_short(done.samples)} samples",
        f"{tqdm.format_sizeof(rate)} files/s",
        f"{done.turned_away} turned away",
        f"{tqdm.format_interval(seconds)} passed",
    ]
    if done.size and done.files < whole.files:
        parts.append(f"about {tqdm.format_interval(seconds * (whole.size / done.size - 1))} left")
    return ", ".join(parts)


def _short(count: int) -> str:
    """Return a count in at most five characters: 88, 40.9k, 3.12M."""
    return str(count) if count < 1000 else str(tqdm.format_sizeof(count))
