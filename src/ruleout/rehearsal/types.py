"""The result of a rehearsal: tables of rates with binomial intervals."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import pandas as pd

from ruleout.verdicts import CLAIM_VERDICTS

COLUMNS: Mapping[str, tuple[str, ...]] = {
    # One row per design and true variant. `wrong` counts data sets with any wrong statement in
    # the whole table; intervals are Clopper-Pearson, 95 %.
    "size": (
        "design", "truth", "choices", "data_sets", "ruled_out", "rate", "low", "high",
        "not_judged", "wrong", "wrong_rate", "wrong_low", "wrong_high",
    ),
    # One row per design, true variant and variant judged; `holds_truth` where it is the true one
    # or contains it, so that ruling it out is a mistake.
    "power": (
        "design", "truth", "rival", "holds_truth", "data_sets", "ruled_out", "rate", "low", "high",
        "not_judged",
    ),
    # One row per design, true variant and claim: how often each verdict was reached.
    "claims": ("design", "truth", "claim", "text", "holds", "data_sets", *CLAIM_VERDICTS),
}  # fmt: skip


@dataclass(frozen=True, slots=True, eq=False)
class Rehearsal:
    """What experiments like these could rule out.

    Attributes
    ----------
    size, power, claims : DataFrame
        With the columns of ``COLUMNS``.
    meta : mapping
        ``title``, ``alpha``, ``seed``, ``effort``, ``data_sets``, ``designs``, ``varied``,
        ``truths_from``, ``versions``, ``inputs``.
    """

    size: pd.DataFrame
    power: pd.DataFrame
    claims: pd.DataFrame
    meta: Mapping[str, Any]
