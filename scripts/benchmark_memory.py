"""Runs one morphotone command and prints the most memory that its own process, no worker, ever had, in MB.

python scripts/benchmark_memory.py survey FOLDER --into RESULTS
"""

from __future__ import annotations

import sys
from pathlib import Path

from morphotone.commands import main

_STATUS = Path("/proc/self/status")


def peak_mb() -> float:
    """Return the most memory that this process ever had in RAM, MB."""
    if _STATUS.exists():
        # Linux takes ru_maxrss over from the process that started this one, however much that had.
        fields = dict(line.split(":", 1) for line in _STATUS.read_text().splitlines())
        return int(fields["VmHWM"].split()[0]) * 1024 / 1e6
    import resource  # not on Windows, where nobody has asked yet

    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6  # macOS counts bytes


if __name__ == "__main__":
    code = main(sys.argv[1:])
    print(f"{peak_mb():.1f}")
    sys.exit(code)
