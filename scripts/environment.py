"""A virtual environment with this checkout installed: what `try_it.py` and `run_tests.py` share.

Standard library only. Kept readable for old Pythons, so that they can say that they are too old.
"""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

CHECKOUT = Path(__file__).resolve().parent.parent
OLDEST = (3, 11)


def prepare(folder: Path, *install: str) -> Path:
    """Make a virtual environment, or keep a working one, and install into it.

    Parameters
    ----------
    folder : Path
        Where the environment is.
    *install : str
        What pip is told to install, relative to the checkout: ``"."``, ``"-e"``, ``".[test]"``.

    Returns
    -------
    Path
        The environment's Python.

    Raises
    ------
    SystemExit
        With a sentence for the user, when Python is too old or a step fails.
    """
    if sys.version_info < OLDEST:
        raise SystemExit(
            "This is Python {}.{}; Morphotone needs {}.{} or later. Run this script with a newer one, "
            "such as: python3.12 {}".format(*sys.version_info[:2], *OLDEST, sys.argv[0])
        )
    python = python_of(folder)
    if not usable(python):
        say(f"Making a virtual environment in {folder}")
        run_step(
            [sys.executable, "-m", "venv", "--clear", str(folder)], "make a virtual environment", VENV_HELP
        )
    say(f"Installing Morphotone and what it needs into {folder}")
    pip = [str(python), "-m", "pip", "install", "--quiet", "--disable-pip-version-check"]
    run_step([*pip, *install], "install Morphotone", PIP_HELP)
    return python


VENV_HELP = "Is the venv module there? On Debian and Ubuntu it is the package python3-venv."
PIP_HELP = (
    "Its reason stands above. The usual ones: no network, or a proxy or mirror that pip has to be told of "
    "(python3 -m pip config list shows what it knows)."
)


def python_of(folder: Path) -> Path:
    """Return where an environment keeps its Python."""
    return folder / ("Scripts/python.exe" if os.name == "nt" else "bin/python")


def usable(python: Path) -> bool:
    """Say whether an environment has pip and the Python that runs this script."""
    if not python.exists():
        return False
    answer = subprocess.run(
        [str(python), "-c", "import pip, sys; print(sys.version_info[:3])"],
        capture_output=True,
        text=True,
        check=False,
    )
    return answer.stdout.strip() == str(sys.version_info[:3])


def run_step(command: list[str], aim: str, advice: str) -> None:
    """Run a command in the checkout, or end the script with a sentence."""
    code = subprocess.run(command, cwd=CHECKOUT, check=False).returncode
    if code:
        raise SystemExit(f"Could not {aim}: {' '.join(command)} ended with exit code {code}. {advice}")


def say(sentence: str) -> None:
    """Print at once, so that the order holds beside a subprocess's own output."""
    print(sentence, flush=True)
