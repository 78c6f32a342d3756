"""A run on a real Dask scheduler with two workers, each started by its own command on loopback."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from functools import partial
from pathlib import Path

import pytest
from distributed import Client

from morphotone.errors import MorphotoneError
from morphotone.night import cluster as room
from morphotone.night import record
from morphotone.night.cluster import Cluster
from morphotone.night.folder import Found
from morphotone.night.ledger import Ledger
from morphotone.night.outcome import Item, Outcome
from morphotone.night.pool import Pool, in_this_process
from morphotone.night.runner import Tally, run
from tests.commands.folders import SMALL, fill, tables
from tests.commands.folders import run as command
from tests.night import roots

pytestmark = pytest.mark.slow

CHECKOUT = Path(__file__).resolve().parents[2]
LOOPBACK = ("--host", "127.0.0.1", "--no-dashboard")


@contextmanager
def started(*words: object) -> Iterator[None]:
    """Keep a command of Dask's running."""
    environment = {**os.environ, "PYTHONPATH": str(CHECKOUT)}
    words = (sys.executable, "-m", "dask", *words)
    with subprocess.Popen(
        [str(word) for word in words], env=environment, stderr=subprocess.DEVNULL
    ) as process:
        try:
            yield
        finally:
            process.terminate()


def scheduler_in(stack: ExitStack, folder: Path) -> str:
    """Start a scheduler and return its address."""
    card = folder / "scheduler.json"
    stack.enter_context(started("scheduler", *LOOPBACK, "--port", "0", "--scheduler-file", card))
    for _ in range(600):
        if card.exists() and (text := card.read_text(encoding="utf-8")):
            return str(json.loads(text)["address"])
        time.sleep(0.1)
    raise AssertionError("the scheduler has not come up within a minute")


@pytest.fixture(scope="module")
def address(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    folder = tmp_path_factory.mktemp("dask")
    with ExitStack() as stack:
        address = scheduler_in(stack, folder)
        for _ in range(2):
            own = ("--nthreads", "1", "--local-directory", folder)
            stack.enter_context(started("worker", address, *LOOPBACK, *own))
        with Client(address, set_as_default=False) as client:
            client.wait_for_workers(2, timeout=60)
        yield address


def pids_of(address: str) -> list[int]:
    with Client(address, set_as_default=False) as client:
        return list(client.run(os.getpid).values())


def worked(
    found: list[Found], function: Callable[[list[Item]], list[Outcome]], results: Path, pool: Pool
) -> tuple[Tally, dict[str, list[tuple[str, bytes]]]]:
    """Run, one file a batch; return the count and all rows."""
    with Ledger(results, {}) as ledger:
        tally = run(found, function, ledger=ledger, pool=pool, batch_bytes=1)
        names = [file.name for file in found]
        return tally, {table: list(ledger.rows(table, names)) for table in roots.TABLES}


def roots_slowly(batch: list[Item], seconds: float) -> list[Outcome]:
    time.sleep(seconds)
    return roots.roots(batch)


def roots_or_death(batch: list[Item]) -> list[Outcome]:
    if any(item.name == "b/05.swc" for item in batch):
        os.kill(os.getpid(), signal.SIGKILL)
    return roots.roots(batch)


def roots_or_silence(batch: list[Item]) -> list[Outcome]:
    if any(item.name == "b/05.swc" for item in batch):
        time.sleep(15)
    return roots.roots(batch)


def test_a_survey_gives_the_bytes_of_a_local_one(tmp_path, address):
    folder = fill(tmp_path / "cells", SMALL)
    here, there = tmp_path / "here", tmp_path / "there"
    assert command("survey", folder, "--into", here, "--samples", "--workers", "1") == 1
    assert command("survey", folder, "--into", there, "--samples", "--cluster", address) == 1
    assert tables(here) == tables(there)
    assert "samples/a.swc.csv" in tables(there)


def test_files_that_workers_do_not_see_are_sent(tmp_path, address, monkeypatch):
    fill(tmp_path / "cells", SMALL)
    monkeypatch.chdir(tmp_path)
    unseen = Path("/proc/self/cwd/cells")  # each process finds its own working folder behind this path
    here, there = tmp_path / "here", tmp_path / "there"
    assert command("survey", unseen, "--into", here, "--workers", "1") == 1
    assert command("survey", unseen, "--into", there, "--cluster", address) == 1
    assert tables(here) == tables(there)


def test_a_worker_that_is_killed_costs_nothing(tmp_path, found, address):
    expected = worked(found(), roots.roots, tmp_path / "here", in_this_process)
    killed = []

    def pool(waiting, handed_out, function):
        for done in workers.pool(waiting, handed_out, function):
            if not killed:
                killed.append(pids_of(address)[0])
                os.kill(killed[0], signal.SIGKILL)
            yield done

    with Cluster(address) as workers:
        assert worked(found(), partial(roots_slowly, seconds=0.3), tmp_path / "there", pool) == expected
    assert killed
    with Client(address, set_as_default=False) as client:
        client.wait_for_workers(2, timeout=60)  # its keeper has started another one


def died_at_one(results: Path, found: list[Found], address: str, function: Callable) -> None:
    with Cluster(address) as workers:
        tally, rows = worked(found, function, results, workers.pool)
    assert (tally.analysed, tally.turned_away) == (10, 2)
    assert b"b/05.swc,worker_died," in dict(rows["turned_away"])["b/05.swc"]


def test_a_file_that_ends_its_process_costs_itself_and_no_worker(tmp_path, found, address):
    before = pids_of(address)
    died_at_one(tmp_path / "results", found(), address, roots_or_death)
    assert sorted(pids_of(address)) == sorted(before)


def test_no_scheduler_is_said(tmp_path, monkeypatch, capsys):
    monkeypatch.setattr(room, "_PATIENCE_SECONDS", 1)
    folder = fill(tmp_path / "cells", SMALL)
    command_line = ("survey", folder, "--into", tmp_path / "results", "--cluster", "tcp://127.0.0.1:9")
    assert command(*command_line) == 2
    assert "tcp://127.0.0.1:9: no scheduler answers there" in capsys.readouterr().err


def test_a_scheduler_without_workers_is_said(tmp_path, monkeypatch):
    monkeypatch.setattr(room, "_PATIENCE_SECONDS", 2)
    with ExitStack() as stack:
        lonely = scheduler_in(stack, tmp_path)
        with pytest.raises(
            MorphotoneError, match=r"has no worker; start some with `dask worker tcp://127\.0"
        ):
            Cluster(lonely)


def test_workers_with_other_versions_are_refused(address, monkeypatch):
    monkeypatch.setattr(record, "version", lambda _: "9.9")  # in this process, not in the workers
    with pytest.raises(MorphotoneError, match=r"read morphotone .*, expected 9\.9 as on this machine"):
        Cluster(address)


def test_a_batch_that_never_comes_back_costs_its_file(tmp_path, found, address, monkeypatch):
    monkeypatch.setattr(room, "_SILENCE_SECONDS", 4)
    died_at_one(tmp_path / "results", found(), address, roots_or_silence)
