"""A night with faults ends, after the same command again, with the bytes of an undisturbed night.

Each fault is tried some times at random moments; MORPHOTONE_FAULTS=50 tries each fifty times. What was tried
and lost is printed (pytest -s).
"""

import os
import random
import signal
import subprocess
import sys
import time
from contextlib import suppress
from pathlib import Path

import pytest

from tests import trees
from tests.commands.folders import BROKEN, fill, run, tables

TIMES = int(os.environ.get("MORPHOTONE_FAULTS", "1"))

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(sys.platform != "linux", reason="looks for workers in /proc, and sends POSIX signals"),
]


@pytest.fixture(scope="module")
def cells(tmp_path_factory):
    """Some forty batches of small cells, for `begin`; a few files among them cannot be read."""
    folder = tmp_path_factory.mktemp("night") / "cells"
    files = {f"{k % 7}/{k}.swc": trees.irregular(300, k, soma=True) if k % 40 else BROKEN for k in range(200)}
    return fill(folder, files)


@pytest.fixture(scope="module")
def undisturbed(cells, tmp_path_factory):
    results = tmp_path_factory.mktemp("undisturbed") / "results"
    begun = time.monotonic()
    process = begin(cells, results)
    process.communicate(timeout=300)
    assert process.returncode == 1
    return tables(results), time.monotonic() - begun


SMALL_BATCHES = """
from morphotone.night import runner
from morphotone.__main__ import run
runner._LEAST_BYTES = 100_000
print("begins", flush=True)
run()
"""


def begin(cells, results):
    words = ["survey", cells, "--into", results, "--samples", "--workers", "2"]
    process = subprocess.Popen(
        [sys.executable, "-c", SMALL_BATCHES, *map(str, words)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    assert process.stdout.readline() == "begins\n"
    return process


def children(process):
    """Return the processes below one, by id, that joblib started as workers."""
    found = []
    for status in Path("/proc").glob("[0-9]*/stat"):
        try:
            parent = int(status.read_text().rpartition(")")[2].split()[1])
            words = (status.parent / "cmdline").read_text().split("\0")
        except (OSError, IndexError):
            continue
        if parent == process.pid and "--process-name" in words:
            found.append(int(status.parent.name))
    return sorted(found)


def group_lives(group):
    try:
        os.killpg(group, 0)
    except ProcessLookupError:
        return False
    return True


def kill_main(process):
    process.kill()


def kill_a_worker(process):
    kill(random.sample(workers := children(process), min(1, len(workers))))


def kill_all_workers(process):
    kill(children(process))


def kill(workers):
    for worker in workers:
        with suppress(ProcessLookupError):  # it may have ended meanwhile
            os.kill(worker, signal.SIGKILL)


def terminate(process):
    process.terminate()


def control_c(process):
    os.killpg(process.pid, signal.SIGINT)


def control_c_twice(process):
    control_c(process)
    time.sleep(random.uniform(0.0, 0.3))
    if group_lives(process.pid):
        control_c(process)


@pytest.mark.parametrize(
    ("fault", "codes"),
    [
        (kill_main, {-9}),
        (kill_a_worker, {1}),
        (kill_all_workers, {1}),
        (terminate, {130}),
        (control_c, {130}),
        (control_c_twice, {130}),
    ],
    ids=lambda value: getattr(value, "__name__", ""),
)
def test_the_same_bytes_after_a_fault_at_any_moment(fault, codes, cells, undisturbed, tmp_path):
    bytes_of_all, seconds = undisturbed
    struck = lost = nights = 0
    while struck < TIMES:
        results = tmp_path / str(nights)
        nights += 1
        ended = False
        while not ended:
            process = begin(cells, results)
            time.sleep(random.uniform(0.0, seconds))
            running = process.poll() is None
            if running:
                fault(process)
                struck += 1
            said = process.communicate(timeout=300)[1]
            assert process.returncode in ({1} | codes if running else {1}), said
            # What loky's thread says when its workers are ended under it is not ours to prevent.
            assert "Traceback" not in said.partition("Exception in thread ExecutorManagerThread")[0]
            if process.returncode == 130:
                assert said.splitlines()[-1] == "interrupted; the same command goes on from here"
            ended = process.returncode == 1 or struck >= TIMES
            deadline = time.monotonic() + 20
            while group_lives(process.pid) and time.monotonic() < deadline:
                time.sleep(0.05)
            assert not group_lives(process.pid), "a worker outlives its run"
        if process.returncode != 1:
            assert run("survey", cells, "--into", results, "--samples", "--workers", "1") == 1
        lost += tables(results) != bytes_of_all
    print(f"\n{fault.__name__}: tried {struck} times in {nights} nights, lost {lost}")
    assert lost == 0
