"""Tables on request: a small file by which another process asks the run at work for its tables."""

from __future__ import annotations

from pathlib import Path

from morphotone.night.results import atomic

_FILE = ".tables-now"


def ask_for_tables(folder: Path) -> None:
    """Leave the request."""
    with atomic(folder / _FILE) as stream:
        stream.write("tables\n")


def tables_asked_for(folder: Path) -> bool:
    """Whether somebody asks."""
    return (folder / _FILE).exists()


def tables_given(folder: Path) -> None:
    """Take the request away."""
    (folder / _FILE).unlink(missing_ok=True)
