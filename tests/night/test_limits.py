from __future__ import annotations

import subprocess
import sys
import threading
import time
from pathlib import Path

import numpy as np
import pytest

from morphotone.night import limits
from morphotone.night.limits import Limits, TooLongError, held, usual_limits

linux = pytest.mark.skipif(sys.platform != "linux", reason="no limit of memory is held on other systems")


def wait_for_ever() -> None:
    while True:
        time.sleep(0.005)


def test_work_that_takes_too_long_is_ended_in_any_thread() -> None:
    ended = []

    def work() -> None:
        with pytest.raises(TooLongError, match=r"^$"), held(Limits(seconds=0.1), ends_process=False):
            wait_for_ever()
        ended.append(True)

    work()
    thread = threading.Thread(target=work)
    thread.start()
    thread.join(timeout=30)
    assert ended == [True, True]


def test_work_within_its_time_is_left_alone_and_nothing_comes_after() -> None:
    for _ in range(20):
        with held(Limits(seconds=0.05, grace=0.0), ends_process=True):
            pass
    time.sleep(0.2)


def test_time_that_is_up_at_the_last_moment_does_not_come_later() -> None:
    for _ in range(30):
        try:
            with held(Limits(seconds=0.002), ends_process=False):
                time.sleep(0.002)
        except TooLongError:
            pass
    sum(range(100_000))  # an exception still on its way would arrive here


@linux
def test_memory_is_held_to_what_is_allowed_beyond_what_there_was() -> None:
    import resource

    before = resource.getrlimit(resource.RLIMIT_DATA)
    with held(Limits(size=400_000_000), ends_process=False):
        assert np.ones(100_000_000, np.uint8).sum() == 100_000_000
        with pytest.raises(MemoryError, match="Unable to allocate"):
            np.ones(900_000_000, np.uint8)
    assert resource.getrlimit(resource.RLIMIT_DATA) == before
    assert np.ones(900_000_000, np.uint8).size == 900_000_000


def test_the_usual_limits_share_out_the_memory(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(limits, "available_bytes", lambda: 10 * 10**9)
    assert usual_limits(3) == Limits(seconds=1800.0, size=3 * 10**9)
    assert usual_limits(3, minutes=2, gigabytes=0.5) == Limits(seconds=120.0, size=5 * 10**8)
    with held(usual_limits(1, minutes=1e300, gigabytes=1e300), ends_process=True):  # as good as none
        pass
    monkeypatch.setattr(limits, "available_bytes", lambda: None)
    assert usual_limits(1).size is None


@linux
@pytest.mark.parametrize(("entry", "folder"), [("0::/job/step", ""), ("3:memory:/job/step", "memory")])
def test_a_batch_schedulers_limit_counts(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, entry: str, folder: str
) -> None:
    file = "memory.limit_in_bytes" if folder else "memory.max"
    (tmp_path / folder / "job" / "step").mkdir(parents=True)
    (tmp_path / folder / "job" / "step" / file).write_text("max\n")
    (tmp_path / folder / "job" / file).write_text("5000000\n")
    true_read = Path.read_text

    def read_text(path: Path) -> str:
        return entry if str(path) == "/proc/self/cgroup" else true_read(path)

    monkeypatch.setattr(limits, "_GROUPS", tmp_path)
    monkeypatch.setattr(Path, "read_text", read_text)
    assert limits.available_bytes() == 5_000_000


def test_after_limits_a_profiler_goes_on_as_before():
    """Once CPython waited for an exception that had been called back, and a profiled loop never ended."""
    script = (
        "import sys\n"
        "from morphotone.night.limits import Limits, held\n"
        "with held(Limits(seconds=60), ends_process=False):\n"
        "    pass\n"
        "sys.setprofile(lambda *_: None)\n"
        "sum(abs(number) for number in range(1000))\n"
    )
    subprocess.run([sys.executable, "-c", script], check=True, timeout=60)
