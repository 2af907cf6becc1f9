"""A survey's tables in its folder, and back."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Final

import pandas as pd

from ruleout.errors import InputError
from ruleout.store import write_aside
from ruleout.survey.types import Survey

TABLES: Final = ("topologies", "features", "principles", "examples", "traces", "links")
FAMILY_FILE: Final = "family.toml"
_TEXT: Final = (
    "topology", "edges", "behaviour", "feature", "kind", "statement", "literals",
    "counterexample_list", "status", "parameters", "axis", "other",
)  # fmt: skip
_FLAGS: Final = ("works", "minimal")
_COUNTS: Final = (
    "n_edges", "sets", "judged", "shown", "class_size", "in_working", "working", "in_all", "all",
    "covered", "counterexamples", "covered_sets", "showing_sets", "set", "line",
)  # fmt: skip


def save_survey(survey: Survey, family_file: Path, folder: Path) -> None:
    """Write the tables as CSV, ``survey.json`` and a copy of the family file."""
    for name in TABLES:
        table: pd.DataFrame = getattr(survey, name)

        def write(path: Path, table: pd.DataFrame = table) -> None:
            table.to_csv(path, index=False, lineterminator="\n")

        write_aside(folder / f"{name}.csv", write)
    text = json.dumps({"format": 1, **survey.meta}, indent=1, ensure_ascii=False) + "\n"
    write_aside(folder / "survey.json", lambda path: _write(path, text.encode()))
    content = family_file.read_bytes()
    write_aside(folder / FAMILY_FILE, lambda path: _write(path, content))


def _write(path: Path, content: bytes) -> None:
    path.write_bytes(content)


def load_survey(folder: Path) -> Survey:
    """Read a finished survey back from its folder.

    Raises
    ------
    InputError
        If the folder holds no finished survey.
    """
    try:
        meta = json.loads((folder / "survey.json").read_text(encoding="utf-8"))
        tables = {name: _read(folder / f"{name}.csv") for name in TABLES}
    except (OSError, ValueError) as error:
        raise InputError(
            f"holds no finished survey ({error}); give the folder that `ruleout survey` wrote",
            where=str(folder),
        ) from error
    return Survey(**tables, meta={k: v for k, v in meta.items() if k != "format"})


def _read(path: Path) -> pd.DataFrame:
    """Return a table with its numbers exactly as they were written."""
    table = pd.read_csv(path, dtype=str, keep_default_na=False)
    for column in table.columns:
        if column in _FLAGS:
            table[column] = table[column] == "True"
        elif column in _COUNTS:
            table[column] = table[column].astype("int64")
        elif column not in _TEXT:
            table[column] = [float(v) if v else math.nan for v in table[column]]
    return table
