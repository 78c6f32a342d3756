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
    say(f"Surveying: python -m morphotone survey {SAMPLES.name} --into {RESULTS.relative_to(CHECKOUT)}\n")
    code = survey(python)
    files = sum(1 for _ in SAMPLES.rglob("*.swc"))
    cells, turned_away = rows_of("cells.csv"), rows_of("turned_away.csv")
    if code != SOME_TURNED_AWAY or not cells or len(cells) + len(turned_away) != files:
        say(
            f"\nThis is a fault: the survey ended with exit code {code} ({SOME_TURNED_AWAY} was expected), "
            f"and of {files} files {len(cells)} were analysed and {len(turned_away)} turned away."
        )
        return 1
    explain(cells, len(turned_away))
    return 0


def survey(python: Path) -> int:
    """Run the survey of the samples and return its exit code."""
    command = [str(python), "-m", "morphotone", "survey", SAMPLES.name, "--into", str(RESULTS)]
    return subprocess.run(command, cwd=CHECKOUT, check=False).returncode


def rows_of(table: str) -> list[dict[str, str]]:
    """Return the rows of a table of the results, none if it was not written."""
    path = RESULTS / table
    if not path.exists():
        return []
    with path.open(newline="", encoding="utf-8") as lines:
        return list(csv.DictReader(lines))


def shown(field: str) -> str:
    """Return a field of a table with four digits at most if it is a number with a decimal point."""
    try:
        return f"{float(field):.4g}" if "." in field else field
    except ValueError:
        return field


def explain(cells: list[dict[str, str]], turned_away: int) -> None:
    """Say what the exit code means, show some rows, name the files."""
    say(
        f"\nThe survey's exit code was {SOME_TURNED_AWAY}, as it should be here: {turned_away} of the files "
        f"in {SAMPLES.name}/troubles were turned away, on purpose. turned_away.csv says why.\n"
    )
    say(f"cells.csv has {len(cells)} cells; four of its columns, the first {SHOWN_ROWS}:")
    for line in [SHOWN, *([shown(cell[column]) for column in SHOWN] for cell in cells[:SHOWN_ROWS])]:
        say("  " + "".join(field[:22].ljust(24) for field in line).rstrip())
    say("\nWhere to look:")
    for path in sorted(RESULTS.iterdir()):
        say(f"  {path}")


if __name__ == "__main__":
    raise SystemExit(main())
