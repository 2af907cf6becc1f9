"""One place where exceptions become plain lines and exit statuses."""

from __future__ import annotations

import sys
import traceback
from collections.abc import Iterator
from contextlib import contextmanager

import typer

from ruleout.cli import INTERRUPTED
from ruleout.errors import RuleoutError, lacks_room


@contextmanager
def guarded(kept: str = "Nothing was changed.") -> Iterator[None]:
    """Turn errors into messages on stderr and an exit status.

    Parameters
    ----------
    kept : str
        What an interrupted user still has, and how to go on.
    """
    try:
        yield
    except RuleoutError as error:
        typer.echo(f"ruleout: {error}", err=True)
        raise typer.Exit(error.exit_status) from error
    except KeyboardInterrupt as error:
        typer.echo(f"\nruleout: stopped. {kept}", err=True)
        raise typer.Exit(INTERRUPTED) from error
    except (typer.Exit, SystemExit, BrokenPipeError):
        # A reader such as `head` that has seen enough is left to click, which ends quietly.
        raise
    except Exception as error:
        if lacks_room(error):
            typer.echo(f"ruleout: no room left to write. {kept}", err=True)
            raise typer.Exit(1) from error
        traceback.print_exc(file=sys.stderr)
        typer.echo(
            "ruleout: this is a fault of the program, not of your files. Please report it with "
            "the lines above.",
            err=True,
        )
        raise typer.Exit(1) from error
