"""How long each stage of the work takes, for whoever listens; nothing is kept if nobody does.

Seconds come from a clock that only runs forward, so that setting the machine's time changes nothing.
"""

from collections.abc import Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from time import perf_counter

_listening: ContextVar[dict[str, float] | None] = ContextVar("_listening", default=None)


@contextmanager
def timed() -> Iterator[dict[str, float]]:
    """Give a dict of seconds by stage, filled by the stages within this context and this thread."""
    seconds: dict[str, float] = {}
    token = _listening.set(seconds)
    try:
        yield seconds
    finally:
        _listening.reset(token)


@contextmanager
def stage(name: str) -> Iterator[None]:
    """Count the time spent within to a stage; also a decorator. Stages do not lie within each other."""
    seconds = _listening.get()
    begun = perf_counter()
    try:
        yield
    finally:
        if seconds is not None:
            seconds[name] = seconds.get(name, 0.0) + perf_counter() - begun
