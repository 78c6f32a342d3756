"""`python -m morphotone`, and the console script."""

import sys

from morphotone.commands import main


def run() -> None:
    """Run the command line and leave with its exit code."""
    sys.exit(main())


if __name__ == "__main__":
    run()
