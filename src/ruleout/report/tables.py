"""Rows of the judgement's tables as plain mappings."""

from __future__ import annotations

from typing import Any

import pandas as pd

from ruleout.verdicts.types import Judgement


def records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a table as dictionaries by column."""
    return [dict(zip(table.columns, row, strict=True)) for row in table.itertuples(index=False)]


def variant_row(judgement: Judgement, variant: str) -> dict[str, Any]:
    """Return a variant's row of the variants table."""
    (row,) = records(judgement.variants[judgement.variants["variant"] == variant])
    return row
