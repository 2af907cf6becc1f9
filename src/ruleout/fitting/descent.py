"""Batched Levenberg-Marquardt on the log posterior, noise parameters profiled.

Fisher scoring with Marquardt damping: rows advance together, each with its own damping, and stop
on their own. Uniform priors are boxes: steps are projected, and a coordinate that is pushed
against a bound is left out of the step.

References
----------
.. [1] D. W. Marquardt, J. SIAM 11 (1963) 431, doi:10.1137/0111030.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ruleout.fitting.observations import Sample
from ruleout.fitting.posterior import Posterior

Array = NDArray[np.float64]
DAMPING_START, DAMPING_MIN, DAMPING_MAX = 1e-2, 1e-7, 1e7
LARGEST_STEP = 2.5
"""Longest move of one coordinate, in prior widths or in logarithm units, whichever is less."""


@dataclass(frozen=True, slots=True, eq=False)
class Descent:
    """Where B searches ended.

    Attributes
    ----------
    q : (B, D) array
    objective : (B,) array
    converged : (B,) bool array
        The predicted decrease fell below the tolerance within the iterations allowed.
    """

    q: Array
    objective: Array
    converged: NDArray[np.bool_]


def _steps(gradient: Array, curvature: Array, damping: Array, held: NDArray[np.bool_]) -> Array:
    """Solve (C + damping diag C) step = gradient, coordinates in ``held`` left where they are.

    In units of the square roots of the diagonal the damped matrix is at least ``damping``, so that
    directions the data say nothing about cannot make it singular.
    """
    diagonal = np.einsum("bii->bi", curvature)
    root = np.sqrt(np.maximum(diagonal, 1e-12 * np.max(diagonal, axis=1, keepdims=True) + 1e-300))
    free = ~held
    scaled = curvature / (root[:, :, None] * root[:, None, :])
    scaled = np.where(free[:, :, None] & free[:, None, :], scaled, 0.0)
    scaled += np.where(held, 1.0, damping[:, None])[:, :, None] * np.eye(gradient.shape[1])
    pull = np.where(held, 0.0, gradient / root)
    return np.asarray(np.linalg.solve(scaled, pull[:, :, None])[:, :, 0] / root)


def descend(
    posterior: Posterior,
    q: Array,
    sample: Sample,
    *,
    tolerance: float = 1e-3,
    iterations: int = 30,
) -> Descent:
    """Minimise -2 log posterior from every row of ``q``.

    Parameters
    ----------
    posterior : Posterior
    q : (B, D) array
        Starting coordinates, inside the priors.
    sample : Sample
        One data set for all rows, or one per row.
    tolerance : float
        Stop when the quadratic model promises a smaller decrease of the objective.
    iterations : int
        Most derivative evaluations per row.
    """
    space = posterior.space
    q = np.clip(q, space.low, space.high)
    use = posterior.fitted
    rows = len(q)
    limit = LARGEST_STEP * np.minimum(space.width, 1.0)
    limit = np.where(space.log, limit, LARGEST_STEP * space.width)
    zeta, _ = posterior.zeta(q)
    q = posterior.noise.profile(q, zeta, sample, use)
    objective = posterior.objective(q, zeta, sample)
    converged = np.zeros(rows, dtype=bool)
    damping = np.full(rows, DAMPING_START)
    active = np.isfinite(objective)
    for _ in range(iterations):
        at = np.flatnonzero(active)
        if not len(at):
            break
        model = posterior.quadratic(q[at], sample.take(at))
        gradient, curvature = model.gradient, model.curvature
        usable = np.isfinite(curvature).all(axis=(1, 2)) & np.isfinite(gradient).all(axis=1)
        if not usable.all():
            active[at[~usable]] = False
            at, gradient, curvature = at[usable], gradient[usable], curvature[usable]
            if not len(at):
                break
        step_tolerance = 1e-9 * np.where(np.isfinite(space.low), space.high - space.low, 1.0)
        with np.errstate(invalid="ignore"):
            held = ((q[at] <= space.low + step_tolerance) & (gradient < 0)) | (
                (q[at] >= space.high - step_tolerance) & (gradient > 0)
            )
        newton = _steps(gradient, curvature, np.full(len(at), DAMPING_MIN), held)
        promised = np.einsum("bd,bd->b", newton, np.where(held, 0.0, gradient))
        done = promised < tolerance
        converged[at[done]] = True
        active[at[done]] = False
        todo = np.flatnonzero(~done)
        for _ in range(6):
            if not len(todo):
                break
            rows_now = at[todo]
            step = _steps(gradient[todo], curvature[todo], damping[rows_now], held[todo])
            shrink = np.minimum(1.0, 1.0 / np.maximum(np.max(np.abs(step) / limit, axis=1), 1e-300))
            trial = np.clip(q[rows_now] + shrink[:, None] * step, space.low, space.high)
            data = sample.take(rows_now)
            moved, _ = posterior.zeta(trial)
            trial = posterior.noise.profile(trial, moved, data, use)
            value = posterior.objective(trial, moved, data)
            better = value < objective[rows_now]
            good = rows_now[better]
            small = np.zeros(rows, dtype=bool)
            small[good] = objective[good] - value[better] < 0.1 * tolerance
            q[good] = trial[better]
            objective[good] = value[better]
            damping[good] = np.maximum(0.2 * damping[good], DAMPING_MIN)
            converged[small] = True
            active[small] = False
            bad = rows_now[~better]
            damping[bad] *= 6.0
            stuck = damping[bad] > DAMPING_MAX
            # No decrease at the shortest steps: a minimum to within the noise of the solver.
            converged[bad[stuck]] = True
            active[bad[stuck]] = False
            todo = todo[~better]
            todo = todo[active[at[todo]]]
    return Descent(q, objective, converged)
