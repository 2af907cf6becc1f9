"""``ruleout doctor``: whether this machine has what judging needs."""

from __future__ import annotations

import importlib
import os
import platform
import tempfile
import time
import warnings
from collections.abc import Callable, Iterator
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import TYPE_CHECKING, Final

import typer

from ruleout import __version__

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from ruleout.kernel import Program, Protocol

BENCHMARK_SECONDS: Final = 2.0
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


def _decay() -> tuple[Program, Protocol, NDArray[np.float64]]:
    """Return a decay, compiled, what to do with it, and when to look."""
    import numpy as np

    from ruleout.expressions import sym
    from ruleout.kernel import Protocol, System, compile_system

    program = compile_system(System(("x",), ("k",), (-(sym("k") * sym("x")),)))
    one, times = np.ones((1, 1)), np.linspace(0.5, 2.0, 4)
    return program, Protocol(np.zeros(1), one, 0 * one, one, 0 * one, times), times


def _kernel() -> Iterator[str]:
    """Integrate a decay with the kernel and compare with the exponential."""
    import numpy as np

    from ruleout.kernel.engine import host_width

    one = np.ones((1, 1))
    with warnings.catch_warnings():
        # Where no machine code can be made, the kernel warns and goes on without, slowly.
        warnings.simplefilter("error", RuntimeWarning)
        program, protocol, times = _decay()
        solved = program.solve(one, one, [protocol]).states[0, :, 0]
    # A hundred times the solver's relative tolerance.
    if not np.allclose(solved, np.exp(-times), rtol=1e-4):
        raise RuntimeError("a decay does not decay as it should; please report this machine")
    yield f"the integrator compiles and solves, {host_width()} numbers at once"


def _speed() -> Iterator[str]:
    """Solve decays over a wide range of rates for two seconds."""
    import numpy as np

    program, protocol, _ = _decay()
    rates = np.geomspace(0.01, 100.0, 4096)[:, None]
    starts = np.ones_like(rates)
    program.solve(starts, rates, [protocol])
    solved, begun = 0, time.perf_counter()
    while (took := time.perf_counter() - begun) < BENCHMARK_SECONDS:
        program.solve(starts, rates, [protocol])
        solved += len(rates)
    yield f"{solved / took:,.0f} small solves a second"


def _cache() -> Iterator[str]:
    """Tell where compiled code is kept; without it every run compiles again."""
    driver = importlib.import_module("ruleout.kernel.driver")
    where = driver.integrate.stats.cache_path
    if where is None:
        raise RuntimeError(
            "compiled code can be kept nowhere, so that every run begins with compiling; set "
            "NUMBA_CACHE_DIR to a folder that can be written"
        )
    folder = Path(where)
    folder.mkdir(parents=True, exist_ok=True)
    if not os.access(folder, os.W_OK):
        raise RuntimeError(
            f"compiled code cannot be kept in {folder}; set NUMBA_CACHE_DIR to a folder that can "
            "be written"
        )
    yield f"compiled code is kept in {folder}"


def _folders() -> Iterator[str]:
    for what, folder in (("current", Path.cwd()), ("temporary", Path(tempfile.gettempdir()))):
        if not os.access(folder, os.W_OK):
            raise RuntimeError(
                f"the {what} folder {folder} cannot be written; change to another one"
            )
        yield f"{what} folder {folder} can be written"


def _machine() -> Iterator[str]:
    yield f"ruleout {__version__}"
    yield f"Python {platform.python_version()} on {platform.system()} {platform.machine()}"
    yield f"{os.cpu_count()} cores"


CHECKS: Final[dict[str, Callable[[], Iterator[str]]]] = {
    "machine": _machine,
    "packages": _packages,
    "kernel": _kernel,
    "cache": _cache,
    "folders": _folders,
    "speed": _speed,
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
