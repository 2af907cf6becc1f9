"""The commands a user types, and what the terminal shows."""

from __future__ import annotations

import os
import sys
import threading
from collections.abc import Sequence

INTERRUPTED = 130
"""Exit status after Ctrl-C, as shells give it."""
PATIENCE = 1.0
"""Seconds that a thread may take to finish after Ctrl-C."""


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
        _leave_threads(status)
    return status


def _leave_threads(status: int) -> None:
    """End the process if threads compute on: Python would wait for what cannot be stopped."""
    others = [t for t in threading.enumerate() if t is not threading.current_thread()]
    for thread in others:
        if not thread.daemon:
            thread.join(PATIENCE)
            if thread.is_alive():
                sys.stdout.flush()
                sys.stderr.flush()
                os._exit(status)
