"""Linear combinations of states that no parameter value lets move (moieties)."""

from __future__ import annotations

import numpy as np

from ruleout.expressions import evaluate
from ruleout.kernel.lowering import Lowered
from ruleout.kernel.types import Array


def conserved_totals(lowered: Lowered) -> tuple[Array, tuple[int, ...]]:
    """Return the conserved totals of a system in reduced echelon form.

    Parameters
    ----------
    lowered : Lowered

    Returns
    -------
    weights : (K, N) array
        ``weights @ y`` is constant along every solution. Row k has a one at ``pivots[k]``, where
        the other rows have zeros.
    pivots : tuple of int, length K

    Notes
    -----
    The totals are the null space of right-hand sides sampled at random positive states and
    parameters. An accidental total would need all samples to lie on one hyperplane.
    """
    n = len(lowered.states)
    rng = np.random.default_rng(20230627)
    samples = 3 * n + 8
    names = (*lowered.states, *lowered.parameters)
    values = {name: np.exp(rng.uniform(-0.7, 0.7, samples)) for name in names}
    slopes = np.empty((samples, n))
    for i, value in enumerate(evaluate(lowered.rhs, values)):
        slopes[:, i] = value
    slopes = slopes[np.isfinite(slopes).all(axis=1)]
    if n == 0 or len(slopes) < n + 1:
        return np.empty((0, n)), ()
    _, singular, directions = np.linalg.svd(slopes)
    rank = int(np.sum(singular > 1e-11 * max(singular[0], 1.0)))
    return _echelon(directions[rank:])


def _echelon(rows: Array) -> tuple[Array, tuple[int, ...]]:
    rows = rows.copy()
    pivots: list[int] = []
    for k in range(len(rows)):
        below = np.abs(rows[k:])
        r, column = divmod(int(np.argmax(below)), rows.shape[1])
        rows[[k, k + r]] = rows[[k + r, k]]
        rows[k] /= rows[k, column]
        for other in range(len(rows)):
            if other != k:
                rows[other] -= rows[other, column] * rows[k]
        pivots.append(column)
    # Stoichiometric totals are small fractions: rounding removes the noise of the decomposition.
    rounded = np.round(rows * 5040.0) / 5040.0
    near = np.abs(rows - rounded) < 1e-9
    return np.where(near, rounded, rows), tuple(pivots)
