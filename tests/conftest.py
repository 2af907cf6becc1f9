from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
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
            str(path.relative_to(folder)): _arrays(path)
            if path.suffix == ".nc"
            else path.read_bytes()
            for path in sorted(folder.rglob("*"))
            if path.is_file() and path.name != ".lock"
        }

    return read


def _arrays(path: Path) -> bytes:
    """Return the arrays of a NetCDF file; older HDF5 also writes down when it was made."""
    parts: list[bytes] = []

    def add(name: str, item: h5py.Group | h5py.Dataset) -> None:
        parts.append(name.encode())
        if isinstance(item, h5py.Dataset):
            parts.append(np.asarray(item).tobytes())

    with h5py.File(path) as file:
        file.visititems(add)
    return b"|".join(parts)
