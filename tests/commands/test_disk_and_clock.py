"""Disks that are full, shut or changing, a clock that jumps: a sentence, and the same bytes after all."""

import datetime
import os
import subprocess
import sys
import time

import pytest

from morphotone.commands import survey as command
from morphotone.night.ledger import Ledger
from tests import trees
from tests.commands.folders import SMALL, SOUND, fill, rows, run, tables


@pytest.fixture
def small(tmp_path):
    return fill(tmp_path / "cells", SMALL)


def surveyed(folder, results, *options):
    return run("survey", folder, "--into", results, "--samples", "--workers", "1", *options)


@pytest.mark.skipif(sys.platform == "win32", reason="file sizes are held by POSIX limits")
@pytest.mark.parametrize("blocks", [40, 120, 250, 400, 800])
def test_a_full_disk_is_said_and_the_same_command_goes_on(tmp_path, blocks):
    """No file may grow beyond a size: the ledger, its log, or a table is cut off, whichever comes first."""
    files = {f"{k}.swc": trees.irregular(300, k, soma=True) for k in range(20)}
    folder, results = fill(tmp_path / "cells", files), tmp_path / "results"
    code = f"""
import resource, signal, sys
signal.signal(signal.SIGXFSZ, signal.SIG_IGN)  # so that a write fails, as on a full disk
from morphotone.commands import main
resource.setrlimit(resource.RLIMIT_FSIZE, ({blocks} * 1024, resource.RLIM_INFINITY))
sys.exit(main(sys.argv[1:]))
"""
    words = [folder, "--into", results, "--samples", "--workers", "1"]
    command_line = [sys.executable, "-c", code, "survey", *map(str, words)]
    done = subprocess.run(command_line, capture_output=True, text=True, check=False)
    assert done.returncode == 2, done.stderr
    assert "Traceback" not in done.stderr
    said = done.stderr.splitlines()[-1]
    assert said.startswith("morphotone survey: ")
    assert "start again" in said
    assert not [path for path in results.rglob("*") if path.suffix == ".part"]
    assert surveyed(folder, results) == 0
    surveyed(folder, tmp_path / "undisturbed")
    assert tables(results) == tables(tmp_path / "undisturbed")


@pytest.mark.skipif(sys.platform == "win32", reason="rights are another matter there")
def test_a_folder_that_may_not_be_written_to(small, tmp_path):
    """In a process of another user where this one is root, whom rights do not bind."""
    shut = tmp_path / "shut"
    shut.mkdir(mode=0o555)
    code = """
import os, sys
from morphotone.commands import main, survey
if os.getuid() == 0:
    os.setuid(65534)
sys.exit(main(sys.argv[1:]))
"""
    for place in (tmp_path, *tmp_path.parents):
        if place.stat().st_uid == os.getuid() and place != place.parent:
            place.chmod(place.stat().st_mode | 0o055)
    words = ["survey", str(small), "--into", str(shut), "--workers", "1"]
    done = subprocess.run([sys.executable, "-c", code, *words], capture_output=True, text=True, check=False)
    assert done.returncode == 2, done.stderr
    (said,) = done.stderr.splitlines()
    assert "ledger.sqlite: it cannot be opened; check that the folder is there and may be written to" in said
    assert list(shut.iterdir()) == []


def test_files_that_vanish_change_or_are_shut_during_the_run(small, tmp_path, monkeypatch):
    """Between the list and the reading; the next run, when they are back, ends with the usual bytes."""
    surveyed(small, tmp_path / "undisturbed")
    before = {path: path.read_bytes() for path in small.rglob("*") if path.is_file()}
    true_find = command.find_files

    def find_then_spoil(*words, **named):
        found = true_find(*words, **named)
        (small / "b.swc").unlink()
        (small / "a.swc").write_text(trees.comb())
        (small / "deep" / "er" / "c.SWC").unlink()
        (small / "deep" / "er" / "c.SWC").mkdir()
        return found

    monkeypatch.setattr(command, "find_files", find_then_spoil)
    assert surveyed(small, tmp_path / "results") == 1
    reasons = {row["file"]: row["reason"] for row in rows(tmp_path / "results" / "turned_away.csv")}
    assert {name: reasons.get(name) for name in ("a.swc", "b.swc", "deep/er/c.SWC")} == {
        **{"a.swc": None, "b.swc": "unreadable", "deep/er/c.SWC": "unreadable"}
    }
    monkeypatch.undo()
    (small / "deep" / "er" / "c.SWC").rmdir()
    for path, data in before.items():
        path.write_bytes(data)
    assert surveyed(small, tmp_path / "results") == 1
    assert tables(tmp_path / "results") == tables(tmp_path / "undisturbed")


def test_a_clock_that_jumps_changes_no_byte_of_the_tables(small, tmp_path, monkeypatch):
    surveyed(small, tmp_path / "undisturbed")
    true_record, hours = Ledger.record, iter([5, -9, 100, -4000] * 10)

    class Jumping(datetime.datetime):
        @classmethod
        def now(cls, tz=None):
            return datetime.datetime(2031, 3, 1, tzinfo=tz) + datetime.timedelta(hours=next(hours))

    def record(ledger, outcomes):
        monkeypatch.setattr(time, "time", lambda: -1e9)
        true_record(ledger, outcomes)

    for module in ("ledger", "sitting", "record"):
        monkeypatch.setattr(f"morphotone.night.{module}.datetime", Jumping)
    monkeypatch.setattr(Ledger, "record", record)
    assert surveyed(small, tmp_path / "results") == 1
    monkeypatch.undo()
    assert tables(tmp_path / "results") == tables(tmp_path / "undisturbed")
    log = (tmp_path / "results" / "log.txt").read_text(encoding="utf-8")
    assert "ended: 3 analysed, 2 turned away" in log


def test_a_single_sound_file_needs_no_second_sitting(tmp_path):
    folder = fill(tmp_path / "cells", {"x.swc": SOUND})
    assert surveyed(folder, tmp_path / "results") == 0
    log = (tmp_path / "results" / "log.txt").read_text(encoding="utf-8").splitlines()
    assert [line.split("  ", 1)[1].split(" ")[0] for line in log] == ["sitting", "1", "ended:"]
