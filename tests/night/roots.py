"""Work for the tests of the run that is no science: square roots of the numbers in a file.

Module-level functions, since workers import them by name; `functools.partial` sets their options.
"""

from __future__ import annotations

import hashlib
import os
import time
from collections.abc import Callable
from dataclasses import replace
from multiprocessing.connection import Connection
from pathlib import Path

import numpy as np

from morphotone.night.outcome import Item, Outcome, csv_line

TABLES = {"roots": "file,number,root", "turned_away": "file,reason,sentence"}


def root_of(item: Item) -> Outcome:
    data = item.path.read_bytes()
    sha256 = hashlib.sha256(data).hexdigest()
    if sha256 == item.known_sha256:
        return Outcome(item.name, "unchanged", sha256)
    numbers = [float(line) for line in data.split()]
    if min(numbers) < 0:
        return Outcome(
            item.name,
            "turned away",
            sha256,
            len(numbers),
            reason="negative",
            sentence=f"no root of {min(numbers)}",
        )
    text = "".join(csv_line(item.name, repr(number), repr(number**0.5)) for number in numbers).encode()
    return Outcome(item.name, "analysed", sha256, len(numbers), {"roots": text})


def roots(batch: list[Item]) -> list[Outcome]:
    return [root_of(item) for item in batch]


def roots_noted(batch: list[Item], diary: Path) -> list[Outcome]:
    """Also note in a file what is really computed."""
    outcomes = roots(batch)
    with diary.open("a", encoding="utf-8") as stream:
        stream.writelines(f"{out.name}\n" for out in outcomes if out.status != "unchanged")
    return outcomes


def roots_but(batch: list[Item], culprit: str) -> list[Outcome]:
    """Fail as a whole where one of the files is the culprit."""
    if any(item.name == culprit for item in batch):
        raise ZeroDivisionError("what nobody\nthought of")
    return roots(batch)


def roots_deadly(batch: list[Item], culprit: str) -> list[Outcome]:
    """Take the process down, as the system does when memory runs out."""
    if any(item.name == culprit for item in batch):
        os._exit(9)
    return roots(batch)


def roots_hungry(batch: list[Item], slow: str, stalled: str, greedy: str) -> list[Outcome]:
    """Never end in Python for one file, in the system for another; take two gigabytes for a third."""
    for item in batch:
        while item.name == slow:
            time.sleep(0.01)
        if item.name == stalled:
            os.read(os.pipe()[0], 1)
        if item.name == greedy:
            np.ones(2 * 10**9, np.uint8)
    return roots(batch)


def roots_unlucky(batch: list[Item], culprit: str, deaths: Path) -> list[Outcome]:
    """Take the process down twice, as somebody from outside might."""
    with deaths.open("a+", encoding="utf-8") as stream:
        stream.seek(0)
        if any(item.name == culprit for item in batch) and len(stream.readlines()) < 2:
            stream.write("died\n")
            stream.flush()
            os._exit(9)
    return roots(batch)


def roots_interrupted(batch: list[Item], at: str) -> list[Outcome]:
    """Stand for Ctrl-C while a batch is worked on."""
    if any(item.name == at for item in batch):
        raise KeyboardInterrupt
    return roots(batch)


def roots_slow(batch: list[Item], diary: Path) -> list[Outcome]:
    """Take a second over each file, and say so; the file with the negative number is refused at once."""
    outcomes = roots(batch)
    if outcomes[0].status != "turned away":
        time.sleep(1.0)
        with diary.open("a", encoding="utf-8") as stream:
            stream.write(f"{batch[0].name}\n")
    return outcomes


def roots_large(batch: list[Item]) -> list[Outcome]:
    """Hand back more than a pipe holds, so that a worker waits for someone to take it."""
    return [replace(out, parts={**out.parts, "ballast": b"0\r\n" * 1_000_000}) for out in roots(batch)]


def roots_cut_off(batch: list[Item], culprit: str) -> list[Outcome]:
    """Die in the middle of handing over."""
    outcomes = roots(batch)
    if batch[0].name == culprit:
        Connection._send = _cut_off
        outcomes = [replace(outcomes[0], parts={"ballast": b"0\r\n" * 1_000_000})]
    return outcomes


def _cut_off(connection: Connection, message: bytes, write: Callable[[int, bytes], int] = os.write) -> None:
    """Send the length that comes before a long message, and no more."""
    write(connection.fileno(), message[:1000])
    os._exit(9)


def roots_forgetful(batch: list[Item]) -> list[Outcome]:
    """Lose the last file of each batch."""
    return roots(batch)[:-1]


def roots_unfounded(batch: list[Item]) -> list[Outcome]:
    """Call everything unchanged."""
    return [Outcome(item.name, "unchanged", "0" * 64) for item in batch]


def roots_unended(batch: list[Item]) -> list[Outcome]:
    """Leave out the line end."""
    return [Outcome(item.name, "analysed", "", 1, {"roots": b"1,1\n"}) for item in batch]


def roots_with_threads(batch: list[Item]) -> list[Outcome]:
    """Tell what the worker's environment allows the linear algebra."""
    text = os.environ.get("OPENBLAS_NUM_THREADS", "any")
    return [
        Outcome(item.name, "analysed", "", 1, {"roots": csv_line(item.name, text, "").encode()})
        for item in batch
    ]
