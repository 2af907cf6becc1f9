"""The words, signs and number formats that every output shares."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any, Final

if TYPE_CHECKING:
    import pandas as pd

    from ruleout.experiments.types import Experiments

VERDICTS: Final[Mapping[str, str]] = {
    "kept": "kept",
    "not_judged": "not judged",
    "ruled_out": "ruled out",
}
"""Words for a variant's verdict, in the order in which tables list them."""

CLAIM_VERDICTS: Final[Mapping[str, str]] = {
    "needed": "needed",
    "excluded": "excluded",
    "not_needed": "not shown to be needed",
    "undecided": "undecided",
    "nothing_fits": "nothing fits",
}

CHECKS: Final[Mapping[str, str]] = {
    "misfit": "size of the residuals",
    "serial": "runs in the residuals",
    "peak": "error in the height of the peak",
    "final": "error at the end",
    "above": "how far data lie above the fit",
    "below": "how far data lie below the fit",
    "held_out": "misfit of the held-out data",
}
"""What each kind of check looks at."""

FAILURES: Final[Mapping[str, str]] = {
    "misfit": "size",
    "serial": "runs",
    "peak": "peak",
    "final": "end",
    "above": "fit too low",
    "below": "fit too high",
}
"""A word or two for a check that fails in a panel."""

KEPT_MEANS: Final = (
    "'Kept' means not ruled out by these data. It does not mean proven: another experiment may "
    "still rule it out, and mechanisms that were not on the list were not judged."
)

DOSING_CAUTION: Final = (
    "This case gives doses. Its verdicts are about the wiring of a model, for research; they are "
    "no basis for choosing a dose or a treatment for anybody."
)


def looks_like_dosing(experiments: Experiments) -> bool:
    """Whether any condition adds amounts to a node, as doses do."""
    return any(condition.add for condition in experiments.conditions.values())


def p_text(p: float) -> str:
    """Return a p-value to two significant digits, or a dash where there is none."""
    if p is None or math.isnan(p):
        return "–"
    return f"{p:.2f}" if p >= 0.095 else f"{p:.2g}"


def number_text(value: float, digits: int = 3) -> str:
    """Return a number to some significant digits, or a dash where there is none."""
    return "–" if value is None or math.isnan(value) else f"{value:.{digits}g}"


def why(row: Mapping[str, Any]) -> str:
    """Return the reason for a variant's verdict, also where no check decided it."""
    if row["reason"] or row["verdict"] != "kept":
        return str(row["reason"])
    checked = not math.isnan(row["p_value"])
    return "No check speaks against it." if checked else "Not checked on its own."


def split_names(cell: object) -> list[str]:
    """Return the names in a ``;``-separated cell, which may be empty or missing."""
    return [part for part in str(cell).split(";") if part] if isinstance(cell, str) else []


def headline(variants: pd.DataFrame) -> str:
    """Return how many variants are kept, ruled out and not judged, as a sentence."""
    counts = variants["verdict"].value_counts()
    parts = [
        f"{counts.get(verdict, 0)} {'is' if counts.get(verdict, 0) == 1 else 'are'} {words}"
        for verdict, words in reversed(list(VERDICTS.items()))
        if counts.get(verdict, 0) or verdict != "not_judged"
    ]
    total = f"{len(variants)} variants" if len(variants) != 1 else "one variant"
    return f"Of {total}, {', '.join(parts[:-1])} and {parts[-1]}."


def by_verdict(variants: pd.DataFrame) -> pd.DataFrame:
    """Return the variants table with the kept first, then not judged, then ruled out."""
    order = {verdict: rank for rank, verdict in enumerate(VERDICTS)}
    return variants.sort_values(
        "verdict", key=lambda column: column.map(order), kind="stable", ignore_index=True
    )


def check_words(check: str) -> str:
    """Return what a check's name says, in words.

    ``edge:a+b`` is the score for letting contested choices in, ``serial`` residuals that follow
    one another, ``misfit`` their size; ``KIND:CONDITION:READOUT`` looks at one series.
    """
    kind, _, rest = check.partition(":")
    if kind == "edge":
        return f"gain of fit by letting {rest.replace('+', ' and ')} in"
    condition, _, readout = rest.partition(":")
    where = f" of {readout} in {condition}" if readout else ""
    return CHECKS.get(kind, kind) + where
