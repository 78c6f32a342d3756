"""The ledger of a results folder: one SQLite file that knows what is finished and holds its rows.

A batch is entered in one transaction, so that whatever stops a run, the ledger holds whole batches. The
process that has it open keeps SQLite's exclusive lock: a second run into the same folder is refused, and
the operating system lets go of the lock when the process ends, in whatever way.
"""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import closing, contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from types import TracebackType
from typing import Any, Literal, Self, cast

from morphotone.errors import ResultsError
from morphotone.night.outcome import Outcome

FILE = "ledger.sqlite"
VERSION = 2  # of the tables below; a ledger with another one is refused

# A cell's table by sample has a megabyte or two: in pages of 4 kB that costs a third more time.
_PAGES = "page_size = 32768"

_TABLES = """
create table if not exists meta(key text primary key, value text not null);
create table if not exists outcomes(
    name text primary key, status text not null, sha256 text not null, samples integer not null,
    finished_at text not null);
create table if not exists parts(
    name text not null, table_name text not null, text blob not null, primary key (name, table_name));
create table if not exists sittings(number integer primary key, facts text not null);
"""

_WAYS_OUT = {
    sqlite3.SQLITE_BUSY: "another run writes there; wait for its end, or choose another folder with --into",
    sqlite3.SQLITE_NOTADB: "this is no ledger; choose another folder with --into, or delete this one",
    sqlite3.SQLITE_CORRUPT: "the ledger is damaged; choose another folder with --into, or delete this one",
    sqlite3.SQLITE_CANTOPEN: "it cannot be opened; check that the folder is there and may be written to",
    sqlite3.SQLITE_READONLY: "it may not be written to; check its rights, or choose another --into",
    sqlite3.SQLITE_FULL: "the disk is full; make room and start again: what is finished is kept",
    sqlite3.SQLITE_IOERR: "the disk does not obey; check it and start again: what is finished is kept",
}


class LedgerInUseError(ResultsError):
    """Another run has the ledger open."""


@dataclass(frozen=True)
class Entry:
    """What the ledger knows about one finished file, besides its rows."""

    status: Literal["analysed", "turned away"]
    sha256: str  #: of the bytes the outcome belongs to; empty if they were never read
    samples: int


