"""Try Morphotone on its invented sample study, in a virtual environment of its own.

    python3 scripts/try_it.py

Everything it makes is in the folder .try_it of the checkout, which git ignores; delete it when done.
"""

from __future__ import annotations

import csv
import shutil
import subprocess
from pathlib import Path

from environment import CHECKOUT, prepare, say

HOME = CHECKOUT / ".try_it"
SAMPLES = CHECKOUT / "sample_morphologies"
RESULTS = HOME / "results"
SHOWN = ("cell", "grade", "samples", "R_in_MOhm")
SHOWN_ROWS = 5
SOME_TURNED_AWAY = 1  # the survey's exit code when a file was turned away


def main() -> int:
    """Install, survey the samples, show where the results are; 0 when all went as it should."""
    python = prepare(HOME / "venv", ".")
    shutil.rmtree(RESULTS, ignore_errors=True)
    command = [str(python), "-m", "morphotone", "survey", SAMPLES.name, "--into", str(RESULTS)]
    say(f"Surveying: python -m morphotone survey {SAMPLES.name} --into {RESULTS.relative_to(CHECKOUT)}\n")
    code = subprocess.run(command, cwd=CHECKOUT, check=False).returncode
    if code != SOME_TURNED_AWAY:
        say(f"\nThe survey ended with exit code {code}; {SOME_TURNED_AWAY} was expected. This is a fault.")
        return 1
    explain()
    return 0


def explain() -> None:
    """Say what the exit code means, show some rows, name the files."""
    refused = len(rows_of(RESULTS / "turned_away.csv"))
    say(
        f"\nThe survey's exit code was 1, as it should be here: {refused} files of "
        f"{SAMPLES.name}/troubles were turned away, on purpose. turned_away.csv says why.\n"
    )
    cells = rows_of(RESULTS / "cells.csv")
    say(f"cells.csv has {len(cells)} cells; four of its columns, the first {SHOWN_ROWS}:")
    for line in [SHOWN, *([cell[column] for column in SHOWN] for cell in cells[:SHOWN_ROWS])]:
        say("  " + "".join(field[:22].ljust(24) for field in line).rstrip())
    say("\nWhere to look:")
    for path in sorted(RESULTS.iterdir()):
        say(f"  {path}")


def rows_of(path: Path) -> list[dict[str, str]]:
    """Return the rows of a CSV file."""
    with path.open(newline="", encoding="utf-8") as lines:
        return list(csv.DictReader(lines))


if __name__ == "__main__":
    raise SystemExit(main())
