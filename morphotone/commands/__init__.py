"""The command line: one small file per command; the parser, and exit codes.

Each command's module has NAME, HELP, ``add_arguments(parser)`` and ``run(args) -> int``, and is imported
when its command is the one called.
"""

import argparse
import signal
import sys
import threading
import time
import traceback
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from importlib import import_module
from types import FrameType

from morphotone.errors import MorphotoneError, TurnedAwayError

COMMANDS = {
    "vet": "which reconstructions can be trusted for cable work, and what is wrong with the others",
    "survey": "the night's run: every cell of a folder, to CSV tables",
    "map": "one cell or a folder to look at: figure of its attenuation, coloured mesh, table",
    "rank": "which synapses are electrotonically far or weak, in what order",
    "tabulate": "tables of groups for a paper, with tests, and its methods in words",
    "report": "what happened overnight, as one HTML page",
    "assumptions": "print a commented assumptions file with the defaults, or check one",
}

_EPILOG = """\
example:
  morphotone survey sample_morphologies --into results

Each command's own --help has units and examples. Results hold under the passive model and the stated
assumptions; they are for research, not for clinical or device decisions.
"""

_RESUMED = ("survey", "map")  # commands with a ledger

_ENDING = ("SIGINT", "SIGTERM", "SIGHUP")  # Ctrl-C, the system or a scheduler, a terminal that closes
_PATIENCE_SECONDS = 5.0

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
    chosen = next((word for word in arguments if word in COMMANDS), None)
    with _interruptions():
        try:
            return _called(chosen, arguments)
        except KeyboardInterrupt:
            goes_on = "; the same command goes on from here" if chosen in _RESUMED else ""
            print(f"interrupted{goes_on}", file=sys.stderr)
            return INTERRUPTED


def _called(chosen: str | None, arguments: Sequence[str]) -> int:
    """Run the command chosen, if there is one; its errors end as a sentence."""
    parser = _parser(chosen)
    args = parser.parse_args(arguments)
    if args.version:
        print(f"morphotone {import_module('importlib.metadata').version('morphotone')}")
        return ALL_WELL
    if chosen is None:
        parser.print_help()
        return WRONG_USAGE
    try:
        return int(import_module(f"morphotone.commands.{chosen}").run(args))
    except MorphotoneError as error:
        if args.debug:
            traceback.print_exc()
        print(f"morphotone {chosen}: {error}", file=sys.stderr)
        return TURNED_AWAY if isinstance(error, TurnedAwayError) else WRONG_USAGE


@contextmanager
def _interruptions() -> Iterator[None]:
    """Have the signals that ask a process to end raise KeyboardInterrupt, with the signal's name.

    For some seconds after one, others are taken for the same: what is finished is being entered then. A
    signal that whoever started the process had it ignore (nohup, a job in the background) stays ignored.
    """
    last = -_PATIENCE_SECONDS

    def interrupt(number: int, _: FrameType | None) -> None:
        nonlocal last
        if time.monotonic() - last >= _PATIENCE_SECONDS:
            last = time.monotonic()
            raise KeyboardInterrupt(signal.Signals(number).name)

    ours = {signal.SIG_DFL, signal.default_int_handler}
    numbers = [getattr(signal, name) for name in _ENDING if hasattr(signal, name)]
    in_main = threading.current_thread() is threading.main_thread()  # no other may set a handler
    before = {n: handler for n in numbers if in_main and (handler := signal.getsignal(n)) in ours}
    for number in before:
        signal.signal(number, interrupt)
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def _parser(chosen: str | None) -> argparse.ArgumentParser:
    """Return the parser; only the options of the command chosen are known to it."""
    parser = argparse.ArgumentParser(
        prog="morphotone",
        description="Electrotonic structure of whole folders of reconstructed neurons (SWC).",
        epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action="store_true", help="print the version and exit")
    parser.set_defaults(debug=False)
    subparsers = parser.add_subparsers(metavar="COMMAND")
    for name, text in COMMANDS.items():
        subparser = subparsers.add_parser(name, help=text, description=f"{text[0].upper()}{text[1:]}.")
        if name == chosen:
            import_module(f"morphotone.commands.{name}").add_arguments(subparser)
            subparser.add_argument("--debug", action="store_true", help="show the traceback of an error")
    return parser
