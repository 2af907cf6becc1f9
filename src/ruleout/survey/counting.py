"""Exact binomial intervals."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


def exact_interval(shown: ArrayLike, judged: ArrayLike, level: float) -> tuple[Array, Array]:
    """Return the two-sided exact interval of a proportion.

    The interval of Clopper and Pearson (Biometrika 26 (1934) 404-413,
    doi:10.1093/biomet/26.4.404); (0, 1) where nothing was judged.

    Parameters
    ----------
    shown, judged : array_like of int
    level : float
    """
    from scipy.stats import beta

    k, n = np.broadcast_arrays(np.asarray(shown, float), np.asarray(judged, float))
    tail = (1.0 - level) / 2.0
    with np.errstate(invalid="ignore"):
        low = np.where(k > 0, beta.ppf(tail, np.maximum(k, 1), n - k + 1), 0.0)
        high = np.where(k < n, beta.ppf(1.0 - tail, k + 1, np.maximum(n - k, 1)), 1.0)
    return low, high


def upper_bound(shown: ArrayLike, judged: ArrayLike, level: float) -> Array:
    """Return the one-sided exact upper bound of a proportion; 1 where nothing was judged."""
    from scipy.stats import beta

    k, n = np.broadcast_arrays(np.asarray(shown, float), np.asarray(judged, float))
    return np.where(k < n, beta.ppf(level, k + 1, np.maximum(n - k, 1)), 1.0)
