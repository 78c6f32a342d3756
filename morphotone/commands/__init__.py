"""The command line: one small file per command; the parser, and exit codes.

Each command's module has NAME, HELP, ``add_arguments(parser)`` and ``run(args) -> int``, and is imported
when its command is the one called.
"""

import argparse
import sys
import traceback
from collections.abc import Sequence
from importlib import import_module

from morphotone.errors import MorphotoneError, ReadingError, TurnedAwayError

COMMANDS = {
    "vet": "which reconstructions can be trusted for cable work, and what is wrong with the others",
    "survey": "the night's run: every cell of a folder, to CSV tables",
    "map": "one cell or a folder to look at: figure of its attenuation, coloured mesh, table",
    "rank": "which synapses are electrotonically far or weak, in what order",
    "tabulate": "tables of groups for a paper, with tests, and its methods in words",
    "assumptions": "print a commented assumptions file with the defaults, or check one",
}

_EPILOG = """\
example:
  morphotone survey sample_morphologies --into results

Each command's own --help has units and examples. Results hold under the passive model and the stated
assumptions; they are for research, not for clinical or device decisions.
"""

_RESUMED = ("survey", "map")  # commands with a ledger

ALL_WELL, TURNED_AWAY, WRONG_USAGE, INTERRUPTED = 0, 1, 2, 130


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code: 0 well, 1 turned away, 2 wrong use, 130 interrupted.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments without the program's name; those of the process unless given.
    """
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(encoding="utf-8", errors="replace")  # µ and λ on any terminal or pipe
    arguments = list(sys.argv[1:] if argv is None else argv)
    parser, chosen = _parser(arguments)
    args = parser.parse_args(arguments)
    if args.version:
        print(f"morphotone {import_module('importlib.metadata').version('morphotone')}")
        return ALL_WELL
    if chosen is None:
        parser.print_help()
        return WRONG_USAGE
    try:
        return int(import_module(f"morphotone.commands.{chosen}").run(args))
    except KeyboardInterrupt:
        goes_on = "; the same command goes on from here" if chosen in _RESUMED else ""
        print(f"interrupted{goes_on}", file=sys.stderr)
        return INTERRUPTED
    except MorphotoneError as error:
        if args.debug:
            traceback.print_exc()
        print(f"morphotone {chosen}: {error}", file=sys.stderr)
        return TURNED_AWAY if isinstance(error, ReadingError | TurnedAwayError) else WRONG_USAGE


def _parser(arguments: Sequence[str]) -> tuple[argparse.ArgumentParser, str | None]:
    """Return the parser, and the command called if there is one; only that one's options are known to it."""
    parser = argparse.ArgumentParser(
        prog="morphotone",
        description="Electrotonic structure of whole folders of reconstructed neurons (SWC).",
        epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="store_true", help="print the version and exit")
    parser.set_defaults(debug=False)
    subparsers = parser.add_subparsers(metavar="COMMAND")
    chosen = next((word for word in arguments if word in COMMANDS), None)
    for name, text in COMMANDS.items():
        subparser = subparsers.add_parser(name, help=text, description=f"{text[0].upper()}{text[1:]}.")
        if name == chosen:
            import_module(f"morphotone.commands.{name}").add_arguments(subparser)
            subparser.add_argument("--debug", action="store_true", help="show the traceback of an error")
    return parser, chosen
