"""What 'not needed' is worth: the chance that the plainer variant would have been ruled out."""

from __future__ import annotations

from collections.abc import Mapping
from concurrent.futures import Executor
from dataclasses import replace
from pathlib import Path

import pandas as pd

from ruleout.case import Case
from ruleout.progress import Progress
from ruleout.rehearsal.judging import Spending
from ruleout.rehearsal.run import rehearse
from ruleout.rehearsal.truths import fitted
from ruleout.rehearsal.types import Rehearsal
from ruleout.verdicts import Judgement

DATA_SETS = 40
FOLDER = "chance_seen"


def pairs(judgement: Judgement) -> dict[str, tuple[str, str]]:
    """Return for every `not_needed` claim a kept variant without it and one that adds it.

    The smallest kept variant without the claim's subject, and the smallest fitted one with it that
    contains the former.
    """
    contains = {
        row["variant"]: set(str(row["contains"]).split(";"))
        for row in judgement.variants.to_dict("records")
    }
    found = {}
    for row in judgement.claims.to_dict("records"):
        if row["verdict"] == "not_needed":
            candidates = [
                (small, large)
                for small in str(row["variants_without_kept"]).split(";")
                for large in str(row["variants_with"]).split(";")
                if small in contains.get(large, ())
            ]
            if candidates:
                found[str(row["claim"])] = candidates[0]
    return found


def chances_seen(
    case: Case,
    judgement: Judgement,
    settings: Spending,
    *,
    out: Path,
    data_sets: int = DATA_SETS,
    progress: Progress | None = None,
    executor: Executor | None = None,
) -> Judgement:
    """Return the judgement with the ``detectable`` column of its claims filled.

    For every `not_needed` claim data sets are simulated from the posterior of a variant that has
    what is not needed, at its fitted strength, and judged: the chance that the plainer variant
    would have been ruled out says whether 'not needed' could have been anything else.

    Parameters
    ----------
    case, judgement
        A case and its judgement.
    settings : Spending
    out : Path
        The run folder, where the judgement's fits are.
    data_sets : int
    progress : Progress, optional
    executor : concurrent.futures.Executor, optional
    """
    asked = pairs(judgement)
    if not asked:
        return judgement
    rehearsal = rehearse(
        case,
        settings,
        out=out / FOLDER,
        truths=sorted({large for _, large in asked.values()}),
        data_sets=data_sets,
        run=fitted(case, judgement, out),
        progress=progress,
        executor=executor,
    )
    claims = judgement.claims.assign(
        detectable=[
            _sentence(rehearsal, asked, name, old)
            for name, old in zip(
                judgement.claims["claim"], judgement.claims["detectable"], strict=True
            )
        ]
    )
    return replace(judgement, claims=claims)


def _sentence(
    rehearsal: Rehearsal, asked: Mapping[str, tuple[str, str]], claim: str, old: str
) -> str:
    if claim not in asked:
        return "" if pd.isna(old) else str(old)
    small, large = asked[claim]
    table = rehearsal.power
    row = table[(table["truth"] == large) & (table["rival"] == small)].iloc[0]
    return (
        f"{row['rate']:.2f} ({row['low']:.2f}-{row['high']:.2f}): had it been there at its fitted "
        f"strength, as in {large}, {small} would have been ruled out in {row['ruled_out']} of "
        f"{row['data_sets']} simulated data sets"
    )
