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
    """Read all of a run, none of which may differ between runs of one seed."""

    def read(folder: Path) -> dict[str, bytes]:
        return {
            str(path.relative_to(folder)): path.read_bytes()
            for path in sorted(folder.rglob("*"))
            if path.is_file() and path.name != ".lock"
        }

    return read
