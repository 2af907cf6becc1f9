"""The commands a user types, and what the terminal shows."""

from __future__ import annotations

from collections.abc import Sequence


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
        return stop.code if isinstance(stop.code, int) else int(stop.code is not None)
    return 0
