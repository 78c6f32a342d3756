from __future__ import annotations

import os
import signal
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest

from morphotone.errors import ResultsError
from morphotone.night.ledger import FILE, Entry, Ledger
from morphotone.night.outcome import Outcome

CONDITIONS = {"R_m_ohm_cm2": 20000.0, "hz": (0, 100), "axon": {"kept": True}}


def outcome(name: str, text: bytes = b"1\r\n", **changes: object) -> Outcome:
    values = {"status": "analysed", "sha256": f"hash of {name}", "samples": 3, "parts": {"cells": text}}
    return Outcome(name, **{**values, **changes})  # type: ignore[arg-type]


def test_what_was_recorded_is_there_when_the_ledger_is_opened_again(tmp_path: Path) -> None:
    with Ledger(tmp_path / "new" / "results", CONDITIONS) as ledger:
        ledger.record([outcome("b"), outcome("a", b"2,3\r\n4,5\r\n")])
    with Ledger(tmp_path / "new" / "results", CONDITIONS) as ledger:
        assert ledger.known() == {
            "a": Entry("analysed", "hash of a", 3),
            "b": Entry("analysed", "hash of b", 3),
        }
        assert list(ledger.rows("cells", ["a", "b"])) == [("a", b"2,3\r\n4,5\r\n"), ("b", b"1\r\n")]


def test_rows_come_in_the_order_asked_for(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        ledger.record([outcome(name, b"1\r\n") for name in "abc"])
        assert [name for name, _ in ledger.rows("cells", ["c", "nobody", "a"])] == ["c", "a"]
        assert list(ledger.rows("branches", ["a"])) == []


def test_a_new_outcome_takes_the_place_of_all_of_the_old_one(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        ledger.record([outcome("a")])
        ledger.record([outcome("a", status="turned away", parts={}, reason="r", sentence="s, t")])
        assert ledger.known()["a"].status == "turned away"
        assert list(ledger.rows("cells", ["a"])) == []
        assert list(ledger.rows("turned_away", ["a"])) == [("a", b'a,r,"s, t"\r\n')]


def test_forgetting(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        ledger.record([outcome("a"), outcome("b")])
        ledger.forget(["a", "nobody"])
        assert list(ledger.known()) == ["b"]
        assert [name for name, _ in ledger.rows("cells", ["a", "b"])] == ["b"]


def test_a_batch_is_entered_whole_or_not_at_all(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        ledger.record([outcome("a")])
        with pytest.raises(sqlite3.IntegrityError, match="UNIQUE"):
            ledger.record([outcome("a", b"new\r\n"), outcome("b"), outcome("b")])
        assert list(ledger.known()) == ["a"]
        assert list(ledger.rows("cells", ["a", "b"])) == [("a", b"1\r\n")]


def test_other_conditions_are_refused_with_their_differences(tmp_path: Path) -> None:
    with Ledger(tmp_path, CONDITIONS):
        pass
    other = {"R_m_ohm_cm2": 10000.0, "hz": (0, 100), "axon": {"kept": False}, "C_m": 1.0}
    expected = (
        r"R_m_ohm_cm2 was 20000\.0, is 10000\.0; axon\.kept was true, is false; C_m was not set, is 1\.0; "
        r"choose another folder with --into, or delete"
    )
    with pytest.raises(ResultsError, match=expected):
        Ledger(tmp_path, other)
    with Ledger(tmp_path, CONDITIONS) as ledger:
        assert ledger.known() == {}


def test_many_differences_are_cut_short(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}):
        pass
    with pytest.raises(ResultsError, match=r"e was not set, is 1; and 2 more; choose"):
        Ledger(tmp_path, dict.fromkeys("abcdefg", 1))


def test_another_version_of_the_ledger_is_refused(tmp_path: Path) -> None:
    with Ledger(tmp_path, CONDITIONS):
        pass
    connection = sqlite3.connect(tmp_path / FILE)
    with connection:
        connection.execute("update meta set value = '0' where key = 'version'")
    connection.close()
    with pytest.raises(ResultsError, match="conditions: the ledger's version was 0, is 2; choose"):
        Ledger(tmp_path, CONDITIONS)


def test_a_second_run_is_refused_and_the_first_goes_on(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        with pytest.raises(ResultsError, match="another run writes there; wait for its end, or choose"):
            Ledger(tmp_path, {})
        ledger.record([outcome("a")])
    with Ledger(tmp_path, {}) as ledger:
        assert list(ledger.known()) == ["a"]


HOLDER = """
import sys, time
from pathlib import Path
from morphotone.night.ledger import Ledger
from morphotone.night.outcome import Outcome
ledger = Ledger(Path(sys.argv[1]), {})
ledger.record([Outcome("a", "analysed", "hash", 1, {"cells": b"1\\r\\n"})])
print("open", flush=True)
time.sleep(60)
"""


@pytest.mark.skipif(sys.platform == "win32", reason="no SIGKILL on Windows")
def test_a_killed_process_leaves_its_rows_and_no_lock(tmp_path: Path) -> None:
    command = [sys.executable, "-c", HOLDER, str(tmp_path)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as holder:
        assert holder.stdout is not None
        assert holder.stdout.readline() == "open\n"
        with pytest.raises(ResultsError, match="another run writes there"):
            Ledger(tmp_path, {})
        os.kill(holder.pid, signal.SIGKILL)
    with Ledger(tmp_path, {}) as ledger:
        assert list(ledger.rows("cells", ["a"])) == [("a", b"1\r\n")]


def test_a_folder_with_tables_of_somebody_else_is_refused(tmp_path: Path) -> None:
    (tmp_path / "CELLS.CSV").write_text("mine\n", encoding="utf-8")
    with pytest.raises(ResultsError, match=r"holds CELLS\.CSV but no ledger\.sqlite"):
        Ledger(tmp_path, {})
    assert sorted(path.name for path in tmp_path.iterdir()) == ["CELLS.CSV"]


def test_a_folder_with_a_log_is_taken(tmp_path: Path) -> None:
    (tmp_path / "night.log").write_text("begun\n", encoding="utf-8")
    with Ledger(tmp_path, {}) as ledger:
        assert ledger.known() == {}


def test_a_file_in_place_of_the_folder(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("", encoding="utf-8")
    with pytest.raises(ResultsError, match=r"out: cannot be used for results \(File exists\)"):
        Ledger(tmp_path / "out", {})


def test_a_file_that_is_no_ledger(tmp_path: Path) -> None:
    (tmp_path / FILE).write_bytes(b"no data base at all, though long enough to be one\n" * 100)
    with pytest.raises(ResultsError, match=r"ledger\.sqlite: this is no ledger"):
        Ledger(tmp_path, {})


def test_a_full_disk_is_said_plainly_and_costs_only_the_batch(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        ledger.record([outcome("a")])
        pages = ledger._connection.execute("pragma page_count").fetchone()[0]
        ledger._connection.execute(f"pragma max_page_count = {pages}")
        with pytest.raises(ResultsError, match=r"the disk is full; make room and start again"):
            ledger.record([outcome("b", b"x" * 100_000 + b"\r\n")])
        assert list(ledger.known()) == ["a"]
