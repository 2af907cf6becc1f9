"""Rows of the judgement's tables as plain mappings, and what they choose in words."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any, Final

import pandas as pd

from ruleout.report.words import split_names
from ruleout.verdicts.types import Judgement

ABSENT: Final = "absent"
PRESENT: Final = "present"


def records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Return the rows of a table as dictionaries by column."""
    return [dict(zip(table.columns, row, strict=True)) for row in table.itertuples(index=False)]


def variant_row(judgement: Judgement, variant: str) -> dict[str, Any]:
    """Return a variant's row of the variants table."""
    (row,) = records(judgement.variants[judgement.variants["variant"] == variant])
    return row


def choices_of(cell: str) -> dict[str, str]:
    """Return the choices in a cell of the variants table: contested name to option."""
    pairs = (part.partition("=") for part in split_names(cell))
    return {name: option for name, _, option in pairs}


def option_words(cells: Iterable[str]) -> dict[str, dict[str, str]]:
    """Return, for each contested name, its options and the shortest words that tell them apart.

    ``absent``; ``present`` where there is only one way to be so; else the effect or the law,
    whichever differs, or both.

    Parameters
    ----------
    cells : iterable of str
        The ``choices`` of all variants.
    """
    options: dict[str, dict[str, None]] = {}
    for cell in cells:
        for name, option in choices_of(cell).items():
            options.setdefault(name, {})[option] = None
    return {name: _shortest(list(found)) for name, found in options.items()}


def _shortest(options: list[str]) -> dict[str, str]:
    there = [option for option in options if option != ABSENT]
    parts = {option: option.partition("/") for option in there}
    effects, laws = ({part[i] for part in parts.values()} for i in (0, 2))
    words = {ABSENT: ABSENT} if ABSENT in options else {}
    for option, (effect, _, law) in parts.items():
        if len(there) == 1:
            words[option] = PRESENT
        elif len(laws) == 1:
            words[option] = effect
        else:
            words[option] = law if len(effects) == 1 else f"{effect}, {law}"
    return words


def present_parts(cell: str, words: Mapping[str, Mapping[str, str]]) -> list[str]:
    """Return the contested parts that a variant has, with the option where several are possible."""
    chosen = {name: words[name][option] for name, option in choices_of(cell).items()}
    return [
        name if word == PRESENT else f"{name} ({word})"
        for name, word in chosen.items()
        if word != ABSENT
    ]
