"""The run folder: finished pieces, safely written, found again, redone when out of date.

Every piece is a ``.npz`` archive under ``stages/`` that carries the digest of all it depends on and
a seal over its content. It is written aside, flushed and renamed, so that a killed run leaves whole
pieces or none; a broken seal reveals a truncated or altered one. A piece whose digest no longer
matches is redone.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
import os
import tempfile
from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Mapping
from contextvars import ContextVar
from functools import cache
from importlib.metadata import version
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from ruleout import __version__
from ruleout.case import Case, read_case
from ruleout.errors import InputError, RuleoutError, lacks_room
from ruleout.progress import Progress
from ruleout.verdicts.types import COLUMNS, Judgement

Arrays = Mapping[str, np.ndarray[Any, Any]]
TABLES = tuple(COLUMNS)
ASIDE = ".aside-"
"""How the names of files begin that are not finished yet."""


def digest(*parts: object) -> str:
    """Return a SHA-256 over the representations of ``parts``."""
    whole = hashlib.sha256()
    for part in parts:
        whole.update(repr(part).encode())
        whole.update(b"\x1e")
    return whole.hexdigest()


@cache
def software() -> tuple[str, ...]:
    """Return the versions that the numbers depend on: ours and those of the libraries."""
    libraries = ("numpy", "scipy", "emcee", "numba", "llvmlite", "arviz", "networkx")
    return (f"ruleout {__version__}", *(f"{name} {version(name)}" for name in libraries))


def write_aside(path: Path, write: Callable[[Path], None]) -> None:
    """Call ``write`` on a temporary file beside ``path``, flush it and rename it there.

    Raises
    ------
    RuleoutError
        If there is no room left; what stood at ``path`` stays.
    """
    aside: Path | None = None
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, name = tempfile.mkstemp(
            dir=path.parent, prefix=f"{ASIDE}{path.stem}-", suffix=path.suffix
        )
        os.close(handle)
        aside = Path(name)
        write(aside)
        with open(aside, "rb") as file:
            os.fsync(file.fileno())
        aside.chmod(0o644)
        aside.replace(path)
    except Exception as error:
        if lacks_room(error):
            raise RuleoutError(
                f"no room left to write {path.name} in {path.parent}; what was there stays valid. "
                "Free some space and run the same command again to go on"
            ) from error
        raise
    finally:
        if aside is not None:
            aside.unlink(missing_ok=True)


class Store:
    """The pieces of one run.

    Parameters
    ----------
    folder : Path
        The run folder; made if missing.
    """

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.stages = folder / "stages"
        self.outdated: list[str] = []
        self.damaged: list[str] = []

    def path(self, key: str) -> Path:
        """Return where the piece called ``key`` lies."""
        return self.stages / f"{key}.npz"

    def get(self, key: str, fingerprint: str) -> dict[str, np.ndarray[Any, Any]] | None:
        """Return the piece, or None if it is missing, out of date or damaged."""
        try:
            with open(self.path(key), "rb") as file, np.load(file, allow_pickle=False) as archive:
                arrays = {name: archive[name] for name in archive.files}
            stored, seal = str(arrays.pop("digest")), str(arrays.pop("seal"))
        except FileNotFoundError:
            return None
        except Exception:
            # Damage shows in whatever way the bytes happen to fail: the remedy is always the same.
            self.damaged.append(key)
            return None
        if seal != _seal(stored, arrays):
            self.damaged.append(key)
            return None
        if stored != fingerprint:
            self.outdated.append(key)
            return None
        return arrays

    def put(self, key: str, fingerprint: str, arrays: Arrays) -> None:
        """Write the piece."""
        marks = {"digest": np.array(fingerprint), "seal": np.array(_seal(fingerprint, arrays))}

        def write(path: Path) -> None:
            with open(path, "wb") as file:
                np.savez(file, **marks, **arrays)  # type: ignore[arg-type]

        write_aside(self.path(key), write)

    def tell_redone(self, progress: Progress) -> None:
        """Say which pieces of an earlier run were made again, and why."""
        for keys, state in (
            (self.outdated, "out of date (an input, a setting or a version has changed)"),
            (self.damaged, "damaged"),
        ):
            if keys:
                progress.say(f"Made again because {state}: {_by_folder(keys)}.")


def _seal(fingerprint: str, arrays: Arrays) -> str:
    whole = hashlib.sha256(fingerprint.encode())
    for name in sorted(arrays):
        array = np.ascontiguousarray(arrays[name])
        whole.update(f"\x1e{name}\x1e{array.dtype.str}\x1e{array.shape}\x1e".encode())
        whole.update(array.tobytes())
    return whole.hexdigest()


def _by_folder(keys: Iterable[str]) -> str:
    """Return how many pieces of which variant, such as ``12 of v1, 3 of v2, inspection``."""
    counts = Counter(key.rpartition("/")[0] for key in keys)
    alone = [key for key in keys if "/" not in key]
    return ", ".join([f"{n} of {folder}" for folder, n in counts.items() if folder] + alone)


_held: ContextVar[frozenset[Path]] = ContextVar("held run folders", default=frozenset())


@contextlib.contextmanager
def locked(folder: Path) -> Iterator[None]:
    """Hold the run folder for this run; what it calls in turn may hold it again.

    What an earlier run left unfinished is removed.

    Raises
    ------
    InputError
        If the folder cannot be written or another run holds it.
    """
    import fcntl

    if folder.resolve() in _held.get():
        yield
        return
    try:
        folder.mkdir(parents=True, exist_ok=True)
        lock = open(folder / ".lock", "w")  # noqa: SIM115 - held until the end of the block
    except OSError as error:
        raise InputError(
            f"cannot write there ({error.strerror}); choose another folder with --out",
            where=str(folder),
        ) from error
    with lock:
        try:
            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            raise InputError(
                "another run is writing to this folder; wait for it or choose another with --out",
                where=str(folder),
            ) from None
        for left_over in folder.rglob(f"{ASIDE}*"):
            left_over.unlink(missing_ok=True)
        before = _held.set(_held.get() | {folder.resolve()})
        try:
            yield
        finally:
            _held.reset(before)


def save_judgement(judgement: Judgement, case: Case, folder: Path) -> None:
    """Write the tables as CSV, ``verdict.json`` and a copy of the case's files."""
    for name in TABLES:
        table: pd.DataFrame = getattr(judgement, name)
        write_aside(
            folder / f"{name}.csv",
            lambda path, table=table: table.to_csv(  # type: ignore[misc]
                path, index=False, float_format="%.10g", lineterminator="\n"
            ),
        )
    document = {
        "format": 1,
        **judgement.meta,
        "claims": _records(judgement.claims),
        "variants": _records(judgement.variants),
        "checks": _records(judgement.checks),
        "priors": _records(judgement.parameters),
        "findings": _records(judgement.findings),
        "equations": judgement.equations,
    }
    text = json.dumps(document, indent=1, ensure_ascii=False, allow_nan=False) + "\n"
    write_aside(folder / "verdict.json", lambda path: _write_text(path, text))
    for name in case.hashes:
        content = (case.folder / name).read_bytes()
        write_aside(folder / "case" / name, lambda path, c=content: _write_bytes(path, c))  # type: ignore[misc]


