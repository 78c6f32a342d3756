"""`morphotone assumptions`: print a commented assumptions file, or say whether one can be used."""

import argparse
import sys
from pathlib import Path

from morphotone.cable.assumptions import Assumptions, differences
from morphotone.errors import AssumptionError

NAME = "assumptions"
HELP = "print a commented assumptions file with the defaults, or check one"
EPILOG = """\
units: R_m in ohm cm2, R_i in ohm cm, C_m in uF/cm2, lengths in um, conductances in nS, frequencies in Hz

example:
  morphotone assumptions > night.toml      write the defaults, then change what you know better
  morphotone assumptions --check night.toml

exit code: 0 the file can be used (warnings go to standard error), 2 it cannot
"""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Add the command's arguments to its parser."""
    parser.formatter_class = argparse.RawDescriptionHelpFormatter
    parser.epilog = EPILOG
    parser.add_argument(
        "--check",
        metavar="FILE.toml",
        type=Path,
        help="instead of printing the defaults, check this file, list what it changes, and warn of values "
        "outside published ranges",
    )


def run(args: argparse.Namespace) -> int:
    """Print the defaults, or check a file; return the exit code."""
    if args.check is not None:
        return _check(args.check)
    print(Assumptions().to_toml(), end="")
    return 0


def _check(path: Path) -> int:
    try:
        assumptions = load_assumptions(path)
    except AssumptionError as error:
        print(error, file=sys.stderr)
        return 2
    print_warnings(assumptions)
    changes = differences(Assumptions(), assumptions)
    verdict = "differs from the defaults:" if changes else "equals the defaults."
    print(f"{path} can be used; it {verdict}")
    for change in changes:
        print(f"  {change}")
    return 0


def load_assumptions(path: Path) -> Assumptions:
    """Return the assumptions in a file.

    Parameters
    ----------
    path : Path
        A TOML file in UTF-8.

    Raises
    ------
    AssumptionError
        When the file cannot be read, is no UTF-8 text, or holds what cannot be used; the sentence names it.
    """
    try:
        return Assumptions.from_toml(path.read_bytes().decode("utf-8-sig"))
    except OSError as error:
        raise AssumptionError(
            f"{path} cannot be read ({error.strerror}): expected an assumptions file, which "
            f'"morphotone {NAME} > FILE.toml" writes.'
        ) from error
    except UnicodeDecodeError as error:
        raise AssumptionError(
            f"{path} is no UTF-8 text (byte {error.object[error.start]:#04x} at offset {error.start}): "
            "expected TOML in UTF-8, so save it in that encoding."
        ) from error
    except AssumptionError as error:
        raise AssumptionError(f"{path}: {error}") from error


def print_warnings(assumptions: Assumptions) -> None:
    """Print each warning on a line of standard error."""
    for sentence in assumptions.warnings:
        print(f"warning: {sentence}", file=sys.stderr)
