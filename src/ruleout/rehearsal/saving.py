"""A rehearsal's tables on disk."""

from __future__ import annotations

import json
from pathlib import Path

from ruleout.rehearsal.types import COLUMNS, Rehearsal
from ruleout.store import write_aside


def save_rehearsal(rehearsal: Rehearsal, folder: Path) -> None:
    """Write ``size.csv``, ``power.csv``, ``claims.csv`` and ``rehearsal.json``."""
    for name in COLUMNS:
        text = getattr(rehearsal, name).to_csv(
            index=False, float_format="%.10g", lineterminator="\n"
        )
        write_aside(folder / f"{name}.csv", lambda path, t=text: _write(path, t))  # type: ignore[misc]
    record = json.dumps(dict(rehearsal.meta), indent=1, ensure_ascii=False) + "\n"
    write_aside(folder / "rehearsal.json", lambda path: _write(path, record))


def _write(path: Path, text: str) -> None:
    path.write_text(text, encoding="utf-8", newline="\n")