class Ledger:
    """The open ledger of a results folder; a context manager that closes it.

    Parameters
    ----------
    folder : Path
        The results folder, made if it is not there.
    fingerprint : mapping
        All that the rows depend on besides the files' bytes (assumptions, version); JSON types, nested
        at will. Outcomes are only taken over from a ledger with an equal fingerprint.

    Raises
    ------
    ResultsError
        The folder belongs to a run under another fingerprint, is being written to by another run, holds
        tables that are not a run's, or cannot be written to.
    """

    def __init__(self, folder: Path, fingerprint: Mapping[str, Any]) -> None:
        self.folder = folder
        self.path = folder / FILE
        _prepare(folder)
        with self._said_plainly():
            # timeout: a lock that is held will be held all night, there is nothing to wait for.
            self._connection = sqlite3.connect(self.path, timeout=0)
            try:
                self._set_up()
                self._compare(json.loads(json.dumps(fingerprint)))
            except BaseException:
                self._connection.close()
                raise

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._connection.close()

    def known(self) -> dict[str, Entry]:
        """Return what is finished, by name."""
        query = "select name, status, sha256, samples from outcomes"
        with self._said_plainly():
            return {name: Entry(*rest) for name, *rest in self._connection.execute(query)}

    def record(self, outcomes: Sequence[Outcome]) -> None:
        """Enter outcomes in the place of what was there for these names: all of them or none."""
        now = datetime.now(UTC).isoformat(timespec="seconds")
        with self._said_plainly(), self._connection:
            self._delete(outcome.name for outcome in outcomes)
            self._connection.executemany(
                "insert into outcomes values (?, ?, ?, ?, ?)",
                ((out.name, out.status, out.sha256, out.samples, now) for out in outcomes),
            )
            self._connection.executemany(
                "insert into parts values (?, ?, ?)",
                ((out.name, table, text) for out in outcomes for table, text in out.rows().items()),
            )

    def forget(self, names: Iterable[str]) -> None:
        """Strike out files: all of them or none; the next run takes them up anew."""
        with self._said_plainly(), self._connection:
            self._delete(names)

    def rows(self, table: str, names: Iterable[str]) -> Iterator[tuple[str, bytes]]:
        """Yield name and CSV lines of one table, in the order of `names`; those without are left out."""
        query = "select text from parts where name = ? and table_name = ?"
        for name in names:
            with self._said_plainly():
                row = self._connection.execute(query, (name, table)).fetchone()
            if row is not None:
                yield name, row[0]

    def note_sitting(self, number: int, facts: Mapping[str, Any]) -> None:
        """Put down what is known of a sitting (JSON types), in the place of what was."""
        with self._said_plainly(), self._connection:
            self._connection.execute(
                "insert or replace into sittings values (?, ?)", (number, json.dumps(facts))
            )

    def sittings(self) -> list[dict[str, Any]]:
        """Return what is known of each sitting, in order."""
        with self._said_plainly():
            query = "select facts from sittings order by number"
            return [json.loads(facts) for (facts,) in self._connection.execute(query)]

    def _set_up(self) -> None:
        # The order matters: only a connection that is exclusive before it turns to the write-ahead log
        # does without shared memory, which network disks do not offer.
        for pragma in (_PAGES, "locking_mode = exclusive", "journal_mode = wal", "synchronous = normal"):
            with closing(self._connection.execute(f"pragma {pragma}")) as cursor:
                cursor.fetchall()
        self._connection.execute("begin exclusive")
        self._connection.commit()
        self._connection.executescript(_TABLES)

    def _compare(self, fingerprint: Mapping[str, Any]) -> None:
        """Note the fingerprint in a new ledger; refuse an old one that differs."""
        now = {"version": VERSION, "fingerprint": fingerprint}
        noted = self._connection.execute("select key, value from meta").fetchall()
        if not noted:
            with self._connection:
                values = ((key, json.dumps(value)) for key, value in now.items())
                self._connection.executemany("insert into meta values (?, ?)", values)
            return
        then = {key: json.loads(value) for key, value in noted}
        keys_then, keys_now = then["fingerprint"].keys(), fingerprint.keys()
        if keys_then - keys_now and keys_now - keys_then:
            raise ResultsError(
                f"{self.folder} holds what another command, or another version of this one, has written; "
                "choose another folder with --into"
            )
        if then != now:
            differences = _differences(_conditions(then), _conditions(now))
            raise ResultsError(
                f"{self.folder} holds results made under other conditions: {differences}; "
                f"choose another folder with --into, or delete {self.folder} to start afresh"
            )

    def _delete(self, names: Iterable[str]) -> None:
        keys = [(name,) for name in names]
        for table in ("outcomes", "parts"):
            self._connection.executemany(f"delete from {table} where name = ?", keys)

    @contextmanager
    def _said_plainly(self) -> Iterator[None]:
        """Turn what SQLite says about the disk into a sentence; what is a fault of ours stays as it is."""
        try:
            yield
        except sqlite3.DatabaseError as error:
            code = cast(int, getattr(error, "sqlite_errorcode", 0)) & 0xFF
            if code not in _WAYS_OUT:
                raise
            kind = LedgerInUseError if code == sqlite3.SQLITE_BUSY else ResultsError
            raise kind(f"{self.path}: {_WAYS_OUT[code]} ({error})") from error


def _prepare(folder: Path) -> None:
    """Make the folder; refuse one whose tables a run did not write, for it would write over them."""
    try:
        folder.mkdir(parents=True, exist_ok=True)
        present = sorted(path.name for path in folder.iterdir())
    except OSError as error:
        raise ResultsError(f"{folder}: cannot be used for results ({error.strerror})") from error
    strangers = [name for name in present if name.lower().endswith((".csv", ".json"))]
    if FILE not in present and strangers:
        raise ResultsError(
            f"{folder} holds {strangers[0]} but no {FILE}, so a run could write over what is not its own; "
            "choose another folder with --into, or move these files away"
        )


def _conditions(meta: Mapping[str, Any]) -> dict[str, str]:
    return {"the ledger's version": str(meta["version"]), **dict(_leaves(meta["fingerprint"]))}


def _differences(old: Mapping[str, str], new: Mapping[str, str]) -> str:
    """Say the first few places where the conditions differ."""
    changed = [key for key in {**old, **new} if old.get(key) != new.get(key)]
    shown = [f"{key} was {old.get(key, 'not set')}, is {new.get(key, 'not set')}" for key in changed[:5]]
    return "; ".join(shown) + (f"; and {len(changed) - 5} more" if len(changed) > 5 else "")


def _leaves(tree: Mapping[str, Any]) -> Iterator[tuple[str, str]]:
    """Yield the dotted name and the JSON text of each value that is no mapping itself."""
    for key, value in tree.items():
        if isinstance(value, dict) and value:
            yield from ((f"{key}.{below}", text) for below, text in _leaves(value))
        else:
            yield key, json.dumps(value)
