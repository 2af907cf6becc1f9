"""Multi-start search for the best fit, which two independent starts must agree on."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import qmc

from ruleout.fitting.descent import descend
from ruleout.fitting.observations import Sample
from ruleout.fitting.posterior import Posterior

Array = NDArray[np.float64]
AGREEMENT = 0.5
"""Two searches agree if their objectives (-2 log posterior) differ by less than this."""


@dataclass(frozen=True, slots=True)
class SearchEffort:
    """How hard to search.

    Attributes
    ----------
    screened : int
        Points of a scrambled Sobol sequence over the prior whose objective is evaluated; a power
        of two.
    starts : int
        How many of them are descended from in a round.
    rounds : int
        Further rounds, from new points, while no two starts agree on the best.
    """

    screened: int = 512
    starts: int = 20
    rounds: int = 5


@dataclass(frozen=True, slots=True, eq=False)
class Search:
    """Optima found, best first.

    Attributes
    ----------
    q : (K, D) array
    objective : (K,) array
    agree : int
        How many starts ended within ``AGREEMENT`` of the best.
    starts : int
        How many starts were descended from.
    """

    q: Array
    objective: Array
    agree: int
    starts: int

    @property
    def trusted(self) -> bool:
        """Whether at least two independent starts agree on the best optimum."""
        return self.agree >= 2 and bool(np.isfinite(self.objective[0]))


def _screen(
    posterior: Posterior, effort: SearchEffort, seed: np.random.SeedSequence, data: Sample
) -> Array:
    """Return start points: half the best of a Sobol screen, half spread over the rest."""
    space = posterior.space
    sobol = qmc.Sobol(space.dimension, rng=np.random.default_rng(seed))
    u = np.clip(sobol.random(effort.screened), 1e-4, 1.0 - 1e-4)
    # The outer 5 % tails of unbounded priors make poor starts and cost the stiffest solves.
    bounded = np.isfinite(space.low)
    q = space.quantile(np.where(bounded, u, 0.05 + 0.9 * u))
    zeta, _ = posterior.zeta(q, posterior.sampling_rtol)
    profiled = posterior.noise.profile(q, zeta, data, posterior.fitted)
    objective = posterior.objective(profiled, zeta, data)
    order = np.argsort(objective, kind="stable")
    order = order[np.isfinite(objective[order])]
    half = effort.starts // 2
    best, rest = order[:half], order[half:]
    if len(rest) > effort.starts - half:
        rest = rest[np.linspace(0, len(rest) - 1, effort.starts - half).astype(int)]
    return np.asarray(profiled[np.concatenate([best, rest])])


def search(
    posterior: Posterior,
    effort: SearchEffort,
    seed: np.random.SeedSequence,
    known: Array | None = None,
    data: Sample | None = None,
) -> Search:
    """Find the best fit of ``posterior`` to its data.

    Starts are scattered over the prior, screened, and descended from by Levenberg-Marquardt;
    rounds of new starts follow until two agree on the best objective.

    Parameters
    ----------
    posterior : Posterior
    effort : SearchEffort
    seed : SeedSequence
    known : (K, D) array, optional
        Further starts of the first round, such as a truth that the data were simulated from.
    data : Sample, optional
        One data set to fit instead of the observed one.
    """
    data = data or posterior.observed
    d = posterior.space.dimension
    if d == 0:
        zeta, _ = posterior.zeta(np.zeros((1, 0)))
        only = posterior.objective(np.zeros((1, 0)), zeta, data)
        return Search(np.zeros((1, 0)), only, 2, 1)
    ends = np.zeros((0, d))
    objectives = np.zeros(0)
    started = 0
    agree = 0
    for number, child in enumerate(seed.spawn(1 + effort.rounds)):
        starts = _screen(posterior, effort, child, data)
        if number == 0 and known is not None:
            starts = np.concatenate([known, starts])
        if len(starts):
            # A coarse descent of all, then a fine one of those that may still win.
            coarse = descend(posterior, starts, data, tolerance=0.1, iterations=25)
            order = np.argsort(coarse.objective, kind="stable")
            leading = order[: max(4, len(order) // 3)]
            fine = descend(posterior, coarse.q[leading], data, tolerance=1e-4, iterations=60)
            q, value = coarse.q.copy(), coarse.objective.copy()
            q[leading], value[leading] = fine.q, fine.objective
            started += len(starts)
            ends = np.concatenate([ends, q])
            objectives = np.concatenate([objectives, value])
        if len(objectives):
            agree = int(np.sum(objectives < objectives.min() + AGREEMENT))
        if agree >= 2:
            break
    order = np.argsort(objectives, kind="stable")[:20]
    if not len(order):
        return Search(np.full((1, d), np.nan), np.array([np.inf]), 0, started)
    return Search(ends[order], objectives[order], agree, started)
