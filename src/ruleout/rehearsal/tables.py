"""From verdicts on many simulated data sets to rates."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from ruleout.rehearsal.outcomes import (
    VERDICTS,
    binomial_interval,
    hold_truth,
    wrong_statements,
)
from ruleout.variants import VariantSet
from ruleout.verdicts import CLAIM_VERDICTS, NOT_JUDGED, RULED_OUT

Row = dict[str, Any]


def rate(count: int, total: int, prefix: str = "") -> Row:
    """Return a rate and its interval under ``rate``, ``low`` and ``high``."""
    low, high = binomial_interval(count, total)
    return {
        f"{prefix}rate": count / total if total else np.nan,
        f"{prefix}low": low,
        f"{prefix}high": high,
    }


def size_row(
    design: str,
    variants: VariantSet,
    truth: str,
    verdict: NDArray[np.int8],
    claim: NDArray[np.int8],
    contains: NDArray[np.bool_],
) -> Row:
    """Return how often the true variant was ruled out and anything said was wrong.

    Parameters
    ----------
    verdict, claim : (N, V) and (N, C) int8 arrays
        Codes of ``VERDICTS`` and ``CLAIM_VERDICTS``.
    contains : (N, V, V) bool array
    """
    n = len(verdict)
    own = verdict[:, list(variants.variants).index(truth)]
    out = int(np.sum(own == VERDICTS.index(RULED_OUT)))
    wrong = int(np.sum(wrong_statements(variants, truth, verdict, claim, contains)))
    return {
        "design": design,
        "truth": truth,
        "choices": variants.variants[truth].label,
        "data_sets": n,
        "ruled_out": out,
        **rate(out, n),
        "not_judged": int(np.sum(own == VERDICTS.index(NOT_JUDGED))),
        "wrong": wrong,
        **rate(wrong, n, "wrong_"),
    }


def power_rows(
    design: str, variants: VariantSet, truth: str, verdict: NDArray[np.int8]
) -> list[Row]:
    """Return how often each variant was ruled out when ``truth`` was true."""
    holds = hold_truth(variants, truth)
    rows = []
    for j, name in enumerate(variants.variants):
        out = int(np.sum(verdict[:, j] == VERDICTS.index(RULED_OUT)))
        rows.append(
            {
                "design": design,
                "truth": truth,
                "rival": name,
                "holds_truth": bool(holds[j]),
                "data_sets": len(verdict),
                "ruled_out": out,
                **rate(out, len(verdict)),
                "not_judged": int(np.sum(verdict[:, j] == VERDICTS.index(NOT_JUDGED))),
            }
        )
    return rows


def claim_rows(design: str, variants: VariantSet, truth: str, claim: NDArray[np.int8]) -> list[Row]:
    """Return the chance of each verdict on every claim when ``truth`` was true."""
    return [
        {
            "design": design,
            "truth": truth,
            "claim": c.name,
            "text": c.text,
            "holds": truth in c.holds_in,
            "data_sets": len(claim),
            **{
                word: float(np.mean(claim[:, j] == code))
                for code, word in enumerate(CLAIM_VERDICTS)
            },
        }
        for j, c in enumerate(variants.claims)
    ]
