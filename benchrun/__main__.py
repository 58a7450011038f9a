"""The command `benchrun`, and `python -m benchrun`."""

from __future__ import annotations

import sys

from benchrun.cli.ending import run_to_end


def main() -> None:
    """Run the command line and leave with one of the documented exit codes."""
    sys.exit(run_to_end(sys.argv[1:]))


if __name__ == "__main__":
    main()
