"""What was concluded from simulated data, as arrays, and how often it was right."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Final

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from ruleout.pipeline.variants import Settled
from ruleout.variants import VariantSet
from ruleout.verdicts import CLAIM_VERDICTS, KEPT, NOT_JUDGED, RULED_OUT

VERDICTS: Final = (KEPT, RULED_OUT, NOT_JUDGED)
Arrays = dict[str, NDArray[np.generic]]


def outcome(settled: Settled) -> Arrays:
    """Return the verdicts on one data set as arrays.

    Returns
    -------
    dict
        ``verdict`` (V,) int8 codes of ``VERDICTS``, ``p_value`` (V,), ``claim`` (C,) int8 codes of
        ``CLAIM_VERDICTS``, ``contains`` (V, V) bool: whether the variant of the row contains that
        of the column, no effect confirmed to be within reach; variants and claims in their order.
    """
    contains = [[b in settled.contains[a] for b in settled.order] for a in settled.order]
    verdicts = [settled.verdicts[name] for name in settled.order]
    return {
        "verdict": np.array([VERDICTS.index(v.verdict) for v in verdicts], dtype=np.int8),
        "p_value": np.array([v.p_value for v in verdicts]),
        "claim": np.array([CLAIM_VERDICTS.index(c.verdict) for c in settled.claims], dtype=np.int8),
        "contains": np.array(contains, dtype=bool),
    }


def hold_truth(variants: VariantSet, truth: str) -> NDArray[np.bool_]:
    """Return which variants are the true one or contain it in structure, (V,)."""
    return np.array(
        [name == truth or truth in variants.contains[name] for name in variants.variants]
    )


def wrong_statements(
    variants: VariantSet,
    truth: str,
    verdict: NDArray[np.int8],
    claim: NDArray[np.int8],
    contains: NDArray[np.bool_],
) -> NDArray[np.bool_]:
    """Return on which data sets anything asserted is wrong.

    Wrong is: a variant that is or contains the truth ruled out (where its priors allow the added
    choices to have no effect; else it is a rival); a claim `needed` that does not
    hold in the truth, or `excluded` that does; `nothing_fits`, as the truth is among the variants.

    Parameters
    ----------
    verdict : (N, V) int8 array of codes of ``VERDICTS``
    claim : (N, C) int8 array of codes of ``CLAIM_VERDICTS``
    contains : (N, V, V) bool array
        As found on every data set.
    """
    at = list(variants.variants).index(truth)
    mistaken = contains[:, :, at].copy()
    mistaken[:, at] = True
    wrong = np.any((verdict == VERDICTS.index(RULED_OUT)) & mistaken, axis=1)
    holds = np.array([truth in c.holds_in for c in variants.claims], dtype=bool)
    needed, excluded, nothing = (
        claim == CLAIM_VERDICTS.index(word) for word in ("needed", "excluded", "nothing_fits")
    )
    return np.asarray(
        wrong
        | np.any(needed & ~holds, axis=1)
        | np.any(excluded & holds, axis=1)
        | np.any(nothing, axis=1)
    )


def binomial_interval(count: int, total: int, level: float = 0.95) -> tuple[float, float]:
    """Return the Clopper-Pearson interval of a rate; (0, 1) when nothing was counted.

    References
    ----------
    .. [1] C. J. Clopper, E. S. Pearson, Biometrika 26 (1934) 404, doi:10.1093/biomet/26.4.404.
    """
    tail = (1 - level) / 2
    low = float(stats.beta.ppf(tail, count, total - count + 1)) if count else 0.0
    high = float(stats.beta.ppf(1 - tail, count + 1, total - count)) if count < total else 1.0
    return low, high


def known_everywhere(
    variants: VariantSet, values: Mapping[str, float]
) -> dict[str, tuple[Mapping[str, float], ...]]:
    """Return ``values`` as the one start of every variant's search."""
    return dict.fromkeys(variants.variants, (values,))
