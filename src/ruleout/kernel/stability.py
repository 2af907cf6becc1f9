"""Stability of steady states from their Jacobians."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from ruleout.kernel.types import Array


def are_stable(jacobians: Array, totals: Array) -> NDArray[np.bool_]:
    """Whether all eigenvalues outside the conserved directions have negative real part.

    Parameters
    ----------
    jacobians : (R, N, N) array
    totals : (K, N) array
        Conserved totals: ``totals @ jacobian`` is zero.

    Returns
    -------
    (R,) bool array
        False where a Jacobian is not finite.

    Notes
    -----
    The Jacobian maps into the states that leave the totals unchanged, so its eigenvalues there
    are those of its restriction to an orthonormal basis of them. Up to three dimensions the
    Routh-Hurwitz conditions are used, beyond that eigenvalues.
    """
    stable = np.zeros(len(jacobians), dtype=bool)
    finite = np.isfinite(jacobians).all(axis=(1, 2))
    if not finite.any():
        return stable
    moving = jacobians[finite]
    if len(totals):
        basis = np.linalg.svd(totals)[2][len(totals) :]
        moving = basis @ moving @ basis.T
    n = moving.shape[1]
    if n == 0:
        stable[finite] = True
    elif n <= 3:
        stable[finite] = _routh_hurwitz(moving)
    else:
        stable[finite] = np.linalg.eigvals(moving).real.max(axis=1) < 0.0
    return stable


def _routh_hurwitz(a: Array) -> NDArray[np.bool_]:
    n = a.shape[1]
    trace = np.trace(a, axis1=1, axis2=2)
    if n == 1:
        return np.asarray(trace < 0.0)
    determinant = np.linalg.det(a)
    if n == 2:
        return np.asarray((trace < 0.0) & (determinant > 0.0))
    minors = 0.5 * (trace**2 - np.trace(a @ a, axis1=1, axis2=2))
    return np.asarray((trace < 0.0) & (determinant < 0.0) & (trace * minors < determinant))
