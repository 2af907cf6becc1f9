"""From many statistics to one p-value: max-T and its sequential Monte Carlo decision."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from ruleout.checks.statistics import Column

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Standard:
    """Fixed location and spread of every counting column, from pilot replicates of their own.

    Because they are drawn apart from the replicates that decide, data and deciding replicates stay
    exchangeable whatever the pilot gave.
    """

    location: Array
    spread: Array


def transform(values: Array, columns: tuple[Column, ...]) -> Array:
    """Return the values as they are compared: cube roots where a column is ``rooted``."""
    rooted = np.array([c.rooted for c in columns], dtype=bool)
    return np.where(rooted, np.cbrt(values), values)


def standardise(pilot: Array, columns: tuple[Column, ...]) -> Standard:
    """Return the standard of the counting ``columns`` from pilot values (P, C)."""
    compared = transform(pilot, columns)
    floor = np.array([c.narrowest for c in columns])
    return Standard(compared.mean(axis=0), np.maximum(compared.std(axis=0, ddof=1), floor))


def maximum(values: Array, columns: tuple[Column, ...], standard: Standard) -> Array:
    """Return the largest standardised statistic per row, (B, C) -> (B,)."""
    return np.asarray(np.max(standardised(values, columns, standard), axis=1))


def standardised(values: Array, columns: tuple[Column, ...], standard: Standard) -> Array:
    """Return standardised statistics, (B, C)."""
    return (transform(values, columns) - standard.location) / standard.spread


SOONEST = 39
"""Fewest replicates behind a decision to keep."""


@lru_cache(maxsize=8)
def boundaries(alpha: float, most: int, risk: float = 1e-3) -> tuple[NDArray[np.intp], ...]:
    """Return lower and upper stopping bounds on the count of exceedances, each (most + 1,).

    After n replicates, a count of at least ``upper[n]`` decides p > alpha and one of at most
    ``lower[n]`` decides p <= alpha; either is wrong with a probability of at most ``risk``,
    spent as ``risk * n / (n + 1000)``.

    References
    ----------
    .. [1] A. Gandy, J. Am. Stat. Assoc. 104 (2009) 1504, doi:10.1198/jasa.2009.tm08368.
    """
    upper = np.full(most + 1, most + 2, dtype=np.intp)
    lower = np.full(most + 1, -1, dtype=np.intp)
    # Distribution of the count among paths that have not stopped, from `base` on.
    base, mass = 0, np.array([1.0])
    spent_up = spent_down = 0.0
    for n in range(1, most + 1):
        grown = np.zeros(len(mass) + 1)
        grown[:-1] += mass * (1.0 - alpha)
        grown[1:] += mass * alpha
        allowed = risk * n / (n + 1000.0)
        tail = np.cumsum(grown[::-1])[::-1]
        over = np.flatnonzero(tail + spent_up <= allowed)
        cut_up = over[0] if len(over) else len(grown)
        head = np.cumsum(grown)
        under = np.flatnonzero(head + spent_down <= allowed)
        cut_down = under[-1] + 1 if len(under) else 0
        upper[n], lower[n] = base + cut_up, base + cut_down - 1
        spent_up += float(grown[cut_up:].sum())
        spent_down += float(grown[:cut_down].sum())
        base, mass = base + cut_down, grown[cut_down:cut_up]
    return lower, upper


@dataclass(frozen=True, slots=True)
class Tally:
    """How many replicates are at least as extreme as the data, and what that decides.

    Attributes
    ----------
    exceedances, replicates : int
    decided : bool
        The resampling risk of the decision is within bounds.
    """

    exceedances: int
    replicates: int
    decided: bool

    @property
    def p_value(self) -> float:
        """(exceedances + 1) / (replicates + 1)."""
        return (self.exceedances + 1) / (self.replicates + 1)

    def interval(self, level: float = 0.99) -> tuple[float, float]:
        """Return the exact (Clopper-Pearson) Monte Carlo interval of the p-value."""
        k, n = self.exceedances, self.replicates
        tail = (1 - level) / 2
        low = float(stats.beta.ppf(tail, k, n - k + 1)) if k else 0.0
        high = float(stats.beta.ppf(1 - tail, k + 1, n - k)) if k < n else 1.0
        return low, high


def tally(exceeds: NDArray[np.bool_], alpha: float, least: int, most: int) -> Tally | None:
    """Return the decision after these replicates, or None if more are needed.

    Walks through the replicates in their order and stops at the first bound, so that the answer
    does not depend on how many were computed ahead. A decision against the variant is not taken
    before ``least`` replicates, nor one for it before ``SOONEST``, so that p-values have a
    resolution.
    """
    lower, upper = boundaries(alpha, most)
    counts = np.cumsum(exceeds)
    for n, count in enumerate(counts[:most], start=1):
        if n >= min(SOONEST, most) and count >= upper[n]:
            return Tally(int(count), n, decided=True)
        if n >= least and count <= lower[n]:
            return Tally(int(count), n, decided=True)
    if len(counts) >= most:
        return Tally(int(counts[most - 1]), most, decided=False)
    return None
