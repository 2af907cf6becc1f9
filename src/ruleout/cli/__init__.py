"""The commands a user types, and what the terminal shows."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence

INTERRUPTED = 130
"""Exit status after Ctrl-C, as shells give it."""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit status.

    Parameters
    ----------
    arguments : sequence of str, optional
        Words after the program's name; those of the process by default.

    Returns
    -------
    int
        0 judged; 1 a fault of the program itself; 2 bad input; 3 judged, but some variant is not
        judged; 130 interrupted.
    """
    from ruleout.cli.app import app

    try:
        app(args=None if arguments is None else list(arguments), prog_name="ruleout")
    except SystemExit as stop:
        status = stop.code if isinstance(stop.code, int) else int(stop.code is not None)
    else:
        status = 0
    if arguments is None and status == INTERRUPTED:
        # A thread that is computing cannot be stopped, and would be waited for.
        sys.stdout.flush()
        sys.stderr.flush()
        os._exit(status)
    return status
