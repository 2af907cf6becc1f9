"""``ruleout new``."""

from __future__ import annotations

from importlib.resources import files
from pathlib import Path
from typing import Final

import typer

from ruleout.errors import InputError

FILES: Final = ("mechanism.toml", "experiments.toml", "data.csv")


def write_new_case(folder: Path) -> None:
    """Write a small commented case, which judges as it stands, into a new or empty ``folder``.

    Raises
    ------
    InputError
        If the folder cannot be made or already holds something.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
        occupied = any(folder.iterdir())
    except OSError as error:
        raise InputError(
            f"this folder cannot be made ({error.strerror}); give another one", where=str(folder)
        ) from error
    if occupied:
        raise InputError(
            "this folder already holds something; give a new or an empty one", where=str(folder)
        )
    source = files("ruleout.cli") / "starter"
    try:
        for name in FILES:
            (folder / name).write_bytes((source / name).read_bytes())
    except OSError as error:
        raise InputError(
            f"this folder cannot be written ({error.strerror}); give another one",
            where=str(folder),
        ) from error
    typer.echo(f"{folder}: {', '.join(FILES)} written. Invented data, so that you can try at once:")
    typer.echo(f"  ruleout inspect {folder}")
    typer.echo(f"  ruleout judge {folder} --effort quick")
