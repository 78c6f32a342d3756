"""`python -m morphotone`, and the console script."""

import signal
import sys

from morphotone.commands import main


def run() -> None:
    """Run the command line and leave with its exit code."""
    code = main()
    for number in (signal.SIGINT, signal.SIGTERM):  # nothing is left to break off but the leave-taking
        signal.signal(number, signal.SIG_IGN)
    sys.exit(code)


if __name__ == "__main__":
    run()
