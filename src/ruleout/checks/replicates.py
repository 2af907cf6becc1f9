"""Replicated data sets, refitted as the data are, and their statistics."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ruleout.checks.edges import Anchors, Edges
from ruleout.checks.statistics import Column, Statistics
from ruleout.fitting import Posterior, Sample, descend

Array = NDArray[np.float64]
REFIT_TOLERANCE = 1e-3
REFIT_ITERATIONS = 15


@dataclass(frozen=True, slots=True, eq=False)
class Evaluated:
    """Statistics of B refits.

    Attributes
    ----------
    values : (B, C) array
        NaN rows where an integration failed.
    q : (B, D) array
        The refits.
    objective : (B,) array
    """

    values: Array
    q: Array
    objective: Array


class Checker:
    """Evaluates all statistics of one variant, for the data and for replicates alike.

    Parameters
    ----------
    posterior : Posterior
        Of the variant.
    neighbours : mapping of choice to posteriors
        Of the neighbouring variants that have the choice (see `Edges`).
    """

    def __init__(self, posterior: Posterior, neighbours: Mapping[str, Sequence[Posterior]]) -> None:
        self.posterior = posterior
        self._statistics = Statistics(posterior)
        self._edges = Edges(posterior, neighbours)
        self.columns: tuple[Column, ...] = self._edges.columns + self._statistics.columns
        self.counting: NDArray[np.intp] = np.flatnonzero([c.counts for c in self.columns])

    def anchors(self, best: Array, seed: np.random.SeedSequence) -> Anchors:
        """Return where searches of rival neighbours start, given the variant's best fit (D,)."""
        return self._edges.anchors(self.posterior, best, seed)

    def evaluate(self, q: Array, sample: Sample, uniform: Array, anchors: Anchors) -> Evaluated:
        """Refit each row's data from ``q`` and return the statistics at the refit."""
        refit = descend(
            self.posterior, q, sample, tolerance=REFIT_TOLERANCE, iterations=REFIT_ITERATIONS
        )
        zeta, _ = self.posterior.zeta(refit.q)
        edges = self._edges(refit.q, refit.objective, sample, anchors)
        others = self._statistics(refit.q, zeta, sample, uniform)
        values = np.concatenate([edges, others], axis=1)
        values[~np.isfinite(refit.objective)] = np.nan
        return Evaluated(values, refit.q, refit.objective)

    def observed(self, q: Array, seed: np.random.SeedSequence, anchors: Anchors) -> Evaluated:
        """Return the statistics of the data, refitted from the best fit ``q`` (D,)."""
        sample = self.posterior.observed
        uniform = np.random.default_rng(seed).uniform(size=sample.z.shape)
        return self.evaluate(q[None], sample, uniform, anchors)

    def replicated(
        self, draws: Array, seeds: Sequence[np.random.SeedSequence], anchors: Anchors
    ) -> Evaluated:
        """Return the statistics of one replicate per posterior draw, each on its own stream.

        Parameters
        ----------
        draws : (B, D) array
        seeds : B seed sequences
        anchors : mapping
            As for the data.
        """
        generators = [np.random.default_rng(seed) for seed in seeds]
        zeta, _ = self.posterior.zeta(draws)
        good = np.isfinite(zeta).all(axis=1)
        values = np.full((len(draws), len(self.columns)), np.nan)
        q, objective = draws.copy(), np.full(len(draws), np.inf)
        at = np.flatnonzero(good)
        if len(at):
            chosen = [generators[i] for i in at]
            sample = self.posterior.noise.draw(draws[at], zeta[at], self.posterior.observed, chosen)
            uniform = np.stack([g.uniform(size=zeta.shape[1]) for g in chosen])
            found = self.evaluate(draws[at], sample, uniform, anchors)
            values[at], q[at], objective[at] = found.values, found.q, found.objective
        return Evaluated(values, q, objective)
