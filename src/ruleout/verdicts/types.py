"""The result of judging a case: tables, and what is needed to explain them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import pandas as pd

COLUMNS: Mapping[str, tuple[str, ...]] = {
    # One row per variant. `edges`, `flags`, `contains` are ;-separated.
    "variants": (
        "variant",
        "edges",
        "choices",
        "free_parameters",
        "p_value",
        "p_coherent",
        "held_out_p",
        "verdict",
        "decisive_check",
        "reason",
        "flags",
        "points",
        "objective",
        "loo_difference",
        "loo_se",
        "rhat_max",
        "ess_min",
        "searches_agree",
        "contains",
        "replicates",
    ),
    "claims": (
        "claim",
        "text",
        "verdict",
        "variants_with_kept",
        "variants_without_kept",
        "variants_with",
        "variants_without",
        "statement",
        "also",
        "detectable",
    ),
    # One row per variant and statistic; condition and readout are empty for pooled ones.
    "checks": (
        "variant",
        "check",
        "condition",
        "readout",
        "observed",
        "replicated_median",
        "band_low",
        "band_high",
        "p_value",
        "counts_for_verdict",
    ),
    # best, median and the 5 % and 95 % quantiles on the natural scale; prior as text and as its
    # 2.5 % and 97.5 % quantiles; prior_from is "file" or "default".
    "parameters": (
        "variant",
        "parameter",
        "unit",
        "kind",
        "prior",
        "prior_from",
        "prior_low",
        "prior_high",
        "best",
        "median",
        "low",
        "high",
        "rhat",
        "ess_bulk",
        "ess_tail",
    ),
    # Fitted bands (5-95 %) on a fine grid of times, without measurement noise; a steady state has
    # time inf.
    "curves": (
        "variant",
        "condition",
        "readout",
        "replicate",
        "time",
        "best",
        "median",
        "low",
        "high",
        "extrapolated",
    ),
    # One row per variant and data point; `standardized` is the whitened residual at the best fit.
    "residuals": (
        "variant",
        "condition",
        "readout",
        "replicate",
        "time",
        "value",
        "sd",
        "fitted",
        "standardized",
        "held_out",
        "censored",
    ),
    # Values of the statistics that count, one row per variant, check and replicate.
    "replicates": ("variant", "check", "replicate", "value"),
    # Quantiles of posterior and prior per free parameter, to draw marginals from.
    "quantiles": ("variant", "parameter", "level", "posterior", "prior"),
    # Warnings with remedies; variant empty where it concerns all.
    "findings": ("variant", "kind", "subject", "message", "remedy"),
}


@dataclass(frozen=True, slots=True, eq=False)
class Judgement:
    """A judged case.

    Attributes
    ----------
    variants, claims, checks, parameters, curves, residuals, replicates, quantiles, findings
        Tables with the columns of ``COLUMNS``.
    equations : mapping of variant to mapping
        ``text`` and ``latex`` (lists of equation lines), ``loops`` (list of sentences),
        ``assumptions`` (list of sentences).
    meta : mapping
        ``title``, ``time_unit``, ``amount_unit``, ``alpha``, ``seed``, ``effort``, ``settings``,
        ``versions``, ``inputs`` (file name to SHA-256), ``conditions_of_guarantee`` (sentences),
        ``summary`` (sentences for the top of a report).
    """

    variants: pd.DataFrame
    claims: pd.DataFrame
    checks: pd.DataFrame
    parameters: pd.DataFrame
    curves: pd.DataFrame
    residuals: pd.DataFrame
    replicates: pd.DataFrame
    quantiles: pd.DataFrame
    findings: pd.DataFrame
    equations: Mapping[str, Mapping[str, list[str]]]
    meta: Mapping[str, Any]

    @property
    def fully_judged(self) -> bool:
        """Whether no variant was left ``not_judged``."""
        return not (self.variants["verdict"] == "not_judged").any()
