"""What a process keeps of the memory it has freed, counted by the faults that taking it again costs."""

import platform
import subprocess
import sys

import pytest

_FAULTS = """
import resource, sys
from morphotone.night.heap import keep_freed_memory

def work():
    arrays = [b"x" * 2_000_000 for _ in range(8)]

if sys.argv[1] == "kept":
    keep_freed_memory()
work()
before = resource.getrusage(resource.RUSAGE_SELF).ru_minflt
for _ in range(10):
    work()
print(resource.getrusage(resource.RUSAGE_SELF).ru_minflt - before)
"""


@pytest.mark.skipif(platform.libc_ver()[0] != "glibc", reason="the allocator is not glibc's")
def test_work_that_repeats_takes_its_memory_from_the_system_once() -> None:
    kept, usual = (
        int(subprocess.run([sys.executable, "-c", _FAULTS, how], check=True, capture_output=True).stdout)
        for how in ("kept", "usual")
    )
    assert kept < 100 < usual
