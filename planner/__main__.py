"""``python -m planner`` and the command ``lightlag``."""

from __future__ import annotations

import sys


def main() -> None:
    """Run the command line and leave with its exit code."""
    from planner.cli.app import run

    for stream in (sys.stdout, sys.stderr):
        # A terminal that cannot show a letter shows a question mark instead of failing.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    sys.exit(run(sys.argv[1:]))


if __name__ == "__main__":
    main()
