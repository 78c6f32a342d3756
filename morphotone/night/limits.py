"""Limits of time and memory for one cell, held around the work, in the process and thread that does it.

Time, in two steps: an exception in the thread at work; and where that does not help, since code in C or a
disk that stalls does not come back to take it, the end of the process, if it is a worker's.

Memory: what the process may hold beyond what it held before. Linux counts what is really laid claim to as
"data" (RLIMIT_DATA, since 4.7), whereas address space (RLIMIT_AS) has gigabytes of libraries and reserves in
it that cost nothing. Other systems do not hold such a limit, and there is none then.
"""

from __future__ import annotations

import ctypes
import faulthandler
import os
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

if sys.platform == "linux":
    import resource

# Ten times and more what the largest reconstructions (a million samples) take with all that can be asked, on
# a slow machine; short enough that one file costs one worker a small part of the night.
USUAL_MINUTES = 30.0
_SHARE = 0.9  # of the memory that is there; the rest is for the main process and the system
_GRACE_SECONDS = 10.0  # between the two steps
_MOST_SECONDS = threading.TIMEOUT_MAX / 2  # beyond it, and beyond these bytes, no system keeps count
_MOST_BYTES = 2**62
_GROUPS = Path("/sys/fs/cgroup")


class TooLongError(BaseException):
    """The limit of time is reached; no Exception, so that nothing on its way takes it for one of its own."""


@dataclass(frozen=True)
class Limits:
    """What one cell may take.

    Attributes
    ----------
    seconds : float or None
        Time, None for no limit.
    size : int or None
        Memory, bytes, None for no limit.
    grace : float
        Seconds that work has to end after its time is up, before its process is ended.
    """

    seconds: float | None = None
    size: int | None = None
    grace: float = _GRACE_SECONDS

    @property
    def minutes(self) -> float | None:
        """Time, minutes."""
        return None if self.seconds is None else self.seconds / 60

    @property
    def gigabytes(self) -> float | None:
        """Memory, GB."""
        return None if self.size is None else self.size / 1e9

    def too_long(self) -> str:
        """Say that a file took too long."""
        return (
            f"this file took longer than {(self.seconds or 0) / 60:g} minutes, the limit for one cell; allow "
            "more with --minutes-per-cell, or leave the file out"
        )

    def too_large(self) -> str:
        """Say that a file needed too much memory."""
        limit = "there is" if self.size is None else f"{self.size / 1e9:.3g} GB, the limit for one cell"
        return (
            f"this file needs more memory than {limit}; allow more with --GB-per-cell, take fewer --workers "
            "or a machine with more, or leave the file out"
        )

    def described(self) -> str:
        """Say what the limits are."""
        time = "none" if self.seconds is None else f"{self.seconds / 60:g} minutes"
        memory = "none" if self.size is None else f"{self.size / 1e9:.3g} GB"
        held = "" if sys.platform == "linux" else " (not held on this system)"
        return f"limits for one cell: time {time}, memory {memory}{held}"


NO_LIMITS = Limits()


def usual_limits(workers: int | None, minutes: float | None = None, gigabytes: float | None = None) -> Limits:
    """Return the limits asked for; where none is, those that suit this machine and so many workers.

    None for the workers of other machines, whose memory is not known here: then it has no limit of ours.
    """
    if gigabytes is None:
        there = available_bytes()
        size = None if there is None or workers is None else int(_SHARE * there / workers)
    else:
        size = int(min(gigabytes * 1e9, _MOST_BYTES))
    seconds = 60 * (USUAL_MINUTES if minutes is None else minutes)
    return Limits(min(seconds, _MOST_SECONDS), size)


def available_bytes() -> int | None:
    """Return how much memory can be had: the machine's, or the job's share of it; None if nobody says."""
    try:
        fields = dict(line.split(":", 1) for line in Path("/proc/meminfo").read_text().splitlines())
        available = int(fields["MemAvailable"].split()[0]) * 1024
    except (OSError, KeyError, ValueError):
        return None
    return min([available, *_group_limits()])


def _group_limits() -> Iterator[int]:
    """Yield the limits of memory of the control groups of this process (batch schedulers set them)."""
    try:
        lines = Path("/proc/self/cgroup").read_text().splitlines()
    except OSError:
        return
    for line in lines:
        _, controllers, path = line.split(":", 2)
        if controllers and "memory" not in controllers.split(","):
            continue
        top, file = (_GROUPS / "memory", "memory.limit_in_bytes") if controllers else (_GROUPS, "memory.max")
        group = PurePosixPath(path)
        for place in (group, *group.parents):
            try:
                yield int((top / str(place).lstrip("/") / file).read_text())
            except (OSError, ValueError):  # no such group seen from here, or "max"
                continue


@contextmanager
def held(limits: Limits, *, ends_process: bool) -> Iterator[None]:
    """Hold limits around work in this thread.

    Raises
    ------
    TooLongError
        Time is up. If the work does not end then and `ends_process` is set, the process does.
    MemoryError
        The work asks for more than its limit.
    """
    with _time_held(limits, ends_process), _memory_held(limits.size):
        yield


@contextmanager
def _time_held(limits: Limits, ends_process: bool) -> Iterator[None]:
    if limits.seconds is None:
        yield
        return
    timer = threading.Timer(limits.seconds, _raise_in, (threading.get_ident(), TooLongError))
    timer.daemon = True
    with open(os.devnull, "w") as nowhere:  # noqa: PTH123 - the traceback that goes with the end is for nobody
        if ends_process:
            # A thread in C, which needs no turn of Python's to end the process.
            faulthandler.dump_traceback_later(limits.seconds + limits.grace, exit=True, file=nowhere)
        try:
            timer.start()
            try:
                yield
            finally:
                timer.cancel()
                timer.join()
                # What is on its way arrives at the end of one of these rounds. It is not called back: after
                # that CPython 3.11 looks for it at every step, and for ever where a profiler listens.
                for _ in range(100):
                    pass
        finally:
            if ends_process:
                faulthandler.cancel_dump_traceback_later()


def _raise_in(thread: int, error: type[BaseException]) -> None:
    """Have a thread raise an exception at its next step in Python."""
    ctypes.pythonapi.PyThreadState_SetAsyncExc(ctypes.c_ulong(thread), ctypes.py_object(error))


@contextmanager
def _memory_held(size: int | None) -> Iterator[None]:
    if size is None or sys.platform != "linux":
        yield
        return
    soft, hard = resource.getrlimit(resource.RLIMIT_DATA)
    most = _data_bytes() + size
    for limit in (soft, hard):
        most = most if limit == resource.RLIM_INFINITY else min(most, limit)
    resource.setrlimit(resource.RLIMIT_DATA, (most, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_DATA, (soft, hard))


def _data_bytes() -> int:
    """Return what this process holds of what RLIMIT_DATA counts, bytes."""
    return int(Path("/proc/self/statm").read_text().split()[5]) * os.sysconf("SC_PAGE_SIZE")
