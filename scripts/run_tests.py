"""Run Morphotone's tests in a virtual environment of their own.

    python3 scripts/run_tests.py [--all] [pytest's arguments]

Without --all the tests marked slow are left out. The environment is in the folder .run_tests of the
checkout, which git ignores. The last line is pytest's own and so is the exit code.
"""

from __future__ import annotations

import subprocess
import sys

from environment import CHECKOUT, prepare, say

VENV = CHECKOUT / ".run_tests" / "venv"
QUICK = ("-m", "not slow")


def main(arguments: list[str]) -> int:
    """Install with the test libraries and hand over to pytest."""
    everything = "--all" in arguments
    chosen = [argument for argument in arguments if argument != "--all"]
    # Editable: a test that starts `python -m morphotone` elsewhere runs the code of this checkout.
    python = prepare(VENV, "-e", ".[test]")
    say("Running the tests" if everything else "Running the tests but the slow ones (--all runs them too)")
    command = [str(python), "-m", "pytest", *(() if everything else QUICK), *chosen]
    return subprocess.run(command, cwd=CHECKOUT, check=False).returncode


if __name__ == "__main__":
    if {"-h", "--help"} & set(sys.argv[1:]):
        print(__doc__.strip())
        raise SystemExit(0)
    raise SystemExit(main(sys.argv[1:]))