def _write_text(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8", newline="\n")


def _write_bytes(path: Path, content: bytes) -> None:
    path.write_bytes(content)


def _records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows with NaN as null and infinities as text, which JSON cannot hold."""
    rows = table.to_dict("records")
    return [{str(key): _plain(value) for key, value in row.items()} for row in rows]


def _plain(value: Any) -> Any:
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float):
        if np.isnan(value):
            return None
        if np.isinf(value):
            return "inf" if value > 0 else "-inf"
        return float(f"{value:.10g}")
    return value


def load_judgement(folder: Path) -> tuple[Judgement, Case]:
    """Read a finished run back from its folder.

    Raises
    ------
    InputError
        If the folder holds no finished run.
    """
    try:
        document = json.loads((folder / "verdict.json").read_text(encoding="utf-8"))
        text = {"variant", "edges", "choices", "decisive_check", "reason", "flags", "contains"}
        text |= {"condition", "readout", "replicate", "check", "subject", "message", "remedy"}
        text |= {"claim", "text", "statement", "also", "variants_with", "variants_without"}
        text |= {"variants_with_kept", "variants_without_kept", "kind", "unit", "prior"}
        tables = {}
        for name in TABLES:
            header = pd.read_csv(folder / f"{name}.csv", nrows=0).columns
            table = pd.read_csv(
                folder / f"{name}.csv",
                dtype={c: str for c in header if c in text and not _is_number(name, c)},
                keep_default_na=False,
                na_values={c: [""] for c in header if c not in text or _is_number(name, c)},
            )
            tables[name] = table
    except (OSError, ValueError, KeyError) as error:
        raise InputError(
            f"holds no finished run ({error}); give the folder that `ruleout judge` wrote",
            where=str(folder),
        ) from error
    tabular = {"format", "claims", "variants", "checks", "priors", "findings", "equations"}
    meta = {key: value for key, value in document.items() if key not in tabular}
    judgement = Judgement(**tables, equations=document["equations"], meta=meta)
    return judgement, read_case(folder / "case")


def _is_number(table: str, column: str) -> bool:
    """Whether a column that elsewhere holds text holds numbers in this table."""
    return (table, column) in (("replicates", "replicate"), ("quantiles", "prior"))
