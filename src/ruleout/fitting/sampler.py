"""MCMC by emcee: independent ensembles, each with a random state of its own, in blocks.

Moves: differential evolution with its standard step 2.38/sqrt(2D), and a tenth of the time with a
unit step, which hops between modes [1]_. Walkers of one ensemble help each other move and are
therefore not independent; what is independent are the ensembles.

References
----------
.. [1] C. J. F. ter Braak, Stat. Comput. 16 (2006) 239, doi:10.1007/s11222-006-8769-1.
.. [2] D. Foreman-Mackey et al., PASP 125 (2013) 306, doi:10.1086/670067.
"""

from __future__ import annotations

from dataclasses import dataclass

import emcee
import numpy as np
from numpy.typing import NDArray

from ruleout.fitting.posterior import Posterior
from ruleout.fitting.search import Search

Array = NDArray[np.float64]
OVERDISPERSION = 1.5
"""Ratio of the spread of starting walkers to that of the local normal approximation."""
FAILURES_KEPT = 40
"""Failed evaluations of a block whose place is remembered."""


def walkers_for(dimension: int) -> int:
    """Return the number of walkers of an ensemble: at least 64 and at least 2 D + 2, even.

    Below some 64 rows the cost of an iteration is that of the call, whatever the number of rows.
    """
    return max(64, 2 * dimension + 2)


@dataclass(frozen=True, slots=True, eq=False)
class Walkers:
    """State of one ensemble between blocks.

    Attributes
    ----------
    q : (W, D) array
    log_density : (W,) array
    key : (624,) uint32 array
    tail : (3,) array
        With ``key`` the random state of numpy's MT19937: position, whether a normal deviate is
        cached, and that deviate.
    """

    q: Array
    log_density: Array
    key: NDArray[np.uint32]
    tail: Array


@dataclass(frozen=True, slots=True, eq=False)
class Block:
    """A stretch of one ensemble's chain.

    Attributes
    ----------
    chain : (S, W, D) array
    log_density : (S, W) array
    walkers : Walkers
        To go on from.
    solved, failed : int
        Evaluations inside the priors, and those whose integration failed.
    failed_at : (F, D) array
        Where the first of those were, at most ``FAILURES_KEPT``.
    """

    chain: Array
    log_density: Array
    walkers: Walkers
    solved: int
    failed: int
    failed_at: Array


class _DifferentialEvolution(emcee.moves.DEMove):  # type: ignore[misc]
    """emcee's differential evolution with all walkers of a half accepted in one operation.

    The move as shipped decides walker by walker in Python, which costs as much as the solves.
    """

    def propose(
        self, model: emcee.model.Model, state: emcee.State
    ) -> tuple[emcee.State, NDArray[np.bool_]]:
        count = len(state.coords)
        self.setup(state.coords)
        accepted = np.zeros(count, dtype=bool)
        order = model.random.permutation(count)
        halves = np.sort(order[: count // 2]), np.sort(order[count // 2 :])
        for mine, others in (halves, halves[::-1]):
            q, _ = self.get_proposal(state.coords[mine], [state.coords[others]], model.random)
            value, _ = model.compute_log_prob_fn(q)
            gain = value - state.log_prob[mine]
            better = gain > np.log(model.random.random_sample(len(mine)))
            taken = mine[better]
            state.coords[taken] = q[better]
            state.log_prob[taken] = value[better]
            accepted[taken] = True
        return state, accepted


class _Density:
    """Log density with counts of solves; NaN-free for emcee."""

    def __init__(self, posterior: Posterior) -> None:
        self.posterior = posterior
        self.solved = 0
        self.failed = 0
        self.failed_at = np.zeros((0, posterior.space.dimension))

    def __call__(self, q: Array) -> Array:
        value, failed = self.posterior.log_density(q)
        self.solved += int(np.isfinite(value).sum() + failed.sum())
        self.failed += int(failed.sum())
        if failed.any() and len(self.failed_at) < FAILURES_KEPT:
            self.failed_at = np.concatenate([self.failed_at, q[failed]])[:FAILURES_KEPT]
        return value


def start_walkers(posterior: Posterior, found: Search, seed: np.random.SeedSequence) -> Walkers:
    """Return an over-dispersed start of one ensemble around the optima found.

    Walkers are drawn from normal approximations at the optima within 6 of the best objective,
    widened and kept inside the priors.
    """
    rng = np.random.default_rng(seed)
    space = posterior.space
    count = walkers_for(space.dimension)
    near = found.objective < found.objective[0] + 6.0
    modes = found.q[near][: max(1, count // 8)]
    curvature = posterior.quadratic(modes, posterior.observed).curvature
    roots = [_root_of_inverse(c, space.width) for c in curvature]
    density = _Density(posterior)
    q = np.empty((count, space.dimension))
    value = np.full(count, -np.inf)
    # Far along a curved ridge the normal approximation leaves the posterior altogether; walkers
    # started there would spend the whole run on the way back.
    lowest = -0.5 * found.objective[0] - (10.0 + 4.0 * space.dimension)
    for attempt in range(60):
        todo = np.flatnonzero(~(value > lowest))
        if not len(todo):
            break
        shrink = OVERDISPERSION * 0.85**attempt
        for w in todo:
            mode = w % len(modes)
            jump = roots[mode] @ rng.standard_normal(space.dimension)
            q[w] = _reflect(modes[mode] + shrink * jump, space.low, space.high)
        value[todo] = density(q[todo])
    _, key, *tail = np.random.RandomState(np.random.MT19937(seed.spawn(1)[0])).get_state(
        legacy=True
    )
    return Walkers(q, value, np.asarray(key), np.array(tail, dtype=np.float64))


def _root_of_inverse(curvature: Array, width: Array) -> Array:
    """Return a square root of the covariance, with directions no wider than the priors."""
    scaled = curvature * np.outer(width, width)
    values, vectors = np.linalg.eigh(scaled)
    return np.asarray(width[:, None] * vectors / np.sqrt(np.maximum(values, 1.0)))


def _reflect(q: Array, low: Array, high: Array) -> Array:
    with np.errstate(invalid="ignore"):
        q = np.where(q < low, 2 * low - q, q)
        q = np.where(q > high, 2 * high - q, q)
        span = high - low
        edge = 1e-6 * np.where(np.isfinite(span), span, 0.0)
        return np.clip(q, low + edge, high - edge)


def run_block(posterior: Posterior, walkers: Walkers, stored: int, thin: int) -> Block:
    """Advance one ensemble by ``stored * thin`` iterations, keeping every ``thin``-th.

    The answer depends on ``walkers`` alone (their random state included), never on numpy's global
    generator.
    """
    density = _Density(posterior)
    count, dimension = walkers.q.shape
    sampler = emcee.EnsembleSampler(
        count,
        dimension,
        density,
        moves=[(_DifferentialEvolution(), 0.9), (_DifferentialEvolution(gamma0=1.0), 0.1)],
        vectorize=True,
    )
    position, cached, deviate = walkers.tail
    random_state = ("MT19937", walkers.key, int(position), int(cached), float(deviate))
    state = emcee.State(
        walkers.q, log_prob=walkers.log_density, random_state=random_state, copy=True
    )
    state = sampler.run_mcmc(state, stored, thin_by=thin, skip_initial_state_check=True)
    _, key, *tail = state.random_state
    after = Walkers(state.coords, state.log_prob, np.asarray(key), np.array(tail, dtype=float))
    return Block(
        sampler.get_chain(),
        sampler.get_log_prob(),
        after,
        density.solved,
        density.failed,
        density.failed_at,
    )
