"""The command line."""

from __future__ import annotations

import os
import sys

__all__ = ["main"]


def main() -> None:
    """Run the command line and exit with its code: 0 done, 2 wrong use, 3 survey problems, 4 not written.

    Whatever goes wrong that nobody foresaw is told in one line, with exit code 1; with ``GRADELINE_TRACEBACK`` set
    in the environment, its traceback is shown.
    """
    from gradeline.cli.app import app  # noqa: PLC0415 (loaded when asked for: start-up time)

    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):  # a terminal that cannot show ± or ε shows a question mark instead
            stream.reconfigure(errors="replace")
    try:
        app(prog_name="gradeline")
    except Exception as error:
        if os.environ.get("GRADELINE_TRACEBACK"):
            raise
        from gradeline.cli.outcome import unknown_error  # noqa: PLC0415 (loaded when asked for: start-up time)

        print(unknown_error(error), file=sys.stderr)
        sys.exit(1)
