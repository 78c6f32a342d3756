"""Options that several commands have, and what they come to."""

import argparse
from collections.abc import Callable, Sequence
from dataclasses import replace
from math import inf, nan
from pathlib import Path

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.commands.assumptions import load_assumptions, print_warnings
from morphotone.night.folder import PATTERNS
from morphotone.questions.placing import FARTHEST_UM
from morphotone.questions.time_axis import TimeRequest


def positive(text: str) -> float:
    """Return an option's number, which is above 0."""
    return _number(text, lambda value: 0.0 < value < inf, "a number greater than 0")


def not_negative(text: str) -> float:
    """Return an option's number, which is 0 or more."""
    return _number(text, lambda value: 0.0 <= value < inf, "0 or a greater number")


def whole(text: str) -> int:
    """Return an option's number, which is whole and 0 or more."""
    return int(_number(text, lambda value: value >= 0 and value.is_integer(), "0 or a greater whole number"))


def _number(text: str, allowed: Callable[[float], bool], expected: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = nan
    if not allowed(value):
        raise argparse.ArgumentTypeError(f"read {text!r}, expected {expected}")
    return value


def add_assumption_options(parser: argparse.ArgumentParser) -> None:
    """Add --assume and --unit-um."""
    parser.add_argument(
        "--assume",
        metavar="FILE.toml",
        type=Path,
        help="assumptions file (`morphotone assumptions` prints one); the defaults unless given",
    )
    parser.add_argument(
        "--unit-um",
        metavar="UM",
        type=float,
        help="length of the files' unit in um, e.g. 0.001 for nanometres; overrides the assumptions file",
    )


def assumptions_of(args: argparse.Namespace) -> Assumptions:
    """Return the assumptions that the options state; warnings go to standard error.

    Raises
    ------
    AssumptionError
        The file cannot be used.
    """
    assumptions = load_assumptions(args.assume) if args.assume else Assumptions()
    changes = {"unit_um": args.unit_um, "hz": getattr(args, "hz", None)}
    given = {field: value for field, value in changes.items() if value is not None}
    if "hz" in given:
        given["hz"] = tuple(given["hz"])
    assumptions = replace(assumptions, **given)
    print_warnings(assumptions)
    return assumptions


def add_time_options(parser: argparse.ArgumentParser) -> None:
    """Add --delays and --transient, which have columns by sample."""
    parser.add_argument(
        "--delays", action="store_true", help="give delays of the voltage's centroid too, in ms"
    )
    parser.add_argument(
        "--transient",
        metavar=("RISE", "DECAY"),
        type=float,
        nargs=2,
        help="give the responses to a brief synaptic current too: its rise and decay times in ms, equal for "
        "an alpha function; in a table by sample from every sample, else from the soma and the farthest tip",
    )


def add_keep_unfit(parser: argparse.ArgumentParser, what: str) -> None:
    """Add --keep-unfit, its help led by what the command does with such files."""
    parser.add_argument("--keep-unfit", action="store_true", help=f"{what} files of grade unfit too, flagged")


def add_pattern(parser: argparse.ArgumentParser) -> None:
    """Add --pattern."""
    parser.add_argument(
        "--pattern",
        metavar="GLOB",
        nargs="+",
        default=list(PATTERNS),
        help=f"names of the files to take from a folder (default: {' '.join(PATTERNS)}; upper and lower case "
        "alike)",
    )


def add_farthest(parser: argparse.ArgumentParser) -> None:
    """Add --farthest-um."""
    parser.add_argument(
        "--farthest-um",
        metavar="UM",
        type=not_negative,
        default=FARTHEST_UM,
        help="turn away sites in space farther than this from the cable, in um (default: %(default)g)",
    )


def time_of(args: argparse.Namespace) -> TimeRequest:
    """Return what of the time axis the options ask for."""
    return TimeRequest(args.delays, getattr(args, "time_constants", 0), current_of(args.transient))


def current_of(transient_ms: Sequence[float] | None) -> SynapticCurrent | None:
    """Return the synaptic current with this rise and decay, ms, if they are given."""
    return None if transient_ms is None else SynapticCurrent(*transient_ms)
