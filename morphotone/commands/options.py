"""Options that several commands have, and what they come to."""

import argparse
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.commands.assumptions import load_assumptions, print_warnings
from morphotone.questions.time_axis import TimeRequest


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


def time_of(args: argparse.Namespace) -> TimeRequest:
    """Return what of the time axis the options ask for."""
    return TimeRequest(args.delays, getattr(args, "time_constants", 0), current_of(args.transient))


def current_of(transient_ms: Sequence[float] | None) -> SynapticCurrent | None:
    """Return the synaptic current with this rise and decay, ms, if they are given."""
    return None if transient_ms is None else SynapticCurrent(*transient_ms)
