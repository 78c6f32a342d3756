"""Disks that are full, shut or changing, a clock that jumps: a sentence, and the same bytes after all."""

import datetime
import os
import subprocess
import sys
import time
from functools import partial

import pytest

from morphotone.commands import survey as command
from morphotone.commands import workers
from morphotone.night.ledger import Ledger
from morphotone.night.limits import Limits
from tests import trees
from tests.commands.folders import SMALL, SOUND, fill, rows, run, tables


@pytest.fixture
def small(tmp_path):
    return fill(tmp_path / "cells", SMALL)


def surveyed(folder, results, *options):
    return run("survey", folder, "--into", results, "--samples", "--workers", "1", *options)


def as_another_user(code, words, tmp_path):
    """Run code in a process that gives up being root, whom rights do not bind, with `bound()`."""
    for place in (tmp_path, *tmp_path.parents):
        if place.stat().st_uid == os.getuid() and place != place.parent:
            place.chmod(place.stat().st_mode | 0o055)
    before = """
import os, sys
from morphotone.commands import main, survey

def bound():
    if os.getuid() == 0:
        os.setuid(65534)
"""
    command_line = [sys.executable, "-c", before + code, *map(str, words)]
    return subprocess.run(command_line, capture_output=True, text=True, check=False)


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
    shut = tmp_path / "shut"
    shut.mkdir(mode=0o555)
    words = ["survey", small, "--into", shut, "--workers", "1"]
    done = as_another_user("bound(); sys.exit(main(sys.argv[1:]))", words, tmp_path)
    assert done.returncode == 2, done.stderr
    (said,) = done.stderr.splitlines()
    assert "ledger.sqlite: it cannot be opened; check that the folder is there and may be written to" in said
    assert list(shut.iterdir()) == []


@pytest.mark.skipif(sys.platform == "win32", reason="rights are another matter there")
def test_files_that_lose_their_rights_during_the_run(small, tmp_path):
    """A file and a folder, between the list and the reading; with them back, the usual bytes."""
    results = tmp_path / "results"
    results.mkdir()
    results.chmod(0o777)
    code = """
true_find = survey.find_files

def find_then_shut(folder, *words, **named):
    found = true_find(folder, *words, **named)
    (folder / "a.swc").chmod(0)
    (folder / "deep" / "er").chmod(0)
    bound()
    return found

survey.find_files = find_then_shut
sys.exit(main(sys.argv[1:]))
"""
    words = ["survey", small, "--into", results, "--samples", "--workers", "1"]
    done = as_another_user(code, words, tmp_path)
    (small / "a.swc").chmod(0o644)
    (small / "deep" / "er").chmod(0o755)
    assert done.returncode == 1, done.stderr
    assert "Traceback" not in done.stderr
    said = {row["file"]: (row["reason"], row["sentence"]) for row in rows(results / "turned_away.csv")}
    assert list(said) == ["a.swc", "deep/broken.swc", "deep/er/c.SWC", "deep/unfit.swc"]
    for name in ("a.swc", "deep/er/c.SWC"):
        assert said[name][0] == "unreadable"
        assert "permission denied" in said[name][1]
    assert surveyed(small, results) == 1
    surveyed(small, tmp_path / "undisturbed")
    assert tables(results) == tables(tmp_path / "undisturbed")


def outcomes_but(items, request, stalled):
    """Wait for ever in the system, as for a share that stalls, before one of the files."""
    if any(item.name == stalled for item in items):
        os.read(os.pipe()[0], 1)
    return TRUE_OUTCOMES(items, request)


TRUE_OUTCOMES = command.outcomes


@pytest.mark.slow
def test_a_share_that_stalls_costs_the_file_that_waits_for_it(small, tmp_path, monkeypatch):
    monkeypatch.setattr(command, "outcomes", partial(outcomes_but, stalled="b.swc"))
    monkeypatch.setattr(workers, "usual_limits", lambda *_: Limits(seconds=3.0, grace=0.5))
    assert surveyed(small, tmp_path / "results", "--workers", "2") == 1
    monkeypatch.undo()
    away = {row["file"]: row["reason"] for row in rows(tmp_path / "results" / "turned_away.csv")}
    assert away == {"b.swc": "too_long", "deep/broken.swc": "not_a_number", "deep/unfit.swc": "unfit"}
    before = (small / "b.swc").read_bytes()
    (small / "b.swc").unlink()
    surveyed(small, tmp_path / "without")
    there, without = tables(tmp_path / "results"), tables(tmp_path / "without")
    assert there.pop("turned_away.csv") != without.pop("turned_away.csv")
    assert there == without
    (small / "b.swc").write_bytes(before)  # the share is back
    assert surveyed(small, tmp_path / "results") == 1
    surveyed(small, tmp_path / "undisturbed")
    assert tables(tmp_path / "results") == tables(tmp_path / "undisturbed")


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
    assert log.count("turned away: deep/unfit.swc: unfit: ") == 1
    assert "unfit: unfit: " not in log


def test_a_single_sound_file_needs_no_second_sitting(tmp_path):
    folder = fill(tmp_path / "cells", {"x.swc": SOUND})
    assert surveyed(folder, tmp_path / "results") == 0
    log = (tmp_path / "results" / "log.txt").read_text(encoding="utf-8").splitlines()
    assert [line.split("  ", 1)[1].split(" ")[0] for line in log] == ["sitting", "1", "ended:"]
