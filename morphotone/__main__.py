"""`python -m morphotone`, and the console script."""

import signal
import sys

from morphotone.commands import INTERRUPTED, main


def run() -> None:
    """Run the command line and leave with its exit code."""
    code = main()
    if code == INTERRUPTED:  # a second Ctrl-C has nothing to break off any more but the leave-taking
        signal.signal(signal.SIGINT, signal.SIG_IGN)
    sys.exit(code)


if __name__ == "__main__":
    run()
