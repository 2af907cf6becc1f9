"""``ruleout doctor``: whether this machine has what judging needs."""

from __future__ import annotations

import importlib
import os
import platform
import tempfile
from collections.abc import Callable, Iterator
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Final

import typer

PACKAGES: Final = (
    "numpy",
    "scipy",
    "networkx",
    "pandas",
    "emcee",
    "arviz",
    "numba",
    "llvmlite",
    "h5py",
    "h5netcdf",
    "matplotlib",
    "jinja2",
    "rich",
    "typer",
)


def _packages() -> Iterator[str]:
    for name in PACKAGES:
        try:
            importlib.import_module(name)
            found = version(name)
        except (ImportError, PackageNotFoundError) as error:
            raise RuntimeError(
                f"{name} cannot be imported ({error}); install ruleout again"
            ) from error
        yield f"{name} {found}"


def _kernel() -> Iterator[str]:
    """Integrate a decay with the kernel and compare with the exponential."""
    import numpy as np

    from ruleout.expressions import sym
    from ruleout.kernel import Protocol, System, compile_system

    program = compile_system(System(("x",), ("k",), (-(sym("k") * sym("x")),)))
    one, times = np.ones((1, 1)), np.linspace(0.5, 2.0, 4)
    protocol = Protocol(np.zeros(1), one, 0 * one, one, 0 * one, times)
    solved = program.solve(one, one, [protocol]).states[0, :, 0]
    # A hundred times the solver's relative tolerance.
    if not np.allclose(solved, np.exp(-times), rtol=1e-4):
        raise RuntimeError("a decay does not decay as it should; please report this machine")
    yield "the integrator compiles and solves"


def _folders() -> Iterator[str]:
    for what, folder in (("current", Path.cwd()), ("temporary", Path(tempfile.gettempdir()))):
        if not os.access(folder, os.W_OK):
            raise RuntimeError(
                f"the {what} folder {folder} cannot be written; change to another one"
            )
        yield f"{what} folder {folder} can be written"


def _machine() -> Iterator[str]:
    yield f"Python {platform.python_version()} on {platform.system()} {platform.machine()}"
    yield f"{os.cpu_count()} cores"


CHECKS: Final[dict[str, Callable[[], Iterator[str]]]] = {
    "machine": _machine,
    "packages": _packages,
    "kernel": _kernel,
    "folders": _folders,
}


def run_doctor() -> int:
    """Print what is found, and what is wrong with its remedy; return 0 if nothing is."""
    wrong = 0
    for name, check in CHECKS.items():
        try:
            for line in check():
                typer.echo(f"ok     {line}")
        except Exception as error:
            wrong += 1
            typer.echo(f"wrong  {name}: {error}")
    typer.echo(
        "Everything needed is here." if not wrong else f"{wrong} of {len(CHECKS)} are wrong."
    )
    return int(wrong > 0)
