"""The run folder: finished pieces, safely written, found again, redone when out of date.

Every piece is a ``.npz`` archive under ``stages/`` that carries the digest of all it depends on.
It is written aside, flushed and renamed, so that a killed run leaves whole pieces or none; the
archive's checksums reveal a truncated or altered one. A piece whose digest no longer matches is
redone.
"""

from __future__ import annotations

import contextlib
import errno
import hashlib
import json
import os
import tempfile
import zipfile
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from ruleout.case import Case, read_case
from ruleout.errors import InputError, RuleoutError
from ruleout.verdicts.types import COLUMNS, Judgement

Arrays = Mapping[str, np.ndarray[Any, Any]]
TABLES = tuple(COLUMNS)


def digest(*parts: object) -> str:
    """Return a SHA-256 over the representations of ``parts``."""
    whole = hashlib.sha256()
    for part in parts:
        whole.update(repr(part).encode())
        whole.update(b"\x1e")
    return whole.hexdigest()


def write_aside(path: Path, write: Callable[[Path], None]) -> None:
    """Call ``write`` on a temporary file beside ``path``, flush it and rename it there.

    Raises
    ------
    RuleoutError
        If the disk is full or the folder cannot be written; what stood at ``path`` stays.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.stem}-", suffix=path.suffix)
    os.close(handle)
    aside = Path(name)
    try:
        write(aside)
        with open(aside, "rb") as file:
            os.fsync(file.fileno())
        aside.chmod(0o644)
        aside.replace(path)
    except OSError as error:
        if error.errno in (errno.ENOSPC, errno.EFBIG, errno.EDQUOT):
            raise RuleoutError(
                f"no room left to write {path.name} in {path.parent}; what was there stays valid. "
                "Free some space and run the same command again to go on"
            ) from error
        raise
    finally:
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
        path = self.path(key)
        try:
            with open(path, "rb") as file, np.load(file, allow_pickle=False) as archive:
                if str(archive["digest"]) != fingerprint:
                    self.outdated.append(key)
                    return None
                return {name: archive[name] for name in archive.files if name != "digest"}
        except FileNotFoundError:
            return None
        except (OSError, ValueError, KeyError, EOFError, zipfile.BadZipFile):
            self.damaged.append(key)
            return None

    def put(self, key: str, fingerprint: str, arrays: Arrays) -> None:
        """Write the piece."""

        def write(path: Path) -> None:
            with open(path, "wb") as file:
                np.savez(file, digest=np.array(fingerprint), **arrays)  # type: ignore[arg-type]
                file.flush()

        write_aside(self.path(key), write)


@contextlib.contextmanager
def locked(folder: Path) -> Iterator[None]:
    """Hold the run folder for this process.

    Raises
    ------
    InputError
        If the folder cannot be written or another run holds it.
    """
    import fcntl

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
        yield


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
