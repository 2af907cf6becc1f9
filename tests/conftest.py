from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest


@pytest.fixture(scope="session")
def tiny_case() -> Path:
    """A case of two variants, eight points and no solves to speak of."""
    return Path(__file__).parent / "reference" / "cases" / "conjugate_decay_inflow"


@pytest.fixture(scope="session")
def finished_files() -> Callable[[Path], dict[str, bytes]]:
    """Read all of a run that must not differ between runs of one seed.

    Figures and NetCDF files bear the moment they were written.
    """

    def read(folder: Path) -> dict[str, bytes]:
        return {
            str(path.relative_to(folder)): path.read_bytes()
            for path in sorted(folder.rglob("*"))
            if path.is_file()
            and path.name not in (".lock", "report.html")
            and path.parent.name not in ("figures", "fits")
        }

    return read
